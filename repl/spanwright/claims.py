"""Decides a claimed statement: first at a random point modulo a prime, then exactly."""

from __future__ import annotations

import random

from spanwright_grammar import syntax

from spanwright.context import Context, Failure
from spanwright.evaluator import Evaluator
from spanwright.kernel.errors import KernelError
from spanwright.values import Truth
from spanwright.witness import ModularAlgebra, Unsupported


def decide(statement: syntax.Expression, context: Context) -> Truth:
    """The truth of a statement; raises Failure when it is no statement or has no value."""
    if not (isinstance(statement, syntax.Comparison) and statement.operator == "="):
        return Evaluator(context).truth(statement)
    first = at_random_point(statement, context)
    if context.settings.certainty == "random" and first is not None:
        return first
    found = Evaluator(context).truth(statement)
    if first is not None and not first.holds and not found.holds:
        return Truth(False, found.difference, first.evidence)
    return found


def at_random_point(statement: syntax.Comparison, context: Context) -> Truth | None:
    """The truth at one seeded random point modulo a 61-bit prime; None when it has none there."""
    algebra = ModularAlgebra(context, random.Random(context.settings.seed))
    evaluator = Evaluator(context, algebra)
    try:
        return evaluator.truth(statement)
    except (Unsupported, KernelError, Failure):
        # the exact route gives the answer, or the message
        return None
