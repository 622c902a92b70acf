"""Long sums in lines of a given width; every line break pastes back. Loads no kernel.

A line ends with the sign of the term that follows, so that the language reads on.
"""

from __future__ import annotations

from collections.abc import Sequence


def wrapped(terms: Sequence[str], width: int) -> list[str]:
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
