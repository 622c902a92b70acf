"""JSON Lines: names, order and kinds of what `--json` prints, and strings that sympy reads."""

from __future__ import annotations

import json

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from said import last
from spanwright.session import Session


def record(text: str, n: int | None = 3) -> dict[str, object]:
    """The record of the last sentence, after a turn through JSON; seconds left out."""
    found = json.loads(json.dumps(last(text, n=n).record()))
    assert list(found)[-1] == "seconds"
    assert found.pop("seconds") >= 0
    return dict(found)


def test_an_expansion_word_for_word() -> None:
    found = last("fix n = 2\nx_1 E_01", n=3)
    assert json.dumps({**found.record(), "seconds": 0.01}) == (
        '{"sentence": 2, "line": 2, "source": "x_1 E_01", "status": "ok", "kind": "expansion", '
        '"tag": 1, "n": 2, "basis": "E", "terms": ['
        '{"index": [2, 0], "coefficient": "(1 - t)/(1 - q*t)"}, '
        '{"index": [1, 1], "coefficient": "(1 - q)*(1 - q*t**2)/(1 - q*t)**2"}], '
        '"seconds": 0.01}')


HEAD = {"sentence": 1, "line": 1}


@pytest.mark.parametrize(("text", "content"), [
    ("q^2/(1 - t)", {"kind": "scalar", "tag": 1, "n": 3, "value": "q**2/(1 - t)"}),
    ("t^(1/2)", {"kind": "scalar", "tag": 1, "n": 3, "value": "t**(1/2)"}),
    ("2/4", {"kind": "scalar", "tag": 1, "n": 3, "value": "1/2"}),
    ("2 x_1/x_2", {"kind": "expansion", "tag": 1, "n": 3, "basis": "x", "terms": [
        {"index": [1, -1, 0], "coefficient": "2"}]}),
    ("E_001 - E_001", {"kind": "expansion", "tag": 1, "n": 3, "basis": "E", "terms": []}),
    ("P_(2,1)", {"kind": "expansion", "tag": 1, "n": 3, "basis": "P", "terms": [
        {"index": [2, 1], "coefficient": "1"}]}),
    ("(1,0,-2)", {"kind": "index", "tag": 1, "n": 3, "value": [1, 0, -2]}),
    ("1 < 2", {"kind": "truth", "tag": 1, "n": 3, "holds": True, "certainty": "exact"}),
    ("claim q = q", {"kind": "truth", "n": 3, "holds": True, "certainty": "exact"}),
    ("list(1, q)", {"kind": "list", "tag": 1, "n": 3, "items": [
        {"kind": "scalar", "value": "1"}, {"kind": "scalar", "value": "q"}]}),
    ("{1,2}", {"kind": "list", "tag": 1, "n": 3, "items": [
        {"kind": "scalar", "value": "1"}, {"kind": "scalar", "value": "2"}]}),
    ("fix n = 3", {"kind": "setting", "n": 3, "name": "n", "text": "n = 3"}),
    ("let f = q", {"kind": "definition", "n": 3, "name": "f", "text": "f = q"}),
    ('remark "so"', {"kind": "text", "n": 3, "text": "so"}),
])
def test_kinds(text: str, content: dict[str, object]) -> None:
    found = record(text)
    expected = {**HEAD, "source": text, "status": "ok", **content}
    assert found == expected
    assert list(found) == list(expected)


def test_a_claim_that_fails_carries_the_difference() -> None:
    found = record("claim x_1 = x_2")
    assert found["status"] == "failed" and found["holds"] is False
    assert found["difference"] == {"kind": "expansion", "n": 3, "basis": "x", "terms": [
        {"index": [1, 0, 0], "coefficient": "1"}, {"index": [0, 1, 0], "coefficient": "-1"}]}


def test_an_error_says_where_and_what_would_be_right() -> None:
    found = record("fix n = 3\nlet f = x_1 +\n  x_4")
    assert found == {
        "sentence": 2, "line": 3, "source": "let f = x_1 +\n  x_4", "status": "error",
        "code": "position-out-of-range",
        "message": "x_4 does not exist: positions go from 1 to 3 (n = 3)", "column": 5,
        "hint": "x_3"}
    assert record("1 + + 1")["hint"] is None
    assert record("x_1", n=None)["message"] == "the number of variables is not fixed yet"


def test_a_table() -> None:
    found = record("tabulate x^mu for mu in compositions(1) where mu_1 = 1")
    assert (found["kind"], found["columns"]) == ("table", ["mu", "x^mu"])
    assert found["rows"] == [[
        {"kind": "index", "value": [1, 0, 0]},
        {"kind": "expansion", "n": 3, "basis": "x", "terms": [
            {"index": [1, 0, 0], "coefficient": "1"}]}]]


PARTS = st.integers(-1, 2)


@given(st.tuples(PARTS, PARTS), st.tuples(PARTS, PARTS), st.integers(1, 2))
@settings(max_examples=effort(12))
def test_coefficients_are_the_same_scalars_for_sympy(
    mu: tuple[int, int], nu: tuple[int, int], j: int
) -> None:
    session = Session(n=2)
    found = session.run(f"x_{j} E_{mu} + q^3/(t - q^2) E_{nu}")
    assert found.status == "ok"
    for term in found.record()["terms"]:
        assert term["coefficient"].isascii()
        index = ",".join(map(str, term["index"]))
        for q, t in ((2, 3), (5, 7)):
            by_sympy = sympy.sympify(term["coefficient"]).subs({"q": q, "t": t})
            ours = session.run(f"([E_({index})] eq_1) at q = {q}, t = {t}")
            assert str(by_sympy) == ours.text
