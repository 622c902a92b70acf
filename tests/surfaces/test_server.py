"""The language server as an editor meets it: a real process, spoken to over its pipes.

`▮` marks the cursor in a text. Answers are awaited, never slept for.
"""

from __future__ import annotations

import asyncio
import json
import os
import socket
import subprocess
import sys
import time
from collections.abc import AsyncIterator, Iterator
from contextlib import contextmanager
from itertools import count
from pathlib import Path
from random import Random
from typing import Any

import psutil
import pytest
import pytest_lsp
from lsprotocol import types
from pygls.exceptions import JsonRpcException
from pytest_lsp import ClientServerConfig, LanguageClient

from effort import effort

CURSOR = "▮"
# The same start that the command line makes, without its parser.
COMMAND = [
    sys.executable, "-c",
    "import sys; from spanwright.editor_commands import serve; "
    "sys.exit(serve(int(sys.argv[1]) if len(sys.argv) > 1 else None))",
]  # fmt: skip
WIDE = "\U0001d465"  # mathematical italic x: one code point, two units of UTF-16, four of UTF-8

pytestmark = pytest.mark.asyncio(loop_scope="module")


def capabilities(encoding: str) -> types.ClientCapabilities:
    """What an editor can do that waits for findings."""
    return types.ClientCapabilities(
        general=types.GeneralClientCapabilities(
            position_encodings=[types.PositionEncodingKind(encoding)]
        ),
        window=types.WindowClientCapabilities(work_done_progress=True),
    )


@pytest_lsp.fixture(
    config=ClientServerConfig(server_command=COMMAND), scope="module", params=["utf-16"]
)
async def client(lsp_client: LanguageClient, request: pytest.FixtureRequest) -> AsyncIterator[None]:
    """A client that has said hello; the encoding is the test's parameter."""
    result = await lsp_client.initialize_session(
        types.InitializeParams(capabilities=capabilities(request.param), process_id=os.getpid())
    )
    assert result.capabilities.position_encoding == request.param
    lsp_client.server_said = result  # type: ignore[attr-defined]
    yield
    await lsp_client.shutdown_session()


IN_THREE_ENCODINGS = pytest.mark.parametrize(
    "client", ["utf-8", "utf-16", "utf-32"], indirect=True
)


