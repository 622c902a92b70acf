"""The 0-Hecke algebra pi_w, and X^mu pi_w: it holds pi, and through X^±1 also d, s and T.

pi_i f = (s_i f) pi_i + X_i (d_i f), pi_i pi_i = pi_i (Demazure, Désingularisation des
variétés de Schubert généralisées, 1974; Norton, 0-Hecke algebras, 1979).
"""

from __future__ import annotations

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.operators.elements import (
    Element,
    Row,
    Rule,
    add_row,
    raised,
    total_element,
)
from spanwright.kernel.operators.nil_hecke import DividedAlgebra


class ZeroRule(Rule):
    """pi_i pi_w = pi_(s_i w), or pi_w when s_i w is shorter."""

    shift = (1, 0)

    def left(self, i: int, row: Row) -> Row:
        """pi_i times a row."""
        result: Row = {}
        for (w, nu), c in row.items():
            target, is_longer = raised(w, i)
            add_row(result, {(target if is_longer else w, nu): c})
        return result


class ZeroHeckeAlgebra(DividedAlgebra):
    """Left multiplication in the basis X^mu pi_w."""

    rule = ZeroRule()

    def times_d(self, i: int, element: Element) -> Element:
        """d_i = X_(i+1)^-1 (pi_i - 1)."""
        difference = total_element((
            self.reflected(i, element), element.scaled(Scalar.number(self.ring, -1))))
        return self.shifted(difference, self.generator(i + 1, -1))

    def times_pi(self, i: int, element: Element) -> Element:
        """pi_i * element."""
        return self.reflected(i, element)
