"""A text under edit: reads again only the sentences that changed, and answers as if read afresh.

A document is a value; `edited` gives another one that shares all segments that stayed the same.
What is found out about a segment is kept with it, in offsets of its own.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Iterator
from functools import cached_property
from itertools import accumulate
from typing import NamedTuple

from spanwright_grammar.bindings import Exports, Ledger, Mention, Scope, mentions
from spanwright_grammar.checks import KnownPiece, check_pieces, facts_of
from spanwright_grammar.diagnostics import Diagnostic
from spanwright_grammar.parsing import (
    Comment,
    Parsed,
    Piece,
    Segment,
    Token,
    assembled,
    placed,
    restarts,
    segments,
    tokens,
)
from spanwright_grammar.source import Source, Span
from spanwright_grammar.syntax import Sentence, shifted

NO_SCOPE = Scope()
"""What is in force where a session begins."""


class PlacedPiece(NamedTuple):
    """A piece and where the text begins that its spans refer to."""

    piece: Piece
    offset: int
    text: str

    @property
    def span(self) -> Span:
        """The piece's span in the document."""
        return Span(self.piece.span.start + self.offset, self.piece.span.end + self.offset)


class Unit(NamedTuple):
    """What is run as one: its span in the document, and its sentence, a block's header alone."""

    span: Span
    sentence: Sentence | None


class _Part:
    """A segment with what has been found out about it."""

    def __init__(self, segment: Segment) -> None:
        self.segment = segment
        self._known: list[KnownPiece] | None = None
        self._mentions: list[tuple[Mention, ...]] | None = None
        self._moved: tuple[int, tuple[Piece, ...]] | None = None
        self._tokens: tuple[Token, ...] | None = None

    @cached_property
    def is_plain(self) -> bool:
        """Does it hold whole sentences only, outside of blocks and without a fault?"""
        return all(
            piece.role == "sentence" and not piece.diagnostics for piece in self.segment.pieces
        )

    def known(self) -> list[KnownPiece]:
        """The pieces as the checks take them."""
        if self._known is None:
            text = self.segment.text
            self._known = [
                KnownPiece(piece, text, facts_of(piece, text), {})
                for piece in self.segment.pieces
            ]
        return self._known

    def mentions(self) -> list[tuple[Mention, ...]]:
        """The mentions in each piece, in offsets of the segment."""
        if self._mentions is None:
            text = self.segment.text
            self._mentions = [
                () if piece.sentence is None else tuple(mentions(piece.sentence, text))
                for piece in self.segment.pieces
            ]
        return self._mentions

    def tokens(self) -> tuple[Token, ...]:
        """The coloured stretches, in offsets of the segment."""
        if self._tokens is None:
            self._tokens = tokens(self.segment.text)
        return self._tokens

    def moved(self, offset: int) -> tuple[Piece, ...]:
        """The pieces with trees and spans of the whole document; places stay marked."""
        if self._moved is None or self._moved[0] != offset:
            self._moved = offset, tuple(
                Piece(
                    Span(piece.span.start + offset, piece.span.end + offset),
                    piece.role,
                    None if piece.sentence is None else shifted(piece.sentence, offset),
                    piece.diagnostics,
                    piece.names,
                )
                for piece in self.segment.pieces
            )
        return self._moved[1]


