"""The log: what it looks like, that it is a script, that nothing of it is ever lost."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from recorded import DEMO, Talk, again, log_text, reply_of, write_log
from spanwright import journal, log_files
from spanwright.journal import Journal
from spanwright.log_files import LogFailure
from spanwright.log_format import SHOWN_CHARACTERS, read_log
from spanwright.log_marks import FORMAT, Ending, ending
from spanwright.replay import resume
from spanwright.session import Session
from spanwright_grammar.source import Source

ROOT = Path(__file__).resolve().parents[2]
TRIAL = ROOT / "scripts" / "trials" / "kills.py"


def say(kept: Journal, session: Session, text: str) -> None:
    for _ in kept.recorded(text, session.run_all(Source(text)), reply_of):
        continue


def test_record_is_input_result_and_seal() -> None:
    text = log_text("fix n = 2\nx_1 E_(0,1)")
    head, *rest = text.split("\n\n")
    assert head.startswith("# Spanwright log, format 1\n# written by the tests\n# settings: fix q")
    assert "fix seed = 1" in head
    lines = rest[1].split("\n")
    assert lines[:2] == ["x_1 E_(0,1)", "#= (1 - t)/(1 - q t) E_(2,0) + E_(1,1)"] or \
        lines[0] == "x_1 E_(0,1)"
    assert lines[2].startswith("#= # (1), expansion, digest ")
    assert lines[2][-15:-8] == " check "


def test_log_reads_back() -> None:
    log = read_log(log_text(DEMO))
    assert log.format == 1 and log.altered == () and log.torn is None
    typed = [record.text for record in log.records]
    assert typed[:5] == [
        "fix n = 3", 'remark "The harbour\'s first rule."', "let f = x_1 E_(1,0,2)", "f",
        "claim x_1 E_(0,0,1) = x_2 E_(0,0,1)"]
    assert "x_2 eq_1   # behind a sentence" in typed
    assert log.records[0].prose == ("Notes of the tide office of Vesterholm, an invented place.",)
    refused = [record for record in log.records if record.is_refused]
    assert [record.text for record in refused] == ["x_1 + )"]
    assert "closes nothing" in refused[0].result_text
    tags = [record.seal.tag for record in log.records if record.seal and record.seal.tag]
    assert tags == list(range(1, len(tags) + 1))


def test_log_is_a_script_with_the_same_results() -> None:
    text = log_text(DEMO)
    first = [o.text for o in Session().run_all(Source(DEMO)) if o.status != "error"]
    second = list(Session().run_all(Source(text)))
    assert [o.text for o in second] == first
    assert all(o.status != "error" for o in second)


def test_a_log_of_a_log_is_itself() -> None:
    text = log_text(DEMO)
    assert log_text(text).split("\n\n")[3:] == text.split("\n\n")[3:] or \
        [r.text for r in read_log(log_text(text)).records] == \
        [r.text for r in read_log(text).records if not r.is_refused]


def test_long_result_is_cut_and_still_checked() -> None:
    text = log_text(["fix n = 4", "expand (x_1 + x_2 + x_3 + x_4)^12 in x"])
    record = read_log(text).records[-1]
    assert record.is_cut and record.seal is not None
    assert len(record.result_text) <= SHOWN_CHARACTERS
    assert record.seal.cut.endswith("of 455 terms")
    assert again(text).agrees
    tampered = text.replace(record.seal.digest, record.seal.digest[::-1])
    (check,) = again(tampered).of("differs")
    assert check.line == record.line and "digest" in check.note


@pytest.mark.parametrize("text", [
    "(x_1 +\n#= x_5\n#= # (9), scalar, digest 0123456789ab, check 01234567\n x_2)",
    "let g(a) = (a +\n# (9), check 01234567\n 1); recall g",
    "# prose\n#! x_1\n#= # header, check 01234567\nx_1",
    "x_1 # a\n# b\n\n# c",
    "\n\n", "# only prose", "x_1; ; x_2;", 'remark "check 01234567"',
    "quit", "x_1 (\nfix n = 7", "for i in 1..2:\nclaim x_i = x_i", '"\x1b[31m"', "x_1\r\nx_2\rx_3",
])
def test_nothing_typed_can_look_like_a_record(text: str) -> None:
    found = log_text(["fix n = 6", text, "x_6 + x_6"])
    log = read_log(found)
    assert log.altered == () and log.torn is None
    assert log.records[-1].text == "x_6 + x_6"
    assert log.records[-1].result == ("2 x_6",)
    assert again(found).agrees


SENTENCES = (
    "fix n = 3", "fix n = 4", "fix t = q^2", "fix t = free", "fix basis = E", "fix basis = free",
    "x_1 E_(1,0,2)", "x_2^-1 E_(0,1,0)", "eq_1", "f", "let f = x_1 E_(0,0,1)", "let g(a) = a^2",
    "g(q)", "claim x_1 x_2 = x_2 x_1", "claim x_1 = x_2", "s_(2,1) s_(1)", "S_(2,1,3)",
    "T_1 T_2 T_1", "d_1 x_1^2", "let a, b be parameters", "a x_1 + b", "list((1,2), q)", "1/0",
    "x_1 +", "(1,2", "-x_1", "forget f", "fix show = factored", "fix show = short", "recall",
    "find mu in compositions(1) where mu_1 = 0", "# prose", "x_1 # tail", "(1 - t^3)/(1 - t)",
    "t^(1/2)", "kappa_(0,1,2)", "{1,3}", "partitions(3)", '"quo\\"te"', "fix hecke = balanced",
    "tabulate E_mu for mu in compositions(1)", "remark \"a <b>\"", "3 = 3", "|(1,2)|", "E_(1,1,1)",
)


@settings(max_examples=effort(40))
@given(st.lists(st.lists(st.sampled_from(SENTENCES), min_size=1, max_size=4).map(
    lambda inner: "\n".join(inner)), min_size=1, max_size=6))
def test_any_session_replays_equal(inputs: list[str]) -> None:
    text = log_text(inputs)
    log = read_log(text)
    assert log.altered == () and log.torn is None
    found = again(text)
    assert found.agrees and not found.of("other form"), found


@settings(max_examples=effort(60))
@given(st.data())
def test_changed_bits_are_found_at_their_line(data: st.DataObject) -> None:
    content = FLIPPED.encode()
    place = data.draw(st.integers(0, len(content) - 1))
    bit = data.draw(st.integers(0, 7))
    changed = bytearray(content)
    changed[place] ^= 1 << bit
    text = bytes(changed).decode("utf-8", "replace")
    line = content[:place].count(b"\n") + 1
    log = read_log(text)
    if changed[place:place + 1] == b"\r" or line == 1:
        # a line end of another kind is none the worse, and line 1 says that this is a log
        assert log.format is None or log.altered or log.torn or text.replace(
            "\r", "\n") == FLIPPED
        return
    places = [range(a.first - 2, a.last + 2) for a in log.altered]
    places += [range(log.torn - 2, 10**6)] if log.torn is not None else []
    assert any(line in found for found in places), (line, bit, log.altered, log.torn)


FLIPPED = log_text("fix n = 2\n# prose\nx_1 E_(0,1)\nremark \"tide\"\nx_1 (")


def test_every_beginning_of_a_log_is_read() -> None:
    """A tear at any byte: every whole record is there, and the rest is known as torn."""
    content = FLIPPED.encode()
    seals = [k for k in range(len(content) + 1) if content[:k].endswith(b"\n")
             and b"check " in content[:k].split(b"\n")[-2]]
    n_records = len(read_log(FLIPPED).records)
    assert len(seals) == n_records + 1
    for cut in range(content.index(b"\n") + 1, len(content) + 1):
        log = read_log(content[:cut].decode("utf-8", "replace"))
        n_whole = sum(seal <= cut + 1 for seal in seals)
        assert len(log.records) == max(0, n_whole - 1), cut
        assert log.altered == ()


def test_journal_is_on_disk_before_the_result_is_passed_on(tmp_path: Path) -> None:
    path = tmp_path / "log.span"
    kept = Journal.create(path)
    session = Session(n=2)
    seen = []
    for outcome in kept.recorded("x_1\nx_2", session.run_all(Source("x_1\nx_2")), reply_of):
        seen.append((outcome.text, [r.text for r in journal.read(path).records]))
    assert seen == [("x_1", ["x_1"]), ("x_2", ["x_1", "x_2"])]
    kept.close()
    assert journal.read(path).is_closed


def test_two_sessions_never_write_one_log(tmp_path: Path) -> None:
    path = tmp_path / "log.span"
    kept = Journal.create(path)
    with pytest.raises(LogFailure, match="exists already"):
        Journal.create(path)
    with pytest.raises(LogFailure, match="being written by another session"):
        Journal.reopen(path)
    (tmp_path / "second.span").symlink_to(path)
    with pytest.raises(LogFailure, match="being written by another session"):
        Journal.reopen(tmp_path / "second.span")
    with pytest.raises(LogFailure, match="being written by another session"):
        journal.rewrite(path, "x")
    kept.close()
    reopened, _, _ = Journal.reopen(path)
    reopened.close()


def test_no_log_where_none_can_be(tmp_path: Path) -> None:
    with pytest.raises(LogFailure, match="no such file or directory"):
        Journal.create(tmp_path / "missing" / "log.span")
    with pytest.raises(LogFailure, match="cannot be opened"):
        Journal.reopen(tmp_path / "missing.span")
    plain = tmp_path / "plain.span"
    plain.write_text("x_1\n")
    with pytest.raises(LogFailure, match="is no log"):
        Journal.reopen(plain)
    assert plain.read_text() == "x_1\n"
    later = tmp_path / "later.span"
    later.write_text("# Spanwright log, format 77\n")
    with pytest.raises(LogFailure, match="a newer one is needed"):
        journal.read(later)


LIMITED = """\
import resource, sys
sys.path.insert(0, sys.argv[2])
from pathlib import Path
from recorded import reply_of
from spanwright.journal import Journal
from spanwright.session import Session
from spanwright_grammar.source import Source
kept = Journal.create(Path(sys.argv[1]))
session = Session(n=2)
size = Path(sys.argv[1]).stat().st_size
def say(text):
    for outcome in kept.recorded(text, session.run_all(Source(text)), reply_of):
        print(outcome.text, "|", kept.trouble)
