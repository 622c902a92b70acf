"""`derive`: the rule that gives an expansion, row by row, vanishing rows with their reason."""

from __future__ import annotations

from typing import Any

from spanwright_grammar import syntax

from spanwright.context import failure
from spanwright.evaluator import Evaluator
from spanwright.kernel.errors import KernelError
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families import nonsymmetric_macdonald as macdonald
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.text import text
from spanwright.values import Table, is_operator

MONK_REFERENCE = (
    "W. Baratta, Pieri-type formulas for nonsymmetric Macdonald polynomials (2009); "
    "T. Halverson, A. Ram, Monk rules for type GL_n Macdonald polynomials (2022)")


def derive(node: syntax.Derive, evaluator: Evaluator) -> Table:
    """The derivation of a product or of an operator's canonical form as a table."""
    expression = node.expression
    while isinstance(expression, syntax.Group):
        expression = expression.inner
    if node.targets:
        value = evaluator.value(expression)
        if is_operator(value):
            return _operator_steps(value, node, evaluator)
    if not isinstance(expression, syntax.Product) or any(
        f.operator == "/" for f in expression.factors
    ):
        value = evaluator.value(expression)
        if is_operator(value):
            return _operator_steps(value, node, evaluator)
        raise _no_rule(node)
    *left_factors, last = expression.factors
    right = evaluator.value(last.node)
    left: Any = None
    for factor in reversed(left_factors):
        value = evaluator.value(factor.node)
        left = value if left is None else evaluator.algebra.multiply(value, left)
    if is_operator(left) and is_operator(right):
        return _operator_steps(evaluator.value(expression), node, evaluator)
    if isinstance(right, Expansion) and len(right) == 1:
        ((index, c),) = right.terms.items()
        if c == 1:
            found = _product_table(left, right, index)
            if found is not None:
                return found
    raise _no_rule(node)


def _no_rule(node: syntax.Derive) -> Exception:
    return failure(
        "not-available-yet", node.expression.place,
        "no closed rule is known here for this product: derive takes a generator times a basis "
        "element, or an operator word", "derive x_2 E_(1,0,2)")


def _product_table(left: Any, right: Expansion, index: tuple[int, ...]) -> Table | None:
    if right.family.name == "E" and isinstance(left, LaurentPolynomial) and len(left) == 1:
        ((exponents, _),) = left.terms.items()
        if left.coefficient(exponents) == 1 and sum(map(abs, exponents)) == 1:
            j = next(k for k, e in enumerate(exponents, 1) if e)
            return _monk_table(index, j, exponents[j - 1])
    return None


def _monk_table(mu: tuple[int, ...], j: int, power: int) -> Table:
    """One row for each subset of positions through j, in the order of size."""
    n = len(mu)
    if power == 1:
        rows = macdonald.monk_rows(mu, j)
    else:
        rows = macdonald.monk_rows(macdonald.inverted(mu), n + 1 - j)
    lines = []
    for row in rows:
        target, subset = row.target, row.subset
        if power == -1:
            target = macdonald.inverted(target)
            subset = tuple(n + 1 - a for a in reversed(subset))
        shown_subset = "{" + ",".join(map(str, subset)) + "}"
        if row.obstacle is not None:
            a, i = row.obstacle
            if power == -1:
                a, i = n + 1 - a, n + 1 - i
            lines.append((
                shown_subset, _element(target), "0",
                f"vanishes: the part carried from {a} meets its equal at {i}"))
            continue
        factors = " · ".join(_factor_text(text(value)) for _, value in row.factors)
        lines.append((shown_subset, _element(target), text(row.coefficient), factors))
    sign = "" if power == 1 else "^-1"
    return Table(
        ("subset", "target", "coefficient", "factors"), tuple(lines),
        f"x_{j}{sign} E_({','.join(map(str, mu))}): one row for each subset of positions "
        f"through {j}",
        (f"rule: {MONK_REFERENCE}",))


def _factor_text(shown: str) -> str:
    return f"({shown})" if " + " in shown or " - " in shown and shown[0] != "(" else shown


def _element(index: tuple[int, ...]) -> str:
    return f"E_({','.join(map(str, index))})"


def _operator_steps(value: Any, node: syntax.Derive, evaluator: Evaluator) -> Table:
    from spanwright.kernel.operators.derivation import derive as derive_steps
    from spanwright.rendering.operators import operator_text

    try:
        steps = derive_steps(value, node.targets or None)
    except KernelError as error:
        raise evaluator.placed(error, node.expression) from error
    rows = tuple(
        (step.relation, operator_text(step.before), operator_text(step.after)) for step in steps)
    return Table(("relation", "before", "after"), rows, "straightening, step by step")
