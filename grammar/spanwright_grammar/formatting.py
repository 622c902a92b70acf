"""House style: spaces, blank lines and indentation; never a word, a sign or a comment's text.

Formatting is a list of edits between words. A sentence whose words would be read otherwise when
respaced, or that is broken, keeps its own spacing, so the meaning of a text stays what it was.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from typing import NamedTuple

from spanwright_grammar.lexing import CLOSERS, KEYWORDS, OPENERS, Lexeme, assign_roles, scan
from spanwright_grammar.parsing import Parsed, Piece
from spanwright_grammar.source import Span

INDENT = 2  # of a block's sentences
CONTINUED = 4  # of the further lines of a sentence
BEFORE_COMMENT = "  "
MAX_BLANK_LINES = 1


class Edit(NamedTuple):
    """A stretch of text and what stands there instead."""

    span: Span
    text: str


def formatted(parsed: Parsed) -> str:
    """The whole text in house style.

    >>> from spanwright_grammar.parsing import parse
    >>> from spanwright_grammar.source import Source
    >>> formatted(parse(Source("let  f=( 1-q^2*t )E_{2, 0,1}   #why")))
    'let f = (1 - q^2 * t) E_{2,0,1}  # why\\n'
    """
    return applied(parsed.source.text, format_edits(parsed.source.text, parsed.pieces))


def applied(text: str, edits: Iterable[Edit]) -> str:
    """The text with edits made; they are in order and do not overlap."""
    parts = []
    end = 0
    for span, replacement in edits:
        parts += [text[end : span.start], replacement]
        end = span.end
    return "".join([*parts, text[end:]])


def format_edits(
    text: str, pieces: Iterable[Piece], part: Span | None = None
) -> list[Edit]:
    """The edits that bring a text into house style; with `part`, those on the lines it touches."""
    if part is not None:
        start = max(text.rfind("\n", 0, part.start), text.rfind("\r", 0, part.start)) + 1
        following = _LINE_END.search(text, max(part.end, start))
        part = Span(start, following.end() if following else len(text))
    return [
        edit
        for edit in _Formatter(text, list(pieces)).edits()
        if part is None or (part.start <= edit.span.start and edit.span.end <= part.end)
    ]


def indentation(text: str, pieces: Iterable[Piece], offset: int) -> str:
    """The spaces that a new line at an offset begins with."""
    depth = 0
    for piece in pieces:
        if piece.span.start >= offset:
            break
        if piece.span.end > offset:
            return " " * (INDENT * depth + CONTINUED)
        depth = _deeper(depth, piece)
    return " " * (INDENT * depth)


def _deeper(depth: int, piece: Piece) -> int:
    if piece.role == "opens":
        return depth + 1
    return max(0, depth - 1) if piece.role == "end" else depth


_LINE_END = re.compile(r"\r\n|\n|\r")


class _Item(NamedTuple):
    """A visible thing in the text: a word of a piece, a `;` between pieces, or a comment."""

    lexeme: Lexeme
    piece: int  # which piece it belongs to, -1 for none
    is_first: bool
    is_last: bool
    n_line_ends: int  # before it


class _Formatter:
    """One text and its pieces on the way to edits."""

    def __init__(self, text: str, pieces: list[Piece]) -> None:
        self.text = text
        self.pieces = pieces
        # The last one, because the end of the text is always written with it: a second run
        # finds the same.
        ends = _LINE_END.findall(text)
        self.line_end = ends[-1] if ends else "\n"

    def edits(self) -> Iterator[Edit]:
        """All edits in order."""
        items = self._items()
        if not items:
            if self.text:
                yield Edit(Span(0, len(self.text)), "")
            return
        depth = 0
        previous: _Item | None = None
        place = 0
        while place < len(items):
            item = items[place]
            if item.is_first:
                piece = self.pieces[item.piece]
                if piece.role == "end":
                    depth = _deeper(depth, piece)
                yield from self._gap(previous, item, depth)
                end = place
                while not items[end].is_last:
                    end += 1
                yield from self._inside(items[place : end + 1], depth)
                if piece.role == "opens":
                    depth = _deeper(depth, piece)
                previous, place = items[end], end + 1
                continue
            yield from self._gap(previous, item, depth)
            if item.lexeme.type == "COMMENT":
                yield from self._comment(item.lexeme)
            previous, place = item, place + 1
        assert previous is not None
        tail = Span(previous.lexeme.end, len(self.text))
        if self.text[tail.start :] != self.line_end:
            yield Edit(tail, self.line_end)

    def _items(self) -> list[_Item]:
        items: list[_Item] = []
        n_line_ends = 0
        at = 0
        for lexeme in scan(self.text):
            if lexeme.type == "NEWLINE":
                n_line_ends += 1
                continue
            while at < len(self.pieces) and self.pieces[at].span.end <= lexeme.start:
                at += 1
            span = self.pieces[at].span if at < len(self.pieces) else Span(-1, -1)
            is_inside = span.start <= lexeme.start < span.end
            items.append(
                _Item(
                    lexeme,
                    at if is_inside else -1,
                    is_inside and lexeme.start == span.start,
                    is_inside and lexeme.end == span.end,
                    n_line_ends,
                )
            )
            n_line_ends = 0
        return items

    def _gap(self, previous: _Item | None, item: _Item, depth: int) -> Iterator[Edit]:
        """The space before something that stands outside all sentences or begins one."""
        start = previous.lexeme.end if previous else 0
        span = Span(start, item.lexeme.start)
        if previous is None:
            wanted = " " * (INDENT * depth)
            kept = self.text[: span.end]
            if "\ufeff" in kept:
                return
        elif item.n_line_ends:
            n_line_ends = 1 + min(item.n_line_ends - 1, MAX_BLANK_LINES)
            yield from self._line_start(span, n_line_ends, INDENT * depth)
            return
        elif item.lexeme.type == "COMMENT":
            wanted = BEFORE_COMMENT
        elif item.lexeme.type == "SEMICOLON":
            wanted = ""
        else:
            wanted = " "
        if self.text[span.start : span.end] != wanted:
            yield Edit(span, wanted)

    def _line_start(self, span: Span, n_line_ends: int, indent: int) -> Iterator[Edit]:
        """Line ends and indentation as two edits, so that each belongs to its own line."""
        gap = self.text[span.start : span.end]
        cut = span.start + max(gap.rfind("\n"), gap.rfind("\r")) + 1
        for part, wanted in (
            (Span(span.start, cut), self.line_end * n_line_ends),
            (Span(cut, span.end), " " * indent),
        ):
            if self.text[part.start : part.end] != wanted:
                yield Edit(part, wanted)

    def _comment(self, lexeme: Lexeme) -> Iterator[Edit]:
        """One space behind the mark of a comment that begins with a word; none at its end."""
        text = self.text[lexeme.start : lexeme.end]
        mark = 2 if text.startswith("#=") else 1
        if text[mark : mark + 1].isalnum():
            place = lexeme.start + mark
            yield Edit(Span(place, place), " ")
        bare = text.rstrip()
        if len(bare) < len(text):
            yield Edit(Span(lexeme.start + len(bare), lexeme.end), "")

    def _inside(self, items: list[_Item], depth: int) -> Iterator[Edit]:
        """The spaces between the words of one sentence."""
        piece = self.pieces[items[0].piece]
        if piece.diagnostics or (piece.sentence is None and piece.role != "end"):
            return
        words = [item.lexeme for item in items if item.lexeme.type != "COMMENT"]
        roles = assign_roles(words)
        spaces = _spaces(words, roles)
        by_start = {word.start: space for word, space in zip(words[1:], spaces)}
        edits: list[Edit] = []
        for before, item in zip(items, items[1:]):
            span = Span(before.lexeme.end, item.lexeme.start)
            if words[0].type == "HELP" and before.lexeme.type != "HELP":
                continue
            if item.n_line_ends:
                is_closer = item.lexeme.type in CLOSERS
                indent = INDENT * depth + (0 if is_closer else CONTINUED)
                edits.extend(self._line_start(span, 1, indent))
                wanted = self.text[span.start : span.end]
            elif item.lexeme.type == "COMMENT":
                wanted = BEFORE_COMMENT
            else:
                wanted = by_start[item.lexeme.start]
            if self.text[span.start : span.end] != wanted:
                edits.append(Edit(span, wanted))
            if item.lexeme.type == "COMMENT":
                edits.extend(self._comment(item.lexeme))
        if edits and self._reads_the_same(piece, words, roles, edits):
            yield from edits

    def _reads_the_same(
        self, piece: Piece, words: list[Lexeme], roles: list[Lexeme], edits: list[Edit]
    ) -> bool:
        start, end = piece.span
        moved = [Edit(Span(s - start, e - start), text) for (s, e), text in edits]
        again = [
            lexeme
            for lexeme in scan(applied(self.text[start:end], moved))
            if lexeme.type not in ("COMMENT", "NEWLINE")
        ]
        if [item.type for item in words] != [item.type for item in again]:
            return False
        return [item[:2] for item in roles] == [item[:2] for item in assign_roles(again)]


# --- Between two words ---------------------------------------------------------------------------

_SPACED = frozenset({"EQUAL", "COMPARE", "ARROW", "STAR"})
_TIGHT = frozenset({"CARET", "SLASH", "RANGE", "UNDERSCORE", "BAR", "SEMICOLON"})
_OPENING = frozenset({*OPENERS, "CALL", "ALPHABETS", "PIPE_OPEN"})
_CLOSING = frozenset({*CLOSERS, "PIPE_CLOSE"})
_OPERANDS = frozenset({"NAME", "NUMBER", "STRING", *_CLOSING})
_WORDS = frozenset(KEYWORDS.values()) | {"ARTICLE", "TOPIC"}


def _spaces(words: list[Lexeme], roles: list[Lexeme]) -> list[str]:
    """What stands between neighbours of one sentence, were it on one line."""
    compact = _compact_places(roles)
    loose_commas = _loose_commas(roles)
    spaces = []
    # `help …` is one topic, whatever it holds.
    if words[0].type == "HELP":
        return [" "] * (len(words) - 1)
    for place in range(1, len(roles)):
        left, right = roles[place - 1], roles[place]
        is_compact = place in compact
        spaces.append(_space(roles, place, left.type, right.type, is_compact, loose_commas))
    return spaces


def _space(
    roles: list[Lexeme], place: int, left: str, right: str, is_compact: bool, loose: set[int]
) -> str:
    if left in _TIGHT or right in _TIGHT or left in _OPENING or right in _CLOSING:
        return ""
    if right in ("COMMA", "NEXT", "COLON", "CALL", "ALPHABETS"):
        return ""
    if left == "NEXT" or left == "COLON":
        return " "
    if left == "COMMA":
        return " " if place - 1 in loose else ""
    if left == "MINUS" or left == "PLUS":
        if is_compact or not _is_behind_operand(roles, place - 1):
            return ""
        return " "
    if right == "MINUS" or right == "PLUS":
        if not is_compact:
            return " "
        return " " if left in _WORDS else ""
    if is_compact and (left in _SPACED or right in _SPACED):
        return ""
    return " "


def _is_behind_operand(roles: list[Lexeme], place: int) -> bool:
    return place > 0 and roles[place - 1].type in _OPERANDS


def _compact_places(roles: list[Lexeme]) -> set[int]:
    """The places inside subscripts and exponents, where sums take no spaces: `x_(j+1)`.

    The bindings of a `sum_` are no subscript.
    """
    compact: set[int] = set()
    stack: list[bool] = []
    for place, lexeme in enumerate(roles):
        if stack and stack[-1]:
            compact.add(place)
        if lexeme.type in _OPENING:
            before = roles[place - 1].type if place else ""
            is_big = place > 1 and roles[place - 2].type == "BIG"
            stack.append(
                (before in ("UNDERSCORE", "CARET") and not is_big)
                or (bool(stack) and stack[-1] and lexeme.type != "CALL")
            )
        elif lexeme.type in _CLOSING and stack:
            stack.pop()
    return compact


def _loose_commas(roles: list[Lexeme]) -> set[int]:
    """The commas with a space behind: between arguments, bindings, names; not inside an index."""
    loose: set[int] = set()
    stack: list[tuple[str, bool]] = []
    is_head = roles[0].type == "LET"  # `let c(a,b) =` names arguments as an index does
    for place, lexeme in enumerate(roles):
        if lexeme.type == "EQUAL":
            is_head = False
        if lexeme.type in _OPENING:
            is_big = place > 1 and roles[place - 2].type == "BIG"
            stack.append((lexeme.type, is_big))
        elif lexeme.type in _CLOSING and stack:
            stack.pop()
        elif lexeme.type == "COMMA":
            opener, is_big = stack[-1] if stack else ("", False)
            if not stack or is_big or (opener == "CALL" and not is_head):
                loose.add(place)
    return loose
