"""The pool of worker processes: order, dead workers, limits, a killed driver, nothing left over."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from many_cases import outcome_of, tally_of
from spanwright.cases import Case, Result
from spanwright.context import Context
from spanwright.pool import OneProcess, Pool, can_fork
from spanwright.settings import Settings
from spanwright.tally import tally_text

SLOW_CLAIM = ("for mu in compositions(3), nu in compositions(2): "
              "claim E_mu E_nu = E_nu E_mu + mu_1 - nu_1")


class Acting:
    """Carries out cases by acting on the process it runs in: what a case does is its number."""

    def __init__(self, acts: dict[int, Any], seconds: float = 0.0) -> None:
        self.context = Context(Settings(n=2))
        self._acts = acts
        self._seconds = seconds

    def case(self, number: int, packed: list[Any]) -> Case:
        return Case(number, {"i": packed[0]})

    def run(self, case: Case) -> Result:
        time.sleep(self._seconds)
        act = self._acts.get(case.bound["i"])
        if act is not None:
            act()
        return {"status": "held", "square": case.bound["i"] ** 2}


def cases(n_cases: int) -> Iterator[Case]:
    return (Case(i, {"i": i}) for i in range(n_cases))


def nothing() -> None:
    pass


def results_of(pool: Pool, n_cases: int, check: Any = nothing) -> dict[int, Result]:
    found: dict[int, Result] = {}
    try:
        for case, result in pool.results(cases(n_cases), check):
            assert case.number not in found, "a case was counted twice"
            found[case.number] = result
    finally:
        pool.close()
    return found


def children() -> set[int]:
    listed = subprocess.run(
        ["ps", "-o", "pid=", "--ppid", str(os.getpid())], capture_output=True, text=True)
    return {int(word) for word in listed.stdout.split()}


@pytest.mark.parametrize("n_workers", [1, 2, 8])
def test_every_case_comes_back_once(n_workers: int) -> None:
    before = set(os.listdir("/proc/self/fd")) if Path("/proc/self/fd").exists() else set()
    found = results_of(Pool(Acting({}), n_workers), 2_000)  # type: ignore[arg-type]
    assert found == {i: {"status": "held", "square": i * i} for i in range(2_000)}
    if before:
        assert set(os.listdir("/proc/self/fd")) == before


@pytest.mark.parametrize("act", [
    os.abort, lambda: os.kill(os.getpid(), signal.SIGSEGV), lambda: os._exit(0)])
def test_a_worker_that_dies_loses_one_case(act: Any) -> None:
    for n_workers in (1, 2):
        found = results_of(Pool(Acting({5: act, 60: act}), n_workers), 100)  # type: ignore[arg-type]
        lost = [i for i, result in found.items() if result["status"] == "undecided"]
        assert sorted(lost) == [5, 60] and len(found) == 100
        assert "evaluator" in found[5]["reason"]


def test_a_worker_killed_from_outside_costs_nothing() -> None:
    pool = Pool(Acting({}, 0.01), 2)  # type: ignore[arg-type]
    source = random.Random(3)
    last = time.monotonic()
    n_killed = 0

    def check() -> None:
        nonlocal last, n_killed
        if time.monotonic() - last > 0.15 and pool._workers:
            os.kill(source.choice(pool._workers).process, signal.SIGKILL)
            last = time.monotonic()
            n_killed += 1

    found = results_of(pool, 200, check)
    assert n_killed >= 3
    assert found == {i: {"status": "held", "square": i * i} for i in range(200)}


def test_a_case_that_always_kills_is_given_up() -> None:
    acts = {3: lambda: os.kill(os.getpid(), signal.SIGKILL)}
    found = results_of(Pool(Acting(acts), 2), 10)  # type: ignore[arg-type]
    assert found[3]["code"] == "lost" and "SIGKILL, 5 times" in found[3]["reason"]
    assert sum(result["status"] == "held" for result in found.values()) == 9


def test_a_case_that_cannot_be_interrupted_is_stopped() -> None:
    started = time.monotonic()
    pool = Pool(Acting({1: lambda: time.sleep(60)}), 2, case_seconds=0.5)  # type: ignore[arg-type]
    found = results_of(pool, 20)
    assert found[1]["reason"] == "stopped after 0.5 seconds"
    assert sum(result["status"] == "held" for result in found.values()) == 19
    assert time.monotonic() - started < 10


def test_memory_is_bounded_for_every_worker() -> None:
    def greedy() -> None:
        with pytest.raises(MemoryError):
            bytearray(600 * 10**6)
        os._exit(3)

    runner = Acting({2: greedy})
    runner.context = Context(Settings(n=2, memory=256 * 10**6))
    found = results_of(Pool(runner, 2), 6)  # type: ignore[arg-type]
    # the worker met the limit, and left by the door that says so
    assert found[2]["code"] == "lost" and "without a word" in found[2]["reason"]


def test_no_process_is_left() -> None:
    before = children()
    pool = Pool(Acting({}, 0.05), 4)  # type: ignore[arg-type]
    results = pool.results(cases(1_000), nothing)
    next(results)
    assert len(children() - before) >= 4
    results.close()  # type: ignore[attr-defined]
    pool.close()
    assert not (children() & before) - before and len(children() - before) <= 1  # `ps` itself


def test_workers_end_with_their_driver() -> None:
    program = (
        "import sys; from many_cases import tally_of\n"
        "print('ready', flush=True)\n"
        f"tally_of({SLOW_CLAIM.replace('compositions(3)', 'compositions(6)')!r}, jobs=3)")
    path = os.pathsep.join([str(Path(__file__).parent.parent), *sys.path])
    driver = subprocess.Popen([sys.executable, "-c", program], stdout=subprocess.PIPE,
                              env={**os.environ, "PYTHONPATH": path}, start_new_session=True)
    assert driver.stdout is not None and driver.stdout.readline() == b"ready\n"

    def in_group() -> list[str]:
        listed = subprocess.run(["ps", "-o", "pid=,stat=", "--sid", str(driver.pid)],
                                capture_output=True, text=True)
        return [line for line in listed.stdout.splitlines() if " Z" not in line]

    deadline = time.monotonic() + 20
    while len(in_group()) < 4:
        assert time.monotonic() < deadline and driver.poll() is None
        time.sleep(0.05)
    driver.kill()
    driver.wait()
    driver.stdout.close()
    while in_group():
        assert time.monotonic() < deadline, in_group()
        time.sleep(0.05)


def test_a_killed_run_is_resumed_to_the_same_bytes(tmp_path: Path) -> None:
    kept = tmp_path / "cases.jsonl"
    program = (
        "import sys; from pathlib import Path; from many_cases import tally_of\n"
        f"tally_of({SLOW_CLAIM!r}, jobs=2, kept=Path(sys.argv[1]))")
    path = os.pathsep.join([str(Path(__file__).parent.parent), *sys.path])
    driver = subprocess.Popen([sys.executable, "-c", program, str(kept)],
                              env={**os.environ, "PYTHONPATH": path})
    deadline = time.monotonic() + 20
    while not kept.exists() or kept.read_bytes().count(b"\n") < 10:
        assert time.monotonic() < deadline and driver.poll() is None
        time.sleep(0.005)
    driver.kill()
    driver.wait()
    n_finished = kept.read_bytes().count(b"\n")
    serial = tally_of(SLOW_CLAIM, jobs=0)
    assert tally_of(SLOW_CLAIM, jobs=2, kept=kept) == serial
    assert kept.read_bytes().count(b"\n") == serial.n_cases == 60
    assert 10 <= n_finished < 60


def test_workers_started_afresh_come_to_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where a fork is not to be had, the context travels as text."""
    text = (
        "let a, b be parameters; let c(k) = (1 - a q^k)/(1 - b); let F_mu = c(mu_1) x_1 E_mu; "
        "let f = F_(1,0,1) + 1; let T1 = T_1 Y_2 + 1; x_1 E_(0,1,0); fix t = q^2; "
        "let L = list(x_1, E_(1,0,0)); "
        "for mu in compositions(1), g in list(f, x_1^-1): "
        "claim F_mu + f + g + T1 eq_1 = g + c(1) + L_2 + eq_1")
    forked = outcome_of(text, jobs=2)
    monkeypatch.setattr("spanwright.pool.can_fork", lambda: False)
    fresh = outcome_of(text, jobs=2)
    assert fresh.text == forked.text == outcome_of(text, jobs=0).text
    assert fresh.raw.n_failed == 6
    # places of faults are those of the whole text
    wrong = f"fix n = 3; {'let z = 1; ' * 5}for i in 1..2: claim x_i = y"
    for outcome in (outcome_of(wrong, jobs=2), outcome_of(wrong, jobs=0)):
        assert outcome.diagnostics[0].span.start == len(wrong) - 1


def test_serial_and_pool_are_one_interface() -> None:
    runner = Acting({})
    one = {c.number: r for c, r in OneProcess(runner).results(cases(50), nothing)}  # type: ignore[arg-type]
    assert one == results_of(Pool(runner, 2), 50)  # type: ignore[arg-type]


def test_the_tests_themselves_may_fork() -> None:
    assert can_fork()
    assert tally_text(tally_of("for i in 1..3: claim i = i", jobs=2)).startswith("holds")
