"""Permuted basements: E_(mu|w) = t^(-k) T_w E_mu, monic, in the E basis by the closed rules.

k counts the pairs i < j with w(i) > w(j) and mu_i <= mu_j. The fillings of Haglund, Haiman and
Loehr, A combinatorial formula for nonsymmetric Macdonald polynomials (2008), with basement w give
the same polynomials up to a power of t; P. Alexandersson, Non-symmetric Macdonald polynomials
and Demazure-Lusztig operators (2016).
"""

from __future__ import annotations

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.nonsymmetric_macdonald import FAMILIES, weight_scalar
from spanwright.kernel.indices import Composition, Permutation


def with_basement(mu: Composition, w: Permutation) -> Expansion:
    """E_(mu|w) as a sum of E_nu; w is a permutation of as many positions as mu has parts."""
    from spanwright.kernel.operators.actions import act
    from spanwright.kernel.operators.words import Operator

    n = len(mu)
    raised = act(Operator.letter(n, "T", w), Expansion.element(FAMILIES["E"], n, mu))
    assert isinstance(raised, Expansion)
    return raised.scaled(weight_scalar((0, -_inversions_kept(mu, w))))


def _inversions_kept(mu: Composition, w: Permutation) -> int:
    n = len(mu)
    return sum(
        1 for i in range(n) for j in range(i + 1, n) if w[i] > w[j] and mu[i] <= mu[j])
