"""From a name to its definition, to all its mentions, and to another name; over several files."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

from spanwright_grammar import syntax
from spanwright_grammar.bindings import Mention, word_span
from spanwright_grammar.document import Document
from spanwright_grammar.formatting import Edit
from spanwright_grammar.lexing import scan
from spanwright_grammar.printing import print_tree
from spanwright_grammar.source import Span
from spanwright_grammar.vocabulary import RESERVED, lookup_all

Documents = Mapping[str, Document]
"""Documents that use each other, by name."""


class Place(NamedTuple):
    """A stretch of one of several documents."""

    document: str
    span: Span


class RenameRefused(Exception):
    """A name that cannot be changed, or not into this one; the text says why."""


def mention_at(document: Document, offset: int) -> tuple[Mention, Span] | None:
    """The mention that holds an offset, or ends there, and its span."""
    for found in document.mentions():
        if found.start <= offset <= found.start + 80:
            span = word_span(document.text, found.start)
            if offset <= span.end:
                return found, span
    return None


def definitions(documents: Documents, name: str, offset: int) -> list[Place]:
    """Where the name at an offset of the document `name` is bound or defined.

    A definition above it counts before one below it, one in this document before others.
    """
    found = mention_at(documents[name], offset)
    if found is None:
        return []
    mention, _ = found
    text = documents[name].text
    if mention.owner is not None:
        return [Place(name, word_span(text, mention.owner))]
    here = _defined_in(documents[name], mention.name)
    above = [place for place in here if place <= offset]
    if above or here:
        start = above[-1] if above else here[0]
        return [Place(name, word_span(text, start))]
    return [
        Place(other, word_span(document.text, start))
        for other, document in documents.items()
        if other != name
        for start in _defined_in(document, mention.name)
    ]


def _defined_in(document: Document, name: str) -> list[int]:
    return [m.start for m in document.mentions() if m.role == "definition" and m.name == name]


def references(
    documents: Documents, name: str, offset: int, *, with_definitions: bool = True
) -> list[Place]:
    """All mentions of the name at an offset: of the bound name, or of the definitions."""
    found = mention_at(documents[name], offset)
    if found is None:
        return []
    mention, _ = found
    searched = {name: documents[name]} if mention.owner is not None else documents
    places = []
    for other, document in searched.items():
        for item in document.mentions():
            is_same = item.name == mention.name and item.owner == mention.owner
            if is_same and (with_definitions or item.role == "use"):
                places.append(Place(other, word_span(document.text, item.start)))
    return places


def renameable(documents: Documents, name: str, offset: int) -> Span:
    """The span of the own name at an offset; raises RenameRefused when there is none."""
    found = mention_at(documents[name], offset)
    if found is None:
        raise RenameRefused("there is no name here")
    mention, span = found
    if mention.owner is None and not any(
        _defined_in(document, mention.name) for document in documents.values()
    ):
        raise RenameRefused(
            f"{mention.name} is a word of the language"
            if mention.name in RESERVED
            else f"{mention.name} is not defined here"
        )
    return span


def rename(
    documents: Documents, name: str, offset: int, new: str
) -> dict[str, list[Edit]]:
    """The edits that give a name another spelling everywhere; raises RenameRefused."""
    renameable(documents, name, offset)
    found = mention_at(documents[name], offset)
    assert found is not None
    old = found[0]
    lexemes = scan(new)
    if len(lexemes) != 1 or lexemes[0].type != "NAME" or lexemes[0].end != len(new):
        raise RenameRefused(f"{new!r} is no name: a letter, then letters and digits")
    word = lexemes[0].text
    if word in RESERVED or word in ("true", "false", "free"):
        raise RenameRefused(f"{new} is a word of the language")
    if word == old.name:
        return {}
    if old.owner is None:
        for other, document in documents.items():
            for item in document.mentions():
                if item.name == word and item.role == "definition":
                    line = document.source.position(item.start)[0]
                    raise RenameRefused(f"{new} is already defined in {other}, line {line}")
    edits: dict[str, list[Edit]] = {}
    for place in references(documents, name, offset):
        edits.setdefault(place.document, []).append(
            _respelt(documents[place.document].text, place.span, new)
        )
    for other, changes in edits.items():
        _check_nothing_is_caught(documents[other], changes, old, word)
    return edits


def _respelt(text: str, span: Span, new: str) -> Edit:
    """The word replaced, apart from letters that it would otherwise run together with."""
    before = text[span.start - 1 : span.start]
    after = text[span.end : span.end + 1]
    lead = " " if before.isalpha() else ""
    return Edit(span, lead + new + (" " if after.isalnum() else ""))


def _check_nothing_is_caught(
    document: Document, edits: list[Edit], old: Mention, new: str
) -> None:
    """Raise RenameRefused when another binding would catch a name, or the new one would."""
    before = list(document.mentions())
    renamed = document
    for span, text in reversed(edits):
        renamed = renamed.edited(span.start, span.end, text)
    after = list(renamed.mentions())
    at = {item.start: place for place, item in enumerate(before)}
    at_after = {item.start: place for place, item in enumerate(after)}
    is_same = len(before) == len(after)
    for was, item in zip(before, after):
        is_renamed = was.name == old.name and was.owner == old.owner
        owner = None if was.owner is None else at.get(was.owner)
        owner_after = None if item.owner is None else at_after.get(item.owner)
        wanted = new if is_renamed else was.name
        if (item.name, item.role, owner_after) != (wanted, was.role, owner):
            is_same = False
    if not is_same:
        raise RenameRefused(f"{new} already means something else where {old.name} is used")


def element_at(document: Document, offset: int) -> tuple[str, Span] | None:
    """The basis element at an offset whose index is written out: `E_(1,0,2)`, `E_201`."""
    for placed in document.pieces():
        start, end = placed.span
        if not (start <= offset <= end) or placed.piece.sentence is None:
            continue
        for node in reversed(syntax.path_to(placed.piece.sentence, offset - placed.offset)):
            if isinstance(node, syntax.Subscripted) and _is_written_out(node):
                span = Span(node.place.start + placed.offset, node.place.end + placed.offset)
                return print_tree(node), span
    return None


def _is_written_out(node: syntax.Subscripted) -> bool:
    has_entry = any(entry.kind == "family" for entry in lookup_all(node.head))
    if not has_entry or node.head in ("x", "y"):
        return False
    if isinstance(node.index, syntax.Number):
        return len(node.index.digits) > 1
    return isinstance(node.index, syntax.Tuple | syntax.Basement) and not any(
        isinstance(item, syntax.Name) for item in syntax.walk(node.index)
    )
