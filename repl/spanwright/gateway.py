"""The engine that sends chunks of cases to a running Dask scheduler.

The scheduler's client has threads, and a session must have none, for it forks; so the client
lives in a process of its own (cluster.py), and this side only writes and reads lines.
"""

from __future__ import annotations

import json
import os
import select
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from importlib.util import find_spec
from typing import Any

from spanwright.cases import UNDECIDED, Case, CaseRunner, Result
from spanwright.finished import LOST
from spanwright.pool import LARGEST_CHUNK, TICK, EngineLost, Source, write_line

CHUNK_SECONDS = 0.7
"""A task costs about 7 ms there, so a chunk lasts a hundred times as long."""
CHUNKS_A_WORKER = 2
"""One chunk runs while the next already waits at the worker."""
FIRST_ANSWER = 30.0
"""Seconds until the scheduler must have answered."""


class Cluster:
    """Cases on the workers of a scheduler."""

    def __init__(
        self, address: str, runner: CaseRunner, job: Callable[[], dict[str, Any]], *,
        case_seconds: float | None = None,
    ) -> None:
        """Raises EngineLost when the package for it is not installed, or nobody answers."""
        if find_spec("distributed") is None:
            raise EngineLost("a cluster needs the package distributed: "
                             "install spanwright[cluster]")
        self._address = address
        self._n = runner.context.settings.n
        self._cost = 0.0
        self._n_workers = 0
        self._rest = b""
        self._chunks: dict[int, dict[int, Case]] = {}
        self._n_chunks = 0
        self._process = subprocess.Popen(
            [sys.executable, "-P", "-m", "spanwright.cluster", address, str(os.getpid())],
            stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL)
        assert self._process.stdin is not None and self._process.stdout is not None
        self._requests = self._process.stdin.fileno()
        self._answers = self._process.stdout.fileno()
        self._write({**job(), "memory": runner.context.settings.memory,
                     "seconds": case_seconds, "parent": os.getpid()})

    def results(
        self, cases: Iterator[Case], check: Callable[[], None]
    ) -> Iterator[tuple[Case, Result]]:
        """Run the cases; results come as chunks are finished."""
        source = Source(cases)
        started = time.monotonic()
        single: list[Case] = []
        while True:
            check()
            if not self._n_workers:
                if time.monotonic() - started > FIRST_ANSWER:
                    raise EngineLost(
                        f"the scheduler at {self._address} has no workers that answer")
            else:
                self._give(source, single)
                if not self._chunks:
                    return
            if not select.select([self._answers], [], [], TICK)[0]:
                continue
            for answer in self._read():
                if "workers" in answer:
                    self._n_workers = answer["workers"]
                elif "lost" in answer:
                    raise EngineLost(answer["lost"])
                elif "k" in answer:
                    case = self._chunks[answer["chunk"]].pop(answer["k"])
                    source.finished(case)
                    yield case, answer["result"]
                elif "dead" in answer:
                    left = list(self._chunks.pop(answer["chunk"]).values())
                    if len(left) > 1:
                        single += left
                        continue
                    source.finished(left[0])
                    yield left[0], {
                        "status": UNDECIDED, "code": LOST,
                        "reason": f"the workers were lost with this case ({answer['dead']})"}
                else:
                    self._chunks.pop(answer["chunk"])
                    self._cost += 0.5 * (answer["end"] - self._cost)

    def _give(self, source: Source, single: list[Case]) -> None:
        while len(self._chunks) < CHUNKS_A_WORKER * self._n_workers:
            if single:
                chunk = [single.pop(0)]
            else:
                size = 1 if self._cost <= 0 else int(CHUNK_SECONDS / self._cost)
                chunk = source.take(max(1, min(size, 20 * LARGEST_CHUNK)))
            if not chunk:
                return
            self._n_chunks += 1
            self._chunks[self._n_chunks] = {case.number: case for case in chunk}
            self._write({"chunk": self._n_chunks,
                         "cases": [[c.number, c.packed(self._n)] for c in chunk]})

    def _write(self, content: Any) -> None:
        try:
            write_line(self._requests, content)
        except BrokenPipeError as error:
            raise EngineLost(f"the connection to {self._address} has ended") from error

    def _read(self) -> list[dict[str, Any]]:
        data = os.read(self._answers, 1 << 20)
        if not data:
            raise EngineLost(f"the connection to {self._address} has ended")
        *lines, self._rest = (self._rest + data).split(b"\n")
        return [json.loads(line) for line in lines]

    def close(self) -> None:
        """End the connection; what runs on the cluster is cancelled there."""
        assert self._process.stdin is not None and self._process.stdout is not None
        self._process.stdin.close()
        try:
            self._process.wait(2.0)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()
        self._process.stdout.close()
