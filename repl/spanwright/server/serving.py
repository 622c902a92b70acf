"""The server's answers: each request of the protocol, turned into a question to the workspace."""

from __future__ import annotations

import asyncio
import os
from pathlib import Path
from typing import Any

from lsprotocol import types

from spanwright.server.conversions import (
    COMPLETION_KINDS,
    LEGEND_MODIFIERS,
    LEGEND_TYPES,
    SYMBOL_KINDS,
    TOKEN_TYPES,
    markdown,
    paragraphs,
    path_of,
    protocol_symbol,
    signature_parts,
    text_edits,
    uri_of,
)
from spanwright.server.evaluation import STOPPED, Result
from spanwright.server.positions import Positions, single_lines
from spanwright.server.protocol import Refused
from spanwright.server.state import ScriptServer

PARENT_CHECK = 5.0  # seconds between looks at whether the client's process is still there

EVALUATE_HERE, EVALUATE_ALL = "spanwright.evaluateToHere", "spanwright.evaluateAll"
STOP = "spanwright.stopEvaluation"

# Sentences whose result is worth a line of its own; definitions repeat what stands there.
_SHOWN_KINDS = frozenset({"definition", "setting", "quit", "remark", "help", "error"})


def make_server() -> ScriptServer:
    """The server with all its answers."""
    server = ScriptServer()
    for register in (_register_texts, _register_words, _register_names, _register_shape,
                     _register_results):  # fmt: skip
        register(server)
    return server


def _register_texts(server: ScriptServer) -> None:
    """Opening, editing, closing; findings sent and asked for."""

    @server.feature(types.INITIALIZED)
    def initialized(_: types.InitializedParams) -> None:
        server.scripts.folders = [
            path_of(folder.uri) for folder in server.workspace.folders.values()
        ]
        if server.process_id:
            server.later(_end_with(server.process_id))

    @server.feature(types.TEXT_DOCUMENT_DID_OPEN)
    def did_open(params: types.DidOpenTextDocumentParams) -> None:
        item = params.text_document
        path = path_of(item.uri)
        server.uris[path] = item.uri
        server.versions[path] = item.version
        server.scripts.put(path, item.text)
        server.push(path)

    @server.feature(types.TEXT_DOCUMENT_DID_CHANGE)
    def did_change(params: types.DidChangeTextDocumentParams) -> None:
        path = server.path(params.text_document.uri)
        for change in params.content_changes:
            if isinstance(change, types.TextDocumentContentChangePartial):
                start, end = server.positions(path).span(change.range)
                server.scripts.edit(path, start, end, change.text)
            else:
                server.scripts.put(path, change.text)
        server.versions[path] = params.text_document.version
        server.push_soon(path)

    @server.feature(types.TEXT_DOCUMENT_DID_SAVE)
    def did_save(params: types.DidSaveTextDocumentParams) -> None:
        path = server.path(params.text_document.uri)
        evaluation = server.evaluations.get(path)
        if evaluation is not None and server.results(path):
            # whoever has asked for results once wants them to follow the file
            server.later(server.evaluate(path, None))
        for other in server.scripts.opened():
            if path in server.scripts.used(other):
                server.push_soon(other)

    @server.feature(types.TEXT_DOCUMENT_DID_CLOSE)
    def did_close(params: types.DidCloseTextDocumentParams) -> None:
        path = path_of(params.text_document.uri)
        server.scripts.close(path)
        server.positions_of.pop(path, None)
        server.versions.pop(path, None)
        uri = server.uris.pop(path, params.text_document.uri)
        if path in server.waiting:
            server.waiting.pop(path).cancel()
        evaluation = server.evaluations.pop(path, None)
        if evaluation is not None:
            evaluation.close()
        server.text_document_publish_diagnostics(types.PublishDiagnosticsParams(uri, []))

    @server.feature(types.WORKSPACE_DID_CHANGE_WATCHED_FILES)
    def files_changed(_: types.DidChangeWatchedFilesParams) -> None:
        for path in server.scripts.opened():
            server.push_soon(path)

    @server.feature(
        types.TEXT_DOCUMENT_DIAGNOSTIC,
        types.DiagnosticOptions(
            inter_file_dependencies=True, workspace_diagnostics=False, identifier="spanwright"
        ),
    )
    def diagnostic(
        params: types.DocumentDiagnosticParams,
    ) -> types.RelatedFullDocumentDiagnosticReport:
        path = server.path(params.text_document.uri)
        return types.RelatedFullDocumentDiagnosticReport(server.pulled(path))


