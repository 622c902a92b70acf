"""Expressions in, values out: every form of expression that the language has."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from said import check, last, outcomes
from spanwright.session import Session

# n = 3 and mu = (1,0,2), w = (3,1,2) everywhere
GIVEN = "fix n = 3; let mu = (1,0,2); let w = (3,1,2); "

EXPRESSIONS = {
    "numbers": [
        ("2 + 3 4", "14"), ("1/2 + 1/3", "5/6"), ("2/3/2", "1/3"), ("-2^2", "-4"),
        ("(-2)^2", "4"), ("2^-3", "1/8"), ("0^0", "1"), ("6/3", "2"), ("n + 1", "4"),
        ("2^200 - 2^200 + 1", "1"),
    ],
    "scalars": [
        ("(q t)^-2", "1/(q^2 t^2)"), ("(1 - q^2)/(1 - q)", "1 + q"), ("q t = t q", "holds"),
        ("t^(1/2) t^(1/2)", "t"), ("t^(-1/2)", "1/t^(1/2)"), ("t^(3/2)/t", "t^(1/2)"),
        ("t^{1/2}", "t^(1/2)"), ("q^{-2}", "1/q^2"), ("prod_(i in 1..3) (1 - t^i)",
                                                     "(1 - t) (1 - t^2) (1 - t^3)"),
        ("numerator((1 - q)/(1 - t))", "1 - q"), ("q/q", "1"), ("q - q", "0"),
    ],
    "polynomials": [
        ("x_1 x_2 + x_2 x_1", "2 x_1 x_2"), ("x_1·x_2*x_3", "x_1 x_2 x_3"),
        ("x_1^-1 x_1^3", "x_1^2"), ("x_1^{-1}", "x_1^-1"), ("(x_1 x_2)^-2", "x_1^-2 x_2^-2"),
        ("x_(1+1)", "x_2"), ("x_{1}", "x_1"), ("x_n", "x_3"), ("x_1/2", "1/2 x_1"),
        ("x^mu", "x_1 x_3^2"), ("x^(-mu)", "x_1^-1 x_3^-2"), ("x^{1,0,2}", "x_1 x_3^2"),
        ("(x_1 + x_2)^2", "x_1^2 + 2 x_1 x_2 + x_2^2"), ("sum_(i in 1..n) x_i",
                                                         "x_1 + x_2 + x_3"),
        ("sum_(i in 1..3, j in 1..3 where i < j) x_i x_j", "x_1 x_2 + x_1 x_3 + x_2 x_3"),
        ("∑_(i ∈ {1,3}) x_i", "x_1 + x_3"), (r"\sum_{i \in 1..2} x_i", "x_1 + x_2"),
        ("sum_(i in 1..0) x_i", "0"), ("prod_(i in {}) x_i", "1"),
    ],
    "basis elements": [
        ("E_102", "E_(1,0,2)"), ("E_mu", "E_(1,0,2)"), ("E_μ", "E_(1,0,2)"),
        (r"E_{\mu}", "E_(1,0,2)"), ("E_{1,0,2}", "E_(1,0,2)"), ("E_(mu + eps_1)", "E_(2,0,2)"),
        ("E_(s_1 mu)", "E_(0,1,2)"), ("E_(0,-1,3)", "E_(0,-1,3)"), ("E_mu - E_mu", "0"),
        ("x_1 x_2 x_3 E_mu", "E_(2,1,3)"), ("x_1 E_001 = E_001 x_1", "holds"),
        ("S_(3,1,2)", "S_(3,1,2)"), ("P_(2,1)", "P_(2,1)"), ("e_1 = x_1 + x_2 + x_3", "holds"),
        ("sum_(nu in compositions(1)) E_nu", "E_(0,0,1) + E_(0,1,0) + E_(1,0,0)"),
    ],
    "operators": [
        ("T_1 x_1", "x_2"), ("(T_1 x_1) x_2", "x_2^2"), ("T_1 x_1 x_2", "t x_1 x_2"),
        ("d_1 x_1^2", "x_1 + x_2"), ("∂_1 x_1^2", "x_1 + x_2"), ("s_1 x_1^2 x_2", "x_1 x_2^2"),
        ("pi_1 x_1", "x_1 + x_2"), ("d_(3,2,1) x_1^2 x_2", "1"), ("X_1 x_2", "x_1 x_2"),
        ("X^mu x_1", "x_1^2 x_3^2"), ("Y^(1,-1,0) E_mu = Y_1 Y_2^-1 E_mu", "holds"),
        ("T_w = T_2 T_1", "holds"), ("T_1 T_1^-1 = 1", "holds"),
    ],
    "indices": [
        ("mu + eps_1", "(2,0,2)"), ("mu - 2 eps_3", "(1,0,0)"), ("mu_3", "2"), ("|mu|", "3"),
        ("|(1,-4)|", "-3"), ("s_1 mu", "(0,1,2)"), ("w mu", "(0,2,1)"), ("w^-1 w mu", "(1,0,2)"),
        ("w^2 mu = w w mu", "holds"), ("w^-1", "(2,3,1)"), ("sort(mu)", "(2,1,0)"),
        ("sum_(i in 1..n) i eps_i", "(1,2,3)"),
        ("-mu", "(-1,0,-2)"),
    ],
    "coefficients": [
        ("[E_(2,0,2)] x_1 E_mu", "(1 - q) (1 - q t^2)/(1 - q t)^2"), ("[x_1^2] 3 x_1^2 + 1", "4"),
        ("[1] 3 x_1^2 + 7", "7"), ("2 [x_1] x_1", "2"), ("[E_mu] E_mu", "1"),
        ("[x^mu] E_mu", "1"), ("[E_(0,0,0)] x_1", "0"), ("[2 x_1] x_1", "1/2"),
        ("[s_(1)] e_1", "1"),
    ],
    "specialisations": [
        ("(1 - q)/(1 - t) at q = t^2", "1 + t"), ("q t at q = 2, t = 1/3", "2/3"),
        ("q + t at q = t, t = q", "q + t"), ("x_1 x_2 at x_1 = 2", "2 x_2"),
        ("E_001 at q = 0", "(1 - t) x_1 + (1 - t) x_2 + x_3"),
        ("(1 - q)/(1 - q^2) as q -> 1", "1/2"),
        ("q/(1 + q) as q -> infinity", "1"), ("q/(1 + q) as q -> ∞", "1"),
        ("x_1 + x_2 x_3 at x = (-1,t,t^2)", "-(1 - t^3)"), ("x_1 + x_3 at x = mu", "3"),
        ("x_1 at x = list(q,1,1)", "q"),
    ],
    "truths": [
        ("1 < 2 and 2 <= 2", "holds"), ("1 > 2 or 1 != 2", "holds"), ("not 1 = 2", "holds"),
        ("2 in 1..3", "holds"), ("4 in {1,3}", "fails"), ("mu in compositions(3)", "holds"),
        ("mu in orbit((2,1,0))", "holds"), ("E_mu in list(E_mu, 1)", "holds"),
        ("q = t", "fails\n# left - right = q - t"), ("true", "holds"), ("fails", "fails"),
        ("q^0 in {1}", "holds"), ("(1,2) = (2,1)", "fails"), ("5 in 1..10^40", "holds"),
    ],
    "sets and lists": [
        ("1..3", "1..3"), ("{1,3,1}", "{1, 3}"), ("{(0,1), (1,0)}", "{(0,1), (1,0)}"),
        ("list(1..3)", "list(1, 2, 3)"), ("|1..10^40|", "1" + "0" * 40), ("count({1,2})", "2"),
        ("list(i^2 for i in 1..4 where i > 2)", "list(9, 16)"), ("|list(1,1)|", "2"),
        ("list(E_nu for nu in orbit((1,0,0)))", "list(E_(1,0,0), E_(0,1,0), E_(0,0,1))"),
        ("list(i for j in {0,1}, i in j..2 where i != j)", "list(1, 2, 2)"),
        ("list()", "list()"),
    ],
}

CASES = [(text, expected) for rows in EXPRESSIONS.values() for text, expected in rows]


@pytest.mark.parametrize(("text", "expected"), CASES, ids=[text for text, _ in CASES])
def test_expressions(text: str, expected: str) -> None:
    check(GIVEN + text, expected)


# names of one's own

DEFINITIONS = [
    ("let c(a,b) = (1 - q^a t^b)/(1 - q^(a+1) t^b); c(1,2)", "(1 - q t^2)/(1 - q^2 t^2)"),
    ("let c_(a,b) = q^a t^b; c_(1,2)", "q t^2"),
    ("let c_(a,b) = q^a t^b; c_12", "q t^2"),
    ("let F_nu = x_1 E_nu; F_(0,0,1) = x_1 E_001", "holds"),
    ("let F_(nu) = |nu|; F_201", "3"),
    ("let G_a = 1", None),
    ("let f(k) = k + sum_(i in 1..k-1) f(i); f(5)", "31"),
    ("let f(k) = k; let g(k) = f(k + 1) + k; g(1)", "3"),
    ("let a = 2; let f(k) = a k; f(3)", "6"),
    ("let f(a) = sum_(a in 1..2) a; f(7)", "3"),
    ("let L = list(5, 6); L_2", "6"),
    ("let f = x_1; let f = f + 1; f", "x_1 + 1"),
    ("let b be a parameter; (b^2 - 1)/(b - 1)", "1 + b"),
    ("let b be a parameter; let b = 7; b", "7"),
    ("let b = 7; let b be a parameter; b", "b"),
    ("x_1 + 1; eq_1^2", "x_1^2 + 2 x_1 + 1"),
]


@pytest.mark.parametrize(
    ("text", "expected"), DEFINITIONS, ids=[text for text, _ in DEFINITIONS])
def test_own_names(text: str, expected: str | None) -> None:
    if expected is None:
        assert last(GIVEN + text).diagnostics[0].code == "name-taken"
    else:
        check(GIVEN + text, expected)


def test_a_loop_variable_ends_with_its_loop() -> None:
    found = outcomes("let i = 7; sum_(i in 1..3) i; i")
    assert [o.text for o in found[1:]] == ["6", "7"]
    assert last("sum_(k in 1..3) k; k").diagnostics[0].code == "unknown-name"


def test_arguments_hide_names_of_the_caller() -> None:
    check("let f(k) = 10 k; let g(j) = f(j + 1) + j; sum_(k in 1..2) g(k)", "53")


def test_digits_are_read_one_by_one_when_n_is_more_than_one() -> None:
    check("E_12", "E_(12)", n=1)
    check("E_12", "E_(1,2)", n=2)
    check("e_2", "e_(2)", n=2)


ENTRIES = st.integers(-3, 3)
INDICES = st.tuples(ENTRIES, ENTRIES, ENTRIES)


@given(INDICES, INDICES, ENTRIES)
@settings(max_examples=effort(40))
def test_index_arithmetic_is_that_of_tuples(
    mu: tuple[int, ...], nu: tuple[int, ...], k: int
) -> None:
    session = Session(n=3)
    found = session.run(f"{mu} - {nu} + ({k}) {mu}").value
    assert found == tuple(a - b + k * a for a, b in zip(mu, nu, strict=True))
    assert session.run(f"|{mu}|").value == sum(mu)


@given(st.lists(st.integers(-9, 9), min_size=1, max_size=5), st.integers(0, 3))
@settings(max_examples=effort(40))
def test_sums_and_products_agree_with_python(values: list[int], power: int) -> None:
    session = Session()
    shown = ", ".join(map(str, values))
    session.run(f"let L = list({shown})")
    product = 1
    for value in values:
        product *= value**power
    assert session.run(f"sum_(i in 1..{len(values)}) L_i").value == sum(values)
    assert session.run(f"prod_(i in 1..{len(values)}) L_i^{power}").value == product


@given(st.integers(1, 3), st.integers(1, 3), INDICES.filter(lambda mu: min(mu) >= 0))
@settings(max_examples=effort(15))
def test_coefficients_make_up_the_product(i: int, j: int, mu: tuple[int, ...]) -> None:
    session = Session(n=3)
    found = session.run(f"(x_{i} + t x_{j}) E_{mu}").value
    assert found is not None
    total = " + ".join(
        f"([E_{index}] eq_1) E_{index}".replace(" ", "") for index in found.terms)
    assert session.run(f"claim {total} = x_{i} E_{mu} + t x_{j} E_{mu}").status == "ok"
