"""Logs run again: agreement, every kind of difference, limits, and what a stranger's log may do."""

from __future__ import annotations

import argparse
import json
import os
from pathlib import Path

import pytest

from recorded import DEMO, Talk, again, log_text, opening, write_log
from spanwright import journal, log_commands, log_files
from spanwright.files import FileRefused, Folder
from spanwright.log_format import read_log
from spanwright.replay import (
    DIFFERS,
    EXTRA,
    MISSING,
    OTHER_FORM,
    lines_of,
    replay,
    side_by_side,
)
from spanwright.replay import Options as ReplayOptions
from spanwright.session import Session
from spanwright.settings import Bounds, Settings

KEPT_LOGS = sorted((Path(__file__).resolve().parents[1] / "logs").glob("*.span"))


def options(*words: str) -> argparse.Namespace:
    parser = argparse.ArgumentParser()
    for name in ("--json", "--allow-outside"):
        parser.add_argument(name, action="store_true")
    log_commands.add_commands(parser.add_subparsers(dest="command"))
    return parser.parse_args(words)


def run(*words: str, answer: bool = False) -> tuple[int, list[str], list[str]]:
    """The exit status, what was written, what was complained of."""
    said: list[str] = []
    complaints: list[str] = []
    status = log_commands.replay(
        options("replay", *words), said.append, complaints.append, lambda question: answer,
        opening)
    return status, said, complaints


def logged(path: Path, inputs: str) -> str:
    write_log(path, inputs)
    return str(path)


def changed(path: Path, old: str, new: str) -> None:
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


def test_a_log_agrees_with_itself(tmp_path: Path) -> None:
    log = logged(tmp_path / "demo.span", DEMO)
    status, said, complaints = run(log)
    assert (status, complaints) == (0, [])
    n_carried_out = sum(not r.is_refused for r in journal.read(Path(log)).records)
    assert said == [f"{log}: {n_carried_out} results as recorded"]


@pytest.mark.parametrize("path", KEPT_LOGS, ids=lambda path: path.name)
def test_logs_of_released_formats_replay_for_ever(path: Path) -> None:
    log = journal.read(path)
    assert log.format is not None and not log.altered and len(log.records) > 10
    status, said, complaints = run(str(path))
    assert (status, complaints) == (0, []), said


def test_there_is_a_log_of_every_format() -> None:
    assert {journal.read(path).format for path in KEPT_LOGS} == {1}


def test_tampered_coefficient_is_found_and_shown(tmp_path: Path) -> None:
    path = tmp_path / "demo.span"
    log = logged(path, "fix n = 3\nx_1 E_(1,0,2)\nx_2")
    changed(path, "#= (1 - t)/(1 - q t) E_(3,0,1)", "#= (1 + t)/(1 - q t) E_(3,0,1)")
    status, said, _ = run(log)
    assert status == 1
    assert said[0] == f"{log}: lines 11 to 15: altered since this was written"
    assert said[1].startswith(f"{log}:11: differs: x_1 E_(1,0,2): the digest is right, the recor")
    shown = "\n".join(said[2:])
    assert "recorded" in shown and "found now" in shown
    assert "(1 + t)/(1 - q t) E_(3,0,1)" in shown and "(1 - t)/(1 - q t) E_(3,0,1)" in shown
    assert "… 3 equal pieces …" in shown
    assert said[-1] == f"{log}: 2 results as recorded; 1 different"


def sealed(text: str) -> str:
    """A log as a careful forger leaves it: every checksum right again."""
    import re
    import zlib

    out, body = [], ""
    for line in text.split("\n"):
        if re.fullmatch(r"#= # .*check [0-9a-f]{8}", line):
            body += line[:-8]
            line = f"{line[:-8]}{zlib.crc32(body.encode()):08x}"
            body = ""
        else:
            body += line + "\n"
        out.append(line)
    return "\n".join(out)


def only(text: str) -> tuple[str, str]:
    """The verdict and note of the one check that does not agree."""
    replayed = again(text)
    assert replayed.altered == ()
    (check,) = replayed.of(DIFFERS, MISSING, EXTRA, OTHER_FORM)
    return check.verdict, check.note


