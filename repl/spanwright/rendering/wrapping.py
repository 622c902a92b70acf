"""Long sums in lines of a given width; every line break pastes back. Loads no kernel.

A line ends with the sign of the term that follows, so that the language reads on. `wrapped` is for
files and never cuts a term; `broken` is for screens, where a long term goes on inside its brackets.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

CONTINUED = "  "
"""How far a line that goes on is moved in."""


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
            current = f"{CONTINUED}{term[2:]}"
    return [*lines, current] if current else lines


def broken(text: str, width: int) -> Iterator[tuple[str, int]]:
    """The text in rows of at most `width` columns where that can be, each with its end offset.

    A row ends behind a sign outside all brackets, or else inside brackets: every break pastes back.
    """
    offset = 0
    for line in text.split("\n"):
        start, depth, lead = 0, 0, ""
        while len(line) - start > width - len(lead):
            end, depth = _row_end(line, start, width - len(lead), depth)
            if end >= len(line):
                break
            yield lead + line[start:end], offset + end
            start, lead = end + 1, CONTINUED * 2 if depth else CONTINUED
        yield lead + line[start:], offset + len(line)
        offset += len(line) + 1


def _row_end(line: str, start: int, room: int, depth: int) -> tuple[int, int]:
    """The space at which a row ends, with the number of brackets open there: as few as can be."""
    best: tuple[int, int] | None = None
    for place in range(start, len(line)):
        if place - start > room and best is not None:
            return best
        sign = line[place]
        if sign in "([{":
            depth += 1
        elif sign in ")]}":
            depth = max(0, depth - 1)
        elif sign == " " and place > start:
            # Behind a sign with spaces around it; inside brackets any space that no sign follows.
            is_behind_sign = line[place - 1] in "+-" and line[place - 2 : place - 1] == " "
            may_end = is_behind_sign if depth == 0 else line[place + 1 : place + 2] not in "+-"
            if may_end and (best is None or depth <= best[1]):
                best = (place, depth)
    return best or (len(line), depth)
