"""Source in, sentences, comments and diagnostics out; the only importer of lark. Never raises.

A text is split into sentences first (brackets, strings and comments are known by then), and each
sentence is parsed on its own, so that a broken one spoils only itself.
"""

from __future__ import annotations

import hashlib
import os
import re
import sys
from dataclasses import dataclass, field, replace
from functools import lru_cache
from math import gcd
from pathlib import Path
from typing import Any, Literal, NamedTuple

import lark
from lark.exceptions import UnexpectedToken

from spanwright_grammar import syntax
from spanwright_grammar.diagnostics import Diagnostic, error
from spanwright_grammar.lexing import CLOSERS, OPENERS, SENTENCE_WORDS, Lexeme, assign_roles, scan
from spanwright_grammar.source import Source, Span
from spanwright_grammar.vocabulary import by_kind

MAX_SENTENCE_LENGTH = 10**6  # characters; some ten seconds of parsing at worst
MAX_NESTING = 200  # far above what is written by hand, far below what exhausts Python's stack
MAX_DIGITS = 100_000
MAX_REPORTS = 3  # lexical findings a sentence; the rest would only repeat the first


# --- What parsing yields -------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Comment:
    """`# …`, or a recorded result `#= …`; the text is what stands behind the mark and one space."""

    text: str
    span: Span
    is_result: bool


@dataclass(frozen=True, slots=True)
class Chunk:
    """One sentence's stretch of the text: what it says, or, when it is broken, why it does not."""

    span: Span
    sentence: syntax.Sentence | None
    diagnostics: tuple[Diagnostic, ...] = ()


@dataclass(frozen=True, slots=True)
class Piece:
    """What was read between two sentence ends; a block is its header, its sentences, its `end`.

    `names` are those that a broken `let` was about to define.
    """

    span: Span
    role: Literal["sentence", "opens", "end"]
    sentence: syntax.Sentence | None
    diagnostics: tuple[Diagnostic, ...] = ()
    names: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Parsed:
    """A whole text, in the order in which it was written.

    `chunks` keeps broken sentences too; `pieces` has blocks taken apart, so that one broken
    sentence in a block leaves the others readable.
    """

    source: Source
    sentences: tuple[syntax.Sentence, ...]
    comments: tuple[Comment, ...]
    diagnostics: tuple[Diagnostic, ...]
    chunks: tuple[Chunk, ...]
    pieces: tuple[Piece, ...]


@dataclass(frozen=True)
class Segment:
    """A stretch of whole lines that is read the same wherever it stands; offsets are its own.

    `opens_with` is the type of its first lexeme, nothing when it holds none but comments;
    `is_closed` says that no sentence goes on behind it. Places in messages are still marked, see
    `placed`.
    """

    text: str
    pieces: tuple[Piece, ...]
    comments: tuple[Comment, ...]
    opens_with: str
    is_closed: bool


class ParseFailure(Exception):
    """Raised by `parse_expression` alone, with the diagnostics that say why."""

    def __init__(self, diagnostics: tuple[Diagnostic, ...]) -> None:
        super().__init__("; ".join(found.message for found in diagnostics))
        self.diagnostics = diagnostics


class Token(NamedTuple):
    """A stretch of text to be coloured as its kind."""

    kind: str
    start: int
    end: int


def parse(source: Source) -> Parsed:
    """Everything that a text says; whatever cannot be read becomes a diagnostic.

    >>> parse(Source("fix n = 3; x_1 E_201")).sentences[0]
    Fix('n', Number('3'))
    """
    split, comments = _split(source)
    pieces = [_parse_piece(source, piece) for piece in split]
    return assembled(
        source,
        [replace(p, diagnostics=tuple(placed(d, source) for d in p.diagnostics)) for p in pieces],
        comments,
    )


def assembled(source: Source, pieces: list[Piece], comments: list[Comment]) -> Parsed:
    """The pieces of a text put together: headers, bodies and `end`s become blocks."""
    chunks: list[Chunk] = []
    blocks: list[_Block] = []
    for piece in pieces:
        if piece.role == "end":
            if blocks:
                block = blocks.pop()
                _place(block.close(piece.span.end), blocks, chunks)
            else:
                lonely = error("end-without-block", piece.span, "`end` closes no block")
                chunks.append(Chunk(piece.span, None, (lonely,)))
            continue
        chunk = Chunk(piece.span, piece.sentence, piece.diagnostics)
        if piece.role == "sentence":
            _place(chunk, blocks, chunks)
            continue
        header = chunk.sentence if isinstance(chunk.sentence, syntax.For) else None
        if len(blocks) >= MAX_NESTING:
            header = None
        block = _Block(chunk.span, header, list(chunk.diagnostics))
        if len(blocks) == MAX_NESTING:
            block.diagnostics.append(_too_deep(piece.span))
        blocks.append(block)
    end = len(source.text)
    if blocks:
        line, column = source.position(blocks[-1].span.start)
        message = f"the block that `for` opens at line {line}, column {column} has no `end`"
        blocks[-1].diagnostics.append(error("unclosed-block", Span(end, end), message, "end"))
    while blocks:
        block = blocks.pop()
        block.header = None
        _place(block.close(end), blocks, chunks)
    return Parsed(
        source,
        tuple(chunk.sentence for chunk in chunks if chunk.sentence is not None),
        tuple(comments),
        tuple(sorted((found for chunk in chunks for found in chunk.diagnostics), key=_by_place)),
        tuple(chunks),
        tuple(pieces),
    )


def segments(text: str) -> list[Segment]:
    """The text cut at line ends where no sentence is open, each part read on its own.

    What `parse` says of the text is what `assembled` says of the parts' pieces, moved to their
    places.
    """
    splitter, _ = _run_splitter(Source(text))
    edges = [0, *(edge for edge in splitter.boundaries if edge < len(text)), len(text)]
    return [_read_segment(text[start:end]) for start, end in zip(edges, edges[1:]) if start < end]


