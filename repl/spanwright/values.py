"""What a program yields: the kernel's values, and truths, lists, tables, sets of indices.

Numbers stay Python integers and fractions until they meet a scalar; indices are tuples.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

BASE_RING = ParameterRing.get()


@dataclass(frozen=True, slots=True)
class Truth:
    """A decided statement; when false, `difference` is left side minus right side, if it has one.

    `evidence` is a sentence on how it was decided, `certainty` either `exact` or `random`.
    """

    holds: bool
    difference: Any = None
    evidence: str = ""
    certainty: str = "exact"


@dataclass(frozen=True, slots=True)
class ListValue:
    """A finite list of values."""

    items: tuple[Any, ...]


@dataclass(frozen=True, slots=True)
class Table:
    """Rows of values below column heads; `caption` is a sentence."""

    columns: tuple[str, ...]
    rows: tuple[tuple[Any, ...], ...]
    caption: str = ""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class IndexSet:
    """A finite set of integers or tuples, enumerated lazily in a stated order."""

    description: str
    enumerate: Callable[[], Iterator[Any]]
    contains: Callable[[Any], bool]
    size: Callable[[], int]

    def __iter__(self) -> Iterator[Any]:
        return self.enumerate()


@dataclass(frozen=True, slots=True)
class FamilyMark:
    """The bare symbol of a family, as in `positive(f, s)`."""

    family: Family


@dataclass(frozen=True, slots=True)
class Infinity:
    """The point at infinity, the target of a limit."""


@dataclass(frozen=True, slots=True)
class Text:
    """Prose: help, a list of definitions, a remark, a rendering."""

    content: str
    kind: str = "text"


@dataclass(frozen=True, slots=True)
class Definition:
    """What `let`, `forget` and `use` answer."""

    name: str
    text: str
    value: Any = None


@dataclass(frozen=True, slots=True)
class Setting:
    """What `fix` answers."""

    name: str
    text: str


Number = int | Fraction


def is_number(value: Any) -> bool:
    """Whether the value is an integer or a fraction (truth values are not)."""
    return isinstance(value, int | Fraction) and not isinstance(value, bool)


def is_index(value: Any) -> bool:
    """Whether the value is a tuple of integers."""
    return isinstance(value, tuple) and all(isinstance(p, int) for p in value)


def single_element(value: Any) -> tuple[str, tuple[int, ...]] | None:
    """Family symbol and index of one basis element with coefficient 1, else None."""
    if isinstance(value, Expansion) and len(value) == 1:
        ((index, c),) = value.terms.items()
        if c == 1:
            return value.family.name, index
    return None


def is_element(value: Any) -> bool:
    """Whether the value is a scalar, polynomial or expansion."""
    return is_number(value) or isinstance(value, Scalar | LaurentPolynomial | Expansion)


def as_scalar(value: Any) -> Scalar | None:
    """A number or scalar as a scalar of the kernel, else None."""
    if isinstance(value, Scalar):
        return value
    if is_number(value):
        fraction = Fraction(value)
        return Scalar.number(BASE_RING, fraction.numerator, fraction.denominator)
    return None


def simplest_number(value: Fraction) -> Number:
    """An integer when it is one."""
    return int(value) if value.denominator == 1 else value


def kind_name(value: Any) -> str:
    """What to call the value in a message, with its article."""
    if is_number(value) or isinstance(value, Scalar):
        return "a scalar"
    if isinstance(value, LaurentPolynomial):
        return "a polynomial"
    if isinstance(value, Expansion):
        return f"a sum of {value.family.name}-elements"
    if isinstance(value, Truth | bool):
        return "a truth value"
    if isinstance(value, tuple):
        return "an index"
    names = {
        ListValue: "a list", Table: "a table", IndexSet: "an index set", FamilyMark: "a family",
        Infinity: "infinity", Text: "a text", str: "a text",
    }
    return names.get(type(value), "an operator")


def is_operator(value: Any) -> bool:
    """Whether the value is an operator or an operator in canonical form."""
    return type(value).__module__.startswith("spanwright.kernel.operators")
