"""Values as text that sympy reads; sympy itself is not needed to write it."""

from __future__ import annotations

from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.json import plain_scalar
from spanwright.rendering.text import number_text, text
from spanwright.values import IndexSet, ListValue, Table, Truth, as_scalar


def sympy_text(value: Any, show: str = "short") -> str:
    """The value for `sympify`: sums in a basis as polynomials in x_1, ..., x_n.

    Parameters whose names sympy takes for something else end in an underscore. Lists become
    lists, indices tuples, truths True and False; what has no meaning there becomes a string.
    """
    if isinstance(value, Expansion):
        value = value.to_monomials()
    if isinstance(value, LaurentPolynomial):
        return _polynomial(value)
    scalar = as_scalar(value)
    if scalar is not None:
        return plain_scalar(scalar)
    if isinstance(value, Truth):
        return str(value.holds)
    if isinstance(value, bool):
        return str(value)
    if isinstance(value, tuple):
        parts = ", ".join(number_text(part) for part in value)
        return f"({parts},)" if len(value) == 1 else f"({parts})"
    if isinstance(value, ListValue | IndexSet):
        items = value.items if isinstance(value, ListValue) else tuple(value)
        return f"[{', '.join(sympy_text(item, show) for item in items)}]"
    if isinstance(value, Table):
        rows = ", ".join(
            f"[{', '.join(sympy_text(cell, show) for cell in row)}]" for row in value.rows)
        return f"[{rows}]"
    return _string(value if isinstance(value, str) else text(value, show))


def _string(content: str) -> str:
    return repr(content)


def _polynomial(value: LaurentPolynomial) -> str:
    terms = []
    for exponents, c in value.items():
        factors = [
            f"x_{j}" if e == 1 else f"x_{j}**{e}" if e > 0 else f"x_{j}**({e})"
            for j, e in enumerate(exponents, 1) if e]
        coefficient = plain_scalar(c)
        if coefficient != "1" or not factors:
            factors.insert(0, f"({coefficient})")
        terms.append("*".join(factors))
    return " + ".join(terms) or "0"
