"""Symmetric Macdonald polynomials P and J: routes, rules, limits, positivity; qt-Kostka laws."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families import macdonald
from spanwright.kernel.families import nonsymmetric_macdonald as nonsymmetric
from spanwright.kernel.families.kostka import kostka
from spanwright.kernel.families.macdonald_kostka import (
    kostka_foulkes,
    macdonald_kostka,
    modified_macdonald_kostka,
)
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import conjugate, decreasing, padded, partitions
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
ZERO, ONE = Scalar.zero(RING), Scalar.one(RING)
q, t = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")
P, J = family("P"), family("J")
CASES = [(index, n) for n in (2, 3, 4) for size in range(5) for index in partitions(size, n)]


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_three_routes_to_P_agree(n: int) -> None:
    """Tableau formula, symmetrised E, and the sum over the orbit of E."""
    for size in range(5):
        for index in partitions(size, n):
            polynomial = P.to_monomials(index, n)
            assert macdonald.by_symmetrisation(index, n) == polynomial
            in_E = macdonald.in_nonsymmetric(index, n)
            total = LaurentPolynomial.zero(n, RING)
            for mu, c in in_E.items():
                total = total + nonsymmetric.to_monomials(mu).scaled(c)
            assert total == polynomial
            assert macdonald.from_nonsymmetric(in_E, n) == {index: ONE}
            assert polynomial.coefficient(padded(index, n)) == 1


@pytest.mark.parametrize(
    ("index", "n"),
    [(index, 4) for index in partitions(8, 4)]
    + [((2, 1, 1), 5), ((3, 2, 2), 5), ((2, 2, 1, 1), 6), ((1, 1, 1), 6)])
def test_symmetrisation_agrees_with_tableaux_for_blocks_anywhere(
    index: tuple[int, ...], n: int
) -> None:
    assert macdonald.by_symmetrisation(index, n) == P.to_monomials(index, n)


def test_T_fixes_symmetric_polynomials_up_to_t() -> None:
    f = P.to_monomials((2, 1), 3)
    for i in (1, 2):
        assert macdonald.applied_t(f, i) == f.scaled(t)
    g = nonsymmetric.to_monomials((0, 2, 1))
    once = macdonald.applied_t(g, 1)
    assert macdonald.applied_t(once, 1) == once.scaled(t - 1) + g.scaled(t)


def test_a_sum_of_E_that_is_not_symmetric_is_refused() -> None:
    with pytest.raises(OutsideDomain) as caught:
        macdonald.from_nonsymmetric({(0, 1): ONE, (1, 0): ONE}, 2)
    assert caught.value.code == "not-symmetric"
    with pytest.raises(OutsideDomain) as caught:
        macdonald.from_nonsymmetric({(1, 0): ONE}, 2)
    assert "E_(1,0)" in caught.value.fact
    with pytest.raises(OutsideDomain) as caught:
        macdonald.from_nonsymmetric({(-1, 0): ONE}, 2)
    assert caught.value.code == "not-a-polynomial"


@pytest.mark.parametrize(("index", "n"), [((2,), 2), ((2, 1), 3), ((3, 1), 3), ((2, 2), 3)])
def test_P_is_an_eigenfunction_of_the_difference_operator(
    index: tuple[int, ...], n: int
) -> None:
    """D = sum_i prod_(j != i) (t x_i - x_j)/(x_i - x_j) T_(q, x_i) (Macdonald 1995, VI.3).

    Multiplied by the Vandermonde product; the eigenvalue is sum of q^(lambda_i) t^(n-i).
    """
    x = [LaurentPolynomial.generator(n, RING, j) for j in range(1, n + 1)]
    f = P.to_monomials(index, n)
    vandermonde = LaurentPolynomial.constant(n, ONE)
    for i in range(n):
        for j in range(i + 1, n):
            vandermonde = vandermonde * (x[i] - x[j])
    image = LaurentPolynomial.zero(n, RING)
    for i in range(n):
        shifted = LaurentPolynomial.of_scalars(
            n, RING, {e: c * q ** e[i] for e, c in f.items()})
        cofactor = vandermonde
        for j in range(n):
            if j != i:
                shifted = shifted * (x[i].scaled(t) - x[j])
                cofactor = cofactor.divided_exactly(x[i] - x[j])
        image = image + shifted * cofactor
    eigenvalue = ZERO
    for i, part in enumerate(padded(index, n)):
        eigenvalue = eigenvalue + q**part * t ** (n - 1 - i)
    assert image == (f * vandermonde).scaled(eigenvalue)


def test_inverting_the_parameters_changes_nothing() -> None:
    images = {"q": q.inverse(), "t": t.inverse()}
    for index, n in CASES:
        f = P.to_monomials(index, n)
        assert f.substitute_parameters(images) == f


@pytest.mark.parametrize(("index", "n"), CASES)
def test_dictionary_of_limits(index: tuple[int, ...], n: int) -> None:
    """q = t Schur, t = 1 monomial, q = 1 elementary, q = 0 Hall-Littlewood, t = 0 q-Whittaker."""
    f = P.to_monomials(index, n)
    assert f.substitute_parameters({"q": t}) == family("s").to_monomials(index, n)
    assert f.substitute_parameters({"t": ONE}) == family("m").to_monomials(index, n)
    assert f.substitute_parameters({"q": ONE}) == family("e").to_monomials(conjugate(index), n)
    assert f.substitute_parameters({"q": ZERO}) == macdonald.hall_littlewood(index, n)
    whittaker = macdonald.q_whittaker(index, n)
    assert f.substitute_parameters({"t": ZERO}) == whittaker
    increasing = tuple(reversed(padded(index, n)))
    assert nonsymmetric.to_monomials(increasing).substitute_parameters({"t": ZERO}) == whittaker
    # in N[q], as Kostka-Foulkes polynomials are positive (Lascoux and Schützenberger, Sur une
    # conjecture de H. O. Foulkes, 1978)
    assert all(c > 0 for p in whittaker.terms.values() for c in p.coeffs())


@pytest.mark.parametrize(("index", "n"), [c for c in CASES if sum(c[0]) <= 4 and c[1] <= 3])
def test_hall_littlewood_by_its_definition(index: tuple[int, ...], n: int) -> None:
    """sum over w of w(x^lambda prod_(i<j) (x_i - t x_j)/(x_i - x_j)) over v_lambda(t) (III.2)."""
    from itertools import permutations

    x = [LaurentPolynomial.generator(n, RING, j) for j in range(1, n + 1)]
    vandermonde = LaurentPolynomial.constant(n, ONE)
    summand = LaurentPolynomial.monomial(n, padded(index, n), ONE)
    for i in range(n):
        for j in range(i + 1, n):
            vandermonde = vandermonde * (x[i] - x[j])
            summand = summand * (x[i] - x[j].scaled(t))
    numerator = LaurentPolynomial.zero(n, RING)
    for w in permutations(range(n)):
        sign = (-1) ** sum(1 for i in range(n) for j in range(i) if w[j] > w[i])
        numerator = numerator + summand.moved(
            lambda e, w=w: tuple(e[w.index(k)] for k in range(n))) * sign
    poincare = ONE
    lam = padded(index, n)
    for part in set(lam):
        for k in range(2, lam.count(part) + 1):
            poincare = poincare * (1 - t**k) / (1 - t)
    found = numerator.divided_exactly(vandermonde).scaled(poincare.inverse())
    assert macdonald.hall_littlewood(index, n) == found


def test_limits_of_E_at_q_and_t_zero() -> None:
    """E_mu at q = t = 0 is the key polynomial: one for increasing mu is a Schur polynomial."""
    for index in [(2, 1), (2, 2), (3, 1), (1, 1, 1)]:
        increasing = tuple(reversed(padded(index, 3)))
        f = nonsymmetric.to_monomials(increasing).substitute_parameters({"q": ZERO, "t": ZERO})
        assert f == family("s").to_monomials(index, 3)
    for mu in [(1, 0, 2), (2, 0, 1)]:
        f = nonsymmetric.to_monomials(mu)
        assert f.substitute_parameters({"t": ONE}).terms.keys() == {mu}
        at_zero = f.substitute_parameters({"q": ZERO, "t": ZERO})
        assert at_zero.coefficient(mu) == 1 and at_zero.has_integer_terms()
    lam = (2, 1, 0)
    assert set(nonsymmetric.to_monomials(lam).substitute_parameters({"q": ZERO}).terms) == {lam}


def test_J_is_integral() -> None:
    """Coefficients in Z[q, t] (Macdonald's conjecture, VI.8.3)."""
    for size in range(7):
        for index in partitions(size):
            row = J.convert_from(J, index, 4)
            assert row == ({index: ONE} if len(index) <= 4 else {})
            in_m = family("m").convert_from(J, index, 6)
            assert in_m is not None
            assert all(c.is_polynomial for c in in_m.values())


@given(st.sampled_from(CASES), st.integers(0, 3))
@settings(max_examples=effort(30))
def test_pieri_coefficients_are_positive_for_positive_parameters(
    case: tuple[tuple[int, ...], int], r: int
) -> None:
    index, n = case
    half, third = Scalar.number(RING, 1, 2), Scalar.number(RING, 1, 3)
    for c in macdonald.multiply_by_e(index, r, n).values():
        value = c.substitute({"q": half, "t": third}).as_fraction()
        assert value is not None and value > 0
    assert sum(map(len, macdonald.multiply_by_e((1,) * (n + 1), 1, n))) == 0
    assert macdonald.multiply_by_row((1,) * (n + 1), 1, n) == {}


def test_strip_weights_are_dual() -> None:
    """psi'_(mu/lambda)(q, t) = psi_(mu'/lambda')(t, q) (Macdonald 1995, VI (6.24))."""
    swap = {"q": t, "t": q}
    for index in partitions(4):
        for outer in macdonald.vertical_strips_above(index, 2):
            assert macdonald.psi_prime(outer, index).substitute(swap) == macdonald.psi(
                conjugate(outer), conjugate(index))


# qt-Kostka


def test_macdonald_kostka_laws() -> None:
    """K(1,1) = f^lambda, K(0,1) and K(0,t) Kostka and Kostka-Foulkes, duality (VI.8)."""
    for size in range(1, 6):
        shapes = list(partitions(size))
        for mu in shapes:
            for shape in shapes:
                value = macdonald_kostka(shape, mu)
                assert value.is_polynomial
                assert value.substitute({"q": ONE, "t": ONE}) == kostka(shape, (1,) * size)
                assert value.substitute({"q": ZERO, "t": ONE}) == kostka(shape, mu)
                turned = macdonald_kostka(conjugate(shape), conjugate(mu))
                assert turned.substitute({"q": t, "t": q}) == value
    assert macdonald_kostka((2,), (1,)) == 0


def test_macdonald_kostka_is_positive() -> None:
    """Coefficients in N (Haiman, Hilbert schemes, polygraphs and positivity, 2001)."""
    for mu in partitions(6):
        for shape in partitions(6):
            value = modified_macdonald_kostka(shape, mu)
            assert value.is_polynomial
            assert all(c > 0 for c in value.expanded_rest().coeffs())


def test_kostka_foulkes_expands_schur_in_hall_littlewood() -> None:
    """s_lambda = sum of K_(lambda, mu)(t) P_mu(x; t) (Macdonald 1995, III.6)."""
    n = 4
    for shape in partitions(4):
        total = LaurentPolynomial.zero(n, RING)
        for mu in partitions(4):
            hall_littlewood = macdonald.hall_littlewood(mu, n)
            total = total + hall_littlewood.scaled(kostka_foulkes(shape, mu))
        assert total == family("s").to_monomials(shape, n)


def test_macdonald_kostka_refuses_what_is_no_partition() -> None:
    with pytest.raises(OutsideDomain) as caught:
        macdonald_kostka((1, 2), (2, 1))
    assert caught.value.code == "not-a-partition"
    assert decreasing((1, 2)) == (2, 1)
