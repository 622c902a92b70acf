"""Signatures and explanations of the word at a cursor."""

from __future__ import annotations

import pytest

from spanwright_grammar.bindings import Scope
from spanwright_grammar.hover import hover, signature
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source, Span

CURSOR = "▮"
RING = Scope(n=3, names={"f": "a polynomial", "c": "a function of a, b"}, parameters=("a",))


def signature_at(text: str) -> tuple[str, int] | None:
    """Label and part at the mark."""
    found = signature(text.replace(CURSOR, ""), text.index(CURSOR), RING)
    return None if found is None else (found.label, found.part)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("x_1▮", ("x_i", 0)),
        ("x_1 E▮_(2,0,1)", ("E_mu, E_(mu|w)", 0)),
        ("E_(2,▮", ("E_mu, E_(mu|w)", 2)),
        ("inner(f, ▮)", ("inner(f, g)", 2)),
        ("degree(x_1 (▮", ("degree(f)", 1)),
        ("T_pi▮", ("T_pi", 0)),
        ("s_1▮", ("s_i", 0)),
        ("s_(2,▮", ("s_lambda", 2)),
        ("fix n▮", ("fix n = k", 0)),
        ("c(1,▮", ("c(a, b)", 2)),
        ("f▮", ("f", 0)),
        ("a▮", ("a", 0)),
        ("derive x_1 ▮", ("derive f, derive A in X, T", 0)),
        ("κ▮", ("kappa_mu", 0)),
        # behind its last bracket a word is still at the cursor; the first word of a sum is not
        ("x_1 + E_(2,0,1)▮", ("E_mu, E_(mu|w)", 0)),
        ("degree(x_1)▮", ("degree(f)", 0)),
        ("x_1 + ▮", None),
        ("x_1 + (x_2)▮", None),
        ("zork▮", None),
        ("# x_1▮", None),
        ("▮", None),
    ],
)
def test_signatures(text: str, expected: tuple[str, int] | None) -> None:
    assert signature_at(text) == expected


def hover_at(text: str) -> tuple[Span, str] | None:
    """Span and text at the mark."""
    found = hover(parse(Source(text.replace(CURSOR, ""))), text.index(CURSOR), RING)
    return None if found is None else (found.span, found.text)


def test_a_word_of_the_language_is_explained() -> None:
    found = hover_at("x_1 E▮_201")
    assert found is not None
    assert found[0] == Span(4, 5)
    assert "nonsymmetric Macdonald polynomial" in found[1]
    assert "Haglund" in found[1]


def test_an_index_belongs_to_its_word() -> None:
    for text in ("x_1 E_(2,▮0,1)", "x_1 E_(2,0,1)▮", "x_1 E_(▮"):
        found = hover_at(text)
        assert found is not None and found[0] == Span(4, 5)
    assert hover_at("degree(x_1 ▮ + x_2)") is None


def test_an_own_name_leads_to_its_definition() -> None:
    assert hover_at("let g = x_1^2; 2 g▮") == (Span(17, 18), "let g = x_1^2")
    assert hover_at("let g = 1; let g = 2; g▮; let g = 3") == (Span(22, 23), "let g = 2")
    assert hover_at("f▮ + 1") == (Span(0, 1), "f: a polynomial")


def test_nothing_is_said_of_nothing() -> None:
    assert hover_at("zork▮") is None
    assert hover_at("1 ▮+ 2") is None
