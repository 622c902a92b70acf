"""The tree of the language: frozen nodes with spans, sums and products flat, groups explicit.

Two trees are equal when they say the same thing: spans do not count. Comparison, hash, text and
walk use an explicit stack, so that a tree as deep as the parser allows never exhausts Python's.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, fields
from typing import Any, Literal

from spanwright_grammar.source import NO_SPAN, Span

_field_names: dict[type[Node], tuple[str, ...]] = {}


def field_names(kind: type[Node]) -> tuple[str, ...]:
    """The names of a node class's fields that carry meaning: all but the span."""
    if kind not in _field_names:
        _field_names[kind] = tuple(entry.name for entry in fields(kind) if entry.name != "span")
    return _field_names[kind]


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Node:
    """Anything that stands in a tree; every subclass ends in a field `span`."""

    @property
    def place(self) -> Span:
        """The span of the node in its source."""
        return self.span  # type: ignore[attr-defined, no-any-return]

    def _flattened(self) -> Iterator[Any]:
        """Classes, lengths and plain values in prefix order; equal trees have equal runs."""
        stack: list[Any] = [self]
        while stack:
            item = stack.pop()
            if isinstance(item, Node):
                yield type(item)
                stack.extend(getattr(item, name) for name in reversed(field_names(type(item))))
            elif isinstance(item, tuple):
                yield len(item)
                stack.extend(reversed(item))
            else:
                yield item

    def __eq__(self, other: object) -> bool:
        if self is other:
            return True
        if type(self) is not type(other) or not isinstance(other, Node):
            return NotImplemented
        end = object()
        other_items = other._flattened()
        same_so_far = all(item == next(other_items, end) for item in self._flattened())
        return same_so_far and next(other_items, end) is end

    def __hash__(self) -> int:
        return hash(tuple(self._flattened()))

    def __repr__(self) -> str:
        pieces: list[str] = []
        stack: list[Any] = [self]
        while stack:
            item = stack.pop()
            if isinstance(item, _Verbatim):
                pieces.append(item)
            elif isinstance(item, Node):
                pieces.append(type(item).__name__)
                stack.extend(_listed([getattr(item, name) for name in field_names(type(item))]))
            elif isinstance(item, tuple):
                stack.extend(_listed(list(item), trailing="," if len(item) == 1 else ""))
            else:
                pieces.append(repr(item))
        return "".join(pieces)


class _Verbatim(str):
    """Text that `Node.__repr__` copies as it is."""


def _listed(items: list[Any], trailing: str = "") -> list[Any]:
    """The items in brackets with commas, in stack order."""
    listed: list[Any] = [_Verbatim(trailing + ")")]
    for position in range(len(items) - 1, -1, -1):
        listed.append(items[position])
        if position:
            listed.append(_Verbatim(", "))
    listed.append(_Verbatim("("))
    return listed


def children(node: Node) -> Iterator[Node]:
    """The nodes directly below a node, left to right."""
    for name in field_names(type(node)):
        value = getattr(node, name)
        if isinstance(value, Node):
            yield value
        elif isinstance(value, tuple):
            for item in value:
                if isinstance(item, Node):
                    yield item


def walk(node: Node) -> Iterator[Node]:
    """A node and all nodes below it, in prefix order."""
    stack = [node]
    while stack:
        current = stack.pop()
        yield current
        stack.extend(reversed(list(children(current))))


def shifted(node: Node, by: int) -> Any:
    """The same tree with every span moved."""
    made: dict[int, Node] = {}

    def renewed(value: Any) -> Any:
        if isinstance(value, Node):
            return made[id(value)]
        return tuple(map(renewed, value)) if isinstance(value, tuple) else value

    # Prefix order backwards: what stands below a node is renewed before the node itself.
    for current in reversed(list(walk(node))):
        kind: Any = type(current)
        start, end = current.place
        values = [renewed(getattr(current, name)) for name in field_names(kind)]
        made[id(current)] = kind(*values, Span(start + by, end + by))
    return made[id(node)]


