"""The nilHecke algebra X^mu d_w: it holds d, and through X also pi, s and T.

d_i f = (s_i f) d_i + (d_i f), d_i d_i = 0 (Bernstein, Gelfand and Gelfand, Schubert cells
and cohomology of the spaces G/P, 1973; Kostant and Kumar, The nil Hecke ring and cohomology of
G/P, 1986).
"""

from __future__ import annotations

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.operators.elements import (
    Algebra,
    Element,
    Row,
    Rule,
    add_row,
    raised,
    t_power,
    total_element,
)
from spanwright.kernel.operators.hecke import power_of_t
from spanwright.kernel.operators.words import Letter
from spanwright.kernel.parameters import ParameterRing


class NilRule(Rule):
    """d_i d_w = d_(s_i w), or 0 when s_i w is shorter."""

    shift = (0, 0)

    def left(self, i: int, row: Row) -> Row:
        """d_i times a row."""
        result: Row = {}
        for (w, nu), c in row.items():
            target, is_longer = raised(w, i)
            if is_longer:
                add_row(result, {(target, nu): c})
        return result


class DividedAlgebra(Algebra):
    """What the algebras of d and of pi share: every letter is a combination of X and d_i."""

    kinds = frozenset({"X", "d", "pi", "s", "T", "symmetrizer", "antisymmetrizer"})
    rule: Rule

    def __init__(self, ring: ParameterRing, n: int) -> None:
        super().__init__(ring, n)
        self._minus = Scalar.number(ring, -1)

    def generator(self, i: int, k: int) -> tuple[int, ...]:
        """The exponents of X_i^k."""
        return tuple(k * int(j == i) for j in range(1, self.n + 1))

    def reflected(self, i: int, element: Element) -> Element:
        """The algebra's own D_i times an element."""
        return Element(self.ring, self.rule.applied(i, element.rows), element.scale)

    def times_d(self, i: int, element: Element) -> Element:
        """d_i * element."""
        return self.reflected(i, element)

    def times_pi(self, i: int, element: Element) -> Element:
        """pi_i = d_i X_i."""
        return self.times_d(i, self.shifted(element, self.generator(i, 1)))

    def times_s(self, i: int, element: Element) -> Element:
        """s_i = 1 - (X_i - X_(i+1)) d_i."""
        divided = self.times_d(i, element)
        return total_element((
            element,
            self.shifted(divided, self.generator(i, 1)).scaled(self._minus),
            self.shifted(divided, self.generator(i + 1, 1))))

    def times_t(self, i: int, element: Element) -> Element:
        """T_i = t - (t X_i - X_(i+1)) d_i."""
        divided = self.times_d(i, element)
        t = t_power(self.ring, 1)
        return total_element((
            element.scaled(t),
            self.shifted(divided, self.generator(i, 1)).scaled(-t),
            self.shifted(divided, self.generator(i + 1, 1))))

    def _power_of_t(self, i: int, k: int, element: Element) -> Element:
        a, b, e = power_of_t(self.ring, k)
        scale = t_power(self.ring, e)
        return total_element((
            self.times_t(i, element).scaled(Scalar.of_polynomial(self.ring, a) * scale),
            element.scaled(Scalar.of_polynomial(self.ring, b) * scale)))

    def multiply(self, letter: Letter, element: Element) -> Element:
        """letter * element."""
        kind = letter.kind
        if kind == "X":
            return self.shifted(element, letter.subscript)
        if kind == "T":
            return self.by_reduced_word(letter, element, self._power_of_t)
        if kind in ("symmetrizer", "antisymmetrizer"):
            factor = Scalar.one(self.ring) if kind == "symmetrizer" else -t_power(self.ring, -1)
            for _ in range(letter.power):
                element = self.symmetrized(
                    element, lambda i, e: self.times_t(i, e).scaled(factor))
            return element
        step = {"d": self.times_d, "pi": self.times_pi, "s": self.times_s}[kind]
        return self.by_steps(letter, element, step)


class NilHeckeAlgebra(DividedAlgebra):
    """Left multiplication in the basis X^mu d_w."""

    rule = NilRule()
