"""Laws of parsing and printing on random trees and random texts, and on texts of hostile size."""

from __future__ import annotations

import time

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from grammar.trees import expressions, sentences
from spanwright_grammar import (
    Parsed,
    Source,
    expected_after,
    format_diagnostic,
    is_incomplete,
    parse,
    parse_expression,
    print_tree,
    tokens,
)
from spanwright_grammar.lexing import KEYWORDS
from spanwright_grammar.syntax import (
    Expression,
    ExpressionSentence,
    Group,
    Node,
    Number,
    Product,
    Sentence,
    Subscripted,
    Sum,
    Term,
    children,
    path_to,
    walk,
)


@settings(max_examples=effort(300))
@given(expressions())
def test_an_expression_survives_printing_and_parsing(tree: Expression) -> None:
    assert parse_expression(print_tree(tree)) == tree


@settings(max_examples=effort(200))
@given(sentences())
def test_a_sentence_survives_printing_and_parsing(tree: Sentence) -> None:
    parsed = parse(Source(print_tree(tree)))
    assert parsed.diagnostics == ()
    assert parsed.sentences == (tree,)


@settings(max_examples=effort(50))
@given(st.lists(sentences(), max_size=4))
def test_a_script_survives_printing_and_parsing(script: list[Sentence]) -> None:
    parsed = parse(Source("\n".join(map(print_tree, script))))
    assert parsed.diagnostics == () and parsed.sentences == tuple(script)


@settings(max_examples=effort(100))
@given(expressions())
def test_trees_are_values(tree: Expression) -> None:
    same = parse_expression(print_tree(tree))
    assert hash(same) == hash(tree) and repr(same) == repr(tree)
    assert Group(tree) != tree and tree != Number("98765")
    assert eval(repr(tree), _NODES) == tree  # the text of a tree is the Python that builds it


_NODES = {
    cls.__name__: cls for kind in Node.__subclasses__() for cls in [kind, *kind.__subclasses__()]
}


@settings(max_examples=effort(100))
@given(expressions())
def test_spans_nest_and_reparse(tree: Expression) -> None:
    text = print_tree(tree)
    placed = parse_expression(text)
    for node in walk(placed):
        assert 0 <= node.place.start < node.place.end <= len(text)
        for child in children(node):
            assert node.place.start <= child.place.start <= child.place.end <= node.place.end
    for node in walk(placed):
        if isinstance(node, Group | Sum | Product | Subscripted):
            piece = text[node.place.start : node.place.end]
            if isinstance(node, Sum) and piece.startswith("-"):
                continue  # the `-1` of a power is a sum only there
            assert parse_expression(piece) == node


@settings(max_examples=effort(100))
@given(expressions(), st.integers(0, 200))
def test_the_path_to_an_offset_leads_inwards(tree: Expression, offset: int) -> None:
    text = print_tree(tree)
    placed = parse_expression(text)
    path = path_to(placed, min(offset, len(text)))
    assert path[0] is placed
    for outer, inner in zip(path, path[1:], strict=False):
        assert any(child is inner for child in children(outer))


def test_trees_of_any_depth_compare_and_print() -> None:
    def deep(innermost: str) -> Expression:
        tree: Expression = Number(innermost)
        for _ in range(3000):
            tree = Sum((Term(-1, Group(tree)),))
        return tree

    assert deep("1") == deep("1") and deep("1") != deep("2")
    assert hash(deep("1")) == hash(deep("1")) and len(repr(deep("1"))) > 3000
    assert print_tree(deep("1")).count("-(") == 3000


def test_a_loose_operand_is_printed_in_parentheses() -> None:
    one_plus_one = parse_expression("1 + 1")
    tree = Product(parse_expression("f g").factors[:1])  # type: ignore[attr-defined]
    assert print_tree(Product((*tree.factors, type(tree.factors[0])("*", one_plus_one)))) == (
        "f * (1 + 1)"
    )


# --- Nothing but `Parsed` comes out --------------------------------------------------------------

