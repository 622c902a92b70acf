"""Where names are bound, defined and used; what is in force; other spellings, over several files.

A cursor stands at `▮` in a text.
"""

from __future__ import annotations

import pytest

from spanwright_grammar.bindings import Scope, scope_at
from spanwright_grammar.document import Document
from spanwright_grammar.formatting import applied
from spanwright_grammar.navigation import (
    RenameRefused,
    definitions,
    element_at,
    references,
    rename,
    renameable,
)
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source

CURSOR = "▮"


def at_cursor(text: str) -> tuple[Document, int]:
    """The text without its cursor, and where that was."""
    return Document(text.replace(CURSOR, ""), "a"), text.index(CURSOR)


def check_scope(text: str, expected: Scope) -> None:
    document, offset = at_cursor(text)
    assert document.scope_at(offset) == expected
    assert scope_at(parse(Source(document.text)), offset, Scope()) == expected


def check_mentions(text: str, expected: str) -> None:
    """`expected` has a word for each mention: name, its role's first letter, its owner's offset."""
    found = [
        f"{m.name}:{m.role[0]}{'' if m.owner is None else m.owner}"
        for m in Document(text).mentions()
    ]
    assert " ".join(found) == expected


def check_definition(text: str, expected_line: int | None) -> None:
    document, offset = at_cursor(text)
    places = definitions({"a": document}, "a", offset)
    lines = [document.source.position(place.span.start)[0] for place in places]
    assert lines == ([] if expected_line is None else [expected_line])


def check_rename(text: str, new: str, expected: str) -> None:
    document, offset = at_cursor(text)
    edits = rename({"a": document}, "a", offset, new)
    assert applied(document.text, edits.get("a", [])) == expected


def refusal(text: str, new: str) -> str:
    document, offset = at_cursor(text)
    with pytest.raises(RenameRefused) as caught:
        rename({"a": document}, "a", offset, new)
    return str(caught.value)


# what is in force


def test_settings_and_names_hold_from_the_next_sentence_on() -> None:
    check_scope("fix n = 3\nlet f = 1\n▮", Scope(3, {"f": "a value"}))
    check_scope("fix n = 3\nlet f = ▮1\n", Scope(3))


def test_functions_say_their_arguments_and_results_count_tags() -> None:
    check_scope(
        "let c(a,b) = a; let F_(mu) = E_mu\nc(1,2)\nexpand x_1 in E\n▮",
        Scope(None, {"c": "a function of a, b", "F": "a function of mu"}, (), 2),
    )


def test_forgotten_names_are_gone_and_parameters_stay() -> None:
    check_scope("let f = 1\nlet a, b be parameters\nforget f, b\n▮", Scope(None, {}, ("a",)))


def test_a_computed_n_is_unknown_and_another_file_may_define_anything() -> None:
    check_scope('fix n = 3\nfix n = 1 + 1\nuse "b.span"\n▮', Scope(None, may_hold_more=True))


def test_names_in_blocks_and_in_broken_definitions_count() -> None:
    check_scope("for i in 1..2:\n  let f = i\n  ▮\nend", Scope(None, {"f": "a value"}))
    check_scope("let f = x_1 +)\n▮", Scope(None, {"f": "a value"}))


# mentions


def test_arguments_are_bound_where_they_are_named() -> None:
    check_mentions("let c(a,b) = a + d", "c:d a:b6 b:b8 a:u6 d:u")


def test_a_sum_binds_in_its_condition_and_body_only() -> None:
    check_mentions("sum_(i in 1..i where i < 2) i + i", "i:b5 i:u i:u5 i:u5 i:u")


def test_a_later_index_set_sees_the_earlier_name() -> None:
    check_mentions("find i in M, j in 1..i where j = k", "i:b5 M:u j:b13 i:u5 j:u13 k:u")


def test_a_block_binds_in_all_its_sentences() -> None:
    check_mentions(
        "for i in 1..2:\n  i\n  sum_(i in 1..i) i\nend\ni",
        "i:b4 i:u4 i:b26 i:u4 i:u26 i:u",
    )


