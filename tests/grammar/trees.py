"""Hypothesis strategies for the trees that the parser can make.

They draw level by level, as the grammar reads: a looser expression stands only between brackets.
Strategies built from strategies say the same, but their texts grow without bound.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Literal

from hypothesis import strategies as st

from spanwright_grammar import syntax as s
from spanwright_grammar.syntax import Expression, Sentence

MAX_CHOICES = 60  # keeps a tree near a hundred nodes
Draw = Callable[[st.SearchStrategy[Any]], Any]

NAMES = st.sampled_from(["f", "g", "x", "mu", "q", "t", "n", "weight2", "infinity", "sum", "d"])
HEADS = st.sampled_from(["x", "E", "T", "mu", "tau", "kappa", "eq", "F2"])
FREE_NAMES = st.sampled_from(["a", "b", "c", "mu", "k1"])
NAME_LISTS = st.lists(FREE_NAMES, min_size=1, max_size=3, unique=True)
TARGETS = st.lists(st.sampled_from(["E", "x", "T", "Y", "X"]), min_size=1, max_size=2)
FORMS = st.sampled_from(["text", "latex", "json", "html"])
DIGITS = st.sampled_from(["0", "1", "2", "17", "007", "9" * 30])
TEXTS = st.text(
    alphabet=st.characters(exclude_categories=["Cs"], exclude_characters="\r\n"), max_size=8
)


class _Drawing:
    """Draws one tree; every pair of brackets uses up some of the depth."""

    def __init__(self, draw: Draw, depth: int) -> None:
        self.draw = draw
        self.depth = depth
        self.n_choices = 0

    def choice(self, *makers: Callable[[], Any]) -> Any:
        """One of several kinds; the first and simplest when the tree is large already."""
        self.n_choices += 1
        if self.n_choices > MAX_CHOICES:
            return makers[0]()
        return makers[self.draw(st.integers(0, len(makers) - 1))]()

    def many(self, maker: Callable[[], Any], low: int, high: int) -> tuple[Any, ...]:
        self.n_choices += 1
        if self.n_choices > MAX_CHOICES:
            return tuple(maker() for _ in range(low))
        return tuple(maker() for _ in range(self.draw(st.integers(low, high))))

    def inside(self) -> Expression:
        """An expression of any kind, one level of brackets further in."""
        self.depth -= 1
        try:
            return self.leaf() if self.depth <= 0 else self.expression()
        finally:
            self.depth += 1

    # Atoms.

    def number(self) -> Expression:
        return s.Number(self.draw(DIGITS))

    def name(self) -> Expression:
        return s.Name(self.draw(NAMES))

    def leaf(self) -> Expression:
        return self.choice(
            self.name,
            self.number,
            lambda: s.String(self.draw(TEXTS)),
            lambda: s.ReadFile(self.draw(TEXTS)),
        )

    def group(self) -> Expression:
        return s.Group(self.inside())

    def item(self) -> Expression:
        """An expression beside commas: none with an `=`, which could go on a substitution."""
        return self.sum() if self.depth > 1 else self.leaf()

    def items(self, low: int, high: int) -> tuple[Expression, ...]:
        self.depth -= 1
        try:
            return self.many(self.item, low, high)
        finally:
            self.depth += 1

    def tuple(self) -> Expression:
        return s.Tuple(self.items(2, 3))

    def size(self) -> Expression:
        # A `|` behind an operand closes a size, so only brackets may hold another.
        return s.Size(self.choice(self.name, self.group, self.tuple))

    def basement(self) -> Expression:
        index = self.choice(self.name, self.tuple, self.size)
        return s.Basement(index, self.choice(self.name, self.tuple, self.group, self.size))

    def subscripted(self) -> Expression:
        index = self.choice(self.number, self.name, self.group, self.tuple, self.basement)
        return s.Subscripted(self.draw(HEADS), index)

    def call(self) -> Expression:
        return s.Call(self.draw(NAMES), self.items(0, 3))

    def call_over(self) -> Expression:
        body = s.Comprehension(self.inside(), self.bindings(), self.condition())
        return s.Call(self.draw(NAMES), (body,))

    def atom(self) -> Expression:
        if self.depth <= 0:
            return self.leaf()
        return self.choice(
            self.leaf,
            self.group,
            self.subscripted,
            self.tuple,
            lambda: s.SetDisplay(self.items(0, 3)),
            self.size,
            self.call,
            self.call_over,
            lambda: s.Alphabets(self.subscripted(), self.inside(), self.inside()),
        )

    # Powers, products, sums.

    def power(self) -> Expression:
        def negative_power() -> Expression:
            return s.Power(self.atom(), s.Sum((s.Term(-1, self.atom()),)))

        return self.choice(
            self.atom, self.atom, lambda: s.Power(self.atom(), self.atom()), negative_power
        )

    def prefixed(self) -> Expression:
        kind: Literal["sum", "prod"] = self.draw(st.sampled_from(["sum", "prod"]))
        return self.choice(
            lambda: s.Coefficient(self.inside(), self.product()),
            lambda: s.BigOperator(kind, self.bindings(), self.condition(), self.product()),
        )

    def product(self) -> Expression:
        nodes = list(self.many(self.power, 1, 3))
        if self.depth > 1 and self.draw(st.integers(0, 4)) == 0:
            self.depth -= 1
            nodes[self.draw(st.integers(0, 1)) :] = [self.prefixed()]
            self.depth += 1
        if len(nodes) == 1:
            return nodes[0]
        signs = [self.draw(st.sampled_from(["", "*", "/"])) for _ in nodes[1:]]
        return s.Product(tuple(map(s.Factor, ["", *signs], nodes)))

    def sum(self) -> Expression:
        terms = self.many(lambda: self.term(), 1, 3)
        return terms[0].node if len(terms) == 1 and terms[0].sign > 0 else s.Sum(terms)

    def term(self) -> s.Term:
        return s.Term(self.draw(st.sampled_from([1, -1])), self.product())

    # Everything looser.

    def range(self) -> Expression:
        return self.choice(self.sum, lambda: s.Range(self.sum(), self.sum()))

    def target(self) -> Expression:
        return self.choice(self.name, self.subscripted) if self.depth > 0 else self.name()

    def substitution(self) -> s.Substitution:
        return s.Substitution(self.target(), self.sum())

    def specialised(self) -> Expression:
        tree = self.range()
        for _ in range(self.draw(st.sampled_from([0, 0, 0, 1, 2]))):
            operand = tree
            tree = self.choice(
                lambda operand=operand: s.Specialise(operand, self.many(self.substitution, 1, 2)),
                lambda operand=operand: s.Limit(operand, self.target(), self.sum()),
            )
        return tree

    def comparison(self) -> Expression:
        signs = st.sampled_from(["=", "!=", "<", "<=", ">", ">=", "in"])
        return self.choice(
            self.specialised,
            lambda: s.Comparison(self.specialised(), self.draw(signs), self.specialised()),
        )

    def negation(self) -> Expression:
        return self.choice(self.comparison, self.comparison, lambda: s.Negation(self.negation()))

    def conjunction(self) -> Expression:
        operands = self.many(self.negation, 1, 2)
        return operands[0] if len(operands) == 1 else s.Conjunction(operands)

    def expression(self) -> Expression:
        operands = self.many(self.conjunction, 1, 2)
        return operands[0] if len(operands) == 1 else s.Disjunction(operands)

    def binding(self) -> s.Binding:
        return s.Binding(self.draw(FREE_NAMES), self.range())

    def bindings(self) -> tuple[s.Binding, ...]:
        self.depth -= 1
        try:
            return self.many(self.binding, 1, 2)
        finally:
            self.depth += 1

    def condition(self) -> Expression | None:
        condition: Expression | None = self.choice(lambda: None, self.inside)
        return condition

    # Sentences.

    def path(self) -> str | None:
        path: str | None = self.draw(st.one_of(st.none(), TEXTS))
        return path

    def let_family(self) -> Sentence:
        pattern = tuple(self.draw(NAME_LISTS))
        name = self.draw(FREE_NAMES)
        return s.LetFamily(name, pattern, len(pattern) == 1, self.expression())

    def simple_sentence(self) -> Sentence:
        draw = self.draw
        settings = st.sampled_from(["n", "q", "show", "basis"])
        sentence: Sentence = self.choice(
            lambda: s.ExpressionSentence(self.expression()),
            lambda: s.Fix(draw(settings), self.expression()),
            lambda: s.LetValue(draw(FREE_NAMES), self.expression()),
            lambda: s.LetFunction(draw(FREE_NAMES), tuple(draw(NAME_LISTS)), self.expression()),
            self.let_family,
            lambda: s.LetParameters(tuple(draw(NAME_LISTS))),
            lambda: s.Expand(self.specialised(), tuple(draw(TARGETS))),
            lambda: s.Claim(self.expression()),
            lambda: s.Find(self.bindings(), self.condition()),
            lambda: s.Tabulate(self.expression(), self.bindings(), self.condition(), self.path()),
            lambda: s.Derive(self.specialised(), ()),
            lambda: s.Derive(self.specialised(), tuple(draw(TARGETS))),
            lambda: s.Draw(self.expression(), self.path()),
            lambda: s.Show(self.specialised(), draw(FORMS)),
            lambda: s.Write(self.specialised(), draw(FORMS), draw(TEXTS)),
            lambda: s.Guess(self.expression(), self.bindings()),
            lambda: s.Use(draw(TEXTS)),
            lambda: s.Recall(self.choice(lambda: None, self.expression)),
            lambda: s.Forget(self.items(1, 2)),
            lambda: s.Remark(draw(TEXTS)),
            s.Quit,
        )
        return sentence

    def line(self) -> Sentence:
        topics = st.sampled_from([None, "E", "bad input", "( for"])
        sentence: Sentence = self.choice(
            self.simple_sentence,
            lambda: s.Help(self.draw(topics)),
            lambda: s.For(self.bindings(), self.condition(), (self.simple_sentence(),), False),
        )
        return sentence

    def sentence(self, blocks: int = 2) -> Sentence:
        if blocks == 0 or self.draw(st.integers(0, 4)):
            return self.line()
        body = self.many(lambda: self.sentence(blocks - 1), 1, 3)
        return s.For(self.bindings(), self.condition(), body, True)


@st.composite
def expressions(draw: Draw, depth: int = 3) -> Expression:
    """Expressions of every kind, with at most `depth` levels of brackets."""
    return _Drawing(draw, draw(st.integers(1, depth))).expression()


@st.composite
def sentences(draw: Draw, depth: int = 2) -> Sentence:
    """Sentences of every kind, blocks included."""
    return _Drawing(draw, draw(st.integers(1, depth))).sentence()
