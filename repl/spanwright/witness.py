"""The operations of the language over a finite field: a first, cheap answer to a claim.

Everything becomes a polynomial in x with residues as coefficients. What has no counterpart here
raises Unsupported, and the exact algebra decides alone.
"""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from spanwright.algebra import ExactAlgebra, Surroundings, Unsupported
from spanwright.kernel.errors import DivisionByZero
from spanwright.kernel.families.base import Family
from spanwright.kernel.witness import PRIME, ModularPolynomial, RandomPoint
from spanwright.values import Truth, as_scalar, is_index, is_number, is_operator


@dataclass(frozen=True, slots=True)
class Residue:
    """A scalar modulo the prime."""

    value: int


class ModularAlgebra(ExactAlgebra):
    """Arithmetic of values at one random point modulo a prime."""

    def __init__(self, context: Surroundings, source: random.Random) -> None:
        super().__init__(context)
        self.point = RandomPoint(source)
        if self._settings.images():
            raise Unsupported("parameters are fixed")

    # constants and elements

    def parameter(self, name: str) -> Any:
        """A parameter's residue."""
        return Residue(self.point.parameter(name))

    def root_of_t(self) -> Any:
        """The residue of t^(1/2)."""
        return Residue(self.point.root_of_t())

    def generator(self, n: int, j: int) -> Any:
        """x_j."""
        return ModularPolynomial(n, {tuple(int(k == j) for k in range(1, n + 1)): 1})

    def monomial(self, n: int, exponents: tuple[int, ...]) -> Any:
        """x^exponents."""
        return ModularPolynomial(n, {exponents: 1})

    def element(self, target: Family, index: tuple[int, ...], n: int) -> Any:
        """A basis element, as a polynomial."""
        if target.grows:
            raise Unsupported("a family that grows")
        return self.point.element(target, target.check_index(index, n), n)

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
            return Residue(self.point.scalar(scalar))
        element = self._element(value)
        n = self._n()
        if getattr(element, "n", n) != n:
            raise Unsupported("another ring")
        from spanwright.kernel.reduction import to_polynomial

        return self.point.polynomial(to_polynomial(element, n))

    def negate(self, value: Any) -> Any:
        """-value."""
        if isinstance(value, Residue):
            return Residue(-value.value % PRIME)
        if isinstance(value, ModularPolynomial):
            return -value
        return super().negate(value)

    def add(self, values: Sequence[Any]) -> Any:
        """The sum."""
        if not any(isinstance(v, Residue | ModularPolynomial) for v in values):
            return super().add(values)
        if any(is_operator(v) or isinstance(v, tuple) for v in values):
            raise Unsupported("a mixed sum")
        reduced = [self._reduced(v) for v in values]
        if all(isinstance(v, Residue) for v in reduced):
            return Residue(sum(v.value for v in reduced if isinstance(v, Residue)) % PRIME)
        return ModularPolynomial.total(self._lifted(v) for v in reduced)

    def _lifted(self, value: Residue | ModularPolynomial) -> ModularPolynomial:
        if isinstance(value, ModularPolynomial):
            return value
        return ModularPolynomial(self._n(), {(0,) * self._n(): value.value})

    def multiply(self, a: Any, b: Any) -> Any:
        """The product; operators act letter by letter."""
        if is_operator(a) and isinstance(b, ModularPolynomial):
            from spanwright.modular_action import act

            return act(a, b, self.point)
        if is_operator(a) or is_operator(b):
            raise Unsupported("operator words are decided by their canonical form")
        if not any(isinstance(v, Residue | ModularPolynomial) for v in (a, b)):
            return super().multiply(a, b)
        if is_index(a):
            raise Unsupported("a permutation of variables")
        left, right = self._reduced(a), self._reduced(b)
        if isinstance(left, Residue) and isinstance(right, Residue):
            return Residue(left.value * right.value % PRIME)
        if isinstance(left, Residue):
            return self._lifted(right).scaled(left.value)
        if isinstance(right, Residue):
            return left.scaled(right.value)
        return left * right

    def inverse(self, value: Any) -> Any:
        """1/value."""
        if isinstance(value, Residue):
            if value.value == 0:
                raise DivisionByZero("division by zero")
            return Residue(pow(value.value, -1, PRIME))
        if isinstance(value, ModularPolynomial):
            return value.power(-1)
        return super().inverse(value)

    def power(self, base: Any, exponent: int) -> Any:
        """An integer power."""
        if isinstance(base, Residue):
            if base.value == 0 and exponent < 0:
                raise DivisionByZero("division by zero")
            return Residue(pow(base.value, exponent, PRIME))
        if isinstance(base, ModularPolynomial):
            if abs(exponent) > 1000:
                raise Unsupported("a large power")
            return base.power(exponent)
        return super().power(base, exponent)

    def equal(self, a: Any, b: Any) -> Truth:
        """Whether two values agree at the point."""
        if is_operator(a) or is_operator(b):
            raise Unsupported("operator words are decided by their canonical form")
        if not any(isinstance(v, Residue | ModularPolynomial) for v in (a, b)):
            if is_number(a) and is_number(b):
                return Truth(Fraction(a) == b)
            return super().equal(a, b)
        left, right = self._reduced(a), self._reduced(b)
        if isinstance(left, Residue) and isinstance(right, Residue):
            holds = left == right
        else:
            holds = self._lifted(left) == self._lifted(right)
        if holds:
            return Truth(True, None, "equal at a random point modulo 2^61 - 1, error below 10^-12",
                         "random")
        return Truth(False, None, f"refuted at {self.point.described()}", "random")

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