def test_greek_and_tex_spellings_are_one_name() -> None:
    check_mentions("let μ = 1; \\mu + mu", "mu:d mu:u mu:u")


# going to definitions


def test_the_nearest_definition_above_counts() -> None:
    check_definition("let f = 1\nlet f = 2\n▮f\nlet f = 3", 2)


def test_a_definition_below_counts_when_there_is_none_above() -> None:
    check_definition("let g(a) = f▮ + a\nlet f = 1", 2)


def test_a_bound_name_leads_to_its_loop_and_an_unknown_one_nowhere() -> None:
    check_definition("let mu = 1\nfor mu in compositions(2): claim |▮mu| = 2", 2)
    check_definition("▮foo", None)
    check_definition("x_1 +▮ 2", None)


def test_a_used_file_holds_definitions() -> None:
    here, offset = at_cursor('use "b"\n▮f')
    other = Document("let f = 1\nlet g = f", "b")
    documents = {"a": here, "b": other}
    assert [place.document for place in definitions(documents, "a", offset)] == ["b"]
    found = references(documents, "a", offset)
    assert [(p.document, p.span.start) for p in found] == [("a", 8), ("b", 4), ("b", 18)]
    found = references(documents, "a", offset, with_definitions=False)
    assert [(p.document, p.span.start) for p in found] == [("a", 8), ("b", 18)]


# other spellings


def test_renaming_leaves_bound_names_of_the_same_spelling_alone() -> None:
    check_rename(
        "let ▮i = 1\ni + sum_(i in 1..i) i", "k", "let k = 1\nk + sum_(i in 1..k) i"
    )
    check_rename(
        "let i = 1\ni + sum_(i in 1..i) ▮i", "k", "let i = 1\ni + sum_(k in 1..i) k"
    )


def test_renaming_in_subscripts_and_glued_words_keeps_them_apart() -> None:
    check_rename("let ▮mu = (1,0)\nE_mu x_1 + 2μf", "nu", "let nu = (1,0)\nE_nu x_1 + 2nu f")
    check_rename("let c(▮a,b) = a b", "alpha", "let c(alpha,b) = alpha b")


def test_renaming_to_the_same_name_changes_nothing() -> None:
    check_rename("let ▮f = 1\nf", "f", "let f = 1\nf")


@pytest.mark.parametrize(
    ("text", "new", "why"),
    [
        ("let ▮f = 1", "E", "E is a word of the language"),
        ("let ▮f = 1", "let", "'let' is no name: a letter, then letters and digits"),
        ("let ▮f = 1", "a b", "'a b' is no name: a letter, then letters and digits"),
        ("let ▮f = 1", "1f", "'1f' is no name: a letter, then letters and digits"),
        ("let ▮f = 1\nlet g = 2", "g", "g is already defined in a, line 2"),
        ("▮E_(1,0)", "f", "E is a word of the language"),
        ("▮foo", "f", "foo is not defined here"),
        ("x_1 ▮+ 1", "f", "there is no name here"),
        ("let ▮f = 1\nsum_(i in 1..2) f", "i", "i already means something else where f is used"),
        (
            "let g = 1\nsum_(▮i in 1..2) i g", "g",
            "g already means something else where i is used",
        ),
    ],
)  # fmt: skip
def test_a_name_that_would_change_the_meaning_is_refused(text: str, new: str, why: str) -> None:
    assert refusal(text, new) == why


def test_the_name_that_can_be_changed_is_shown() -> None:
    document, offset = at_cursor("let weight = 1\nwei▮ght")
    assert renameable({"a": document}, "a", offset) == (15, 21)


def test_a_basis_element_is_found_when_its_index_is_written_out() -> None:
    for text, expected in (
        ("x_1 E_(1,0▮,2)", "E_(1,0,2)"),
        ("▮E_201 + 1", "E_201"),
        ("E_m▮u", None),
        ("▮x_12", None),
        ("E_(a,▮0)", None),
    ):
        document, offset = at_cursor(text)
        found = element_at(document, offset)
        assert (found and found[0]) == expected
