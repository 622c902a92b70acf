"""Sentences as text and as trees, how a text is split into them, and messages for bad ones."""

from __future__ import annotations

import pytest

from spanwright_grammar import (
    CODES,
    ParseFailure,
    Source,
    expected_after,
    format_diagnostic,
    is_incomplete,
    parse,
    parse_expression,
    print_tree,
    tokens,
)
from spanwright_grammar.syntax import (
    Binding,
    Claim,
    Comparison,
    Derive,
    Draw,
    Expand,
    ExpressionSentence,
    Find,
    Fix,
    For,
    Forget,
    Guess,
    Help,
    LetFamily,
    LetFunction,
    LetParameters,
    LetValue,
    Name,
    Number,
    Quit,
    Recall,
    Remark,
    Sentence,
    Show,
    Tabulate,
    Use,
    Write,
)

e = parse_expression
f = Name("f")
i_in_1_to_3 = Binding("i", e("1..3"))
mu_in_two = Binding("mu", e("compositions(2)"))

CASES: list[tuple[str, Sentence]] = [
    ("fix n = 3", Fix("n", Number("3"))),
    ("fix t = q^2", Fix("t", e("q^2"))),
    ("fix show = factored", Fix("show", Name("factored"))),
    ("fix memory = 2 GB", Fix("memory", e("2 GB"))),
    ("let f = x_1 E_mu", LetValue("f", e("x_1 E_mu"))),
    ("let c(a,b) = q^a", LetFunction("c", ("a", "b"), e("q^a"))),
    ("let F_(mu) = x_1", LetFamily("F", ("mu",), True, e("x_1"))),
    ("let F_mu = x_1", LetFamily("F", ("mu",), True, e("x_1"))),
    ("let F_{a,b} = x_1", LetFamily("F", ("a", "b"), False, e("x_1"))),
    ("let a, b be parameters", LetParameters(("a", "b"))),
    ("let a be a parameter", LetParameters(("a",))),
    ("let a be parameters", LetParameters(("a",))),
    ("x_1 E_mu", ExpressionSentence(e("x_1 E_mu"))),
    ("expand f in E", Expand(f, ("E",))),
    ("expand f at q = 0 in T, Y", Expand(e("f at q = 0"), ("T", "Y"))),
    ("claim f = 1", Claim(e("f = 1"))),
    (
        "claim x_i = x_i for i in 1..3 where i < 2",
        For((i_in_1_to_3,), e("i < 2"), (Claim(e("x_i = x_i")),), False),
    ),
    (
        "for i in 1..3: for mu in compositions(2): f",
        For(
            (i_in_1_to_3,),
            None,
            (For((mu_in_two,), None, (ExpressionSentence(f),), False),),
            False,
        ),
    ),
    (
        "for i in 1..3, mu in compositions(2) where i < 3:\n  f\n\n  claim f = f\nend",
        For(
            (i_in_1_to_3, mu_in_two),
            e("i < 3"),
            (ExpressionSentence(f), Claim(e("f = f"))),
            True,
        ),
    ),
    ("find mu in compositions(2) where mu_1 = 2", Find((mu_in_two,), e("mu_1 = 2"))),
    ("find mu in compositions(2)", Find((mu_in_two,), None)),
    ("tabulate f for mu in compositions(2)", Tabulate(f, (mu_in_two,), None, None)),
    (
        'tabulate f for mu in compositions(2), i in 1..3 where i < 2 to "a.csv"',
        Tabulate(f, (mu_in_two, i_in_1_to_3), e("i < 2"), "a.csv"),
    ),
    ("derive x_2 E_(1,0,2)", Derive(e("x_2 E_(1,0,2)"), ())),
    ("derive T_1 X_2 T_1 in X, T", Derive(e("T_1 X_2 T_1"), ("X", "T"))),
    ("draw (1,2)", Draw(e("(1,2)"), None)),
    ('draw f to "a.svg"', Draw(f, "a.svg")),
    ("show f as latex", Show(f, "latex")),
    ("show f", Show(f, "text")),
    ("show f as q -> 0 as json", Show(e("f as q -> 0"), "json")),
    ('write f as latex to "f.tex"', Write(f, "latex", "f.tex")),
    ("guess c(k) for k in 1..6", Guess(e("c(k)"), (Binding("k", e("1..6")),))),
    ('use "lemmas.span"', Use("lemmas.span")),
    ("recall", Recall(None)),
    ("recall 7", Recall(Number("7"))),
    ("recall eq_7", Recall(e("eq_7"))),
    ("forget f, g", Forget((f, Name("g")))),
    ('remark "# is no comment here"', Remark("# is no comment here")),
    ("help", Help(None)),
    ("help E", Help("E")),
    ("help μ", Help("mu")),
    ("help   bad   input (", Help("bad input (")),
    ("help for", Help("for")),
    ("quit", Quit()),
]


