"""Values as Python sees them: terms, equality, sympy, and a rendering for notebooks."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from spanwright.kernel import reduction
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.json import data, plain_scalar
from spanwright.rendering.scalars import PLAIN, SYMPY_TAKEN
from spanwright.rendering.tex import tex
from spanwright.rendering.text import text
from spanwright.values import (
    Definition,
    IndexSet,
    ListValue,
    Setting,
    Table,
    Text,
    Truth,
    as_scalar,
    is_element,
    is_index,
    is_number,
)


class View:
    """A value of a session, read only.

    Equality is mathematical: two views are equal when their values are, in whichever basis they
    are written; a view also equals the plain number, index or truth that it holds. Views are not
    hashable, for equal ones may be written in many ways.

    Iterating over an expansion or a polynomial gives pairs (index, coefficient), the index a
    tuple and the coefficient a View; over a list its items, over an index its parts.
    """

    __slots__ = ("raw", "_show")

    def __init__(self, raw: Any, show: str = "short") -> None:
        self.raw = raw
        self._show = show

    @property
    def basis(self) -> str | None:
        """The family of an expansion, `x` for a polynomial, None for the rest."""
        if isinstance(self.raw, Expansion):
            return self.raw.family.name
        return "x" if isinstance(self.raw, LaurentPolynomial) else None

    @property
    def terms(self) -> dict[tuple[int, ...], View]:
        """The coefficients by index, in the order shown; raises TypeError when there are none."""
        raw = self.raw
        if isinstance(raw, Expansion):
            return {tuple(raw.family.show_index(i, raw.n)): View(c, self._show)
                    for i, c in raw.items()}
        if isinstance(raw, LaurentPolynomial):
            return {tuple(e): View(c, self._show) for e, c in raw.items()}
        raise TypeError(f"{text(raw)} has no terms")

    def coefficient(self, *index: int) -> View:
        """The coefficient of one term, 0 when it does not occur."""
        return self.terms.get(index, View(0, self._show))

    @property
    def holds(self) -> bool:
        """The truth of a statement; raises TypeError when this is none."""
        if isinstance(self.raw, Truth):
            return self.raw.holds
        raise TypeError("only a statement holds or fails")

    @property
    def difference(self) -> View | None:
        """Left side minus right side of a statement that fails, where there is one."""
        if isinstance(self.raw, Truth) and self.raw.difference is not None:
            return View(self.raw.difference, self._show)
        return None

    def _items(self) -> tuple[Any, ...] | None:
        if isinstance(self.raw, ListValue):
            return tuple(View(v, self._show) for v in self.raw.items)
        return tuple(self.raw) if isinstance(self.raw, tuple | IndexSet) else None

    def __iter__(self) -> Iterator[Any]:
        items = self._items()
        return iter(self.terms.items() if items is None else items)

    def __len__(self) -> int:
        items = self._items()
        return len(self.terms if items is None else items)

    def __bool__(self) -> bool:
        """False for 0, for a statement that fails, and for an empty list."""
        if isinstance(self.raw, Truth):
            return self.raw.holds
        if isinstance(self.raw, Scalar | LaurentPolynomial | Expansion):
            return not self.raw.is_zero
        if isinstance(self.raw, ListValue | tuple | IndexSet):
            return len(self) > 0
        return not is_number(self.raw) or self.raw != 0

    def __eq__(self, other: object) -> bool:
        return _are_equal(self.raw, other.raw if isinstance(other, View) else other)

    __hash__ = None  # type: ignore[assignment]

    def __str__(self) -> str:
        return text(self.raw, self._show)

    def __repr__(self) -> str:
        return f"View({self})"

    def to_data(self) -> dict[str, Any]:
        """The value as JSON holds it."""
        return data(self.raw)

    def to_tex(self) -> str:
        """The value as TeX."""
        return tex(self.raw, self._show)

    def _repr_latex_(self) -> str | None:
        """TeX for a notebook; None for prose, whose text is better."""
        if isinstance(self.raw, Text | Definition | Setting | str):
            return None
        if isinstance(self.raw, Table):
            cells = (cell for row in self.raw.rows for cell in row)
            if any(isinstance(cell, str) for cell in cells):
                return None
        return f"$\\displaystyle {self.to_tex()}$"

    def to_sympy(self) -> Any:
        """A scalar or polynomial as a sympy expression; an expansion goes to monomials first.

        Parameters become symbols of their own names, variables the symbols x_1, ..., x_n. Raises
        TypeError for values of other kinds.
        """
        import sympy

        # names that sympy would read as something else are written with an underscore
        names = {PLAIN.name(name): sympy.Symbol(name) for name in SYMPY_TAKEN}

        def scalar_of(c: Scalar | int | Fraction) -> Any:
            return sympy.sympify(plain_scalar(c), locals=dict(names))

        raw = self.raw
        if isinstance(raw, Expansion):
            raw = raw.to_monomials()
        if isinstance(raw, LaurentPolynomial):
            xs = sympy.symbols(f"x_1:{raw.n + 1}")
            return sympy.Add(*(
                scalar_of(c) * sympy.Mul(*(x**k for x, k in zip(xs, e, strict=True)))
                for e, c in raw.items()))
        scalar = as_scalar(raw)
        if scalar is None:
            raise TypeError(f"{text(raw)} is no scalar, polynomial or expansion")
        return scalar_of(scalar)


def _are_equal(a: Any, b: Any) -> bool:
    if isinstance(a, Truth) or isinstance(b, Truth):
        values = [v.holds if isinstance(v, Truth) else v for v in (a, b)]
        return values[0] is values[1]
    if isinstance(a, bool) or isinstance(b, bool):
        return a is b
    if is_element(a) and is_element(b):
        if type(a) is type(b) and bool(a == b):
            return True
        n = max(getattr(a, "n", 1), getattr(b, "n", 1))
        return _monomials(a, n) == _monomials(b, n)
    if isinstance(a, ListValue) and isinstance(b, ListValue | list):
        others = b.items if isinstance(b, ListValue) else b
        return len(a.items) == len(others) and all(map(_are_equal, a.items, others))
    if isinstance(a, IndexSet) and isinstance(b, IndexSet):
        return a.size() == b.size() and all(map(b.contains, a))
    if is_index(a) and is_index(b):
        return bool(a == b)
    return bool(a == b) if type(a) is type(b) else False


def _monomials(value: Any, n: int) -> LaurentPolynomial:
    scalar = as_scalar(value)
    found = reduction.to_polynomial(value if scalar is None else scalar, n)
    return reduction.extended_polynomial(found, n) if found.n < n else found