def test_equal_value_in_another_form_is_told_apart() -> None:
    text = log_text("fix n = 3\n(1 - t^2) x_1 + x_2")
    digest = read_log(text).records[-1].seal
    assert digest is not None
    older = text.replace("#= (1 - t) (1 + t) x_1 + x_2", "#= (1 - t^2) x_1 + x_2").replace(
        "#= (1 - t^2) x_1 + x_2", "#= x_2 + (1 + t) (1 - t) x_1").replace(
        f"digest {digest.digest}", "digest 0123456789ab")
    assert older != text
    verdict, note = only(sealed(older))
    assert (verdict, note) == (OTHER_FORM, "an equal value, written in another way")
    assert again(sealed(older)).agrees
    wrong = older.replace("#= x_2 + (1 + t) (1 - t) x_1", "#= x_2 + (1 + t) (1 - q) x_1")
    assert only(sealed(wrong))[0] == DIFFERS
    assert not again(sealed(wrong)).agrees


def test_definition_in_another_form_is_told_apart() -> None:
    text = log_text("fix n = 2\nlet f = x_1 + x_2")
    older = text.replace("#= f = x_1 + x_2", "#= f = x_2 + x_1")
    assert only(sealed(older))[0] == OTHER_FORM
    assert only(sealed(text.replace("#= f = x_1 + x_2", "#= f = 2 x_1 + x_2")))[0] == DIFFERS


def test_forged_digest_alone_is_a_difference() -> None:
    text = log_text("fix n = 2\ntabulate x_1 E_mu for mu in compositions(1)")
    seal = read_log(text).records[-1].seal
    assert seal is not None
    verdict, note = only(sealed(text.replace(seal.digest, "0123456789ab")))
    assert verdict == DIFFERS and "digest" in note


def test_missing_and_extra_results() -> None:
    text = log_text("fix n = 2\nx_1\nx_2")
    verdict, note = only(sealed(text.replace("\nx_2\n#= x_2", "\nx_9\n#= x_2")))
    assert verdict == MISSING and "x_9 does not exist" in note
    lines = text.split("\n")
    at = lines.index("x_2")
    extra = "\n".join([*lines[:at], "x_1 x_2", *lines[at:]])
    replayed = again(sealed(extra))
    assert {(c.verdict, c.source) for c in replayed.of(EXTRA, DIFFERS)} == {
        (EXTRA, "x_1 x_2"), (DIFFERS, "x_2")}, "the tag has moved on too"


def test_claims_are_compared_without_their_evidence() -> None:
    text = log_text("fix n = 2\nclaim x_1 = x_2")
    assert "refuted at" in text
    assert again(sealed(text.replace("refuted at", "found false at"))).agrees
    assert only(sealed(text.replace("\n#= fails\n", "\n#= holds\n")))[0] == DIFFERS


def test_script_with_results_of_hand(tmp_path: Path) -> None:
    path = tmp_path / "hand.span"
    path.write_text("fix n = 2\nx_1 x_1\n#= x_1^2   # as expected\nx_2\n2 x_1\n#= x_1 + x_1\n")
    status, said, _ = run(str(path))
    assert status == 0
    assert said[-1].endswith("1 result as recorded; 1 in another form")
    path.write_text("fix n = 2\nx_1 x_1\n#= x_1^3\n")
    assert run(str(path))[0] == 1


def test_only_some_lines(tmp_path: Path) -> None:
    path = tmp_path / "demo.span"
    log = logged(path, "fix n = 2\nlet f = x_1\nclaim f = x_2\nf\nf^2")
    changed(path, "\nf^2\n", "\nf^3\n")
    lines = {r.text: r.line for r in journal.read(path).records}
    assert run(log, "--only", f"{lines['f']}")[0] == 1, "altered lines are always told"
    replayed = replay(journal.read(path), log, ReplayOptions(
        ((lines["f"], lines["f"]),)), Talk(Session()))
    assert [c.source for c in replayed.checks] == ["f"]
    assert lines_of("12-30, 45") == ((12, 30), (45, 45))
    for wrong in ("x", "0", "9-3", "", "1,,2", "5-"):
        status, _, complaints = run(log, f"--only={wrong}")
        assert status == 2 and "--only" in complaints[0]