def _read_segment(text: str) -> Segment:
    source = Source(text)
    splitter, comments = _run_splitter(source)
    pieces = tuple(_parse_piece(source, piece) for piece in splitter.pieces)
    first = splitter.pieces[0].lexemes[0].type if splitter.pieces else ""
    # A `;` in front keeps a sentence word from standing first in its line.
    if splitter.leads_with_separator:
        first = "SEMICOLON"
    return Segment(text, pieces, tuple(comments), first, splitter.is_closed)


def restarts(opens_with: str) -> bool:
    """Does a line that opens with this lexeme end whatever sentence is still open before it?"""
    return opens_with in _STARTS_SENTENCE_IN_BRACKETS


_MARKED_PLACE = re.compile("\0@([0-9]{1,9})\0")


def placed(found: Diagnostic, source: Source, offset: int = 0) -> Diagnostic:
    """A finding with span and marked places moved by an offset, and the marks resolved."""
    message = _MARKED_PLACE.sub(
        lambda mark: "line {}, column {}".format(*source.position(int(mark[1]) + offset)),
        found.message,
    )
    span = Span(found.span.start + offset, found.span.end + offset)
    if message == found.message and not offset:
        return found
    return replace(found, span=span, message=message)


def parse_expression(text: str) -> syntax.Expression:
    """The tree of one expression; raises `ParseFailure` when the text is anything else.

    >>> parse_expression("x_1")
    Subscripted('x', Number('1'))
    """
    parsed = parse(Source(text))
    if parsed.diagnostics:
        raise ParseFailure(parsed.diagnostics)
    if len(parsed.sentences) == 1:
        sentence = parsed.sentences[0]
        if isinstance(sentence, syntax.ExpressionSentence):
            return sentence.expression
    whole = Span(0, len(text))
    message = "expected one expression, found " + (
        f"{len(parsed.sentences)} sentences" if len(parsed.sentences) != 1 else "a sentence"
    )
    raise ParseFailure((error("unexpected-text", whole, message),))


def is_incomplete(text: str) -> bool:
    """Is the text a good beginning that needs another line: an open bracket, sign, or block?"""
    source = Source(text)
    pieces, _ = _split(source)
    if pieces and pieces[-1].is_open:
        return pieces[-1].begins_well
    n_blocks = 0
    for piece in pieces:
        n_blocks += piece.opens_block
        n_blocks -= bool(n_blocks and piece.is_end)
    return n_blocks > 0


def expected_after(text: str) -> frozenset[str]:
    """What may follow a beginning of one sentence, in words; empty when the beginning is wrong.

    >>> sorted(expected_after("find mu"))
    ['`in`']
    """
    pieces, _ = _split(Source(text))
    lexemes: list[Lexeme] = []
    if pieces:
        last = pieces[-1]
        if not last.begins_well:
            return frozenset()
        if last.is_open or not text[last.span.end :].strip():
            lexemes = last.lexemes
    feeding = _Feeding(assign_roles(lexemes))
    return frozenset(_WORDS[terminal] for terminal in feeding.accepts())


def tokens(text: str) -> tuple[Token, ...]:
    """Every visible stretch of a text with its kind, for colouring; whatever the text is.

    Kinds: number, name, keyword, family, operator, function, parameter, string, comment, result,
    punctuation, invalid.
    """
    lexemes = [lexeme for lexeme in scan(text) if lexeme.type != "NEWLINE"]
    found: list[Token] = []
    end = Lexeme("", "", -1, -1)
    padded = [*lexemes, end, end]
    for lexeme, after, later in zip(lexemes, padded[1:], padded[2:], strict=False):
        found.append(Token(_kind(lexeme, after, later), lexeme.start, lexeme.end))
    return tuple(found)


_LEXEME_KINDS = {
    "NUMBER": "number",
    "STRING": "string",
    "OPEN_STRING": "invalid",
    "INVALID": "invalid",
    "IN": "keyword",
}


@lru_cache(maxsize=1)
def _kinds_of_names() -> dict[str, frozenset[str]]:
    kinds = ("family", "operator", "function", "set", "parameter")
    return {
        kind: frozenset(name for entry in by_kind(kind) for name in (entry.name, *entry.aliases))
        for kind in kinds
    }


def _kind(lexeme: Lexeme, after: Lexeme, later: Lexeme) -> str:
    if lexeme.type == "COMMENT":
        return "result" if lexeme.text.startswith("#=") else "comment"
    if lexeme.type in _LEXEME_KINDS:
        return _LEXEME_KINDS[lexeme.type]
    if lexeme.type != "NAME":
        return "keyword" if lexeme.type.lower() == lexeme.text else "punctuation"
    kinds = _kinds_of_names()
    word = lexeme.text
    if after.type == "UNDERSCORE":
        is_family = word in kinds["family"]
        # s_1 is the reflection and s_(2,1) the Schur polynomial.
        if word in kinds["operator"] and not (is_family and later.type in OPENERS):
            return "operator"
        if word in ("sum", "prod"):
            return "keyword"
        return "family" if is_family else "name"
    if after.type == "LPAR" and after.start == lexeme.end:
        return "function"
    if word in kinds["parameter"]:
        return "parameter"
    return "operator" if word in kinds["operator"] and len(word) > 2 else "name"


# --- Splitting a text into sentences -------------------------------------------------------------

_CONTINUES = frozenset(
    {
        "PLUS", "MINUS", "STAR", "SLASH", "CARET", "EQUAL", "COMPARE", "COMMA", "IN", "AT", "AND",
        "OR", "NOT", "WHERE", "AS", "ARROW", "RANGE",
    }
)  # fmt: skip
_STARTS_SENTENCE = frozenset(word.upper() for word in SENTENCE_WORDS)
_STARTS_SENTENCE_IN_BRACKETS = _STARTS_SENTENCE - {"FOR"}
_SIGNS = {"LPAR": "(", "RPAR": ")", "LBRACE": "{", "RBRACE": "}", "LBRACKET": "[", "RBRACKET": "]"}


