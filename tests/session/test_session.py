"""The Python side: sessions, outcomes, and views of values."""

from __future__ import annotations

from fractions import Fraction

import pytest
import sympy

import spanwright
from spanwright import Session
from spanwright_grammar.source import Source


def test_the_package_offers_the_session() -> None:
    assert spanwright.Session is Session
    assert spanwright.Outcome.__name__ == "Outcome"
    with pytest.raises(AttributeError):
        spanwright.Sesion


@pytest.mark.parametrize("n", [0, -1, 61, 1.5, "3"])
def test_a_wrong_number_of_variables(n: object) -> None:
    with pytest.raises(ValueError, match="n lies between 1 and 60"):
        Session(n=n)  # type: ignore[arg-type]


def test_run_gives_the_last_outcome_or_the_first_error() -> None:
    session = Session(n=2)
    assert session.run("let f = x_1; f + 1").text == "x_1 + 1"
    assert session.run("let g = 1; 1/0; let h1 = 2").status == "error"
    assert session.run("g").text == "1"
    assert session.run("h1").status == "error"
    with pytest.raises(ValueError, match="no sentence"):
        session.run("  # nothing\n")


def test_an_outcome_knows_its_sentence() -> None:
    session = Session(n=2)
    *_, found = session.run_all(Source("x_1\n\n  x_2 E_01", "a.span"))
    assert (found.sentence, found.line, found.status, found.tag) == (2, 3, "ok", 2)
    assert found.diagnostics == ()
    assert str(found) == found.text
    assert found.seconds >= 0
    assert session.state().last_tag == 2


def test_terms_of_an_expansion() -> None:
    value = Session(n=2).run("x_1 E_01").value
    assert value is not None
    assert value.basis == "E"
    assert list(value.terms) == [(2, 0), (1, 1)]
    assert value.coefficient(2, 0) == Session().run("(1 - t)/(1 - q t)").value
    assert value.coefficient(0, 2) == 0
    assert len(value) == 2 and bool(value)
    assert [index for index, _ in value] == [(2, 0), (1, 1)]
    assert repr(value) == f"View({value})"
    assert value.to_data()["basis"] == "E"


def test_terms_are_indexed_as_they_are_printed() -> None:
    session = Session(n=3)
    for text in ("P_(2,1) + P_(3)", "S_(2,1,3) S_(1,3,2)", "kappa_(0,1,2)"):
        value = session.run(text).value
        assert value is not None
        family = value.basis
        total = " + ".join(
            f"({c}) {family}_({','.join(map(str, index))})" for index, c in value.terms.items())
        assert session.run(total).value == value


def test_equality_is_mathematical() -> None:
    session = Session(n=2)

    def value(text: str) -> object:
        found = session.run(text)
        assert found.status == "ok", found.text
        return found.value

    assert value("E_11") == value("x_1 x_2")
    assert value("e_1") == value("x_1 + x_2") == value("s_(1)")
    assert value("x_1 - x_1") == 0 == value("E_01 - E_01")
    assert value("2/4") == Fraction(1, 2)
    assert value("3 x_1/x_1") == 3
    assert value("q") != value("t")
    assert value("x_1") != value("x_2")
    assert value("x_1") != "x_1"
    assert value("(1,2)") == (1, 2)
    assert value("list(1, q)") == value("list(1, q)")
    assert value("1 < 2") == value("true")
    assert value("1 < 2") == True  # noqa: E712
    assert value("1 < 2") != 1
    assert value("x_1 = x_2") == value("false")
    smaller = value("x_1 + x_2")
    session.run("fix n = 3")
    assert smaller == value("x_1 + x_2")


def test_truth_of_a_view() -> None:
    session = Session(n=2)
    for text in ("0", "x_1 - x_1", "E_01 - E_01", "q - q", "list()", "1 > 2"):
        assert not session.run(text).value
    for text in ("1", "x_1", "E_01", "q", "list(0)", "1 < 2", "(0,0)", "T_1", "fix n = 2"):
        assert session.run(text).value


def test_what_a_view_has_not() -> None:
    session = Session(n=2)
    found = session.run("q").value
    assert found is not None
    with pytest.raises(TypeError, match="no terms"):
        found.terms
    with pytest.raises(TypeError, match="holds or fails"):
        found.holds
    with pytest.raises(TypeError, match="unhashable"):
        hash(found)
    with pytest.raises(TypeError, match="is no scalar"):
        session.run("(1,2)").value.to_sympy()  # type: ignore[union-attr]
    assert session.run("1/0").value is None
    assert found.difference is None