class Script:
    """A text that the server has open, and what a cursor in it can ask."""

    _numbers = count(1)

    def __init__(self, client: LanguageClient, text: str, folder: Path) -> None:
        self.client = client
        told = client.server_said.capabilities.position_encoding  # type: ignore[attr-defined]
        self.encoding = str(getattr(told, "value", told))
        self.cursor = text.find(CURSOR)
        self.text = text.replace(CURSOR, "")
        self.path = folder / f"script{next(self._numbers)}.span"
        self.uri = self.path.as_uri()
        self.version = 1
        self.document = types.TextDocumentIdentifier(self.uri)
        client.text_document_did_open(
            types.DidOpenTextDocumentParams(
                types.TextDocumentItem(self.uri, "spanwright", 1, self.text)
            )
        )

    def position(self, offset: int) -> types.Position:
        """A second route to positions: encode all before the offset."""
        before = self.text[:offset].replace("\r\n", "\n").replace("\r", "\n")
        _, _, last = before.rpartition("\n")
        width = {"utf-8": 1, "utf-16": 2, "utf-32": 4}[self.encoding]
        codec = {"utf-8": "utf-8", "utf-16": "utf-16-le", "utf-32": "utf-32-le"}[self.encoding]
        n_lines = before.count("\n")
        return types.Position(n_lines, len(last.encode(codec)) // width)

    def range(self, start: int, end: int) -> types.Range:
        return types.Range(self.position(start), self.position(end))

    def slice(self, found: types.Range) -> str:
        """The text in a range."""
        offsets = {
            (p.line, p.character): offset
            for offset in range(len(self.text) + 1)
            for p in [self.position(offset)]
        }
        start, end = found.start, found.end
        return self.text[
            offsets[start.line, start.character] : offsets[end.line, end.character]
        ]

    @property
    def here(self) -> types.Position:
        return self.position(self.cursor)

    async def findings(self) -> list[str]:
        """The codes that are pushed next, with the text that they mark."""
        while True:
            found = await self.client.wait_for_notification("textDocument/publishDiagnostics")
            if found.uri == self.uri and found.version == self.version:
                return [f"{item.code}: {self.slice(item.range)}" for item in found.diagnostics]

    def edit(self, start: int, end: int, text: str) -> None:
        """Replace a stretch as an editor reports it."""
        change = types.TextDocumentContentChangePartial(self.range(start, end), text)
        self.version += 1
        self.text = self.text[:start] + text + self.text[end:]
        self.client.text_document_did_change(
            types.DidChangeTextDocumentParams(
                types.VersionedTextDocumentIdentifier(self.version, self.uri), [change]
            )
        )

    async def run(self, command: str, *arguments: object) -> Any:
        """Have the server carry out a command about this script."""
        return await self.client.workspace_execute_command_async(
            types.ExecuteCommandParams(command, [self.uri, *arguments])
        )

    async def hints(self) -> list[str]:
        """The line, from 1, and the label of every inlay hint."""
        found = await self.client.text_document_inlay_hint_async(
            types.InlayHintParams(self.document, self.range(0, len(self.text)))
        )
        return [f"{hint.position.line + 1}: {hint.label}" for hint in found or ()]


# what the server says it can do


async def test_everything_is_advertised(client: LanguageClient) -> None:
    told = client.server_said.capabilities  # type: ignore[attr-defined]
    for name in (
        "completion", "signature_help", "hover", "definition", "references", "rename",
        "document_symbol", "workspace_symbol", "document_formatting", "document_range_formatting",
        "document_on_type_formatting", "semantic_tokens", "folding_range", "selection_range",
        "document_link", "inlay_hint", "code_lens", "execute_command", "diagnostic",
    ):  # fmt: skip
        assert getattr(told, f"{name}_provider"), name
    assert told.text_document_sync.change == types.TextDocumentSyncKind.Incremental


# findings and edits, in all encodings


@IN_THREE_ENCODINGS
async def test_findings_follow_edits(client: LanguageClient, tmp_path: Path) -> None:
    text = f"fix n = 2\nlet f = 1  # {WIDE}{WIDE}μ\n\\mu + μ; f + x_3 {WIDE}_4\n"
    script = Script(client, text, tmp_path)
    assert await script.findings() == [
        "unknown-name: \\mu", "unknown-name: μ", "position-out-of-range: 3",
        "position-out-of-range: 4",
    ]  # fmt: skip
    script.edit(script.text.index("2\n"), script.text.index("2\n") + 1, "4")
    assert await script.findings() == ["unknown-name: \\mu", "unknown-name: μ"]
    place = script.text.index(f"{WIDE}{WIDE}μ")
    script.edit(place, place + 2, "μ\U0001d6fc\n\U0001d465_5; ")
    assert await script.findings() == [
        "position-out-of-range: 5", "unknown-name: μ", "unknown-name: \\mu", "unknown-name: μ",
    ]  # fmt: skip


@IN_THREE_ENCODINGS
async def test_positions_behind_wide_letters(client: LanguageClient, tmp_path: Path) -> None:
    script = Script(client, f'remark "{WIDE}{WIDE}"; let weight = {WIDE}_1; wei▮ght\n', tmp_path)
    found = await client.text_document_definition_async(
        types.DefinitionParams(script.document, script.here)
    )
    assert [script.slice(item.range) for item in found] == ["weight"]
    assert found[0].range.start == script.position(script.text.index("weight"))
    tokens = await client.text_document_semantic_tokens_full_async(
        types.SemanticTokensParams(script.document)
    )
    assert [token for token, _ in decoded(script, tokens.data)] == [
        "remark", f'"{WIDE}{WIDE}"', "let", "weight", WIDE, "1", "weight",
    ]  # fmt: skip


def decoded(script: Script, data: list[int]) -> list[tuple[str, int]]:
    """The words that semantic tokens mark, with their type."""
    found = []
    line = character = 0
    for place in range(0, len(data), 5):
        lines, characters, length, kind, _ = data[place : place + 5]
        line, character = line + lines, characters + (0 if lines else character)
        stretch = types.Range(
            types.Position(line, character), types.Position(line, character + length)
        )
        found.append((script.slice(stretch), kind))
    return found


async def test_random_edits_leave_the_server_with_the_same_text(
    client: LanguageClient, tmp_path: Path
) -> None:
    random = Random(7)
    script = Script(client, "fix n = 3\nlet f = x_1\nf + x_2\n", tmp_path)
    for _ in range(effort(150)):
        start = random.randrange(len(script.text) + 1)
        end = min(len(script.text), start + random.choice((0, 0, 1, 3)))
        script.edit(start, end, random.choice(("(", ")", "\n", "x_1 ", "μ", WIDE, "let g = ", "f")))
    script.edit(0, len(script.text), "fix n = 2\nx_3\n")
    found = await client.text_document_diagnostic_async(
        types.DocumentDiagnosticParams(script.document)
    )
    assert [script.slice(item.range) for item in found.items] == ["3"]


async def test_several_scripts_are_open_at_once(client: LanguageClient, tmp_path: Path) -> None:
    (tmp_path / "lemmas.span").write_text("let weight(a) = q^a\nfix n = 2\n")
    user = Script(client, 'use "lemmas.span"\nweight(1) + ▮weight(2) + x_3 + zzz\n', tmp_path)
    assert await user.findings() == ["position-out-of-range: 3", "unknown-name: zzz"]
    lemmas = Script(client, "let weight(a) = q^a\nlet other = 1\n", tmp_path)
    assert await lemmas.findings() == ["unused-name: weight", "unused-name: other"]
    edit = await client.text_document_rename_async(
        types.RenameParams(user.document, user.here, "mass")
    )
    used = (tmp_path / "lemmas.span").resolve().as_uri()
    assert {uri: len(edits) for uri, edits in edit.changes.items()} == {user.uri: 2, used: 1}
    links = await client.text_document_document_link_async(
        types.DocumentLinkParams(user.document)
    )
    assert [(user.slice(link.range), link.target) for link in links] == [("lemmas.span", used)]


# words


async def labels(script: Script) -> list[str]:
    found = await script.client.text_document_completion_async(
        types.CompletionParams(script.document, script.here)
    )
    return [item.label for item in found.items]


@pytest.mark.parametrize(
    ("text", "wanted", "unwanted"),
    [
        ("cla▮", "claim", "let"),
        ("let weight = 1\nwei▮", "weight", "let"),
        ("expand x_1 in ▮", "E", "degree(f)"),
        ("fix show = ▮", "factored", "E"),
        ("fix n = 3\nx_1 E_(2,▮", "0,0)", "claim"),
        ('use "▮', "lemmas.span", "claim"),
        ("# cla▮", None, "claim"),
    ],
)
async def test_completion(
    client: LanguageClient, tmp_path: Path, text: str, wanted: str | None, unwanted: str
) -> None:
    (tmp_path / "lemmas.span").touch()
    found = await labels(Script(client, text, tmp_path))
    assert unwanted not in found
    assert wanted in found if wanted else found == []


async def test_a_completion_replaces_the_word_that_was_begun(
    client: LanguageClient, tmp_path: Path
) -> None:
    script = Script(client, f"{WIDE}_1 + degr▮", tmp_path)
    found = await client.text_document_completion_async(
        types.CompletionParams(script.document, script.here)
    )
    assert script.slice(found.items[0].text_edit.range) == "degr"
    assert found.items[0].text_edit.new_text == "degree("


async def test_signature_help_marks_the_argument(client: LanguageClient, tmp_path: Path) -> None:
    script = Script(client, "inner(E_(1,0), ▮", tmp_path)
    found = await client.text_document_signature_help_async(
        types.SignatureHelpParams(script.document, script.here)
    )
    assert found.signatures[0].label == "inner(f, g)"
    assert found.signatures[0].parameters[found.active_parameter].label == "g"


async def hover(script: Script) -> str:
    found = await script.client.text_document_hover_async(
        types.HoverParams(script.document, script.here)
    )
    return "" if found is None else found.contents.value


async def test_hover_shows_entries_and_definitions(client: LanguageClient, tmp_path: Path) -> None:
    assert "exchange of variables" in await hover(Script(client, "symm▮etric(x_1)", tmp_path))
    own = Script(client, "let weight = 1 + q\nwe▮ight", tmp_path)
    text = await hover(own)
    assert "let weight = 1 + q" in text and "line 1" in text
    assert await hover(Script(client, "1 ▮+ 2", tmp_path)) == ""


async def test_hover_over_a_basis_element_computes(client: LanguageClient, tmp_path: Path) -> None:
    script = Script(client, "fix n = 3\nx_1 E_(1,▮0,2)\n", tmp_path)
    # the first one may come before the evaluator has started
    text = await hover(script)
    for _ in range(20):
        if "degree" in text:
            break
        text = await hover(script)
    # |(1,0,2)| = 3; Y_i acts by q^-mu_i t^(…): I. Cherednik, Double Affine Hecke Algebras, 2005
    assert "- degree: `3`" in text and "- eigenvalue of Y_2: `t^2`" in text


async def test_formatting(client: LanguageClient, tmp_path: Path) -> None:
    script = Script(client, f"x_1+x_2 # {WIDE}\nfor i in 1..2:\nx_i\nend\n", tmp_path)
    options = types.FormattingOptions(2, True)
    edits = await client.text_document_formatting_async(
        types.DocumentFormattingParams(script.document, options)
    )
    assert after(script, edits) == f"x_1 + x_2  # {WIDE}\nfor i in 1..2:\n  x_i\nend\n"
    second = script.text.index("x_i")
    edits = await client.text_document_range_formatting_async(
        types.DocumentRangeFormattingParams(
            script.document, script.range(second, second), options
        )
    )
    assert after(script, edits) == f"x_1+x_2 # {WIDE}\nfor i in 1..2:\n  x_i\nend\n"


async def test_formatting_while_typing(client: LanguageClient, tmp_path: Path) -> None:
    options = types.FormattingOptions(2, True)
    script = Script(client, "for i in 1 .. 2:\n▮", tmp_path)
    edits = await client.text_document_on_type_formatting_async(
        types.DocumentOnTypeFormattingParams(script.document, script.here, "\n", options)
    )
    assert after(script, edits) == "for i in 1..2:\n  "
    script = Script(client, "for i in 1..2:\n  x_i\n  end▮", tmp_path)
    edits = await client.text_document_on_type_formatting_async(
        types.DocumentOnTypeFormattingParams(script.document, script.here, "d", options)
    )
    assert after(script, edits).startswith("for i in 1..2:\n  x_i\nend")


def after(script: Script, edits: list[types.TextEdit] | None) -> str:
    """The text with edits made, last ones first."""
    lines = script.text.split("\n")
    starts = [0]
    for line in lines:
        starts.append(starts[-1] + len(line) + 1)

    def offset(position: types.Position) -> int:
        line = lines[position.line] if position.line < len(lines) else ""
        units = line.encode("utf-16-le")[: 2 * position.character]
        return starts[position.line] + len(units.decode("utf-16-le"))

    text = script.text
    for edit in sorted(edits or (), key=lambda e: offset(e.range.start), reverse=True):
        text = text[: offset(edit.range.start)] + edit.new_text + text[offset(edit.range.end) :]
    return text


# names and shape


async def test_references_and_refused_names(client: LanguageClient, tmp_path: Path) -> None:
    script = Script(client, "let ▮f = 1\nf + f\nlet g = sum_(f in 1..2) f\n", tmp_path)
    found = await client.text_document_references_async(
        types.ReferenceParams(types.ReferenceContext(False), script.document, script.here)
    )
    assert [item.range.start.line for item in found] == [1, 1]
    with pytest.raises(JsonRpcException, match="is a word of the language"):
        await client.text_document_rename_async(
            types.RenameParams(script.document, script.here, "E")
        )
    place = await client.text_document_prepare_rename_async(
        types.PrepareRenameParams(script.document, script.here)
    )
    assert script.slice(place) == "f"


async def test_symbols_folds_and_selections(client: LanguageClient, tmp_path: Path) -> None:
    script = Script(client, "for i in 1..2:\n  let abcdef = x_▮i\nend\n", tmp_path)
    found = await client.text_document_document_symbol_async(
        types.DocumentSymbolParams(script.document)
    )
    assert [child.name for child in found[0].children] == ["abcdef"]
    everywhere = await client.workspace_symbol_async(types.WorkspaceSymbolParams("acef"))
    assert ("abcdef", script.uri) in [(item.name, item.location.uri) for item in everywhere]
    folds = await client.text_document_folding_range_async(
        types.FoldingRangeParams(script.document)
    )
    assert [(fold.start_line, fold.end_line) for fold in folds] == [(0, 2)]
    chains = await client.text_document_selection_range_async(
        types.SelectionRangeParams(script.document, [script.here])
    )
    assert script.slice(chains[0].range) == "i"
    assert script.slice(chains[0].parent.range) == "x_i"


# results


async def test_results_appear_and_only_what_changed_is_computed(
    client: LanguageClient, tmp_path: Path
) -> None:
    script = Script(
        client, "fix n = 2\nx_1 + x_1\nclaim x_1 = x_2\nlet f = x_1\nf f\nx_9\n", tmp_path
    )
    await script.findings()
    lenses = await client.text_document_code_lens_async(types.CodeLensParams(script.document))
    titles = [
        (await client.code_lens_resolve_async(lens)).command.title for lens in lenses[:2]
    ]
    assert titles == ["evaluate all", "evaluate to here"]
    assert await script.hints() == []
    waiting = asyncio.ensure_future(script.findings())
    assert await script.run("spanwright.evaluateAll") == {"kept": 0, "evaluated": 6}
    found = await waiting
    assert "claim-failed: claim x_1 = x_2" in found and "position-out-of-range: 9" in found
    failed = next(d for d in client.diagnostics[script.uri] if d.code == "claim-failed")
    assert "left - right = x_1 - x_2" in failed.message
    assert await script.hints() == ["2: (1) = 2 x_1", "3: does not hold", "5: (2) = x_1^2"]
    # nothing has changed
    assert await script.run("spanwright.evaluateAll") == {"kept": 6, "evaluated": 0}
    # a comment changes no sentence
    script.edit(0, 0, "# why\n")
    assert await script.hints() == ["3: (1) = 2 x_1", "4: does not hold", "6: (2) = x_1^2"]
    place = script.text.index("let f = x_1") + 8
    script.edit(place, place + 3, "x_2")
    assert await script.hints() == ["3: (1) = 2 x_1", "4: does not hold"]
    line = script.text[: script.text.index("f f")].count("\n")
    assert await script.run("spanwright.evaluateToHere", line) == {"kept": 3, "evaluated": 2}
    assert await script.hints() == ["3: (1) = 2 x_1", "4: does not hold", "6: (2) = x_2^2"]


async def test_hints_are_whole_terms_and_say_how_many_cases_held(
    client: LanguageClient, tmp_path: Path
) -> None:
    text = (
        "fix n = 2\nfor i in 1..2:\n  claim x_i = x_i\nend\nexpand (x_1 + x_2 + q)^4 in x\n"
    )
    script = Script(client, text, tmp_path)
    await script.findings()
    await script.run("spanwright.evaluateAll")
    held, expanded = await script.hints()
    assert held == "4: holds (2 cases: 2 held)"
    # 15 monomials x_1^a x_2^b with a + b <= 4
    label, _, rest = expanded.partition(" + … (")
    assert label.startswith("5: (") and rest.endswith(" more terms)")
    assert label.count(" + ") + 1 + int(rest.split()[0]) == 15


async def test_stopping_an_evaluation_is_quick_and_keeps_what_came_before(
    client: LanguageClient, tmp_path: Path
) -> None:
    slow = "x_1 + x_2; expand (x_1 + x_2 + x_3)^9 in E; x_1\n"
    script = Script(client, "fix n = 5\n" + slow, tmp_path)
    await script.findings()
    work = asyncio.ensure_future(script.run("spanwright.evaluateAll"))
    while not [hint for hint in await script.hints() if "x_1 + x_2" in hint]:
        assert not work.done()
    # typing is answered while it computes
    started = time.monotonic()
    assert "claim" in await labels(Script(client, "cla▮", tmp_path))
    answered_in = time.monotonic() - started
    await script.run("spanwright.stopEvaluation")
    result = await work
    assert result["evaluated"] == 3
    hints = await script.hints()
    assert hints[0] == "2: (1) = x_1 + x_2" and hints[-1] == "2: stopped"
    assert answered_in < 5


async def test_cancelling_the_request_is_answered_at_once(
    client: LanguageClient, tmp_path: Path
) -> None:
    script = Script(client, "fix n = 5\nexpand (x_1 + x_2 + x_3)^9 in E\n", tmp_path)
    await script.findings()
    number = "cancelled-1"
    future = client.protocol.send_request(
        types.WORKSPACE_EXECUTE_COMMAND,
        types.ExecuteCommandParams("spanwright.evaluateAll", [script.uri]),
        msg_id=number,
    )
    await asyncio.sleep(0)
    client.cancel_request(types.CancelParams(number))
    with pytest.raises(JsonRpcException) as caught:
        await asyncio.wrap_future(future)
    assert caught.value.code == -32800
    assert await labels(Script(client, "cla▮", tmp_path))


async def test_a_lost_evaluator_costs_one_sentence(
    client: LanguageClient, tmp_path: Path
) -> None:
    script = Script(client, "fix n = 5\nx_1\nexpand (x_1 + x_2 + x_3)^9 in E\n", tmp_path)
    await script.findings()
    work = asyncio.ensure_future(script.run("spanwright.evaluateAll"))
    while "2: (1) = x_1" not in await script.hints():
        assert not work.done()
    (server,) = psutil.Process().children()
    for process in server.children():
        if str(tmp_path) in process.cmdline():
            process.kill()
    assert await work == {"kept": 0, "evaluated": 3}
    found = client.diagnostics[script.uri]
    assert [item.code for item in found] == ["over-budget"]
    assert await script.run("spanwright.evaluateToHere", 1) == {"kept": 2, "evaluated": 0}
    script.edit(script.text.index("expand"), len(script.text) - 1, "x_1 + x_1")
    # a fresh evaluator has to be told everything again
    assert await script.run("spanwright.evaluateAll") == {"kept": 0, "evaluated": 3}
    assert await script.hints() == ["2: (1) = x_1", "3: (2) = 2 x_1"]


# what arrives damaged


class Wire:
    """The bare pipes of a server."""

    def __init__(self, command: list[str]) -> None:
        self.process = subprocess.Popen(
            command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL
        )
        assert self.process.stdin is not None and self.process.stdout is not None
        self.numbers = count(1)

    def write(self, content: bytes) -> None:
        self.process.stdin.write(content)  # type: ignore[union-attr]
        self.process.stdin.flush()  # type: ignore[union-attr]

    def send(self, body: bytes) -> None:
        self.write(b"Content-Length: %d\r\n\r\n" % len(body) + body)

    def ask(self, method: str, params: object) -> int:
        number = next(self.numbers)
        message = {"jsonrpc": "2.0", "id": number, "method": method, "params": params}
        self.send(json.dumps(message).encode())
        return number

    def read(self) -> dict[str, Any]:
        length = 0
        while (header := self.process.stdout.readline()).strip():  # type: ignore[union-attr]
            name, _, value = header.partition(b":")
            if name.lower() == b"content-length":
                length = int(value)
        assert length, "the server has gone"
        message: dict[str, Any] = json.loads(self.process.stdout.read(length))  # type: ignore[union-attr]
        return message

    def answer(self, number: int) -> dict[str, Any]:
        while True:
            message = self.read()
            if message.get("id") == number and "method" not in message:
                return message

    def start(self, **capabilities: object) -> None:
        number = self.ask(
            "initialize", {"capabilities": capabilities, "processId": None, "rootUri": None}
        )
        assert "capabilities" in self.answer(number)["result"]
        self.send(b'{"jsonrpc": "2.0", "method": "initialized", "params": {}}')


@contextmanager
def wired(command: list[str]) -> Iterator[Wire]:
    """A wire to a server that is ended afterwards."""
    found = Wire(command)
    try:
        yield found
    finally:
        _end(found)


@pytest.fixture
def wire() -> Iterator[Wire]:
    with wired(COMMAND) as found:
        yield found


def _end(found: Wire) -> None:
    found.process.kill()
    found.process.wait()
    for stream in (found.process.stdin, found.process.stdout):
        assert stream is not None
        try:
            stream.close()
        except BrokenPipeError:
            continue


@pytest.mark.parametrize("asks_again", [False, True])
async def test_no_finding_reaches_a_client_twice(
    wire: Wire, tmp_path: Path, asks_again: bool
) -> None:
    wire.start(
        textDocument={"diagnostic": {}},
        workspace={"diagnostics": {"refreshSupport": asks_again}},
    )
    uri = (tmp_path / "a.span").as_uri()
    text = "fix n = 2\nfoo\nclaim x_1 = x_2\n"
    wire.send(json.dumps({"jsonrpc": "2.0", "method": "textDocument/didOpen", "params": {
        "textDocument": {"uri": uri, "languageId": "s", "version": 1, "text": text},
    }}).encode())  # fmt: skip
    number = wire.ask(
        "workspace/executeCommand", {"command": "spanwright.evaluateAll", "arguments": [uri]}
    )
    pushed: list[str] = []
    while (message := wire.read()).get("id") != number or "method" in message:
        if message.get("method") == "textDocument/publishDiagnostics":
            pushed = [item["code"] for item in message["params"]["diagnostics"]]
    number = wire.ask("textDocument/diagnostic", {"textDocument": {"uri": uri}})
    pulled = [item["code"] for item in wire.answer(number)["result"]["items"]]
    if asks_again:
        assert (pushed, pulled) == ([], ["unknown-name", "claim-failed"])
    else:
        assert (pushed, pulled) == (["claim-failed"], ["unknown-name"])


async def test_bad_parameters_are_answered(wire: Wire) -> None:
    wire.start()
    number = wire.ask("textDocument/hover", {"nonsense": 1})
    assert wire.answer(number)["error"]["code"] == -32602
    number = wire.ask("textDocument/hover", {
        "textDocument": {"uri": "file:///nowhere.span"}, "position": {"line": 0, "character": 0},
    })  # fmt: skip
    assert wire.answer(number)["error"]["code"] == -32602
    number = wire.ask("workspace/noSuchThing", {})
    assert wire.answer(number)["error"]["code"] == -32601


async def test_faults_are_told_in_the_log(wire: Wire) -> None:
    wire.start()
    wire.send(b"[1, 2]")
    while (message := wire.read()).get("method") != "window/logMessage":
        continue
    assert message["params"]["type"] == 1 and "JSON-RPC" in message["params"]["message"]


async def test_random_bytes_never_end_the_server(wire: Wire) -> None:
    wire.start()
    random = Random(11)
    for _ in range(effort(60)):
        length = random.randrange(1, 80)
        noise = random.randbytes(length)
        if random.random() < 0.5:
            wire.send(noise)
        else:
            wire.write(noise.replace(b"\n", b"?") + b"\r\n")
    wire.write(b"Content-Length: 99999999999999999999\r\n\r\n")
    wire.write(b"Content-Length: " + b"9" * 5000 + b"\r\n\r\n")
    wire.write(b"content-length: 2\r\n\r\n{}")
    wire.send(b'{"jsonrpc": "2.0", "id": ' + b"[" * 50_000 + b"}")
    wire.send(b'{"jsonrpc": "2.0", "method": "textDocument/didChange", "params": {"textDocument": '
              b'{"uri": "file:///x", "version": 1}, "contentChanges": []}}')  # fmt: skip
    for mutated in (b"\x00", b"\xff\xfe", b"null", b"0", b'"', b"{", b'{"jsonrpc": 2}'):
        wire.send(mutated)
    number = wire.ask("workspace/symbol", {"query": "x"})
    assert wire.answer(number)["result"] == []


async def test_hostile_positions_and_texts(wire: Wire) -> None:
    wire.start()
    uri = "file:///hostile.span"
    text = "\ud800 let f = (" + "(" * 400 + "\r\r\n\u2028 x_1" + "9" * 5000
    wire.send(json.dumps({"jsonrpc": "2.0", "method": "textDocument/didOpen", "params": {
        "textDocument": {"uri": uri, "languageId": "s", "version": 1, "text": text},
    }}).encode())  # fmt: skip
    far = {"line": 2**31 - 1, "character": 2**31 - 1}
    wire.send(json.dumps({"jsonrpc": "2.0", "method": "textDocument/didChange", "params": {
        "textDocument": {"uri": uri, "version": 2},
        "contentChanges": [{"range": {"start": far, "end": {"line": 0, "character": 5}},
                            "text": "x"}],
    }}).encode())  # fmt: skip
    for method in ("hover", "completion", "signatureHelp", "definition"):
        number = wire.ask(
            f"textDocument/{method}", {"textDocument": {"uri": uri}, "position": far}
        )
        assert "result" in wire.answer(number)
    for method in ("documentSymbol", "semanticTokens/full", "foldingRange", "diagnostic"):
        number = wire.ask(f"textDocument/{method}", {"textDocument": {"uri": uri}})
        assert "result" in wire.answer(number)


async def test_the_server_ends_with_its_client(wire: Wire) -> None:
    wire.start()
    wire.process.stdin.close()  # type: ignore[union-attr]
    assert wire.process.wait(timeout=20) == 0


async def test_the_server_ends_when_it_is_told_to(wire: Wire) -> None:
    wire.start()
    assert wire.answer(wire.ask("shutdown", None))["result"] is None
    wire.send(b'{"jsonrpc": "2.0", "method": "exit"}')
    assert wire.process.wait(timeout=20) == 0


async def test_one_client_over_tcp() -> None:
    with socket.create_server(("127.0.0.1", 0)) as probe:
        port = probe.getsockname()[1]
    process = subprocess.Popen([*COMMAND, str(port)], stderr=subprocess.DEVNULL)
    try:
        link = await _connected(port, process)
        body = b'{"jsonrpc":"2.0","id":1,"method":"initialize","params":{"capabilities":{}}}'
        link.sendall(b"noise\r\nContent-Length: %d\r\n\r\n" % len(body) + body)
        assert link.recv(15) == b"Content-Length:"
        link.close()
        assert process.wait(timeout=20) == 0
    finally:
        process.kill()
        process.wait()


async def test_the_command_line_starts_the_same_server(tmp_path: Path) -> None:
    command = [sys.executable, "-m", "spanwright", "serve"]
    with wired(command) as wire:
        wire.start()
        uri = (tmp_path / "a.span").as_uri()
        wire.send(json.dumps({"jsonrpc": "2.0", "method": "textDocument/didOpen", "params": {
            "textDocument": {
                "uri": uri, "languageId": "s", "version": 1, "text": "fix n = 2; x_3\n"},
        }}).encode())  # fmt: skip
        number = wire.ask("textDocument/diagnostic", {"textDocument": {"uri": uri}})
        (found,) = wire.answer(number)["result"]["items"]
        assert found["code"] == "position-out-of-range"
        assert wire.answer(wire.ask("shutdown", None))["result"] is None
        wire.send(b'{"jsonrpc": "2.0", "method": "exit"}')
        assert wire.process.wait(timeout=20) == 0
    with socket.create_server(("127.0.0.1", 0)) as probe:
        port = probe.getsockname()[1]
    process = subprocess.Popen([*command, "--tcp", str(port)], stderr=subprocess.DEVNULL)
    try:
        (await _connected(port, process)).close()
        assert process.wait(timeout=20) == 0
    finally:
        process.kill()
        process.wait()


async def _connected(port: int, process: subprocess.Popen[bytes]) -> socket.socket:
    while True:
        try:
            return socket.create_connection(("127.0.0.1", port), timeout=20)
        except ConnectionRefusedError:
            assert process.poll() is None
            await asyncio.sleep(0.05)


async def test_hello_is_answered_before_the_grammar_is_loaded() -> None:
    program = (
        "import sys; import spanwright.editor_commands; from spanwright.server import serving; "
        "serving.make_server(); print([name for name in ('lark', 'flint', 'prompt_toolkit', "
        "'spanwright_grammar.parsing') if name in sys.modules])"
    )
    found = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True
    )
    assert found.stdout.strip() == "[]"
