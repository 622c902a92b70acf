"""What each sentence does, and what it leaves for the sentences after it."""

from __future__ import annotations

from pathlib import Path

import pytest

from said import check, last, outcomes
from spanwright.files import Folder
from spanwright.session import Session


@pytest.mark.parametrize(("text", "expected"), [
    ("fix n = 3", "n = 3"),
    ("fix n = 1 + 1", "n = 2"),
    ("fix q = t^2", "q = t^2"),
    ("fix q = 0", "q = 0"),
    ("fix t = 1/2; fix t = free", "t = free"),
    ("fix basis = E", "basis = E"),
    ("fix basis = E; fix basis = free", "basis = free"),
    ("fix show = factored", "show = factored"),
    ("fix seconds = 60", "seconds = 60"),
    ("fix seconds = free", "seconds = free"),
    ("fix memory = 2 GB", "memory = 2 GB"),
    ("fix memory = free", "memory = free"),
    ("fix certainty = random", "certainty = random"),
    ("fix seed = 0", "seed = 0"),
])
def test_fix_answers_with_the_setting(text: str, expected: str) -> None:
    record = check(text, expected).record()
    assert record["kind"] == "setting"
    assert record["name"] == expected.partition(" ")[0]


@pytest.mark.parametrize(("text", "expected"), [
    ("fix q = t^2; q t", "t^3"),
    ("fix t = 3; x_1 t + t^2 x_2", "3 x_1 + 9 x_2"),
    # one value in the other, in either order
    ("fix q = t^2; fix t = 3; q t", "27"),
    ("fix t = 3; fix q = t^2; q t", "27"),
    ("fix t = q^2; fix q = 2; t", "4"),
    ("fix q = 2; fix q = free; q", "q"),
    ("fix t = 0; E_01", "E_(0,1)"),
    ("fix t = 0; expand E_01 in x", "x_1 + x_2"),
    ("fix q = t; x_1 E_01", "1/(1 + t) E_(2,0) + (1 + t + t^2)/(1 + t)^2 E_(1,1)"),
    ("fix basis = E; x_1 x_2", "E_(1,1)"),
    ("fix basis = x; E_(1,1)", "x_1 x_2"),
    ("fix basis = s; x_1^2 + x_1 x_2 + x_2^2", "s_(2)"),
    ("fix show = expanded; (1 - t) (1 - q)", "1 - q - t + q t"),
    ("fix show = factored; 1 - q - t + q t", "(1 - q) (1 - t)"),
])
def test_settings_hold_for_what_follows(text: str, expected: str) -> None:
    check(text, expected, n=2)


def test_the_ring_may_grow() -> None:
    found = outcomes("fix n = 2; x_1 + x_2; let f = x_2; fix n = 3; f x_3; eq_1 + x_3")
    assert [o.text for o in found[-2:]] == ["x_2 x_3", "x_1 + x_2 + x_3"]


@pytest.mark.parametrize(("text", "expected"), [
    ("let f = x_1 E_01",
     "f = (1 - t)/(1 - q t) E_(2,0) + (1 - q) (1 - q t^2)/(1 - q t)^2 E_(1,1)"),
    ("let c(a, b) = q^a t^b", "let c(a, b) = q^a t^b"),
    ("let F_mu = x_1 E_mu", "let F_mu = x_1 E_mu"),
    ("let a, b be parameters", "a, b are parameters"),
    ("let a be a parameter", "a is a parameter"),
    ("let a, a be parameters", "a is a parameter"),
    ("let mu = (1,0)", "mu = (1,0)"),
    ("let S1 = {1,3}", "S1 = {1, 3}"),
])
def test_let(text: str, expected: str) -> None:
    assert check(text, expected, n=2).tag is None


def test_values_are_found_when_they_are_defined_and_functions_when_they_are_called() -> None:
    check("let a = 1; let f = a; let g(k) = a k; let a = 2; f", "1")
    check("let a = 1; let f = a; let g(k) = a k; let a = 2; g(1)", "2")


def test_only_expressions_and_their_like_have_tags() -> None:
    found = outcomes("fix n = 2; x_1; let f = x_2; expand f in E; claim f = x_2; "
                     "show f; find i in 1..3 where i > 1; f; remark \"so\"; 1 < 2")
    assert [o.tag for o in found] == [None, 1, None, 2, None, None, 3, 4, None, 5]


def test_a_tag_names_its_result() -> None:
    found = outcomes("fix n = 2; x_1; eq_1 + x_2; eq_2 - eq_1; forget 1; eq_1; recall 2")
    assert found[3].text == "x_2"
    assert found[5].diagnostics[0].code == "unknown-name"
    assert found[6].text == "eq_2 = x_1 + x_2"
    assert last("1; 2; forget 2; 3; eq_3").text == "3"


