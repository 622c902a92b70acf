"""Decides a claimed statement: first at a random point modulo a prime, then exactly."""

from __future__ import annotations

from typing import Any

from spanwright.algebra import Unsupported
from spanwright.context import Context, Failure
from spanwright.evaluator import Evaluator
from spanwright.kernel.errors import KernelError
from spanwright.values import Truth
from spanwright.witness import ModularAlgebra
from spanwright_grammar import syntax


def decide(statement: syntax.Expression, context: Context) -> Truth:
    """The truth of a statement; raises Failure when it is no statement or has no value."""
    if not (isinstance(statement, syntax.Comparison) and statement.operator == "="):
        return Evaluator(context).truth(statement)
    first = at_random_point(statement, context)
    if context.settings.certainty == "random" and first is not None:
        return first
    try:
        found = Evaluator(context).truth(statement)
    except Failure as stopped:
        # what is refuted modulo a prime is false, whether or not the difference can be had
        is_limit = stopped.diagnostic.code in ("over-budget", "too-large")
        if is_limit and first is not None and not first.holds:
            return first
        raise
    if first is not None and not first.holds and not found.holds:
        return Truth(False, found.difference, first.evidence)
    return found


def at_random_point(statement: syntax.Comparison, context: Context) -> Truth | None:
    """The truth at one seeded random point modulo a 61-bit prime; None when it has none there."""
    try:
        return _AtRandomPoint(context, ModularAlgebra(context)).truth(statement)
    except (Unsupported, KernelError, Failure):
        # the exact route gives the answer, or the message
        return None


EXACT_CALLS = frozenset({"eigenvalue", "norm", "principal", "hooks"})
"""Functions with a closed formula: their values are had exactly, then reduced."""


class _AtRandomPoint(Evaluator):
    """Evaluates over the finite field, but for functions that look at how a value is written."""

    def value(self, node: syntax.Node) -> Any:
        """The value of an expression."""
        if isinstance(node, syntax.Call) and node.function in EXACT_CALLS \
                and self.lookup(node.function) is None:
            exact = Evaluator(self.context)
            exact._local = self._local
            return self.algebra.held(exact.value(node))
        return super().value(node)
