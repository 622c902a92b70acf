"""What the server holds: its client's open scripts, their findings and their results.

Everything here runs on one loop and is quick; what computes is asked of an evaluator process and
awaited.
"""

from __future__ import annotations

import asyncio
import contextlib
from collections.abc import Callable
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any
from uuid import uuid4

from lsprotocol import types
from pygls.exceptions import JsonRpcException, JsonRpcInvalidParams

from spanwright import __version__
from spanwright.server.conversions import path_of, protocol_diagnostic, uri_of
from spanwright.server.evaluation import Evaluation, Evaluator, EvaluatorLost, Result
from spanwright.server.positions import Positions
from spanwright.server.protocol import Protocol, RobustServer

if TYPE_CHECKING:
    from spanwright.workspace import Document, Workspace

DEBOUNCE = 0.15  # seconds of rest behind a keystroke before findings are sent unasked
HOVER_PATIENCE = 1.5  # seconds that a hover waits for what must be computed
MAX_HOVERS = 500  # basis elements whose description is remembered


class ScriptServer(RobustServer):
    """The server of one client: its open scripts, their results, its wishes."""

    def __init__(self) -> None:
        super().__init__("spanwright", __version__, protocol_cls=Protocol)
        self.evaluations: dict[Path, Evaluation] = {}
        self.versions: dict[Path, int | None] = {}
        self.uris: dict[Path, str] = {}
        self.waiting: dict[Path, asyncio.Task[None]] = {}
        self.background: set[asyncio.Task[Any]] = set()
        self.elements: dict[tuple[int, str], str] = {}
        self.question_evaluator: Evaluator | None = None
        self.positions_of: dict[Path, tuple[Document, Positions]] = {}

    @cached_property
    def scripts(self) -> Workspace:
        """The open scripts; made late, because the answer to `initialize` needs no grammar."""
        from spanwright.workspace import Workspace

        return Workspace()

    @property
    def encoding(self) -> str:
        """The position encoding that the client has chosen."""
        chosen = self.workspace.position_encoding
        return str(getattr(chosen, "value", chosen))

    # documents

    def path(self, uri: str) -> Path:
        """The open script behind a URI; raises JsonRpcInvalidParams when there is none."""
        path = path_of(uri)
        if path not in self.scripts.opened():
            raise JsonRpcInvalidParams(message=f"{uri} is not open")
        return path

    def positions(self, path: Path) -> Positions:
        """The conversions for the text of a file, open or not."""
        document = self.scripts.document(path)
        if document is None:
            raise JsonRpcInvalidParams(message=f"{path} cannot be read")
        known = self.positions_of.get(path)
        if known is None or known[0] is not document:
            known = document, Positions(document.source, self.encoding)
            self.positions_of[path] = known
        return known[1]

    def at(self, params: Any) -> tuple[Path, int]:
        """The script and the offset that a request is about."""
        path = self.path(params.text_document.uri)
        return path, self.positions(path).offset(params.position)

    def location(self, path: Path, span: Any) -> types.Location:
        """A stretch of a file as the protocol has it."""
        return types.Location(self.uri(path), self.positions(path).range(span))

    def uri(self, path: Path) -> str:
        """The URI of a file, spelt as the client spells it when it has it open."""
        return self.uris.get(path) or uri_of(path)

    # tasks

    def later(self, work: Any) -> asyncio.Task[Any]:
        """Run a coroutine in the background; its faults are logged."""
        task: asyncio.Task[Any] = asyncio.ensure_future(work)
        self.background.add(task)
        task.add_done_callback(self._over)
        return task

    def _over(self, task: asyncio.Task[Any]) -> None:
        self.background.discard(task)
        if not task.cancelled() and (fault := task.exception()) is not None:
            self.report_server_error(
                fault if isinstance(fault, Exception) else RuntimeError(repr(fault)), "task"
            )

    # findings

    @property
    def pulls(self) -> bool:
        """Whether the client asks for findings itself."""
        document = self.client_capabilities.text_document
        return document is not None and document.diagnostic is not None

    @property
    def pulls_again(self) -> bool:
        """Whether it does so when it is told that there is something new."""
        workspace = self.client_capabilities.workspace
        wishes = workspace.diagnostics if workspace else None
        return self.pulls and wishes is not None and bool(wishes.refresh_support)

    def pulled(self, path: Path) -> list[types.Diagnostic]:
        """What a client gets that asks; what is computed only when it will ask again in time."""
        found = self._read_findings(path)
        return found + self._computed_findings(path, found) if self.pulls_again else found

    def _read_findings(self, path: Path) -> list[types.Diagnostic]:
        """All that is wrong with a script as far as reading it tells."""
        positions = self.positions(path)
        return [
            protocol_diagnostic(
                positions, item.severity, item.code, item.span, item.message, item.hints
            )
            for item in self.scripts.diagnostics(path)
        ]

    def _computed_findings(
        self, path: Path, read: list[types.Diagnostic]
    ) -> list[types.Diagnostic]:
        """What computing has found besides."""
        positions = self.positions(path)
        known = {(item.code, item.range.start.line) for item in read}
        found = []
        for (start, end), result in self.results(path):
            answer = result.answer
            if result.status == "failed":
                reasons = [row.removeprefix("# ") for row in answer["text"].split("\n")[1:]]
                message = "\n".join(["the claim does not hold", *reasons])
                span = (start, end)
                found.append(
                    protocol_diagnostic(positions, "error", "claim-failed", span, message, ())
                )
            for item in answer["findings"]:
                span = (item["start"] + start, item["end"] + start)
                diagnostic = protocol_diagnostic(
                    positions, item["severity"], item["code"], span, item["message"],
                    item["hints"],
                )  # fmt: skip
                if (diagnostic.code, diagnostic.range.start.line) not in known:
                    found.append(diagnostic)
        return found

    def push(self, path: Path) -> None:
        """Send the findings in a script, those left out that the client asks for itself."""
        if self.pulls_again:
            return
        read = self._read_findings(path)
        found = self._computed_findings(path, read)
        self.text_document_publish_diagnostics(
            types.PublishDiagnosticsParams(
                self.uris[path], found if self.pulls else read + found, self.versions.get(path)
            )
        )

    def push_soon(self, path: Path) -> None:
        """Send findings when the typing rests; also for scripts that use this one."""
        if path in self.waiting:
            self.waiting[path].cancel()
        self.waiting[path] = self.later(self._push_after_rest(path))

    async def _push_after_rest(self, path: Path) -> None:
        await asyncio.sleep(DEBOUNCE)
        self.waiting.pop(path, None)
        for other in list(self.scripts.opened()):
            if other == path or path in self.scripts.used(other):
                self.push(other)

    # results

    def units(self, path: Path) -> list[tuple[int, int]]:
        """Where the units of a script stand that are run one after another."""
        document = self.scripts.opened()[path]
        return [(span.start, span.end) for span, _ in document.units()]

    def results(self, path: Path) -> list[tuple[tuple[int, int], Result]]:
        """The results that are true of the text as it stands, with their units."""
        evaluation = self.evaluations.get(path)
        if evaluation is None:
            return []
        text = self.scripts.opened()[path].text
        units = self.units(path)
        found = evaluation.current([text[a:b] for a, b in units], self.stamp(path))
        return list(zip(units, found))

    def stamp(self, path: Path) -> object:
        """What changes when a file that the script uses changes on the disk."""
        found = []
        for used in self.scripts.used(path):
            try:
                status = used.stat()
                found.append((str(used), status.st_mtime_ns, status.st_size))
            except (OSError, ValueError):
                found.append((str(used), 0, 0))
        return tuple(found)

    async def evaluate(self, path: Path, line: int | None) -> dict[str, int]:
        """Evaluate a script, up to a line (from 0) or all of it, and show what comes."""
        document = self.scripts.opened()[path]
        units = self.units(path)
        if line is not None:
            source = document.source
            units = [unit for unit in units if source.position(unit[0])[0] - 1 <= line]
        if not units:
            return {"kept": 0, "evaluated": 0}
        evaluation = self.evaluations.get(path)
        if evaluation is None:
            evaluation = Evaluation(path.parent, str(path))
            self.evaluations[path] = evaluation
        progress = _Progress(self, f"evaluating {path.name}", len(units), evaluation.stop)
        await progress.begin()
        work = self.later(
            evaluation.run(document.text, units, self.stamp(path), progress.reached)
        )
        try:
            kept, new = await asyncio.shield(work)
        except asyncio.CancelledError:
            # the answer is due at once; what has been computed is kept
            self.later(evaluation.stop())
            work.add_done_callback(lambda _: self._show_results(path))
            raise
        finally:
            progress.end()
        self._show_results(path)
        return {"kept": kept, "evaluated": new}

    def _show_results(self, path: Path) -> None:
        if path not in self.scripts.opened():
            return
        self.push(path)
        if self.pulls_again:
            self.refresh(types.WORKSPACE_DIAGNOSTIC_REFRESH)
        workspace = self.client_capabilities.workspace
        hints = workspace.inlay_hint if workspace else None
        if hints is not None and hints.refresh_support:
            self.refresh(types.WORKSPACE_INLAY_HINT_REFRESH)

    def refresh(self, method: str) -> None:
        """Ask the client to ask again; its answer says nothing."""
        self.later(self._refresh(method))

    async def _refresh(self, method: str) -> None:
        with contextlib.suppress(JsonRpcException):
            await asyncio.shield(
                asyncio.wrap_future(self.protocol.send_request(method, None))
            )

    async def described(self, path: Path, offset: int) -> str:
        """What computing says of the basis element at an offset; empty when that takes long."""
        found = self.scripts.element_at(path, offset)
        if found is None:
            return ""
        text, _, n = found
        known = self.elements.get((n, text))
        if known is not None:
            return known
        if self.question_evaluator is None:
            self.question_evaluator = Evaluator(path.parent)
        if self.question_evaluator.is_busy:
            return ""
        task = self.later(self._describe(self.question_evaluator, text, n))
        with contextlib.suppress(asyncio.TimeoutError):
            await asyncio.wait_for(asyncio.shield(task), HOVER_PATIENCE)
        return self.elements.get((n, text), "")

    async def _describe(self, evaluator: Evaluator, text: str, n: int) -> None:
        with contextlib.suppress(EvaluatorLost):
            async for answer in evaluator.ask({"element": text, "n": n}):
                if "element" in answer:
                    rows = [f"- {label}: `{value}`" for label, value in answer["element"]]
                    if len(self.elements) >= MAX_HOVERS:
                        self.elements.clear()
                    self.elements[n, text] = "\n".join(rows)

    def end_processes(self) -> None:
        """End every evaluator."""
        for evaluation in self.evaluations.values():
            evaluation.close()
        if self.question_evaluator is not None:
            self.question_evaluator.close()


