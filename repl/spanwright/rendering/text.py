"""Values in the language itself: what is printed here parses back to the same value."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import KernelError
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.symmetric_base import NotSymmetric
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import TEXT, Style, scalar_text
from spanwright.tally import Tally, tally_text
from spanwright.values import (
    Definition,
    FamilyMark,
    IndexSet,
    Infinity,
    ListValue,
    Setting,
    Table,
    Text,
    Truth,
    as_scalar,
    is_number,
    is_operator,
)

LONGEST_DIFFERENCE = 400
"""Characters of a polynomial inside a message."""


def text(value: Any, show: str = "short") -> str:
    """Any value on one line (tables and prose: several)."""
    if is_number(value):
        return number_text(value)
    if isinstance(value, Scalar):
        return scalar_text(value, show=show)
    if isinstance(value, LaurentPolynomial | Expansion):
        return sum_text(term_pieces(value, TEXT, show))
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, Truth):
        return truth_text(value, show)
    if isinstance(value, tuple):
        return index_text(value)
    if isinstance(value, ListValue):
        # of a statement only the verdict stands in a list: its difference is a comment
        items = (text(v, show).partition("\n")[0].partition("   #")[0]
                 if isinstance(v, Truth) else text(v, show) for v in value.items)
        return f"list({', '.join(items)})"
    if isinstance(value, IndexSet):
        return value.description
    if isinstance(value, FamilyMark):
        return value.family.name
    if isinstance(value, Infinity):
        return "infinity"
    if isinstance(value, str):
        return quoted(value)
    if isinstance(value, Text):
        return value.content
    if isinstance(value, Definition | Setting):
        return value.text
    if isinstance(value, Table):
        return table_text(value, show)
    if isinstance(value, Tally):
        return tally_text(value)
    if is_operator(value):
        from spanwright.rendering.operators import operator_text

        return operator_text(value, show)
    raise TypeError(f"no text for {type(value).__name__}")


def number_text(value: int | Fraction) -> str:
    """An integer or fraction of any size."""
    if isinstance(value, int):
        return TEXT.integer(value)
    return f"{TEXT.integer(value.numerator)}/{TEXT.integer(value.denominator)}"


def index_text(index: tuple[Any, ...]) -> str:
    """(2,0,1); a list of one part keeps its brackets."""
    return f"({','.join(text(part) for part in index)})"


def quoted(content: str) -> str:
    """A text as a string of the language."""
    escaped = content.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")
    return f'"{escaped}"'


def truth_text(value: Truth, show: str = "short") -> str:
    """`holds`, or `fails` with the difference of the two sides."""
    if value.holds:
        is_exact = value.certainty == "exact"
        return "holds" if is_exact else f"holds   # with high probability: {value.evidence}"
    # behind comment signs, so that all of it reads back as the truth value
    lines = ["fails"]
    if value.difference is not None:
        lines.append(f"# left - right = {text(value.difference, show)}")
    if value.evidence:
        lines.append(f"# {value.evidence}")
    return "\n".join(lines)


Piece = tuple[bool, str, str]
"""Whether negative, the coefficient (empty for 1), the element (empty for a scalar term)."""


def term_pieces(
    value: LaurentPolynomial | Expansion, style: Style, show: str
) -> list[Piece]:
    """The terms of a polynomial or expansion in the order in which they are shown."""
    pieces: list[Piece] = []
    # equal coefficients are one object, and set once; kept here, for ids are used again
    shown: dict[int, tuple[Scalar, str]] = {}
    for index, c in value.items():
        if isinstance(value, LaurentPolynomial):
            element = monomial_text(index, style)
        else:
            element = element_text(value.family.sign, value.family.show_index(index, value.n))
        if not element:
            pieces.append(_piece(scalar_text(c, style, show), element))
            continue
        if id(c) not in shown:
            shown[id(c)] = c, scalar_text(c, style, show, as_factor=True)
        pieces.append(_piece(shown[id(c)][1], element))
    return pieces


def _piece(coefficient: str, element: str) -> Piece:
    """A coefficient and an element, the sign taken off."""
    is_negative = coefficient.startswith("-")
    if is_negative:
        coefficient = coefficient[1:]
    return is_negative, "" if coefficient == "1" and element else coefficient, element


def monomial_text(exponents: tuple[int, ...], style: Style = TEXT) -> str:
    """x_1^2 x_3; nothing for 1."""
    return style.times.join(
        style.raised(f"x_{j}", e) for j, e in enumerate(exponents, 1) if e)


def element_text(name: str, index: tuple[int, ...]) -> str:
    """E_(2,0,1); a single part in brackets, so that digits are never read one by one."""
    if name == "double Schubert":
        return f"S_({','.join(map(str, index))})(x;y)"
    return f"{name}_({','.join(map(str, index))})"


def sum_text(pieces: list[Piece], times: str = " ") -> str:
    """The terms joined with their signs; 0 for none."""
    if not pieces:
        return "0"
    rows: list[str] = []
    for place, (negative, coefficient, element) in enumerate(pieces):
        body = times.join(part for part in (coefficient, element) if part)
        if place == 0:
            rows.append(f"-{body}" if negative else body)
        else:
            rows.append(f"{'-' if negative else '+'} {body}")
    return " ".join(rows)


def cell_text(value: Any, show: str = "short") -> str:
    """A value inside a table."""
    return value if isinstance(value, str) else text(value, show)


def table_text(value: Table, show: str = "short") -> str:
    """Columns aligned left, heads over a rule."""
    rows = [[cell_text(v, show) for v in row] for row in value.rows]
    widths = [
        max([len(head), *(len(row[k]) for row in rows)]) for k, head in enumerate(value.columns)]
    lines = [value.caption] if value.caption else []
    if value.columns:
        head = "  ".join(h.ljust(w) for h, w in zip(value.columns, widths, strict=True))
        lines += [head.rstrip(), "  ".join("-" * w for w in widths)]
    for row in rows:
        lines.append("  ".join(c.ljust(w) for c, w in zip(row, widths, strict=True)).rstrip())
    lines += value.notes
    return "\n".join(lines)


def by_how_much(error: KernelError) -> str:
    """What a message adds when s_i moves a polynomial: f - s_i f, or its size when it is long."""
    if not isinstance(error, NotSymmetric):
        return ""
    by = text(error.difference)
    name = f"f - s_{error.position} f"
    return f" by {name} = {by}" if len(by) <= LONGEST_DIFFERENCE \
        else f"; {name} has {len(error.difference):,} terms"


def element_value(value: Any) -> Scalar | LaurentPolynomial | Expansion | None:
    """A number, scalar, polynomial or expansion as a kernel value, else None."""
    if isinstance(value, LaurentPolynomial | Expansion):
        return value
    return as_scalar(value)
