"""Claims: exact verdicts, refutation modulo a prime, differences, and what cannot be decided."""

from __future__ import annotations

import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from said import last
from spanwright.claims import at_random_point
from spanwright.session import Session
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse_expression

HOLD = [
    "x_1 E_102 = E_102 x_1", "T_1 X_1 T_1 = t X_2", "(T_1 - t) (T_1 + 1) = 0",
    "T_1 T_2 T_1 = T_2 T_1 T_2", "Y_1 Y_2 = Y_2 Y_1", "T_1 Y_2 T_1 = t Y_1",
    "Y_1 E_102 = eigenvalue(Y_1, E_102) E_102", "Y_2 E_201 = eigenvalue(Y_2, E_201) E_201",
    "d_1 d_2 d_1 = d_2 d_1 d_2", "s_1 (1,2,3) = (2,1,3)", "e_1 = h_1",
    "e_1^2 = p_2 + 2 e_2", "h_2 = s_(2)", "m_(2,1) = x_1^2 x_2 + x_1^2 x_3 + x_2^2 x_1 + "
    "x_2^2 x_3 + x_3^2 x_1 + x_3^2 x_2", "S_(2,1,3) = x_1", "kappa_(2,1,0) = x_1^2 x_2",
    "(1 - q^2 t^2)/(1 - q t) = 1 + q t", "t^(1/2) t^(1/2) = t",
    "2 + 2 = 4 and 1 < 2", "not 1 = 2", "(1,0) + (0,1) = (1,1)", "list(1, 2) = list(1, 2)",
    "sum_(w in permutations(3)) w x_1 = 2 x_1 + 2 x_2 + 2 x_3", "0 = x_1 - x_1",
    "[E_102] E_102 = 1",
]


@pytest.mark.parametrize("statement", HOLD)
def test_what_holds(statement: str) -> None:
    found = last(f"claim {statement}", n=3)
    assert (found.status, found.text) == ("ok", "holds")
    assert found.record()["holds"] is True


FAIL = [
    ("x_1 = x_2", "x_1 - x_2"), ("q = t", "q - t"), ("E_102 = E_201", "E_(1,0,2) - E_(2,0,1)"),
    ("T_1 T_2 = T_2 T_1", "T_(2,3,1) - T_(3,1,2)"), ("2 = 3", "-1"),
    ("e_1 = x_1", "x_2 + x_3"), ("E_001 = x_3", "(1 - t)/(1 - q t) x_1 + (1 - t)/(1 - q t) x_2"),
]


@pytest.mark.parametrize(("statement", "difference"), FAIL)
def test_what_fails_shows_the_difference(statement: str, difference: str) -> None:
    session = Session(n=3)
    found = session.run(f"claim {statement}")
    assert found.status == "failed"
    assert found.value is not None
    assert found.value.difference == session.run(difference).value or (
        str(found.value.difference) == difference)
    assert found.text.splitlines()[0] == "fails"
    assert found.record()["holds"] is False
    # the session goes on, and all that was printed reads back
    assert session.run(found.text).value == False  # noqa: E712


@pytest.mark.parametrize("statement", ["(1,0) = (0,1)", "1 > 2", "3 in {1,2}", "list(1) = list()"])
def test_some_failures_have_no_difference(statement: str) -> None:
    found = last(f"claim {statement}", n=2)
    assert (found.status, found.text) == ("failed", "fails")
    assert "difference" not in found.record()


def test_claims_with_fixed_parameters() -> None:
    assert last("fix t = 2; claim t x_1 = 2 x_1", n=2).status == "ok"
    assert last("fix q = t; claim x_1 q = x_1 t", n=2).status == "ok"
    assert last("fix q = t; claim q^2 = t", n=2).status == "failed"


def test_certainty_random_says_so() -> None:
    found = last("fix certainty = random; claim x_1 E_102 = E_102 x_1", n=3)
    assert found.text.startswith("holds   # with high probability: ")
    assert found.record()["certainty"] == "random"
    assert last("fix certainty = random; claim x_1 = x_2", n=3).status == "failed"
    # what has no counterpart modulo a prime is decided exactly
    found = last("fix certainty = random; claim (1,0) = (1,0)", n=2)
    assert (found.text, found.record()["certainty"]) == ("holds", "exact")


def test_a_false_claim_fails_even_where_the_difference_cannot_be_had() -> None:
    text = "fix terms = 10; claim (x_1 + x_2 + x_3)^6 = x_1"
    found = last(text, n=3)
    assert found.status == "failed"
    assert "refuted at q = " in found.text
    true = last("fix terms = 10; claim (x_1 + x_2 + x_3)^6 = (x_3 + x_2 + x_1)^6", n=3)
    assert true.diagnostics[0].code == "too-large"


def test_the_random_point_depends_on_the_seed_alone() -> None:
    one = last("fix seed = 5; claim x_1 E_102 = x_2 E_102", n=3)
    same = last("fix seed = 5; claim x_1 E_102 = x_2 E_102", n=3)
    other = last("fix seed = 6; claim x_1 E_102 = x_2 E_102", n=3)
    assert one.text == same.text != other.text


TERMS = st.sampled_from([
    "x_1", "x_2^-1", "q", "t", "E_01", "E_10", "E_(1,-1)", "(1 - q t)", "1/(1 - t)", "3", "T_1 x_1",
    "Y_1 x_2", "d_1 x_1^2", "t^(1/2)",
])


@given(st.lists(st.lists(TERMS, min_size=1, max_size=3), min_size=1, max_size=3),
       st.lists(st.lists(TERMS, min_size=1, max_size=3), min_size=1, max_size=3))
@settings(max_examples=effort(40))
def test_the_verdict_modulo_a_prime_is_the_exact_one(
    left: list[list[str]], right: list[list[str]]
) -> None:
    def shown(rows: list[list[str]]) -> str:
        return " + ".join(" ".join(f"({factor})" for factor in row) for row in rows)

    session = Session(n=2)
    for statement in (f"{shown(left)} = {shown(right)}",
                      f"{shown(left)} = {shown(left[::-1])}"):
        tree = parse_expression(statement)
        assert isinstance(tree, syntax.Comparison)
        exact = session.run(statement).value
        assert exact is not None
        guessed = at_random_point(tree, session.context)
        if guessed is not None:
            assert guessed.holds == exact.holds
            assert guessed.certainty == "random"


def test_most_claims_have_a_first_answer_modulo_a_prime() -> None:
    session = Session(n=3)
    source = random.Random(7)
    for _ in range(effort(10)):
        mu = tuple(source.randint(-1, 2) for _ in range(3))
        statement = parse_expression(f"x_1 E_{mu} = t x_2 E_{mu}")
        assert isinstance(statement, syntax.Comparison)
        found = at_random_point(statement, session.context)
        assert found is not None and not found.holds


def test_claims_of_what_is_no_statement() -> None:
    for text in ("claim q", "claim x_1 + 1", "claim (1,0)"):
        assert last(text, n=2).diagnostics[0].code == "wrong-kind"
    assert last("claim x_1 = (1,0)", n=2).status == "failed"
    assert last("claim 1/(q - q) = 1").diagnostics[0].code == "division-by-zero"
