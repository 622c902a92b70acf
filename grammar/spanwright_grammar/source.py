"""Text with a name and a line table, and half-open spans of code points in it."""

from __future__ import annotations

import re
from bisect import bisect_right
from functools import cached_property
from typing import NamedTuple

_LINE_END = re.compile(r"\r\n|\n|\r")


class Span(NamedTuple):
    """The half-open stretch `start <= offset < end` of a text, in code points."""

    start: int
    end: int


NO_SPAN = Span(0, 0)


class Source:
    """One text under one name; the only place that counts lines.

    Lines end in a line feed, a carriage return, or both together.
    """

    def __init__(self, text: str, name: str = "<input>") -> None:
        self.text = text
        self.name = name

    def __repr__(self) -> str:
        return f"Source({self.text!r}, {self.name!r})"

    @cached_property
    def _line_starts(self) -> list[int]:
        return [0, *(found.end() for found in _LINE_END.finditer(self.text))]

    @property
    def n_lines(self) -> int:
        """The number of lines; a text that ends in a line end has an empty last line."""
        return len(self._line_starts)

    def position(self, offset: int) -> tuple[int, int]:
        """Line and column of an offset, both from 1; offsets outside the text are moved into it.

        >>> Source("let f = 1\\nclaim").position(12)
        (2, 3)
        """
        inside = min(max(offset, 0), len(self.text))
        line = bisect_right(self._line_starts, inside)
        return line, inside - self._line_starts[line - 1] + 1

    def offset(self, line: int, column: int) -> int:
        """The offset of a line and a column, both from 1; the inverse of `position`."""
        return self._line_starts[line - 1] + column - 1

    def line_text(self, line: int) -> str:
        """The text of a line, from 1, without its line end."""
        start = self._line_starts[line - 1]
        end = self._line_starts[line] if line < self.n_lines else len(self.text)
        return self.text[start:end].rstrip("\r\n")

    def slice(self, span: Span) -> str:
        """The text that a span covers."""
        return self.text[span.start : span.end]