def path_to(node: Node, offset: int) -> tuple[Node, ...]:
    """The nodes whose span holds the offset, outermost first; empty when there is none.

    An offset at the very end of a node still belongs to it, as an editor's cursor does.
    """
    path: list[Node] = []
    candidates = [node]
    while candidates:
        holding = [item for item in candidates if item.place.start <= offset <= item.place.end]
        if not holding:
            break
        inside = [item for item in holding if offset < item.place.end]
        path.append(inside[0] if inside else holding[-1])
        candidates = list(children(path[-1]))
    return tuple(path)


def _span() -> Any:
    return field(default=NO_SPAN, compare=False)


# --- Expressions ---------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Expression(Node):
    """Anything that has a value."""


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Number(Expression):
    """`12`: the digits as written; reading them as an integer is the reader's business."""

    digits: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Name(Expression):
    """`f`, `q`, `mu`, `infinity`: the canonical ASCII word, whichever way it was typed."""

    name: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class String(Expression):
    """`"table.tex"`: the text between the quotes, escapes resolved."""

    value: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Subscripted(Expression):
    """`x_1`, `E_(1,0,2)`, `E_mu`, `E_201`, `T_pi`, `x_(j+1)`, `eq_7`.

    The index is a `Number`, a `Name`, a `Tuple`, a `Basement`, or a `Group` around one expression.
    """

    head: str
    index: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Basement(Expression):
    """The `mu|w` of `E_(mu|w)`; the index is a `Tuple` in `E_(1,0,2|w)`."""

    index: Expression
    permutation: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Alphabets(Expression):
    """`S_w(x;y)`: an element read in two alphabets."""

    element: Expression
    first: Expression
    second: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Tuple(Expression):
    """`(0,-1,3)`: two items or more."""

    items: tuple[Expression, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class SetDisplay(Expression):
    """`{1,3}`; `{}` is empty."""

    items: tuple[Expression, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Range(Expression):
    """`1..n`, both ends included."""

    low: Expression
    high: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Group(Expression):
    """Parentheses around one expression."""

    inner: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Comprehension(Expression):
    """`E_mu for mu in orbit((2,1,0)) where |mu| < 4`: stands only as a call's one argument."""

    body: Expression
    bindings: tuple[Binding, ...]
    condition: Expression | None
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Call(Expression):
    """`degree(f)`, `c(1,2)`: a name with a bracket directly behind it; `f()` has no arguments."""

    function: str
    arguments: tuple[Expression, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Term(Node):
    """One summand with its sign, +1 or -1."""

    sign: int
    node: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Sum(Expression):
    """`a + b - c`, flat; `-a` is a sum of one term of sign -1."""

    terms: tuple[Term, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Factor(Node):
    """One factor with the sign before it: nothing, `*` or `/`; the first has nothing."""

    operator: Literal["", "*", "/"]
    node: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Product(Expression):
    """`2/3 x_1 * f`, flat, left to right, two factors or more."""

    factors: tuple[Factor, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Power(Expression):
    """`x_1^-1`, `t^(1/2)`: the exponent is an atom, or a `Sum` of one negative term for `^-k`."""

    base: Expression
    exponent: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Size(Expression):
    """`|mu|`."""

    inner: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Coefficient(Expression):
    """`[E_(1,0,2)] f`: the operand is all that stands to the right in the same product."""

    element: Expression
    operand: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Binding(Node):
    """`mu in compositions(3)`."""

    name: str
    domain: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class BigOperator(Expression):
    """`sum_(i in 1..n) x_i`: the body is all that stands to the right in the same product."""

    kind: Literal["sum", "prod"]
    bindings: tuple[Binding, ...]
    condition: Expression | None
    body: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Substitution(Node):
    """`q = 0` behind `at`; the target is a `Name` or a `Subscripted`."""

    target: Expression
    value: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Specialise(Expression):
    """`f at q = 0, t = 1/3`."""

    operand: Expression
    substitutions: tuple[Substitution, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Limit(Expression):
    """`f as q -> infinity`; the variable is a `Name` or a `Subscripted`."""

    operand: Expression
    variable: Expression
    target: Expression
    span: Span = _span()


ComparisonOperator = Literal["=", "!=", "<", "<=", ">", ">=", "in"]


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Comparison(Expression):
    """`f = g`, `i in S`, `a < b`."""

    left: Expression
    operator: ComparisonOperator
    right: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Negation(Expression):
    """`not a = b`."""

    operand: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Conjunction(Expression):
    """`a and b and c`, flat, two operands or more."""

    operands: tuple[Expression, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Disjunction(Expression):
    """`a or b or c`, flat, two operands or more."""

    operands: tuple[Expression, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class ReadFile(Expression):
    """`read "f.json"`: the value that a file holds."""

    path: str
    span: Span = _span()


# --- Sentences -----------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Sentence(Node):
    """Anything that can be run."""


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Fix(Sentence):
    """`fix n = 3`, `fix basis = E`, `fix memory = 2 GB`."""

    setting: str
    value: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class LetValue(Sentence):
    """`let f = x_1 E_mu`."""

    name: str
    value: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class LetFunction(Sentence):
    """`let c(a,b) = 1 - q^a t^b`."""

    name: str
    parameters: tuple[str, ...]
    value: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class LetFamily(Sentence):
    """`let F_(mu) = x_1 E_mu`, `let F_(a,b) = E_(a,b,0)`.

    One name stands for the whole index, and `is_whole_index` says so; several for its parts.
    """

    name: str
    pattern: tuple[str, ...]
    is_whole_index: bool
    value: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class LetParameters(Sentence):
    """`let a, b be parameters`."""

    names: tuple[str, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class ExpressionSentence(Sentence):
    """An expression on its own: reduce it and show it."""

    expression: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Expand(Sentence):
    """`expand f in E`, `expand D in T, Y`."""

    expression: Expression
    targets: tuple[str, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Claim(Sentence):
    """`claim f = g`."""

    statement: Expression
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class For(Sentence):
    """`for mu in compositions(3) where mu_1 > 0: claim …`, or a block that `end` closes.

    `claim … for …` is the same node as the one-line form.
    """

    bindings: tuple[Binding, ...]
    condition: Expression | None
    body: tuple[Sentence, ...]
    is_block: bool
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Find(Sentence):
    """`find mu in compositions(4) where mu_1 = 2`."""

    bindings: tuple[Binding, ...]
    condition: Expression | None
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Tabulate(Sentence):
    """`tabulate x_1 E_mu for mu in compositions(2) to "weights.parquet"`."""

    expression: Expression
    bindings: tuple[Binding, ...]
    condition: Expression | None
    path: str | None
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Derive(Sentence):
    """`derive x_2 E_(1,0,2)`, `derive T_1 X_2 T_1 in X, T`; no targets when none are named."""

    expression: Expression
    targets: tuple[str, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Draw(Sentence):
    """`draw mu`, `draw mu to "diagram.svg"`."""

    expression: Expression
    path: str | None
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Show(Sentence):
    """`show f as latex`."""

    expression: Expression
    form: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Write(Sentence):
    """`write f as latex to "f.tex"`."""

    expression: Expression
    form: str
    path: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Guess(Sentence):
    """`guess c(k) for k in 1..6`."""

    expression: Expression
    bindings: tuple[Binding, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Use(Sentence):
    """`use "lemmas.span"`."""

    path: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Recall(Sentence):
    """`recall`, `recall 7`, `recall f`."""

    subject: Expression | None
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Forget(Sentence):
    """`forget f`, `forget f, g`."""

    subjects: tuple[Expression, ...]
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Remark(Sentence):
    """`remark "the first column vanishes"`."""

    text: str
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Help(Sentence):
    """`help`, `help E`, `help bad input`."""

    topic: str | None
    span: Span = _span()


@dataclass(frozen=True, slots=True, eq=False, repr=False)
class Quit(Sentence):
    """`quit`."""

    span: Span = _span()
