"""Runs cases in processes of their own: the engine interface, one process, and a pool of many.

    driver ──chunk: {"cases": [[number, values], …]}──► worker        one JSON value a line
           ◄──case: {"k": number, "result": {…}}──────  worker
           ◄──chunk: {"end": seconds a case}──────────  worker

A worker is forked from a process with one thread, and then has its context and all that it
remembers; otherwise it is started afresh and sent the context as text. A worker that dies loses
the case at hand: killed from outside, the case is given to another worker; ended by itself (the
kernel library aborts when memory runs out), it is reported.
"""

from __future__ import annotations

import gc
import json
import math
import os
import select
import signal
import subprocess
import sys
import threading
import time
from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from typing import Any, NoReturn, Protocol

from spanwright import means
from spanwright.cases import UNDECIDED, Case, CaseRunner, Result
from spanwright.confinement import default_memory, end_with_parent, limit_memory
from spanwright.finished import LOST
from spanwright.kernel import budget

CHUNK_SECONDS = 0.1
"""So much work goes to a worker at once: long against a message, short against the rest."""
LARGEST_CHUNK = 500
N_TRIES = 5
"""A case whose worker is killed from outside this often is given up."""
WINDOW = 50_000
"""Cases that may be finished ahead of the first unfinished one: they wait in memory."""
LOOKING_AHEAD = 0.02
"""Seconds that may be spent at once on finding out how many cases are left."""
GRACE = 0.5
"""A case that looks at its clock stops by itself; this is for one that cannot."""
TICK = 0.2

KILLED_FROM_OUTSIDE = (signal.SIGKILL, signal.SIGTERM, signal.SIGHUP, signal.SIGINT)


class EngineLost(Exception):
    """The engine can go on no longer; the message says why."""


class Engine(Protocol):
    """Runs cases somewhere and hands the results back in any order."""

    def results(
        self, cases: Iterator[Case], check: Callable[[], None]
    ) -> Iterator[tuple[Case, Result]]:
        """Run the cases; `check` is called often and raises to end the run.

        Raises EngineLost when the cases left cannot be run.
        """
        ...

    def close(self) -> None:
        """End every process of this engine."""
        ...


class OneProcess:
    """The engine that runs every case right here."""

    def __init__(self, runner: CaseRunner, case_seconds: float | None = None) -> None:
        self._runner = runner
        self._seconds = case_seconds

    def results(
        self, cases: Iterator[Case], check: Callable[[], None]
    ) -> Iterator[tuple[Case, Result]]:
        """Run the cases one after another."""
        for case in cases:
            check()
            yield case, limited(self._runner, case, self._seconds)
            check()

    def close(self) -> None:
        """Nothing to end."""


def limited(
    runner: CaseRunner, case: Case, seconds: float | None,
    is_over: Callable[[], str | None] = lambda: None,
) -> Result:
    """Run one case under the budget in force and its own limit of time."""
    outer = budget.current()
    deadline = None if seconds is None else time.monotonic() + seconds

    def reason() -> str | None:
        if deadline is not None and time.monotonic() > deadline:
            return stopped_after(seconds)
        return is_over() or outer.is_spent()

    with budget.using(replace(outer, is_spent=reason, report=None)):
        return runner.run(case)


def stopped_after(seconds: float | None) -> str:
    """The reason of a case that took too long."""
    return f"stopped after {seconds:g} seconds"


# the worker's side


def serve(requests: int, answers: int, runner: CaseRunner, case_seconds: float | None) -> None:
    """Carry out chunks until the driver closes the pipe."""
    is_over = ends_with_parent()
    with os.fdopen(requests, "rb") as lines:
        for line in lines:
            carry_out_chunk(json.loads(line), answers, runner, case_seconds, is_over)


def ends_with_parent() -> Callable[[], str | None]:
    """What a case asks time and again, where the system does not end a worker with its parent."""
    parent = os.getppid()

    def is_over() -> str | None:
        if os.getppid() != parent:
            os._exit(1)
        return None

    return is_over


