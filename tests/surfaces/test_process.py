"""The evaluator process: stopped, over its budgets, killed, crashed, left alone; nothing is lost.

Figures of time are generous here, for machines under load; scripts/trials and scripts/bench hold
the evaluator to the exact ones.
"""

from __future__ import annotations

import contextlib
import json
import os
import random
import resource
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import psutil
import pytest

from spanwright.conversation import LocalConversation, local
from spanwright.crashes import MemoryLimit
from spanwright.evaluating import CheckpointedSession
from spanwright.files import Folder
from spanwright.frames import encoded, read_exactly, receive
from spanwright.process import ProcessConversation
from spanwright.replies import Progress, Reply, State
from spanwright.session import Session

ROOT = Path(__file__).resolve().parents[2]
WITHIN = 30.0
"""Seconds after which something that should have happened has not."""

# One call of the kernel library of ten seconds and more, which nothing can interrupt.
ENDLESS = "((q + t + u + v + 1)^32 + u) ((q + t - u + v + 1)^32 + 1)"
# One call that wants some gigabytes.
GREEDY = "((q + t + u + 1)^90 + 1) ((q - t + u + 2)^90 + 1)"


def wait_for(is_so: Callable[[], object]) -> None:
    """Look until it is so; a test fails when it never is."""
    until = time.monotonic() + WITHIN
    while not is_so():
        assert time.monotonic() < until
        time.sleep(0.005)


def group(leader: int) -> dict[int, int]:
    """The living processes of a process group, each with its parent."""
    found = {}
    for process in psutil.process_iter(["status", "ppid"]):
        is_dead = process.info["status"] == psutil.STATUS_ZOMBIE
        with contextlib.suppress(ProcessLookupError):
            if os.getpgid(process.pid) == leader and not is_dead:
                found[process.pid] = process.info["ppid"]
    return found


def chain(leader: int) -> list[int]:
    """First process, keeper and session."""
    parents = group(leader)
    found = [leader]
    while below := [pid for pid, parent in parents.items() if parent == found[-1]]:
        found.append(below[-1])
    return found


def at_work(leader: int) -> Callable[[], bool]:
    """Whether the session has computed for a while since this was called."""
    before: dict[int, float] = {}

    def is_so() -> bool:
        found = chain(leader)
        if len(found) != 3:
            return False
        used = psutil.Process(found[2]).cpu_times().user
        return used - before.setdefault(found[2], used) >= 0.1

    is_so()
    return is_so


def is_settled(leader: int) -> bool:
    """Whether first process, keeper and session are all that there is."""
    return len(group(leader)) == 3


@contextlib.contextmanager
def talking(
    folder: Path | None = None, *sentences: str, means: dict[str, object] | None = None
) -> Iterator[ProcessConversation]:
    """A conversation that has heard some sentences; nothing may be left of it."""
    conversation = ProcessConversation(folder, means=means)
    try:
        for sentence in sentences:
            assert said(conversation, sentence).status == "ok", sentence
        yield conversation
    finally:
        conversation.close()
    wait_for(lambda: not group(conversation.process_id))


@pytest.fixture(scope="module")
def calm() -> Iterator[ProcessConversation]:
    """A conversation for tests that leave no traces."""
    with talking(None, "fix n = 3", "let u be a parameter", "let v be a parameter",
                 "let kept = x_1 + 2") as conversation:
        yield conversation


def said(conversation: ProcessConversation, text: str) -> Reply:
    """The last reply to a text."""
    return list(conversation.say(text))[-1]


def when_running(conversation: ProcessConversation, action: Callable[[], object]) -> Reply:
    """Act as soon as a child is at work on an endless sentence; the sentence's reply."""
    is_working = at_work(conversation.process_id)

    def act() -> None:
        wait_for(is_working)
        action()

    thread = threading.Thread(target=act)
    thread.start()
    try:
        return said(conversation, ENDLESS)
    finally:
        thread.join()


