"""A document under random edits says at each step what reading the whole text afresh says."""

from __future__ import annotations

from random import Random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright_grammar.bindings import Scope
from spanwright_grammar.checks import check
from spanwright_grammar.document import Document
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source
from spanwright_grammar.syntax import Node, walk

SCRIPT = """\
fix n = 3
let f = x_1 E_(1,0,2)   # a polynomial
for mu in compositions(2), j in 1..n:
  claim |mu| = 2
  let g = E_mu
end
let c(a,b) = (1 - q^a t^b)/
  (1 - q^(a+1) t^b)
remark "prose; with # signs"
f + c(1,2) E_201; expand f in E
tabulate f for mu in compositions(1)
"""

# Whole words and single signs: what is typed, and what unsettles the reading most.
SNIPPETS = (
    "(", ")", "{", "}", "[", "|", ";", ":", ",", "+", "=", "\n", "\r\n", "\r", "\n\n", '"', "#",
    "#= ", " ", "let ", "for ", "end\n", "for i in 1..2:\n", "claim ", "in ", "where ", "help ",
    "x_1", "E_(1,0)", "mu", "μ", "\\mu", "\U0001d465_1", "\U0001d6fc", "f", "g", "fix n = 2\n",
    "1.5", "\0@3\0", "T_3", "let h = ", "forget f\n", 'use "lemmas.span"\n', "let f = 2\n",
    "let a be a parameter\n", "foo",
)  # fmt: skip


def assert_reads_as_afresh(document: Document) -> None:
    """Tree, spans, comments and findings are those of the text alone."""
    parsed, fresh = document.parsed(), parse(Source(document.text, document.name))
    assert parsed.sentences == fresh.sentences
    assert [_spans(item) for item in parsed.sentences] == [_spans(item) for item in fresh.sentences]
    assert parsed.comments == fresh.comments
    assert parsed.diagnostics == fresh.diagnostics
    assert parsed.chunks == fresh.chunks
    found = document.diagnostics(Scope())
    assert found == check(fresh, Scope(), is_whole=True)


def _spans(node: Node) -> list[tuple[int, int]]:
    return [tuple(item.place) for item in walk(node)]


def test_an_unedited_document_reads_as_the_text() -> None:
    assert_reads_as_afresh(Document(SCRIPT))
    assert_reads_as_afresh(Document(""))


@settings(max_examples=effort(120), deadline=None)
@given(
    st.lists(
        st.tuples(
            st.integers(0, 400), st.integers(0, 25), st.sampled_from(SNIPPETS) | st.just("")
        ),
        min_size=1, max_size=8,
    )
)
def test_random_edits_read_as_afresh(edits: list[tuple[int, int, str]]) -> None:
    document = Document(SCRIPT)
    for start, length, replacement in edits:
        start = min(start, len(document.text))
        document = document.edited(start, start + length, replacement)
        assert_reads_as_afresh(document)


@pytest.mark.parametrize("seed", range(effort(4)))
def test_a_long_run_of_edits_reads_as_afresh(seed: int) -> None:
    random = Random(seed)
    document = Document(SCRIPT)
    for step in range(400):
        start = random.randrange(len(document.text) + 1)
        length = random.choice((0, 0, 0, 1, 2, 12))
        if len(document.text) > 900:
            length += 60
        document = document.edited(start, start + length, random.choice(SNIPPETS))
        if step % 8 == 0:
            document.diagnostics(Scope())  # what is remembered must not go stale
        if step % 20 == 0:
            assert_reads_as_afresh(document)
    assert_reads_as_afresh(document)


def test_typing_a_script_letter_by_letter() -> None:
    document = Document("")
    for place, letter in enumerate(SCRIPT):
        document = document.edited(place, place, letter)
    assert document.text == SCRIPT
    assert_reads_as_afresh(document)


def test_the_sentence_word_before_an_open_bracket_is_lost() -> None:
    # `let` closes the bracket of the line before it; without its `l` it no longer does
    document = Document("x_1 (1 +\nlet f = 2\n")
    assert_reads_as_afresh(document.edited(9, 10, ""))
    assert_reads_as_afresh(document.edited(9, 10, "").edited(9, 9, "l"))


def test_a_place_in_a_message_moves_with_the_text() -> None:
    document = Document("fix n = 2\nx_1 (1 + x_2\n").edited(0, 0, "\n\n")
    assert [found.message for found in document.diagnostics()] == [
        "`)` is missing: `(` was opened at line 4, column 5"
    ]


def test_only_the_edited_sentence_is_read_again() -> None:
    document = Document(SCRIPT * 3)
    middle = document.text.index("remark")
    edited = document.edited(middle + 8, middle + 9, "P")
    shared = {id(part) for part in document._parts} & {id(part) for part in edited._parts}
    assert len(shared) >= len(document._parts) - 3
