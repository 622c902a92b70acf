"""The Spanwright language: text to tree and back, its words, and its diagnostics."""

from __future__ import annotations

from spanwright_grammar import syntax
from spanwright_grammar.diagnostics import CODES, Diagnostic, error, format_diagnostic
from spanwright_grammar.parsing import (
    Chunk,
    Comment,
    Parsed,
    ParseFailure,
    Token,
    expected_after,
    is_incomplete,
    parse,
    parse_expression,
    tokens,
)
from spanwright_grammar.printing import print_tree, quoted
from spanwright_grammar.reference import reference_markdown
from spanwright_grammar.source import NO_SPAN, Source, Span
from spanwright_grammar.spelling import nearest
from spanwright_grammar.vocabulary import RESERVED, VOCABULARY, Entry, by_kind, lookup, lookup_all

__all__ = [
    "CODES",
    "NO_SPAN",
    "RESERVED",
    "VOCABULARY",
    "Chunk",
    "Comment",
    "Diagnostic",
    "Entry",
    "ParseFailure",
    "Parsed",
    "Source",
    "Span",
    "Token",
    "by_kind",
    "error",
    "expected_after",
    "format_diagnostic",
    "is_incomplete",
    "lookup",
    "lookup_all",
    "nearest",
    "parse",
    "parse_expression",
    "print_tree",
    "quoted",
    "reference_markdown",
    "syntax",
    "tokens",
]