def test_statements() -> None:
    session = Session(n=2)
    found = session.run("claim x_1 = x_2")
    assert found.status == "failed"
    assert found.value is not None
    assert not found.value.holds
    assert found.value.difference == session.run("x_1 - x_2").value
    assert session.run("claim x_1 = x_1").value == True  # noqa: E712


def test_sympy() -> None:
    session = Session(n=2)
    q, t, x_1, x_2 = sympy.symbols("q t x_1 x_2")
    found = session.run("E_01").value
    assert found is not None
    assert sympy.simplify(found.to_sympy() - ((1 - t) / (1 - q * t) * x_1 + x_2)) == 0
    session.run("let beta, N be parameters")
    value = session.run("beta + N^2 + t^(1/2) + 1/3").value
    assert value is not None
    expected = sympy.Symbol("beta") + sympy.Symbol("N") ** 2 + sympy.sqrt(t)
    assert value.to_sympy() == expected + sympy.Rational(1, 3)


def test_notebooks_show_tex() -> None:
    session = Session(n=2)
    assert session.run("E_01")._repr_latex_() == r"$\displaystyle E_{(0,1)}$"
    assert session.run("1/0")._repr_latex_() is None
    for prose in ("help E", "let f = 1", "fix t = 2", '"word"', "fix t = free; derive x_1 E_01"):
        assert session.run(prose)._repr_latex_() is None
    table = session.run("tabulate x_1 E_mu for mu in compositions(1)")._repr_latex_()
    assert table is not None and table.startswith(r"$\displaystyle \begin{array}")


def test_sessions_and_outcomes_are_short_in_a_notebook() -> None:
    session = Session(n=2)
    assert repr(session.run("x_2 E_(1,0)")) == "Outcome(ok, tag 1: E_(1,1))"
    session.run("let f = 2")
    assert repr(session) == "Session(n=2; 1 names, 1 results)"


@pytest.mark.parametrize("same", [
    ("1..3", "{3,1,2}"), ("compositions(2)", "{(2,0),(0,2),(1,1)}"), ("subsets(1..2)",) * 2,
    ("orbit((2,1))", "orbit((1,2))"), ("{}", "2..1"), ("permutations(2)", "orbit((1,2))"),
])
def test_index_sets_are_equal_as_sets(same: tuple[str, str]) -> None:
    session = Session(n=2)
    first, second = (session.run(text).value for text in same)
    assert first == second
    assert session.run(f"claim {same[0]} = {same[1]}").status == "ok"
    assert first != session.run("{(7,7)}").value
    assert session.run(f"claim {same[0]} = {{(7,7)}}").status == "failed"
    assert session.run("x_1/q").value.to_tex() == r"\frac{1}{q} x_{1}"  # type: ignore[union-attr]


def test_views_keep_the_way_of_showing_that_was_set() -> None:
    session = Session()
    session.run("fix show = factored")
    found = session.run("1 - q - t + q t")
    session.run("fix show = expanded")
    assert found.text == "(1 - q) (1 - t)"


def test_a_reply_is_plain_data() -> None:
    session = Session(n=2)
    reply = session.run("x_1 E_01").reply(is_recorded=True)
    assert reply.terms == (
        "(1 - t)/(1 - q t) E_(2,0)", "+ (1 - q) (1 - q t^2)/(1 - q t)^2 E_(1,1)")
    assert reply.text == " ".join(reply.terms)
    assert reply.record["kind"] == reply.kind == "expansion"
    assert (reply.status, reply.tag, reply.n, reply.is_quit) == ("ok", 1, 2, False)
    wrong = session.run("x_3").reply()
    assert (wrong.status, wrong.kind, wrong.text, wrong.record) == ("error", "error", "", {})
    assert wrong.messages[0].startswith("line 1, column 3: x_3 does not exist")


def test_state_for_prompts() -> None:
    session = Session(n=2)
    session.run("let f = x_1; let c(a,b) = a b; let d1 be a parameter; fix basis = E; f")
    state = session.state()
    assert (state.n, state.basis, state.parameters, state.last_tag) == (2, "E", ("d1",), 1)
    assert state.names == {"f": "a polynomial",
                           "c": "a function of a, b"}


def test_sessions_do_not_share_names() -> None:
    one, other = Session(n=2), Session(n=3)
    one.run("let f = 1")
    assert other.run("f").status == "error"
    assert other.run("x_3").status == "ok"


def test_a_result_of_the_other_convention_says_so() -> None:
    session = Session(n=2)
    session.run("E_01; fix convention = reversed; E_01")
    assert session.run("eq_1").reply().note == "in the standard convention"
    assert session.run("eq_2").reply().note == ""
    session.run("fix convention = standard")
    assert session.run("eq_1").reply().note == ""
    assert session.run("eq_2").reply().note == "in the reversed convention"
    assert session.run("P_(1)").reply().note == ""
