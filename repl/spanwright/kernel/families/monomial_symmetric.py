"""Monomial symmetric polynomials m_lambda: the sum of the orbit of x^lambda.

Macdonald, Symmetric Functions and Hall Polynomials (1995), I.2.
"""

from __future__ import annotations

from math import factorial

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.base import Coefficients, Family, Index
from spanwright.kernel.families.diagrams import Partition
from spanwright.kernel.families.symmetric_base import RING, ClassicalFamily
from spanwright.kernel.indices import decreasing, orbit, padded, trimmed


def orbit_size(partition: Partition, n: int) -> int:
    """The number of distinct rearrangements in n places."""
    mu = padded(partition, n)
    size = factorial(n)
    for part in set(mu):
        size //= factorial(mu.count(part))
    return size


def multiply(left: Partition, right: Partition, n: int) -> dict[Partition, int]:
    """m_left m_right in m: left is added to every rearrangement of right, and counted."""
    if max(len(left), len(right)) > n:
        return {}
    if orbit_size(right, n) > orbit_size(left, n):
        left, right = right, left
    start = padded(left, n)
    counts: dict[Partition, int] = {}
    for alpha in orbit(padded(right, n)):
        budget.current().check()
        target = trimmed(decreasing(tuple(map(int.__add__, start, alpha))))
        counts[target] = counts.get(target, 0) + 1
    own = orbit_size(left, n)
    return {target: count * own // orbit_size(target, n) for target, count in counts.items()}


class MonomialSymmetric(ClassicalFamily):
    """m_lambda."""

    name = "m"

    def of_monomial_symmetric(self, terms: Coefficients, n: int) -> Coefficients:
        """As it stands."""
        return {mu: c for mu, c in terms.items() if len(mu) <= n and not c.is_zero}

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """m_lambda m_mu, by counting sums of rearrangements."""
        if other is not self:
            return None
        return {
            target: Scalar.number(RING, c)
            for target, c in multiply(trimmed(index), trimmed(other_index), n).items()}


FAMILIES = {"m": MonomialSymmetric()}