async def _end_with(process_id: int) -> None:
    """End this process when that of the client is gone without a word."""
    while True:
        await asyncio.sleep(PARENT_CHECK)
        try:
            os.kill(process_id, 0)
        except ProcessLookupError:
            os._exit(1)
        except OSError:
            return


def _register_words(server: ScriptServer) -> None:
    """What helps while typing: completion, signatures, hover, formatting."""

    @server.feature(
        types.TEXT_DOCUMENT_COMPLETION,
        types.CompletionOptions(trigger_characters=["_", "\\", '"', ",", "("]),
    )
    def completion(params: types.CompletionParams) -> types.CompletionList:
        path, offset = server.at(params)
        positions = server.positions(path)
        items = []
        for place, item in enumerate(server.scripts.complete(path, offset)):
            replaced = types.TextEdit(positions.range((item.start, offset)), item.insert)
            items.append(
                types.CompletionItem(
                    label=item.label,
                    kind=COMPLETION_KINDS.get(item.kind, types.CompletionItemKind.Text),
                    detail=item.kind,
                    documentation=item.meaning,
                    sort_text=f"{place:04}",
                    filter_text=item.insert,
                    text_edit=replaced,
                )
            )
        return types.CompletionList(is_incomplete=False, items=items)

    @server.feature(
        types.TEXT_DOCUMENT_SIGNATURE_HELP,
        types.SignatureHelpOptions(trigger_characters=["(", ","]),
    )
    def signature_help(params: types.SignatureHelpParams) -> types.SignatureHelp | None:
        found = server.scripts.signature(*server.at(params))
        if found is None:
            return None
        parts = signature_parts(found.label)
        active = min(found.part - 1, len(parts) - 1) if found.part and parts else None
        signature = types.SignatureInformation(
            found.label, found.meaning, parts, active_parameter=active
        )
        return types.SignatureHelp([signature], active_signature=0, active_parameter=active)

    @server.feature(types.TEXT_DOCUMENT_HOVER)
    async def hover(params: types.HoverParams) -> types.Hover | None:
        path, offset = server.at(params)
        positions = server.positions(path)
        found = server.scripts.hover(path, offset)
        described = await server.described(path, offset)
        element = server.scripts.element_at(path, offset) if described else None
        if element is not None:
            title = f"`{element[0]}`, n = {element[2]}\n\n{described}"
            about = f"\n\n{paragraphs(found.text)}" if found else ""
            return types.Hover(markdown(title + about), positions.range(element[1]))
        if found is None:
            return None
        return types.Hover(markdown(paragraphs(found.text)), positions.range(found.span))

    @server.feature(types.TEXT_DOCUMENT_FORMATTING)
    def formatting(params: types.DocumentFormattingParams) -> list[types.TextEdit]:
        path = server.path(params.text_document.uri)
        return text_edits(server.positions(path), server.scripts.format_edits(path))

    @server.feature(types.TEXT_DOCUMENT_RANGE_FORMATTING)
    def range_formatting(params: types.DocumentRangeFormattingParams) -> list[types.TextEdit]:
        from spanwright.workspace import Span

        path = server.path(params.text_document.uri)
        positions = server.positions(path)
        part = Span(*positions.span(params.range))
        return text_edits(positions, server.scripts.format_edits(path, part))

    @server.feature(
        types.TEXT_DOCUMENT_ON_TYPE_FORMATTING,
        types.DocumentOnTypeFormattingOptions("\n", ["d"]),
    )
    def on_type(params: types.DocumentOnTypeFormattingParams) -> list[types.TextEdit]:
        path, offset = server.at(params)
        edits = server.scripts.on_type_edits(path, offset, params.ch)
        return text_edits(server.positions(path), edits)


