"""Routes: both ways to multiply into E agree, and sums, products and conversions keep values."""

from __future__ import annotations

from itertools import product

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from kernel_values import ONE, RING, ZERO, laurent_polynomials, nonzero_scalars, q, scalars, t
from spanwright.kernel import reduction
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import NotAUnit, OutsideDomain, Pole
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial, total_polynomial

E, P, S, KAPPA = family("E"), family("P"), family("S"), family("kappa")
N = 2
Element = Scalar | LaurentPolynomial | Expansion


def expansions(least: int = -1) -> st.SearchStrategy[Expansion]:
    """Sums of up to three E_mu in two variables."""
    return st.dictionaries(
        st.tuples(*[st.integers(least, 2)] * N), scalars(), max_size=3,
    ).map(lambda terms: Expansion(E, N, terms))


ELEMENTS = st.one_of(scalars(), laurent_polynomials(N, n_terms=3), expansions())


def polynomial(value: Element) -> LaurentPolynomial:
    """The value multiplied out."""
    return reduction.to_polynomial(value, N)


@pytest.mark.parametrize(("mu", "nu"), list(product([(0, 2), (1, -1), (2, 1)], repeat=2)))
def test_two_routes_to_E_mu_E_nu(mu: tuple[int, ...], nu: tuple[int, ...]) -> None:
    """x_1, ..., x_n applied one after another, and the product re-expanded by triangularity."""
    factor, b = E.to_monomials(mu, N), Expansion.element(E, N, nu)
    by_rule = reduction._by_closed_rule(factor, b)
    assert by_rule.terms == E.from_monomials(factor * E.to_monomials(nu, N))
    assert reduction.multiply(Expansion.element(E, N, mu), b, N) == by_rule


@settings(max_examples=effort(25))
@given(laurent_polynomials(N, n_terms=3), expansions())
def test_two_routes_of_a_product(factor: LaurentPolynomial, b: Expansion) -> None:
    expected = E.from_monomials(factor * polynomial(b))
    assert reduction.multiply_polynomial(factor, b) == Expansion(E, N, expected)
    if factor and b:
        assert reduction._by_closed_rule(factor, b).terms == expected


@pytest.mark.parametrize("n", [3, 4])
def test_two_routes_in_more_variables(n: int) -> None:
    factor = E.to_monomials((1, *[0] * (n - 2), -1), n)
    b = Expansion(E, n, {(0,) * (n - 1) + (1,): q, (1,) + (0,) * (n - 1): ONE})
    assert reduction._by_closed_rule(factor, b).terms == E.from_monomials(
        factor * b.to_monomials())


@settings(max_examples=effort(30))
@given(ELEMENTS, ELEMENTS, ELEMENTS)
def test_sums_and_products_keep_values(a: Element, b: Element, c: Element) -> None:
    assert polynomial(reduction.add([a, b, c], N)) == total_polynomial(
        map(polynomial, (a, b, c)))
    assert polynomial(reduction.multiply(a, b, N)) == polynomial(a) * polynomial(b)
    assert polynomial(reduction.negate(a)) == -polynomial(a)
    difference = reduction.difference(a, b, N)
    assert difference.is_zero == (polynomial(a) == polynomial(b))
    assert reduction.difference(a, a, N).is_zero


@settings(max_examples=effort(25))
@given(ELEMENTS)
def test_expand_keeps_values(a: Element) -> None:
    expansion = reduction.expand(a, E, N)
    assert expansion.family is E and polynomial(expansion) == polynomial(a)
    assert reduction.expand(expansion, E, N) == expansion
    assert E.from_monomials(polynomial(a)) == expansion.terms


@settings(max_examples=effort(20))
@given(expansions(0), st.integers(0, 3))
def test_powers(a: Expansion, exponent: int) -> None:
    assert polynomial(reduction.power(a, exponent, N)) == polynomial(a) ** exponent