@dataclass(slots=True)
class _Piece:
    """The lexemes of one sentence, and what is already known to be wrong with it."""

    lexemes: list[Lexeme]
    problems: list[Diagnostic]
    is_open: bool = False  # ends in an open bracket or in a sign that asks for more

    @property
    def span(self) -> Span:
        return Span(self.lexemes[0].start, self.lexemes[-1].end)

    @property
    def opens_block(self) -> bool:
        return self.lexemes[0].type == "FOR" and self.lexemes[-1].type == "COLON"

    @property
    def is_end(self) -> bool:
        return len(self.lexemes) == 1 and self.lexemes[0].type == "END"

    @property
    def begins_well(self) -> bool:
        """Is this the beginning of a sentence, with nothing wrong but what is still missing?"""
        if any(found.code != "missing-bracket" for found in self.problems):
            return False
        return _Feeding(assign_roles(self.lexemes)).failed is None


@dataclass(slots=True)
class _Splitter:
    """The sentence that is being collected."""

    source: Source
    pieces: list[_Piece] = field(default_factory=list)
    lexemes: list[Lexeme] = field(default_factory=list)
    brackets: list[Lexeme] = field(default_factory=list)
    n_open: dict[str, int] = field(default_factory=lambda: dict.fromkeys(OPENERS, 0))
    problems: list[Diagnostic] = field(default_factory=list)
    boundaries: list[int] = field(default_factory=list)  # line ends at which no sentence is open
    is_closed: bool = True
    leads_with_separator: bool = False

    def report(self, code: str, span: Span, message: str, *hints: str) -> None:
        if len(self.problems) < MAX_REPORTS:
            self.problems.append(error(code, span, message, *hints))

    def finish(self, at: int, is_open: bool = False) -> None:
        """Close the sentence; a bracket that is still open is missing at the offset `at`."""
        if self.lexemes:
            is_open = is_open or bool(self.brackets)
            # Behind a wrong closing bracket, what is still open says nothing new.
            if self.brackets and not self.problems:
                opener = self.brackets[-1]
                due = _SIGNS[OPENERS[opener.type]]
                self.report(
                    "missing-bracket",
                    Span(at, at),
                    f"`{due}` is missing: `{_SIGNS[opener.type]}` was opened at "
                    f"{_where(opener.start)}",
                )
            self.pieces.append(_Piece(self.lexemes, self.problems, is_open))
        self.lexemes, self.brackets, self.problems = [], [], []
        self.n_open = dict.fromkeys(OPENERS, 0)

    def open(self, opener: Lexeme) -> None:
        self.brackets.append(opener)
        self.n_open[opener.type] += 1
        if len(self.brackets) == MAX_NESTING + 1:
            self.problems.append(_too_deep(Span(opener.start, opener.end)))

    def close(self, closer: Lexeme) -> None:
        """Close the nearest open bracket of this kind; when there is none, only report it."""
        wanted = CLOSERS[closer.type]
        if not self.brackets or self.brackets[-1].type != wanted:
            message = f"`{_SIGNS[closer.type]}` closes nothing"
            if self.brackets:
                opener = self.brackets[-1]
                message = (
                    f"`{_SIGNS[closer.type]}` stands where `{_SIGNS[OPENERS[opener.type]]}` is "
                    f"due: `{_SIGNS[opener.type]}` was opened at "
                    f"{_where(opener.start)}"
                )
            self.report("unmatched-bracket", Span(closer.start, closer.end), message)
        while self.n_open[wanted]:
            opener = self.brackets.pop()
            self.n_open[opener.type] -= 1
            if opener.type == wanted:
                return


def _split(source: Source) -> tuple[list[_Piece], list[Comment]]:
    """The text's sentences as lexemes, and its comments."""
    splitter, comments = _run_splitter(source)
    return splitter.pieces, comments


def _run_splitter(source: Source) -> tuple[_Splitter, list[Comment]]:
    splitter = _Splitter(source)
    comments: list[Comment] = []
    may_restart = False  # does the next lexeme stand first in a line, or behind a `;`?
    line_is_blank = True
    last_end = 0
    line_start = 0
    is_first_in_line = True
    for lexeme in scan(source.text):
        kind = lexeme.type
        current = splitter.lexemes
        if kind == "NEWLINE":
            if current:
                is_topic = current[0].type == "HELP"
                continues = current[-1].type in _CONTINUES and not (may_restart and line_is_blank)
                if is_topic or not (splitter.brackets or continues):
                    splitter.finish(last_end)
            line_start = lexeme.end
            if not splitter.lexemes:
                splitter.boundaries.append(line_start)
            may_restart = line_is_blank = is_first_in_line = True
            continue
        line_is_blank = False
        if kind == "COMMENT":
            is_result = lexeme.text.startswith("#=")
            text = lexeme.text[2 if is_result else 1 :].removeprefix(" ")
            comments.append(Comment(text, Span(lexeme.start, lexeme.end), is_result))
            continue
        if kind == "SEMICOLON" and (not splitter.brackets or current[0].type == "HELP"):
            if not (splitter.pieces or current):
                splitter.leads_with_separator = True
            splitter.finish(last_end)
            continue
        if may_restart and current:
            starts = _STARTS_SENTENCE_IN_BRACKETS if splitter.brackets else _STARTS_SENTENCE
            if kind in starts:
                splitter.finish(last_end)
                if is_first_in_line:
                    splitter.boundaries.append(line_start)
                current = splitter.lexemes
        may_restart = kind == "SEMICOLON"
        is_first_in_line = False
        last_end = lexeme.end
        if not (current and current[0].type == "HELP"):
            if kind in OPENERS:
                splitter.open(lexeme)
            elif kind in CLOSERS:
                splitter.close(lexeme)
            elif kind == "INVALID" or kind == "OPEN_STRING":
                _report_invalid(splitter, lexeme)
            elif kind == "NUMBER" and lexeme.end - lexeme.start > MAX_DIGITS:
                here = Span(lexeme.start, lexeme.end)
                message = f"a number of {lexeme.end - lexeme.start} digits; at most {MAX_DIGITS}"
                splitter.report("number-too-long", here, message)
        current.append(lexeme)
    current = splitter.lexemes
    asks_for_more = bool(current) and current[0].type != "HELP" and current[-1].type in _CONTINUES
    splitter.is_closed = not current or (splitter.boundaries[-1:] == [len(source.text)])
    splitter.finish(last_end, asks_for_more)
    return splitter, comments


