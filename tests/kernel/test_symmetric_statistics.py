"""Norms, the pairing, principal specialisations and hooks, closed forms against definitions."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families.diagrams import (
    Box,
    boxes,
    centralizer_order,
    composition_boxes,
)
from spanwright.kernel.families.nonsymmetric_macdonald import to_monomials
from spanwright.kernel.families.registry import family
from spanwright.kernel.families.statistics import (
    hooks,
    inner,
    inner_of_E,
    norm_E,
    norm_P,
    power_norm_P,
    power_sum_product,
    principal,
    principal_E,
    principal_J,
    principal_P,
    principal_s,
)
from spanwright.kernel.indices import compositions, conjugate, partitions, ranks
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
ONE = Scalar.one(RING)
q, t = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")


def constant_term_pairing(f: LaurentPolynomial, g: LaurentPolynomial, k: int) -> Scalar:
    """CT[f(x; q, q^k) g(1/x; 1/q, q^-k) K]/CT[K], multiplied out."""
    n = f.n
    left = f.substitute_parameters({"t": q**k})
    right = g.substitute_parameters({"q": q**-1, "t": t**-1}).substitute_parameters({"t": q**k})
    right = right.moved(lambda e: tuple(-part for part in e))
    kernel = LaurentPolynomial.constant(n, ONE)
    one = kernel
    x = [LaurentPolynomial.generator(n, RING, j) for j in range(1, n + 1)]
    for i in range(n):
        for j in range(i + 1, n):
            for s in range(k):
                kernel = kernel * (one - (x[i] * x[j] ** -1).scaled(q**s))
                kernel = kernel * (one - (x[j] * x[i] ** -1).scaled(q ** (s + 1)))
    zero = (0,) * n
    return (left * right * kernel).coefficient(zero) / kernel.coefficient(zero)


@pytest.mark.parametrize("k", [1, 2])
def test_pairing_against_constant_terms(k: int) -> None:
    indices = [(0, 0), (1, 0), (0, 1), (2, -1), (1, 1), (0, 2)]
    for mu in indices:
        for nu in indices:
            f, g = to_monomials(mu), to_monomials(nu)
            expected = constant_term_pairing(f, g, k)
            assert inner(f, g).substitute({"t": q**k}) == expected
            if mu == nu:
                assert norm_E(mu).substitute({"t": q**k}) == expected


def test_pairing_against_constant_terms_in_three_variables() -> None:
    x = [LaurentPolynomial.generator(3, RING, j) for j in (1, 2, 3)]
    f = x[0].scaled(q) + x[2] + (x[1] * x[0] * x[2] ** -1).scaled(t)
    g = x[1].scaled(t + q) + x[2]
    for left, right in ((f, g), (g, f), (f, f)):
        expected = constant_term_pairing(left, right, 1)
        assert inner(left, right).substitute({"t": q}) == expected


polynomials = st.lists(
    st.tuples(st.tuples(st.integers(-1, 2), st.integers(-1, 2)), st.integers(-2, 2),
              st.integers(-1, 1), st.integers(-1, 1)), min_size=1, max_size=3).map(
    lambda rows: sum(
        (LaurentPolynomial.monomial(2, e, q**a * t**b * c) for e, c, a, b in rows),
        LaurentPolynomial.zero(2, RING)))


@given(polynomials, polynomials)
@settings(max_examples=effort(15))
def test_pairing_is_hermitian(f: LaurentPolynomial, g: LaurentPolynomial) -> None:
    """<g, f> is <f, g> with q and t inverted, and multiplying both by x_1 changes nothing."""
    inverted = {"q": q**-1, "t": t**-1}
    assert inner(g, f).substitute(inverted) == inner(f, g)
    shift = LaurentPolynomial.generator(2, RING, 1)
    assert inner(f * shift, g * shift) == inner(f, g)


@pytest.mark.parametrize("n", [2, 3])
def test_norm_along_the_recursion(n: int) -> None:
    """N(s_i mu)/N(mu) = (1 - t z)(1 - z/t)/(1 - z)^2, N invariant under (mu_n + 1, mu_1, ...)."""
    for size in range(4):
        for mu in compositions(size, n):
            v = ranks(mu)
            assert norm_E((mu[-1] + 1, *mu[:-1])) == norm_E(mu)
            assert norm_E(tuple(part - 2 for part in mu)) == norm_E(mu)
            for i in range(n - 1):
                if mu[i] > mu[i + 1]:
                    z = q ** (mu[i] - mu[i + 1]) * t ** (v[i] - v[i + 1])
                    swapped = (*mu[:i], mu[i + 1], mu[i], *mu[i + 2:])
                    expected = (1 - t * z) * (1 - z / t) / (1 - z) ** 2
                    assert norm_E(swapped) / norm_E(mu) == expected
    assert norm_E((0,) * n) == 1


def test_norm_of_P_by_the_pairing() -> None:
    for n in (2, 3):
        for size in range(4):
            for index in partitions(size, n):
                f = family("P").to_monomials(index, n)
                assert inner(f, f) == norm_P(index, n)
    f, g = (family("P").to_monomials(index, 3) for index in ((2, 1), (1, 1, 1)))
    assert inner(f, g) == 0
    with pytest.raises(OutsideDomain):
        norm_P((1, 1, 1), 2)
    assert inner_of_E({(1, 0): q}, {(1, 0): q}) == norm_E((1, 0))


def test_power_sum_product_of_P() -> None:
    """P_lambda are orthogonal with norm 1/b_lambda (Macdonald 1995, VI.4.7, VI.6.19)."""
    p = family("p")
    for size in range(1, 5):
        rows = {index: p.convert_from(family("P"), index, size) for index in partitions(size)}
        for one, left in rows.items():
            for two, right in rows.items():
                assert left is not None and right is not None
                value = power_sum_product(left, right, size)
                assert value == (power_norm_P(one) if one == two else 0)
    # at q = t the Schur functions are orthonormal
    schur = p.convert_from(family("s"), (2, 1), 3)
    assert schur is not None
    assert power_sum_product(schur, schur, 3).substitute({"q": t}) == 1
    with pytest.raises(OutsideDomain, match="n >= 3") as caught:
        power_sum_product({(2, 1): ONE}, {(2, 1): ONE}, 2)
    assert caught.value.code == "too-few-variables"


def test_principal_specialisations() -> None:
    for n in (2, 3):
        for size in range(4):
            for mu in compositions(size, n):
                assert principal(to_monomials(mu)) == principal_E(mu)
            for index in partitions(size, n):
                for name, closed in (
                    ("P", principal_P), ("J", principal_J), ("s", principal_s)
                ):
                    polynomial = family(name).to_monomials(index, n)
                    assert principal(polynomial) == closed(index, n)
    for mu in [(0, -1), (2, -1, 0), (-2, -2)]:
        assert principal(to_monomials(mu)) == principal_E(mu)


def test_duality_of_E_at_spectral_points() -> None:
    """E_mu(u(nu))/E_mu(u(0)) = E_nu(u(mu))/E_nu(u(0)).

    Cherednik, Nonsymmetric Macdonald polynomials (1995).
    """
    def at(mu: tuple[int, ...], nu: tuple[int, ...]) -> Scalar:
        values = {
            j: q**part * t**rank
            for j, (part, rank) in enumerate(zip(nu, ranks(nu), strict=True), 1)}
        found = to_monomials(mu).evaluate(values).as_scalar()
        assert found is not None
        return found

    for mu, nu in [((1, 0), (0, 2)), ((0, 1, 1), (2, 0, 0)), ((1, 0, 1), (0, 0, 1))]:
        zero = (0,) * len(mu)
        assert at(mu, nu) * at(nu, zero) == at(nu, mu) * at(mu, zero)
        assert at(mu, zero) == principal_E(mu) * t ** sum(mu)


def test_hooks() -> None:
    """Arms and legs counted by hand; transposing a partition exchanges them."""
    assert hooks((2, 1)) == (Box(1, 1, 1, 1), Box(1, 2, 0, 0), Box(2, 1, 0, 0))
    assert hooks((2, 1, 0, 0)) == hooks((2, 1))
    assert hooks((0, 2, 1)) == composition_boxes((0, 2, 1)) == (
        Box(2, 1, 1, 1), Box(2, 2, 1, 0), Box(3, 1, 0, 0))
    assert hooks(()) == ()
    for index in partitions(6):
        mirrored = {(box.column, box.row): (box.leg, box.arm) for box in boxes(conjugate(index))}
        assert mirrored == {(box.row, box.column): (box.arm, box.leg) for box in boxes(index)}
        assert all(box.hook == box.arm + box.leg + 1 for box in boxes(index))
    with pytest.raises(OutsideDomain):
        hooks((-1, 2))


def test_centralizer_orders_sum_up() -> None:
    from fractions import Fraction

    for size in range(1, 8):
        assert sum(Fraction(1, centralizer_order(c)) for c in partitions(size)) == 1