def test_json_and_several_logs_at_once(tmp_path: Path) -> None:
    names = [logged(tmp_path / f"log{k}.span", f"fix n = 2\n{k} x_1") for k in range(4)]
    changed(tmp_path / "log2.span", "#= 2 x_1", "#= 3 x_1")
    status, said, _ = run(*names, "--json", "--jobs", "3")
    found = [json.loads(line) for line in said]
    assert status == 1
    assert [f["log"] for f in found] == names
    assert [f["agrees"] for f in found] == [True, True, False, True]
    (wrong,) = [c for c in found[2]["checks"] if c["verdict"] != "agrees"]
    assert (wrong["recorded"], wrong["found"], wrong["verdict"]) == ("3 x_1", "2 x_1", "differs")
    assert found[2]["altered"] == [[11, 13]]


def test_unreadable_logs_are_status_two(tmp_path: Path) -> None:
    status, said, complaints = run(str(tmp_path / "none.span"))
    assert (status, said) == (2, []) and "no such file" in complaints[0]
    assert run(str(tmp_path))[0] == 2
    noise = tmp_path / "noise.span"
    noise.write_bytes(bytes(range(256)) * 20)
    assert run(str(noise))[0] in (0, 1)


def test_rewrite_only_after_a_yes(tmp_path: Path) -> None:
    path = tmp_path / "demo.span"
    log = logged(path, DEMO)
    changed(path, "#= list((2,0,0))", "#= list((2,0,1))")
    before = path.read_text()
    status, _, complaints = run(log, "--rewrite")
    assert status == 1 and "left as it was" in complaints[0]
    assert path.read_text() == before
    assert run(log, "--rewrite", "--only", "3")[0] == 2
    status, said, _ = run(log, "--rewrite", answer=True)
    assert status == 0 and said[-1] == f"{log}: written anew"
    assert run(log)[0] == 0
    after = journal.read(path)
    assert [r.text for r in after.records] == [r.text for r in read_log(before).records]
    assert [r.prose for r in after.records] == [r.prose for r in read_log(before).records]
    assert after.is_closed


def test_a_torn_end_is_told_and_agrees(tmp_path: Path) -> None:
    path = tmp_path / "demo.span"
    log = logged(path, "fix n = 2\nx_1\nx_2")
    text = path.read_text()
    path.write_text(text[:text.index("\nx_2\n#= x_2") + 8])
    status, said, _ = run(log)
    assert status == 0
    assert said[0] == f"{log}: line 14: a torn record, left out"


# --- Limits --------------------------------------------------------------------------------------


def test_limits_end_in_a_message() -> None:
    text = log_text(["fix n = 4", "expand (x_1 + x_2 + x_3 + x_4)^9 in x", "x_1"])
    verdict = again(text, bounds=Bounds(terms=50)).of(MISSING)
    assert [c.source for c in verdict] == ["expand (x_1 + x_2 + x_3 + x_4)^9 in x"]
    assert "50" in verdict[0].note


@pytest.mark.parametrize("raise_it", [
    "fix terms = 1000000", "fix terms = 5 * 10^5", "fix terms = 60",
])
def test_a_log_cannot_lift_its_bounds(raise_it: str) -> None:
    text = log_text([raise_it, "fix n = 4", "expand (x_1 + x_2 + x_3 + x_4)^9 in x"]) \
        if raise_it != "fix terms = 60" else log_text(
            ["fix n = 4", "expand (x_1 + x_2 + x_3 + x_4)^9 in x"]).replace(
                "fix n = 4\n", f"{raise_it}\nfix n = 4\n", 1)
    found = again(text, bounds=Bounds(terms=50))
    assert any("50" in c.note for c in found.of(MISSING)), found.checks


def test_a_used_script_cannot_lift_the_bounds(tmp_path: Path) -> None:
    (tmp_path / "lift.span").write_text("fix terms = 1000000\n")
    path = tmp_path / "demo.span"
    write_log(path, 'fix n = 4\nuse "lift.span"\nexpand (x_1 + x_2 + x_3 + x_4)^9 in x')
    status, said, _ = run(str(path), "--terms", "50")
    assert status == 1 and any("50" in line for line in said)


def test_a_lower_bound_of_the_log_stays() -> None:
    bounds = Bounds(seconds=50, terms=1000, memory=2 * 10**9)
    session = Session(bounds=bounds)
    for text, name, value in (
        ("fix seconds = 20", "seconds", 20), ("fix seconds = 51", "seconds", 50),
        ("fix seconds = free", "seconds", 50), ("fix memory = 1 GB", "memory", 10**9),
        ("fix memory = 3 GB", "memory", 2 * 10**9), ("fix terms = 2 * 9", "terms", 18),
        ("fix terms = 10^6", "terms", 1000),
    ):
        assert session.run(text).status == "ok"
        assert getattr(session.context.settings, name) == value, text
    assert bounds.applied(Settings()) == Settings(seconds=50, terms=1000, memory=2 * 10**9)
    assert Bounds().applied(Settings(seconds=7)) == Settings(seconds=7)


