"""The engine that sends chunks of cases to a running Dask scheduler.

The scheduler's client has threads, and a session must have none, for it forks; so the client
lives in a process of its own (cluster.py), and this side only writes and reads lines. A session
has one client, whichever of its processes runs a sentence.
"""

from __future__ import annotations

import atexit
import contextlib
import json
import os
import select
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib.util import find_spec
from typing import Any

from spanwright.cases import UNDECIDED, Case, CaseRunner, Result
from spanwright.finished import LOST
from spanwright.pool import LARGEST_CHUNK, TICK, EngineLost, Source, write_line

CHUNK_SECONDS = 0.7
"""A task costs about 7 ms there, so a chunk lasts a hundred times as long."""
SHORTEST_CHUNK = 0.05
"""Seconds for a chunk towards the end, when all workers should stop together."""
CHUNKS_A_WORKER = 2
"""One chunk runs while the next already waits at the worker."""
FIRST_ANSWER = 30.0
"""Seconds until the scheduler must have answered and have workers."""


# the client


@dataclass(frozen=True, slots=True)
class _Link:
    """The ends of a client's pipes; `owner` alone may use it, or, None, all that inherit it."""

    requests: int
    answers: int
    process: subprocess.Popen[bytes]
    owner: int | None

    def is_alive(self) -> bool:
        """Whether the client runs; what it told an earlier sentence is read away."""
        while select.select([self.answers], [], [], 0)[0]:
            if not os.read(self.answers, 1 << 20):
                return False
        return True

    def close(self) -> None:
        """Let go of the client, which ends when nobody else holds it."""
        os.close(self.requests)
        os.close(self.answers)
        if self.owner == os.getpid():
            self.process.kill()
            self.process.wait()


_idle: dict[str, list[_Link]] = {}
"""By address: clients that no sentence uses now."""


def start_ahead(address: str | None) -> tuple[int, ...]:
    """Start a client for this process and all that are forked off it, which take turns.

    It connects while other things are done. Returns the ends of its pipes: it lives until this
    process ends, or everybody has closed them.
    """
    if address is None or find_spec("distributed") is None:
        return ()
    link = _started(address, None)
    _idle.setdefault(address, []).append(link)
    return link.requests, link.answers


def stop_work() -> None:
    """Tell the inherited clients that the process which used them was killed."""
    for link in (link for links in _idle.values() for link in links if link.owner is None):
        # short enough to be written whole, or not at all: a client that hangs hangs nobody
        if select.select([], [link.requests], [], 0)[1]:
            with contextlib.suppress(BrokenPipeError):
                os.write(link.requests, CANCEL)


CANCEL = b'\n{"cancel": true}\n'


def _started(address: str, owner: int | None) -> _Link:
    process = subprocess.Popen(
        [sys.executable, "-P", "-m", "spanwright.cluster", address, str(os.getpid())],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL)
    assert process.stdin is not None and process.stdout is not None
    # the pipes outlive the streams, which would buffer
    link = _Link(os.dup(process.stdin.fileno()), os.dup(process.stdout.fileno()), process, owner)
    process.stdin.close()
    process.stdout.close()
    return link


def _taken(address: str) -> _Link:
    """A client that is this sentence's alone until it is given back."""
    links = _idle.setdefault(address, [])
    while links:
        link = links.pop()
        if link.owner in (None, os.getpid()) and link.is_alive():
            return link
        link.close()
    return _started(address, os.getpid())


@atexit.register
def _end_all() -> None:
    for links in _idle.values():
        while links:
            links.pop().close()


# the engine


class Cluster:
    """Cases on the workers of a scheduler."""

    def __init__(
        self, address: str, runner: CaseRunner, job: Callable[[], dict[str, Any]], *,
        case_seconds: float | None = None,
    ) -> None:
        """Raises EngineLost when the package for it is not installed, or the client has died."""
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
        content = {**job(), "memory": runner.context.settings.memory, "seconds": case_seconds}
        self._id = os.urandom(8).hex()
        self._link = _taken(address)
        try:
            # what was killed before may have left half a line
            os.write(self._link.requests, b"\n")
            write_line(self._link.requests, {"job": self._id, "content": content})
        except BrokenPipeError as error:
            self._link.close()
            raise self._ended() from error

    def results(
        self, cases: Iterator[Case], check: Callable[[], None]
    ) -> Iterator[tuple[Case, Result]]:
        """Run the cases; results come as chunks are finished."""
        source = Source(cases)
        without_workers = time.monotonic()
        single: list[Case] = []
        while True:
            check()
            if self._n_workers:
                without_workers = time.monotonic()
                self._give(source, single)
                if not self._chunks:
                    return
            elif time.monotonic() - without_workers > FIRST_ANSWER:
                raise EngineLost(
                    f"the scheduler at {self._address} has no workers that answer")
            if not select.select([self._link.answers], [], [], TICK)[0]:
                continue
            for answer in self._read():
                if "workers" in answer:
                    self._n_workers = answer["workers"]
                elif "lost" in answer:
                    raise EngineLost(answer["lost"])
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
                    chunk = self._chunks.pop(answer["chunk"])
                    weight = 0.5 if self._cost else 1.0
                    self._cost += weight * (answer["end"] - self._cost)
                    found = [(chunk.pop(a["k"]), a["result"]) for a in answer["answers"]]
                    # those for which there was no time
                    source.put_back(list(chunk.values()))
                    for case, result in found:
                        source.finished(case)
                        yield case, result

    def _give(self, source: Source, single: list[Case]) -> None:
        while len(self._chunks) < CHUNKS_A_WORKER * self._n_workers:
            chunk = [single.pop(0)] if single else source.take(self._size(source))
            if not chunk:
                return
            self._n_chunks += 1
            self._chunks[self._n_chunks] = {case.number: case for case in chunk}
            try:
                write_line(self._link.requests, {
                    "of": self._id, "chunk": self._n_chunks, "within": CHUNK_SECONDS,
                    "cases": [[c.number, c.packed(self._n)] for c in chunk]})
            except BrokenPipeError as error:
                raise self._ended() from error

    def _size(self, source: Source) -> int:
        """How many cases the next chunk has; a worker gives back what takes too long."""
        if self._cost <= 0:
            return 1
        size = max(1, min(int(1.5 * CHUNK_SECONDS / self._cost), 20 * LARGEST_CHUNK))
        n_shares = CHUNKS_A_WORKER * self._n_workers
        fair = -(-source.n_left(size * n_shares) // n_shares)
        return min(size, max(fair, int(SHORTEST_CHUNK / self._cost), 1))

    def _ended(self) -> EngineLost:
        return EngineLost(f"the connection to {self._address} has ended")

    def _read(self) -> Iterator[dict[str, Any]]:
        data = os.read(self._link.answers, 1 << 20)
        if not data:
            raise self._ended()
        *lines, self._rest = (self._rest + data).split(b"\n")
        for line in lines:
            # half a line is left where an earlier sentence stopped reading
            with contextlib.suppress(ValueError):
                content = json.loads(line)
                if isinstance(content, dict) and content.get("of") == self._id:
                    yield content

    def close(self) -> None:
        """Cancel what still runs, and leave the client to the next sentence."""
        with contextlib.suppress(BrokenPipeError):
            os.write(self._link.requests, CANCEL)
        _idle.setdefault(self._address, []).append(self._link)
