"""A script's results: which are still true of the text, and a process that computes the others.

All of it runs on the server's loop and waits for the evaluator without blocking; the evaluator is
a process of its own, started afresh, never forked from this one.
"""

from __future__ import annotations

import asyncio
import contextlib
import json
import os
import signal
import sys
from collections.abc import AsyncIterator, Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

LINE_LIMIT = 1 << 26  # bytes of one answer; results are cut long before
GRACE = 0.5  # seconds that an interrupted evaluator has before it is ended
STOPPED = "stopped"


class EvaluatorLost(Exception):
    """The evaluator ended while it was to answer."""


class Evaluator:
    """An evaluator process, one request at a time; started when first asked."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._process: asyncio.subprocess.Process | None = None
        self._number = 0
        self._is_busy = False
        self.generation = 0  # how many processes there have been

    @property
    def is_busy(self) -> bool:
        """Whether a request is being answered."""
        return self._is_busy

    async def start(self) -> None:
        """See to it that a process is there."""
        if self._process is None or self._process.returncode is not None:
            self.generation += 1
            self._process = await asyncio.create_subprocess_exec(
                sys.executable, "-P", "-m", "spanwright.server.evaluator", str(self._folder),
                stdin=asyncio.subprocess.PIPE, stdout=asyncio.subprocess.PIPE,
                stderr=asyncio.subprocess.DEVNULL, limit=LINE_LIMIT, start_new_session=True,
            )  # fmt: skip

    async def ask(self, question: dict[str, Any]) -> AsyncIterator[dict[str, Any]]:
        """The answers as they come; raises EvaluatorLost. Callers take turns."""
        await self.start()
        process = self._process
        assert process is not None and process.stdin is not None and process.stdout is not None
        self._number += 1
        number = self._number
        self._is_busy = True
        try:
            process.stdin.write(json.dumps({"id": number, **question}).encode() + b"\n")
            await process.stdin.drain()
            while True:
                line = await process.stdout.readline()
                if not line:
                    # the end of the pipe is seen before the end of the process
                    self.close()
                    raise EvaluatorLost
                answer = json.loads(line)
                if answer["id"] == number:
                    if answer.get("done"):
                        return
                    yield answer
        except (BrokenPipeError, ConnectionResetError, ValueError) as error:
            self.close()
            raise EvaluatorLost from error
        finally:
            self._is_busy = False

    async def stop(self) -> None:
        """Stop the sentence at hand: ask first, and end the process when that does not help."""
        number, process = self._number, self._process
        if not self._is_busy or process is None:
            return
        _signal(process, signal.SIGINT)
        await asyncio.sleep(GRACE)
        if self._is_busy and self._number == number and process is self._process:
            _signal(process, signal.SIGKILL)

    def close(self) -> None:
        """End the process."""
        if self._process is not None:
            _signal(self._process, signal.SIGKILL)
            self._process = None


def _signal(process: asyncio.subprocess.Process, sign: signal.Signals) -> None:
    if process.returncode is None:
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.kill(process.pid, sign)


@dataclass(frozen=True, slots=True)
class Result:
    """What became of one unit: its text then, and the evaluator's answer; offsets are its own."""

    text: str
    answer: dict[str, Any]

    @property
    def status(self) -> str:
        """`ok`, `failed`, `error`, or `stopped` for one that has not been run to its end."""
        status: str = self.answer["status"]
        return status


class Evaluation:
    """The results of one script: those of its first units, as far as nothing has changed."""

    def __init__(self, folder: Path, name: str) -> None:
        self._name = name
        self._results: list[Result] = []
        self._stamp: object = None
        self._evaluator = Evaluator(folder)
        self._n_known = 0  # units that the present process has behind it
        self._generation = 0
        self._turn = asyncio.Lock()
        self._is_stopping = False

    def current(self, texts: list[str], stamp: object) -> list[Result]:
        """The results that still hold, given the units' texts, and the files they use, now."""
        if stamp != self._stamp:
            return []
        n_same = 0
        for result, text in zip(self._results, texts):
            if result.text != text:
                break
            n_same += 1
        return self._results[:n_same]

    async def run(
        self,
        text: str,
        units: list[tuple[int, int]],
        stamp: object,
        on_result: Callable[[int], None],
    ) -> tuple[int, int]:
        """Evaluate the units of a text from the first that changed on; how many kept, and new.

        `on_result` is told how many units have their result. `stop` ends it early.
        """
        async with self._turn:
            self._is_stopping = False
            texts = [text[start:end] for start, end in units]
            kept = self.current(texts, stamp)
            while kept and kept[-1].status == STOPPED:
                kept.pop()
            await self._evaluator.start()
            if self._evaluator.generation != self._generation:
                # a fresh process knows nothing of what is kept
                self._generation, self._n_known = self._evaluator.generation, 0
            first = min(len(kept), self._n_known)
            n_kept = first if first < len(units) else len(units)
            if len(kept) >= len(units):
                return len(units), 0
            self._results, self._stamp, self._n_known = kept[:first], stamp, first
            await self._continue(text, units, texts, on_result)
            return n_kept, len(self._results) - n_kept

    async def _continue(
        self,
        text: str,
        units: list[tuple[int, int]],
        texts: list[str],
        on_result: Callable[[int], None],
    ) -> None:
        first = len(self._results)
        begin = units[first][0]
        question = {"keep": first, "text": text[begin : units[-1][1]], "name": self._name}
        try:
            async for answer in self._evaluator.ask(question):
                place = len(self._results)
                if place >= len(units):
                    continue
                shift = begin - units[place][0]
                self._results.append(Result(texts[place], _moved(answer, shift)))
                if answer["status"] != STOPPED:
                    self._n_known += 1
                on_result(len(self._results))
        except EvaluatorLost:
            place = len(self._results)
            if place < len(units):
                lost = _stopped() if self._is_stopping else _lost(len(texts[place]))
                self._results.append(Result(texts[place], lost))
                on_result(len(self._results))

    async def stop(self) -> None:
        """Stop the sentence at hand and what follows it."""
        self._is_stopping = True
        await self._evaluator.stop()

    def close(self) -> None:
        """End the evaluator."""
        self._evaluator.close()


def _moved(answer: dict[str, Any], shift: int) -> dict[str, Any]:
    """The answer with the places of its findings in offsets of its unit."""
    findings = [
        {**found, "start": found["start"] + shift, "end": found["end"] + shift}
        for found in answer.get("findings", ())
    ]
    return {**answer, "findings": findings}


def _stopped() -> dict[str, Any]:
    return {"status": STOPPED, "findings": []}


def _lost(length: int) -> dict[str, Any]:
    message = "the computation ended by itself here, most likely for want of memory"
    found = {
        "severity": "error", "code": "over-budget", "start": 0, "end": length,
        "message": message, "hints": [],
    }  # fmt: skip
    return {"status": "error", "kind": "error", "short": "", "text": message, "findings": [found]}
