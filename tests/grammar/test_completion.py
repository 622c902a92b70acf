"""Completion by the grammar alone: what is proposed at a cursor, and what is not."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from spanwright_grammar.bindings import Scope
from spanwright_grammar.completion import Completion, complete
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source
from spanwright_grammar.vocabulary import FORMS, SETTING_WORDS, by_kind

CURSOR = "▮"
RING = Scope(
    n=3,
    names={"f": "a polynomial", "mu": "an index", "c": "a function of a, b"},
    parameters=("a",),
    last_tag=2,
)


def at(text: str, scope: Scope = RING) -> list[Completion]:
    """The proposals at the mark."""
    offset = text.index(CURSOR)
    return complete(text.replace(CURSOR, ""), offset, scope)


def inserts(text: str, scope: Scope = RING) -> list[str]:
    """What the proposals would insert."""
    return [found.insert for found in at(text, scope)]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        # Positions, as many as the symbol has.
        ("x_▮", ["1", "2", "3"]),
        ("x_1 Y_▮", ["1", "2", "3"]),
        ("tau_▮", ["1", "2", "pi"]),
        ("mu_▮", ["1", "2", "3"]),
        ("eq_▮", ["2", "1"]),
        # The parts that are still due.
        ("E_(▮", ["0,0,0)", "mu"]),
        ("E_(2,▮", ["0,0)", "mu"]),
        ("E_(2▮", [",0,0)", "mu"]),
        ("x_1 E_{2,0,▮", ["0}", "mu"]),
        ("E_(2,0,1▮", [")", "mu"]),
        ("E_(2,0,1,4▮", ["mu"]),
        ("S_(2,▮", ["1,3)", "mu"]),
        ("E_▮", ["mu", "("]),
        # Settings, then their values.
        ("fix sh▮", ["show"]),
        ("fix show = ▮", list(SETTING_WORDS["show"])),
        ("fix n = ▮", ["3"]),
        ("fix seconds = ▮", ["60", "free"]),
        ("show f as ▮", list(FORMS)),
        # Words that the grammar allows here.
        ("find mu in compositions(2) wh▮", ["where"]),
        ("claim f = f fo▮", ["for"]),
        ("let b b▮", ["be"]),
        ("let b be ▮", ["parameter", "parameters"]),
        ("exp▮", ["expand"]),
        ("for i in 1..2: exp▮", ["expand"]),
        ("deg▮", ["degree("]),
        ("\\kap▮", ["\\kappa"]),
        # Capitals count, unless nothing fits them.
        ("KAP▮", ["kappa_"]),
        # Nothing where nothing is known.
        ("let ▮", []),
        ("# deg▮", []),
        ('remark "deg▮', []),
        ("zork_▮", []),
    ],
)  # fmt: skip
def test_proposals(text: str, expected: list[str]) -> None:
    assert inserts(text) == expected


def test_only_families_behind_expand_in() -> None:
    families = [entry.name for entry in by_kind("family") if entry.name != "y"]
    assert inserts("expand x_1 in ▮") == families
    assert inserts("expand sum_(i in 1..n) x_i in ▮") == families
    assert {found.kind for found in at("expand f in ▮")} == {"family"}


def test_only_settings_behind_fix() -> None:
    assert inserts("fix ▮") == [entry.name for entry in by_kind("setting")]
    assert set(inserts("fix basis = ▮")) >= {"E", "x", "free"}


def test_index_sets_come_first_in_bindings() -> None:
    assert inserts("sum_(i in ▮")[:2] == ["1..n", "compositions("]
    assert "i" in inserts("sum_(i in 1..n) x_▮")


def test_a_sentence_can_begin_with_sentence_words_and_own_names() -> None:
    found = inserts("▮")
    assert {"fix", "claim", "f", "c", "x_", "degree(", "sum_("} <= set(found)
    assert "where" not in found
    assert "end" not in found
    assert {"at", "as"} <= set(inserts("f a▮"))
    assert "fix" not in inserts("x_1 + ▮")


def test_every_proposal_has_a_meaning_and_replaces_the_word() -> None:
    for found in at("x_1 s▮"):
        assert found.meaning
        assert found.start == 4
        assert found.insert.startswith("s")


def test_files_are_asked_for_behind_use() -> None:
    asked: list[str] = []

    def files(path: str) -> list[str]:
        asked.append(path)
        return ["lemmas.span", "lib/"]

    text = 'use "l'
    found = complete(text, len(text), RING, files)
    assert asked == ["l"]
    assert [(item.insert, item.start) for item in found] == [('lemmas.span"', 5), ("lib/", 5)]
    found = complete("use ", 4, RING, files)
    assert asked == ["l", ""]
    assert [(item.insert, item.start) for item in found] == [('"lemmas.span"', 4), ('"lib/', 4)]


@given(st.text(alphabet='xE_(){}[]12,;:=+-^|"\\# \nfixlethowmuκ', max_size=30), st.data())
def test_any_text_is_answered_and_the_answers_fit(text: str, data: st.DataObject) -> None:
    offset = data.draw(st.integers(0, len(text)))
    for found in complete(text, offset, RING):
        word = text[found.start : offset]
        assert 0 <= found.start <= offset
        assert found.insert.lower().startswith(word.lower()) or found.start == offset


@pytest.mark.parametrize("text", ["E_(▮", "S_(▮", "kappa_(1,▮", "x_1 P_(2▮"])
def test_the_filled_index_parses(text: str) -> None:
    offset = text.index(CURSOR)
    found = at(text)[0]
    whole = text[: found.start] + found.insert + text[offset + 1 :]
    assert parse(Source(whole)).diagnostics == ()
