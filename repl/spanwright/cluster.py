"""The client of a Dask scheduler in a process of its own, and what its workers run.

`python -m spanwright.cluster ADDRESS PARENT` reads a job and then chunks, one JSON value a line,
and answers as gateway.py reads it. A worker holds one limited evaluator as a subprocess and returns
text, never live objects.
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
from importlib import import_module
from typing import Any
from urllib.parse import urlsplit

from spanwright.confinement import default_memory, end_with_parent

POLL = 0.5
SILENCE = 4.0
"""A scheduler that is away for so many seconds is taken for gone."""
N_TRIES = 5
GRACE = 0.5
CONNECTING = "5s"


# on a worker


class Evaluator:
    """One evaluator as a subprocess; replaced when it ends."""

    def __init__(self, job: str) -> None:
        self.job = job
        content = json.loads(job)
        self._seconds: float | None = content["seconds"]
        memory = content["memory"] or default_memory() // (os.cpu_count() or 1)
        self._head = json.dumps({**content, "memory": memory, "parent": os.getpid()}) + "\n"
        self._start()

    def _start(self) -> None:
        self._process = subprocess.Popen(
            [sys.executable, "-P", "-m", "spanwright.casework"], stdin=subprocess.PIPE,
            stdout=subprocess.PIPE, stderr=subprocess.DEVNULL)
        self._send(self._head)

    def _send(self, line: str) -> None:
        assert self._process.stdin is not None
        try:
            self._process.stdin.write(line.encode())
            self._process.stdin.flush()
        except BrokenPipeError:
            return  # it has died, which reading will find

    def run(self, cases: list[Any]) -> list[dict[str, Any]]:
        """Carry the cases out, one after another; a case that ends the evaluator is reported."""
        found: list[dict[str, Any]] = []
        left = list(cases)
        n_tries = 0
        while left:
            self._send(json.dumps({"cases": left}) + "\n")
            n_done, is_late = self._collect(len(left), found)
            left = left[n_done:]
            if not left:
                break
            n_tries = n_tries + 1 if n_done == 0 else 1
            ended_by = -self.end()
            if is_late or ended_by not in (signal.SIGKILL, signal.SIGTERM) or n_tries >= N_TRIES:
                found.append({"k": left.pop(0)[0], "result": _lost(
                    ended_by, n_tries, self._seconds if is_late else None)})
                n_tries = 0
            self._start()
        return found

    def _collect(self, n_cases: int, found: list[dict[str, Any]]) -> tuple[int, bool]:
        """Read results until all are there or the evaluator ends: how many, whether too late."""
        assert self._process.stdout is not None
        answers = self._process.stdout.fileno()
        rest, n_done = b"", 0
        while True:
            limit = None if self._seconds is None else self._seconds + GRACE
            if not select.select([answers], [], [], limit)[0]:
                self._process.kill()
                return n_done, True
            data = os.read(answers, 1 << 20)
            if not data:
                return n_done, False
            *lines, rest = (rest + data).split(b"\n")
            for line in lines:
                answer = json.loads(line)
                if "k" in answer:
                    found.append(answer)
                    n_done += 1
                elif n_done == n_cases:
                    return n_done, False

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


_of_thread = threading.local()


def run_chunk(job: str, cases: str) -> str:
    """Carry out a chunk on a worker: JSON in, JSON out."""
    evaluator: Evaluator | None = getattr(_of_thread, "evaluator", None)
    if evaluator is not None and evaluator.job != job:
        evaluator.end()
        evaluator = None
    if evaluator is None:
        evaluator = _of_thread.evaluator = Evaluator(job)
    started = time.monotonic()
    content = json.loads(cases)
    answers = evaluator.run(content)
    return json.dumps({"answers": answers,
                       "end": (time.monotonic() - started) / max(1, len(content))})


# the client


class Client:
    """Passes chunks on to the scheduler and answers back."""

    def __init__(self, address: str) -> None:
        self._address = address
        self._finished: queue.Queue[tuple[int, Any]] = queue.Queue()
        self._is_over = threading.Event()
        self._client: Any = None
        self._futures: dict[int, Any] = {}

    def serve(self) -> None:
        """Until standard input is closed or the scheduler goes away."""
        refusal = _refusal(self._address)
        if refusal:
            self._say({"lost": f"no scheduler answers at {self._address} ({refusal})"})
            return
        distributed: Any = import_module("distributed")
        try:
            self._client = distributed.Client(self._address, timeout=CONNECTING)
        except (OSError, TimeoutError, ValueError) as error:
            reason = str(error).splitlines()[0][:120] if str(error) else type(error).__name__
            self._say({"lost": f"no scheduler answers at {self._address} ({reason})"})
            return
        threading.Thread(target=self._take, daemon=True).start()
        away_since: float | None = None
        n_workers = -1
        while not self._is_over.is_set():
            try:
                self._answer(*self._finished.get(timeout=POLL))
                continue
            except queue.Empty:
                pass
            if self._client.status == "running":
                away_since = None
                found = sum(w["nthreads"] for w in
                            self._client.scheduler_info(n_workers=-1)["workers"].values())
                if found != n_workers:
                    n_workers = found
                    self._say({"workers": n_workers})
                continue
            away_since = away_since or time.monotonic()
            if time.monotonic() - away_since > SILENCE:
                self._say({"lost": f"the scheduler at {self._address} went away"})
                return

    def _take(self) -> None:
        """Read chunks and submit them, in a thread of its own."""
        # this module runs as a program; workers know the function by the module's own name
        from spanwright.cluster import run_chunk

        job = sys.stdin.readline().strip()
        for line in sys.stdin:
            chunk = json.loads(line)
            number = chunk["chunk"]
            # equal calls must not be merged: a chunk may be sent a second time
            future = self._client.submit(
                run_chunk, job, json.dumps(chunk["cases"]), pure=False, retries=1)
            self._futures[number] = future
            future.add_done_callback(lambda f, number=number: self._finished.put((number, f)))
        self._is_over.set()

    def _answer(self, number: int, future: Any) -> None:
        self._futures.pop(number, None)
        if future.status != "finished":
            if self._client.status != "running" or future.status in ("cancelled", "lost"):
                # the scheduler took it along; serve() finds out
                return
            error = future.exception()
            self._say({"dead": type(error).__name__, "chunk": number})
            return
        content = json.loads(future.result())
        for answer in content["answers"]:
            self._say({**answer, "chunk": number})
        self._say({"end": content["end"], "chunk": number})

    def _say(self, content: dict[str, Any]) -> None:
        sys.stdout.write(json.dumps(content) + "\n")
        sys.stdout.flush()

    def close(self) -> None:
        """Cancel what is still waiting."""
        if self._client is not None and self._client.status == "running":
            self._client.cancel(list(self._futures.values()))
            self._client.close(timeout=1)


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
    client = Client(sys.argv[1])
    try:
        client.serve()
        client.close()
    finally:
        # the library's threads would hold the process up
        sys.stdout.flush()
        os._exit(0)


if __name__ == "__main__":
    main()
