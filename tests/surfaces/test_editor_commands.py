"""`check`, `format` and `serve` as functions: what they print and which status they return."""

from __future__ import annotations

import io
import json
from pathlib import Path

import pytest

from spanwright.editor_commands import check, format_files, serve

UNTIDY = "fix n=3\nx_1+x_2   # why\n"
TIDY = "fix n = 3\nx_1 + x_2  # why\n"


def run(command: object, *names: object, **options: object) -> tuple[int, str, str]:
    """Status, output and errors of a command."""
    out, errors = io.StringIO(), io.StringIO()
    status = command([str(n) for n in names], out=out, errors=errors, **options)  # type: ignore[operator]
    return status, out.getvalue(), errors.getvalue()


def test_check_prints_a_line_for_each_finding(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("lemmas.span").write_text("let weight(a) = q^a\n")
    Path("a.span").write_text('use "lemmas.span"\nfix n = 2\nweight(1) + \U0001d465_3\nwieght(1)\n')
    status, out, errors = run(check, "a.span")
    assert (status, errors) == (1, "")
    assert out.splitlines() == [
        "a.span:3:15: error: x_3 does not exist: positions go from 1 to 2 (n = 2) "
        "[position-out-of-range]",
        "a.span:4:1: error: wieght is not defined [unknown-name]",
    ]


def test_check_as_json_has_one_object_a_line(tmp_path: Path) -> None:
    script = tmp_path / "a.span"
    script.write_text("E_(1,0)\nfoo\n")
    status, out, _ = run(check, script, as_json=True)
    record = json.loads(out)
    assert status == 1
    assert record["file"] == str(script) and record["code"] == "unknown-name"
    assert [record[k] for k in ("line", "column", "end_line", "end_column")] == [2, 1, 2, 4]
    assert record["severity"] == "error" and record["hints"] == ["let foo = …"]


def test_check_of_good_scripts_is_silent_and_information_is_no_fault(tmp_path: Path) -> None:
    script = tmp_path / "a.span"
    script.write_text("fix n = 2\nx_1\n")
    assert run(check, script) == (0, "", "")
    script.write_text("let f = 1\n")
    status, out, _ = run(check, script)
    assert status == 0 and "information: f is defined and not used" in out


def test_check_of_a_file_that_is_not_there(tmp_path: Path) -> None:
    good = tmp_path / "good.span"
    good.write_text("foo\n")
    status, out, errors = run(check, tmp_path / "missing.span", good)
    assert status == 2 and "missing.span" in errors and "foo is not defined" in out


def test_check_reads_standard_input() -> None:
    status, out, _ = run(check, "-", standard_input="zzz\n")
    assert (status, out) == (1, "-:1:1: error: zzz is not defined [unknown-name]\n")


def test_files_that_use_each_other_end(tmp_path: Path) -> None:
    (tmp_path / "a.span").write_text('use "b.span"\nlet f = 1\nf\n')
    (tmp_path / "b.span").write_text('use "a.span"\nlet g = 1\ng\n')
    assert run(check, tmp_path / "a.span", tmp_path / "b.span")[0] == 0


def test_format_rewrites_files(tmp_path: Path) -> None:
    script = tmp_path / "a.span"
    script.write_text(UNTIDY)
    assert run(format_files, script) == (0, "", "")
    assert script.read_text() == TIDY
    stamp = script.stat().st_mtime_ns
    assert run(format_files, script) == (0, "", "")
    assert script.stat().st_mtime_ns == stamp and list(tmp_path.iterdir()) == [script]


def test_format_shows_the_difference_and_writes_nothing(tmp_path: Path) -> None:
    script = tmp_path / "a.span"
    script.write_text(UNTIDY)
    status, out, _ = run(format_files, script, shows_diff=True)
    assert status == 1 and script.read_text() == UNTIDY
    assert "-fix n=3\n" in out and "+fix n = 3\n" in out
    script.write_text(TIDY)
    assert run(format_files, script, shows_diff=True) == (0, "", "")


def test_format_checks(tmp_path: Path) -> None:
    tidy, untidy = tmp_path / "tidy.span", tmp_path / "untidy.span"
    tidy.write_text(TIDY)
    untidy.write_text(UNTIDY)
    assert run(format_files, tidy, untidy, only_checks=True) == (1, f"{untidy}\n", "")
    assert untidy.read_text() == UNTIDY


def test_format_keeps_line_ends_and_refuses_what_is_not_utf8(tmp_path: Path) -> None:
    script = tmp_path / "a.span"
    script.write_bytes(b"x_1+x_2\r\n")
    assert run(format_files, script)[0] == 0
    assert script.read_bytes() == b"x_1 + x_2\r\n"
    script.write_bytes(b"x_1+x_2 # \xff\n")
    status, _, errors = run(format_files, script)
    assert status == 2 and "byte 11 is not UTF-8" in errors
    assert script.read_bytes() == b"x_1+x_2 # \xff\n"


def test_format_standard_input() -> None:
    assert run(format_files, "-", standard_input=UNTIDY) == (0, TIDY, "")


def test_serving_on_a_port_that_is_taken_says_so() -> None:
    import socket

    with socket.create_server(("127.0.0.1", 0)) as taken:
        errors = io.StringIO()
        port = taken.getsockname()[1]
        assert serve(port, errors) == 2
        assert f"port {port}: " in errors.getvalue()


@pytest.mark.parametrize("port", ["99999", "x", "-1", "9" * 5000])
def test_a_port_that_cannot_be_is_refused(port: str, capsys: pytest.CaptureFixture[str]) -> None:
    from spanwright.cli import main

    with pytest.raises(SystemExit) as caught:
        main(["serve", f"--tcp={port}"])
    assert caught.value.code == 2
    assert "a port is a number from 0 to 65535" in capsys.readouterr().err


def test_check_of_bytes_that_are_not_utf8(tmp_path: Path) -> None:
    path = tmp_path / "latin.span"
    path.write_bytes(b"fix n = 2\nx_1 \xe9\n")
    status, out, _ = run(check, path)
    assert status == 1
    assert out == (
        f"{path}:2:5: error: a byte that is not UTF-8 stands here [invalid-character]\n"
    )