def test_no_script_lifts_the_bounds_of_the_evaluator_from_within(tmp_path: Path) -> None:
    (tmp_path / "lift.span").write_text(
        "fix terms = 1000000; fix seconds = 100; fix memory = 100 GB\nfix n = 4\n"
        "let f = (x_1 + x_2 + x_3 + x_4)^9\n")
    path = tmp_path / "demo.span"
    write_log(path, 'use "lift.span"\nf')
    said: list[str] = []
    status = log_commands.replay(
        options("replay", str(path), "--terms", "50"), said.append, said.append,
        lambda question: False)
    assert status == 1 and any("50" in line for line in said), said


# --- What a stranger's log may do ----------------------------------------------------------------


def test_replay_writes_below_output_and_nowhere_else(tmp_path: Path) -> None:
    home = tmp_path / "home"
    home.mkdir()
    path = home / "demo.span"
    write_log(path, 'fix n = 2\nlet f = x_1\nwrite f as text to "f.txt"')
    (home / "f.txt").write_text("mine")
    assert run(str(path))[0] == 0
    assert (home / "f.txt").read_text() == "mine"
    assert run(str(path), "--output", str(tmp_path / "out"))[0] == 0
    assert (tmp_path / "out" / "f.txt").read_text() == "x_1\n"
    assert (home / "f.txt").read_text() == "mine"
    assert sorted(p.name for p in home.iterdir()) == ["demo.span", "f.txt"]


def test_tables_are_written_below_output_too(tmp_path: Path) -> None:
    home, out = tmp_path / "home", tmp_path / "out"
    home.mkdir()
    path = home / "demo.span"
    write_log(path, 'fix n = 2\ntabulate x_1 E_mu for mu in compositions(1) to "w.csv"')
    table = (home / "w.csv").read_text()
    assert "(0,1)" in table
    (home / "w.csv").write_text("mine")
    said: list[str] = []
    for extra in ((), ("--output", str(out)), ("--allow-outside", "--output", str(out))):
        # through the evaluator's own process, as on the command line
        status = log_commands.replay(
            options("replay", str(path), *extra), said.append, said.append, lambda question: False)
        assert status == 0, said
        assert (home / "w.csv").read_text() == "mine"
    assert (out / "w.csv").read_text() == table
    assert sorted(p.name for p in home.iterdir()) == ["demo.span", "w.csv"]


@pytest.mark.parametrize("target", [
    "../escape.txt", "ABSOLUTE", "a/../../escape.txt", "link/escape.txt", "escape.txt\\u0000",
])
def test_nothing_is_written_outside(tmp_path: Path, target: str) -> None:
    home, out = tmp_path / "home", tmp_path / "out"
    home.mkdir()
    out.mkdir()
    (home / "link").symlink_to(tmp_path)
    (out / "link").symlink_to(tmp_path)
    name = target.replace("ABSOLUTE", str(tmp_path / "escape.txt"))
    path = home / "demo.span"
    path.write_text(f'fix n = 2\nwrite x_1 as text to "{name}"\n#= 4 characters written\n')
    before = {p.name for p in tmp_path.iterdir()}
    for extra in ((), ("--allow-outside",)):
        run(str(path), "--output", str(out), *extra)
        assert {p.name for p in tmp_path.iterdir()} == before


def test_folder_reads_and_writes_below_only(tmp_path: Path) -> None:
    home = tmp_path / "home"
    home.mkdir()
    secret = tmp_path / "secret.txt"
    secret.write_text("secret")
    (home / "link.txt").symlink_to(secret)
    (home / "loop.txt").symlink_to(home / "loop.txt")
    (home / "folder").symlink_to(tmp_path)
    folder = Folder(home)
    for name in ("../secret.txt", str(secret), "link.txt", "folder/secret.txt", "folder/new.txt"):
        with pytest.raises(FileRefused, match="outside"):
            folder.read(name)
        with pytest.raises(FileRefused, match="outside"):
            folder.write(name, "x")
    for name in ("", "  ", "a\0b", "loop.txt", "missing.txt", "."):
        with pytest.raises(FileRefused):
            folder.read(name)
    os.mkfifo(home / "pipe")
    with pytest.raises(FileRefused, match="is no file"):
        folder.read("pipe")
    with pytest.raises(FileRefused, match="is no file"):
        folder.write("pipe", "x")
    assert secret.read_text() == "secret"
    assert Folder(home, allows_outside=True).read("link.txt")[1] == "secret"
    assert folder.write("new.txt", "tide\n").read_text() == "tide\n"
    assert sorted(p.name for p in home.iterdir()) == [
        "folder", "link.txt", "loop.txt", "new.txt", "pipe"]


