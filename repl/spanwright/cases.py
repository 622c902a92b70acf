"""The cases of a sentence over index sets: enumerated lazily, carried out one by one, named.

The stated order: the first name is slowest, every set in the order of its own enumeration. What
a case defines lives for that case alone, so cases may run anywhere and in any order.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from math import prod
from typing import Any

from spanwright.context import SIZE_LIMIT, Context, Failure, failure
from spanwright.evaluator import Evaluator
from spanwright.kernel.errors import KernelError
from spanwright.rendering.json import data
from spanwright.rendering.tex import tex
from spanwright.rendering.text import text
from spanwright.transport import names_in, packed_value, unpacked_value
from spanwright.values import Definition, Setting, Text, Truth
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse
from spanwright_grammar.printing import print_tree
from spanwright_grammar.source import Source

Result = dict[str, Any]
"""What became of a case, as JSON holds it; `status` is one of the words below."""

HELD, FAILED, UNDECIDED, DONE, SKIPPED = "held", "failed", "undecided", "done", "skipped"

STATIC = frozenset({
    "unknown-name", "ring-not-fixed", "name-taken", "not-a-function", "wrong-kind",
    "wrong-number-of-arguments", "unknown-setting", "unknown-form", "no-rule-known",
    "unexpected-text"})
"""Faults of the sentence rather than of a case: met in the first case, they end the run."""

CarryOut = Callable[[syntax.Sentence, Context, Any], Any]

# sentences that would reach outside a case, or end it
_NOT_INSIDE = (syntax.Use, syntax.Quit, syntax.Forget, syntax.Help, syntax.Recall)


@dataclass(frozen=True, slots=True)
class Plan:
    """A sentence over index sets with nested one-line `for` made one.

    `levels` are bindings with the condition that stands behind them; the conditions of all but
    the last level are tested while enumerating, the last one is part of the case.
    """

    node: syntax.For | syntax.Find | syntax.Tabulate
    levels: tuple[tuple[tuple[syntax.Binding, ...], syntax.Expression | None], ...]
    body: tuple[syntax.Sentence, ...]

    @property
    def bindings(self) -> tuple[syntax.Binding, ...]:
        """All bindings, slowest first."""
        return tuple(b for level, _ in self.levels for b in level)

    @property
    def condition(self) -> syntax.Expression | None:
        """The condition that each case tests."""
        return self.levels[-1][1]


def plan(node: syntax.For | syntax.Find | syntax.Tabulate) -> Plan:
    """The plan of a sentence; raises Failure when its body cannot be run case by case."""
    if not isinstance(node, syntax.For):
        return Plan(node, ((node.bindings, node.condition),), ())
    levels = [(node.bindings, node.condition)]
    inner = node
    while len(inner.body) == 1 and isinstance(inner.body[0], syntax.For):
        inner = inner.body[0]
        taken = {b.name for level, _ in levels for b in level}
        if taken & {b.name for b in inner.bindings}:
            return Plan(node, ((node.bindings, node.condition),), node.body)
        levels.append((inner.bindings, inner.condition))
    _check_body(inner)
    return Plan(node, tuple(levels), inner.body)


def _check_body(node: syntax.For) -> None:
    for sentence in node.body:
        if isinstance(sentence, _NOT_INSIDE) or (
            isinstance(sentence, syntax.LetValue) and isinstance(sentence.value, syntax.ReadFile)
        ) or (isinstance(sentence, syntax.Write | syntax.Draw | syntax.Tabulate)
              and sentence.path is not None):
            word = print_tree(sentence).split()[0]
            raise failure(
                "wrong-kind", sentence.place,
                f"`{word}` with a file stands outside a `for`: every case would do it again"
                if hasattr(sentence, "path") else f"`{word}` stands outside a `for`")
    if all(isinstance(s, syntax.LetValue | syntax.LetFunction | syntax.LetFamily
                      | syntax.LetParameters | syntax.Fix) for s in node.body):
        raise failure(
            "wrong-kind", node.body[0].place,
            "what a `for` defines lives for one case alone, so nothing would be left of this",
            "let F_mu = x_1 E_mu")


@dataclass(frozen=True, slots=True)
class Case:
    """One choice of values for the bound names."""

    number: int
    bound: dict[str, Any]

    def packed(self, n: int | None) -> list[Any]:
        """The values as JSON holds them."""
        return [packed_value(v, n) for v in self.bound.values()]

    def text(self) -> str:
        """`mu = (0,1,2), j = 1`."""
        return ", ".join(f"{name} = {text(value)}" for name, value in self.bound.items())


def enumerate_cases(steps: Plan, context: Context) -> Iterator[Case]:
    """The cases in the stated order, one at a time."""
    evaluator = Evaluator(context)

    def descend(level: int) -> Iterator[dict[str, Any]]:
        bindings, condition = steps.levels[level]
        is_last = level == len(steps.levels) - 1
        for bound in evaluator.bound(bindings, None if is_last else condition):
            if is_last:
                yield bound
            else:
                for rest in descend(level + 1):
                    yield {**bound, **rest}

    for number, bound in enumerate(descend(0)):
        yield Case(number, bound)


def number_of_cases(steps: Plan, context: Context) -> int | None:
    """How many cases there are, when that can be said without enumerating them."""
    names = {b.name for b in steps.bindings}
    if any(names & set(names_in(b.domain)) for b in steps.bindings):
        return None
    if any(condition is not None for _, condition in steps.levels[:-1]):
        return None
    evaluator = Evaluator(context)
    sets = [evaluator.domain(b.domain) for b in steps.bindings]
    # the partitions of a number are counted by enumerating them
    if any(s.description.startswith("partitions") for s in sets):
        return None
    return prod(s.size() for s in sets)


def with_bound(context: Context, bound: dict[str, Any]) -> Context:
    """The context of a case."""
    return replace(context, local={**context.local, **bound})


class CaseRunner:
    """Carries out single cases of one plan; a result is plain data, whoever carries it out."""

    def __init__(
        self, steps: Plan, context: Context, surface: Any, carry_out: CarryOut, form: str = "text"
    ) -> None:
        self.plan = steps
        self.context = context
        self.carry_out = carry_out
        self.form = form
        self.surface = replace(surface, use=_refused, read=_refused, write=_refused)

    def case(self, number: int, packed: list[Any]) -> Case:
        """A case that was sent as plain data."""
        values = [unpacked_value(v, self.context) for v in packed]
        return Case(number, dict(zip(
            (b.name for b in self.plan.bindings), values, strict=True)))

    def run(self, case: Case) -> Result:
        """Carry one case out; whatever happens inside becomes part of the result."""
        try:
            context = with_bound(self.context, case.bound)
            condition = self.plan.condition
            if condition is not None and not Evaluator(context).truth(condition).holds:
                return {"status": SKIPPED}
            if isinstance(self.plan.node, syntax.Find):
                return {"status": DONE}
            if isinstance(self.plan.node, syntax.Tabulate):
                return self._row(self.plan.node.expression, context)
            return self._sentences(context)
        except Failure as found:
            return _fault(found)
        except KernelError as error:
            return {"status": UNDECIDED, "code": error.code, "reason": error.fact}
        except (RecursionError, MemoryError):
            return {"status": UNDECIDED, "code": "too-large",
                    "reason": "this case needs more memory than there is"}
        except Exception as error:
            # a fault of the program in one case must not end the others
            return {"status": UNDECIDED, "code": "internal-error",
                    "reason": f"the program failed, and the fault is not yours: "
                              f"{type(error).__name__}: {str(error)[:200]}"}

    def _row(self, expression: syntax.Expression, context: Context) -> Result:
        step = self.carry_out(syntax.ExpressionSentence(expression, expression.place), context,
                              self.surface)
        value = step.value
        shown = context.settings.show
        if isinstance(value, Truth):
            value = Truth(value.holds)  # a cell has no room for the difference
        if self.form == "latex":
            return {"status": DONE, "cell": tex(value, shown)}
        if self.form == "json":
            return {"status": DONE, "cell": data(value)}
        if self.form == "value":
            return {"status": DONE, "cell": packed_value(value, context.settings.n)}
        return {"status": DONE, "cell": text(value, shown)}

    def _sentences(self, context: Context) -> Result:
        result: Result = {"status": DONE}
        lines: list[str] = []
        for sentence in self.plan.body:
            step = self.carry_out(sentence, context, self.surface)
            context = step.context
            value = step.value
            if isinstance(value, Truth) and isinstance(sentence, syntax.Claim):
                if value.certainty == "random":
                    result["evidence"] = value.evidence
                if not value.holds:
                    return {**result, **_difference(value, context), "status": FAILED}
                result["status"] = HELD
            elif hasattr(value, "n_held"):
                if step.has_failed:
                    status = FAILED if value.n_failed else UNDECIDED
                    first = value.counterexample or value.undecided[0]
                    return {**result, "status": status, "inner": first.case,
                            "difference": getattr(first, "difference", ""),
                            "reason": getattr(first, "reason", "")}
                if value.certainty == "random":
                    result["evidence"] = value.evidence
                if value.n_held:
                    result["status"] = HELD
                lines += value.lines
            elif not isinstance(value, Definition | Setting):
                shown = text(value, context.settings.show)
                is_prose = isinstance(value, Text)
                lines.append(f"# {shown}".replace("\n", "\n# ") if is_prose else shown)
        if lines:
            result["lines"] = lines
        return result


def _refused(*arguments: Any) -> Any:
    node = arguments[-1]
    raise failure("wrong-kind", node.place, "files are read and written outside a `for`")


def _difference(value: Truth, context: Context) -> Result:
    found: Result = {}
    if value.difference is not None:
        found["difference"] = text(value.difference, context.settings.show)
    if value.evidence:
        found["evidence"] = value.evidence
    return found


def _fault(found: Failure) -> Result:
    diagnostic = found.diagnostic
    return {
        "status": UNDECIDED, "code": diagnostic.code, "reason": diagnostic.message,
        "hints": list(diagnostic.hints), "at": [diagnostic.span.start, diagnostic.span.end]}


# the line that meets one case alone


def reproduction(steps: Plan, case: Case) -> str:
    """A text of the language that meets this case alone."""
    node = steps.node
    if isinstance(node, syntax.For) and len(steps.body) == 1 \
            and isinstance(steps.body[0], syntax.Claim):
        filled = _filled(steps.body[0], case.bound)
        if filled is not None:
            line = print_tree(filled)
            parsed = parse(Source(line))
            if not parsed.diagnostics and parsed.sentences == (filled,):
                return line
    bindings = ", ".join(f"{name} in {_only(value)}" for name, value in case.bound.items())
    if isinstance(node, syntax.Tabulate):
        return f"tabulate {print_tree(node.expression)} for {bindings}"
    if isinstance(node, syntax.Find):
        condition = "" if node.condition is None else f" where {print_tree(node.condition)}"
        return f"find {bindings}{condition}"
    if len(steps.body) == 1 and not isinstance(steps.body[0], syntax.For):
        return f"for {bindings}: {print_tree(steps.body[0])}"
    body = "; ".join(_on_one_line(s) for s in steps.body)
    return f"for {bindings}: ; {body}; end"


def _on_one_line(sentence: syntax.Sentence) -> str:
    if isinstance(sentence, syntax.For) and sentence.is_block:
        head = print_tree(replace(sentence, body=())).split(":\n")[0]
        return f"{head}: ; {'; '.join(_on_one_line(s) for s in sentence.body)}; end"
    return print_tree(sentence)


def _only(value: Any) -> str:
    """A set whose one element is the value."""
    if isinstance(value, tuple) and len(value) == 1 and isinstance(value[0], int):
        return f"orbit({value[0]})"  # (3) in brackets is the number 3
    if value == ():
        return "subsets({})"
    if isinstance(value, int | tuple):
        return f"{{{text(value)}}}"
    return f"list({text(value)})"


class _Unfit(Exception):
    """A tree in which the value of a name cannot simply be written."""


def _filled(sentence: syntax.Claim, bound: dict[str, Any]) -> syntax.Sentence | None:
    """The sentence with bound names replaced by their values, when that says the same."""
    literals = {}
    for name, value in bound.items():
        literal = _literal(value)
        if literal is None:
            return None
        literals[name] = literal
    try:
        filled = _replaced(sentence, bound, literals)
    except _Unfit:
        return None
    assert isinstance(filled, syntax.Sentence)
    return filled


def _literal(value: Any) -> syntax.Expression | None:
    if isinstance(value, int):
        if value >= 0:
            return syntax.Number(str(value))
        negative = syntax.Sum((syntax.Term(-1, syntax.Number(str(-value))),))
        return syntax.Group(negative)
    if isinstance(value, tuple) and len(value) > 1:
        parts = []
        for part in value:
            inner = _literal(part)
            if not isinstance(part, int) or inner is None:
                return None
            parts.append(inner.inner if isinstance(inner, syntax.Group) else inner)
        return syntax.Tuple(tuple(parts))
    return None


def _replaced(
    node: syntax.Node, bound: dict[str, Any], literals: dict[str, syntax.Expression]
) -> syntax.Node:
    if isinstance(node, syntax.Name):
        return literals.get(node.name, node)
    if isinstance(node, syntax.Binding | syntax.BigOperator | syntax.Comprehension):
        bindings = [node] if isinstance(node, syntax.Binding) else node.bindings
        if any(b.name in literals for b in bindings):
            raise _Unfit  # an inner name of the same spelling
    if isinstance(node, syntax.Call) and node.function in literals:
        raise _Unfit
    if isinstance(node, syntax.Subscripted):
        return _subscripted(node, bound, literals)
    changes: dict[str, Any] = {}
    for name in syntax.field_names(type(node)):
        value = getattr(node, name)
        if isinstance(value, syntax.Node):
            changes[name] = _replaced(value, bound, literals)
        elif isinstance(value, tuple) and any(isinstance(v, syntax.Node) for v in value):
            changes[name] = tuple(_replaced(v, bound, literals) for v in value)
    return replace(node, **changes) if changes else node


def _subscripted(
    node: syntax.Subscripted, bound: dict[str, Any], literals: dict[str, syntax.Expression]
) -> syntax.Node:
    index = _replaced(node.index, bound, literals)
    assert isinstance(index, syntax.Expression)
    if isinstance(node.index, syntax.Name) and node.index.name in literals:
        value = bound[node.index.name]
        if isinstance(value, int) and not 0 <= value <= 9:
            raise _Unfit  # E_12 is E_(1,2)
    if node.head not in literals:
        return replace(node, index=index)
    own = bound[node.head]
    at = int(index.digits) if isinstance(index, syntax.Number) else 0
    if not (isinstance(own, tuple) and 1 <= at <= len(own)):
        raise _Unfit
    part = _literal(own[at - 1])
    assert part is not None
    return part


def check_size(n_cases: int, node: syntax.Node) -> None:
    """Refuse to keep more than the session's limit of values in memory."""
    if n_cases > SIZE_LIMIT:
        raise failure(
            "too-large", node.place, f"more than {SIZE_LIMIT:,} values cannot be kept here",
            'tabulate … to "table.csv"')