def _register_names(server: ScriptServer) -> None:
    """Definitions, references, other spellings, symbols, links."""

    @server.feature(types.TEXT_DOCUMENT_DEFINITION)
    def definition(params: types.DefinitionParams) -> list[types.Location]:
        places = server.scripts.definitions(*server.at(params))
        return [server.location(Path(place.document), place.span) for place in places]

    @server.feature(types.TEXT_DOCUMENT_REFERENCES)
    def references(params: types.ReferenceParams) -> list[types.Location]:
        path, offset = server.at(params)
        places = server.scripts.references(
            path, offset, with_definitions=params.context.include_declaration
        )
        return [server.location(Path(place.document), place.span) for place in places]

    @server.feature(types.TEXT_DOCUMENT_DOCUMENT_HIGHLIGHT)
    def document_highlight(
        params: types.DocumentHighlightParams,
    ) -> list[types.DocumentHighlight]:
        path, offset = server.at(params)
        positions = server.positions(path)
        return [
            types.DocumentHighlight(positions.range(place.span))
            for place in server.scripts.references(path, offset, with_definitions=True)
            if place.document == str(path)
        ]

    @server.feature(
        types.TEXT_DOCUMENT_RENAME, types.RenameOptions(prepare_provider=True)
    )
    def rename(params: types.RenameParams) -> types.WorkspaceEdit:
        from spanwright.workspace import RenameRefused

        path, offset = server.at(params)
        try:
            found = server.scripts.rename(path, offset, params.new_name)
        except RenameRefused as refusal:
            raise Refused(str(refusal)) from refusal
        return types.WorkspaceEdit(
            changes={
                server.uri(Path(name)): text_edits(server.positions(Path(name)), edits)
                for name, edits in found.items()
            }
        )

    @server.feature(types.TEXT_DOCUMENT_PREPARE_RENAME)
    def prepare_rename(params: types.PrepareRenameParams) -> types.Range:
        from spanwright.workspace import RenameRefused

        path, offset = server.at(params)
        try:
            return server.positions(path).range(server.scripts.renameable(path, offset))
        except RenameRefused as refusal:
            raise Refused(str(refusal)) from refusal

    @server.feature(types.TEXT_DOCUMENT_DOCUMENT_SYMBOL)
    def document_symbol(params: types.DocumentSymbolParams) -> list[types.DocumentSymbol]:
        path = server.path(params.text_document.uri)
        positions = server.positions(path)
        return [protocol_symbol(positions, symbol) for symbol in server.scripts.symbols(path)]

    @server.feature(types.WORKSPACE_SYMBOL)
    def workspace_symbol(params: types.WorkspaceSymbolParams) -> list[types.WorkspaceSymbol]:
        return [
            types.WorkspaceSymbol(
                location=server.location(path, symbol.name_span),
                name=symbol.name,
                kind=SYMBOL_KINDS[symbol.kind],
                container_name=path.name,
            )
            for path, symbol in server.scripts.all_symbols(params.query)
        ]

    @server.feature(types.TEXT_DOCUMENT_DOCUMENT_LINK)
    def document_link(params: types.DocumentLinkParams) -> list[types.DocumentLink]:
        path = server.path(params.text_document.uri)
        positions = server.positions(path)
        return [
            types.DocumentLink(positions.range(span), uri_of(target))
            for span, target in server.scripts.links(path)
        ]


def _encoded_tokens(server: ScriptServer, path: Path, part: Any) -> types.SemanticTokens:
    positions = server.positions(path)
    source = server.scripts.opened()[path].source
    data: list[int] = []
    last_line = last_character = 0
    for (start, end), kind, is_introduced in server.scripts.highlights(path, part):
        for begin, stop in single_lines(source, start, end):
            place = positions.position(begin)
            modifiers = (1 if is_introduced else 0) | (2 if kind == "result" else 0)
            same_line = place.line == last_line
            data += [
                place.line - last_line,
                place.character - (last_character if same_line else 0),
                positions.length(begin, stop),
                LEGEND_TYPES.index(TOKEN_TYPES[kind]),
                modifiers,
            ]
            last_line, last_character = place.line, place.character
    return types.SemanticTokens(data)


def _register_shape(server: ScriptServer) -> None:
    """Colours, folds, selections."""
    legend = types.SemanticTokensLegend(LEGEND_TYPES, LEGEND_MODIFIERS)

    @server.feature(
        types.TEXT_DOCUMENT_SEMANTIC_TOKENS_FULL,
        types.SemanticTokensRegistrationOptions(legend, full=True, range=True),
    )
    def tokens_full(params: types.SemanticTokensParams) -> types.SemanticTokens:
        return _encoded_tokens(server, server.path(params.text_document.uri), None)

    @server.feature(types.TEXT_DOCUMENT_SEMANTIC_TOKENS_RANGE, legend)
    def tokens_range(params: types.SemanticTokensRangeParams) -> types.SemanticTokens:
        from spanwright.workspace import Span

        path = server.path(params.text_document.uri)
        part = Span(*server.positions(path).span(params.range))
        return _encoded_tokens(server, path, part)

    @server.feature(types.TEXT_DOCUMENT_FOLDING_RANGE)
    def folding_range(params: types.FoldingRangeParams) -> list[types.FoldingRange]:
        kinds = {"comment": types.FoldingRangeKind.Comment}
        return [
            types.FoldingRange(fold.first_line - 1, fold.last_line - 1, kind=kinds.get(fold.kind))
            for fold in server.scripts.folds(server.path(params.text_document.uri))
        ]

    @server.feature(types.TEXT_DOCUMENT_SELECTION_RANGE)
    def selection_range(params: types.SelectionRangeParams) -> list[types.SelectionRange]:
        path = server.path(params.text_document.uri)
        positions = server.positions(path)
        found = []
        for position in params.positions:
            chain: types.SelectionRange | None = None
            for span in reversed(server.scripts.selections(path, positions.offset(position))):
                chain = types.SelectionRange(positions.range(span), chain)
            assert chain is not None
            found.append(chain)
        return found


