"""A real scheduler with two workers on loopback: same bytes, dead workers, a dead scheduler."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import pytest

from many_cases import outcome_of, tally_of

CLAIM = ("let f = x_1; for mu in compositions(2), nu in compositions(2): "
         "claim E_mu E_nu f = E_nu f E_mu + mu_1 - nu_1")


@pytest.fixture(autouse=True)
def _tells_every_case(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright.sweep.PROGRESS_EVERY", 0.0)


@dataclass
class LocalCluster:
    """Processes that the tests may kill."""

    address: str
    scheduler: subprocess.Popen[bytes]
    workers: list[subprocess.Popen[bytes]] = field(default_factory=list)

    def add_worker(self) -> None:
        self.workers.append(_program(
            "distributed.cli.dask_worker", self.address, "--nthreads", "1", "--no-nanny",
            "--no-dashboard", "--local-directory", os.environ["TMPDIR_OF_TEST"]))


def _program(module: str, *arguments: str) -> subprocess.Popen[bytes]:
    return subprocess.Popen(
        [sys.executable, "-m", module, *arguments], stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL)


@pytest.fixture(scope="module")
def cluster(tmp_path_factory: pytest.TempPathFactory) -> Iterator[LocalCluster]:
    os.environ["TMPDIR_OF_TEST"] = str(tmp_path_factory.mktemp("workers"))
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    scheduler = _program("distributed.cli.dask_scheduler", "--host", "127.0.0.1", "--port",
                         str(port), "--no-dashboard")
    deadline = time.monotonic() + 20
    while True:
        try:
            socket.create_connection(("127.0.0.1", port), timeout=1).close()
            break
        except OSError:
            assert time.monotonic() < deadline and scheduler.poll() is None
            time.sleep(0.05)
    found = LocalCluster(f"tcp://127.0.0.1:{port}", scheduler)
    found.add_worker()
    found.add_worker()
    try:
        yield found
    finally:
        for process in (*found.workers, scheduler):
            process.kill()
            process.wait()
        del os.environ["TMPDIR_OF_TEST"]


def test_the_cluster_comes_to_the_same_bytes(cluster: LocalCluster) -> None:
    local = outcome_of(CLAIM, jobs=2)
    remote = outcome_of(CLAIM, cluster=cluster.address)
    assert remote.text == local.text and local.raw.n_failed > 0
    assert {**remote.record(), "seconds": 0} == {**local.record(), "seconds": 0}


def evaluators_of(worker: subprocess.Popen[bytes]) -> list[int]:
    listed = subprocess.run(["ps", "-o", "pid=", "--ppid", str(worker.pid)],
                            capture_output=True, text=True)
    return [int(word) for word in listed.stdout.split()]


def test_a_worker_and_an_evaluator_that_die_cost_nothing(cluster: LocalCluster) -> None:
    n_told = 0

    def disturb(line: str) -> None:
        nonlocal n_told
        n_told += 1
        if n_told == 1:
            for process in evaluators_of(cluster.workers[0]):
                os.kill(process, signal.SIGKILL)
        if n_told == 3:
            cluster.workers[1].kill()

    text = CLAIM.replace("nu in compositions(2)", "nu in compositions(3)")
    expected = tally_of(text, jobs=2)
    found = tally_of(text, cluster=cluster.address, progress=disturb)
    assert n_told >= 3 and cluster.workers[1].wait() != 0
    assert found == expected


def test_a_scheduler_that_goes_away_leaves_what_can_be_resumed(
    cluster: LocalCluster, tmp_path: Path
) -> None:
    kept = tmp_path / "cases.jsonl"

    def kill(line: str) -> None:
        cluster.scheduler.kill()

    started = time.monotonic()
    text = CLAIM.replace("nu in compositions(2)", "nu in compositions(4)")
    outcome = outcome_of(text, cluster=cluster.address, kept=kept, progress=kill)
    assert outcome.status == "error" and time.monotonic() - started < 25
    first = outcome.diagnostics[0]
    assert "reached: " in first.message and first.hints == (f"--resume {kept}",)
    n_finished = kept.read_bytes().count(b"\n")
    assert 0 < n_finished < 90
    assert tally_of(text, jobs=2, kept=kept) == tally_of(text, jobs=0)
    assert kept.read_bytes().count(b"\n") == 90


def test_nobody_at_the_address() -> None:
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{free.getsockname()[1]}"
    for wrong in (address, "tcp://nowhere.invalid:8786", "scheduler"):
        outcome = outcome_of("for i in 1..3: claim i = i", cluster=wrong)
        assert f"no scheduler answers at {wrong} (" in outcome.diagnostics[0].message


def test_finished_cases_are_kept_beside_the_script_unasked(tmp_path: Path) -> None:
    script = tmp_path / "notes.span"
    script.write_text("for i in 1..3: claim i = i\nlet a = 2\n")
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{free.getsockname()[1]}"
    run = subprocess.run(
        [sys.executable, "-m", "spanwright", "run", "--cluster", address, str(script)],
        capture_output=True, text=True, check=False)
    kept = tmp_path / "notes.cases.jsonl"
    assert run.returncode == 1 and kept.exists()
    assert f"finished cases are kept in {kept}" in run.stderr
    assert f"--resume {kept}" in run.stdout and run.stdout.endswith("a = 2\n")


def test_a_missing_package_is_named(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright.gateway.find_spec", lambda name: None)
    outcome = outcome_of("for i in 1..3: claim i = i", cluster="tcp://127.0.0.1:1")
    assert "spanwright[cluster]" in outcome.diagnostics[0].message
