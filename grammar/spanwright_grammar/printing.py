"""Tree to text in house style, such that the text parses to the same tree.

Parentheses are added only where the tree has an operand that its place does not admit; a tree that
the parser made never has one, because it keeps its groups.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, Final

from spanwright_grammar import syntax
from spanwright_grammar.syntax import Node

# How tightly an expression holds together, loosest first.
(
    DISJUNCTION, CONJUNCTION, NEGATION, COMPARISON, SPECIALISED, RANGE, SUM, PRODUCT, POWER, ATOM,
) = range(10)  # fmt: skip

_LEVELS: Final[dict[type[Node], int]] = {
    syntax.Disjunction: DISJUNCTION,
    syntax.Conjunction: CONJUNCTION,
    syntax.Negation: NEGATION,
    syntax.Comparison: COMPARISON,
    syntax.Specialise: SPECIALISED,
    syntax.Limit: SPECIALISED,
    syntax.Range: RANGE,
    syntax.Sum: SUM,
    syntax.Product: PRODUCT,
    syntax.Coefficient: PRODUCT,
    syntax.BigOperator: PRODUCT,
    syntax.Power: POWER,
}


class _At:
    """A node to be printed where at least a certain level is needed.

    Sums in subscripts and exponents are compact: `x_(j+1)`, `q^(a+1)`.
    """

    __slots__ = ("is_compact", "level", "node")

    def __init__(self, node: Node, level: int = DISJUNCTION, *, is_compact: bool = False) -> None:
        self.node = node
        self.level = level
        self.is_compact = is_compact


_Piece = str | _At


def print_tree(node: Node) -> str:
    """The text of an expression or a sentence.

    >>> from spanwright_grammar.parsing import parse_expression
    >>> print_tree(parse_expression("(1-q^2*t)E_{2,0,1}"))
    '(1 - q^2 * t) E_(2,0,1)'
    """
    pieces: list[str] = []
    stack: list[_Piece] = [_At(node)]
    while stack:
        item = stack.pop()
        if isinstance(item, str):
            pieces.append(item)
            continue
        parts = _PRINTERS[type(item.node)](item.node)
        if _LEVELS.get(type(item.node), ATOM) < item.level:
            parts = ["(", *parts, ")"]
        if item.is_compact:
            parts = [_compact(part) for part in parts]
        stack.extend(reversed(parts))
    return "".join(pieces)


def _compact(part: _Piece) -> _Piece:
    if isinstance(part, _At):
        part.is_compact = True
        return part
    return part.strip() if part in (" + ", " - ") else part


def quoted(text: str) -> str:
    """The text as a string of the language."""
    escaped = text.replace("\\", "\\\\").replace('"', '\\"')
    return f'"{escaped}"'


def _joined(nodes: Sequence[Node], separator: str, level: int = DISJUNCTION) -> list[_Piece]:
    parts: list[_Piece] = []
    for node in nodes:
        if parts:
            parts.append(separator)
        parts.append(_At(node, level))
    return parts


def _bindings(node: Any) -> list[_Piece]:
    """`i in 1..n, j in 1..i where i < j`."""
    parts = _joined(node.bindings, ", ")
    if getattr(node, "condition", None) is not None:
        parts += [" where ", _At(node.condition)]
    return parts


def _subscripted(node: syntax.Subscripted) -> list[_Piece]:
    if isinstance(node.index, syntax.Basement):
        return [node.head, "_(", _At(node.index, is_compact=True), ")"]
    if isinstance(node.index, syntax.Number | syntax.Name | syntax.Group | syntax.Tuple):
        return [node.head, "_", _At(node.index, is_compact=True)]
    return [node.head, "_(", _At(node.index, is_compact=True), ")"]


def _basement(node: syntax.Basement) -> list[_Piece]:
    if isinstance(node.index, syntax.Tuple):
        return [*_joined(node.index.items, ","), "|", _At(node.permutation)]
    return [_At(node.index), "|", _At(node.permutation)]


def _sum(node: syntax.Sum) -> list[_Piece]:
    parts: list[_Piece] = []
    for term in node.terms:
        if parts:
            parts.append(" - " if term.sign < 0 else " + ")
        elif term.sign < 0:
            parts.append("-")
        parts.append(_At(term.node, PRODUCT))
    return parts


def _product(node: syntax.Product) -> list[_Piece]:
    parts: list[_Piece] = []
    last = len(node.factors) - 1
    for position, factor in enumerate(node.factors):
        if position:
            parts.append({"": " ", "*": " * ", "/": "/"}[factor.operator])
        is_last_prefix = position == last and isinstance(
            factor.node, syntax.Coefficient | syntax.BigOperator
        )
        parts.append(_At(factor.node, PRODUCT if is_last_prefix else POWER))
    return parts


def _power(node: syntax.Power) -> list[_Piece]:
    exponent = node.exponent
    if isinstance(exponent, syntax.Sum) and len(exponent.terms) == 1:
        term = exponent.terms[0]
        if term.sign < 0 and _LEVELS.get(type(term.node), ATOM) == ATOM:
            return [_At(node.base, ATOM), "^-", _At(term.node, ATOM)]
    return [_At(node.base, ATOM), "^", _At(exponent, ATOM, is_compact=True)]


def _for(node: syntax.For) -> list[_Piece]:
    parts: list[_Piece] = ["for ", *_bindings(node), ":"]
    if not node.is_block:
        return [*parts, " ", *_joined(node.body, "; ")]
    return [*parts, "\n", *_joined(node.body, "\n"), "\nend"]


def _to_path(path: str | None) -> list[_Piece]:
    return [] if path is None else [" to " + quoted(path)]


_PRINTERS: Final[dict[type[Node], Callable[[Any], list[_Piece]]]] = {
    syntax.Number: lambda node: [node.digits],
    syntax.Name: lambda node: [node.name],
    syntax.String: lambda node: [quoted(node.value)],
    syntax.Subscripted: _subscripted,
    syntax.Basement: _basement,
    syntax.Alphabets: lambda node: [
        _At(node.element, ATOM), "(", _At(node.first), ";", _At(node.second), ")",
    ],
    syntax.Tuple: lambda node: ["(", *_joined(node.items, ","), ")"],
    syntax.SetDisplay: lambda node: ["{", *_joined(node.items, ","), "}"],
    syntax.Range: lambda node: [_At(node.low, SUM), "..", _At(node.high, SUM)],
    syntax.Group: lambda node: ["(", _At(node.inner), ")"],
    syntax.Comprehension: lambda node: [_At(node.body), " for ", *_bindings(node)],
    syntax.Call: lambda node: [node.function, "(", *_joined(node.arguments, ", "), ")"],
    syntax.Term: lambda node: ["-" if node.sign < 0 else "", _At(node.node, PRODUCT)],
    syntax.Sum: _sum,
    syntax.Factor: lambda node: [_At(node.node, POWER)],
    syntax.Product: _product,
    syntax.Power: _power,
    syntax.Size: lambda node: ["|", _At(node.inner), "|"],
    syntax.Coefficient: lambda node: ["[", _At(node.element), "] ", _At(node.operand, PRODUCT)],
    syntax.Binding: lambda node: [node.name, " in ", _At(node.domain, RANGE)],
    syntax.BigOperator: lambda node: [
        node.kind, "_(", *_bindings(node), ") ", _At(node.body, PRODUCT),
    ],
    syntax.Substitution: lambda node: [_At(node.target, ATOM), " = ", _At(node.value, SUM)],
    syntax.Specialise: lambda node: [
        _At(node.operand, SPECIALISED), " at ", *_joined(node.substitutions, ", "),
    ],
    syntax.Limit: lambda node: [
        _At(node.operand, SPECIALISED), " as ", _At(node.variable, ATOM),
        " -> ", _At(node.target, SUM),
    ],
    syntax.Comparison: lambda node: [
        _At(node.left, SPECIALISED), f" {node.operator} ", _At(node.right, SPECIALISED),
    ],
    syntax.Negation: lambda node: ["not ", _At(node.operand, NEGATION)],
    syntax.Conjunction: lambda node: _joined(node.operands, " and ", NEGATION),
    syntax.Disjunction: lambda node: _joined(node.operands, " or ", CONJUNCTION),
    syntax.ReadFile: lambda node: ["read " + quoted(node.path)],
    syntax.Fix: lambda node: [f"fix {node.setting} = ", _At(node.value)],
    syntax.LetValue: lambda node: [f"let {node.name} = ", _At(node.value)],
    syntax.LetFunction: lambda node: [
        f"let {node.name}({','.join(node.parameters)}) = ", _At(node.value),
    ],
    syntax.LetFamily: lambda node: [
        f"let {node.name}_({','.join(node.pattern)}) = ", _At(node.value),
    ],
    syntax.LetParameters: lambda node: [f"let {', '.join(node.names)} be parameters"],
    syntax.ExpressionSentence: lambda node: [_At(node.expression)],
    syntax.Expand: lambda node: [
        "expand ", _At(node.expression, SPECIALISED), " in " + ", ".join(node.targets),
    ],
    syntax.Claim: lambda node: ["claim ", _At(node.statement)],
    syntax.For: _for,
    syntax.Find: lambda node: ["find ", *_bindings(node)],
    syntax.Tabulate: lambda node: [
        "tabulate ", _At(node.expression), " for ", *_bindings(node), *_to_path(node.path),
    ],
    syntax.Derive: lambda node: [
        "derive ", _At(node.expression, SPECIALISED),
        " in " + ", ".join(node.targets) if node.targets else "",
    ],
    syntax.Draw: lambda node: ["draw ", _At(node.expression), *_to_path(node.path)],
    syntax.Show: lambda node: [
        "show ", _At(node.expression, SPECIALISED), f" as {node.form}",
    ],
    syntax.Write: lambda node: [
        "write ", _At(node.expression, SPECIALISED), f" as {node.form}", *_to_path(node.path),
    ],
    syntax.Guess: lambda node: ["guess ", _At(node.expression), " for ", *_bindings(node)],
    syntax.Use: lambda node: ["use " + quoted(node.path)],
    syntax.Recall: lambda node: (
        ["recall"] if node.subject is None else ["recall ", _At(node.subject)]
    ),
    syntax.Forget: lambda node: ["forget ", *_joined(node.subjects, ", ")],
    syntax.Remark: lambda node: ["remark " + quoted(node.text)],
    syntax.Help: lambda node: ["help" if node.topic is None else f"help {node.topic}"],
    syntax.Quit: lambda node: ["quit"],
}  # fmt: skip
