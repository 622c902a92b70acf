"""The table of words: examples that parse, spellings that find them, and what is made from it."""

from __future__ import annotations

import doctest
import importlib

import pytest

from spanwright_grammar import (
    RESERVED,
    VOCABULARY,
    Entry,
    Source,
    by_kind,
    lookup,
    lookup_all,
    nearest,
    parse,
    print_tree,
    reference_markdown,
)
from spanwright_grammar.lexing import KEYWORDS
from spanwright_grammar.syntax import Name
from spanwright_grammar.vocabulary import KINDS


def _label(entry: Entry) -> str:
    return f"{entry.kind}-{entry.name}"


@pytest.mark.parametrize("entry", VOCABULARY, ids=_label)
def test_every_example_parses_and_uses_its_word(entry: Entry) -> None:
    parsed = parse(Source(entry.example))
    assert parsed.diagnostics == () and len(parsed.sentences) == 1
    printed = print_tree(parsed.sentences[0])
    assert parse(Source(printed)).sentences == parsed.sentences
    signs = {"coefficient": "[", "size": "|", "part": "_", "range": "..", "set": "{"}
    assert signs.get(entry.name, entry.name) in entry.example


@pytest.mark.parametrize("entry", VOCABULARY, ids=_label)
def test_every_entry_is_complete(entry: Entry) -> None:
    assert entry.kind in KINDS
    assert entry.signature and entry.meaning and not entry.meaning.endswith(".")
    assert entry.source in ("ours", "common practice") or entry.source[-4:].isdigit()
    assert entry in lookup_all(entry.name)
    for alias in entry.aliases:
        assert entry in lookup_all(alias)


def test_names_are_unique_within_a_kind() -> None:
    keys = [(entry.name, entry.kind) for entry in VOCABULARY]
    assert len(set(keys)) == len(keys)
    assert sum(len(by_kind(kind)) for kind in KINDS) == len(VOCABULARY)


@pytest.mark.parametrize("entry", VOCABULARY, ids=_label)
def test_another_spelling_is_the_same_name(entry: Entry) -> None:
    for alias in entry.aliases:
        parsed = parse(Source(alias))
        if entry.kind in ("family", "operator", "parameter") and "_" not in alias:
            assert parsed.sentences[0].expression == Name(entry.name)  # type: ignore[attr-defined]


def test_the_words_of_the_language_are_reserved() -> None:
    assert set(KEYWORDS) <= RESERVED
    assert {"E", "kappa", "q", "degree", "orbit", "sum", "n", "infinity"} <= RESERVED
    assert not {"f", "w", "mu", "alpha", "size", "seconds"} & RESERVED


def test_every_keyword_is_in_the_table() -> None:
    assert all(lookup(word) is not None for word in KEYWORDS)


def test_lookup_of_a_word_with_two_meanings() -> None:
    assert [entry.kind for entry in lookup_all("s")] == ["family", "operator"]
    assert lookup("no such word") is None


@pytest.mark.parametrize(
    ("word", "near"),
    [("degre", "degree"), ("Orbit", "orbit"), ("eigenvlaue", "eigenvalue"), ("zzz", None)],
)
def test_nearest(word: str, near: str | None) -> None:
    assert nearest(word, [entry.name for entry in VOCABULARY]) == near


def test_nearest_is_never_the_word_itself() -> None:
    assert nearest("degree", ["degree"]) is None


def test_the_reference_lists_every_entry() -> None:
    text = reference_markdown()
    rows = [row for row in text.split("\n") if row.startswith("| ")]
    assert len(rows) == len(VOCABULARY) + 2 * len(KINDS)
    for entry in VOCABULARY:
        assert entry.meaning.replace("|", "\\|") in text
    n_columns = {row.replace("\\|", "").count("|") for row in rows}
    assert n_columns <= {5, 6}


MODULES = ("source", "diagnostics", "spelling", "syntax", "parsing", "printing", "vocabulary")


@pytest.mark.parametrize("name", MODULES)
def test_the_examples_in_docstrings_run(name: str) -> None:
    module = importlib.import_module(f"spanwright_grammar.{name}")
    assert doctest.testmod(module).failed == 0