def _report_invalid(splitter: _Splitter, lexeme: Lexeme) -> None:
    here = Span(lexeme.start, lexeme.end)
    text = splitter.source.slice(here)
    if lexeme.type == "OPEN_STRING":
        closed = f'{text.rstrip()}"'
        hints = (closed,) if len(closed) < 60 else ()
        splitter.report("unclosed-string", here, 'the string has no closing `"`', *hints)
    elif text.startswith("\\") and len(text) > 1:
        splitter.report(
            "unknown-symbol", here, f"`{text}` names no symbol of the language", text[1:]
        )
    elif text == "." and splitter.lexemes and splitter.lexemes[-1].type == "NUMBER":
        whole = splitter.lexemes[-1]
        decimals = re.compile(r"[0-9]{1,12}").match(splitter.source.text, here.end)
        hints = ()
        if decimals and whole.end == here.start and whole.end - whole.start <= 12:
            value, unit = int(whole.text + decimals.group()), 10 ** len(decimals.group())
            common = gcd(value, unit)
            hints = (f"{value // common}/{unit // common}",)
        splitter.report("decimal-number", here, "numbers are exact: write a fraction", *hints)
    else:
        shown = f"`{text}`" if text.isprintable() else f"the character U+{ord(text[0]):04X}"
        replacement = _INSTEAD.get(text)
        splitter.report(
            "invalid-character",
            here,
            "a byte that is not UTF-8 stands here"
            if text == "\ufffd"  # what such a byte is read as
            else f"{shown} has no meaning here",
            *([replacement] if replacement else []),
        )


_INSTEAD = {
    **{sign: f"^{digit}" for digit, sign in enumerate("⁰¹²³⁴⁵⁶⁷⁸⁹")},
    **{sign: f"_{digit}" for digit, sign in enumerate("₀₁₂₃₄₅₆₇₈₉")},
    "⁻": "^-1",
    "×": "*",
    "÷": "/",
    "~": "a space",
    "'": '"',
    "&": "and",
    "!": "not",
    "¬": "not",
    "∧": "and",
    "∨": "or",
    "“": '"',
    "”": '"',
    "½": "1/2",
    "%": "# for a comment",
    "$": "the formula without `$`",
    ".": "1..n for a range",
}  # fmt: skip


def _where(offset: int) -> str:
    """A mark that `placed` turns into line and column."""
    return f"\0@{offset}\0"


def _by_place(found: Diagnostic) -> Span:
    return found.span


def _too_deep(span: Span) -> Diagnostic:
    return error(
        "nesting-too-deep",
        span,
        f"more than {MAX_NESTING} levels of brackets or prefixes",
        "let f = … for the inner part",
    )


# --- From a sentence's lexemes to its tree -------------------------------------------------------


@dataclass(slots=True)
class _Block:
    """A `for … :` that waits for its `end`; without a header when the header itself is broken."""

    span: Span
    header: syntax.For | None
    diagnostics: list[Diagnostic]
    body: list[syntax.Sentence] = field(default_factory=list)

    def close(self, end: int) -> Chunk:
        """The whole block; nothing of it stands when a part of it is broken."""
        span = Span(self.span.start, end)
        if self.header is not None and not self.diagnostics and not self.body:
            message = "the block has no sentence between `for` and `end`"
            self.diagnostics.append(error("unexpected-end", Span(end, end), message))
        if self.header is None or self.diagnostics:
            return Chunk(span, None, tuple(self.diagnostics))
        return Chunk(span, replace(self.header, body=tuple(self.body), span=span))


def _place(chunk: Chunk, blocks: list[_Block], chunks: list[Chunk]) -> None:
    """Put a finished sentence where it belongs: into the innermost open block, or at the top."""
    if not blocks:
        chunks.append(chunk)
        return
    blocks[-1].diagnostics.extend(chunk.diagnostics)
    if chunk.sentence is not None:
        blocks[-1].body.append(chunk.sentence)


def _parse_piece(source: Source, piece: _Piece) -> Piece:
    if piece.is_end:
        return Piece(piece.span, "end", None, tuple(piece.problems))
    chunk = _parse_chunk(source, piece)
    role: Literal["sentence", "opens"] = "opens" if piece.opens_block else "sentence"
    names = _names_of_broken(piece.lexemes) if chunk.sentence is None else ()
    return Piece(chunk.span, role, chunk.sentence, chunk.diagnostics, names)


def _names_of_broken(lexemes: list[Lexeme]) -> tuple[str, ...]:
    if len(lexemes) > 1 and lexemes[0].type == "LET" and lexemes[1].type == "NAME":
        names = [lexemes[1].text]
        for comma, name in zip(lexemes[2::2], lexemes[3::2]):
            if comma.type != "COMMA" or name.type != "NAME":
                break
            names.append(name.text)
        return tuple(names)
    return ()


def _parse_chunk(source: Source, piece: _Piece) -> Chunk:
    span = piece.span
    if span.end - span.start > MAX_SENTENCE_LENGTH:
        message = f"a sentence of {span.end - span.start} characters; at most {MAX_SENTENCE_LENGTH}"
        return Chunk(span, None, (error("input-too-long", span, message),))
    if piece.problems:
        return Chunk(span, None, tuple(piece.problems))
    lexemes = assign_roles(piece.lexemes)
    deep = _deep_prefix(lexemes)
    if deep is not None:
        return Chunk(span, None, (_too_deep(Span(deep.start, deep.end)),))
    feeding = _Feeding(lexemes)
    if feeding.failed is None:
        sentence = feeding.finish()
        if sentence is not None:
            if isinstance(sentence, syntax.Help) and sentence.topic is not None:
                topic = " ".join(source.text[lexemes[1].start : lexemes[1].end].split())
                if len(piece.lexemes) == 2 and piece.lexemes[1].type == "NAME":
                    topic = piece.lexemes[1].text
                sentence = replace(sentence, topic=topic)
            return Chunk(span, sentence)
    return Chunk(span, None, (_explain(source, lexemes, feeding),))


