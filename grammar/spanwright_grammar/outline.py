"""The shape of a text: its definitions, its folds, what a selection grows to, its links."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import NamedTuple

from spanwright_grammar import syntax
from spanwright_grammar.bindings import defined_names, header_names
from spanwright_grammar.document import Document, PlacedPiece
from spanwright_grammar.lexing import scan
from spanwright_grammar.source import Span


@dataclass(frozen=True, slots=True)
class Symbol:
    """A definition or a block: its name, what it is, all of it, its name, what it holds."""

    name: str
    kind: str  # "value", "function", "family", "parameter", "block"
    span: Span
    name_span: Span
    detail: str = ""
    children: list[Symbol] = field(default_factory=list)


class Fold(NamedTuple):
    """Lines, from 1, that fold into the first of them."""

    first_line: int
    last_line: int
    kind: str  # "block", "comment" or "sentence"


class Link(NamedTuple):
    """The path of a `use`, and where it stands, quotation marks left out."""

    span: Span
    path: str


_KINDS: dict[type[syntax.Sentence], str] = {
    syntax.LetValue: "value",
    syntax.LetFunction: "function",
    syntax.LetFamily: "family",
    syntax.LetParameters: "parameter",
}


def symbols(document: Document) -> list[Symbol]:
    """The definitions of a text, those in blocks below their block."""
    top: list[Symbol] = []
    levels = [top]
    open_blocks: list[tuple[Symbol, list[Symbol]]] = []
    for placed in document.pieces():
        piece = placed.piece
        if piece.role == "end":
            if open_blocks:
                levels.pop()
                block, siblings = open_blocks.pop()
                span = Span(block.span.start, placed.span.end)
                siblings.append(
                    Symbol(block.name, "block", span, block.name_span, "", block.children)
                )
            continue
        levels[-1].extend(_definitions(placed))
        if piece.role == "opens":
            title = " ".join(document.text[slice(*placed.span)].rstrip(": ").split())
            block = Symbol(title, "block", placed.span, placed.span)
            open_blocks.append((block, levels[-1]))
            levels.append(block.children)
    while open_blocks:
        block, siblings = open_blocks.pop()
        siblings.append(block)
    return top


def _definitions(placed: PlacedPiece) -> Iterator[Symbol]:
    piece = placed.piece
    sentence = piece.sentence
    if isinstance(
        sentence, syntax.LetValue | syntax.LetFunction | syntax.LetFamily | syntax.LetParameters
    ):
        detail = " ".join(placed.text[slice(*piece.span)].split())
        names = header_names(sentence, placed.text)
        n_defined = len(names) if isinstance(sentence, syntax.LetParameters) else 1
        for lexeme in names[:n_defined]:
            where = Span(lexeme.start + placed.offset, lexeme.end + placed.offset)
            yield Symbol(lexeme.text, _KINDS[type(sentence)], placed.span, where, detail)
    else:
        for name in defined_names(piece):
            yield Symbol(name, "value", placed.span, placed.span)


def folds(document: Document) -> list[Fold]:
    """Blocks, comments of several lines, and sentences of several lines."""
    source = document.source
    found: list[Fold] = []

    def add(start: int, end: int, kind: str) -> None:
        first, last = source.position(start)[0], source.position(end)[0]
        if last > first:
            found.append(Fold(first, last, kind))

    blocks: list[int] = []
    for placed in document.pieces():
        start, end = placed.span
        if placed.piece.role == "opens":
            blocks.append(start)
        elif placed.piece.role == "end" and blocks:
            add(blocks.pop(), end, "block")
        add(start, end, "sentence")
    run: list[Span] = []
    for comment in document.comments():
        line, column = source.position(comment.span.start)
        stands_alone = not source.line_text(line)[: column - 1].strip()
        if run and not (stands_alone and line == source.position(run[-1].start)[0] + 1):
            add(run[0].start, run[-1].end, "comment")
            run = []
        if stands_alone:
            run.append(comment.span)
    if run:
        add(run[0].start, run[-1].end, "comment")
    return sorted(found)


def selections(document: Document, offset: int) -> list[Span]:
    """What a selection at an offset grows to, from the word to the whole text."""
    spans = [Span(0, len(document.text))]
    blocks: list[int] = []
    closed: list[tuple[int, int]] = []
    for placed in document.pieces():
        if placed.piece.role == "opens":
            blocks.append(placed.span.start)
        elif placed.piece.role == "end" and blocks:
            closed.append((blocks.pop(), placed.span.end))
        start, end = placed.span
        if start <= offset <= end:
            spans.append(placed.span)
            if placed.piece.sentence is not None:
                path = syntax.path_to(placed.piece.sentence, offset - placed.offset)
                spans.extend(
                    Span(node.place.start + placed.offset, node.place.end + placed.offset)
                    for node in path
                )
    spans.extend(Span(*pair) for pair in closed if pair[0] <= offset <= pair[1])
    text, begin = document.around(offset)
    touching = [
        Span(lexeme.start + begin, lexeme.end + begin)
        for lexeme in scan(text)
        if lexeme.start <= offset - begin <= lexeme.end and lexeme.type != "NEWLINE"
    ]
    spans.extend(touching[-1:])
    # Each one inside the next; what merely touches the offset from the other side is left out.
    chain: list[Span] = []
    for span in sorted(set(spans), key=lambda item: (item.start - item.end, item)):
        if not chain or (chain[-1].start <= span.start and span.end <= chain[-1].end):
            chain.append(span)
    return chain[::-1]


def links(document: Document) -> list[Link]:
    """The files that a text uses."""
    found = []
    for placed in document.pieces():
        sentence = placed.piece.sentence
        if isinstance(sentence, syntax.Use):
            start, end = placed.span
            opening = document.text.find('"', start, end)
            found.append(Link(Span(opening + 1, end - 1), sentence.path))
    return found