class Document:
    """A text, read in segments."""

    def __init__(self, text: str, name: str = "<input>", *, parts: list[_Part] | None = None):
        self.text = text
        self.name = name
        self._parts = [_Part(item) for item in segments(text)] if parts is None else parts

    @cached_property
    def source(self) -> Source:
        """The text with its line table."""
        return Source(self.text, self.name)

    @cached_property
    def _starts(self) -> list[int]:
        lengths = (len(part.segment.text) for part in self._parts)
        return list(accumulate(lengths, initial=0))[:-1] or [0]

    def edited(self, start: int, end: int, replacement: str) -> Document:
        """The document with the text between two offsets replaced; they are moved into it.

        >>> Document("let f = 1").edited(8, 9, "x_1").text
        'let f = x_1'
        """
        start = min(max(start, 0), len(self.text))
        end = min(max(end, start), len(self.text))
        text = self.text[:start] + replacement + self.text[end:]
        parts = self._parts
        if not parts:
            return Document(text, self.name)
        # One line end more on both sides: the edit may join or part the lines there.
        first = self._part_at(max(start - 1, 0))
        while first and not parts[first - 1].segment.is_closed:
            first -= 1
        last = self._part_at(end)
        before = self._starts[first]
        growth = len(text) - len(self.text)
        reach = 1
        while True:
            until = self._starts[last + 1] if last + 1 < len(parts) else len(self.text)
            read = segments(text[before : until + growth])
            if last + 1 >= len(parts) or not read or read[-1].is_closed:
                break
            # The last sentence is still open: on to where a sentence certainly begins anew.
            following = last + 1
            while following < len(parts) and not parts[following].segment.opens_with:
                following += 1
            if following < len(parts) and restarts(parts[following].segment.opens_with):
                if following == last + 1:
                    break
                last = following - 1
            else:
                last = min(last + reach, len(parts) - 1)
                reach *= 2
        renewed = [_Part(item) for item in read]
        return Document(
            text, self.name, parts=[*parts[:first], *renewed, *parts[last + 1 :]]
        )

    def _part_at(self, offset: int) -> int:
        return max(bisect_right(self._starts, offset) - 1, 0)

    # what the text says

    def pieces(self) -> Iterator[PlacedPiece]:
        """All pieces in order."""
        for start, part in zip(self._starts, self._parts):
            for piece in part.segment.pieces:
                yield PlacedPiece(piece, start, part.segment.text)

    def flat_pieces(self) -> list[Piece]:
        """All pieces with the document's spans; their trees keep those of their segments."""
        return [
            Piece(placed.span, placed.piece.role, placed.piece.sentence, placed.piece.diagnostics)
            for placed in self.pieces()
        ]

    def units(self) -> list[Unit]:
        """What is run as one: sentences, and blocks from `for` to `end`; in order."""
        found: list[Unit] = []
        opened: list[PlacedPiece] = []
        for placed_piece in self.pieces():
            role = placed_piece.piece.role
            if role == "opens":
                opened.append(placed_piece)
            elif role == "end" and opened:
                header = opened.pop()
                if not opened:
                    span = Span(header.span.start, placed_piece.span.end)
                    found.append(Unit(span, header.piece.sentence))
            elif not opened:
                found.append(Unit(placed_piece.span, placed_piece.piece.sentence))
        if opened:
            found.append(Unit(Span(opened[0].span.start, len(self.text)), None))
        return found

    def comments(self) -> Iterator[Comment]:
        """All comments in order."""
        for start, part in zip(self._starts, self._parts):
            for item in part.segment.comments:
                span = Span(item.span.start + start, item.span.end + start)
                yield Comment(item.text, span, item.is_result)

    def parsed(self) -> Parsed:
        """The whole text as `parse` reads it."""
        source = self.source
        pieces = []
        for start, part in zip(self._starts, self._parts):
            for piece in part.moved(start):
                if piece.diagnostics:
                    found = tuple(placed(item, source, start) for item in piece.diagnostics)
                    piece = Piece(piece.span, piece.role, piece.sentence, found, piece.names)
                pieces.append(piece)
        return assembled(source, pieces, list(self.comments()))

    def diagnostics(
        self, scope: Scope = NO_SCOPE, exports: Exports | None = None
    ) -> tuple[Diagnostic, ...]:
        """All findings in a whole script, as `check` gives them; `scope` is that of its start."""
        found = self._syntax_diagnostics()
        known = (
            (start, item)
            for start, part in zip(self._starts, self._parts)
            for item in part.known()
        )
        found.extend(check_pieces(known, scope, exports, is_whole=True))
        return tuple(sorted(found, key=lambda item: item.span))

    def _syntax_diagnostics(self) -> list[Diagnostic]:
        """The parser's findings, without a tree of the whole."""
        source = self.source
        light: list[Piece] = []
        depth = 0
        for start, part in zip(self._starts, self._parts):
            if part.is_plain and not depth:
                continue
            for piece in part.segment.pieces:
                if piece.role == "sentence" and not (piece.diagnostics or depth):
                    continue
                depth = max(0, depth + {"opens": 1, "end": -1, "sentence": 0}[piece.role])
                span = Span(piece.span.start + start, piece.span.end + start)
                found = tuple(placed(item, source, start) for item in piece.diagnostics)
                light.append(Piece(span, piece.role, piece.sentence, found))
        return list(assembled(source, light, []).diagnostics)

    def scope_at(
        self, offset: int, scope: Scope = NO_SCOPE, exports: Exports | None = None
    ) -> Scope:
        """What is in force before the sentence that holds the offset."""
        ledger = Ledger(scope, exports)
        for start, part in zip(self._starts, self._parts):
            if start > offset:
                break
            for piece in part.segment.pieces:
                if piece.span.end + start >= offset:
                    return ledger.scope()
                ledger.take_piece(piece)
        return ledger.scope()

    def around(self, offset: int) -> tuple[str, int]:
        """The segment that holds an offset, and where it begins; a sentence never leaves one."""
        if not self._parts:
            return "", 0
        place = self._part_at(offset)
        return self._parts[place].segment.text, self._starts[place]

    def tokens(self, stretch: Span | None = None) -> Iterator[tuple[Token, int]]:
        """The coloured stretches of the segments that touch a stretch, with where those begin."""
        first = self._part_at(stretch.start) if stretch else 0
        for place in range(first, len(self._parts)):
            if stretch and self._starts[place] > stretch.end:
                break
            for token in self._parts[place].tokens():
                yield token, self._starts[place]

    def mentions(self) -> Iterator[Mention]:
        """All names that are bound, defined or used, in offsets of the document.

        What a block's header binds owns the uses in the block.
        """
        blocks: list[dict[str, int]] = []
        for start, part in zip(self._starts, self._parts):
            for piece, found in zip(part.segment.pieces, part.mentions()):
                if piece.role == "end":
                    if blocks:
                        blocks.pop()
                    continue
                bound: dict[str, int] = {}
                for name, place, role, owner in found:
                    where = None if owner is None else owner + start
                    if role == "binding" and piece.role == "opens":
                        bound.setdefault(name, place + start)
                    elif where is None and role == "use":
                        where = next(
                            (names[name] for names in reversed(blocks) if name in names), None
                        )
                    yield Mention(name, place + start, role, where)
                if piece.role == "opens":
                    blocks.append(bound)

