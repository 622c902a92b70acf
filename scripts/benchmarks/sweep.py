"""Many cases: two workers against one, the modular stage against the exact one, trivial cases."""

from __future__ import annotations

import atexit
import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Callable
from functools import cache
from importlib.util import find_spec
from typing import Any

from benchmarking import Case, Contender
from spanwright import means
from spanwright.claims import at_random_point
from spanwright.context import Context
from spanwright.evaluator import Evaluator
from spanwright.kernel import indices
from spanwright.process import ProcessConversation
from spanwright.session import Session
from spanwright.settings import Settings
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source

N = 4
SWEEP = ("for k in 0..{}: for mu in compositions(k): "
         "claim E_mu E_(0,1,0,0) x_1 = x_1 E_(0,1,0,0) E_mu")

# true identities whose sides are computed along different ways
IDENTITIES = (
    "E_MU E_(0,1,0,0) = E_(0,1,0,0) E_MU",
    "E_MU E_(1,0,1,0) = E_(1,0,1,0) E_MU",
    "(E_MU + x_1)^2 = E_MU^2 + 2 x_1 E_MU + x_1^2",
)


def _sweep(text: str, n: int, **by: Any) -> Callable[[], object]:
    def run() -> object:
        with means.using(means.Means(**by)):
            return Session(n=n).run(text).raw

    return run


def _claims(largest: int) -> list[syntax.Comparison]:
    found = []
    for size in range(1, largest + 1):
        for mu in indices.compositions(size, N):
            for identity in IDENTITIES:
                text = identity.replace("MU", f"({','.join(map(str, mu))})")
                (sentence,) = parse(Source(f"claim {text}")).sentences
                assert isinstance(sentence, syntax.Claim)
                assert isinstance(sentence.statement, syntax.Comparison)
                found.append(sentence.statement)
    return found


class _Sides:
    """A session with a pool of two, and one with a scheduler and two workers, on loopback.

    Everything is started once and ends with this process. Before each turn the workers'
    evaluators are started anew, for a pool's workers have no memories of earlier turns either.
    """

    def __init__(self) -> None:
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            address = f"tcp://127.0.0.1:{free.getsockname()[1]}"
        _start("dask_scheduler", "--host", "127.0.0.1", "--port", address.rpartition(":")[2])
        time.sleep(5.0)
        self._workers = [
            _start("dask_worker", address, "--nthreads", "1", "--no-nanny") for _ in range(2)]
        time.sleep(5.0)
        self._sessions = {
            "pool": ProcessConversation(means={"jobs": 2}),
            "cluster": ProcessConversation(means={"cluster": address})}
        for session in self._sessions.values():
            atexit.register(session.close)
            list(session.say(f"fix n = {N}"))

    def said(self, side: str, text: str) -> str:
        """What a session answers."""
        return [reply.text for reply in self._sessions[side].say(text)][-1]

    def make_ready(self, side: str) -> None:
        """A small run, so that all that a sweep needs runs already, without its memories."""
        if side == "cluster":
            for worker in self._workers:
                listed = subprocess.run(["ps", "-o", "pid=", "--ppid", str(worker.pid)],
                                        capture_output=True, text=True, check=False)
                for process in listed.stdout.split():
                    os.kill(int(process), signal.SIGKILL)
        self.said(side, "for i in 1..100: claim i = i")


def _start(module: str, *arguments: str) -> subprocess.Popen[bytes]:
    process = subprocess.Popen(
        [sys.executable, "-m", f"distributed.cli.{module}", *arguments, "--no-dashboard"],
        stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    atexit.register(process.kill)
    return process


@cache
def _sides() -> _Sides:
    return _Sides()


def _cluster_case() -> Case:
    # twice as long as the claim for two workers: starts and tails are to weigh as they do
    text = SWEEP.format(6).replace("compositions(k)", "compositions(k), i in 1..2").replace(
        "x_1", "x_i")

    def contender(label: str, side: str) -> Contender:
        return Contender(label, lambda: _sides().said(side, text),
                         prepare=lambda: _sides().make_ready(side))

    return Case(
        name="cluster",
        what="a sentence in a running session, by its local pool and by a local scheduler: pool "
             "workers are forked in the time; client, workers and their evaluators run before",
        contenders=[contender("pool of 2", "pool"), contender("cluster of 2", "cluster")],
        answer=lambda text: text)


def cases(is_quick: bool) -> list[Case]:
    """The figures of the sweep engine."""
    sweep = SWEEP.format(3 if is_quick else 6)
    context = Context(Settings(n=N))
    claims = _claims(2 if is_quick else 3)
    n_trivial = 2_000 if is_quick else 100_000
    trivial = f"for i in 1..{n_trivial}: claim i + 1 = 1 + i"
    found = [
        Case(
            name="workers", what="a claim over all compositions of a size in n = 4",
            contenders=[(f"{jobs} worker{'s' if jobs > 1 else ''}", _sweep(sweep, N, jobs=jobs))
                        for jobs in (1, 2)],
            answer=lambda tally: tally),
        Case(
            name="two-stages", what="true identities of n = 4",
            contenders=[
                ("modular", lambda: [at_random_point(c, context) for c in claims]),
                ("exact", lambda: [Evaluator(context).truth(c) for c in claims])],
            answer=lambda truths: [t.holds for t in truths],  # type: ignore[attr-defined]
            n_units=len(claims), unit="claim"),
        Case(
            name="trivial-cases", what="claims that cost nothing, on one core",
            contenders=[("in this process", _sweep(trivial, 1, jobs=0)),
                        ("1 worker", _sweep(trivial, 1, jobs=1))],
            n_units=n_trivial, unit="case"),
    ]
    if not is_quick and find_spec("distributed") is not None:
        found.append(_cluster_case())
    return found