def carry_out_chunk(
    chunk: dict[str, Any], answers: int, runner: CaseRunner, case_seconds: float | None,
    is_over: Callable[[], str | None],
) -> None:
    """Carry out one chunk; where it says `within`, no case is begun after so many seconds."""
    started = time.monotonic()
    within = chunk.get("within", math.inf)
    n_cases = 0
    # what is many cases inside a case runs right there
    with means.using(means.Means(jobs=0)):
        for number, packed in chunk["cases"]:
            if n_cases and time.monotonic() - started > within:
                break
            n_cases += 1
            case = runner.case(number, packed)
            result = limited(runner, case, case_seconds, is_over)
            write_line(answers, {"k": number, "result": result})
    write_line(answers, {"end": (time.monotonic() - started) / max(1, n_cases)})


def write_line(to: int, content: Any) -> None:
    """Write one JSON value and a line break, whole."""
    view = memoryview(json.dumps(content).encode() + b"\n")
    while view:
        view = view[os.write(to, view):]


# the driver's side


@dataclass(slots=True)
class Worker:
    """One worker as the driver sees it."""

    process: int
    requests: int
    answers: int
    popen: subprocess.Popen[bytes] | None = None
    outstanding: dict[int, Case] = field(default_factory=dict)
    rest: bytes = b""
    since: float = 0.0
    is_over_time: bool = False

    def send(self, cases: list[Case], n: int | None) -> bool:
        """Give the worker a chunk; False when it is dead."""
        self.outstanding = {case.number: case for case in cases}
        self.since = time.monotonic()
        try:
            write_line(self.requests, {"cases": [[c.number, c.packed(n)] for c in cases]})
        except BrokenPipeError:
            return False
        return True

    def end(self) -> int:
        """Kill the worker, if need be; its status as `waitpid` gives it."""
        for fd in (self.requests, self.answers):
            os.close(fd)
        try:
            os.kill(self.process, signal.SIGKILL)
        except ProcessLookupError:
            return 0
        return self._wait()

    def _wait(self) -> int:
        if self.popen is not None:
            code = self.popen.wait()
            return -code if code < 0 else code << 8
        try:
            return os.waitpid(self.process, 0)[1]
        except ChildProcessError:
            return 0

    def ended_by(self) -> int:
        """The signal that a dead worker ended by, 0 when it left of its own accord."""
        for fd in (self.requests, self.answers):
            os.close(fd)
        status = self._wait()
        return os.WTERMSIG(status) if os.WIFSIGNALED(status) else 0


