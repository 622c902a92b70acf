"""A result taken apart for those who show it: its signed terms, and where it lives."""

from __future__ import annotations

from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import TEXT
from spanwright.rendering.text import term_pieces
from spanwright.values import Definition, is_operator


def term_lines(value: Any, show: str = "short") -> tuple[str, ...]:
    """The terms of a sum, each with its sign; nothing for other values."""
    if isinstance(value, Definition):
        terms = term_lines(value.value, show)
        return (f"{value.name} = {terms[0]}", *terms[1:]) if terms else ()
    if isinstance(value, LaurentPolynomial | Expansion):
        pieces = term_pieces(value, TEXT, show)
    elif is_operator(value):
        from spanwright.rendering.operators import operator_pieces

        word = value.to_operator() if hasattr(value, "to_operator") else value
        pieces = operator_pieces(word, TEXT, show)
    else:
        return ()
    rows = []
    for place, (negative, coefficient, element) in enumerate(pieces):
        body = " ".join(part for part in (coefficient, element) if part)
        if place == 0:
            rows.append(f"-{body}" if negative else body)
        else:
            rows.append(f"{'-' if negative else '+'} {body}")
    return tuple(rows)


def note(value: Any, n: int | None, convention: str = "standard") -> str:
    """Where a result lives, when what is in force does not say it: an algebra, more variables."""
    if is_operator(value) and hasattr(value, "algebra"):
        letters = ", ".join(value.letters)
        return f"{value.algebra}, letters {letters}" if letters else "scalar"
    if isinstance(value, LaurentPolynomial | Expansion) and n is not None and value.n > n:
        return f"needs {value.n} variables"
    if isinstance(value, Expansion) and value.family.name in ("E", "E (reversed)"):
        own = "reversed" if value.family.name == "E (reversed)" else "standard"
        return f"in the {own} convention" if own != convention else ""
    return ""
