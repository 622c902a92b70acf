"""Colours, symbols, folds, selections and links of a text."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from spanwright_grammar.document import Document
from spanwright_grammar.highlighting import highlights
from spanwright_grammar.outline import folds, links, selections, symbols
from spanwright_grammar.source import Span

SCRIPT = """\
# what this is
# about
fix n = 3
use "lemmas.span"
let a be a parameter
let c(b) = b + a
for mu in compositions(2):
  let F_(nu) = E_nu
  claim c(1) =
    x_mu
end
"""


def check_kinds(text: str, expected: str) -> None:
    """`expected` has a word for each coloured stretch: its text, its kind, `!` when introduced."""
    document = Document(text)
    found = [
        f"{text[slice(*span)]}:{kind}{'!' if is_introduced else ''}"
        for span, kind, is_introduced in highlights(document)
    ]
    assert " ".join(found) == expected


def test_names_are_told_apart_by_who_binds_them() -> None:
    check_kinds(
        "let f = 1; sum_(i in 1..2) f x_i",
        "let:keyword f:name! 1:number sum:keyword i:bound! in:keyword 1:number 2:number f:name "
        "x:family i:bound",
    )


def test_families_operators_functions_and_parameters() -> None:
    check_kinds(
        "T_1 E_(1,0) degree(q) s_1 s_(2,1)",
        "T:operator 1:number E:family 1:number 0:number degree:function q:parameter s:operator "
        "1:number s:family 2:number 1:number",
    )


def test_settings_strings_comments_and_results() -> None:
    check_kinds(
        'fix seconds = 2\nuse "b" # why\n#= x_1',
        'fix:keyword seconds:setting 2:number use:keyword "b":string # why:comment #= x_1:result',
    )


def test_a_part_is_coloured_as_in_the_whole() -> None:
    document = Document(SCRIPT)
    part = Span(60, 90)
    whole = set(highlights(document))
    found = list(highlights(document, part))
    assert found and set(found) <= whole
    assert {item for item in whole if part.start <= item.span.start <= part.end} <= set(found)


def test_symbols_nest_in_their_blocks() -> None:
    found = symbols(Document(SCRIPT))
    assert [(item.name, item.kind) for item in found] == [
        ("a", "parameter"), ("c", "function"), ("for mu in compositions(2)", "block"),
    ]  # fmt: skip
    assert [(item.name, item.kind) for item in found[2].children] == [("F", "family")]
    assert SCRIPT[slice(*found[1].name_span)] == "c"
    assert SCRIPT[slice(*found[2].span)].endswith("end")


def test_folds() -> None:
    assert folds(Document(SCRIPT)) == [(1, 2, "comment"), (7, 11, "block"), (9, 10, "sentence")]


def test_a_selection_grows_by_the_tree() -> None:
    text = "for i in 1..2:\n  let f = x_i (1 + q)\nend\n"
    spans = selections(Document(text), text.index("q)"))
    assert [text[slice(*span)] for span in spans] == [
        "q", "+ q", "1 + q", "(1 + q)", "x_i (1 + q)", "let f = x_i (1 + q)",
        "for i in 1..2:\n  let f = x_i (1 + q)\nend", text,
    ]  # fmt: skip


@given(st.integers(0, len(SCRIPT)))
def test_selections_lie_in_each_other_and_hold_the_offset(offset: int) -> None:
    spans = selections(Document(SCRIPT), offset)
    assert spans[-1] == (0, len(SCRIPT))
    for inner, outer in zip(spans, spans[1:]):
        assert outer.start <= inner.start <= offset <= inner.end <= outer.end and inner != outer


def test_links_are_the_files_that_are_used() -> None:
    (link,) = links(Document(SCRIPT))
    assert link.path == "lemmas.span" == SCRIPT[slice(*link.span)]
