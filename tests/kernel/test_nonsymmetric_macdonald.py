"""E_mu: closed product rules against multiplying out, there and back, recursion, symmetry."""

from __future__ import annotations

from itertools import product

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from kernel_values import ONE, RING, q, scalars, t
from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain, OverBudget
from spanwright.kernel.families import nonsymmetric_macdonald as E
from spanwright.kernel.families.base import linear
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import macdonald_order, swapped
from spanwright.kernel.laurent import LaurentPolynomial, total_polynomial

FAMILY = family("E")

# every mu with few and small parts, negative ones too
SMALL = [
    *product(range(-2, 3), repeat=2),
    *product(range(-1, 3), repeat=3),
    *product(range(2), repeat=4),
]
INDICES = st.integers(1, 4).flatmap(
    lambda n: st.lists(st.integers(-1, 3 if n < 4 else 2), min_size=n, max_size=n).map(tuple))


def generator(n: int, j: int) -> LaurentPolynomial:
    """x_j."""
    return LaurentPolynomial.generator(n, RING, j)


def multiplied_out(coefficients: dict[tuple[int, ...], Scalar], n: int) -> LaurentPolynomial:
    """The sum of c_mu E_mu as a polynomial."""
    return total_polynomial([
        LaurentPolynomial.zero(n, RING),
        *(E.to_monomials(mu).scaled(c) for mu, c in coefficients.items())])


# into monomials


@pytest.mark.parametrize("mu", SMALL)
def test_E_is_monic_and_triangular(mu: tuple[int, ...]) -> None:
    polynomial = E.to_monomials(mu)
    assert polynomial.coefficient(mu) == 1
    assert max(polynomial.terms, key=macdonald_order) == mu
    assert polynomial.degrees() == {sum(mu)}


@settings(max_examples=effort(30))
@given(INDICES, st.integers(-2, 2))
def test_shift(mu: tuple[int, ...], k: int) -> None:
    """E_(mu + (k, ..., k)) = (x_1 ... x_n)^k E_mu."""
    n = len(mu)
    assert E.to_monomials(tuple(part + k for part in mu)) == E.to_monomials(mu).shifted((k,) * n)


@settings(max_examples=effort(30))
@given(INDICES)
def test_inversion(mu: tuple[int, ...]) -> None:
    """E_(-mu_n, ..., -mu_1)(x_1, ..., x_n) = E_mu(1/x_n, ..., 1/x_1)."""
    inverted = E.to_monomials(mu).moved(lambda e: tuple(-k for k in reversed(e)))
    assert E.to_monomials(E.inverted(mu)) == inverted
    assert E.inverted(E.inverted(mu)) == mu


@settings(max_examples=effort(30))
@given(INDICES)
def test_the_recursion_does_not_depend_on_what_is_remembered(mu: tuple[int, ...]) -> None:
    remembered = E.to_monomials(mu)
    E.forget_polynomials()
    assert E.to_monomials(mu) == remembered


@settings(max_examples=effort(30))
@given(INDICES)
def test_no_factor_is_left_in_common(mu: tuple[int, ...]) -> None:
    """The recursion tries few factors for cancelling; trying all finds no more."""
    f = E.to_monomials(mu)
    again = LaurentPolynomial.reduced(f.n, f.ring, f.terms, f.scale)
    assert again.terms == f.terms and again.scale == f.scale


@given(INDICES)
def test_recursion_path(mu: tuple[int, ...]) -> None:
    """Steps lead down to 0; tau_i exchanges a descent, tau_pi turns and raises."""
    mu = tuple(part - min(mu) for part in mu)
    n = len(mu)
    at = mu
    for step, before in E.recursion_path(mu):
        if step == "tau_pi":
            assert at == (before[-1] + 1, *before[:-1])
        else:
            i = int(step.removeprefix("tau_"))
            assert before[i - 1] > before[i] and at == swapped(before, i)
        at = before
    assert at == (0,) * n


def test_equal_parts_give_symmetry() -> None:
    """mu_i = mu_(i+1): E_mu is symmetric in x_i, x_(i+1)."""
    for mu in SMALL:
        for i in range(1, len(mu)):
            if mu[i - 1] == mu[i]:
                polynomial = E.to_monomials(mu)
                assert polynomial == polynomial.moved(lambda e, i=i: swapped(e, i))


def test_memory_starts_afresh_when_it_is_full(monkeypatch: pytest.MonkeyPatch) -> None:
    expected = E.to_monomials((0, 1, 3))
    monkeypatch.setattr(E, "REMEMBERED_MONOMIALS", 5)
    E.forget_polynomials()
    assert E.to_monomials((0, 1, 3)) == expected
    assert len(E._memory.polynomials) < len(E.recursion_path((0, 1, 3)))


def test_work_stops_when_the_budget_is_spent() -> None:
    E.forget_polynomials()
    with budget.using(budget.Budget(is_spent=lambda: "stopped")), pytest.raises(OverBudget):
        E.to_monomials((0, 1, 2))
    assert E.to_monomials((0, 1, 2)).coefficient((0, 1, 2)) == 1


# closed rules