def _register_results(server: ScriptServer) -> None:
    """Results behind their sentences, and the commands that compute them."""

    @server.feature(types.TEXT_DOCUMENT_INLAY_HINT)
    def inlay_hint(params: types.InlayHintParams) -> list[types.InlayHint]:
        path = server.path(params.text_document.uri)
        positions = server.positions(path)
        start, end = positions.span(params.range)
        hints = []
        for (begin, stop), result in server.results(path):
            if stop < start or begin > end:
                continue
            label = _hint(result)
            if label:
                hints.append(
                    types.InlayHint(
                        position=positions.position(stop),
                        label=label,
                        tooltip=result.answer.get("text"),
                        padding_left=True,
                    )
                )
        return hints

    @server.feature(
        types.TEXT_DOCUMENT_CODE_LENS, types.CodeLensOptions(resolve_provider=True)
    )
    def code_lens(params: types.CodeLensParams) -> list[types.CodeLens]:
        path = server.path(params.text_document.uri)
        positions = server.positions(path)
        uri = params.text_document.uri
        lenses: list[types.CodeLens] = []
        for span, sentence in server.scripts.opened()[path].units():
            if not lenses:
                lenses.append(_lens(positions, span, uri, None))
            if sentence is not None and type(sentence).__name__ in _WITH_LENS:
                lenses.append(_lens(positions, span, uri, positions.position(span.start).line))
        return lenses

    @server.feature(types.CODE_LENS_RESOLVE)
    def resolve(lens: types.CodeLens) -> types.CodeLens:
        data = lens.data if isinstance(lens.data, dict) else {}
        line = data.get("line")
        title, name = "evaluate all", EVALUATE_ALL
        arguments = [data.get("uri")]
        if line is not None:
            title, name = "evaluate to here", EVALUATE_HERE
            arguments.append(line)
        return types.CodeLens(
            lens.range, command=types.Command(title, name, arguments=arguments), data=lens.data
        )

    @server.command(EVALUATE_ALL)
    async def evaluate_all(uri: str) -> dict[str, int]:
        return await server.evaluate(server.path(uri), None)

    @server.command(EVALUATE_HERE)
    async def evaluate_to_here(uri: str, line: int) -> dict[str, int]:
        return await server.evaluate(server.path(uri), line)

    @server.command(STOP)
    async def stop_evaluation(uri: str) -> None:
        evaluation = server.evaluations.get(server.path(uri))
        if evaluation is not None:
            await evaluation.stop()


_WITH_LENS = frozenset(
    {"ExpressionSentence", "Expand", "Claim", "For", "Find", "Tabulate", "Derive", "Guess", "Show"}
)


def _lens(positions: Positions, span: Any, uri: str, line: int | None) -> types.CodeLens:
    start = positions.position(span[0])
    return types.CodeLens(types.Range(start, start), data={"uri": uri, "line": line})


def _hint(result: Result) -> str:
    """The shortened result behind a sentence; empty where there is nothing to say."""
    answer = result.answer
    if result.status == STOPPED:
        return "stopped"
    if result.status == "failed":
        return "does not hold"
    if result.status != "ok" or answer["kind"] in _SHOWN_KINDS or not answer["short"]:
        return ""
    tag = f"({answer['tag']}) " if answer["tag"] is not None else ""
    return f"{tag}= {answer['short']}" if tag else str(answer["short"])


def serve(port: int | None = None) -> None:
    """Serve one client, over standard input and output or over a port of the loopback."""
    server = make_server()
    try:
        if port is None:
            server.serve_stdio()
        else:
            server.serve_tcp(port)
    finally:
        server.end_processes()