_RESETS_POSTFIX = frozenset({"COMMA", "AND", "OR", "SEMICOLON", "FOR", "WHERE"})
_RESETS = _RESETS_POSTFIX | {"PLUS", "MINUS", "EQUAL", "COMPARE", "IN"}


def _deep_prefix(lexemes: list[Lexeme]) -> Lexeme | None:
    """The lexeme at which brackets, prefixes (`not`, `[E_mu]`, `sum_`) and postfixes (`at`, `as`)
    together pass the nesting limit, if one does."""
    n_prefixes = sum(lexeme.type in _PREFIXES_AND_BIG for lexeme in lexemes)
    n_brackets = sum(lexeme.type in _OPENING for lexeme in lexemes)
    if n_prefixes + n_brackets <= MAX_NESTING:
        return None
    frames = [[0, 0]]
    total = 0
    previous = ""
    for lexeme in lexemes:
        kind = lexeme.type
        frame = frames[-1]
        if kind in _OPENING:
            frames.append([0, 0])
            total += 1
        elif kind in _CLOSING and len(frames) > 1:
            total -= 1 + sum(frames.pop())
            if kind == "RBRACKET":
                frames[-1][0] += 1
                total += 1
        elif kind == "NOT" or kind == "BIG":
            frame[0] += 1
            total += 1
        elif kind == "AT" or kind == "AS":
            frame[1] += 1
            total += 1
        elif kind == "COLON":
            total += 1
        elif kind in _RESETS and not (kind == "MINUS" and previous == "CARET"):
            total -= frame[0]
            frame[0] = 0
            if kind in _RESETS_POSTFIX:
                total -= frame[1]
                frame[1] = 0
        if total > MAX_NESTING:
            return lexeme
        previous = kind
    return None


_PREFIXES_AND_BIG = frozenset({"NOT", "AT", "AS", "COLON", "BIG"})
_OPENING = frozenset({"LPAR", "LBRACE", "LBRACKET", "CALL", "ALPHABETS", "PIPE_OPEN"})
_CLOSING = frozenset({"RPAR", "RBRACE", "RBRACKET", "PIPE_CLOSE"})


class _Feeding:
    """One run of the parser over a sentence's lexemes; `failed` is the first that does not fit."""

    __slots__ = ("_interactive", "_lexemes", "failed", "position")

    def __init__(self, lexemes: list[Lexeme]) -> None:
        self._lexemes = lexemes
        self._interactive = _parser().parse_interactive()
        self.failed: Lexeme | None = None
        self.position = 0
        feed: Any = self._interactive.parser_state.feed_token
        try:
            for lexeme in lexemes:
                feed(lexeme)
                self.position += 1
        except UnexpectedToken:
            self.failed = lexemes[self.position]

    def finish(self) -> syntax.Sentence | None:
        """The sentence, or nothing when it cannot end here."""
        # A copy ends here, so that `accepts` can still be asked.
        state: Any = self._interactive.parser_state.copy(deepcopy_values=False)
        try:
            sentence: syntax.Sentence = state.feed_token(Lexeme("$END", "", -1, -1), True)
        except UnexpectedToken:
            return None
        return sentence

    def accepts(self) -> set[str]:
        """The terminals that may come next, or might have come in place of the one that failed.

        The failing terminal has already made the parser reduce, which narrows what it accepts, so
        the beginning is fed to a fresh one.
        """
        if self.failed is not None:
            return _Feeding(self._lexemes[: self.position]).accepts()
        accepted: set[str] = self._interactive.accepts()  # type: ignore[no-untyped-call]
        return accepted


def _cache_folder() -> Path:
    named = os.environ.get("SPANWRIGHT_CACHE")
    if named:
        return Path(named)
    base = os.environ.get("XDG_CACHE_HOME")
    return (Path(base) if base else Path("~/.cache").expanduser()) / "spanwright"


@lru_cache(maxsize=1)
def _parser() -> lark.Lark:
    """The parser, its tables read from the user's cache folder when they are there."""
    grammar = Path(__file__).with_name("language.lark").read_text(encoding="utf-8")
    key = hashlib.sha256(grammar.encode()).hexdigest()[:16]
    version = f"{lark.__version__}-{sys.version_info.major}.{sys.version_info.minor}"
    cache: str | bool = False
    try:
        folder = _cache_folder()
        folder.mkdir(parents=True, exist_ok=True)
        if os.access(folder, os.W_OK):
            cache = str(folder / f"language-{key}-{version}.tables")
    except (OSError, RuntimeError):
        cache = False
    return lark.Lark(
        grammar,
        parser="lalr",
        lexer="basic",
        start="sentence",
        maybe_placeholders=False,
        transformer=_Builder(),
        cache=cache,
    )


# --- Messages ------------------------------------------------------------------------------------

_WORDS: dict[str, str] = {
    "NUMBER": "a number", "NAME": "a name", "STRING": "a string", "TOPIC": "a topic",
    "CALL": "`(`", "ALPHABETS": "`(`", "LPAR": "`(`", "RPAR": "`)`", "LBRACE": "`{`",
    "RBRACE": "`}`", "LBRACKET": "`[`", "RBRACKET": "`]`", "NEXT": "`,`", "COMMA": "`,`",
    "BIG": "`sum_`", "PIPE_OPEN": "`|`", "PIPE_CLOSE": "`|`", "BAR": "`|`",
    "COMPARE": "a comparison", "ARTICLE": "`a`", "PLUS": "`+`", "MINUS": "`-`", "STAR": "`*`",
    "SLASH": "`/`", "CARET": "`^`", "EQUAL": "`=`", "RANGE": "`..`", "ARROW": "`->`",
    "SEMICOLON": "`;`", "COLON": "`:`", "UNDERSCORE": "`_`", "$END": "the end of the sentence",
    **{
        word.upper(): f"`{word}`"
        for word in (
            "fix", "let", "be", "parameter", "parameters", "expand", "in", "claim", "for",
            "where", "find", "tabulate", "derive", "draw", "show", "as", "write", "to", "guess",
            "use", "recall", "forget", "remark", "help", "quit", "at", "and", "or", "not", "read",
        )
    },
}  # fmt: skip