class _Progress:
    """The bar that shows how far an evaluation has come, and whose button stops it."""

    def __init__(
        self, server: ScriptServer, title: str, n_units: int, stop: Callable[[], Any]
    ) -> None:
        self._server = server
        self._title = title
        self._n_units = n_units
        self._stop = stop
        self._token: str | None = None

    async def begin(self) -> None:
        """Show the bar, when the client has one."""
        window = self._server.client_capabilities.window
        if window is None or not window.work_done_progress:
            return
        token = f"spanwright-{uuid4()}"
        try:
            # cancelling this very request must not cancel the client's answer
            await asyncio.shield(self._server.work_done_progress.create_async(token))
        except JsonRpcException:
            return
        self._token = token
        self._server.work_done_progress.tokens[token].add_done_callback(self._asked_to_stop)
        self._server.work_done_progress.begin(
            token,
            types.WorkDoneProgressBegin(title=self._title, cancellable=True, percentage=0),
        )

    def _asked_to_stop(self, future: Any) -> None:
        if future.cancelled():
            self._server.later(self._stop())

    def reached(self, n_done: int) -> None:
        """Move the bar."""
        if self._token is not None:
            self._server.work_done_progress.report(
                self._token,
                types.WorkDoneProgressReport(
                    message=f"{n_done} of {self._n_units}",
                    percentage=100 * n_done // self._n_units,
                    cancellable=True,
                ),
            )

    def end(self) -> None:
        """Take the bar away."""
        if self._token is not None:
            self._server.work_done_progress.end(self._token, types.WorkDoneProgressEnd())
            self._server.work_done_progress.tokens.pop(self._token, None)
