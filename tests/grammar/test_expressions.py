"""Expressions as text and as trees, case by case."""

from __future__ import annotations

import pytest

from spanwright_grammar import parse_expression, print_tree
from spanwright_grammar.syntax import (
    Alphabets,
    Basement,
    BigOperator,
    Binding,
    Call,
    Coefficient,
    Comparison,
    Comprehension,
    Conjunction,
    Disjunction,
    Expression,
    Factor,
    Group,
    Limit,
    Name,
    Negation,
    Number,
    Power,
    Product,
    Range,
    ReadFile,
    SetDisplay,
    Size,
    Specialise,
    String,
    Subscripted,
    Substitution,
    Sum,
    Term,
    Tuple,
)

a, b, c, f, g, q, t, w, mu, n = (
    Name(name) for name in ("a", "b", "c", "f", "g", "q", "t", "w", "mu", "n")
)
zero, one, two, three = (Number(digits) for digits in "0123")


def sub(head: str, index: Expression | int) -> Subscripted:
    return Subscripted(head, Number(str(index)) if isinstance(index, int) else index)


def product(*factors: Expression) -> Product:
    return Product(tuple(Factor("", factor) for factor in factors))


def negative(node: Expression) -> Sum:
    return Sum((Term(-1, node),))


def plus(*nodes: Expression) -> Sum:
    return Sum(tuple(Term(1, node) for node in nodes))


x_1, x_2 = sub("x", 1), sub("x", 2)
one_to_n = Range(one, n)

