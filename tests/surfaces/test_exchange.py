"""Values in files: JSON with its schema and back exactly, text for sympy, rows for spreadsheets."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path

import jsonschema
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

import spanwright
from effort import effort
from said import last, outcomes
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.reading import NoValue, value_from_json
from spanwright.rendering.forms import rendered
from spanwright.rendering.json import data
from spanwright.values import IndexSet, ListValue

SCHEMA = json.loads(
    Path(spanwright.__file__).with_name("value.schema.json").read_text(encoding="utf-8"))
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)

# sentences before the value, and the value
VALUES = (
    ("", "x_1 E_(1,0,2)"), ("", "expand E_(1,0,2) in x"), ("", "0"), ("", "-7/3"),
    ("", "0 x_1"), ("", "E_(0,0,0) - E_(0,0,0)"), ("", "2^300 x_1^-3"), ("", "(0,-1,3)"),
    ("", "t^(1/2) (1 - q)^3/(1 + t + t^2)"), ("", "t^(-3/2) x_2"), ("", "T_1 X_1 Y_2 + 3"),
    ("", "d_1 x_1"), ("", "pi_(3,1,2) X_1"), ("", "s_1 X_1"), ("", "T_1 - T_1"),
    ("fix hecke = balanced", "T_1 T_1"), ("", "list((1,2), q, list(x_1))"), ("", "list()"),
    ("", "S_(3,1,2)(x;y)"), ("", "expand S_(3,1,2)(x;y) in x"), ("", "S_(2,1,3)^2"),
    ("", "G_(2,1,3)^2"), ("", "s_(2,1) s_(1)"), ("", "P_(2,1) x_1"), ("", "kappa_(0,1,2)"),
    ("", "jack((2,1))"), ("let a, lambda2, b be parameters", "(a - b q)/(1 - lambda2 t) x_1"),
    ("", "1 = 1"), ("", "x_1 = x_2"), ("", "tabulate x_1 E_mu for mu in compositions(1)"),
    ("", "find mu in compositions(3) where mu_1 = 0"), ("", "m_(2,1) + 5 m_(1)"),
    ("fix convention = reversed", "x_1 E_(1,0,2)"), ("", "derive x_1 E_(1,0,2)"),
)


@pytest.mark.parametrize(("before", "typed"), VALUES)
def test_json_follows_its_schema_and_reads_back(before: str, typed: str) -> None:
    found = outcomes(f"fix n = 3\n{before}\n{typed}")
    assert [o.text for o in found if o.status == "error"] == []
    value = found[-1].raw
    text = rendered(value, "json")
    assert text is not None
    VALIDATOR.validate(json.loads(text))
    back = value_from_json(text, ("a", "b", "lambda2"))
    if hasattr(value, "caption"):
        assert (back.columns, back.rows, back.notes) == (value.columns, value.rows, value.notes)
    else:
        assert back == value and type(back) is type(value)
    assert rendered(back, "json") == text


def test_words_of_operators_read_back() -> None:
    value = outcomes("fix n = 3\nlet A = (Y_1 + Y_2)^3 T_1 - tau_1/2")[-1].raw.value
    text = rendered(value, "json")
    assert text is not None and "word" in json.loads(text)
    VALIDATOR.validate(json.loads(text))
    assert rendered(value_from_json(text), "json") == text


def test_index_set_becomes_the_list_of_its_members() -> None:
    value = last("compositions(2)", n=3).raw
    assert isinstance(value, IndexSet)
    text = rendered(value, "json")
    assert text is not None
    assert value_from_json(text) == ListValue(tuple(value))


def test_prose_follows_the_schema_too() -> None:
    for typed in ('remark "tide"', "let f = x_1", "fix n = 2", "recall", "help E"):
        VALIDATOR.validate(data(last(f"fix n = 3\n{typed}").raw))


SCALARS = st.recursive(
    st.sampled_from(["q", "t", "1", "2", "17", "(1 - q)", "(1 - q*t**2)", "t**(1/2)", "1/3"]),
    lambda inner: st.one_of(
        st.builds("({} + {})".format, inner, inner), st.builds("({} - {})".format, inner, inner),
        st.builds("{}*{}".format, inner, inner),
        st.builds("({})**{}".format, inner, st.integers(0, 3))),
    max_leaves=8)


@settings(max_examples=effort(60))
@given(SCALARS)
def test_coefficients_are_read_as_the_language_reads_them(text: str) -> None:
    wanted = last(text.replace("**", "^")).raw
    found = value_from_json(json.dumps({"kind": "scalar", "value": text}))
    assert found == wanted


@pytest.mark.parametrize(("text", "part"), [
    ("", "no JSON: line 1, column 1"), ("{", "no JSON"), ("[" * 500_000, "nested too deeply"),
    ("1.5", "no exact number"), ("NaN", "no exact number"), ("[]", "no object with a kind"),
    ('{"kind": "poem"}', "kind 'poem'"), ('{"kind": ["x"]}', "of kind"), ("{}", "of kind 'None'"),
    ('{"kind": "scalar"}', "no text 'value'"), ('{"kind": "scalar", "value": ""}', "too early"),
    ('{"kind": "scalar", "value": "1 +"}', "too early"),
    ('{"kind": "scalar", "value": "1/0"}', "divides by 0"),
    ('{"kind": "scalar", "value": "0**-1"}', "divides by 0"),
    ('{"kind": "scalar", "value": "1/(q - q)"}', "divides by 0"),
    ('{"kind": "scalar", "value": "q q"}', "out of place"),
    ('{"kind": "scalar", "value": "__import__(os)"}', "no coefficient"),
    ('{"kind": "scalar", "value": "a"}', "let a be a parameter"),
    ('{"kind": "scalar", "value": "q**(1/2)"}', "t^(1/2)"),
    ('{"kind": "scalar", "value": "q**999999999"}', "too large"),
    ('{"kind": "scalar", "value": "q**t"}', "no exponent"),
    ('{"kind": "scalar", "value": "(1"}', "too early"),
    ('{"kind": "index", "value": [1, "2"]}', "no list of integers"),
    ('{"kind": "index", "value": [true]}', "no list of integers"),
    ('{"kind": "expansion", "n": 0, "basis": "E", "terms": []}', "n of the value lies between"),
    ('{"kind": "expansion", "n": 2, "basis": "W", "terms": []}', "no basis 'W'"),
    ('{"kind": "expansion", "n": 2, "basis": "E", "terms": [{}]}', "term 1 of the value"),
    ('{"kind": "expansion", "n": 2, "basis": "E", "terms": '
     '[{"index": [1], "coefficient": "1"}]}', "1 part"),
    ('{"kind": "expansion", "n": 2, "basis": "x", "terms": '
     '[{"index": [1], "coefficient": "1"}]}', "has 1 parts, n is 2"),
    ('{"kind": "expansion", "n": 2, "basis": "P", "terms": '
     '[{"index": [0, 5], "coefficient": "1"}]}', ""),
    ('{"kind": "operator", "n": 2, "hecke": "odd", "algebra": "x", "terms": []}', "Hecke"),
    ('{"kind": "operator", "n": 2, "hecke": "plain", "algebra": "x", "terms": []}', "no algebra"),
    ('{"kind": "operator", "n": 2, "hecke": "plain", "algebra": "nilHecke algebra", "terms": '
     '[{"T": [1, 2], "coefficient": "1"}]}', "do not belong"),
    ('{"kind": "operator", "n": 2, "hecke": "plain", "algebra": "finite Hecke algebra", "terms": '
     '[{"T": [1, 1], "coefficient": "1"}]}', "no permutation"),
    ('{"kind": "operator", "n": 2, "hecke": "plain", "word": "E_(1,0)"}', "no operator"),
    ('{"kind": "operator", "n": 2, "hecke": "plain", "word": "sum_(i in 1..9) T_1"}', "more than"),
    ('{"kind": "truth"}', "neither"), ('{"kind": "text", "text": "tide"}', "kind 'text'"),
    ('{"kind": "table", "columns": ["a"], "rows": [[]]}', "has not 1 cells"),
    ('{"kind": "list", "items": [{"kind": "list", "items": [3]}]}', "item 1 of item 1"),
])
def test_what_is_no_value_is_said(text: str, part: str) -> None:
    with pytest.raises(NoValue) as caught:
        value_from_json(text)
    assert part in str(caught.value)


@settings(max_examples=effort(60))
@given(st.recursive(
    st.none() | st.booleans() | st.integers(-3, 3) | st.sampled_from(
        ["scalar", "list", "operator", "expansion", "E", "x", "plain", "q", "1/0", "T"]),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(
        ["kind", "value", "n", "basis", "terms", "index", "coefficient", "items", "hecke", "word",
         "algebra", "columns", "rows", "holds"]), inner, max_size=5), max_leaves=12))
def test_no_data_does_anything_but_read_or_be_refused(found: object) -> None:
    try:
        value_from_json(json.dumps(found))
    except NoValue as error:
        assert str(error)


@pytest.mark.parametrize("typed", [
    "x_1 E_(1,0,2)", "expand E_(1,0,2) in x", "-7/3", "x_1^-2 + q/(1 - t) x_3", "G_(2,1,3)^2",
    "list((1,2), q)", "t^(1/2)", "x_1 - x_1", "kappa_(0,1,2)",
])
def test_sympy_reads_its_form(typed: str) -> None:
    outcome = last(f"fix n = 3\n{typed}")
    text = rendered(outcome.raw, "sympy")
    found = sympy.sympify(text, locals={"beta_": sympy.Symbol("beta")})
    if isinstance(outcome.raw, ListValue):
        assert found == [(1, 2), sympy.Symbol("q")]
        return
    view = outcome.value
    assert view is not None
    assert sympy.simplify(found - view.to_sympy()) == 0


def test_csv_has_a_row_for_each_term() -> None:
    outcome = last("fix n = 3\nx_1 E_(1,0,2)")
    rows = list(csv.reader(io.StringIO(rendered(outcome.raw, "csv") or "")))
    assert rows[0] == ["index_1", "index_2", "index_3", "coefficient"]
    assert rows[1] == ["3", "0", "1", "(1 - t)/(1 - q*t)"]
    assert len(rows) == 1 + len(outcome.raw.terms)


@pytest.mark.parametrize(("typed", "wanted"), [
    ("1/2", "value\n1/2"), ("(2,0,1)", "index_1,index_2,index_3\n2,0,1"),
    ("list((1,2), (3,4))", "index_1,index_2\n1,2\n3,4"), ("1 = 2", "value\nfails"),
    ("list((1,2), q)", 'value\n"(1,2)"\nq'), ("list()", "value"),
    ("T_1 T_1", 'T,coefficient\n"(2,1,3)",-(1 - t)\n"(1,2,3)",t'),
    ('list("=1+1", "a,b")', "value\n'=1+1\n\"a,b\""), ("x_1 - x_1", "value\n0"),
])
def test_csv_of_other_values(typed: str, wanted: str) -> None:
    value = last(f"fix n = 3\n{typed}").raw
    found = rendered(value, "csv")
    if isinstance(value, LaurentPolynomial):
        wanted = "index_1,index_2,index_3,coefficient"
    assert found == wanted


@pytest.mark.parametrize("sentence", [
    "claim |mu| = 2 for mu in compositions(2)",
    "claim x_1 E_mu = E_(mu+eps_1) for mu in compositions(2)",
    "for mu in compositions(2): x_1/(mu_1 - 1)",
])
def test_a_tally_follows_the_schema(sentence: str) -> None:
    outcome = spanwright.Session(n=2).run(sentence)
    assert outcome.value is not None, outcome.text
    found = outcome.value.to_data()
    assert found["kind"] == "tally"
    VALIDATOR.validate(found)
