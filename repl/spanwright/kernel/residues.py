"""Scalars at a point modulo a prime: for hashes, and for refuting claims before proving them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from flint import fmpz_mpoly

from spanwright.kernel.errors import Pole
from spanwright.kernel.factors import Factor
from spanwright.kernel.parameters import ParameterRing, monomials

if TYPE_CHECKING:
    from spanwright.kernel.coefficients import Scalar

WITNESS_PRIME = 2**61 - 1
"""The prime of hashes and of refutation at random points."""


class ModularPoint:
    """Values for the parameters modulo a prime, with the images of factors remembered."""

    __slots__ = ("prime", "_values", "_factors", "_default")

    def __init__(
        self, values: Mapping[str, int], prime: int = WITNESS_PRIME, default: Any = None
    ) -> None:
        self.prime = prime
        self._values = dict(values)
        self._factors: dict[Factor, int] = {}
        self._default = default

    def root(self, name: str) -> int:
        """The value of a parameter; for t, that of t^(1/2)."""
        if name not in self._values and self._default is not None:
            self._values[name] = self._default(name)
        return self._values[name]

    def parameter(self, name: str) -> int:
        """The value of a parameter."""
        value = self.root(name)
        return value * value % self.prime if name == "t" else value

    def _generators(self, ring: ParameterRing) -> list[int]:
        return [self.root(n) if ring.has_root else self.parameter(n)
                for n in reversed(ring.names)]

    def polynomial(self, ring: ParameterRing, polynomial: fmpz_mpoly) -> int:
        """The value of a polynomial."""
        prime = self.prime
        generators = self._generators(ring)
        tables = [
            _power_table(g, d, prime)
            for g, d in zip(generators, polynomial.degrees(), strict=True)]
        value = 0
        for exponents, c in zip(monomials(polynomial), polynomial.coeffs(), strict=True):
            term = int(c % prime)
            for table, e in zip(tables, exponents, strict=True):
                term = term * table[e] % prime
            value += term
        return value % prime

    def value(self, scalar: Scalar) -> int:
        """The value of a scalar; raises Pole when its denominator vanishes here."""
        prime = self.prime
        ring = scalar.ring
        bottom = int(scalar.content.q % prime)
        value = int(scalar.content.p % prime)
        for g, e in zip(self._generators(ring), scalar.monomial, strict=True):
            if e > 0:
                value = value * pow(g, e, prime) % prime
            elif e < 0:
                bottom = bottom * pow(g, -e, prime) % prime
        if not scalar.numerator_rest.is_one():
            value = value * self.polynomial(ring, scalar.numerator_rest) % prime
        for factor, e in scalar.factors.items():
            at = self._factors.get(factor)
            if at is None:
                at = self._factors[factor] = self.polynomial(ring, factor.polynomial)
            if e > 0:
                value = value * pow(at, e, prime) % prime
            else:
                bottom = bottom * pow(at, -e, prime) % prime
        if bottom == 0:
            raise Pole("the denominator vanishes at the chosen point")
        return value * pow(bottom, -1, prime) % prime


def _power_table(base: int, degree: int, prime: int) -> list[int]:
    table = [1]
    for _ in range(int(degree)):
        table.append(table[-1] * base % prime)
    return table


def _named_value(name: str) -> int:
    """A fixed pseudo-random value for a name: equal scalars of different rings hash alike."""
    value = 1469598103934665603
    for byte in name.encode():
        value = (value ^ byte) * 1099511628211 % 2**64
    return value % WITNESS_PRIME


hash_point = ModularPoint({}, default=_named_value)
"""Where scalars are evaluated for their hashes."""