@pytest.mark.parametrize("mu", SMALL)
def test_all_routes_to_x_j_E_mu_agree(mu: tuple[int, ...]) -> None:
    """The closed rule, multiplying out and re-expanding, and the table of subsets."""
    n = len(mu)
    polynomial = E.to_monomials(mu)
    for j in range(1, n + 1):
        by_rule = E.multiply_by_generator(mu, j)
        x_j = generator(n, j)
        assert multiplied_out(by_rule, n) == polynomial * x_j
        assert E.from_monomials(polynomial * x_j) == by_rule
        rows = E.monk_rows(mu, j)
        assert len(rows) == 2 ** (n - 1)
        present = [row for row in rows if row.obstacle is None]
        assert {row.target: row.coefficient for row in present} == by_rule
        assert len({row.target for row in present}) == len(present) == len(by_rule)
        assert all(j in row.subset for row in rows)
        by_inverse = E.divide_by_generator(mu, j)
        assert E.from_monomials(polynomial * x_j.inverse()) == by_inverse
        back = linear(by_rule, lambda nu, j=j: E.divide_by_generator(nu, j))
        assert back == {mu: ONE}


@pytest.mark.parametrize("mu", SMALL)
def test_e_1_and_its_inverse(mu: tuple[int, ...]) -> None:
    n = len(mu)
    polynomial = E.to_monomials(mu)
    e_1 = total_polynomial(generator(n, j) for j in range(1, n + 1))
    inverse = total_polynomial(generator(n, j).inverse() for j in range(1, n + 1))
    assert E.from_monomials(polynomial * e_1) == E.multiply_by_e1(mu)
    assert E.from_monomials(polynomial * inverse) == E.multiply_by_inverse_e1(mu)


def test_vanishing_rows_name_the_obstacle() -> None:
    """x_1 E_(1,0,1): the part 1 of x_3's place meets an equal part where the rule says so."""
    for mu in SMALL:
        for row in E.monk_rows(mu, 1):
            if row.obstacle is None:
                value = ONE
                for _, factor in row.factors:
                    value = value * factor
                assert value == row.coefficient != 0
            else:
                carried, met = row.obstacle
                assert carried in row.subset and met not in row.subset
                # equal as they stand, or after crossing the end, where the part grows by 1
                assert mu[met - 1] - mu[carried - 1] == int(met < carried)
                assert row.coefficient.is_zero


def test_coefficients_of_the_rule_are_products() -> None:
    """No polynomial arithmetic: numbers, monomials and irreducible factors only."""
    found = E.multiply_by_generator((0, 1, 2, 3, 4, 5), 3)
    assert len(found) == 2**5
    for c in found.values():
        assert c.numerator_rest.is_one()
        assert all(f.order for f in c.factors)


def test_eigenvalues_and_weights() -> None:
    for mu in SMALL:
        n = len(mu)
        for i, (a, b) in enumerate(E.weights(mu), 1):
            assert a == mu[i - 1]
            assert E.eigenvalue_weight(mu, i) == (-a, n - b)
    assert E.quadratic((2, 1)) == (1 - q**2 * t**2) * (t - q**2 * t) / (1 - q**2 * t) ** 2
    assert E.mixing((1, -1)) == (1 - t) / (1 - q / t)


# from monomials


@settings(max_examples=effort(25))
@given(st.integers(1, 3).flatmap(lambda n: st.dictionaries(
    st.lists(st.integers(-1, 2), min_size=n, max_size=n).map(tuple), scalars(),
    min_size=1, max_size=3)))
def test_there_and_back(coefficients: dict[tuple[int, ...], Scalar]) -> None:
    n = len(next(iter(coefficients)))
    polynomial = multiplied_out(coefficients, n)
    assert E.from_monomials(polynomial) == {mu: c for mu, c in coefficients.items() if c}
    assert FAMILY.from_monomials(polynomial) == E.from_monomials(polynomial)


def test_monomials_in_E() -> None:
    """x_2 = E_(0,1) - (1-t)/(1-qt) E_(1,0), from E_(0,1) = x_2 + (1-t)/(1-qt) x_1."""
    assert E.from_monomials(generator(2, 2)) == {
        (0, 1): ONE, (1, 0): -(1 - t) / (1 - q * t)}
    assert E.from_monomials(LaurentPolynomial.zero(2, RING)) == {}


# the family


def test_family() -> None:
    assert FAMILY.check_index((0, -3, 5), 3) == (0, -3, 5)
    with pytest.raises(OutsideDomain) as caught:
        FAMILY.check_index((1, 0), 3)
    assert caught.value.code == "wrong-number-of-parts"
    assert FAMILY.times_generator((1, 0), 2, 2, 1) == E.multiply_by_generator((1, 0), 2)
    assert FAMILY.times_generator((1, 0), 2, 2, -1) == E.divide_by_generator((1, 0), 2)
    assert FAMILY.times_generator((1, 0), 2, 2, 2) is None
    order = sorted([(0, 1), (2, 0), (1, 1), (1, 0), (0, 2)], key=FAMILY.order_key)
    assert {sum(mu) for mu in order[:3]} == {2} and order[3:] == [(0, 1), (1, 0)]
