"""Every mistake has its own message: what is wrong, where, and what would be right.

`bad_input.txt` holds the cases: a code, the sentences, and the message as it is printed.
"""

from __future__ import annotations

import re
import time
from pathlib import Path

import pytest

import spanwright
from said import check, last, outcomes
from spanwright.evaluator import _CODES
from spanwright.session import Session
from spanwright_grammar.diagnostics import CODES
from spanwright_grammar.source import Source

CASES = [
    tuple(case.partition("\n")[::2])
    for case in Path(__file__).with_name("bad_input.txt").read_text("utf-8").split("== ")[1:]
]

FILES = {
    "itself.span": 'use "itself.span"\n',
    "wrong.span": "let f = 1\n\nf + \n",
    "false.span": "claim 1 = 2",
}

SOURCES = [
    path for path in Path(spanwright.__file__).parent.glob("*.py")
    if path.stem in ("evaluator", "sentences", "session", "claims", "builtins", "derivations")
]


def _ids() -> list[str]:
    return [f"{code}: {rest.splitlines()[0]}" for code, rest in CASES]


@pytest.mark.parametrize(("code", "rest"), CASES, ids=_ids())
def test_the_message_says_what_where_and_what_would_be_right(
    code: str, rest: str, tmp_path: Path
) -> None:
    for name, content in FILES.items():
        (tmp_path / name).write_text(content, encoding="utf-8")
    text, _, message = rest.rstrip("\n").partition("\n--\n")
    found = check(text, message, folder=tmp_path)
    assert found.status == "error"
    assert found.value is None
    assert found.diagnostics[0].code == code


def test_every_code_of_the_evaluator_has_a_case() -> None:
    raised = {
        code for path in SOURCES
        for code in re.findall(r'failure\(\s*"([a-z-]+)"', path.read_text(encoding="utf-8"))}
    tried = {code for code, _ in CASES}
    assert raised <= set(CODES)
    # the last line of defence: a fault of the program, which no sentence should reach
    assert raised - tried == {"internal-error"}


def test_codes_of_the_kernel_become_codes_of_the_language() -> None:
    assert set(_CODES.values()) <= set(CODES)


@pytest.mark.parametrize(("code", "rest"), CASES[::4], ids=_ids()[::4])
def test_a_failing_sentence_leaves_the_session_as_it_was(
    code: str, rest: str, tmp_path: Path
) -> None:
    session = Session()
    *before, wrong = rest.partition("\n--\n")[0].split("; ")
    for text in before:
        assert session.run(text).status == "ok"
    context, last_tag = session.context, session.last_tag
    assert session.run(wrong).status == "error"
    assert session.context is context
    assert session.last_tag == last_tag
    assert session.run("1 + 1").tag == last_tag + 1


def test_sentences_behind_a_wrong_one_still_run() -> None:
    found = outcomes("1 +\nlet f = q\n(f\nshow f")
    assert [o.status for o in found] == ["error", "ok", "error", "ok"]
    assert found[-1].text == "q"


@pytest.mark.parametrize("text", [
    "(" * 10_000,
    "(" * 10_000 + "1" + ")" * 10_000,
    "{[(" * 4_000,
    "not " * 10_000 + "1 = 1",
    "[E_(1,0)] " * 5_000 + "x_1",
    "2" + "^-2" * 10_000,
    "sum_(i in 1..1) " * 5_000 + "1",
    "x_1 at q = 0" + " at q = 0" * 5_000,
    "f(" * 10_000,
    "-" * 10_000 + "1",
    "for i in 1..1: " * 5_000 + "1",
])
def test_ten_thousand_nested_brackets_and_prefixes(text: str) -> None:
    started = time.perf_counter()
    found = outcomes(text, n=2)
    assert found
    assert all(o.status == "error" for o in found)
    assert all(len(o.text) < 1_000 for o in found)
    assert time.perf_counter() - started < 30  # seconds, against a hang


@pytest.mark.parametrize("text", [
    "x" * 1_000_000,
    "x_1 + " * 170_000,
    "1 " * 50_000,
    "#" + "a" * 1_000_000,
    "9" * 1_000_000,
    "1" + "\t" * 1_000_000,
    "\\" * 100_000,
    '"' * 100_000,
], ids=["name", "sum", "product", "comment", "number", "tabs", "backslashes", "quotes"])
def test_a_line_of_a_megabyte(text: str) -> None:
    found = outcomes(text)
    assert len(found) <= 3
    assert all(len(o.text) < 1_000_000 and "internal" not in o.text for o in found)


def test_a_number_with_many_digits_is_a_number() -> None:
    digits = "7" * 50_000
    assert last(digits).text == digits
    assert last(f"{digits} - {digits}").text == "0"


@pytest.mark.parametrize("text", [
    "\x00\x01\x02\xff\xfe", "\ufffd" * 300, "\x1b[31m", "\ud7ff\ue000\U0010ffff", "\u202e x_1",
    "\r\r\n\x0b\x0c", "\x7fELF\x02\x01", "\ufeff\ufeff1",
])
def test_binary_junk(text: str) -> None:
    for o in outcomes(text, n=2):
        assert o.status in ("ok", "error")
        assert "\x1b" not in o.text and "internal" not in o.text


def test_a_list_of_too_many_items(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright.evaluator.SIZE_LIMIT", 5)
    assert last("list(i for i in 1..5)").status == "ok"
    found = last("list(i for i in 1..6)")
    assert found.diagnostics[0].code == "too-large"
    assert last("sum_(i in 1..6) i").diagnostics[0].message == "more than 5 terms"


def test_deep_calls_end_in_a_message() -> None:
    inner = "list(" * 60 + "f(k + 1)" + ")" * 60
    found = last(f"let f(k) = {inner}; f(1)")
    assert found.diagnostics[0].code == "nesting-too-deep"


def test_a_fault_of_the_program_is_a_message_too(monkeypatch: pytest.MonkeyPatch) -> None:
    from spanwright import session as module

    def broken(*_: object) -> None:
        raise ZeroDivisionError("planted")

    session = Session()
    monkeypatch.setattr(module, "carry_out", broken)
    found = session.run("1 + 1")
    assert found.diagnostics[0].code == "internal-error"
    assert "ZeroDivisionError: planted" in found.text
    monkeypatch.undo()
    assert session.run("1 + 1").text == "2"


def test_the_place_is_counted_in_lines_of_the_whole_text() -> None:
    session = Session()
    found = list(session.run_all(Source("fix n = 2\n\n# a remark\nx_1 +\n  x_3\n", "a.span")))[-1]
    record = found.record()
    assert (record["line"], record["column"]) == (5, 5)
    assert found.text.splitlines()[:3] == [
        "line 5, column 5: x_3 does not exist: positions go from 1 to 2 (n = 2)",
        "    x_3",
        "      ^",
    ]


def test_a_long_name_or_index_does_not_fill_the_screen() -> None:
    for text in ("a" * 100_000, f"E_({'1,' * 50_000}2)", f"T_({'1,' * 50_000}2)"):
        found = last(text, n=2)
        assert found.status == "error"
        assert len(found.text) < 1500