@pytest.mark.parametrize(("text", "tree"), CASES, ids=[text for text, _ in CASES])
def test_text_to_tree_and_back(text: str, tree: Sentence) -> None:
    parsed = parse(Source(text))
    assert parsed.diagnostics == ()
    assert parsed.sentences == (tree,)
    assert parsed.sentences[0].place == (0, len(text))
    again = parse(Source(print_tree(tree)))
    assert again.diagnostics == () and again.sentences == (tree,)


@pytest.mark.parametrize("line_end", ["\n", "\r\n", "\r", ";"])
def test_every_line_end_parts_sentences(line_end: str) -> None:
    text = line_end.join(["fix n = 3", "let f = 1", "f"])
    assert parse(Source(text)).sentences == parse(Source("fix n = 3\nlet f = 1\nf")).sentences
    assert len(parse(Source(text)).sentences) == 3


@pytest.mark.parametrize(
    ("text", "n_sentences"),
    [
        ("f(1,\n  2)", 1),  # an open bracket goes on
        ("let f = 1 +\n  2", 1),  # a sign at the end of a line goes on
        ("f +  # why\n  # more\n  g", 1),
        ("expand f in\nE", 1),
        ("x_1\n- x_2", 2),  # a sign at the start of a line does not
        ("S_w(x;y); f", 2),  # a semicolon in brackets parts alphabets
        ("list(E_mu\n for mu in orbit((1,0)))", 1),
        ("\n\n;;\n  # nothing\n", 0),
        ("\ufefffix n = 3", 1),  # a byte-order mark is a space
    ],
)
def test_splitting(text: str, n_sentences: int) -> None:
    parsed = parse(Source(text))
    assert parsed.diagnostics == ()
    assert len(parsed.sentences) == n_sentences


def test_a_broken_sentence_spoils_only_itself() -> None:
    text = "fix n = 3\nlet f = (1 +\nlet g = x_1 +\nclaim f = g\nx_1 ]\nlet h = ;quit"
    parsed = parse(Source(text))
    assert [type(sentence) for sentence in parsed.sentences] == [Fix, Claim, Quit]
    assert [found.code for found in parsed.diagnostics] == [
        "missing-bracket", "unexpected-end", "unmatched-bracket", "unexpected-end",
    ]  # fmt: skip
    assert [chunk.sentence is None for chunk in parsed.chunks] == [
        False, True, True, False, True, True, False,
    ]  # fmt: skip


def test_a_block_with_a_broken_sentence_is_broken_as_a_whole() -> None:
    parsed = parse(Source("for i in 1..2:\n  x_i\n  x_(i\nend\nquit"))
    assert parsed.sentences == (Quit(),)
    assert [found.code for found in parsed.diagnostics] == ["missing-bracket"]
    header_broken = parse(Source("for i of 1..2:\n  x_i\nend\nquit"))
    assert header_broken.sentences == (Quit(),)
    assert len(header_broken.diagnostics) == 1


def test_blocks_nest() -> None:
    text = "for i in 1..3:\n for i in 1..3:\n  f\n end\n f\nend"
    inner = For((i_in_1_to_3,), None, (ExpressionSentence(f),), True)
    outer = For((i_in_1_to_3,), None, (inner, ExpressionSentence(f)), True)
    assert parse(Source(text)).sentences == (outer,)
    assert parse(Source(print_tree(outer))).sentences == (outer,)


def test_comments_and_results() -> None:
    text = "f # a word\n#= x_1 + 2\n#plain\r\n"
    comments = parse(Source(text)).comments
    assert [(comment.text, comment.is_result) for comment in comments] == [
        ("a word", False), ("x_1 + 2", True), ("plain", False),
    ]  # fmt: skip
    assert text[comments[1].span.start : comments[1].span.end] == "#= x_1 + 2"


