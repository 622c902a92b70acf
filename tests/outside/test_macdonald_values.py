"""E_mu against its definition, the fillings formula, evaluations, limits and published values.

The second opinion is sympy's arithmetic throughout (tests/sympy_operators.py).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from itertools import product
from typing import Any

import pytest
import sympy
from sympy.polys.matrices import DomainMatrix

import sympy_operators as by_sympy
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.nonsymmetric_macdonald import to_monomials
from spanwright.kernel.indices import compositions, decreasing, ranks, swapped
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing
from sympy_operators import FIELD, T, T_inverse, Y, isobaric, polynomial, q, ring_of, scalar, t

RING = ParameterRing.get()
ZERO, ONE = Scalar.zero(RING), Scalar.one(RING)
OUR_Q, OUR_T = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")

Index = tuple[int, ...]
POSITIVE: list[Index] = [
    *product(range(5), repeat=2), *product(range(3), repeat=3), *product(range(2), repeat=4)]
LARGER: list[Index] = [(1, 3, 0), (0, 1, 3), (2, 0, 1, 1), (0, 2, 0, 1)]


def box_arms(mu: Index) -> Iterator[tuple[int, int, int, int]]:
    """(i, j, leg, arm) for the boxes (i, j) of the columns mu_i, i and j from 1.

    leg = mu_i - j; arm = #{r < i: j <= mu_r <= mu_i} + #{r > i: j - 1 <= mu_r < mu_i}.
    """
    for i, height in enumerate(mu, 1):
        for j in range(1, height + 1):
            arm = sum(j <= mu[r] <= height for r in range(i - 1)) + sum(
                j - 1 <= mu[r] < height for r in range(i, len(mu)))
            yield i, j, height - j, arm


# the definition: Cherednik, Nonsymmetric Macdonald polynomials (1995)


@pytest.mark.parametrize("mu", [*POSITIVE, *LARGER])
def test_eigenvector_of_every_Y(mu: Index) -> None:
    """Y_i E_mu = q^(-mu_i) t^(n - v_mu(i)) E_mu."""
    f, n = polynomial(to_monomials(mu)), len(mu)
    for i, (part, rank) in enumerate(zip(mu, ranks(mu), strict=True), 1):
        assert Y(f, i) == f * q**-part * t ** (n - rank)


@pytest.mark.parametrize("mu", list(product(range(-2, 2), repeat=2)))
def test_eigenvector_with_negative_parts(mu: Index) -> None:
    """Y_i (x_1 ... x_n)^k = q^(-k) (x_1 ... x_n)^k Y_i, so the eigenvalues are the same."""
    f = polynomial(to_monomials(mu).shifted((3, 3)))
    for i, (part, rank) in enumerate(zip(mu, ranks(mu), strict=True), 1):
        assert Y(f, i) == f * q ** (-part - 3) * t ** (2 - rank)


@pytest.mark.parametrize("mu", [
    (0, 1), (1, 1), (2, 0), (0, 2), (1, 2), (0, 3), (0, 0, 1), (1, 0, 1), (0, 2, 0), (0, 1, 2),
    (0, 0, 1, 1)])
def test_the_eigenproblem_solved_by_sympy(mu: Index) -> None:
    """The monic common eigenvector on all monomials of the degree, as a null space over Q(q, t)."""
    n = len(mu)
    monomials = list(compositions(sum(mu), n))
    ring = ring_of(n)
    rows: list[list[Any]] = []
    for i, (part, rank) in enumerate(zip(mu, ranks(mu), strict=True), 1):
        columns = []
        for e in monomials:
            x_e = ring.from_dict({e: FIELD.one})
            image = Y(x_e, i) - x_e * q**-part * t ** (n - rank)
            columns.append([image.coeff(ring.from_dict({m: FIELD.one})) for m in monomials])
        rows += [list(row) for row in zip(*columns, strict=True)]
    domain = FIELD.to_domain()
    matrix = DomainMatrix(rows, (len(rows), len(monomials)), domain)
    null_space = matrix.nullspace().to_list()
    assert len(null_space) == 1
    vector = dict(zip(monomials, null_space[0], strict=True))
    assert {e: c / vector[mu] for e, c in vector.items() if c} == {
        e: scalar(c) for e, c in to_monomials(mu).items()}


# Haglund, Haiman and Loehr, A combinatorial formula for nonsymmetric Macdonald polynomials,
# Amer. J. Math. 130 (2008), 359-383; the statement from memory


def by_fillings(mu: Index) -> dict[Index, Any]:
    """The sum over non-attacking fillings of the columns mu_i with entries 1, ..., n.

    Row 0 is the basement, i in column i. Boxes attack in the same row, and (i, j) attacks
    (r, j - 1) with r > i. Reading order: rows from the top, each from right to left.
    """
    n = len(mu)
    statistics = {(i, j): (leg, arm) for i, j, leg, arm in box_arms(mu)}
    basement = [(i, 0) for i in range(1, n + 1)]
    boxes = sorted(statistics, key=lambda box: (-box[1], -box[0]))
    places = boxes + sorted(basement, reverse=True)
    attacking = [
        (a, b) for k, a in enumerate(places) for b in places[k + 1 :]
        if a[1] == b[1] or (a[1] == b[1] + 1 and b[0] > a[0])]
    found: dict[Index, Any] = {}
    for entries in product(range(1, n + 1), repeat=len(boxes)):
        sigma = dict(zip(boxes, entries, strict=True)) | {(i, 0): i for i, _ in basement}
        if any(sigma[a] == sigma[b] for a, b in attacking):
            continue
        descents = [(i, j) for i, j in boxes if sigma[i, j] > sigma[i, j - 1]]
        major = sum(statistics[box][0] + 1 for box in descents)
        inversions = sum(sigma[a] > sigma[b] for a, b in attacking)
        inversions -= sum(mu[i] <= mu[j] for i in range(n) for j in range(i + 1, n))
        inversions -= sum(statistics[box][1] for box in descents)
        coinversions = sum(arm for _, arm in statistics.values()) - inversions
        weight = q**major * t**coinversions
        for i, j in boxes:
            if sigma[i, j] != sigma[i, j - 1]:
                leg, arm = statistics[i, j]
                weight = weight * (1 - t) / (1 - q ** (leg + 1) * t ** (arm + 1))
        count = Counter(entries)
        exponents = tuple(count[value] for value in range(1, n + 1))
        found[exponents] = found.get(exponents, FIELD.zero) + weight
    return {e: c for e, c in found.items() if c}


@pytest.mark.parametrize("mu", [
    *product(range(4), repeat=2), *(mu for mu in product(range(3), repeat=3) if sum(mu) <= 5),
    (1, 3, 0), (0, 1, 3), *product(range(2), repeat=4), (0, 2, 0, 1)])
def test_fillings_formula(mu: Index) -> None:
    assert {e: scalar(c) for e, c in to_monomials(mu).items()} == by_fillings(mu)


@pytest.mark.parametrize("mu", [*POSITIVE, *LARGER, (0, 2, 3, 5)])
def test_integral_form(mu: Index) -> None:
    """prod over boxes of (1 - q^(leg+1) t^(arm+1)), times E_mu, lies in Z[q, t][x]: Knop,
    Integrality of two variable Kostka functions (1997); the product as in the fillings formula.
    """
    factor = ONE
    for _, _, leg, arm in box_arms(mu):
        factor = factor * Scalar.one_minus(RING, (arm + 1, leg + 1))
    assert to_monomials(mu).scaled(factor).scale.is_polynomial


# evaluation and duality: Cherednik (1995); statements from memory


def evaluated(mu: Index, weights: list[Scalar]) -> Scalar:
    """E_mu at x_j = weights[j - 1]."""
    value = to_monomials(mu).evaluate(dict(enumerate(weights, 1))).as_scalar()
    assert value is not None
    return value


@pytest.mark.parametrize("mu", [*POSITIVE, *LARGER])
def test_evaluation_at_powers_of_t(mu: Index) -> None:
    """E_mu(1, t, ..., t^(n-1)) = t^n(lam) prod_lam (1 - q^j t^(n+1-i)) / prod_mu (1 - q^(l+1)
    t^(a+1)), lam the decreasing rearrangement, n(lam) = sum (i - 1) lam_i.
    """
    n, lam = len(mu), decreasing(mu)
    expected = OUR_T ** sum(i * part for i, part in enumerate(lam))
    for i, part in enumerate(lam, 1):
        for j in range(1, part + 1):
            expected = expected * Scalar.one_minus(RING, (n + 1 - i, j))
    for _, _, leg, arm in box_arms(mu):
        expected = expected / Scalar.one_minus(RING, (arm + 1, leg + 1))
    assert evaluated(mu, [OUR_T**j for j in range(n)]) == expected


@pytest.mark.parametrize("indices", [
    list(product(range(-1, 2), repeat=2)),
    [(0, 0, 1), (0, 1, 2), (2, 0, 1), (1, 1, 0), (-1, 0, 1)]])
def test_duality(indices: list[Index]) -> None:
    """E_mu(u(nu))/E_mu(u(0)) = E_nu(u(mu))/E_nu(u(0)), u_i(mu) = q^mu_i t^(v_mu(i))."""

    def spectrum(mu: Index) -> list[Scalar]:
        return [OUR_Q**part * OUR_T**rank for part, rank in zip(mu, ranks(mu), strict=True)]

    def normalised(mu: Index, nu: Index) -> Scalar:
        return evaluated(mu, spectrum(nu)) / evaluated(mu, spectrum((0,) * len(mu)))

    for mu, nu in product(indices, repeat=2):
        assert normalised(mu, nu) == normalised(nu, mu)


# limits


def at(mu: Index, **images: Scalar) -> LaurentPolynomial:
    """E_mu at special parameters, one after another."""
    f = to_monomials(mu)
    for name, image in images.items():
        f = f.substitute_parameters({name: image})
    return f


def at_infinity(mu: Index, *names: str) -> LaurentPolynomial:
    """E_mu with the named parameters inverted and then 0."""
    f = to_monomials(mu)
    for name in names:
        f = f.substitute_parameters({name: Scalar.parameter(RING, name) ** -1})
        f = f.substitute_parameters({name: ZERO})
    return f


def descents(mu: Index) -> list[int]:
    """The i with mu_i > mu_(i+1)."""
    return [i for i in range(1, len(mu)) if mu[i - 1] > mu[i]]


@pytest.mark.parametrize("mu", [*POSITIVE, *LARGER])
def test_limits_follow_operators(mu: Index) -> None:
    """q = 0, q = infinity and t = 0 by Hecke and isobaric operators: Ion, Nonsymmetric Macdonald
    polynomials and Demazure characters (2003); statements from memory.
    """
    lam = decreasing(mu)
    increasing = lam[::-1]
    ring = ring_of(len(mu))
    assert polynomial(at(lam, q=ZERO)) == ring.from_dict({lam: FIELD.one})
    assert polynomial(at_infinity(increasing, "q")) == ring.from_dict({increasing: FIELD.one})
    assert at(mu, t=ONE) == LaurentPolynomial.monomial(len(mu), mu, ONE)
    for i in descents(mu):
        nu = swapped(mu, i)
        assert polynomial(at(nu, q=ZERO)) == T_inverse(polynomial(at(mu, q=ZERO)), i) * t
        assert polynomial(at_infinity(nu, "q")) == T(polynomial(at_infinity(mu, "q")), i)
        assert polynomial(at(nu, t=ZERO)) == isobaric(polynomial(at(mu, t=ZERO)), i)


@pytest.mark.parametrize("mu", [*POSITIVE, *LARGER])
def test_t_zero_has_whole_coefficients(mu: Index) -> None:
    """Coefficients in N[q] at t = 0: Demazure characters of affine type (Sanderson 2000, Ion)."""
    f = at(mu, t=ZERO)
    for _, c in f.items():
        assert c.is_polynomial
        assert all(coefficient > 0 for coefficient in c.numerator().expanded_rest().coeffs())


def key(mu: Index) -> Any:
    """kappa_mu by isobaric operators: Demazure (1974); Lascoux and Schuetzenberger (1990)."""
    for i in range(1, len(mu)):
        if mu[i - 1] < mu[i]:
            return isobaric(key(swapped(mu, i)), i)
    return ring_of(len(mu)).from_dict({mu: FIELD.one})


def atom(mu: Index) -> Any:
    """The standard atom, by pi_i - 1: Lascoux and Schuetzenberger (1990)."""
    for i in range(1, len(mu)):
        if mu[i - 1] < mu[i]:
            f = atom(swapped(mu, i))
            return isobaric(f, i) - f
    return ring_of(len(mu)).from_dict({mu: FIELD.one})


@pytest.mark.parametrize("mu", [*POSITIVE, *LARGER])
def test_keys_and_atoms(mu: Index) -> None:
    """q = t = 0 gives the key, infinity the reversed atom, in either order of the limits."""
    assert polynomial(at(mu, q=ZERO, t=ZERO)) == key(mu) == polynomial(at(mu, t=ZERO, q=ZERO))
    reversed_atom = atom(mu[::-1])
    expected = reversed_atom.ring.from_dict({e[::-1]: c for e, c in reversed_atom.terms()})
    assert polynomial(at_infinity(mu, "q", "t")) == expected
    assert polynomial(at_infinity(mu, "t", "q")) == expected


def elementary(n: int, degree: int) -> LaurentPolynomial:
    """e_degree in n variables."""
    return LaurentPolynomial.of_integers(
        n, RING, {e: 1 for e in product(range(2), repeat=n) if sum(e) == degree})


@pytest.mark.parametrize("mu", POSITIVE)
def test_q_one_factors(mu: Index) -> None:
    """q = 1: E_mu = E_std(mu) times elementary symmetric polynomials, and E of an increasing index
    is the product of the e_(lam'_j), whatever t is (no source at hand).
    """
    n = len(mu)
    values = sorted({0, *mu})
    standard = tuple(values.index(part) for part in mu)
    expected = at(standard, q=ONE)
    for low, high in zip(values, values[1:], strict=False):
        expected = expected * elementary(n, sum(part >= high for part in mu)) ** (high - low - 1)
    assert at(mu, q=ONE) == expected
    lam = decreasing(mu)
    columns = [sum(part > k for part in lam) for k in range(max(lam))]
    whole = LaurentPolynomial.constant(n, ONE)
    for height in columns:
        whole = whole * elementary(n, height)
    assert at(lam[::-1], q=ONE) == whole


# published values


@pytest.mark.parametrize("n", [1, 2, 3, 4, 5])
def test_E_of_one_box(n: int) -> None:
    """E_(eps_i) = x_i + (1-t)/(1 - q t^(n+1-i)) sum_(j<i) x_j: Haglund, Haiman and Loehr (2008)
    in their normalisation; E_(-eps_i) = 1/x_i + (1-t)/(1 - q t^i) sum_(j>i) 1/x_j by inversion.
    """
    def unit(i: int, sign: int) -> Index:
        return tuple(sign * int(k == i) for k in range(1, n + 1))

    for i in range(1, n + 1):
        assert {e: scalar(c) for e, c in to_monomials(unit(i, 1)).items()} == {
            unit(i, 1): FIELD.one,
            **{unit(j, 1): (1 - t) / (1 - q * t ** (n + 1 - i)) for j in range(1, i)}}
        assert {e: scalar(c) for e, c in to_monomials(unit(i, -1)).items()} == {
            unit(i, -1): FIELD.one,
            **{unit(j, -1): (1 - t) / (1 - q * t**i) for j in range(i + 1, n + 1)}}


PUBLISHED: dict[Index, dict[Index, Any]] = {
    # by hand from the recursion
    (2, 0): {(2, 0): FIELD.one, (1, 1): q * (1 - t) / (1 - q * t)},
    (0, 2): {
        (0, 2): FIELD.one,
        (1, 1): (1 - t) * (1 + q) / (1 - q**2 * t),
        (2, 0): (1 - t) / (1 - q**2 * t)},
    (1, 1, 1): {(1, 1, 1): FIELD.one},
}


@pytest.mark.parametrize("mu", PUBLISHED)
def test_small_table(mu: Index) -> None:
    assert {e: scalar(c) for e, c in to_monomials(mu).items()} == PUBLISHED[mu]


# Jack polynomials: Opdam, Harmonic analysis for certain representations of graded Hecke algebras
# (1995); Knop and Sahi, A recursion and a combinatorial formula for Jack polynomials (1997)


@pytest.mark.parametrize(("top", "bottom"), [(1, 1), (2, 1), (3, 1), (1, 2), (3, 2)])
def test_jack_limit(top: int, bottom: int) -> None:
    """q = t^alpha, t -> 1: an eigenfunction of alpha x_i d/dx_i + sum_(p>i) x_i/(x_i - x_p)
    (1 - s_ip) + sum_(p<i) x_p/(x_i - x_p) (1 - s_ip) + i - n, eigenvalue alpha mu_i + v_mu(i) - n.
    """
    alpha = sympy.Rational(top, bottom)
    for mu in [*product(range(4), repeat=2), *product(range(3), repeat=3), (0, 2, 0, 1)]:
        n = len(mu)
        limit = to_monomials(mu).substitute_parameters({"q": OUR_T**top, "t": OUR_T**bottom})
        limit = limit.substitute_parameters({"t": ONE})
        ring, *x = sympy.ring([f"x{j}" for j in range(n)], sympy.QQ)
        f = ring.from_dict({
            e: sympy.QQ(c.as_fraction().numerator, c.as_fraction().denominator)
            for e, c in limit.items()})
        for i in range(n):
            image = f.diff(x[i]) * x[i] * alpha + f * (i + 1 - n)
            for p in range(n):
                if p != i:
                    exchanged = ring.from_dict({_exchanged(e, i, p): c for e, c in f.terms()})
                    quotient = (f - exchanged).exquo(x[i] - x[p])
                    image += quotient * (x[i] if p > i else x[p])
            assert image == f * (alpha * mu[i] + ranks(mu)[i] - n)


def _exchanged(e: Index, i: int, p: int) -> Index:
    found = list(e)
    found[i], found[p] = found[p], found[i]
    return tuple(found)


# the second opinion itself


@pytest.mark.parametrize("operator", [T, T_inverse])
def test_sympy_operators_satisfy_the_relations(operator: Callable[[Any, int], Any]) -> None:
    """Quadratic, braid and commutation relations, on monomials in three variables."""
    ring = ring_of(3)
    for e in product(range(3), repeat=3):
        f = ring.from_dict({e: FIELD.one})
        assert T(T(f, 1), 1) == T(f, 1) * (t - 1) + f * t
        assert operator(operator(operator(f, 1), 2), 1) == operator(operator(operator(f, 2), 1), 2)
        assert T(T_inverse(f, 2), 2) == f
        assert Y(Y(f, 1), 2) == Y(Y(f, 2), 1)
        assert T_inverse(Y(T_inverse(f, 1), 1), 1) * t == Y(f, 2)
        assert by_sympy.T_pi(T(f, 1)) == T(by_sympy.T_pi(f), 2)
    assert Y(ring.one, 2) == ring.one * t
