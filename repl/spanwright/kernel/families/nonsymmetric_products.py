"""Symmetric times nonsymmetric: e_r E_mu and P_lambda E_mu in the E basis by closed steps.

e_r E_mu goes by the closed rule for x_j E_mu, prefixes of the sum e_r shared; e_r with r above
n/2 as x_1 ... x_n times e_(n-r) of the inverses; anything symmetric goes through e. Baratta,
Pieri-type formulas for nonsymmetric Macdonald polynomials (2009), has e_r E_mu in closed form.
"""

from __future__ import annotations

from functools import lru_cache

from spanwright.kernel import budget
from spanwright.kernel.families.base import Coefficients, Family, linear
from spanwright.kernel.families.diagrams import Partition
from spanwright.kernel.families.macdonald import FAMILIES, in_nonsymmetric
from spanwright.kernel.families.nonsymmetric_macdonald import (
    ONE,
    divide_by_generator,
    multiply_by_e1,
    multiply_by_generator,
    multiply_by_inverse_e1,
)
from spanwright.kernel.families.symmetric_base import SymmetricFamily, applied_in_e, sum_of
from spanwright.kernel.indices import Composition, trimmed

MACDONALD = FAMILIES["P"]


def elementary_times_E(r: int, mu: Composition) -> Coefficients:
    """e_r E_mu in the E basis; 0 for r < 0 or r > n."""
    return dict(_elementary_times_E(r, mu))


@lru_cache(maxsize=2_000)
def _elementary_times_E(r: int, mu: Composition) -> Coefficients:
    n = len(mu)
    if not 0 <= r <= n:
        return {}
    if 2 * r <= n:
        return _elementary(r, mu, 1)
    # e_r = x_1 ... x_n e_(n-r)(1/x), and x_1 ... x_n E_nu = E_(nu + (1, ..., 1))
    return {
        tuple(part + 1 for part in nu): c for nu, c in _elementary(n - r, mu, -1).items()}


def _elementary(r: int, mu: Composition, power: int) -> Coefficients:
    """e_r of the x_j, or of their inverses, times E_mu, r <= n/2.

    f(r, k) = e_r(x_k, ..., x_n) E_mu = f(r, k+1) + x_k f(r-1, k+1): n - r steps for each r.
    """
    n = len(mu)
    if r == 0:
        return {mu: ONE}
    if r == 1:
        return multiply_by_e1(mu) if power == 1 else multiply_by_inverse_e1(mu)
    step = multiply_by_generator if power == 1 else divide_by_generator
    # row[k] = f(s, k) for the s at hand
    row: dict[int, Coefficients] = {k: {mu: ONE} for k in range(1, n + 2)}
    for s in range(1, r + 1):
        following: dict[int, Coefficients] = {n + 2 - s: {}}
        # f(r, 1) needs no f(s, k) with k > n + 1 - s, and none with k < r - s + 1
        for k in range(n + 1 - s, r - s, -1):
            budget.current().check()
            moved = linear(row[k + 1], lambda nu, k=k: step(nu, k))  # type: ignore[misc]
            following[k] = sum_of(following[k + 1], moved)
        row = following
    return row[1]


def times_E(other: Family, index: Partition, mu: Composition) -> Coefficients | None:
    """An element of a symmetric family times E_mu in the E basis; None for other families."""
    if not isinstance(other, SymmetricFamily):
        return None
    return applied_in_e(other.in_e(trimmed(index), len(mu)), {mu: ONE}, elementary_times_E)


def into_E(other: Family, index: Partition, n: int) -> Coefficients | None:
    """An element of a symmetric family in the E basis, through P; None for other families."""
    in_P = MACDONALD.convert_from(other, trimmed(index), n)
    return None if in_P is None else linear(in_P, lambda nu: in_nonsymmetric(nu, n))
