"""The client of a Dask scheduler in a process of its own, and what its workers run.

`python -m spanwright.cluster ADDRESS PARENT` serves one session, whose sentences come one after
another. Each value is JSON on a line; ID is new for every sentence that has many cases.

    session ──{"job": ID, "content": {…}}──────────────────────► client    one sentence's job
            ──{"of": ID, "chunk": N, "within": S, "cases": …}──► client
            ──{"cancel": true}─────────────────────────────────► client    nobody waits any more
            ◄──{"of": ID, "workers": N}───────────────────────── client
            ◄──{"of": ID, "chunk": N, "answers": …, "end": S}─── client
            ◄──{"of": ID, "chunk": N, "dead": WHY}────────────── client
            ◄──{"of": ID, "lost": WHY}────────────────────────── client    the job has ended

The session's side may be killed in the middle of a line: what is no JSON is dropped, a job and a
cancelling begin with a line break, and each of them ends the job before it. A worker holds limited
evaluators as subprocesses and returns text, never live objects.
"""

from __future__ import annotations

import contextlib
import json
import os
import queue
import select
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable
from importlib import import_module
from typing import Any
from urllib.parse import urlsplit

from spanwright.confinement import default_memory, end_with_parent

POLL = 0.2
LOOK_EVERY = 1.0
"""Seconds between two looks at how many workers there are."""
N_TRIES = 5
GRACE = 0.5
STARTING = 5.0
"""Seconds that a new evaluator may take to start, on top of what its first case may."""
PATIENCE = 0.5
"""Seconds that a case nobody waits for may still take: its evaluator has warm memories."""
CONNECTING = "5s"


# on a worker


class Evaluator:
    """One evaluator as a subprocess, kept from job to job; replaced when it ends."""

    def __init__(self) -> None:
        self.job = ""
        self.cost = 0.0
        """Seconds a case of the last chunk."""
        self._head = ""
        self._seconds: float | None = None
        self._has_old_memories = False
        self._is_new = True
        self._start()

    def _start(self) -> None:
        self._process = subprocess.Popen(
            [sys.executable, "-P", "-m", "spanwright.casework"], stdin=subprocess.PIPE,
            stdout=subprocess.PIPE, stderr=subprocess.DEVNULL)
        self._has_old_memories = False
        self._is_new = True
        self._send(self._head)

    def _send(self, line: str) -> None:
        assert self._process.stdin is not None
        # one that has died is found by reading
        with contextlib.suppress(BrokenPipeError):
            self._process.stdin.write(line.encode())
            self._process.stdin.flush()

    def take(self, job: str) -> None:
        """Serve this job from now on."""
        if job != self.job:
            content = json.loads(job)
            self._seconds = content["seconds"]
            memory = content["memory"] or default_memory() // (os.cpu_count() or 1)
            self._head = json.dumps({**content, "memory": memory, "parent": os.getpid()}) + "\n"
            self._send(self._head)
            self._has_old_memories = self.job != ""
            self.job = job

    def run(
        self, cases: list[Any], within: float, is_wanted: Callable[[], bool]
    ) -> list[dict[str, Any]]:
        """Carry cases out, one after another; a case that ends the evaluator is reported.

        No case is begun after `within` seconds, so that not all need have an answer.
        """
        found: list[dict[str, Any]] = []
        until = time.monotonic() + within
        left = list(cases)
        n_tries = 0
        while left:
            self._send(json.dumps(
                {"cases": left, "within": max(0.0, until - time.monotonic())}) + "\n")
            n_done, how = self._collect(found, is_wanted)
            if how == "done":
                break
            left = left[n_done:]
            is_second_chance = self._has_old_memories and how == "dead"
            ended_by = -self.end()
            if how == "unwanted":
                left = []
            elif left and not is_second_chance:
                n_tries = n_tries + 1 if n_done == 0 else 1
                if (how == "late" or ended_by not in (signal.SIGKILL, signal.SIGTERM)
                        or n_tries >= N_TRIES):
                    found.append({"k": left.pop(0)[0], "result": _lost(
                        ended_by, n_tries, self._seconds if how == "late" else None)})
                    n_tries = 0
            self._start()
        return found

    def _collect(
        self, found: list[dict[str, Any]], is_wanted: Callable[[], bool]
    ) -> tuple[int, str]:
        """Read results until the chunk or the evaluator ends: how many, and which of the two."""
        assert self._process.stdout is not None
        answers = self._process.stdout.fileno()
        rest, n_done = b"", 0
        since = time.monotonic()
        while True:
            if not select.select([answers], [], [], POLL)[0]:
                silent = time.monotonic() - since
                grace = STARTING if self._is_new else GRACE
                is_late = self._seconds is not None and silent > self._seconds + grace
                if is_late or (silent > PATIENCE and not is_wanted()):
                    self._process.kill()
                    return n_done, "late" if is_late else "unwanted"
                continue
            data = os.read(answers, 1 << 20)
            if not data:
                return n_done, "dead"
            since, self._is_new = time.monotonic(), False
            *lines, rest = (rest + data).split(b"\n")
            for line in lines:
                answer = json.loads(line)
                if "k" not in answer:
                    self.cost = answer["end"]
                    return n_done, "done"
                found.append(answer)
                n_done += 1

    def end(self) -> int:
        """Let go of the subprocess; how it ended."""
        assert self._process.stdin is not None and self._process.stdout is not None
        self._process.stdout.close()
        with contextlib.suppress(BrokenPipeError):
            self._process.stdin.close()
        return self._process.wait()