# --- Bad input: text, code, line and column, a part of the message, a hint ------------------------

BAD = [
    (
        "(1 + x_1",
        "missing-bracket",
        (1, 9),
        "`)` is missing: `(` was opened at line 1, column 1",
        "",
    ),
    ("f(1,\n{2\n", "missing-bracket", (2, 3), "`}` is missing: `{` was opened at line 2, co", ""),
    ("x_1)", "unmatched-bracket", (1, 4), "`)` closes nothing", ""),
    ("(1 + x]", "unmatched-bracket", (1, 7), "`]` stands where `)` is due: `(` was ope", ""),
    ("[E_mu) f", "unmatched-bracket", (1, 6), "`)` stands where `]` is due", ""),
    ("x_1 +", "unexpected-end", (1, 6), "expected an expression", ""),
    ("find mu", "unexpected-end", (1, 8), "expected `in`", ""),
    ("expand f", "unexpected-end", (1, 9), "expected `in` or an operator", ""),
    ("write f as latex", "unexpected-end", (1, 17), "or `to` after `latex`", ""),
    ("for i in 1..2: for j in 1..2:\nend", "unexpected-end", (1, 30), "too early", "a block"),
    ("for i in 1..2:\nend", "unexpected-end", (2, 4), "no sentence", ""),
    ("let f 3", "unexpected-text", (1, 7), "found `3`", ""),
    ("let = 3", "unexpected-text", (1, 5), "expected a name, found `=`", ""),
    ("E_-1", "unexpected-text", (1, 3), "negative index", "E_(-1)"),
    ("x ** 2", "unexpected-text", (1, 4), "`^`", "^"),
    ("f == g", "unexpected-text", (1, 4), "one `=`", "="),
    ("let f := 1", "unexpected-text", (1, 7), "found `:`", ""),
    ("x_1 where", "unexpected-text", (1, 5), "an operator or the end of the sentence", ""),
    ("claim x_1 = ", "unexpected-end", (1, 12), "after `=`", ""),
    ("1 + for", "reserved-word", (1, 5), "`for` is a word of the language", ""),
    ("let claim = 1", "reserved-word", (1, 5), "`claim` is a word of the language", ""),
    ("a < b < c", "chained-comparison", (1, 7), "joined by `and`", "a < b and b < c"),
    ("a^b^c", "chained-power", (1, 4), "needs parentheses", "a^(b^c)"),
    ("1.25 x", "decimal-number", (1, 2), "exact", "5/4"),
    ("x²", "invalid-character", (1, 2), "`²` has no meaning here", "^2"),
    ("x₁", "invalid-character", (1, 2), "`₁` has no meaning here", "_1"),
    ("a\x00b", "invalid-character", (1, 2), "U+0000", ""),
    ("é_1", "invalid-character", (1, 1), "`é`", ""),
    ("\\nonsense", "unknown-symbol", (1, 1), "`\\nonsense`", "nonsense"),
    ('use "a.span', "unclosed-string", (1, 5), "no closing", '"a.span"'),
    ("for i in 1..2:\n f", "unclosed-block", (2, 3), "opens at line 1, column 1", "end"),
    ("f\nend", "end-without-block", (2, 1), "closes no block", ""),
    ("(" * 201 + "f" + ")" * 201, "nesting-too-deep", (1, 201), "200 levels", ""),
    ("not " * 201 + "f", "nesting-too-deep", (1, 801), "200 levels", ""),
    ("f" + " at q = 0" * 201, "nesting-too-deep", (1, 1803), "200 levels", ""),
    ("[f] x^-1 " * 201 + "f", "nesting-too-deep", (1, 1801), "200 levels", ""),
    ("x" * (10**6 + 1), "input-too-long", (1, 1), "1000001 characters; at most 1000000", ""),
    ("1" * 100_001, "number-too-long", (1, 1), "100001 digits; at most 100000", ""),
]


@pytest.mark.parametrize(
    ("text", "code", "position", "message", "hint"), BAD, ids=[f"{case[0][:20]!r}" for case in BAD]
)
def test_bad_input(
    text: str, code: str, position: tuple[int, int], message: str, hint: str
) -> None:
    source = Source(text)
    parsed = parse(source)
    found = parsed.diagnostics[0]
    assert len(parsed.diagnostics) == 1 and found.severity == "error"
    assert (found.code, source.position(found.span.start)) == (code, position)
    assert message in found.message
    assert hint in (found.hints[0] if found.hints else "")
    shown = format_diagnostic(source, found)
    assert all(len(row) <= 200 for row in shown.split("\n"))
    words = found.message.replace("`", " ").split()
    # No message speaks of the parser's terminals.
    assert not any(word.isupper() and word.isalpha() and len(word) > 1 for word in words)


