"""The command line, driven as a program: what it prints, where, and how it exits."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from spanwright import __version__, cli


def spanwright(
    *arguments: str | bytes, folder: Path, given: bytes = b"", **environment: str
) -> subprocess.CompletedProcess[bytes]:
    """Run the program with nothing but what is given."""
    return subprocess.run(
        [sys.executable, "-m", "spanwright", *arguments], input=given, capture_output=True,
        cwd=folder, timeout=60, env={**os.environ, **environment})


def test_sentences_on_the_command_line(tmp_path: Path) -> None:
    found = spanwright("-e", "fix n = 3; x_1 E_201", "-e", "eq_1 - eq_1", folder=tmp_path)
    assert found.returncode == 0
    assert found.stderr == b""
    n, *expansion, zero = found.stdout.decode().splitlines()
    assert (n, zero) == ("n = 3", "0   # (2)")
    assert expansion[0].startswith("E_(3,0,1) - ") and expansion[-1].endswith("   # (1)")


SCRIPT = """# an invented scenario
fix n = 2
x_1 E_01
claim x_1 = x_2
E_(1,0,2)
x_2
"""


def test_a_script_lists_what_failed_at_its_end(tmp_path: Path) -> None:
    (tmp_path / "a.span").write_text(SCRIPT, "utf-8")
    found = spanwright("run", "a.span", folder=tmp_path)
    assert found.returncode == 1
    shown = found.stdout.decode()
    assert "line 5, column 1: E_(1,0,2) has 3 parts, the ring has n = 2\n" in shown
    assert shown.endswith("x_2   # (2)\n")
    assert found.stderr.decode().splitlines() == [
        "2 sentences failed:",
        "  a.span:4:1: the claim does not hold",
        "  a.span:5:1: E_(1,0,2) has 3 parts, the ring has n = 2",
    ]


def test_what_a_script_prints_is_a_script(tmp_path: Path) -> None:
    (tmp_path / "a.span").write_text("fix n = 2\nx_1^2 E_02\n1 < 2\nx_1 = x_2\n", "utf-8")
    first = spanwright("run", "a.span", folder=tmp_path)
    again = spanwright("run", "-", folder=tmp_path, given=b"fix n = 2\n" + first.stdout)
    assert (first.returncode, again.returncode) == (0, 0)
    # `n = 2` is a statement now, and holds; what follows is the same but for the tags
    head, statement, *rest = again.stdout.decode().splitlines()
    assert (head, statement) == ("n = 2", "holds   # (1)")
    values = [line.partition("   # (")[0] for line in rest]
    assert values == [
        line.partition("   # (")[0] for line in first.stdout.decode().splitlines()[1:]
        if not line.startswith("#")]


def test_standard_input_files_and_stopping_at_the_first(tmp_path: Path) -> None:
    (tmp_path / "b.span").write_text("1 + + 1\n2\n", "utf-8")
    found = spanwright(
        "run", "--stop-at-first", "-", "b.span", "b.span", folder=tmp_path, given=b"1 + 1\n")
    assert found.returncode == 1
    assert found.stdout.decode().splitlines()[0] == "2   # (1)"
    assert found.stderr.decode().splitlines()[0] == "1 sentence failed:"
    assert b"\n2   # (1)" not in found.stdout


@pytest.mark.parametrize("options", [["--json", "run"], ["run", "--json"]])
def test_json_lines(options: list[str], tmp_path: Path) -> None:
    (tmp_path / "a.span").write_text(SCRIPT, "utf-8")
    found = spanwright(*options, "a.span", folder=tmp_path)
    assert found.returncode == 1
    assert found.stdout.isascii()
    records = [json.loads(line) for line in found.stdout.splitlines()]
    assert [r["status"] for r in records] == ["ok", "ok", "failed", "error", "ok"]
    assert [r["line"] for r in records] == [2, 3, 4, 5, 6]


def test_binary_input_is_a_message(tmp_path: Path) -> None:
    junk = bytes(range(256)) * 40
    found = spanwright(folder=tmp_path, given=junk)
    assert found.returncode == 1
    assert b"Traceback" not in found.stdout + found.stderr
    (tmp_path / "junk.span").write_bytes(junk)
    found = spanwright("run", "junk.span", folder=tmp_path, PYTHONIOENCODING="ascii")
    assert found.returncode == 1
    assert b"Traceback" not in found.stdout + found.stderr


def test_modules_that_a_script_does_not_load(tmp_path: Path) -> None:
    (tmp_path / "a.span").write_text(
        "fix n = 3\nx_1 E_102\nclaim x_1 = x_1\nderive x_1 E_102\nshow x_1 as latex\n", "utf-8")
    program = (
        "import sys\nfrom spanwright.cli import main\nstatus = main(['run', 'a.span'])\n"
        "slow = ('prompt_toolkit', 'sympy', 'pygls', 'lsprotocol', 'distributed', 'numpy')\n"
        "print(status, [name for name in slow if name in sys.modules])\n")
    found = subprocess.run(
        [sys.executable, "-c", program], cwd=tmp_path, capture_output=True, text=True, timeout=60)
    assert found.stdout.splitlines()[-1] == "0 []", found.stderr


def test_a_reader_who_leaves_early(tmp_path: Path) -> None:
    program = [sys.executable, "-m", "spanwright", "-e", "; ".join(["2^20000"] * 30)]
    with subprocess.Popen(
        program, stdout=subprocess.PIPE, stderr=subprocess.PIPE, cwd=tmp_path
    ) as running:
        assert running.stdout is not None and running.stderr is not None
        running.stdout.read(10)
        running.stdout.close()
        assert b"Traceback" not in running.stderr.read()
        assert running.wait(60) == 1


# within this process: quicker, for the rest


@pytest.mark.parametrize("arguments", [
    ["run"], ["run", "no-such-file.span"], ["run", "."], ["--no-such-option"], ["walk"],
    ["-e"], ["--json"], ["--stop-at-first"], ["-e", "1", "run", "a.span"],
])
def test_wrong_usage(
    arguments: list[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    try:
        status = cli.main(arguments)
    except SystemExit as end:
        status = int(str(end.code))
    assert status == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    assert "spanwright" in shown.err


def test_version_and_help(capsys: pytest.CaptureFixture[str]) -> None:
    for option, expected in (("--version", f"spanwright {__version__}"), ("--help", "run")):
        with pytest.raises(SystemExit) as end:
            cli.main([option])
        assert end.value.code == 0
        assert expected in capsys.readouterr().out


def test_arguments_that_are_not_utf8(capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.main(["-e", "1 + \udcff"]) == 1
    assert "a byte that is not UTF-8 stands here" in capsys.readouterr().out


def test_every_file_has_its_own_session(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "a.span").write_text("let f = 1\nf\n", "utf-8")
    (tmp_path / "b.span").write_text("f\n", "utf-8")
    assert cli.main(["run", "a.span", "b.span"]) == 1
    shown = capsys.readouterr()
    assert "b.span:1:1: f is not defined" in shown.err


def test_scripts_stay_in_their_folder(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    inner = tmp_path / "inner"
    inner.mkdir()
    (tmp_path / "up.span").write_text("let f = 1\n", "utf-8")
    (inner / "a.span").write_text('use "../up.span"\nwrite f as text to "../f.txt"\n', "utf-8")
    monkeypatch.chdir(tmp_path)
    assert cli.main(["run", "inner/a.span"]) == 1
    assert not (tmp_path / "f.txt").exists()
    assert cli.main(["run", "--allow-outside", "inner/a.span"]) == 0
    assert (tmp_path / "f.txt").read_text("utf-8") == "1\n"
    capsys.readouterr()


def test_a_byte_order_mark_and_other_line_ends(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "a.span").write_bytes(b"\xef\xbb\xbffix n = 2\r\nx_1 +\r\n  x_2\rx_3\r\n")
    assert cli.main(["run", "a.span"]) == 1
    shown = capsys.readouterr()
    assert shown.out.splitlines()[:2] == ["n = 2", "x_1 + x_2   # (1)"]
    assert "a.span:4:3: x_3 does not exist" in shown.err


def test_output_that_cannot_be_written(tmp_path: Path) -> None:
    with open("/dev/full", "wb") as full:
        found = subprocess.run(
            [sys.executable, "-m", "spanwright", "-e", "1 + 1"], stdout=full,
            stderr=subprocess.PIPE, cwd=tmp_path, timeout=60, check=False)
    assert found.returncode == cli.USAGE
    assert found.stderr == b"spanwright: no space left on device\n"


def test_many_cases_from_the_command_line(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "a.span").write_text(
        "fix n = 3\n"
        'tabulate norm(E_mu) for mu in compositions(1) to "a.csv"\n'
        "for i in 1..9: claim i < 4\n", "utf-8")
    tables = []
    for jobs in ("1", "2", "8"):
        assert cli.main(["run", "--jobs", jobs, "a.span"]) == 1
        assert "# 9 cases: 3 held, 6 failed" in capsys.readouterr().out
        tables.append((tmp_path / "a.csv").read_bytes())
    assert tables[0].count(b"\n") == 4 and tables[0] == tables[1] == tables[2]
    assert cli.main(["run", "--stop-at-first", "a.span"]) == 1
    shown = capsys.readouterr().out
    assert "# 4 cases: 3 held, 1 failed\n# ended at the first counterexample" in shown
    (tmp_path / "b.span").write_text(
        "fix n = 4\nlet f = x_1 + q x_2 + t x_3 + x_4 + 1\n"
        "for k in {1, 60}: claim x_1 f^k = f^k x_1\n", "utf-8")
    assert cli.main(["run", "--case-seconds", "0.3", "b.span"]) == 1
    shown = capsys.readouterr()
    assert "# 2 cases: 1 held, 1 undecided" in shown.out
    assert "# undecided: k = 60: stopped after 0.3 seconds" in shown.out
    assert "b.span:3:1: not every case was decided" in shown.err
