"""Long results cut into terms and lines of a given width; every line break pastes back.

A line ends with the sign of the term that follows, so that the language reads on.
"""

from __future__ import annotations

from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import TEXT
from spanwright.rendering.text import term_pieces


def term_lines(value: Any, show: str = "short") -> tuple[str, ...]:
    """The terms of a polynomial or expansion, each with its sign; nothing for other values."""
    if not isinstance(value, LaurentPolynomial | Expansion):
        return ()
    rows = []
    for place, (negative, coefficient, element) in enumerate(term_pieces(value, TEXT, show)):
        body = " ".join(part for part in (coefficient, element) if part)
        if place == 0:
            rows.append(f"-{body}" if negative else body)
        else:
            rows.append(f"{'-' if negative else '+'} {body}")
    return tuple(rows)


def wrapped(terms: tuple[str, ...] | list[str], width: int) -> list[str]:
    """The terms in lines of at most `width` columns where that can be: a term is never cut."""
    lines: list[str] = []
    current = ""
    for term in terms:
        if not current:
            current = term
        elif len(current) + 1 + len(term) <= width - 2:
            current += f" {term}"
        else:
            lines.append(f"{current} {term[0]}")
            current = f"  {term[2:]}"
    return [*lines, current] if current else lines
