"""Many cases: two workers against one, the modular stage against the exact one, trivial cases."""

from __future__ import annotations

import atexit
import socket
import subprocess
import sys
import time
from collections.abc import Callable
from importlib.util import find_spec
from typing import Any

from benchmarking import Case
from spanwright import means
from spanwright.claims import at_random_point
from spanwright.context import Context
from spanwright.evaluator import Evaluator
from spanwright.kernel import indices
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


def _local_cluster() -> str:
    """A scheduler and two workers on loopback, ended with this process; its address."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{free.getsockname()[1]}"

    def start(module: str, *arguments: str) -> None:
        process = subprocess.Popen(
            [sys.executable, "-m", f"distributed.cli.{module}", *arguments, "--no-dashboard"],
            stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        atexit.register(process.kill)

    start("dask_scheduler", "--host", "127.0.0.1", "--port", address.rpartition(":")[2])
    time.sleep(5.0)
    for _ in range(2):
        start("dask_worker", address, "--nthreads", "1", "--no-nanny")
    time.sleep(5.0)
    return address


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
        address: list[str] = []

        def on_cluster() -> object:
            if not address:
                address.append(_local_cluster())
            return _sweep(sweep, N, cluster=address[0])()

        found.append(Case(
            name="cluster", what="the same claim, by the local pool and by a local scheduler",
            contenders=[("pool of 2", _sweep(sweep, N, jobs=2)), ("cluster of 2", on_cluster)],
            answer=lambda tally: tally))
    return found