WORDS = [
    *KEYWORDS,
    *("x_1", "E_", "E", "mu", "\\mu", "μ", "q", "a", "1", "17", "sum", "sum_", "prod_", "sum_("),
    *("E_(", "f(", "..", ".", "->", "=", "==", "!=", "<=", "*", "·", "/", "^", "+", "-", "∑_"),
    *("(", ")", "{", "}", "[", "]", "|", ",", ";", ":", "_", '"', "#", "#=", "∂_1"),
    *("@", "²", "\n", "\r\n", "\\", "\u0301", "\x00", "\ud800", "'", " "),
]


def _check(text: str) -> None:
    source = Source(text)
    parsed = parse(source)
    assert isinstance(parsed, Parsed)
    for found in parsed.diagnostics:
        assert 0 <= found.span.start <= found.span.end <= len(text)
        assert found.message in format_diagnostic(source, found)
        line, column = source.position(found.span.start)
        assert format_diagnostic(source, found).startswith(f"line {line}, column {column}: ")
    assert all((chunk.sentence is None) == bool(chunk.diagnostics) for chunk in parsed.chunks)
    assert isinstance(is_incomplete(text), bool) and isinstance(expected_after(text), frozenset)
    ends = 0
    for token in tokens(text):
        assert ends <= token.start < token.end <= len(text)
        ends = token.end
    # What was read is what printing says.
    for sentence in parsed.sentences:
        assert parse(Source(print_tree(sentence))).sentences == (sentence,)


@settings(max_examples=effort(400))
@given(st.lists(st.sampled_from(WORDS), max_size=25), st.sampled_from(["", " "]))
def test_random_words(words: list[str], between: str) -> None:
    _check(between.join(words))


@settings(max_examples=effort(200))
@given(st.text(alphabet=st.characters(), max_size=60))
def test_random_text(text: str) -> None:
    _check(text)


@settings(max_examples=effort(200))
@given(st.binary(max_size=200))
def test_random_bytes(junk: bytes) -> None:
    _check(junk.decode("latin-1"))
    _check(junk.decode("utf-8", errors="surrogateescape"))


@settings(max_examples=effort(150))
@given(sentences(), st.data())
def test_a_damaged_sentence(tree: Sentence, data: st.DataObject) -> None:
    text = print_tree(tree)
    cut = data.draw(st.integers(0, len(text)))
    length = data.draw(st.integers(0, 3))
    _check(text[:cut] + data.draw(st.sampled_from(WORDS)) + text[cut + length :])


@pytest.mark.parametrize(
    "text",
    [
        "(" * 10_000 + "x" + ")" * 10_000,
        "(" * 10_000,
        ")" * 10_000,
        "[" * 10_000,
        "[f]" * 10_000 + "f",
        "E_{" * 10_000,
        "f(" * 10_000,
        "|" * 10_000,
        "x_(|" * 5_000,
        "not " * 10_000 + "f",
        "f" + "^2" * 10_000,
        "-" * 10_000 + "f",
        "f" + " at q = 0" * 10_000,
        "f" + " as q -> 0" * 10_000,
        "sum_(i in 1..n) " * 10_000 + "f",
        "for i in 1..2: " * 10_000 + "f",
        "for i in 1..2:\n" * 1_000 + "f",
        "(" * 50_000 + "]" * 50_000,
        "x" * 1_048_576 + " ]",
        "(x+" * 400_000,
        "\x00\xff" * 524_288,
    ],
    ids=lambda text: repr(text[:12]),
)
def test_hostile_sizes_end_in_a_message(text: str) -> None:
    start = time.process_time()
    parsed = parse(Source(text))
    assert parsed.sentences == () and 1 <= len(parsed.diagnostics) <= 3
    # Not a benchmark: only quadratic or worse growth takes this long.
    assert time.process_time() - start < 20


@pytest.mark.parametrize("separator", [" + ", " - ", " ", " * ", "/"])
def test_flat_sums_and_products_may_be_long(separator: str) -> None:
    text = separator.join(["x_1"] * 50_000)
    (sentence,) = parse(Source(text)).sentences
    assert isinstance(sentence, ExpressionSentence)
    tree = sentence.expression
    assert isinstance(tree, Sum | Product)
    assert len(tree.terms if isinstance(tree, Sum) else tree.factors) == 50_000
    assert print_tree(sentence) == text