def holds_what_it_held(conversation: ProcessConversation) -> bool:
    """Whether the definition made first is there, and computing goes on."""
    return "kept" in conversation.state().names and said(conversation, "kept").text == "x_1 + 2"


# --- what every conversation does -----------------------------------------------------------------


def test_replies_are_those_of_a_session_in_this_process(tmp_path: Path) -> None:
    text = 'fix n = 3; x_1 E_201\nx_1 +\nclaim 1 = 2; remark "so"; let f_mu = 2; |(1,2)|; quit; 5'
    with talking(tmp_path) as conversation:
        there = list(conversation.say(text, "a name", is_recorded=True))
        state = conversation.state()
    here = LocalConversation(Session(folder=Folder(tmp_path)))
    expected = list(here.say(text, "a name", is_recorded=True))

    def timeless(reply: Reply) -> dict[str, object]:
        data = json.loads(json.dumps(reply.to_data()))
        data["record"].pop("seconds")
        return {**data, "seconds": 0}

    assert [timeless(r) for r in there] == [timeless(r) for r in expected]
    assert [r.status for r in there] == ["ok", "ok", "error", "failed", "ok", "ok", "ok", "ok"]
    assert state == here.state()


def test_a_fresh_state_is_known_before_the_evaluator_is_up() -> None:
    with talking() as conversation:
        assert conversation.state() == State() == LocalConversation(Session()).state()


def test_local_gives_a_process_where_there_is_fork(tmp_path: Path) -> None:
    conversation = local(tmp_path)
    assert isinstance(conversation, ProcessConversation)
    assert [r.text for r in conversation.say("2 + 2")] == ["4"]
    conversation.close()
    conversation.close()
    with pytest.raises(ValueError, match="closed"):
        list(conversation.say("1"))


def test_nothing_runs_behind_the_first_failure_when_so_asked(tmp_path: Path) -> None:
    text = 'fix n = 2; x_3; write x_1 to "late.txt"'
    for conversation in (ProcessConversation(tmp_path), LocalConversation(Session())):
        replies = list(conversation.say(text, stops_at_first=True))
        conversation.close()
        assert [r.status for r in replies] == ["ok", "error"]
    assert not (tmp_path / "late.txt").exists()


def test_an_iterator_that_is_dropped_stops_the_text(calm: ProcessConversation) -> None:
    for reply in calm.say(f"1; {ENDLESS}; let late = 1"):
        assert reply.text == "1"
        break
    assert "late" not in calm.state().names
    assert holds_what_it_held(calm)


