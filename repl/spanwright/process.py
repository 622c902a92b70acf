"""A conversation with a session in another process, which can be stopped at any moment.

This side never loads the kernel. It starts the evaluator, sends texts, and reads replies. While
it waits, an interrupt from the keyboard asks the evaluator to drop the sentence at hand and
raises nothing, so that no frame is ever read by half. Should the evaluator itself be lost, a new
one is started and told again what made the session what it was.
"""

from __future__ import annotations

import contextlib
import json
import os
import select
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from spanwright.files import Folder
from spanwright.frames import HEADER, encoded, receive, write_all
from spanwright.replies import Progress, Reply, State

SHOW_AFTER = 1.0
"""Seconds after which a running sentence is spoken of."""
TICK = 0.2
PATIENCE = 5.0
"""Seconds that an evaluator has to react to a request to stop before it is replaced."""
ATTEMPTS = 3
"""So often in a row may an evaluator be lost before a single reply came."""

_KEEPS = frozenset({"definition", "setting"})


class EvaluatorLost(Exception):
    """The evaluator has ended."""


class _RepairStopped(Exception):
    """An interrupt came while a new evaluator was being told what was said before."""


class ProcessConversation:
    """A session in an evaluator process of its own."""

    def __init__(
        self, folder: Folder | Path | None = None, *, means: dict[str, Any] | None = None,
        is_digested: bool = False, bounds: dict[str, Any] | None = None,
    ) -> None:
        """`means` and `bounds` are the fields of `Means` and of `Bounds` as JSON holds them."""
        place = folder if isinstance(folder, Folder) else Folder(folder or Path.cwd())
        self._given = json.dumps({
            "root": str(place.root), "allows_outside": place.allows_outside,
            "output": None if place.output is None else str(place.output),
            "means": means or {}, "is_digested": is_digested, "bounds": bounds or {}})
        self._state = State()
        self._request_id = 0
        self._n_sentences = 0
        # what made the session what it is, and how much of it the present evaluator knows
        self._said: list[tuple[str, str]] = []
        self._n_repeated = 0
        # the request at hand, None between two; and the sentence at hand
        self._request: dict[str, Any] | None = None
        self._is_sent = False
        self._begun: dict[str, Any] | None = None
        self._stop_asked: float | None = None
        self._losses = 0
        self._is_closed = False
        self._start()

    def _start(self) -> None:
        control, self._control = os.pipe()
        # -P: a file in the user's folder must not stand in for a module of the same name
        arguments = [
            sys.executable, "-P", "-m", "spanwright.evaluating", str(control), self._given]
        # a session of its own, so that the terminal's signals miss it and it can be ended whole
        self._process = subprocess.Popen(
            arguments, stdin=subprocess.PIPE, stdout=subprocess.PIPE, pass_fds=(control,),
            start_new_session=True)
        os.close(control)
        assert self._process.stdin is not None and self._process.stdout is not None
        self._requests = self._process.stdin.fileno()
        self._frames = self._process.stdout.fileno()

    @property
    def process_id(self) -> int:
        """The evaluator's first process, which is also the id of its group."""
        return self._process.pid

    def say(
        self, text: str, name: str = "<shell>",
        on_progress: Callable[[Progress], None] | None = None, *,
        is_recorded: bool = False, stops_at_first: bool = False,
    ) -> Iterator[Reply]:
        """Run all sentences of a text; replies as they come, `on_progress` while they do not.

        With `is_recorded` every reply has its record; with `stops_at_first` nothing behind the
        first sentence that fails is run. Dropping the iterator stops what is left of the text.
        """
        self._abandon()
        if self._is_closed:
            raise ValueError("this conversation is closed")
        self._is_sent, self._stop_asked, self._losses = False, None, 0
        # from here on there is something to stop
        self._request = request = {
            "say": text, "name": name, "skip": 0, "is_recorded": is_recorded,
            "stops_at_first": stops_at_first}
        return self._replies(request, on_progress)

    def _replies(
        self, request: dict[str, Any], on_progress: Callable[[Progress], None] | None
    ) -> Iterator[Reply]:
        try:
            while self._request is request and (
                reply := self._advance(on_progress)
            ) is not None:
                yield reply
        finally:
            if self._request is request:
                self._abandon()

    def state(self) -> State:
        """What the session holds now."""
        self._abandon()
        return self._state

    def stop(self) -> None:
        """Ask the evaluator to drop the sentence at hand and what follows it; from any thread."""
        if self._request is not None and not self._is_closed:
            self._stop_asked = self._stop_asked or time.monotonic()
            with contextlib.suppress(OSError):
                os.write(self._control, HEADER.pack(self._request_id))

    def close(self) -> None:
        """End the evaluator and all its processes."""
        if not self._is_closed:
            self._is_closed = True
            self._request = None
            self._end()

    def _end(self) -> None:
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.killpg(self._process.pid, signal.SIGKILL)
        self._process.wait()
        os.close(self._control)
        for stream in (self._process.stdin, self._process.stdout):
            if stream is not None:
                with contextlib.suppress(OSError):
                    stream.close()

    # one step

    def _advance(self, on_progress: Callable[[Progress], None] | None) -> Reply | None:
        """The next reply to the request at hand; None when there is none left."""
        with self._stopping():
            while self._request is not None:
                try:
                    if not self._is_sent:
                        self._repeat(on_progress)
                        self._send(self._request)
                        self._is_sent = True
                    reply = self._reply(on_progress)
                except EvaluatorLost:
                    reply = self._recovered()
                    if reply is None:
                        continue
                    return reply
                except _RepairStopped:
                    request, self._request = self._request, None
                    return _reply_about(
                        self._beginning(request), "stopped",
                        "stopped; the session is not restored yet, and the next sentence goes on "
                        "with that")
                if reply is None:
                    self._request = None
                return reply
        return None

    def _reply(self, on_progress: Callable[[Progress], None] | None) -> Reply | None:
        """The next reply; None when the state came instead."""
        started = time.monotonic()
        reached = ""
        while True:
            frame = self._next()
            elapsed = time.monotonic() - started
            if frame is None:
                if on_progress and elapsed >= SHOW_AFTER:
                    doing = self._begun["source"] if self._begun else ""
                    on_progress(Progress(elapsed, reached, doing))
            elif "begin" in frame:
                self._begun = frame["begin"]
                started, reached = time.monotonic(), ""
            elif "progress" in frame:
                reached = frame["progress"]
            elif "reply" in frame:
                reply = Reply.from_data(frame["reply"])
                self._begun = None
                self._losses = 0
                self._n_sentences = reply.sentence
                if self._request is not None:
                    self._request["skip"] += 1
                    if reply.status != "error" and (
                        reply.tag is not None or reply.kind in _KEEPS
                    ):
                        self._said.append((reply.source, str(self._request["name"])))
                        self._n_repeated = len(self._said)
                return reply
            elif frame["id"] == self._request_id:
                self._state = State.from_data(frame["state"])
                return None

    def _abandon(self) -> None:
        """Stop what is left of a request that nobody waits for any more."""
        if self._request is None or self._is_closed:
            return
        with self._stopping():
            if not self._is_sent:
                self._request = None
                return
            self.stop()
            while self._advance(None) is not None:
                pass

    @contextlib.contextmanager
    def _stopping(self) -> Iterator[None]:
        """While this holds, an interrupt asks the evaluator to stop and raises nothing here."""
        before = signal.getsignal(signal.SIGINT)
        if threading.current_thread() is not threading.main_thread() or not callable(before):
            yield
            return
        signal.signal(signal.SIGINT, lambda *_: self.stop())
        try:
            yield
        finally:
            signal.signal(signal.SIGINT, before)

    # loss and repair

    def _recovered(self) -> Reply | None:
        """Start a new evaluator; what is to be said about it, None when the request goes on."""
        assert self._request is not None
        begun, self._begun = self._begun, None
        was_stopped = self._stop_asked is not None
        self._losses += 1
        self._end()
        self._start()
        self._n_repeated = 0
        self._is_sent = False
        if begun is None and not was_stopped and self._losses < ATTEMPTS:
            return None
        begun = begun or self._beginning(self._request)
        self._n_sentences = begun["sentence"]
        self._request["skip"] += 1
        if was_stopped or self._request["stops_at_first"] or self._losses >= ATTEMPTS:
            self._request = None
        if was_stopped:
            return _reply_about(begun, "stopped", "stopped")
        if self._losses >= ATTEMPTS:
            return _reply_about(
                begun, "internal-error", "the evaluator ends before it can answer; "
                "`python -m spanwright.evaluating` may say why")
        return _reply_about(
            begun, "internal-error",
            "the evaluator was lost while this ran; the session from before will be restored")

    def _beginning(self, request: dict[str, Any]) -> dict[str, Any]:
        """As the evaluator would begin with a text, roughly."""
        return {"sentence": self._n_sentences + 1, "line": 1, "column": 1,
                "source": str(request["say"]).partition("\n")[0]}

    def _repeat(self, on_progress: Callable[[Progress], None] | None) -> None:
        """Tell a new evaluator what it does not know yet."""
        started = told = time.monotonic()
        while self._n_repeated < len(self._said):
            text, name = self._said[self._n_repeated]
            self._send({"say": text, "name": name, "skip": 0, "is_recorded": False,
                        "stops_at_first": True})
            is_done = True
            while (frame := self._next()) is None or "state" not in frame:
                now = time.monotonic()
                if on_progress and now - started >= SHOW_AFTER and now - told >= TICK:
                    told = now
                    on_progress(Progress(now - started, "", f"restoring the session: {text}"))
                if frame is not None and "reply" in frame:
                    is_done = frame["reply"]["status"] != "error"
            self._n_repeated += is_done or self._stop_asked is None
            if self._stop_asked is not None:
                raise _RepairStopped

    # frames

    def _send(self, request: dict[str, Any]) -> None:
        self._request_id += 1
        frame = encoded({**request, "id": self._request_id, "after": self._n_sentences})
        try:
            write_all(frame, self._requests)
        except BrokenPipeError:
            raise EvaluatorLost from None
        if self._stop_asked is not None:
            # asked before this request had its number
            self.stop()

    def _next(self) -> dict[str, Any] | None:
        """The next frame; None when there was none for a while."""
        if not select.select([self._frames], [], [], TICK)[0]:
            asked = self._stop_asked
            if asked is not None and time.monotonic() - asked > PATIENCE:
                raise EvaluatorLost
            return None
        frame = receive(self._frames)
        if frame is None:
            raise EvaluatorLost
        return frame


def _reply_about(begun: dict[str, Any], code: str, message: str) -> Reply:
    """What this side has to say about a sentence."""
    line, column, source = begun["line"], begun["column"], begun["source"]
    number = begun["sentence"]
    record = {"sentence": number, "line": line, "source": source, "status": "error",
              "code": code, "message": message, "column": column, "hint": None, "seconds": 0.0}
    shown = f"line {line}, column {column}: {message}\n  {source}\n  ^"
    return Reply(number, line, column, source, "error", "error", None, None, "", (), (shown,),
                 record, 0.0)