def _lost(ended_by: int, n_tries: int, seconds: float | None) -> dict[str, Any]:
    if seconds is not None:
        return {"status": "undecided", "code": "over-budget",
                "reason": f"stopped after {seconds:g} seconds"}
    name = signal.Signals(ended_by).name if ended_by > 0 else "without a word"
    if ended_by in (signal.SIGABRT, signal.SIGSEGV, signal.SIGBUS):
        return {"status": "undecided", "code": "over-budget",
                "reason": "the evaluator ended, most likely for want of memory "
                          f"({name}; fix memory = … to allow more)"}
    times = f", {n_tries} times" if n_tries > 1 else ""
    return {"status": "undecided", "code": "lost",
            "reason": f"the evaluator was lost with this case ({name}{times})"}


_idle: list[Evaluator] = []
"""Evaluators of this worker that nothing runs on: as many as its threads, at most."""
_access = threading.Lock()


def run_chunk(job: str, cases: str, within: float) -> str:
    """Carry out a chunk on a worker: JSON in, JSON out."""
    with _access:
        of_job = [e for e in _idle if e.job == job] or _idle
        evaluator = of_job[-1] if of_job else None
        if evaluator is not None:
            _idle.remove(evaluator)
    evaluator = evaluator or Evaluator()
    evaluator.take(job)
    answers = evaluator.run(json.loads(cases), within, _task_at_hand())
    with _access:
        _idle.append(evaluator)
    return json.dumps({"answers": answers, "end": evaluator.cost})


def start_evaluator() -> None:
    """Let a worker have an evaluator before the first chunk comes."""
    with _access:
        if not _idle:
            _idle.append(Evaluator())


def _task_at_hand() -> Callable[[], bool]:
    """Whether somebody still waits for the task that this thread of a worker carries out."""
    distributed: Any = import_module("distributed")
    worker = distributed.get_worker()
    key = worker.get_current_task()

    def is_wanted() -> bool:
        task = worker.state.tasks.get(key)
        return task is not None and task.state != "cancelled"

    return is_wanted


# the client


