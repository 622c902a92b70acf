"""The operations of the language over a finite field: a first, cheap answer to a claim.

Everything becomes a polynomial in x with residues as coefficients. What has no counterpart here
raises Unsupported, and the exact algebra decides alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import floor, log10
from random import Random
from typing import Any

from spanwright.algebra import ExactAlgebra, Surroundings, Unsupported
from spanwright.kernel.errors import DivisionByZero
from spanwright.kernel.families.base import Family
from spanwright.kernel.operators.words import Operator
from spanwright.kernel.witness import PRIME, ModularPolynomial, RandomPoint, height
from spanwright.modular_action import (
    ModularOperator,
    modular_operator,
    multiplication,
    random_function,
)
from spanwright.values import Truth, as_scalar, is_index, is_number, is_operator

LARGEST_POWER = 1000


@dataclass(frozen=True, slots=True)
class Residue:
    """A scalar modulo the prime; `height` bounds the degrees of what it is the image of."""

    value: int
    height: int = 0


def _is_any_operator(value: Any) -> bool:
    return isinstance(value, ModularOperator) or is_operator(value)


@lru_cache(maxsize=4)
def random_point(seed: int) -> RandomPoint:
    """The point of a seed: the same in every process, whatever was asked before."""
    return RandomPoint(lambda name: Random(f"{seed} {name}").randrange(2, PRIME - 1))


class ModularAlgebra(ExactAlgebra):
    """Arithmetic of values at one random point modulo a prime."""

    def __init__(self, context: Surroundings) -> None:
        super().__init__(context)
        self.point = random_point(context.settings.seed)
        if self._settings.images():
            raise Unsupported("parameters are fixed")

    # constants and elements

    def parameter(self, name: str) -> Any:
        """A parameter's residue."""
        return Residue(self.point.parameter(name), 2)

    def root_of_t(self) -> Any:
        """The residue of t^(1/2)."""
        return Residue(self.point.root_of_t(), 1)

    def generator(self, n: int, j: int) -> Any:
        """x_j."""
        return ModularPolynomial.of_terms(
            n, {tuple(int(k == j) for k in range(1, n + 1)): 1})

    def monomial(self, n: int, exponents: tuple[int, ...]) -> Any:
        """x^exponents."""
        return ModularPolynomial.of_terms(n, {exponents: 1})

    def element(self, target: Family, index: tuple[int, ...], n: int) -> Any:
        """A basis element, as a polynomial."""
        if target.grows:
            raise Unsupported("a family that grows")
        return self.point.element(target, target.check_index(index, n), n)

    def held(self, value: Any) -> Any:
        """An exact value, reduced modulo the prime."""
        return self._reduced(value)

    def operator(self, kind: str, subscript: int | tuple[int, ...] | None, n: int) -> Any:
        """Operators act here only when they stand in the exact algebra too."""
        return super().operator(kind, subscript, n)

    # arithmetic

    def _reduced(self, value: Any) -> Residue | ModularPolynomial:
        """A value of either algebra as one of this algebra."""
        if isinstance(value, Residue | ModularPolynomial):
            return value
        scalar = as_scalar(value)
        if scalar is not None:
            return Residue(self.point.scalar(scalar), height(scalar))
        element = self._element(value)
        n = self._n()
        if getattr(element, "n", n) != n:
            raise Unsupported("another ring")
        from spanwright.kernel.reduction import to_polynomial

        return self.point.polynomial(to_polynomial(element, n))

    def negate(self, value: Any) -> Any:
        """-value."""
        if isinstance(value, ModularOperator):
            return multiplication(value.n, -1, 0) * value
        if isinstance(value, Residue):
            return Residue(-value.value % PRIME, value.height)
        if isinstance(value, ModularPolynomial):
            return -value
        return super().negate(value)

    def add(self, values: Sequence[Any]) -> Any:
        """The sum."""
        if not any(isinstance(v, Residue | ModularPolynomial | ModularOperator) for v in values):
            return super().add(values)
        if any(isinstance(v, tuple) for v in values):
            raise Unsupported("a mixed sum")
        if any(_is_any_operator(v) for v in values):
            first, *others = self._operators(values)
            for operator in others:
                first = first + operator
            return first
        reduced = [self._reduced(v) for v in values]
        if all(isinstance(v, Residue) for v in reduced):
            residues = [v for v in reduced if isinstance(v, Residue)]
            return Residue(
                sum(v.value for v in residues) % PRIME, sum(v.height for v in residues))
        return ModularPolynomial.total(self._lifted(v) for v in reduced)

    def _lifted(self, value: Residue | ModularPolynomial) -> ModularPolynomial:
        if isinstance(value, ModularPolynomial):
            return value
        return ModularPolynomial.of_terms(
            self._n(), {(0,) * self._n(): value.value}, value.height)

    def multiply(self, a: Any, b: Any) -> Any:
        """The product; operators act letter by letter."""
        if _is_any_operator(a) and isinstance(b, ModularPolynomial):
            return self._operators([a])[0].apply(b)
        if is_operator(a) and is_operator(b):
            return super().multiply(a, b)
        if _is_any_operator(a) or _is_any_operator(b):
            first, second = self._operators([a, b])
            return first * second
        if not any(isinstance(v, Residue | ModularPolynomial) for v in (a, b)):
            return super().multiply(a, b)
        if is_index(a):
            raise Unsupported("a permutation of variables")
        left, right = self._reduced(a), self._reduced(b)
        if isinstance(left, Residue) and isinstance(right, Residue):
            return Residue(left.value * right.value % PRIME, left.height + right.height)
        if isinstance(left, Residue):
            return self._lifted(right).scaled(left.value, left.height)
        if isinstance(right, Residue):
            return left.scaled(right.value, right.height)
        return left * right

    def _operators(self, values: Sequence[Any]) -> list[ModularOperator]:
        """Operators and scalars as operators over the finite field."""
        n = next(v.n for v in values if _is_any_operator(v))
        found = []
        for value in values:
            if isinstance(value, ModularOperator):
                found.append(value)
            elif isinstance(value, Operator) or hasattr(value, "to_operator"):
                found.append(modular_operator(value, self.point))
            else:
                scalar = self._reduced(value)
                if not isinstance(scalar, Residue):
                    raise Unsupported("an operator and a polynomial")
                found.append(multiplication(n, scalar.value, scalar.height))
        return found

    def inverse(self, value: Any) -> Any:
        """1/value."""
        if isinstance(value, ModularOperator):
            raise Unsupported("the inverse of a sum")
        if isinstance(value, Residue):
            if value.value == 0:
                raise DivisionByZero("division by zero")
            return Residue(pow(value.value, -1, PRIME), value.height)
        if isinstance(value, ModularPolynomial):
            return value.power(-1)
        return super().inverse(value)

    def power(self, base: Any, exponent: int) -> Any:
        """An integer power."""
        if isinstance(base, ModularOperator):
            if not 1 <= exponent <= LARGEST_POWER:
                raise Unsupported("such a power of a sum")
            return base.power(exponent)
        if isinstance(base, Residue):
            if base.value == 0 and exponent < 0:
                raise DivisionByZero("division by zero")
            return Residue(pow(base.value, exponent, PRIME), base.height * abs(exponent))
        if isinstance(base, ModularPolynomial):
            if abs(exponent) > LARGEST_POWER:
                raise Unsupported("a large power")
            return base.power(exponent)
        return super().power(base, exponent)

    def equal(self, a: Any, b: Any) -> Truth:
        """Whether two values agree at the point."""
        if _is_any_operator(a) or _is_any_operator(b):
            return self._equal_operators(a, b)
        if not any(isinstance(v, Residue | ModularPolynomial) for v in (a, b)):
            if is_number(a) and is_number(b):
                return Truth(Fraction(a) == b)
            return super().equal(a, b)
        left, right = self._reduced(a), self._reduced(b)
        if isinstance(left, Residue) and isinstance(right, Residue):
            holds = left.value == right.value
        else:
            holds = self._lifted(left) == self._lifted(right)
        return self._truth(holds, left.height + right.height)

    def _equal_operators(self, a: Any, b: Any) -> Truth:
        """Whether two operators agree on a random function at a random point."""
        left, right = (o.apply(random_function(o.n)) for o in self._operators([a, b]))
        x = self.point.variables(left.n)
        return self._truth(left.at(x) == right.at(x), left.height + right.height)

    def _truth(self, holds: bool, degree: int) -> Truth:
        if not holds:
            return Truth(False, None, f"refuted at {self.point.described()}", "random")
        # d/(p - 3), p - 3 values to draw from, rounded up to a power of ten
        digits = floor(log10(PRIME - 3) - log10(max(degree, 1)))
        return Truth(
            True, None,
            f"equal at a random point modulo 2^61 - 1, error below 10^-{digits}", "random")

    def coefficient(self, target: Family, index: tuple[int, ...], value: Any) -> Any:
        """Not here."""
        raise Unsupported("a coefficient")

    def monomial_coefficient(self, element: Any, value: Any) -> Any:
        """Not here."""
        raise Unsupported("a coefficient")

    def specialise(
        self, value: Any, parameters: dict[str, Any], variables: dict[int, Any]
    ) -> Any:
        """Not here."""
        raise Unsupported("a specialisation")

    def limit(self, value: Any, name: str, target: Any) -> Any:
        """Not here."""
        raise Unsupported("a limit")
