"""Values as Python sees them: terms, equality, sympy, and a rendering for notebooks."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.json import data, plain_scalar
from spanwright.rendering.tex import tex
from spanwright.rendering.text import text
from spanwright.values import ListValue, Truth, as_scalar, is_number


class View:
    """A value of a session, read only.

    Equality is mathematical: two views are equal when their values are. Iterating over an
    expansion gives pairs (index, coefficient), the index a tuple, the coefficient a View.
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
        """The coefficients of an expansion or polynomial by index, in the order shown."""
        if isinstance(self.raw, Expansion | LaurentPolynomial):
            return {tuple(i): View(c, self._show) for i, c in self.raw.items()}
        raise TypeError(f"{text(self.raw)} has no terms")

    @property
    def holds(self) -> bool:
        """The truth of a statement."""
        if isinstance(self.raw, Truth):
            return self.raw.holds
        raise TypeError("only a statement holds or fails")

    def __iter__(self) -> Iterator[Any]:
        if isinstance(self.raw, ListValue):
            return (View(v, self._show) for v in self.raw.items)
        return iter(self.terms.items())

    def __len__(self) -> int:
        return len(self.raw.items if isinstance(self.raw, ListValue) else self.terms)

    def __eq__(self, other: object) -> bool:
        raw = other.raw if isinstance(other, View) else other
        if is_number(self.raw) or is_number(raw):
            return bool(as_scalar(self.raw) == as_scalar(raw))
        return bool(self.raw == raw)

    def __hash__(self) -> int:
        return hash(as_scalar(self.raw) if is_number(self.raw) else self.raw)

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

    def _repr_latex_(self) -> str:
        return f"$\\displaystyle {self.to_tex()}$"

    def to_sympy(self) -> Any:
        """A scalar or polynomial as a sympy expression; an expansion goes to monomials first."""
        import sympy

        raw = self.raw
        if isinstance(raw, Expansion):
            raw = raw.to_monomials()
        if isinstance(raw, LaurentPolynomial):
            xs = sympy.symbols(f"x_1:{raw.n + 1}")
            return sympy.Add(*(
                sympy.sympify(plain_scalar(c)) * sympy.Mul(
                    *(x**k for x, k in zip(xs, e, strict=True)))
                for e, c in raw.items()))
        scalar = as_scalar(raw)
        if scalar is None:
            raise TypeError(f"{text(raw)} is no scalar, polynomial or expansion")
        return sympy.sympify(plain_scalar(scalar))