def test_files_in_the_users_folder_stand_in_for_no_module(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    for name in ("json", "random", "flint", "lark"):
        (tmp_path / f"{name}.py").write_text("raise SystemExit(3)\n")
    monkeypatch.chdir(tmp_path)
    with talking() as conversation:
        assert said(conversation, "1 + 1").text == "2"


# --- stopping -------------------------------------------------------------------------------------


def test_one_kernel_call_is_stopped(calm: ProcessConversation) -> None:
    tag = said(calm, "7").tag
    reply = when_running(calm, calm.stop)
    assert (reply.record["code"], reply.status) == ("stopped", "error")
    assert reply.messages[0].splitlines()[0].startswith("line 1, column 1: stopped")
    assert "reached: a power of about" in reply.messages[0]
    assert holds_what_it_held(calm)
    assert calm.state().last_tag == (tag or 0) + 1
    wait_for(lambda: is_settled(calm.process_id))


def test_a_stop_drops_the_rest_of_the_text(calm: ProcessConversation) -> None:
    timer = threading.Timer(0.3, calm.stop)
    timer.start()
    replies = list(calm.say(f"let early = 1; {ENDLESS}; let late = 1"))
    timer.join()
    assert [r.record.get("code", r.status) for r in replies][-1] == "stopped"
    assert len(replies) <= 2
    assert "late" not in calm.state().names


def test_a_stop_that_comes_late_hits_nothing(calm: ProcessConversation) -> None:
    for _ in range(20):
        replies = calm.say("1; 2")
        assert next(replies).text == "1"
        assert next(replies).text == "2"
        calm.stop()
        assert list(replies) == []
        assert said(calm, "3").text == "3"


def test_a_stop_while_the_text_is_read_leaves_the_session_alone(
    calm: ProcessConversation,
) -> None:
    timer = threading.Timer(0.05, calm.stop)
    timer.start()
    replies = list(calm.say("let early = 1 + 1 + 1 + 1 + 1\n" * 30_000))
    timer.join()
    assert replies[-1].record["code"] == "stopped"
    assert len(replies) < 30_000
    assert holds_what_it_held(calm)


def test_an_interrupt_here_ends_the_text_and_not_the_session(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    session = Session(n=2)
    conversation = LocalConversation(session)
    assert [r.text for r in conversation.say("let kept = x_1; kept")][1] == "x_1"

    def interrupted(*_: object) -> object:
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr(session, "_carry_out", interrupted)
        replies = list(conversation.say("x_2; let late = 1"))
    assert [r.record["code"] for r in replies] == ["stopped"]
    assert [r.text for r in conversation.say("kept")] == ["x_1"]
    assert set(conversation.state().names) == {"kept"}


def test_interrupts_at_random_moments() -> None:
    """Of real sentences, by the real signal; 50 of them, within half a second: scripts/trials."""
    run = subprocess.run(
        [sys.executable, ROOT / "scripts/trials/interrupts.py", "--moments", "8", "--seed", "7",
         "--within", str(WITHIN)], capture_output=True, text=True)
    assert run.returncode == 0, run.stdout + run.stderr
    assert "8 interrupts" in run.stdout


# --- budgets --------------------------------------------------------------------------------------


def test_seconds(calm: ProcessConversation) -> None:
    replies = list(calm.say(f"fix seconds = 1; {ENDLESS}; fix seconds = free; 5"))
    assert [r.record.get("code", r.status) for r in replies] == ["ok", "over-budget", "ok", "ok"]
    message = replies[1].messages[0]
    assert "stopped after 1 second; reached: a power of about" in message
    assert message.endswith("try: fix seconds = 2")
    assert holds_what_it_held(calm)


def test_terms(calm: ProcessConversation) -> None:
    replies = list(calm.say("fix terms = 100; (x_1 + x_2 + x_3)^50; fix terms = 2000000"))
    assert [r.status for r in replies] == ["ok", "error", "ok"]
    assert "the limit is 100" in replies[1].messages[0]
    assert "fix terms" in replies[1].messages[0]


def test_memory_twenty_times() -> None:
    """The twenty of 512 MB are in scripts/trials."""
    with talking(None, "fix n = 3", "let u be a parameter", "let kept = x_1 + 2",
                 "fix memory = 64 MB", "fix terms = 100000000") as conversation:
        def memory() -> int:
            wait_for(lambda: is_settled(conversation.process_id))
            return int(psutil.Process(chain(conversation.process_id)[2]).memory_info().rss)

        before = memory()
        for _ in range(20):
            reply = said(conversation, GREEDY)
            assert reply.record["code"] == "over-budget"
            assert "needs more than 64 MB of memory; reached: " in reply.messages[0]
            assert reply.messages[0].endswith("try: fix memory = 128 MB")
        assert holds_what_it_held(conversation)
        assert memory() < before + 20 * 2**20


@pytest.mark.parametrize("sentence", ["(x_1 + x_2 + x_3 + 1)^200", GREEDY, "list(1..10^6)"])
def test_memory_where_python_or_the_library_runs_out(
    calm: ProcessConversation, sentence: str
) -> None:
    text = f"fix terms = 100000000; fix memory = 64 MB; {sentence}; fix memory = free; 6"
    replies = list(calm.say(text))
    assert replies[2].record["code"] == "over-budget", replies[2].messages
    assert "needs more than 64 MB of memory" in replies[2].messages[0]
    assert [r.status for r in replies[3:]] == ["ok", "ok"]
    assert [r.sentence - replies[0].sentence for r in replies] == [0, 1, 2, 3, 4]
    assert holds_what_it_held(calm)


def test_memory_under_a_cap_of_the_system() -> None:
    cap = 512 * 2**20
    program = (
        "import sys; from spanwright.process import ProcessConversation as P\n"
        "p = P(); list(p.say('let u be a parameter'))\n"
        "for text in ['let kept = 5'] + [sys.argv[1]] * 3 + ['kept + 1']:\n"
        "    for r in p.say(text): print(r.status, r.text, *r.messages)\n"
        "p.close()\n")
    run = subprocess.run(
        [sys.executable, "-c", program, GREEDY], capture_output=True, text=True,
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_AS, (cap, cap)))
    assert run.stderr == ""
    assert run.stdout.count("of memory that the system leaves to this program") == 3
    assert run.stdout.splitlines()[-1].strip() == "ok 6"


@pytest.mark.parametrize("sentence", [
    "(x_1 + 1)^(10^12)", "2^(10^15)", "list(1..10^12)", "(q + 1)^(10^9)", "(1/3)^(10^12)",
    "(1 - q)^(-10^9)", "fix terms = 1000; (x_1 + x_2 + 1)^20 (x_1 - x_2 + 2)^20",
])
def test_what_cannot_fit_is_refused_at_once(calm: ProcessConversation, sentence: str) -> None:
    reply = list(calm.say(f"fix terms = 2000000; {sentence}"))[-1]
    assert reply.record["code"] == "too-large"
    assert reply.seconds < 5
    assert "would have about" in reply.messages[0] or "a list of" in reply.messages[0]


# --- checkpoints ----------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_stops_anywhere_leave_the_session_of_one_that_never_met_them(seed: int) -> None:
    """Texts of several sentences, right ones and wrong ones, some stopped in the middle."""
    chance = random.Random(seed)
    sentences = [
        "let kept = kept + x_1", "kept", "x_9", "let f(a) = a + kept; f(2)", "1 +", "eq_1 + 1",
        "fix n = 3", "claim 1 = 2", "expand (x_1 + x_2 + x_3 + 1)^4 in E", "let g = E_(0,1,2)",
        "remark \"so\"", "forget eq_2; recall", "(x_1 + x_2 + 1)^40 (x_1 - x_2 + 2)^12; 5"]
    here = LocalConversation(Session())
    beginning = "fix n = 3; let u be a parameter; let v be a parameter; let kept = x_2; 7; 8"
    with talking() as there:
        for conversation in (here, there):
            list(conversation.say(beginning))
        for _ in range(12):
            text = "\n".join(chance.choices(sentences, k=chance.randint(1, 5)))
            replies = list(there.say(text))
            expected = list(here.say(text))
            assert [(r.sentence, r.status, r.tag, r.text, r.messages) for r in replies] == [
                (r.sentence, r.status, r.tag, r.text, r.messages) for r in expected]
            if chance.random() < 0.5:
                before = chance.choice(sentences[:5])
                timer = threading.Timer(chance.uniform(0.1, 0.4), there.stop)
                timer.start()
                replies = list(there.say(f"{before}\n{ENDLESS}\nlet late = 1"))
                timer.join()
                assert replies[-1].record["code"] == "stopped"
                # as many sentences, none of which leaves anything
                list(here.say(before))
                list(here.say("x_9\n" * (replies[-1].sentence - expected[-1].sentence - len(
                    list(LocalConversation(Session()).say(before))))))
            assert there.state() == here.state()


def test_a_file_is_not_written_again_when_the_next_sentence_is_stopped(tmp_path: Path) -> None:
    with talking(tmp_path, "fix n = 2", "let u be a parameter", "let v be a parameter",
                 'let kept = x_1 + 2; write kept as text to "kept.txt"') as conversation:
        (tmp_path / "kept.txt").write_text("mine\n")
        assert when_running(conversation, conversation.stop).record["code"] == "stopped"
        assert (tmp_path / "kept.txt").read_text() == "mine\n"
        assert holds_what_it_held(conversation)


def test_finished_cases_are_not_finished_again(tmp_path: Path) -> None:
    kept = tmp_path / "cases.jsonl"
    with talking(tmp_path, "let u be a parameter", "let v be a parameter",
                 means={"kept": str(kept)}) as conversation:
        assert said(conversation, "for k in 1..9: claim k < 5").status == "failed"
    assert kept.read_bytes().count(b"\n") == 9
    with talking(tmp_path, "let u be a parameter", "let v be a parameter",
                 means={"kept": str(kept), "only_failed": True}) as conversation:
        # the failed ones are tried anew, and no more than once
        said(conversation, "for k in 1..9: claim k < 5")
        n_lines = kept.read_bytes().count(b"\n")
        assert n_lines > 9
        assert when_running(conversation, conversation.stop).record["code"] == "stopped"
        assert kept.read_bytes().count(b"\n") == n_lines


def test_a_stop_behind_a_long_text_brings_no_reply_too_many(calm: ProcessConversation) -> None:
    text = "let early = 1\n" * 4_000 + ENDLESS
    timer = threading.Timer(3.0, calm.stop)
    timer.start()
    replies = list(calm.say(text))
    timer.join()
    assert replies[-1].record["code"] == "stopped" and len(replies) <= 4_001
    assert holds_what_it_held(calm)


def test_wrong_sentences_can_be_stopped_too(calm: ProcessConversation) -> None:
    timer = threading.Timer(1.0, calm.stop)
    timer.start()
    replies = list(calm.say("x_1 )\n" * 20_000))
    timer.join()
    assert replies[-1].record["code"] == "stopped" and len(replies) < 20_000


def test_a_stop_before_the_first_reply_is_asked_for(calm: ProcessConversation) -> None:
    replies = calm.say(ENDLESS)
    calm.stop()
    assert [r.record["code"] for r in replies] == ["stopped"]
    # an answer that is let go of late does not stop the next one
    old = calm.say("1; 2")
    assert next(old).text == "1"
    new = calm.say("3; 4")
    assert next(new).text == "3"
    old.close()
    assert next(new).text == "4"


def test_no_room_for_a_keeper(monkeypatch: pytest.MonkeyPatch) -> None:
    session = CheckpointedSession()

    def no_fork() -> int:
        raise OSError(11, "Resource temporarily unavailable")

    n_files = len(os.listdir("/proc/self/fd"))
    monkeypatch.setattr(os, "fork", no_fork)
    frames, session.frames = os.pipe()
    control, _ = os.pipe()
    os.set_blocking(control, False)
    session.control = control
    request = {"id": 1, "say": "1 + 1", "name": "", "skip": 0, "after": 0,
               "is_recorded": False, "stops_at_first": False}
    session._text = session._text_of(request)
    session._answer_text()
    assert receive(frames) is not None
    reply = receive(frames)
    assert reply is not None and "no room for one more process" in reply["reply"]["messages"][0]
    assert len(os.listdir("/proc/self/fd")) == n_files + 4
    for fd in (frames, session.frames, control, _):
        os.close(fd)


def test_a_session_whose_keeper_was_killed_gets_another() -> None:
    with talking(None, "fix n = 3", "let kept = x_1 + 2", "let u be a parameter",
                 "let v be a parameter") as conversation:
        leader, keeper, session = chain(conversation.process_id)
        os.kill(keeper, signal.SIGKILL)
        wait_for(lambda: keeper not in group(leader))
        assert said(conversation, "kept").text == "x_1 + 2"
        wait_for(lambda: is_settled(leader))
        assert conversation.process_id == leader and session in chain(leader)
        assert when_running(conversation, conversation.stop).record["code"] == "stopped"
        assert holds_what_it_held(conversation)


def test_one_checkpoint_serves_many_small_sentences() -> None:
    with talking(None, "fix n = 3") as conversation:
        seen = set()
        for k in range(60):
            assert said(conversation, f"let a = {k} x_1").status == "ok"
            seen.add(chain(conversation.process_id)[1])
        assert len(seen) < 30
        assert said(conversation, "a").text == "59 x_1"


# --- loss and repair ------------------------------------------------------------------------------


@pytest.mark.parametrize("number", [signal.SIGKILL, signal.SIGSEGV, signal.SIGABRT])
def test_a_child_that_dies_costs_its_sentence(
    calm: ProcessConversation, number: signal.Signals
) -> None:
    leader = calm.process_id
    reply = when_running(calm, lambda: os.kill(chain(leader)[2], number))
    assert reply.status == "error"
    assert reply.record["code"] in ("internal-error", "over-budget")
    assert calm.process_id == leader
    assert holds_what_it_held(calm)


@pytest.mark.parametrize("number", [signal.SIGKILL, signal.SIGSEGV])
def test_a_holder_that_dies_is_replaced(number: signal.Signals) -> None:
    with talking(None, "fix n = 3", "let kept = x_1 + 2", "let u be a parameter",
                 "let v be a parameter", "7", "forget eq_1", "8") as conversation:
        first = conversation.process_id
        reply = when_running(conversation, lambda: os.kill(chain(first)[1], number))
        assert reply.record["code"] == "internal-error"
        assert "lost" in reply.messages[0] and "restored" in reply.messages[0]
        assert (reply.sentence, reply.line, reply.source) == (8, 1, ENDLESS)
        wait_for(lambda: not group(first))
        assert said(conversation, "eq_2 + 0").tag == 3
        assert said(conversation, "eq_1").status == "error"
        assert holds_what_it_held(conversation)


def test_a_text_goes_on_behind_the_sentence_that_was_lost() -> None:
    with talking(None, "fix n = 3", "let u be a parameter",
                 "let v be a parameter") as conversation:
        leader = conversation.process_id

        def kill() -> None:
            wait_for(is_working)
            os.kill(chain(leader)[1], signal.SIGKILL)

        replies = conversation.say(f"let kept = x_1 + 2\n{ENDLESS}\nkept")
        assert next(replies).status == "ok"
        is_working = at_work(leader)
        thread = threading.Thread(target=kill)
        thread.start()
        rest = list(replies)
        thread.join()
        assert [(r.line, r.sentence, r.status) for r in rest] == [
            (2, 5, "error"), (3, 6, "ok")]
        assert holds_what_it_held(conversation)


def test_an_evaluator_lost_between_two_sentences_is_not_spoken_of() -> None:
    with talking(None, "fix n = 3", "let kept = x_1 + 2") as conversation:
        os.killpg(conversation.process_id, signal.SIGKILL)
        assert [r.text for r in conversation.say("kept")] == ["x_1 + 2"]


def test_an_evaluator_that_does_not_answer_is_replaced(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright.process.PATIENCE", 0.5)
    with talking(None, "fix n = 3", "let kept = x_1 + 2", "let u be a parameter",
                 "let v be a parameter") as conversation:
        first = conversation.process_id

        def freeze() -> None:
            for process in chain(first)[1:]:
                os.kill(process, signal.SIGSTOP)
            conversation.stop()

        assert when_running(conversation, freeze).record["code"] == "stopped"
        assert conversation.process_id != first or holds_what_it_held(conversation)
        assert holds_what_it_held(conversation)


def test_an_evaluator_that_cannot_start_is_spoken_of(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(sys, "executable", "/bin/false")
    with talking() as conversation:
        (reply,) = conversation.say("1")
    assert "ends before it can answer" in reply.messages[0]


@pytest.mark.parametrize("is_running", [False, True])
def test_nothing_outlives_a_front_end_that_is_killed(is_running: bool) -> None:
    program = (
        "import sys; from spanwright.process import ProcessConversation as P\n"
        "p = P(); list(p.say('let u be a parameter; let v be a parameter'))\n"
        "print(p.process_id, flush=True)\n"
        "list(p.say(sys.argv[1])); print('done', flush=True); sys.stdin.read()\n")
    front = subprocess.Popen(
        [sys.executable, "-c", program, ENDLESS if is_running else "1"],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)
    assert front.stdout is not None
    leader = int(front.stdout.readline())
    if is_running:
        wait_for(at_work(leader))
    else:
        assert front.stdout.readline() == "done\n"
    front.kill()
    front.communicate()
    wait_for(lambda: not group(leader))


# --- long sessions --------------------------------------------------------------------------------


def test_many_sentences_leave_memory_and_processes_as_they_were() -> None:
    text = "x_1 E_(0,1) - x_1 E_(0,1); forget eq_1; claim 2 = 2"
    with talking(None, "fix n = 2") as conversation:
        def session() -> psutil.Process:
            wait_for(lambda: is_settled(conversation.process_id))
            return psutil.Process(chain(conversation.process_id)[2])

        def repeat(times: int) -> None:
            for _ in range(times):
                tag = conversation.state().last_tag + 1
                for reply in conversation.say(text.replace("eq_1", f"eq_{tag}")):
                    assert reply.status == "ok"

        repeat(20)
        before, n_files = session().memory_info().rss, session().num_fds()
        repeat(100)
        assert session().num_fds() == n_files
        assert session().memory_info().rss < 1.1 * before + 2**20


# --- scripts that use scripts ---------------------------------------------------------------------


def test_a_used_script_is_one_sentence(tmp_path: Path) -> None:
    (tmp_path / "inner.span").write_text("let a = 1\nlet b = a + 1\nb^2\n")
    (tmp_path / "outer.span").write_text('use "inner.span"\nlet w = b + 1\n')
    (tmp_path / "wrong.span").write_text("let lost = 1\nnonsense_7\n")
    with talking(tmp_path, 'use "outer.span"') as conversation:
        assert set(conversation.state().names) == {"a", "b", "w"}
        assert said(conversation, 'use "wrong.span"').status == "error"
        assert "lost" not in conversation.state().names
        # used once already: nothing is run again, also by the process that came after
        assert said(conversation, 'use "inner.span"').text == "inner.span read"
        assert said(conversation, "w").tag == 2
        os.killpg(conversation.process_id, signal.SIGKILL)
        assert [r.text for r in conversation.say("w + a")] == ["4"]


# --- progress -------------------------------------------------------------------------------------


def test_progress_tells_time_sentence_and_what_was_reached(calm: ProcessConversation) -> None:
    told: list[Progress] = []

    def show(progress: Progress) -> None:
        told.append(progress)
        if len(told) == 3:
            calm.stop()

    replies = list(calm.say(f"1\n{ENDLESS}", on_progress=show))
    assert replies[-1].record["code"] == "stopped"
    assert all(p.seconds >= 1 and p.sentence == ENDLESS for p in told)
    assert "a power of about" in told[0].reached
    assert [r.text for r in calm.say("2", on_progress=show)] == ["2"]


# --- the evaluator's own parts --------------------------------------------------------------------


def test_frames_cut_in_the_middle_are_no_frames() -> None:
    whole = encoded({"say": "1"})
    for length in range(len(whole)):
        source, sink = os.pipe()
        os.write(sink, whole[:length])
        os.close(sink)
        assert receive(source) is None
        os.close(source)
    source, sink = os.pipe()
    os.write(sink, whole + b"rest")
    os.close(sink)
    assert receive(source) == {"say": "1"}
    assert read_exactly(source, 4) == b"rest"
    os.close(source)


def test_systems_that_do_not_tell_what_is_mapped_bound_nothing(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    def absent(_: Path) -> str:
        raise FileNotFoundError

    session = CheckpointedSession()
    monkeypatch.setattr(Path, "read_text", absent)
    assert session._memory_limit() == MemoryLimit(session.usual_memory, None)