CASES: list[tuple[str, Expression]] = [
    # Atoms.
    ("12", Number("12")),
    ("007", Number("007")),
    ("weight2", Name("weight2")),
    ('"a \\"b\\" \\\\ \\mu"', String('a "b" \\ \\mu')),
    ("x_1", x_1),
    ("E_201", sub("E", 201)),
    ("E_mu", sub("E", mu)),
    ("E_(1,0,2)", sub("E", Tuple((one, zero, two)))),
    ("E_{1,0,2}", sub("E", Tuple((one, zero, two)))),
    ("E_(2)", sub("E", Group(two))),
    ("E_{mu}", sub("E", Group(mu))),
    ("x_(a+1)", sub("x", Group(plus(a, one)))),
    ("E_(0,-1,3)", sub("E", Tuple((zero, negative(one), three)))),
    ("E_(mu|w)", sub("E", Basement(mu, w))),
    ("E_(1,0|w)", sub("E", Basement(Tuple((one, zero)), w))),
    ("E_(mu|(2,1))", sub("E", Basement(mu, Tuple((two, one))))),
    ("E_(mu | w)", sub("E", Basement(mu, w))),
    ("E_(|mu|,0)", sub("E", Tuple((Size(mu), zero)))),
    ("E_(2 |mu||w)", sub("E", Basement(product(two, Size(mu)), w))),
    ("eq_7", sub("eq", 7)),
    ("tau_pi", sub("tau", Name("pi"))),
    ("S_w(a;b)", Alphabets(sub("S", w), a, b)),
    ("S_(2,1)(a;b)", Alphabets(sub("S", Tuple((two, one))), a, b)),
    ("(0,-1,3)", Tuple((zero, negative(one), three))),
    ("((1,2))", Group(Tuple((one, two)))),
    ("{1,3}", SetDisplay((one, three))),
    ("{}", SetDisplay(())),
    ("|mu|", Size(mu)),
    ("|(1,2)|", Size(Tuple((one, two)))),
    ("1..n", one_to_n),
    ('read "f.json"', ReadFile("f.json")),
    # Calls and products with parentheses.
    ("f(a)", Call("f", (a,))),
    ("f()", Call("f", ())),
    ("c(1,2)", Call("c", (one, two))),
    ("f (a)", product(f, Group(a))),
    ("f (1,2)", product(f, Tuple((one, two)))),
    ("x_1(a)", product(x_1, Group(a))),
    ("E_mu(a)", product(sub("E", mu), Group(a))),
    ("2(a)", product(two, Group(a))),
    ("(a)(b)", product(Group(a), Group(b))),
    # Products and powers.
    ("2x_1", product(two, x_1)),
    ("x_1x_2", product(x_1, x_2)),
    ("2/3 x_1", Product((Factor("", two), Factor("/", three), Factor("", x_1)))),
    ("a * b", Product((Factor("", a), Factor("*", b)))),
    ("x_1^-1", Power(x_1, negative(one))),
    ("x_1^(-1)", Power(x_1, Group(negative(one)))),
    ("t^(1/2)", Power(t, Group(Product((Factor("", one), Factor("/", two)))))),
    ("q^2 t", product(Power(q, two), t)),
    ("q^mu_2", Power(q, sub("mu", 2))),
    ("t^|mu|", Power(t, Size(mu))),
    ("f^(1,2)", Power(f, Tuple((one, two)))),
    ("|mu| |mu|", product(Size(mu), Size(mu))),
    # Sums.
    ("a - b + 1", Sum((Term(1, a), Term(-1, b), Term(1, one)))),
    ("-x_1", negative(x_1)),
    ("-2 a", negative(product(two, a))),
    ("1..n - 1", Range(one, Sum((Term(1, n), Term(-1, one))))),
    # Prefixes take everything to their right in the same product.
    ("[E_mu] f g + a", plus(Coefficient(sub("E", mu), product(f, g)), a)),
    ("2 [E_mu] f", product(two, Coefficient(sub("E", mu), f))),
    (
        "sum_(i in 1..n) x_1 f - a",
        Sum(
            (
                Term(1, BigOperator("sum", (Binding("i", one_to_n),), None, product(x_1, f))),
                Term(-1, a),
            )
        ),
    ),
    (
        "a * prod_(i in 1..n, j in {1} where a < b) f",
        Product(
            (
                Factor("", a),
                Factor(
                    "*",
                    BigOperator(
                        "prod",
                        (Binding("i", one_to_n), Binding("j", SetDisplay((one,)))),
                        Comparison(a, "<", b),
                        f,
                    ),
                ),
            )
        ),
    ),
    ("sum", Name("sum")),
    # Specialisation and limits.
    ("f at q = 0", Specialise(f, (Substitution(q, zero),))),
    ("f at q = 0, t = a", Specialise(f, (Substitution(q, zero), Substitution(t, a)))),
    ("f at x_1 = 0", Specialise(f, (Substitution(x_1, zero),))),
    ("f(g at q = 0, a)", Call("f", (Specialise(g, (Substitution(q, zero),)), a))),
    (
        "f(g at q = 0, t = 1, a)",
        Call("f", (Specialise(g, (Substitution(q, zero), Substitution(t, one))), a)),
    ),
    ("f as q -> infinity", Limit(f, q, Name("infinity"))),
    ("f at t = 1 as q -> 0", Limit(Specialise(f, (Substitution(t, one),)), q, zero)),
    # Truth values.
    ("f = g", Comparison(f, "=", g)),
    ("f at q = 0 = g", Comparison(Specialise(f, (Substitution(q, zero),)), "=", g)),
    ("a in {1}", Comparison(a, "in", SetDisplay((one,)))),
    ("a != b", Comparison(a, "!=", b)),
    (
        "not a = b and c >= 1",
        Conjunction((Negation(Comparison(a, "=", b)), Comparison(c, ">=", one))),
    ),
    (
        "a < b or a > b and c <= 1 or f",
        Disjunction(
            (
                Comparison(a, "<", b),
                Conjunction((Comparison(a, ">", b), Comparison(c, "<=", one))),
                f,
            )
        ),
    ),
    # Comprehensions.
    (
        "list(E_mu for mu in orbit((2,1)) where mu_1 > 0)",
        Call(
            "list",
            (
                Comprehension(
                    sub("E", mu),
                    (Binding("mu", Call("orbit", (Tuple((two, one)),))),),
                    Comparison(sub("mu", 1), ">", zero),
                ),
            ),
        ),
    ),
]