@pytest.mark.parametrize(("text", "expected"), [
    ("expand x_1 in E", "E_(1,0)"),
    ("expand 0 in E", "0"),
    ("expand 1 in E", "E_(0,0)"),
    ("expand E_01 in x", "(1 - t)/(1 - q t) x_1 + x_2"),
    ("expand x_1 + x_2 in m", "m_(1)"),
    ("expand P_(2) in m", "m_(2) + (1 + q) (1 - t)/(1 - q t) m_(1,1)"),
    ("expand list(x_1, x_1 x_2) in E", "list(E_(1,0), E_(1,1))"),
    ("expand T_1 X_1 in X, T", "X_2 T_1 + (1 - t) X_2"),
    ("expand q + x_1 x_2 in E", "E_(1,1) + q E_(0,0)"),
])
def test_expand(text: str, expected: str) -> None:
    assert check(text, expected, n=2).tag == 1


def test_find_and_tabulate() -> None:
    check("find mu in compositions(2) where mu_1 = 2", "list((2,0,0))", n=3)
    check("find i in 1..3, j in 1..3 where i + j = 4", "list(list(1, 3), list(2, 2), list(3, 1))")
    check("find mu in compositions(2) where mu_1 > 5", "list()", n=3)
    check("tabulate x^mu for mu in compositions(1) where mu_2 = 0",
          "mu       x^mu\n-------  ----\n(0,0,1)  x_3\n(1,0,0)  x_1", n=3)


def test_derive_names_every_subset_and_why_a_row_vanishes() -> None:
    found = last("derive x_2 E_(1,0,2)", n=3)
    assert found.value is not None
    rows = found.value.raw.rows
    assert [row[0] for row in rows] == ["{2}", "{1,2}", "{2,3}", "{1,2,3}"]
    assert rows[0][2:] == ("0", "vanishes: the part carried from 2 meets its equal at 1")
    assert "2009" in found.text and found.record()["kind"] == "table"
    # the rows make up the product
    total = " + ".join(f"({row[2]}) {row[1]}" for row in rows)
    assert last(f"claim x_2 E_(1,0,2) = {total}", n=3).status == "ok"


def test_derive_of_an_inverse_and_of_an_operator_word() -> None:
    found = last("derive x_2^-1 E_(1,0,2)", n=3)
    assert found.value is not None
    total = " + ".join(f"({row[2]}) {row[1]}" for row in found.value.raw.rows)
    assert last(f"claim x_2^-1 E_(1,0,2) = {total}", n=3).status == "ok"
    steps = last("derive T_1 X_1 T_1", n=3)
    assert steps.status == "ok" and "t X_2" in steps.text
    # relations that bear a name say below the table where they are published
    assert "Bernstein relation " in last("derive T_1 X_2 T_1", n=3).text
    assert last("derive T_1 X_2 T_1", n=3).text.endswith(
        "source: Lusztig, Affine Hecke algebras and their graded version (1989)")
    assert "source" not in last("derive T_1^2", n=3).text


@pytest.mark.parametrize(("text", "expected"), [
    ("show x_1/(1 - t) as latex", r"\frac{1}{1 - t} x_{1}"),
    ("show E_01 as latex", "E_{(0,1)}"),
    ("show E_01 as text", "E_(0,1)"),
    ("show E_01", "E_(0,1)"),
    ("show q as json", '{"kind": "scalar", "value": "q"}'),
    ("show (1,2) as latex", "(1,2)"),
])
def test_show(text: str, expected: str) -> None:
    assert check(text, expected, n=2).tag is None


def test_write_and_use(tmp_path: Path) -> None:
    found = check('write x_1 as latex to "f.tex"', "6 characters written to f.tex", n=2,
                  folder=tmp_path)
    assert found.status == "ok"
    assert (tmp_path / "f.tex").read_text("utf-8") == "x_{1}\n"
    (tmp_path / "lemmas.span").write_text(
        'fix n = 2\nlet f = x_1\nremark "one"\nlet g_mu = f E_mu\nf\nquit\nlet h2 = 1\n', "utf-8")
    session_text = 'use "lemmas.span"; use "lemmas.span"; g_(0,0); eq_1'
    found_all = outcomes(session_text, folder=tmp_path)
    assert [o.text for o in found_all] == [
        "lemmas.span read: f, g", "lemmas.span read", "E_(1,0)", "x_1"]


def test_a_script_that_fails_leaves_nothing(tmp_path: Path) -> None:
    (tmp_path / "good.span").write_text("let g = 1\ng\n", "utf-8")
    (tmp_path / "bad.span").write_text('use "good.span"\nlet f = 1\nf\nf +\n', "utf-8")
    found = outcomes('use "bad.span"; f; g; 7; use "good.span"; g', folder=tmp_path)
    assert [o.status for o in found] == ["error", "error", "error", "ok", "ok", "ok"]
    assert found[3].tag == 1
    assert [o.sentence for o in found] == [1, 2, 3, 4, 5, 6]