_STARTS_EXPRESSION = frozenset({"NUMBER", "NAME", "LPAR"})
_ALL_THAT_START_AN_EXPRESSION = _STARTS_EXPRESSION | {
    "STRING", "READ", "LBRACE", "LBRACKET", "BIG", "PIPE_OPEN", "MINUS", "NOT",
}  # fmt: skip
_ALWAYS_BEHIND_AN_OPERAND = _ALL_THAT_START_AN_EXPRESSION | {
    "PLUS", "STAR", "SLASH", "CARET", "RANGE", "UNDERSCORE", "CALL", "ALPHABETS", "NEXT",
}  # fmt: skip
_BEHIND_A_WHOLE_EXPRESSION = frozenset({"EQUAL", "COMPARE", "IN", "AND", "OR", "AT", "AS"})
_COMPARISONS = frozenset({"EQUAL", "COMPARE", "IN"})


def _in_words(accepted: set[str]) -> str:
    """At most five things that may come next, the telling ones first."""
    rest = accepted - {"$END"}
    general = ""
    if "PLUS" in accepted:
        # Behind an operand a factor or a sign is always possible, and hardly ever what was meant.
        general = "an operator"
        rest -= _ALWAYS_BEHIND_AN_OPERAND
        rest -= _BEHIND_A_WHOLE_EXPRESSION if "COMPARE" in accepted else {"AT", "AND", "OR"}
        if len(rest) > 1:
            rest -= {"AS"}
    elif rest >= _STARTS_EXPRESSION:
        general = "an expression"
        rest -= _ALL_THAT_START_AN_EXPRESSION
        if "FIX" in rest:
            general, rest = "a sentence", set()
    named = sorted({_WORDS[terminal] for terminal in rest})
    if general:
        named.insert(len(named) if general == "an operator" else 0, general)
    named = named[:4]
    if "$END" in accepted:
        named.append(_WORDS["$END"])
    return named[0] if len(named) == 1 else ", ".join(named[:-1]) + " or " + named[-1]


def _explain(source: Source, lexemes: list[Lexeme], feeding: _Feeding) -> Diagnostic:
    """Why the run of the parser failed, where, and what would be right."""
    accepted = feeding.accepts()
    expected = _in_words(accepted)
    failed = feeding.failed
    if failed is None:
        end = lexemes[-1].end
        last = source.text[lexemes[-1].start : end]
        shown = f" after `{last}`" if len(last) <= 40 else ""
        message = f"the sentence ends too early: expected {expected}{shown}"
        hints: tuple[str, ...] = ()
        if lexemes[-1].type == "COLON":
            hints = ("a block stands on lines of its own: for … :",)
        return error("unexpected-end", Span(end, end), message, *hints)
    here = Span(failed.start, failed.end)
    found = source.slice(here)
    found = f"`{found}`" if len(found) <= 40 else f"`{found[:37]}…`"
    before = lexemes[feeding.position - 1] if feeding.position else failed
    code, reason, hint = "unexpected-text", f"expected {expected}, found {found}", ""
    if failed.type == "CARET" and before.type in ("NUMBER", "NAME", "RPAR", "RBRACE"):
        code, reason = "chained-power", "a power of a power needs parentheses"
        hint = "(a^b)^c or a^(b^c)"
    elif failed.type == "EQUAL" and before.type == "EQUAL" and before.end == failed.start:
        reason, hint = "equality is written with one `=`", "="
    elif failed.type == "STAR" and before.type == "STAR" and before.end == failed.start:
        reason, hint = "a power is written with `^`", "^"
    elif failed.type == "EQUAL" and before.type == "COLON":
        reason, hint = "a definition is written with `=`", "let f = …"
    elif failed.type in _COMPARISONS and "AND" in accepted:
        code, reason = "chained-comparison", "comparisons are joined by `and`"
        hint = "a < b and b < c"
    elif failed.type == "MINUS" and before.type == "UNDERSCORE":
        reason, hint = "a negative index stands in parentheses", f"{lexemes[0].text}_(-1)"
        if feeding.position >= 2:
            hint = f"{lexemes[feeding.position - 2].text}_(-1)"
    elif (
        failed.type.lower() == failed.text
        and "NAME" in accepted
        and "PLUS" not in accepted
        and ("NUMBER" in accepted or before.type in ("LET", "FOR", "COMMA"))
    ):
        code = "reserved-word"
        reason = f"{found} is a word of the language; expected {expected}"
    return error(code, here, reason, *([hint] if hint else []))


# --- The parser's callbacks: one for each rule and alias of language.lark ------------------------

_ESCAPE = re.compile(r'\\(["\\])')


def _unquoted(lexeme: Lexeme) -> str:
    return _ESCAPE.sub(r"\1", lexeme.text[1:-1])


def _texts(lexemes: list[Lexeme]) -> tuple[str, ...]:
    return tuple(lexeme.text for lexeme in lexemes)


def _over(first: Any, last: Any) -> Span:
    """The span from the start of a lexeme or node to the end of another."""
    start = first.start if type(first) is Lexeme else first.span.start
    end = last.end if type(last) is Lexeme else last.span.end
    return Span(start, end)