@pytest.mark.parametrize(("text", "tree"), CASES, ids=[text for text, _ in CASES])
def test_text_to_tree_and_back(text: str, tree: Expression) -> None:
    assert parse_expression(text) == tree
    assert parse_expression(print_tree(tree)) == tree


@pytest.mark.parametrize(
    ("text", "printed"),
    [
        ("1-q^2*t", "1 - q^2 * t"),
        ("( 2 , 0 , 1 )", "(2,0,1)"),
        ("E_{2,0,1}", "E_(2,0,1)"),
        ("2x_1x_2", "2 x_1 x_2"),
        ("q^( a + 1 )x_( j - 1 )", "q^(a+1) x_(j-1)"),
        ("E_{mu|w}", "E_(mu|w)"),
        ("f at q=0,t=1", "f at q = 0, t = 1"),
        ("(1-t)/(1-q t)", "(1 - t)/(1 - q t)"),
        ("∑_{i∈1..n}x_i", "sum_(i in 1..n) x_i"),
    ],
)
def test_house_style(text: str, printed: str) -> None:
    assert print_tree(parse_expression(text)) == printed


SPELLINGS = [
    ("μ", "\\mu", "mu"),
    ("E_μ", "E_\\mu", "E_mu"),
    ("τ_1 κ_μ", "\\tau_1 \\kappa_\\mu", "tau_1 kappa_mu"),
    ("∂_1 f", "\\partial_1 f", "d_1 f"),
    ("μ2", "\\mu2", "mu2"),
    ("τ_π", "\\tau_\\pi", "tau_pi"),
    ("f as q → ∞", "f as q \\to \\infty", "f as q -> infinity"),
    ("∑_(i ∈ 1..n) x_i", "\\sum_(i \\in 1..n) x_i", "sum_(i in 1..n) x_i"),
    ("∏_(i in 1..n) x_i", "\\prod_(i in 1..n) x_i", "prod_(i in 1..n) x_i"),
    ("a ≤ b", "a \\leq b", "a <= b"),
    ("a ≥ b", "a \\ge b", "a >= b"),
    ("a ≠ b", "a \\ne b", "a != b"),
    ("a · b", "a \\cdot b", "a * b"),
    ("a − b", "a - b", "a - b"),
    ("ｘ_１", "𝑥_𝟙", "x_1"),  # full-width and mathematical letters are the plain ones
    ("\u00b5", "\U0001d707", "mu"),  # the micro sign and an italic mu are mu
    ("a\u00a0b", "a\u2009b", "a b"),  # no-break and thin spaces are spaces
]


@pytest.mark.parametrize("spellings", SPELLINGS, ids=[plain for *_, plain in SPELLINGS])
def test_unicode_and_backslash_and_ascii_are_one(spellings: tuple[str, str, str]) -> None:
    trees = [parse_expression(text) for text in spellings]
    assert trees[0] == trees[1] == trees[2]


def test_two_greek_letters_are_two_names() -> None:
    assert parse_expression("λμ") == product(Name("lambda"), Name("mu"))


def test_spans_cover_the_text_of_their_node() -> None:
    text = "a + 2 x_1^-1 (E_(1,0) − κ_μ)"
    tree = parse_expression(text)
    assert isinstance(tree, Sum)
    last = tree.terms[1].node
    assert isinstance(last, Product)
    shown = [text[factor.span.start : factor.span.end] for factor in last.factors]
    assert shown == ["2", "x_1^-1", "(E_(1,0) − κ_μ)"]
    assert text[tree.span.start : tree.span.end] == text
    assert tree.terms[1].span.start == text.index("+")