def test_output_is_looked_in_first(tmp_path: Path) -> None:
    (tmp_path / "a.txt").write_text("old")
    (tmp_path / "b.txt").write_text("kept")
    folder = Folder(tmp_path, output=tmp_path / "out")
    assert folder.read("a.txt")[1] == "old"
    folder.write("sub/a.txt", "new")
    folder.write("a.txt", "new")
    assert folder.read("a.txt")[1] == "new" and folder.read("b.txt")[1] == "kept"
    assert (tmp_path / "a.txt").read_text() == "old"
    assert (tmp_path / "out" / "sub" / "a.txt").read_text() == "new"


def test_header_takes_settings_only() -> None:
    text = log_text("fix n = 2\nx_1").replace(
        "# settings: ", '# settings: let x9 = 5; write x_1 as text to "f.txt"; quit; ')
    session = Session()
    replay(read_log(sealed(text)), "demo", ReplayOptions(), Talk(session))
    assert "x9" not in session.context.names and not session.has_quit


def test_what_is_told_holds_no_terminal_commands(tmp_path: Path) -> None:
    path = tmp_path / "demo.span"
    path.write_text('fix n = 2\n"\x1b]0;x\x07" # \x1b[31m\n#= "\x1b[32m"\n')
    status, said, _ = run(str(path))
    assert status == 1
    assert not any("\x1b" in line or "\x07" in line for line in said)
    assert any("\\x1b[32m" in line for line in said)


def test_side_by_side_parts_a_sum_and_leaves_a_table_in_lines() -> None:
    rows = side_by_side("E_(2,0) +\n  E_(0,2)", "E_(2,0) - E_(0,2)")
    assert rows[2:] == ["… 1 equal piece …", f"{'+ E_(0,2)':<47} | - E_(0,2)"]
    rows = side_by_side("mu     f\n(2,0)  x_1 + x_2", "mu     f\n(2,0)  x_1 - x_2")
    assert rows[2:] == ["… 1 equal piece …", f"{'(2,0)  x_1 + x_2':<47} | (2,0)  x_1 - x_2"]


def test_a_long_difference_is_cut(tmp_path: Path) -> None:
    path = tmp_path / "demo.span"
    write_log(path, "fix n = 4\nexpand (x_1 + x_2 + x_3 + x_4)^6 in x")
    _, said, _ = run(str(path), "--terms", "5")
    assert len(said) < 60 and any("more rows" in line for line in said), said


def test_side_by_side_of_long_and_empty_results() -> None:
    assert side_by_side("", "x_1")[-1].endswith("| x_1")
    rows = side_by_side("x_1 " + "+ x_1 " * 3000, "x_1 " + "+ x_1 " * 2999 + "+ x_2")
    assert len(rows) < 2_100
    assert any(row.startswith("…") for row in side_by_side("a\nb\nc", "a\nb\nd"))


def test_printed_offer_and_resume(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for module in (journal, log_files):
        monkeypatch.setattr(module, "default_folder", lambda: tmp_path)
    assert log_files.offer() == ""
    said: list[str] = []
    assert log_commands.to_resume(options("resume"), said.append) is None
    assert "no session was lost" in said[0]
    kept = journal.create_default()
    for _ in kept.recorded("x_1", list(Talk(Session(n=2)).say("x_1"))):
        continue
    kept.let_go()
    assert log_files.offer().endswith(f"spanwright resume {kept.path}")
    path = log_commands.to_resume(options("resume"), said.append)
    assert path == kept.path
    session = Session(n=2)
    said.clear()
    log_commands.bring_back(path, Talk(session), said.append).close()
    assert session.last_tag == 1 and said == [f"1 sentence of {path} brought back"]