class Client:
    """Passes chunks on to the scheduler and answers back."""

    def __init__(self, address: str) -> None:
        self._address = address
        self._gone = f"the scheduler at {address} went away"
        # what is to be done: lines of the session, and tasks that have ended
        self._events: queue.SimpleQueue[Any] = queue.SimpleQueue()
        # written by a thread of its own: a session that was killed reads no more
        self._answers: queue.SimpleQueue[tuple[str, str]] = queue.SimpleQueue()
        self._client: Any = None
        self._job = ""
        self._is_running = False
        self._content = ""
        self._futures: dict[int, Any] = {}
        self._n_workers = -1
        self._looked = 0.0

    def serve(self) -> None:
        """Until standard input is closed."""
        for work in (self._listen, self._speak):
            threading.Thread(target=work, daemon=True).start()
        # ahead of the first job, which will say what is wrong
        self._events.put({"connect": True})
        while True:
            try:
                with contextlib.suppress(queue.Empty):
                    self._handle(self._events.get(timeout=POLL))
                if self._is_running:
                    self._look()
            except Exception as error:
                is_usual = isinstance(error, OSError | TimeoutError)
                self._lose(self._gone if is_usual else
                           f"the client of {self._address} failed: {type(error).__name__}")

    # threads of their own

    def _listen(self) -> None:
        for line in sys.stdin.buffer:
            with contextlib.suppress(ValueError):
                content = json.loads(line)
                if isinstance(content, dict):
                    self._events.put(content)
        # the scheduler lets go of all that it does for a client that ends
        os._exit(0)

    def _speak(self) -> None:
        while True:
            job, line = self._answers.get()
            if job == self._job:
                sys.stdout.write(line + "\n")
                sys.stdout.flush()

    # the main thread

    def _handle(self, event: Any) -> None:
        if isinstance(event, tuple):
            if event[0] == self._job and self._is_running:
                self._answer(*event[1:])
        elif "job" in event:
            self._drop()
            self._job, self._content = event["job"], json.dumps(event["content"])
            self._n_workers, self._looked = -1, 0.0
            refusal = self._connect()
            self._is_running = not refusal
            if refusal:
                self._say({"lost": f"no scheduler answers at {self._address} ({refusal})"})
        elif "cancel" in event:
            self._drop()
        elif "connect" in event:
            self._connect()
        elif event.get("of") == self._job and self._is_running:
            self._submit(event["chunk"], json.dumps(event["cases"]), event["within"])

    def _connect(self) -> str:
        """Have a connection; why there is none."""
        if self._client is not None:
            if self._client.status == "running":
                return ""
            self._disconnect()
        refusal = _refusal(self._address)
        if refusal:
            return refusal
        distributed: Any = import_module("distributed")
        try:
            self._client = distributed.Client(self._address, timeout=CONNECTING)
        except (OSError, TimeoutError, ValueError) as error:
            return str(error).splitlines()[0][:120] if str(error) else type(error).__name__
        # this module runs as a program; workers know its functions by the module's own name
        from spanwright.cluster import start_evaluator

        threading.Thread(target=self._client.run, args=(start_evaluator,),
                         kwargs={"on_error": "ignore"}, daemon=True).start()
        return ""

    def _disconnect(self) -> None:
        client, self._client = self._client, None
        if client is not None:
            # an end that takes its time, or fails, is nobody's business any more
            threading.Thread(target=client.close, args=(1,), daemon=True).start()

    def _submit(self, number: int, cases: str, within: float) -> None:
        from spanwright.cluster import run_chunk

        # equal calls must not be merged: a chunk may be sent a second time
        future = self._client.submit(
            run_chunk, self._content, cases, within, pure=False, retries=1)
        self._futures[number] = future
        job = self._job
        future.add_done_callback(lambda found: self._events.put((job, number, found)))

    def _answer(self, number: int, future: Any) -> None:
        self._futures.pop(number)
        if future.status in ("cancelled", "lost"):
            # not by this side: the scheduler took it along
            self._lose(self._gone)
        elif future.status == "finished":
            self._say({"chunk": number}, future.result())
        else:
            self._say({"chunk": number, "dead": type(future.exception()).__name__})

    def _look(self) -> None:
        """See whether the scheduler is there, and how many workers."""
        if self._client.status != "running":
            self._lose(self._gone)
        elif time.monotonic() - self._looked > LOOK_EVERY:
            self._looked = time.monotonic()
            known = self._client.scheduler_info(n_workers=-1)["workers"]
            n_workers = sum(worker["nthreads"] for worker in known.values())
            if n_workers != self._n_workers:
                self._n_workers = n_workers
                self._say({"workers": n_workers})

    def _say(self, content: dict[str, Any], also: str = "{}") -> None:
        """Answer; `also` is more of it, which is JSON already."""
        line = json.dumps({"of": self._job, **content})
        self._answers.put((self._job, line if also == "{}" else f"{line[:-1]}, {also[1:]}"))

    def _lose(self, why: str) -> None:
        if self._is_running:
            self._say({"lost": why})
        self._is_running = False
        self._futures.clear()
        self._disconnect()

    def _drop(self) -> None:
        """Nobody waits for the job at hand any more."""
        self._job, self._is_running = "", False
        futures, self._futures = list(self._futures.values()), {}
        if futures and self._client is not None and self._client.status == "running":
            self._client.cancel(futures)


def _refusal(address: str) -> str:
    """Why nothing can listen at an address; the library would try for long."""
    place = urlsplit(address if "://" in address else f"tcp://{address}")
    try:
        if place.hostname is None or place.port is None:
            return "an address is tcp://HOST:PORT"
        if place.scheme in ("tcp", "tls"):
            socket.create_connection((place.hostname, place.port), timeout=5.0).close()
    except (OSError, ValueError) as error:
        return (getattr(error, "strerror", None) or str(error)).lower()
    return ""


def main() -> None:
    """Serve one session."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    end_with_parent(int(sys.argv[2]))
    try:
        Client(sys.argv[1]).serve()
    finally:
        # the library's threads would hold the process up
        os._exit(1)


if __name__ == "__main__":
    main()