def test_recall_and_forget() -> None:
    check("let f = x_1; recall f", "f = x_1", n=2)
    check("let c(a) = a^2; recall c", "let c(a) = a^2")
    check("let b be a parameter; recall b", "b is a parameter")
    check("x_1; recall eq_1", "eq_1 = x_1", n=2)
    check("let f = 1; let g = 2; forget f, g; recall",
          "ring: n is not fixed; q, t are parameters")
    check("let f = q; let c(a) = a; let b be a parameter; 2; recall",
          "ring: n is not fixed; q, t, b are parameters\nf = q\nlet c(a) = a\neq_1 = 2")
    assert last("let f = 1; forget f; f").diagnostics[0].code == "unknown-name"
    assert last("let b be a parameter; forget b; b").diagnostics[0].code == "unknown-name"
    assert last("let f = 1; forget f, g; f").text == "1"
    check("fix n = 2; recall n", "n = 2")
    check("recall q", "q = free")
    check("fix t = q^2; fix memory = 500 MB; recall memory", "memory = 500 MB")
    check("fix t = q^2; fix memory = 2 GB; recall",
          "ring: n is not fixed; q, t are parameters\nt = q^2\nmemory = 2 GB")


def test_remark_help_and_quit() -> None:
    check('remark "So much for \\"one\\"."', 'So much for "one".')
    for topic in ("", " E", " expand", " families", " settings", " fix"):
        found = last(f"help{topic}")
        assert found.status == "ok" and len(found.text) > 20
    assert last("help E_(1,0)").text == last("help E").text
    assert last("help T_pi").text != last("help T_1").text == last("help T").text
    check("let mu = (1,0); help \\mu", "an index, defined in this session: mu = (1,0)")
    check("let c(a) = a; help c", "defined in this session: let c(a) = a")
    found_all = outcomes("1; quit; 2")
    assert len(found_all) == 2
    assert found_all[-1].reply().is_quit


def test_help_has_a_page_for_every_word() -> None:
    from spanwright.helping import page
    from spanwright_grammar.vocabulary import VOCABULARY

    for entry in VOCABULARY:
        shown = page(entry.name)
        assert shown is not None
        assert entry.meaning in " ".join(shown.split())


def test_examples_of_the_vocabulary_run(tmp_path: Path) -> None:
    from spanwright_grammar.vocabulary import VOCABULARY

    session = Session(folder=Folder(tmp_path))
    session.run('fix n = 2; write x_1 as json to "f.json"')
    session.run("fix n = 3; let mu = (1,0,2); let f = x_1 E_mu; let w = (2,1,3); x_1; 2; 3; 4; "
                "5; 6; 7; let c(k) = 2^k")
    wrong = {}
    for entry in VOCABULARY:
        if entry.kind in ("family", "operator", "function", "set", "parameter", "word"):
            found = [session.run(f"fix n = {n}; {entry.example}") for n in (2, 3)]
            if all(o.status == "error" and o.diagnostics[0].code != "no-rule-known"
                   for o in found):
                wrong[entry.name] = found[-1].text
    assert wrong == {}


def test_a_computed_subscript_of_an_operator_is_a_position() -> None:
    check("fix n = 4; let i = 2; T_(i+1)", "T_3")
    check("fix n = 4; let i = 2; T_(i-1)", "T_1")
    check("fix n = 4; let i = 2; d_(i-1) x_1^2", "x_1 + x_2")
    check("fix n = 4; let i = 2; tau_(i-1) E_(2,0,1,0)", "E_(0,2,1,0)")
    found = last("fix n = 4; for i in 1..2: claim T_i T_(i+1) T_i = T_(i+1) T_i T_(i+1)")
    assert found.text == "holds\n# 2 cases: 2 held"
    assert "T_4 does not exist" in last("fix n = 4; let i = 3; T_(i+1)").text
    assert last("fix n = 4; let F_i = T_i + 1; F_2").text == "T_2 + 1"
    assert "this is the index (1)" in last("fix n = 4; let F_(i) = T_i + 1; F_(1)").text


def test_a_family_needs_a_symmetric_polynomial_and_says_what_moves_it() -> None:
    found = last("fix n = 3; expand x_1 x_2 + x_3 in s")
    assert found.diagnostics[0].message == (
        "the polynomial is not symmetric: s_2, which exchanges x_2 and x_3, moves it "
        "by f - s_2 f = x_1 x_2 - x_1 x_3 - x_2 + x_3")
    many = " + ".join(f"x_1^{k}" for k in range(1, 60))
    assert found.status == "error"
    assert last(f"fix n = 3; expand {many} in m").diagnostics[0].message.endswith(
        "f - s_1 f has 118 terms")