class Pool:
    """A pool of worker processes that replaces the dead and loses no case but the one at hand."""

    def __init__(
        self, runner: CaseRunner, n_workers: int, *, case_seconds: float | None = None,
        job: Callable[[], dict[str, Any]] | None = None, is_fresh: bool = False,
    ) -> None:
        """`job` gives what a worker that is started afresh must be told."""
        self._runner = runner
        self._n_workers = n_workers
        self._seconds = case_seconds
        self._job = job
        self._is_fresh = is_fresh or not can_fork()
        self._workers: list[Worker] = []
        memory = runner.context.settings.memory or default_memory()
        self._memory = max(64 * 10**6, memory // n_workers)
        self._cost = 0.0
        self._tries: dict[int, int] = {}

    def results(
        self, cases: Iterator[Case], check: Callable[[], None]
    ) -> Iterator[tuple[Case, Result]]:
        """Run the cases; results come as they are finished."""
        source = Source(cases)
        while True:
            check()
            self._give(source)
            busy = [w for w in self._workers if w.outstanding]
            if not busy:
                return
            ready, _, _ = select.select([w.answers for w in busy], [], [], TICK)
            for worker in busy:
                if worker.answers in ready:
                    yield from self._read(worker, source)
                elif self._is_late(worker):
                    worker.is_over_time = True
                    os.kill(worker.process, signal.SIGKILL)

    def _is_late(self, worker: Worker) -> bool:
        return (
            self._seconds is not None and not worker.is_over_time
            and time.monotonic() - worker.since > self._seconds + GRACE)

    def _give(self, source: Source) -> None:
        """A chunk for every idle worker; workers are started while there is work for them."""
        for worker in list(self._workers):
            if not worker.outstanding and not self._send(worker, source):
                return
        while len(self._workers) < self._n_workers:
            chunk = source.take(1)
            if not chunk:
                return
            worker = self._start()
            self._workers.append(worker)
            if not worker.send(chunk, self._runner.context.settings.n):
                source.put_back(chunk)
                worker.outstanding = {}
                self._workers.remove(worker)
                worker.end()

    def _send(self, worker: Worker, source: Source) -> bool:
        size = 1 if self._cost <= 0 else int(CHUNK_SECONDS / self._cost)
        chunk = source.take(max(1, min(size, LARGEST_CHUNK)))
        if not chunk:
            return False
        if not worker.send(chunk, self._runner.context.settings.n):
            # it died while it was idle: nothing is lost
            source.put_back(chunk)
            worker.outstanding = {}
            self._workers.remove(worker)
            worker.ended_by()
        return True

    def _read(self, worker: Worker, source: Source) -> Iterator[tuple[Case, Result]]:
        data = os.read(worker.answers, 1 << 20)
        if not data:
            yield from self._buried(worker, source)
            return
        *lines, worker.rest = (worker.rest + data).split(b"\n")
        for line in lines:
            answer = json.loads(line)
            if "end" in answer:
                self._measure(answer["end"])
            else:
                case = worker.outstanding.pop(answer["k"])
                worker.since = time.monotonic()
                source.finished(case)
                self._tries.pop(case.number, None)
                yield case, answer["result"]

    def _measure(self, seconds: float) -> None:
        # a slow chunk counts at once, a fast one slowly: chunks must not grow too long
        weight = 0.7 if seconds > self._cost else 0.3
        self._cost += weight * (seconds - self._cost)

    def _buried(self, worker: Worker, source: Source) -> Iterator[tuple[Case, Result]]:
        """A worker has died: the case it was at is lost, the others of its chunk go back."""
        self._workers.remove(worker)
        ended_by = worker.ended_by()
        left = list(worker.outstanding.values())
        at_hand, others = left[0], left[1:]
        tries = self._tries[at_hand.number] = self._tries.get(at_hand.number, 0) + 1
        if ended_by in KILLED_FROM_OUTSIDE and not worker.is_over_time and tries < N_TRIES:
            source.put_back(left)
            return
        source.put_back(others)
        source.finished(at_hand)
        yield at_hand, self._lost(worker, ended_by, tries)

    def _lost(self, worker: Worker, ended_by: int, tries: int) -> Result:
        if worker.is_over_time:
            return {"status": UNDECIDED, "code": "over-budget",
                    "reason": stopped_after(self._seconds)}
        if ended_by in (signal.SIGABRT, signal.SIGSEGV, signal.SIGBUS):
            return {"status": UNDECIDED, "code": "over-budget",
                    "reason": "the evaluator ended, most likely for want of memory "
                              f"({signal.Signals(ended_by).name}; fix memory = … to allow more)"}
        name = signal.Signals(ended_by).name if ended_by else "without a word"
        times = f", {tries} times" if tries > 1 else ""
        return {"status": UNDECIDED, "code": LOST,
                "reason": f"the evaluator was lost with this case ({name}{times})"}

    # starting workers

    def _start(self) -> Worker:
        return self._spawned() if self._is_fresh else self._forked()

    def _forked(self) -> Worker:
        their_requests, requests = os.pipe()
        answers, their_answers = os.pipe()
        parent = os.getpid()
        gc.freeze()  # what is shared stays shared: a collection would touch it all
        child = os.fork()
        if child == 0:
            self._as_worker(parent, their_requests, their_answers)
        gc.unfreeze()
        os.close(their_requests)
        os.close(their_answers)
        return Worker(child, requests, answers)

    def _as_worker(self, parent: int, requests: int, answers: int) -> NoReturn:
        status = 1
        try:
            end_with_parent(parent)
            # an interrupt of the terminal is the driver's business
            signal.signal(signal.SIGINT, signal.SIG_IGN)
            requests, answers = _keep_only(requests, answers)
            limit_memory(self._memory)
            serve(requests, answers, self._runner, self._seconds)
            status = 0
        finally:
            # never back into the driver's code: there are its files and its tests' clean-up
            os._exit(status)

    def _spawned(self) -> Worker:
        if self._job is None:
            raise EngineLost("a new evaluator cannot be started here")
        process = subprocess.Popen(
            [sys.executable, "-P", "-m", "spanwright.casework"], stdin=subprocess.PIPE,
            stdout=subprocess.PIPE, stderr=subprocess.DEVNULL)
        assert process.stdin is not None and process.stdout is not None
        # the pipes outlive the streams, which would buffer
        requests, answers = os.dup(process.stdin.fileno()), os.dup(process.stdout.fileno())
        process.stdin.close()
        process.stdout.close()
        worker = Worker(process.pid, requests, answers, process)
        write_line(requests, {
            **self._job(), "memory": self._memory, "seconds": self._seconds,
            "parent": os.getpid()})
        return worker

    def close(self) -> None:
        """End all workers."""
        for worker in self._workers:
            worker.end()
        self._workers = []


def can_fork() -> bool:
    """Whether a fork is to be had and safe: locks that other threads hold would stay held."""
    return hasattr(os, "fork") and threading.active_count() == 1


def _keep_only(requests: int, answers: int) -> tuple[int, int]:
    """Close everything of the driver's: others wait for the end of these pipes and files."""
    null = os.open(os.devnull, os.O_RDWR)
    kept = []
    for fd in (requests, answers):
        kept.append(os.dup(fd) if fd < 3 else fd)
    for fd in (0, 1, 2):
        os.dup2(null, fd)
    low, high = sorted(kept)
    os.closerange(3, low)
    os.closerange(low + 1, high)
    os.closerange(high + 1, max(high + 2, os.sysconf("SC_OPEN_MAX")))
    return kept[0], kept[1]


class Source:
    """The cases yet to be given out, and how far ahead of the slowest they are."""

    def __init__(self, cases: Iterator[Case]) -> None:
        self._cases = cases
        self._ahead: deque[Case] = deque()
        self._returned: list[Case] = []
        self._out: dict[int, None] = {}

    def n_left(self, at_most: int) -> int:
        """How many cases are left to give out, `at_most` when there are so many or more.

        Also `at_most` when that takes too long to find out.
        """
        until = time.monotonic() + LOOKING_AHEAD
        at_most = min(at_most, WINDOW)
        while len(self._returned) + len(self._ahead) < at_most:
            case = next(self._cases, None)
            if case is None:
                return len(self._returned) + len(self._ahead)
            self._ahead.append(case)
            if time.monotonic() > until:
                break
        return at_most

    def take(self, at_most: int) -> list[Case]:
        """The next cases; none when all are given out, or when the slowest must be awaited."""
        chunk: list[Case] = []
        while len(chunk) < at_most:
            case = self._next()
            if case is None:
                break
            chunk.append(case)
            self._out[case.number] = None
        return chunk

    def _next(self) -> Case | None:
        if self._returned:
            return self._returned.pop()
        if len(self._out) > 0:
            # given out in order, so the first that is still out is nearly always the lowest
            newest = next(reversed(self._out))
            if newest - next(iter(self._out)) > WINDOW:
                return None
        return self._ahead.popleft() if self._ahead else next(self._cases, None)

    def put_back(self, cases: list[Case]) -> None:
        """Cases that nobody has finished: they come next, in order."""
        for case in cases:
            self._out.pop(case.number, None)
        self._returned += reversed(cases)

    def finished(self, case: Case) -> None:
        """A case is done."""
        self._out.pop(case.number, None)
