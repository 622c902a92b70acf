"""The one place that turns offsets into the protocol's positions and back, in all encodings.

Offsets count code points, as everywhere else. A position counts lines from 0, and within its line
bytes (utf-8), code units (utf-16) or code points (utf-32).
"""

from __future__ import annotations

from typing import Any

from lsprotocol import types

WIDTHS = {"utf-8": 1, "utf-16": 2, "utf-32": 4}
"""Bytes of the units that each encoding counts."""

_CODECS = {"utf-8": "utf-8", "utf-16": "utf-16-le", "utf-32": "utf-32-le"}


class Positions:
    """The conversions for one text in one encoding."""

    def __init__(self, source: Any, encoding: str) -> None:
        self._source = source
        self._codec = _CODECS[encoding]
        self._width = WIDTHS[encoding]
        self._is_narrow = encoding == "utf-32" or source.text.isascii()

    def offset(self, position: types.Position) -> int:
        """The offset of a position; one outside the text, or inside a character, is moved."""
        source = self._source
        line = position.line + 1
        if line < 1:
            return 0
        if line > source.n_lines:
            return len(source.text)
        text = source.line_text(line)
        start: int = source.offset(line, 1)
        units = max(position.character, 0)
        if self._is_narrow or text.isascii():
            return start + min(units, len(text))
        content = text.encode(self._codec, "surrogatepass")[: units * self._width]
        return start + len(content.decode(self._codec, "ignore"))

    def position(self, offset: int) -> types.Position:
        """The position of an offset."""
        line, column = self._source.position(offset)
        return types.Position(line - 1, self._units(line, column - 1))

    def _units(self, line: int, column: int) -> int:
        if self._is_narrow:
            return column
        text: str = self._source.line_text(line)
        if text.isascii():
            return column
        return len(text[:column].encode(self._codec, "surrogatepass")) // self._width

    def range(self, span: Any) -> types.Range:
        """The range of a span."""
        return types.Range(self.position(span[0]), self.position(span[1]))

    def span(self, item: types.Range) -> tuple[int, int]:
        """Start and end of a range, in order."""
        start, end = self.offset(item.start), self.offset(item.end)
        return (start, end) if start <= end else (end, start)

    def length(self, start: int, end: int) -> int:
        """The units between two offsets of one line."""
        if self._is_narrow:
            return end - start
        text = self._source.text[start:end]
        return len(text.encode(self._codec, "surrogatepass")) // self._width


def single_lines(source: Any, start: int, end: int) -> list[tuple[int, int]]:
    """A stretch cut at line ends, which are left out."""
    first, last = source.position(start)[0], source.position(end)[0]
    if first == last:
        return [(start, end)]
    found = []
    for line in range(first, last + 1):
        begin: int = source.offset(line, 1)
        stop = begin + len(source.line_text(line))
        piece = (max(begin, start), min(stop, end))
        if piece[0] < piece[1]:
            found.append(piece)
    return found
