"""Values as TeX mathematics."""

from __future__ import annotations

from typing import Any

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import GREEK, TEX, scalar_text
from spanwright.rendering.text import number_text, sum_text, text
from spanwright.values import (
    IndexSet,
    ListValue,
    Table,
    Truth,
    is_number,
    is_operator,
)

_SPECIAL = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "$": r"\$", "&": r"\&", "#": r"\#",
    "%": r"\%", "_": r"\_", "^": r"\textasciicircum{}", "~": r"\textasciitilde{}",
    "<": r"\textless{}", ">": r"\textgreater{}", '"': r"\textquotedbl{}",
}


def escaped(prose: str) -> str:
    """Prose that TeX prints as it is."""
    return "".join(_SPECIAL.get(c, c) for c in prose)


def tex(value: Any, show: str = "short") -> str:
    """Any value as TeX, for math mode."""
    if is_number(value):
        shown = number_text(value)
        if "/" in shown:
            sign = "-" if shown[0] == "-" else ""
            top, bottom = shown.lstrip("-").split("/")
            return f"{sign}\\frac{{{top}}}{{{bottom}}}"
        return shown
    if isinstance(value, Scalar):
        return scalar_text(value, TEX, show)
    if isinstance(value, LaurentPolynomial | Expansion):
        return sum_text(tex_pieces(value, show))
    if isinstance(value, tuple):
        return f"({','.join(map(str, value))})"
    if isinstance(value, ListValue):
        return r"\left(" + r",\; ".join(tex(v, show) for v in value.items) + r"\right)"
    if isinstance(value, Truth):
        if value.holds or value.difference is None:
            return rf"\text{{{'holds' if value.holds else 'fails'}}}"
        return rf"\text{{fails: left}} - \text{{right}} = {tex(value.difference, show)}"
    if isinstance(value, Table):
        return table_tex(value, show)
    if is_operator(value):
        from spanwright.rendering.operators import operator_tex

        return operator_tex(value, show)
    if isinstance(value, IndexSet):
        return rf"\text{{{escaped(value.description)}}}"
    return rf"\text{{{escaped(text(value, show))}}}"


def tex_pieces(
    value: LaurentPolynomial | Expansion, show: str = "short"
) -> list[tuple[bool, str, str]]:
    """The terms: whether negative, the coefficient, the element."""
    pieces = []
    items: Any = value.items()
    for index, c in items:
        if isinstance(value, Expansion):
            element = element_tex(value.family.sign, value.family.show_index(index, value.n))
        else:
            element = " ".join(
                TEX.raised(f"x_{{{j}}}", e) for j, e in enumerate(index, 1) if e)
        coefficient = scalar_text(c, TEX, show, as_factor=bool(element))
        negative = coefficient.startswith("-")
        coefficient = coefficient[1:] if negative else coefficient
        pieces.append((negative, "" if coefficient == "1" and element else coefficient, element))
    return pieces


FAMILY_TEX = {
    "S": r"\mathfrak{S}", "G": r"\mathfrak{G}", "atom": r"\mathcal{A}",
}


def element_tex(name: str, index: tuple[int, ...]) -> str:
    """E_{(2,0,1)}; families with their customary letters."""
    if name == "double Schubert":
        return element_tex("S", index) + "(x;y)"
    head = FAMILY_TEX.get(name) or (f"\\{name}" if name in GREEK else name)
    return f"{head}_{{({','.join(map(str, index))})}}"


def table_tex(value: Table, show: str = "short") -> str:
    """An array with a rule below its heads."""
    def cell(v: Any) -> str:
        return rf"\text{{{escaped(v)}}}" if isinstance(v, str) else tex(v, show)

    heads = " & ".join(rf"\text{{{escaped(h)}}}" for h in value.columns)
    rows = " \\\\\n".join(" & ".join(cell(v) for v in row) for row in value.rows)
    return (rf"\begin{{array}}{{{'l' * len(value.columns)}}}" + "\n"
            + heads + " \\\\ \\hline\n" + rows + "\n\\end{array}")