def test_negative_powers() -> None:
    element = Expansion.element(E, N, (1, 1))
    found = reduction.power(element, -2, N)
    assert polynomial(found) == LaurentPolynomial.monomial(N, (-2, -2), ONE)
    with pytest.raises(NotAUnit):
        reduction.power(Expansion.element(E, N, (0, 1)), -1, N)
    assert reduction.power(q, -2, N) == q**-2


def test_sums_stay_in_the_family_when_they_can() -> None:
    e = Expansion.element(E, N, (0, 1))
    x_1 = LaurentPolynomial.generator(N, RING, 1)
    found = reduction.add([e, x_1, q], N)
    assert isinstance(found, Expansion) and found.family is E
    assert found.terms == {(0, 1): ONE, (1, 0): ONE, (0, 0): q}
    # x_1 is no symmetric polynomial
    symmetric = Expansion.element(P, N, (1, 0) if P.check_index((1, 0), N) == (1, 0) else (1,))
    assert isinstance(reduction.add([symmetric, x_1], N), LaurentPolynomial)
    # of two families, the one into which the other has a direct rule
    both = reduction.add([symmetric, e], N)
    assert isinstance(both, Expansion) and both.family is E


def test_products_that_grow() -> None:
    """x_2 S_132 = S_1423 - S_312 needs three variables (Monk's rule)."""
    w = S.check_index((1, 3, 2), 2)
    found = reduction.multiply(
        LaurentPolynomial.generator(2, RING, 2), Expansion.element(S, 2, w), 2)
    assert isinstance(found, Expansion)
    assert {S.check_index(index, found.n): c for index, c in found.terms.items()} == {
        S.check_index((1, 4, 2, 3), found.n): ONE, S.check_index((3, 1, 2), found.n): -ONE}
    f = reduction.extended_polynomial(LaurentPolynomial.generator(2, RING, 2), 4)
    assert f == LaurentPolynomial.generator(4, RING, 2)


@settings(max_examples=effort(30))
@given(expansions(), nonzero_scalars())
def test_one_generator_at_a_time(b: Expansion, c: Scalar) -> None:
    for j, power in product((1, 2), (1, -1)):
        x_j = LaurentPolynomial.generator(N, RING, j) ** power
        assert polynomial(reduction.apply_generator(b, j, power)) == x_j * polynomial(b)
    assert reduction.multiply(c, b, N) == b.scaled(c) == reduction.multiply(b, c, N)


def test_generators_without_a_closed_rule() -> None:
    with pytest.raises(NotAUnit):
        reduction.apply_generator(Expansion.element(KAPPA, 2, (0, 1)), 1, -1)


def test_specialisation_of_expansions() -> None:
    """E changes with q and t, so the sum becomes a polynomial; keys do not."""
    e = Expansion.element(E, N, (0, 2))
    found = reduction.substitute(e, {"q": ZERO, "t": ZERO})
    assert found == KAPPA.to_monomials((0, 2), N)
    key = Expansion(KAPPA, N, {(0, 2): q})
    assert reduction.substitute(key, {"q": t}) == Expansion(KAPPA, N, {(0, 2): t})
    assert reduction.substitute(q + 1, {"q": t}) == t + 1
    with pytest.raises(Pole):
        reduction.substitute(Expansion(E, N, {(0, 1): 1 / (1 - q)}), {"q": ONE})
    # x_2 = E_(0,1) - (1-t)/(1-qt) E_(1,0): the poles at q = 1/t cancel
    x_2 = LaurentPolynomial.generator(N, RING, 2)
    assert reduction.substitute(reduction.expand(x_2, E, N), {"q": 1 / t}) == x_2


def test_outside_the_span() -> None:
    with pytest.raises(OutsideDomain):
        reduction.expand(LaurentPolynomial.generator(N, RING, 1), P, N)
    with pytest.raises(OutsideDomain):
        reduction.expand(LaurentPolynomial.generator(N, RING, 1) ** -1, KAPPA, N)