class _Builder:
    """Builds the tree bottom-up while the parser runs; lists grow in place and are frozen once."""

    # Lists.

    def start_list(self, children: list[Any]) -> list[Any]:
        return [children[0]]

    def extend_list(self, children: list[Any]) -> list[Any]:
        items: list[Any] = children[0]
        items.append(children[2])
        return items

    def start_pair(self, children: list[Any]) -> list[Any]:
        return [children[0], children[2]]

    def only_child(self, children: list[Any]) -> Any:
        return children[0]

    # Sentences.

    def for_header(self, children: list[Any]) -> syntax.For:
        _, bindings, condition, colon = children
        return syntax.For(tuple(bindings), condition, (), True, _over(children[0], colon))

    def for_line(self, children: list[Any]) -> syntax.For:
        first, bindings, condition, _, body = children
        return syntax.For(tuple(bindings), condition, (body,), False, _over(first, body))

    def fix(self, children: list[Any]) -> syntax.Fix:
        first, name, _, value = children
        return syntax.Fix(name.text, value, _over(first, value))

    def let_value(self, children: list[Any]) -> syntax.LetValue:
        first, name, _, value = children
        return syntax.LetValue(name.text, value, _over(first, value))

    def let_function(self, children: list[Any]) -> syntax.LetFunction:
        first, name, _, names, _, _, value = children
        return syntax.LetFunction(name.text, _texts(names), value, _over(first, value))

    def let_family_name(self, children: list[Any]) -> syntax.LetFamily:
        first, name, _, index, _, value = children
        return syntax.LetFamily(name.text, (index.text,), True, value, _over(first, value))

    def let_family(self, children: list[Any]) -> syntax.LetFamily:
        first, name, _, _, names, _, _, value = children
        pattern = _texts(names)
        span = _over(first, value)
        return syntax.LetFamily(name.text, pattern, len(pattern) == 1, value, span)

    def let_parameters(self, children: list[Any]) -> syntax.LetParameters:
        return syntax.LetParameters(_texts(children[1]), _over(children[0], children[-1]))

    def bare_expression(self, children: list[Any]) -> syntax.ExpressionSentence:
        return syntax.ExpressionSentence(children[0], children[0].span)

    def expand(self, children: list[Any]) -> syntax.Expand:
        first, expression, _, names = children
        return syntax.Expand(expression, _texts(names), _over(first, names[-1]))

    def claim(self, children: list[Any]) -> syntax.Claim:
        return syntax.Claim(children[1], _over(children[0], children[1]))

    def claim_for(self, children: list[Any]) -> syntax.For:
        first, statement, _, bindings, condition = children
        claim = syntax.Claim(statement, _over(first, statement))
        span = _over(first, condition or bindings[-1])
        return syntax.For(tuple(bindings), condition, (claim,), False, span)

    def find(self, children: list[Any]) -> syntax.Find:
        first, bindings, condition = children
        return syntax.Find(tuple(bindings), condition, _over(first, condition or bindings[-1]))

    def tabulate(self, children: list[Any]) -> syntax.Tabulate:
        first, expression, _, bindings, condition = children[:5]
        path = _unquoted(children[6]) if len(children) > 5 else None
        last = children[6] if len(children) > 5 else condition or bindings[-1]
        return syntax.Tabulate(expression, tuple(bindings), condition, path, _over(first, last))

    def derive(self, children: list[Any]) -> syntax.Derive:
        return syntax.Derive(children[1], (), _over(children[0], children[1]))

    def derive_in(self, children: list[Any]) -> syntax.Derive:
        first, expression, _, names = children
        return syntax.Derive(expression, _texts(names), _over(first, names[-1]))

    def draw(self, children: list[Any]) -> syntax.Draw:
        path = _unquoted(children[3]) if len(children) > 2 else None
        return syntax.Draw(children[1], path, _over(children[0], children[-1]))

    def show(self, children: list[Any]) -> syntax.Show:
        form = children[3].text if len(children) > 2 else "text"
        return syntax.Show(children[1], form, _over(children[0], children[-1]))

    def write(self, children: list[Any]) -> syntax.Write:
        first, expression, _, form, _, path = children
        return syntax.Write(expression, form.text, _unquoted(path), _over(first, path))

    def guess(self, children: list[Any]) -> syntax.Guess:
        first, expression, _, bindings = children
        return syntax.Guess(expression, tuple(bindings), _over(first, bindings[-1]))

    def use(self, children: list[Any]) -> syntax.Use:
        return syntax.Use(_unquoted(children[1]), _over(children[0], children[1]))

    def recall(self, children: list[Any]) -> syntax.Recall:
        subject = children[1] if len(children) > 1 else None
        return syntax.Recall(subject, _over(children[0], children[-1]))

    def forget(self, children: list[Any]) -> syntax.Forget:
        return syntax.Forget(tuple(children[1]), _over(children[0], children[1][-1]))

    def remark(self, children: list[Any]) -> syntax.Remark:
        return syntax.Remark(_unquoted(children[1]), _over(children[0], children[1]))

    def help(self, children: list[Any]) -> syntax.Help:
        topic = children[1].text if len(children) > 1 else None
        return syntax.Help(topic, _over(children[0], children[-1]))

    def quit(self, children: list[Any]) -> syntax.Quit:
        return syntax.Quit(_over(children[0], children[0]))

    # Bindings.

    def binding(self, children: list[Any]) -> syntax.Binding:
        name, _, domain = children
        return syntax.Binding(name.text, domain, _over(name, domain))

    def no_condition(self, children: list[Any]) -> None:
        return None

    def condition(self, children: list[Any]) -> Any:
        return children[1]

    # Truth values, specialisation, range.

    def disjunction(self, children: list[Any]) -> syntax.Disjunction:
        operands = children[0]
        return syntax.Disjunction(tuple(operands), _over(operands[0], operands[-1]))

    def conjunction(self, children: list[Any]) -> syntax.Conjunction:
        operands = children[0]
        return syntax.Conjunction(tuple(operands), _over(operands[0], operands[-1]))

    def negation(self, children: list[Any]) -> syntax.Negation:
        return syntax.Negation(children[1], _over(children[0], children[1]))

    def comparison(self, children: list[Any]) -> syntax.Comparison:
        left, operator, right = children
        return syntax.Comparison(left, operator.text, right, _over(left, right))

    def specialise(self, children: list[Any]) -> syntax.Specialise:
        operand, _, substitutions = children
        span = _over(operand, substitutions[-1])
        return syntax.Specialise(operand, tuple(substitutions), span)

    def substitution(self, children: list[Any]) -> syntax.Substitution:
        target, _, value = children
        return syntax.Substitution(target, value, _over(target, value))

    def limit(self, children: list[Any]) -> syntax.Limit:
        operand, _, variable, _, target = children
        return syntax.Limit(operand, variable, target, _over(operand, target))

    def range(self, children: list[Any]) -> syntax.Range:
        low, _, high = children
        return syntax.Range(low, high, _over(low, high))

    # Sums and products. A list's first item stays bare until there is a second.

    def sum(self, children: list[Any]) -> syntax.Expression:
        terms: list[Any] = children[0]
        first = terms[0]
        if type(first) is not syntax.Term:
            if len(terms) == 1:
                only: syntax.Expression = first
                return only
            terms[0] = syntax.Term(1, first, first.span)
        return syntax.Sum(tuple(terms), _over(terms[0], terms[-1]))

    def first_term(self, children: list[Any]) -> list[Any]:
        return [children[0]]

    def first_negative(self, children: list[Any]) -> list[Any]:
        sign, node = children
        return [syntax.Term(-1, node, Span(sign.start, node.span.end))]

    def next_term(self, children: list[Any]) -> list[Any]:
        terms, sign, node = children
        value = 1 if sign.type == "PLUS" else -1
        terms.append(syntax.Term(value, node, Span(sign.start, node.span.end)))
        result: list[Any] = terms
        return result

    def product(self, children: list[Any]) -> syntax.Expression:
        factors: list[Any] = children[0]
        first = factors[0]
        if len(factors) == 1:
            only: syntax.Expression = first
            return only
        factors[0] = syntax.Factor("", first, first.span)
        return syntax.Product(tuple(factors), _over(first, factors[-1]))

    def product_before_prefix(self, children: list[Any]) -> syntax.Expression:
        if len(children) == 2:
            return self.product([self.next_factor(children)])
        return self.product([self.signed_factor(children)])

    def first_factor(self, children: list[Any]) -> list[Any]:
        return [children[0]]

    def next_factor(self, children: list[Any]) -> list[Any]:
        factors: list[Any] = children[0]
        node = children[1]
        factors.append(syntax.Factor("", node, node.span))
        return factors

    def signed_factor(self, children: list[Any]) -> list[Any]:
        factors: list[Any] = children[0]
        _, sign, node = children
        factors.append(syntax.Factor(sign.text, node, Span(sign.start, node.span.end)))
        return factors

    def coefficient(self, children: list[Any]) -> syntax.Coefficient:
        first, element, _, operand = children
        return syntax.Coefficient(element, operand, _over(first, operand))

    def big(self, children: list[Any]) -> syntax.BigOperator:
        first, _, _, bindings, condition, _, body = children
        span = _over(first, body)
        return syntax.BigOperator(first.text, tuple(bindings), condition, body, span)

    def power(self, children: list[Any]) -> syntax.Power:
        base, _, exponent = children
        return syntax.Power(base, exponent, _over(base, exponent))

    def negative_power(self, children: list[Any]) -> syntax.Power:
        base, _, sign, exponent = children
        span = Span(sign.start, exponent.span.end)
        negative = syntax.Sum((syntax.Term(-1, exponent, span),), span)
        return syntax.Power(base, negative, _over(base, exponent))

    # Atoms.

    def number(self, children: list[Any]) -> syntax.Number:
        lexeme = children[0]
        return syntax.Number(lexeme.text, Span(lexeme.start, lexeme.end))

    def name(self, children: list[Any]) -> syntax.Name:
        lexeme = children[0]
        return syntax.Name(lexeme.text, Span(lexeme.start, lexeme.end))

    def string(self, children: list[Any]) -> syntax.String:
        lexeme = children[0]
        return syntax.String(_unquoted(lexeme), Span(lexeme.start, lexeme.end))

    def read_file(self, children: list[Any]) -> syntax.ReadFile:
        return syntax.ReadFile(_unquoted(children[1]), _over(children[0], children[1]))

    def parentheses(self, children: list[Any]) -> syntax.Expression:
        opener, items, closer = children
        span = Span(opener.start, closer.end)
        return syntax.Tuple(tuple(items), span) if len(items) > 1 else syntax.Group(items[0], span)

    def set_display(self, children: list[Any]) -> syntax.SetDisplay:
        opener, items, closer = children
        return syntax.SetDisplay(tuple(items), Span(opener.start, closer.end))

    def empty_set(self, children: list[Any]) -> syntax.SetDisplay:
        return syntax.SetDisplay((), _over(children[0], children[1]))

    def size(self, children: list[Any]) -> syntax.Size:
        return syntax.Size(children[1], _over(children[0], children[2]))

    def call(self, children: list[Any]) -> syntax.Call:
        name = children[0]
        arguments = tuple(children[2]) if len(children) > 3 else ()
        return syntax.Call(name.text, arguments, _over(name, children[-1]))

    def call_over(self, children: list[Any]) -> syntax.Call:
        name, _, body, _, bindings, condition, closer = children
        inner = _over(body, condition or bindings[-1])
        over = syntax.Comprehension(body, tuple(bindings), condition, inner)
        return syntax.Call(name.text, (over,), _over(name, closer))

    def alphabets(self, children: list[Any]) -> syntax.Alphabets:
        element, _, first, _, second, closer = children
        return syntax.Alphabets(element, first, second, _over(element, closer))

    def subscript_number(self, children: list[Any]) -> syntax.Subscripted:
        head, _, index = children
        return syntax.Subscripted(head.text, self.number([index]), _over(head, index))

    def subscript_name(self, children: list[Any]) -> syntax.Subscripted:
        head, _, index = children
        return syntax.Subscripted(head.text, self.name([index]), _over(head, index))

    def subscript_index(self, children: list[Any]) -> syntax.Subscripted:
        head, _, opener, items = children[:4]
        closer = children[-1]
        index: syntax.Expression
        if len(children) > 5:
            permutation = children[5]
            inside = _over(items[0], items[-1])
            whole = items[0] if len(items) == 1 else syntax.Tuple(tuple(items), inside)
            index = syntax.Basement(whole, permutation, _over(items[0], permutation))
        else:
            index = self.parentheses([opener, items, closer])
        return syntax.Subscripted(head.text, index, _over(head, closer))
