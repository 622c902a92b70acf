"""House style: each rule by a pair of texts, then its laws on random programs and random texts."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from grammar.trees import sentences
from spanwright_grammar.formatting import applied, format_edits, formatted, indentation
from spanwright_grammar.parsing import parse
from spanwright_grammar.printing import print_tree
from spanwright_grammar.source import Source, Span
from spanwright_grammar.syntax import Sentence


def house_style(text: str) -> str:
    """The text in house style, which is checked to be a fixed point and to say the same."""
    before = parse(Source(text))
    after = formatted(before)
    again = parse(Source(after))
    assert again.sentences == before.sentences
    assert [found.code for found in again.diagnostics] == [f.code for f in before.diagnostics]
    assert [c.text.rstrip() for c in again.comments] == [c.text.rstrip() for c in before.comments]
    assert formatted(again) == after
    return after


@pytest.mark.parametrize(
    ("typed", "expected"),
    [
        ("let  f=( 1-q^2*t )E_{2, 0,1}", "let f = (1 - q^2 * t) E_{2,0,1}"),
        ("x_1+2x_2-  - 3", "x_1+2x_2-  - 3"),
        ("- x_1+ - 2", "- x_1+ - 2"),
        ("-  x_1+2x_2", "-x_1 + 2 x_2"),
        ("( 1-q )/ ( 1 - t )", "(1 - q)/(1 - t)"),
        ("x_( j + 1 )^ - 1", "x_(j+1)^-1"),
        ("q^( a+1 )t^b", "q^(a+1) t^b"),
        ("E_( mu | w )", "E_(mu|w)"),
        ("| mu |+|( 1,2 )|", "|mu| + |(1,2)|"),
        ("S_w( x ; y )", "S_w(x;y)"),
        ("inner( f,g )  (x_1)", "inner(f, g) (x_1)"),
        ("let c( a, b )=a", "let c(a,b) = a"),
        ("let a ,b be  parameters", "let a, b be parameters"),
        ("sum_( i in 1 .. n,j in {1, 3} )x_i", "sum_(i in 1..n, j in {1,3}) x_i"),
        ("[ E_(1,0) ]f", "[E_(1,0)] f"),
        ("f at q=0 ,t=1/3", "f at q = 0, t = 1/3"),
        ("f as q->infinity", "f as q -> infinity"),
        ("claim a=b and not 1<2", "claim a = b and not 1 < 2"),
        ("for mu in M,j in 1..n where j<3 : claim j=1",
         "for mu in M, j in 1..n where j < 3: claim j = 1"),
        ('write f as latex to"f.tex"', 'write f as latex to "f.tex"'),
        ("help   bad   input", "help bad   input"),
        ("x_1;x_2  ;  x_3", "x_1; x_2; x_3"),
        ("x_1 #why", "x_1  # why"),
        ("#=x_1", "#= x_1"),
        ("#### \\mu · μ", "#### \\mu · μ"),
        ("\\mu·x_1", "\\mu · x_1"),
        ("x_1 + )", "x_1 + )"),
        ("x_1 (1 +", "x_1 (1 +"),
    ],
)  # fmt: skip
def test_one_line(typed: str, expected: str) -> None:
    assert house_style(typed) == expected + "\n"


def test_blocks_are_indented_and_blank_lines_kept_single() -> None:
    assert house_style(
        "\n\nfix n=3\n\n\n\n for i in 1..2 :\n# why\n   for j in 1..2:\nx_i x_j\n      end\n"
        "    x_i #and\nend\nx_1\n\n"
    ) == (
        "fix n = 3\n\nfor i in 1..2:\n  # why\n  for j in 1..2:\n    x_i x_j\n  end\n"
        "  x_i  # and\nend\nx_1\n"
    )


def test_sentences_of_several_lines_keep_their_lines() -> None:
    assert house_style("let f = x_1 (  #first\nx_2 +\n  x_3\n)\nlet g = 1 +\n2\n") == (
        "let f = x_1 (  # first\n    x_2 +\n    x_3\n)\nlet g = 1 +\n    2\n"
    )


def test_line_ends_stay_those_of_the_text() -> None:
    assert house_style("x_1\r\n\r\n\r\nx_2") == "x_1\r\n\r\nx_2\r\n"
    assert house_style("x_1   \r x_2 \r") == "x_1\rx_2\r"
    assert house_style("\r\n+\nx_1") == "+\nx_1\n"


def test_empty_texts() -> None:
    assert house_style("") == ""
    assert house_style("  \n \n") == ""
    assert house_style("#") == "#\n"


def test_only_the_lines_of_a_part_change() -> None:
    text = "x_1+x_2\nx_1+x_2\nx_1+x_2\n"
    parsed = parse(Source(text))
    assert applied(text, format_edits(text, parsed.pieces, Span(9, 9))) == (
        "x_1+x_2\nx_1 + x_2\nx_1+x_2\n"
    )


def test_the_indentation_of_a_new_line() -> None:
    text = "for i in 1..2:\n\n  for j in 1..2:\n\n  end\nend\n\nlet f = (1 +\n\n2)\n"
    parsed = parse(Source(text))
    spaces = [
        len(indentation(text, parsed.pieces, place))
        for place in (0, 15, text.index("\n\n  end") + 1, text.index("let"), text.index("2)") - 1)
    ]
    assert spaces == [0, 2, 4, 0, 4]


@settings(max_examples=effort(120))
@given(st.lists(sentences(), min_size=1, max_size=3), st.randoms(use_true_random=False))
def test_programs_mean_the_same_in_house_style(script: list[Sentence], random: object) -> None:
    """Spaces are thrown in and taken out at random between the words first."""
    text = "\n".join(map(print_tree, script))
    spaced = "".join(
        random.choice((" ", "  ", "\t")) if letter == " " else letter  # type: ignore[attr-defined]
        for letter in text
    )
    house_style(spaced)


@settings(max_examples=effort(60))
@given(sentences())
def test_what_is_printed_is_nearly_in_house_style(sentence: Sentence) -> None:
    # the printer and the formatter agree but for indentation and calls within subscripts
    text = print_tree(sentence)
    after = house_style(text)
    assert "".join(after.split()) == "".join(text.split())


@settings(max_examples=effort(200))
@given(
    st.lists(
        st.sampled_from(
            ["x_1", "+", "-", "(", ")", "|", "{", "}", "[", "]", ",", ";", ":", "=", "\n", " ",
             "  ", "#a", "#= b", '"s"', '"', "for i in 1..2:", "end", "let f", "\\mu", "μ", "^",
             "sum_(i in 1..2)", "in", "at", "where", "\r\n", "help ", "T_1(", "S_w(x;", "_", "2"]
        ),
        max_size=25,
    ).map("".join)
)  # fmt: skip
def test_any_text_means_the_same_in_house_style(text: str) -> None:
    house_style(text)
