"""What each word of a text is, for colouring: the lexer's kinds, sharpened by who binds a name."""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple

from spanwright_grammar.document import Document
from spanwright_grammar.source import Span
from spanwright_grammar.vocabulary import lookup_all

KINDS = (
    "keyword", "number", "string", "comment", "result", "family", "operator", "function",
    "parameter", "setting", "name", "bound",
)  # fmt: skip
"""`name` is a definition's, `bound` a loop's, a sum's or an argument's."""


class Highlight(NamedTuple):
    """A stretch of text, one of `KINDS`, and whether the name is defined or bound right here."""

    span: Span
    kind: str
    is_introduced: bool


def highlights(document: Document, part: Span | None = None) -> Iterator[Highlight]:
    """The words of a document in order; with `part`, those of the lines around it.

    >>> [(found.kind, *found.span) for found in highlights(Document("let f = x_1"))]
    [('keyword', 0, 3), ('name', 4, 5), ('family', 8, 9), ('number', 10, 11)]
    """
    roles = {found.start: found for found in document.mentions()}
    after_fix = False
    for token, offset in document.tokens(part):
        span = Span(token.start + offset, token.end + offset)
        kind = token.kind
        mention = roles.get(span.start)
        if after_fix and kind in ("name", "parameter"):
            kind = "setting"
        elif mention is not None and kind in ("name", "function", "parameter", "family"):
            if mention.owner is not None:
                kind = "bound"
            elif mention.role != "use" or not lookup_all(mention.name):
                kind = "function" if kind == "function" else "name"
        after_fix = kind == "keyword" and document.text[span.start : span.end] == "fix"
        if kind in KINDS:
            yield Highlight(span, kind, mention is not None and mention.role != "use")
