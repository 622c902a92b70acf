"""The multispecies exclusion process on a ring: its stationary weights are E-polynomials at q = 1.

Cantini, de Gier and Wheeler, Matrix product formula for Macdonald polynomials (2015); Corteel,
Mandelshtam and Williams, From multiline queues to Macdonald polynomials via the exclusion process
(2022); rates from memory. The generator's null vector is numpy's.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb

import numpy
import pytest

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.macdonald import applied_t
from spanwright.kernel.families.nonsymmetric_macdonald import to_monomials
from spanwright.kernel.indices import conjugate, orbit, swapped, trimmed
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
ONE, T = Scalar.one(RING), Scalar.parameter(RING, "t")
SHAPES = [(1, 0), (1, 0, 0), (2, 1, 0), (2, 1, 1), (2, 0, 0), (3, 1, 0), (1, 1, 0, 0),
          (2, 1, 1, 0), (2, 2, 1, 0), (3, 2, 1, 0)]


def orbit_polynomials(lam: tuple[int, ...]) -> dict[tuple[int, ...], LaurentPolynomial]:
    """f_mu for mu in the orbit: f_lam = E_lam, f_(s_i mu) = T_i f_mu where mu_i > mu_(i+1)."""
    found = {lam: to_monomials(lam)}
    waiting = [lam]
    while waiting:
        mu = waiting.pop()
        for i in range(1, len(mu)):
            nu = swapped(mu, i)
            if mu[i - 1] > mu[i] and nu not in found:
                found[nu] = applied_t(found[mu], i)
                waiting.append(nu)
    return found


def weights(lam: tuple[int, ...]) -> dict[tuple[int, ...], Scalar]:
    """f_mu(1, ..., 1) at q = 1."""
    found = {}
    for mu, f in orbit_polynomials(lam).items():
        value = f.substitute_parameters({"q": ONE}).evaluate(
            dict.fromkeys(range(1, len(mu) + 1), ONE)).as_scalar()
        assert value is not None
        found[mu] = value
    return found


def generator(states: list[tuple[int, ...]], t: float) -> numpy.ndarray:
    """Column mu: a pair (a, b) at neighbouring sites exchanges at rate t if a > b, 1 if a < b."""
    place = {mu: k for k, mu in enumerate(states)}
    matrix = numpy.zeros((len(states), len(states)))
    for mu, k in place.items():
        n = len(mu)
        for i in range(n):
            a, b = mu[i], mu[(i + 1) % n]
            if a != b:
                image = list(mu)
                image[i], image[(i + 1) % n] = b, a
                rate = t if a > b else 1.0
                matrix[place[tuple(image)], k] += rate
                matrix[k, k] -= rate
    return matrix


@pytest.mark.parametrize("lam", SHAPES)
@pytest.mark.parametrize("t", [Fraction(1, 3), Fraction(5, 2)])
def test_stationary_weights(lam: tuple[int, ...], t: Fraction) -> None:
    states = list(orbit(lam))
    _, singular, right = numpy.linalg.svd(generator(states, float(t)))
    assert singular[-1] < 1e-10 and (len(states) == 1 or singular[-2] > 1e-6)
    stationary = right[-1] / right[-1].sum()
    ours = weights(lam)
    image = {"t": Scalar.number(RING, t.numerator, t.denominator)}
    values = numpy.array([float(ours[mu].substitute(image).as_fraction() or 0) for mu in states])
    assert numpy.allclose(values / values.sum(), stationary, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("lam", SHAPES)
def test_partition_function(lam: tuple[int, ...]) -> None:
    """sum of the weights = P_lam(1, ..., 1; 1, t) = prod_j binomial(n, lam'_j)."""
    total = Scalar.zero(RING)
    for value in weights(lam).values():
        total = total + value
    expected = 1
    for height in conjugate(trimmed(lam)):
        expected *= comb(len(lam), height)
    assert total == expected


def test_three_sites_three_species() -> None:
    """(2, 1, 0): (t + 2)/(1 + t) on its cyclic class, (2t + 1)/(1 + t) on that of (0, 1, 2)."""
    found = weights((2, 1, 0))
    for mu in ((2, 1, 0), (1, 0, 2), (0, 2, 1)):
        assert found[mu] == (T + 2) / (1 + T)
    for mu in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        assert found[mu] == (2 * T + 1) / (1 + T)