def test_every_code_of_the_parser_has_a_case() -> None:
    of_the_parser = list(CODES)[: list(CODES).index("no-rule-known")]
    assert {case[1] for case in BAD} == set(of_the_parser)


def test_two_hundred_levels_are_allowed() -> None:
    text = "(" * 200 + "f" + ")" * 200
    tree = parse_expression(text)
    assert print_tree(tree) == text and tree == parse_expression(text)
    mixed = "(1 + 2 x_1^" * 200 + "f" + ")" * 200
    assert parse_expression(print_tree(parse_expression(mixed))) == parse_expression(mixed)


def test_many_prefixes_side_by_side_are_not_nested() -> None:
    text = " + ".join(["[E_mu] f"] * 500)
    assert parse(Source(text)).diagnostics == ()


@pytest.mark.parametrize("text", ["fix n = 3", "f; g", "", "(1"])
def test_parse_expression_refuses_anything_else(text: str) -> None:
    with pytest.raises(ParseFailure) as failure:
        parse_expression(text)
    assert failure.value.diagnostics and str(failure.value)


# --- Services for the shell and the editor -------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "answer"),
    [
        ("", False),
        ("x_1", False),
        ("f(1,", True),
        ("f(1,\n", True),
        ("let f = 1 +", True),
        ("let f = 1 +\n", True),
        ("let f = 1 +\n\n", False),  # an empty line ends it
        ("for i in 1..3:", True),
        ("for i in 1..3:\n  claim x_i = x_i", True),
        ("for i in 1..3:\n  claim x_i = x_i\nend", False),
        ("for i in 1..3: claim x_i = x_i", False),
        ("f(1, + *", False),  # no line can mend it
        ("f]", False),
        ("f(1; @", False),
        ("help (", False),
        ("help in", False),
        ("recall +\nquit", False),
    ],
)
def test_is_incomplete(text: str, answer: bool) -> None:
    assert is_incomplete(text) is answer


@pytest.mark.parametrize(
    ("text", "among", "not_among"),
    [
        ("", {"a number", "`claim`", "`(`"}, {"`)`", "`in`"}),
        ("expand f in ", {"a name"}, {"a number"}),
        ("f(1", {"`)`", "`,`", "`+`"}, {"`:`", "the end of the sentence"}),
        ("(1 + x", {"`)`", "`*`"}, {"`]`"}),
        ("E_", {"a number", "a name", "`(`", "`{`"}, {"`+`"}),
        ("quit", {"the end of the sentence"}, {"a name"}),
        ("f; let", {"a name"}, {"a number"}),
        ("f\n", {"`+`", "the end of the sentence"}, {"`)`"}),
    ],
)
def test_expected_after(text: str, among: set[str], not_among: set[str]) -> None:
    words = expected_after(text)
    assert among <= words and not (not_among & words)


@pytest.mark.parametrize("text", ["f ]", "x + * ", "@"])
def test_nothing_is_expected_after_a_mistake(text: str) -> None:
    assert expected_after(text) == frozenset()


def test_tokens_name_their_kinds() -> None:
    text = 'let f = 2 T_1 E_mu s_1 s_(2,1) q + degree(f) @ "s" # c'
    kinds = [(text[token.start : token.end], token.kind) for token in tokens(text)]
    expected = {
        "let": "keyword", "f": "name", "=": "punctuation", "2": "number", "T": "operator",
        "E": "family", "mu": "name", "q": "parameter", "degree": "function", "@": "invalid",
        '"s"': "string", "# c": "comment",
    }  # fmt: skip
    assert expected.items() <= dict(kinds).items()
    assert [kind for word, kind in kinds if word == "s"] == ["operator", "family"]
    assert tokens("#= 3")[0].kind == "result"


def test_a_comparison_is_not_a_definition() -> None:
    assert parse(Source("let f = a = b")).sentences == (
        LetValue("f", Comparison(Name("a"), "=", Name("b"))),
    )
