"""Which sentences cannot be slow, by their tree alone: those need no checkpoint.

A sum of products of a few small basis elements, generators and operator letters, in at most four
variables. The bounds keep the work below some tens of milliseconds, which is what a request to
stop may have to wait; whatever is not known to be small counts as slow.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from spanwright.context import Context
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.registry import NAMES as FAMILY_NAMES
from spanwright_grammar import syntax

MOST_VARIABLES = 4
MOST_NODES = 60
MOST_WEIGHT = 5
"""Degrees of basis elements, powers of generators and operator letters of one sentence, added."""
MOST_DIGITS = 9
LARGEST_POWER = 6
MOST_TERMS = 20

# sentences that look names up and nothing else
_LOOKUPS = (
    syntax.LetFunction, syntax.LetFamily, syntax.LetParameters, syntax.Remark, syntax.Help,
    syntax.Quit, syntax.Fix,
)
_COMPUTING = (
    syntax.ExpressionSentence, syntax.LetValue, syntax.Claim, syntax.Expand, syntax.Derive,
)
_PLAIN = (
    syntax.Number, syntax.Name, syntax.Group, syntax.Tuple, syntax.Sum, syntax.Term,
    syntax.Product, syntax.Factor, syntax.Power, syntax.Subscripted, syntax.Comparison,
    syntax.Coefficient, syntax.Size, syntax.ExpressionSentence, syntax.LetValue, syntax.Claim,
    syntax.Expand, syntax.Derive,
)
_LETTERS = ("x", "X", "Y", "T", "d", "pi", "tau", "s", "eps", "y")


def is_quick(sentence: syntax.Sentence, context: Context) -> bool:
    """Whether carrying the sentence out is sure to be a matter of milliseconds."""
    if isinstance(sentence, _LOOKUPS):
        return not isinstance(sentence, syntax.Fix) or isinstance(
            sentence.value, syntax.Number | syntax.Name)
    if not isinstance(sentence, _COMPUTING):
        return False
    n = context.settings.n
    if n is not None and n > MOST_VARIABLES:
        return False
    weight = 0
    for count, node in enumerate(syntax.walk(sentence)):
        own = _weight(node, context)
        if own is None or count >= MOST_NODES:
            return False
        weight += own
        if weight > MOST_WEIGHT:
            return False
    return True


def _weight(node: syntax.Node, context: Context) -> int | None:
    """What one node adds to the weight; None when nothing bounds it."""
    if not isinstance(node, _PLAIN):
        return None
    if isinstance(node, syntax.Number):
        return 0 if len(node.digits) <= MOST_DIGITS else None
    if isinstance(node, syntax.Name):
        return _of_value(context.names.get(node.name))
    if isinstance(node, syntax.Power):
        return _of_power(node)
    if isinstance(node, syntax.Subscripted):
        return _of_subscripted(node, context)
    return 0


def _of_value(value: Any) -> int | None:
    """A name's value: small numbers and indices only; a name without one is a parameter."""
    if value is None:
        return 0
    if isinstance(value, int | Fraction):
        return 0 if abs(value) < 10**MOST_DIGITS else None
    if isinstance(value, tuple):
        return 0 if all(isinstance(part, int) and abs(part) < 100 for part in value) else None
    if isinstance(value, Scalar):
        return 0 if len(value.numerator_rest) <= MOST_TERMS and len(value.factors) <= 6 else None
    return None


def _of_power(node: syntax.Power) -> int | None:
    exponent: Any = node.exponent
    if isinstance(exponent, syntax.Group):
        exponent = exponent.inner
    if isinstance(exponent, syntax.Sum) and len(exponent.terms) == 1:
        exponent = exponent.terms[0].node
    if not isinstance(exponent, syntax.Number) or len(exponent.digits) > 1:
        return None
    power = int(exponent.digits)
    if power > LARGEST_POWER:
        return None
    # a power of a parameter costs nothing; all else may be a sum or a generator
    return 0 if isinstance(node.base, syntax.Name) and node.base.name in ("q", "t") else power


def _of_subscripted(node: syntax.Subscripted, context: Context) -> int | None:
    if node.head in context.names:
        return 0 if isinstance(context.names[node.head], tuple) else None
    parts = _parts(node.index, context)
    if parts is None:
        return None
    if node.head in _LETTERS and len(parts) == 1:
        return 1
    if node.head in FAMILY_NAMES and len(parts) <= MOST_VARIABLES:
        return max(1, sum(map(abs, parts)))
    return None


def _parts(node: syntax.Node, context: Context) -> list[int] | None:
    """The integers of a subscript that can be read off, or that a name holds."""
    if isinstance(node, syntax.Number):
        return [int(digit) for digit in node.digits] if len(node.digits) <= 4 else None
    if isinstance(node, syntax.Name):
        value = context.names.get(node.name)
        if isinstance(value, int):
            return [value]
        if isinstance(value, tuple) and all(isinstance(part, int) for part in value):
            return list(value)
        return [1] if node.name == "pi" else None
    if isinstance(node, syntax.Group):
        return _parts(node.inner, context)
    if isinstance(node, syntax.Tuple):
        found = []
        for item in node.items:
            if isinstance(item, syntax.Sum) and len(item.terms) == 1:
                item = item.terms[0].node
            if not isinstance(item, syntax.Number) or len(item.digits) > 2:
                return None
            found.append(int(item.digits))
        return found
    return None