@pytest.mark.parametrize(("text", "note"), [
    ("x_1 E_(1,0) at q = 1/t", "in monomials: E depends on q"),
    ("E_(0,2) as q -> infinity", "in monomials: E depends on q"),
    ("P_(2,0) at q = 0, t = 0", "in monomials: P depends on q and t"),
    ("S_(1,3,2)(x;y) at y_1 = 0", "in monomials: S(x;y) depends on y_1"),
    ("q s_(2) at q = 1", ""),
    ("E_(2,0) at x_1 = 1", ""),
])
def test_a_specialised_expansion_says_when_it_is_in_monomials(text: str, note: str) -> None:
    found = last(text, n=2)
    assert found.status == "ok"
    assert found.reply().note == note


@pytest.mark.parametrize("hecke", ["plain", "balanced"])
@pytest.mark.parametrize("operator", [
    "T_1", "T_1^-1", "T_2", "Y_2", "Y_3^-1", "tau_1", "tau_2", "tau_pi", "X_1", "X_3^-1"])
def test_derive_an_operator_letter_on_E(operator: str, hecke: str) -> None:
    for index in ("(2,0,1)", "(0,2,1)", "(1,1,0)"):
        session = Session(n=3)
        session.run(f"fix hecke = {hecke}")
        found = session.run(f"derive {operator} E_{index}")
        assert found.status == "ok", found.text
        table = found.raw
        at = [table.columns.index(head) for head in ("target", "coefficient")]
        total = " + ".join(f"({row[at[1]]}) {row[at[0]]}" for row in table.rows)
        assert session.run(f"claim {operator} E_{index} = {total}").text == "holds"
        assert any(line.startswith("source: ") for line in table.notes)


def test_a_divided_difference_keeps_double_schubert_polynomials() -> None:
    check("fix n = 3; d_1 S_312(x;y)", "S_(1,3,2)(x;y)")
    check("fix n = 3; d_1 S_1432(x;y)", "0")
    check("fix n = 3; claim d_2 (S_1432(x;y) S_213(x;y)) = "
          "d_2 ((x_1 - y_1) S_1432(x;y))", "holds")


def test_the_hint_at_a_pole_takes_the_worst_coefficient() -> None:
    found = last("fix n = 2; x_1/(1 - q) + x_2/(1 - q)^2 as q -> 1").diagnostics[0]
    assert found.message == "a pole of order 2 at q = 1 in the coefficient of x_2"
    assert found.hints == ("(q - 1)^2 f as q -> 1",)


def test_a_permutation_before_an_operator_is_a_letter() -> None:
    check("fix n = 3; let w = (3,1,2); w X_1", "X_3 s_2 s_1")
    check("fix n = 3; (2,1) X_1^2", "X_2^2 s_1")
    for operator in ("X_1 X_2^-1", "T_1", "d_2", "pi_1 X_3", "(T_1 + X_1)", "X_2 (2,1,3) X_1"):
        check(f"fix n = 3; for w in permutations(3): claim (w {operator}) x_1^2 x_2 = "
              f"w {operator} x_1^2 x_2", "holds\n# 6 cases: 6 held")
    found = last("fix n = 3; (1,2,1) X_1").diagnostics[0]
    assert found.message == "an index does not multiply an operator"


def test_a_missing_variable_is_asked_for() -> None:
    assert last("fix n = 3; T_1 S_12354").diagnostics[0].hints == ("fix n = 4",)
    assert last("fix n = 3; kappa_(0,0,0,1)").diagnostics[0].hints == ("fix n = 4",)
    assert last("fix n = 3; E_(0,1,0,0)").diagnostics[0].hints == ("E_(0,1,0)",)


def test_a_computed_subscript_of_s_is_a_position() -> None:
    check(
        "claim s_i s_(i+1) s_i = s_(i+1) s_i s_(i+1) for i in 1..2",
        "holds\n# 2 cases: 2 held", n=4)
    assert last("s_(2)", n=3).text == "s_(2)"
    assert last("let mu = (1,1); s_(mu + (1,0))", n=3).text == "s_(2,1)"


def test_double_expands_in_both_alphabets() -> None:
    # x_1^2 = S_312 + (y_1 + y_2) S_21 + y_1^2, as S_312 = (x_1 - y_1)(x_1 - y_2)
    found = last("double(x_1^2)", n=2)
    assert found.text == "S_(3,1,2)(x;y) + (y_1 + y_2) S_(2,1)(x;y) + y_1^2 S_(1)(x;y)"
    assert last("claim double(S_1432) = S_1432", n=3).text == "holds"
