"""Findings, edits, symbols and files as the protocol has them."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import quote, unquote, urlsplit

from lsprotocol import types

from spanwright.server.positions import Positions

if TYPE_CHECKING:
    from spanwright.workspace import Edit, Symbol

# The protocol's own token types, so that every colour scheme knows them.
TOKEN_TYPES = {
    "keyword": "keyword", "number": "number", "string": "string", "comment": "comment",
    "result": "comment", "family": "type", "operator": "method", "function": "function",
    "parameter": "enumMember", "setting": "property", "name": "variable", "bound": "parameter",
}  # fmt: skip
LEGEND_TYPES = sorted(set(TOKEN_TYPES.values()))
LEGEND_MODIFIERS = ["declaration", "documentation"]

SEVERITIES = {
    "error": types.DiagnosticSeverity.Error,
    "warning": types.DiagnosticSeverity.Warning,
    "information": types.DiagnosticSeverity.Information,
}
COMPLETION_KINDS = {
    "family": types.CompletionItemKind.Class, "operator": types.CompletionItemKind.Method,
    "function": types.CompletionItemKind.Function, "set": types.CompletionItemKind.Function,
    "parameter": types.CompletionItemKind.EnumMember, "setting": types.CompletionItemKind.Property,
    "sentence": types.CompletionItemKind.Keyword, "word": types.CompletionItemKind.Keyword,
    "name": types.CompletionItemKind.Variable, "tag": types.CompletionItemKind.Reference,
    "file": types.CompletionItemKind.File, "folder": types.CompletionItemKind.Folder,
    "value": types.CompletionItemKind.Value, "index": types.CompletionItemKind.Snippet,
    "position": types.CompletionItemKind.Value, "symbol": types.CompletionItemKind.Text,
    "form": types.CompletionItemKind.EnumMember,
}  # fmt: skip
SYMBOL_KINDS = {
    "value": types.SymbolKind.Variable, "function": types.SymbolKind.Function,
    "family": types.SymbolKind.Class, "parameter": types.SymbolKind.EnumMember,
    "block": types.SymbolKind.Namespace,
}  # fmt: skip


def path_of(uri: str) -> Path:
    """The file of a URI; a text that has no file yet gets a path that no file has."""
    parts = urlsplit(uri)
    if parts.scheme != "file":
        return Path("/unsaved") / (quote(uri, safe="") or "nameless")
    place = unquote(parts.path)
    if os.name == "nt":
        place = place.lstrip("/")
    path = Path(place.replace("\0", ""))
    try:
        return path.resolve()
    except (OSError, RuntimeError, ValueError):
        return path


def uri_of(path: Path) -> str:
    """The URI of a file."""
    return path.as_uri() if path.is_absolute() else f"file:///{quote(str(path))}"


def protocol_diagnostic(
    positions: Positions, severity: str, code: str, span: Any, message: str, hints: Iterable[str]
) -> types.Diagnostic:
    tries = "".join(f"\ntry: {hint}" for hint in hints)
    return types.Diagnostic(
        range=positions.range(span),
        message=message + tries,
        severity=SEVERITIES[severity],
        code=code,
        source="spanwright",
        tags=[types.DiagnosticTag.Unnecessary] if code == "unused-name" else None,
    )


def text_edits(positions: Positions, edits: Iterable[Edit]) -> list[types.TextEdit]:
    return [types.TextEdit(positions.range(span), text) for span, text in edits]


def protocol_symbol(positions: Positions, symbol: Symbol) -> types.DocumentSymbol:
    return types.DocumentSymbol(
        name=symbol.name,
        kind=SYMBOL_KINDS[symbol.kind],
        range=positions.range(symbol.span),
        selection_range=positions.range(symbol.name_span),
        detail=symbol.detail or None,
        children=[protocol_symbol(positions, child) for child in symbol.children],
    )


def signature_parts(label: str) -> list[types.ParameterInformation]:
    """The arguments in a label such as `inner(f, g)`."""
    _, bracket, rest = label.partition("(")
    if not bracket or not label.endswith(")"):
        return []
    return [types.ParameterInformation(part.strip()) for part in rest[:-1].split(",")]


def markdown(text: str) -> types.MarkupContent:
    return types.MarkupContent(types.MarkupKind.Markdown, text)


def paragraphs(text: str) -> str:
    """Lines of plain text as paragraphs, with the signs kept that would otherwise be markup."""
    lines = []
    for line in text.split("\n"):
        lines.append("".join(f"\\{c}" if c in "\\`*_{}[]<>#|" else c for c in line))
    return "  \n".join(lines)