say("x_1")
hard = resource.getrlimit(resource.RLIMIT_FSIZE)[1]
resource.setrlimit(resource.RLIMIT_FSIZE, (size + 120, hard))
say("x_1 x_2")
say("x_2")
resource.setrlimit(resource.RLIMIT_FSIZE, (hard, hard))
say("x_1^2")
kept.close()
"""


def test_full_disk_keeps_the_session_and_loses_nothing(tmp_path: Path) -> None:
    path = tmp_path / "log.span"
    done = subprocess.run(
        [sys.executable, "-c", LIMITED, str(path), str(ROOT / "tests")],
        capture_output=True, text=True, check=True)
    lines = done.stdout.split("\n")
    assert lines[0] == "x_1 | "
    assert "this is not in the log: file too large" in lines[1]
    assert "this is not in the log" in lines[2]
    assert lines[3] == "x_1^2 | "
    log = journal.read(path)
    assert [r.text for r in log.records] == ["x_1", "x_1 x_2", "x_2", "x_1^2"]
    assert log.altered == () and log.torn is None and log.is_closed


def test_removed_log_is_noticed(tmp_path: Path) -> None:
    path = tmp_path / "log.span"
    kept = Journal.create(path)
    path.unlink()
    say(kept, Session(n=2), "x_1")
    assert "the file has been removed" in kept.trouble


def test_interrupt_waits_for_the_record(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "log.span"
    kept = Journal.create(path)
    session = Session(n=2)
    sync = os.fsync

    def interrupted_sync(handle: int) -> None:
        os.kill(os.getpid(), signal.SIGINT)
        sync(handle)

    monkeypatch.setattr(os, "fsync", interrupted_sync)
    with pytest.raises(KeyboardInterrupt):
        say(kept, session, "x_1")
    monkeypatch.undo()
    say(kept, session, "x_2")
    kept.close()
    log = journal.read(path)
    assert [r.text for r in log.records] == ["x_1", "x_2"] and log.altered == ()


def test_resume_brings_everything_back(tmp_path: Path) -> None:
    path = tmp_path / "log.span"
    write_log(path, DEMO)
    before = Session()
    for _ in before.run_all(Source(DEMO)):
        continue
    after = Session()
    resumed = resume(path, Talk(after))
    assert resumed.differences == () and resumed.set_aside is None
    assert after.last_tag == before.last_tag
    assert set(after.context.names) == set(before.context.names)
    assert after.context.results == before.context.results
    assert after.context.settings == before.context.settings
    say(resumed.journal, after, "eq_1 + eq_1")
    resumed.journal.close()
    log = journal.read(path)
    assert log.records[-1].text == "eq_1 + eq_1" and log.altered == () and log.is_closed
    assert again(path.read_text()).agrees


def test_resume_sets_a_torn_record_aside(tmp_path: Path) -> None:
    path = tmp_path / "log.span"
    write_log(path, "fix n = 2\nx_1\nx_2")
    whole = path.read_bytes()
    torn = whole[:whole.index(b"x_2\n") + 9]
    path.write_bytes(torn)
    session = Session()
    resumed = resume(path, Talk(session))
    assert resumed.set_aside == tmp_path / "log.span.torn"
    assert resumed.set_aside.read_bytes().strip() == b"x_2\n#= x_"
    assert session.last_tag == 1
    say(resumed.journal, session, "x_2")
    resumed.journal.close()
    assert again(path.read_text()).agrees
    assert [r.text for r in journal.read(path).records] == ["fix n = 2", "x_1", "x_2"]


def test_lost_session_is_offered_once_it_is_lost(tmp_path: Path) -> None:
    assert log_files.interrupted(tmp_path) is None
    kept = journal.create_default(folder=tmp_path)
    session = Session(n=2)
    say(kept, session, "x_1")
    assert log_files.interrupted(tmp_path) is None, "still running"
    kept.let_go()
    assert log_files.interrupted(tmp_path) == kept.path
    resumed = resume(kept.path, Talk(Session()))
    resumed.journal.close()
    assert log_files.interrupted(tmp_path) is None
    unused = journal.create_default(folder=tmp_path)
    unused.close(keeps_empty=False)
    assert not unused.path.exists()


def test_the_ending_seen_by_lines_alone_is_that_of_the_whole_log(tmp_path: Path) -> None:
    kept = Journal.create(tmp_path / "a.span", ["fix n = 2"])
    say(kept, Session(n=2), "x_1; zork; x_2 # why\n# a remark\nlet f = x_1")
    kept.close()
    resumed = resume(kept.path, Talk(Session()))
    say(resumed.journal, Session(n=2), "x_1 + x_2")
    resumed.journal.close()
    text = kept.path.read_text()
    seen = set()
    for size in range(len(text) + 1):
        log = read_log(text[:size])
        if log.format is None:
            expected = Ending.NO_LOG
        elif not log.records:
            expected = Ending.UNUSED
        else:
            expected = Ending.LEFT if log.is_closed else Ending.LOST
        # the end of a seal is its last digit; the line end behind it may be missing
        found = ending(text[:size].encode())
        assert found is expected, text[:size][-60:]
        seen.add(found)
    assert seen == set(Ending)
    assert ending(text.replace("\n", "\r\n").encode()) is Ending.LEFT
    newer = text.replace(f"format {FORMAT}", f"format {FORMAT + 1}", 1)
    assert ending(newer.encode()) is Ending.NO_LOG
    long = text.replace("x_1 + x_2\n", f"x_1 + x_2   # {'long ' * 40_000}\n")
    assert ending(long[: long.rindex("long")].encode()) is Ending.LEFT


def test_a_lost_session_is_found_behind_newer_logs(tmp_path: Path) -> None:
    lost, running, left = (
        Journal.create(tmp_path / f"{name}.span") for name in ("lost", "running", "left"))
    for k, kept in enumerate((lost, running)):
        say(kept, Session(n=2), "x_1")
        os.utime(kept.path, (time.time() + k - 20,) * 2)
    lost.let_go()
    assert log_files.interrupted(tmp_path, is_last=True) == lost.path
    say(left, Session(n=2), "x_1")
    left.close()
    # a session that was left since is no reason to ask again, nor to give the lost one up
    assert log_files.interrupted(tmp_path, is_last=True) is None
    assert log_files.interrupted(tmp_path) == lost.path
    os.utime(lost.path, (time.time() - log_files.OFFERED_FOR - 60,) * 2)
    assert log_files.interrupted(tmp_path) is None
    running.close()


def test_leaving_at_once_keeps_no_log(tmp_path: Path) -> None:
    kept = Journal.create(tmp_path / "log.span")
    say(kept, Session(n=2), "quit")
    kept.close(keeps_empty=False)
    assert not kept.path.exists()


def test_killed_at_random_moments_loses_nothing(tmp_path: Path) -> None:
    n_kills = effort(25)
    done = subprocess.run(
        [sys.executable, str(TRIAL), "--kills", str(n_kills), "--folder", str(tmp_path)],
        capture_output=True, text=True, timeout=110)
    assert done.returncode == 0, done.stdout + done.stderr
    assert f"{n_kills} kills" in done.stdout and "0 lost" in done.stdout


def test_a_record_costs_a_few_milliseconds(tmp_path: Path) -> None:
    kept = Journal.create(tmp_path / "log.span")
    session = Session(n=2)
    outcomes = list(session.run_all(Source("\n".join(["x_1 x_2"] * 100))))
    generator = random.Random(1)
    started = time.perf_counter()
    for outcome in outcomes:
        for _ in kept.recorded("x_1 x_2", [outcome], reply_of):
            generator.random()
    seconds = time.perf_counter() - started
    kept.close()
    assert seconds / len(outcomes) < 0.1  # some 1 ms on an idle machine, most of it the sync
    assert os.path.getsize(kept.path) > 100 * 60
