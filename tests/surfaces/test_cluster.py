"""A real scheduler with two workers on loopback: the same bytes, whatever is stopped or dies."""

from __future__ import annotations

import contextlib
import os
import random
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

import psutil
import pytest

from many_cases import outcome_of, tally_of
from spanwright import gateway
from spanwright.cases import Case
from spanwright.pool import Source
from spanwright.process import ProcessConversation
from spanwright.replies import Reply

WITHIN = 30.0
"""Seconds after which something that should have happened has not."""

CLAIM = ("let f = x_1; for mu in compositions(2), nu in compositions(2): "
         "claim E_mu E_nu f = E_nu f E_mu + mu_1 - nu_1")
# Calls of the kernel library of ten seconds and more each, which nothing can interrupt.
ENDLESS = ("tabulate ((q + t + u + v + k)^32 + u) ((q + t - u + v + 1)^32 + k) "
           "for k in 1..8")
# Calls that want some gigabytes each.
GREEDY = "tabulate ((q + t + u + k)^90 + 1) ((q - t + u + 2)^90 + 1) for k in 1..2"


@pytest.fixture(autouse=True)
def _tells_every_case(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright.sweep.PROGRESS_EVERY", 0.0)


def wait_for(is_so: Callable[[], object], seconds: float = WITHIN) -> None:
    """Look until it is so; a test fails when it never is."""
    until = time.monotonic() + seconds
    while not is_so():
        assert time.monotonic() < until
        time.sleep(0.02)


def below(process: int, module: str) -> list[int]:
    """The living children of a process that run a module."""
    found = []
    for child in psutil.Process(process).children():
        with contextlib.suppress(psutil.NoSuchProcess, psutil.ZombieProcess):
            if f"spanwright.{module}" in child.cmdline():
                found.append(child.pid)
    return found


def clients(process: int) -> list[int]:
    """The clients below a process, as soon as one is there."""
    wait_for(lambda: below(process, "cluster"))
    return below(process, "cluster")


@dataclass
class LocalCluster:
    """Processes that the tests may kill."""

    port: int
    folder: Path
    scheduler: subprocess.Popen[bytes] = field(init=False)
    workers: list[subprocess.Popen[bytes]] = field(default_factory=list)

    @property
    def address(self) -> str:
        return f"tcp://127.0.0.1:{self.port}"

    def start(self) -> None:
        """A scheduler at the same address as ever, and two workers."""
        self.scheduler = _program(
            "distributed.cli.dask_scheduler", "--host", "127.0.0.1", "--port", str(self.port),
            "--no-dashboard")
        wait_for(self._is_listening)
        self.workers = [
            _program(
                "distributed.cli.dask_worker", self.address, "--nthreads", "1", "--no-nanny",
                "--no-dashboard", "--local-directory", str(self.folder))
            for _ in range(2)]

    def _is_listening(self) -> bool:
        assert self.scheduler.poll() is None
        with contextlib.suppress(OSError):
            socket.create_connection(("127.0.0.1", self.port), timeout=1).close()
            return True
        return False

    def end(self) -> None:
        for process in (*self.workers, self.scheduler):
            process.kill()
            process.wait()

    def evaluators(self) -> list[int]:
        return [found for worker in self.workers for found in below(worker.pid, "casework")]

    def at_work(self) -> list[int]:
        """The evaluators that compute."""
        found = []
        for evaluator in self.evaluators():
            with contextlib.suppress(psutil.NoSuchProcess):
                if psutil.Process(evaluator).status() == psutil.STATUS_RUNNING:
                    found.append(evaluator)
        return found


def _program(module: str, *arguments: str) -> subprocess.Popen[bytes]:
    return subprocess.Popen(
        [sys.executable, "-m", module, *arguments], stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL)


@pytest.fixture(scope="module")
def cluster(tmp_path_factory: pytest.TempPathFactory) -> Iterator[LocalCluster]:
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    found = LocalCluster(port, tmp_path_factory.mktemp("workers"))
    found.start()
    try:
        yield found
    finally:
        found.end()


@contextlib.contextmanager
def talking(**means: object) -> Iterator[ProcessConversation]:
    """A conversation of which nothing is left."""
    conversation = ProcessConversation(means=means)
    leader = conversation.process_id
    try:
        for text in ("fix n = 3", "let u be a parameter", "let v be a parameter"):
            assert said(conversation, text).status == "ok"
        yield conversation
        started = below(leader, "cluster")
    finally:
        conversation.close()
    wait_for(lambda: not any(psutil.pid_exists(process) for process in (leader, *started)))


def said(conversation: ProcessConversation, text: str) -> Reply:
    """The last reply to a text."""
    return list(conversation.say(text))[-1]


def disturbed(
    conversation: ProcessConversation, text: str, when: Callable[[], object],
    action: Callable[[], object],
) -> Reply:
    """The reply to a text; meanwhile something is done as soon as something is so."""
    def look_out() -> None:
        wait_for(when)
        action()

    thread = threading.Thread(target=look_out)
    thread.start()
    reply = said(conversation, text)
    thread.join()
    return reply


def test_the_cluster_comes_to_the_same_bytes(cluster: LocalCluster) -> None:
    local = outcome_of(CLAIM, jobs=2)
    remote = outcome_of(CLAIM, cluster=cluster.address)
    assert remote.text == local.text and local.raw.n_failed > 0
    assert {**remote.record(), "seconds": 0} == {**local.record(), "seconds": 0}


def test_the_sentences_of_a_session_have_one_client(cluster: LocalCluster) -> None:
    sentences = (
        CLAIM, "tabulate E_mu E_(0,1,0) for mu in compositions(3)",
        "find k in 1..2000 where k^2 = 1521", "let g = x_2", "for i in 1..9: claim i g = g i")
    with talking(cluster=cluster.address) as conversation, talking(jobs=0) as serial:
        first = clients(conversation.process_id)
        assert len(first) == 1
        for text in sentences:
            remote, local = said(conversation, text), said(serial, text)
            assert (remote.text, remote.status) == (local.text, local.status)
            assert below(conversation.process_id, "cluster") == first


def test_a_python_process_has_one_client_which_is_replaced(cluster: LocalCluster) -> None:
    expected = outcome_of(CLAIM, jobs=0).text
    assert outcome_of(CLAIM, cluster=cluster.address).text == expected
    first = below(os.getpid(), "cluster")
    assert outcome_of(CLAIM, cluster=cluster.address).text == expected
    assert below(os.getpid(), "cluster") == first
    (link,) = gateway._idle[cluster.address]
    assert first == [link.process.pid]
    link.process.kill()
    link.process.wait()
    assert outcome_of(CLAIM, cluster=cluster.address).text == expected
    second = below(os.getpid(), "cluster")
    assert len(second) == 1 and second != first


def test_a_client_ends_when_the_front_end_is_killed() -> None:
    program = ("import time; from spanwright.process import ProcessConversation\n"
               "talk = ProcessConversation(means={'cluster': 'tcp://127.0.0.1:1'})\n"
               "print(list(talk.say('1 + 1'))[0].text, talk.process_id, flush=True)\n"
               "time.sleep(60)")
    front = subprocess.Popen([sys.executable, "-c", program], stdout=subprocess.PIPE, text=True)
    assert front.stdout is not None
    sum_of_two, leader = map(int, front.stdout.readline().split())
    (client,) = clients(leader)
    assert sum_of_two == 2
    front.kill()
    front.wait()
    front.stdout.close()
    wait_for(lambda: not psutil.pid_exists(client) and not psutil.pid_exists(leader))


def test_evaluators_are_kept_and_every_job_has_its_own_limit(cluster: LocalCluster) -> None:
    with talking(cluster=cluster.address) as conversation, talking(jobs=2) as local:
        assert said(conversation, "for i in 1..400: claim i = i").status == "ok"
        kept = cluster.evaluators()
        assert len(kept) == 2
        for amount in (400, 800, 300):
            said(conversation, f"fix memory = {amount} MB")
            assert said(conversation, "for i in 1..400: claim i = i").status == "ok"
            assert cluster.evaluators() == kept
            for evaluator in kept:
                process = psutil.Process(evaluator)
                soft, _ = process.rlimit(psutil.RLIMIT_AS)
                # what it had at its start, and the amount
                assert amount < soft / 10**6 < process.memory_info().vms / 10**6 + amount + 1
        said(local, "fix memory = 600 MB")
        found = said(conversation, GREEDY)
        assert "want of memory" in found.text and found.text == said(local, GREEDY).text
        assert said(conversation, "for i in 1..400: claim i = i").status == "ok"


@pytest.mark.parametrize("is_late", [False, True])
def test_a_stopped_sentence_is_cancelled_on_the_cluster(
    cluster: LocalCluster, is_late: bool
) -> None:
    with talking(cluster=cluster.address) as conversation:
        first = clients(conversation.process_id)
        if is_late:
            said(conversation, "fix seconds = 3")
            found = said(conversation, ENDLESS)
        else:
            found = disturbed(
                conversation, ENDLESS, lambda: len(cluster.at_work()) == 2, conversation.stop)
        assert found.status == "error" and "stopped" in found.messages[0]
        # far sooner than the cases would be done
        wait_for(lambda: not cluster.at_work(), 5.0)
        said(conversation, "fix seconds = 60")
        assert said(conversation, CLAIM).text == outcome_of(CLAIM, jobs=0).text
        assert below(conversation.process_id, "cluster") == first


def test_stopped_at_any_moment(cluster: LocalCluster) -> None:
    text = "for i in 1..30000: claim i + 1 = 1 + i"
    with talking(cluster=cluster.address) as conversation:
        first = clients(conversation.process_id)
        moments = random.Random(7)
        for _ in range(5):
            until = time.monotonic() + moments.uniform(0.0, 0.6)
            disturbed(
                conversation, text, lambda until=until: time.monotonic() > until,
                conversation.stop)
            assert said(conversation, "for i in 1..50: claim i = 7").text.startswith("fails")
        assert below(conversation.process_id, "cluster") == first


def test_what_a_killed_sentence_leaves_in_the_pipes_is_dropped(cluster: LocalCluster) -> None:
    expected = outcome_of(CLAIM, jobs=0).text
    assert outcome_of(CLAIM, cluster=cluster.address).text == expected
    before = below(os.getpid(), "cluster")
    left = (
        b'{"of": "killed", "chunk": 1, "wit',
        b'\n{"job": "killed", "content": {"sen',
        b'\n{"job": "killed", "content": {}}\n{"of": "killed", "chunk": 1, "within": 1, "ca',
        b'\n{"job": "killed", "content": {}}\n'
        b'{"of": "killed", "chunk": 1, "within": 1, "cases": []}\n[1, 2]\n7\n\xff\n"of',
    )
    for text in left:
        (link,) = gateway._idle[cluster.address]
        os.write(link.requests, text)
        assert outcome_of(CLAIM, cluster=cluster.address).text == expected
    # half an answer has been read
    (link,) = gateway._idle[cluster.address]
    os.write(link.requests, b'\n{"job": "killed", "content": {}}\n')
    assert os.read(link.answers, 5) == b'{"of"'
    assert outcome_of(CLAIM, cluster=cluster.address).text == expected
    assert below(os.getpid(), "cluster") == before


def test_a_worker_and_an_evaluator_that_die_cost_nothing(cluster: LocalCluster) -> None:
    n_told = 0

    def disturb(line: str) -> None:
        nonlocal n_told
        n_told += 1
        if n_told == 1:
            for process in below(cluster.workers[0].pid, "casework"):
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


def test_a_scheduler_that_is_back_serves_the_same_session(cluster: LocalCluster) -> None:
    cluster.end()
    with talking(cluster=cluster.address) as conversation:
        first = clients(conversation.process_id)
        assert "no scheduler answers at" in said(conversation, CLAIM).messages[0]
        cluster.start()
        expected = outcome_of(CLAIM, jobs=0).text
        assert said(conversation, CLAIM).text == expected
        found = disturbed(
            conversation, ENDLESS, lambda: cluster.at_work(), cluster.scheduler.kill)
        assert "went away; reached: 0 of 8 cases" in found.messages[0]
        assert "no scheduler answers at" in said(conversation, CLAIM).messages[0]
        cluster.end()
        cluster.start()
        assert said(conversation, CLAIM).text == expected
        # gone and back while no sentence runs
        cluster.end()
        cluster.start()
        assert said(conversation, CLAIM).text == expected
        assert below(conversation.process_id, "cluster") == first


def test_a_source_knows_when_its_end_is_near() -> None:
    source = Source(iter([Case(k, {}) for k in range(10)]))
    assert source.n_left(4) == 4
    first = source.take(3)
    assert source.n_left(7) == 7 and source.n_left(100) == 7
    source.put_back(first[1:])
    assert source.n_left(100) == 9
    assert [case.number for case in source.take(100)] == [1, 2, *range(3, 10)]
    assert source.n_left(5) == 0 and source.take(1) == []


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
