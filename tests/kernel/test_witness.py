"""Everything modulo a prime is the exact thing, reduced: elements, arithmetic, operators."""

from __future__ import annotations

from itertools import product
from random import Random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from kernel_values import ONE, RING, laurent_polynomials, q, scalars, t
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import NotAUnit, Pole
from spanwright.kernel.families.macdonald import applied_t
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import act, permutations
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.witness import PRIME, ModularPolynomial, RandomPoint

E = family("E")
N = 3


def point(seed: int = 1) -> RandomPoint:
    """Residues that depend on the seed and on the name."""
    return RandomPoint(lambda name: Random(f"{seed} {name}").randrange(2, PRIME - 1))


POINT = point()
POLYNOMIALS = laurent_polynomials(N)
reduced = POINT.polynomial


@pytest.mark.parametrize(
    "mu", [*product(range(-1, 3), repeat=2), *product(range(3), repeat=3), (0, 2, 1, 1)])
def test_elements_are_the_exact_ones_reduced(mu: tuple[int, ...]) -> None:
    """The same recursion over residues, from an empty memory and from a full one."""
    n = len(mu)
    expected = reduced(E.to_monomials(mu, n))
    assert point().element(E, mu, n) == expected
    assert POINT.element(E, mu, n) == expected == POINT.element(E, mu, n)


@pytest.mark.parametrize("name", ["P", "kappa", "m"])
def test_other_families(name: str) -> None:
    target = family(name)
    index = target.check_index((2, 1, 0), 3)
    assert POINT.element(target, index, 3) == reduced(target.to_monomials(index, 3))


@settings(max_examples=effort(30))
@given(POLYNOMIALS, POLYNOMIALS, scalars())
def test_reduction_is_a_homomorphism(
    f: LaurentPolynomial, g: LaurentPolynomial, c: Scalar
) -> None:
    assert reduced(f + g) == reduced(f) + reduced(g)
    assert reduced(f * g) == reduced(f) * reduced(g)
    assert reduced(-f) == -reduced(f)
    assert reduced(f.scaled(c)) == reduced(f).scaled(POINT.scalar(c))
    assert reduced(f**3) == reduced(f).power(3)
    assert reduced(f.shifted((1, -2, 0))) == reduced(f).shifted((1, -2, 0))
    assert ModularPolynomial.total([reduced(f), reduced(g), reduced(f)]) == reduced(f + g + f)
    # two different polynomials of this size agree modulo 2^61 - 1 with a chance below 10^-15
    assert (reduced(f) == reduced(g)) == (f == g)


def test_negative_powers() -> None:
    term = LaurentPolynomial.monomial(N, (1, -2, 0), q / (1 - t))
    assert reduced(term).power(-2) == reduced(term**-2)
    with pytest.raises(NotAUnit):
        reduced(term + LaurentPolynomial.constant(N, ONE)).power(-1)


@settings(max_examples=effort(25))
@given(POLYNOMIALS, st.sampled_from(list(permutations(N))), st.integers(1, N - 1))
def test_operators(f: LaurentPolynomial, w: tuple[int, ...], i: int) -> None:
    """w, d_i, T_i and T_pi against exact ones."""
    g = reduced(f)
    assert reduced(f.moved(lambda e: act(w, e))) == g.moved(w)
    x = [LaurentPolynomial.generator(N, RING, j) for j in range(1, N + 1)]
    swapped = f.moved(lambda e: (*e[: i - 1], e[i], e[i - 1], *e[i + 1 :]))
    difference = (f - swapped).divided_exactly(x[i - 1] - x[i])
    assert reduced(difference) == g.divided_difference(i)
    exact = f.scaled(t) - (x[i - 1].scaled(t) - x[i]) * difference
    assert exact == applied_t(f, i)
    assert reduced(exact) == POINT.hecke(g, i)
    assert POINT.hecke_inverse(POINT.hecke(g, i), i) == g == POINT.hecke(
        POINT.hecke_inverse(g, i), i)
    # T_pi x^e = (x_2, ..., x_n, x_1/q)^e
    turned = LaurentPolynomial.of_scalars(
        N, RING, {(e[-1], *e[:-1]): c * q ** -e[-1] for e, c in f.items()})
    assert reduced(turned) == POINT.turned(g)
    assert POINT.turned_back(POINT.turned(g)) == g


def test_a_point_is_what_its_seed_makes_it() -> None:
    assert (point(1).q, point(1).t) == (point(1).q, point(1).t) != (point(2).q, point(2).t)
    assert point(1).t == point(1).root_of_t() ** 2 % PRIME == point(1).parameter("t")
    assert POINT.scalar(q * t + 1) == (POINT.q * POINT.t + 1) % PRIME
    assert POINT.scalar(Scalar.root_of_t()) == POINT.root_of_t()
    assert str(POINT.q) in POINT.described() and str(POINT.t) in POINT.described()


def test_a_pole_at_the_point_is_reported() -> None:
    with pytest.raises(Pole):
        POINT.scalar(1 / (q - POINT.q))
    # q t = 1 there: E_(0,1) has the denominator 1 - q t
    bad = RandomPoint(lambda name: 2 if name == "t" else pow(4, -1, PRIME))
    with pytest.raises(Pole):
        bad.element(E, (0, 1), 2)
