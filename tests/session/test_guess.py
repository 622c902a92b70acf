"""Guessing closed forms: what is a product of binomials is found, what is none is said so."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from many_cases import outcome_of
from spanwright.session import Session


def guessed(definition: str, values: str = "1..8") -> tuple[Session, str]:
    """A session with a definition, and what `guess c(k)` answers."""
    session = Session(n=3)
    assert session.run(definition).status == "ok"
    outcome = session.run(f"guess c(k) for k in {values}")
    assert outcome.status == "ok", outcome.text
    return session, outcome.text


@pytest.mark.parametrize("definition", [
    "let c(k) = (1 - q^k t^2)/(1 - q^(k+1) t)",
    "let c(k) = -2 q^(k (k-1)/2) t^3 (1 - q^(2 k - 1) t)^2 (1 - t)/((1 - q^(k+1)) (1 - q^2 t))",
    "let c(k) = (1 - q^k) (1 - q^(k+1))/((1 - q) (1 - q^2))",
    "let c(k) = (1 - q^k t)/(1 - q^2 t)",
    "let c(k) = (-3)^k/2 q^(3-k)",
    "let c(k) = (1 + q^k t)/(1 + q)",
    "let a be a parameter; let c(k) = (1 - a q^k)/(1 - q^(k+1) a^2)",
    "let c(k) = [E_(k+1,0,0)] x_1 E_(0,0,k)",
    "let c(k) = 7",
    "let c(k) = 0",
])
def test_a_form_is_found_and_holds_beyond_the_cases_seen(definition: str) -> None:
    session, answer = guessed(definition)
    assert answer.startswith("let c1(k) = "), answer
    assert session.run(answer.splitlines()[0]).status == "ok"
    for k in (9, 12):
        assert session.run(f"claim c({k}) = c1({k})").value.holds


@pytest.mark.parametrize(("definition", "why"), [
    ("let c(k) = 1 + q^k t + q", "the value at 1 has the factor"),
    ("let c(k) = k", "no geometric progression"),
    ("let c(k) = q^(k^3)", "faster than quadratically"),
    ("let c(k) = prod_(i in 1..k) (1 - q^i)", "no product"),
    ("let c(k) = 1 - q^(2^k)", "no product"),
    ("let c(k) = (k - 2) q", "0 at k = 2"),
])
def test_there_may_be_none(definition: str, why: str) -> None:
    _, answer = guessed(definition)
    assert answer.startswith("# none found: ") and why in answer


def test_what_fits_the_first_cases_alone_is_not_proposed() -> None:
    _, answer = guessed("let c(k) = (1 - q^k t) q^((k-1) (k-2) (k-3) (k-4) (k-5) (k-6))")
    assert answer == ("# none found: (1 - q^k t) fits k = 1, 2, 3, 4, 5, 6, but not k = 7")


@pytest.mark.parametrize(("text", "code"), [
    ("guess x_1 for k in 1..8", "wrong-kind"),
    ("guess q^k for k in 1..3", "wrong-kind"),
    ("guess q^k for k in 1..8, j in 1..2", "wrong-kind"),
    ("guess 1 for mu in compositions(4)", "wrong-kind"),
    ("guess g(k) for k in 1..8", "unknown-name"),
])
def test_bad_input_is_an_error(text: str, code: str) -> None:
    assert outcome_of(text).diagnostics[0].code == code


_BINOMIALS = st.lists(
    st.tuples(st.integers(-1, 3), st.integers(0, 3), st.integers(0, 1), st.integers(0, 2),
              st.sampled_from([1, 1, -1, 2, -2])), min_size=1, max_size=4)


@given(_BINOMIALS, st.integers(-2, 2), st.integers(-2, 2), st.sampled_from(["1", "-1", "2/3"]))
def test_products_of_binomials_are_recovered(
    binomials: list[tuple[int, int, int, int, int]], linear: int, constant: int, number: str
) -> None:
    parts = [f"({number})^k", f"q^({linear} k + ({constant}))"]
    for a, b, c, d, power in binomials:
        # exponents that vanish for no k in 1..12
        if all(a * k + b or c * k + d for k in range(1, 13)):
            parts.append(f"(1 - q^({a} k + ({b})) t^({c} k + {d}))^({power})")
    session, answer = guessed(f"let c(k) = {' '.join(parts)}", "1..9")
    assert answer.startswith("let c1(k) = "), answer
    assert session.run(answer.splitlines()[0]).status == "ok"
    assert session.run("claim c(11) = c1(11)").value.holds
