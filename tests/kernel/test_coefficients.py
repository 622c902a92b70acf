"""Scalars: field axioms, one form for each value, cancellation, roots, substitution, residues."""

from __future__ import annotations

from fractions import Fraction

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from kernel_values import (
    ONE,
    POINT,
    RING,
    WIDER,
    ZERO,
    at,
    monomial_scalars,
    nonzero_scalars,
    plain,
    polynomials,
    q,
    scalars,
    t,
)
from spanwright.kernel import budget
from spanwright.kernel.coefficients import (
    Scalar,
    common_denominator,
    polynomial_of,
    total,
)
from spanwright.kernel.errors import DivisionByZero, OutsideDomain, OverBudget, Pole
from spanwright.kernel.factors import binomial_factors, cyclotomic, factorise, irreducible
from spanwright.kernel.parameters import ParameterRing, monomials
from spanwright.kernel.residues import WITNESS_PRIME, ModularPoint
from spanwright.rendering.scalars import PLAIN, TEX, TEXT, scalar_text

ROOT = Scalar.root_of_t()
SHOWS = ("short", "factored", "expanded")


def same(a: Scalar, b: Scalar) -> None:
    """Equal in every way that can be seen."""
    assert a == b
    assert hash(a) == hash(b)
    assert (a - b).is_zero
    for show in SHOWS:
        assert a.form(show) == b.form(show)
        for style in (TEXT, TEX):
            assert scalar_text(a, style, show) == scalar_text(b, style, show)


# the field


@settings(max_examples=effort(30))
@given(scalars(), scalars(), scalars())
def test_field_axioms(a: Scalar, b: Scalar, c: Scalar) -> None:
    same((a + b) + c, a + (b + c))
    same(a + b, b + a)
    same((a * b) * c, a * (b * c))
    same(a * b, b * a)
    same(a * (b + c), a * b + a * c)
    same(a + ZERO, a)
    same(a * ONE, a)
    assert (a - a).is_zero
    assert (a * ZERO).is_zero
    if a:
        same(a * a.inverse(), ONE)
        same((b / a) * a, b)
        same(a.inverse().inverse(), a)


@settings(max_examples=effort(100))
@given(scalars(WIDER), scalars(WIDER))
def test_arithmetic_at_a_rational_point(a: Scalar, b: Scalar) -> None:
    """The printed forms, evaluated by Python's fractions, obey the same arithmetic."""
    x, y = at(a), at(b)
    assert at(a + b) == x + y
    assert at(a - b) == x - y
    assert at(a * b) == x * y
    assert at(-a) == -x
    if b and y:
        assert at(a / b) == x / y
    for show in SHOWS:
        assert at(scalar_text(a, PLAIN, show)) == x


@settings(max_examples=effort(30))
@given(st.lists(scalars(), max_size=5))
def test_total_is_repeated_addition(summands: list[Scalar]) -> None:
    expected = ZERO
    for s in summands:
        expected = expected + s
    same(total(summands, RING), expected)
    same(total(reversed(summands), RING), expected)


@settings(max_examples=effort(40))
@given(nonzero_scalars(), st.integers(-3, 3), st.integers(-3, 3))
def test_powers(a: Scalar, j: int, k: int) -> None:
    same(a**j * a**k, a ** (j + k))
    same((a**j) ** k, a ** (j * k))


def test_numbers() -> None:
    half = Scalar.number(RING, 1, 2)
    assert half.as_fraction() == Fraction(1, 2)
    assert half.as_integer() is None
    assert (half + half).as_integer() == 1
    assert half == Fraction(1, 2) and Fraction(1, 2) == half
    assert (half * 2).is_one and not half.is_one
    assert hash(Scalar.number(RING, 7)) == hash(7)
    assert hash(half) == hash(Fraction(1, 2))
    assert ZERO == 0 and hash(ZERO) == hash(0)
    assert q != 1 and q.as_fraction() is None
    assert 1 - q == -(q - 1)
    assert 2 / q == 2 * q**-1
    assert q.__add__("q") is NotImplemented


# one form for each value


@settings(max_examples=effort(40))
@given(polynomials(), nonzero_scalars(), nonzero_scalars())
def test_common_factors_cancel(a: Scalar, b: Scalar, c: Scalar) -> None:
    """Multiplied and divided in several orders, the value comes back as itself."""
    same((a * b) / b, a)
    same((a * b * c) / (c * b), a)
    same((a / b) + (c / b), (a + c) / b)
    numerator = polynomial_of((a * b).numerator())
    same(Scalar.of_polynomial(RING, numerator) / (a * b).denominator(), a * b)


@settings(max_examples=effort(60))
@given(scalars())
def test_the_quotient_is_reduced(a: Scalar) -> None:
    """Against flint's own gcd."""
    same(a.numerator() / a.denominator(), a)
    top, bottom = polynomial_of(a.numerator()), polynomial_of(a.denominator())
    if a:
        assert top.gcd(bottom).is_one()
    assert a.numerator().is_polynomial and a.denominator().is_polynomial
    assert a.is_polynomial == a.denominator().is_one


def test_values_made_on_different_routes_print_alike() -> None:
    one_minus_qt = ONE - q * t
    routes = [
        (ONE - q**2 * t**2) / one_minus_qt,
        ONE + q * t,
        (ONE - (q * t) ** 4) / ((ONE + (q * t) ** 2) * one_minus_qt),
        Scalar.one_minus(RING, (2, 2)) * Scalar.one_minus(RING, (1, 1)).inverse(),
        total([ONE / one_minus_qt, -(q * t) ** 2 / one_minus_qt]),
    ]
    for route in routes:
        same(route, routes[0])
        assert scalar_text(route) == "1 + q t"
    long = (ONE + q + t) ** 6
    same(long, Scalar.of_polynomial(RING, polynomial_of(long)))


def test_products_of_binomials_stay_products() -> None:
    value = Scalar.one_minus(RING, (3, 5)) ** 4 / Scalar.one_minus(RING, (6, 10)) ** 2
    assert value.numerator_rest.is_one()
    assert scalar_text(value) == "(1 - q^5 t^3)^2/(1 + q^5 t^3)^2"
    assert scalar_text(value * Scalar.one_minus(RING, (3, 5)) ** -2) == "1/(1 + q^5 t^3)^2"


@settings(max_examples=effort(80))
@given(st.tuples(st.integers(-12, 12), st.integers(-12, 12)).filter(any))
def test_one_minus_a_monomial(exponents: tuple[int, int]) -> None:
    value = Scalar.one_minus(RING, exponents)
    same(value, ONE - Scalar.monomial_of(RING, exponents))
    assert at(value) == 1 - POINT["t"] ** exponents[0] * POINT["q"] ** exponents[1]


def test_one_minus_one_is_zero() -> None:
    assert Scalar.one_minus(RING, (0, 0)).is_zero


@settings(max_examples=effort(80))
@given(st.lists(st.tuples(st.integers(-5, 5), st.integers(-5, 5)).filter(any),
                min_size=1, max_size=5))
def test_binomial_factors_against_flint(directions: list[tuple[int, int]]) -> None:
    """The Newton polygon finds what flint's general factorisation finds."""
    product = ONE
    for exponents in directions:
        product = product * Scalar.one_minus(RING, exponents)
    polynomial = product.expanded_rest()
    unit, expected = polynomial.factor()
    assert abs(int(unit)) == 1
    assert binomial_factors(RING, polynomial) == {
        irreducible(RING, p if p.coefficient(len(p) - 1) > 0 else -p): m for p, m in expected}
    assert factorise(RING, polynomial)[2] == product.factors


@settings(max_examples=effort(60))
@given(polynomials())
def test_binomial_factors_refuses_the_rest(value: Scalar) -> None:
    """Only products of Phi_d(m) are recognised, and they all are."""
    if value.is_number:
        return
    _, _, polynomial = RING.split(polynomial_of(value.numerator()))
    if polynomial.is_one():
        return
    _, _, factors = factorise(RING, polynomial)
    is_product = all(f.order for f in factors)
    assert (binomial_factors(RING, polynomial) == factors) == is_product
    assert (binomial_factors(RING, polynomial) is not None) == is_product


@pytest.mark.parametrize("order", [1, 2, 6, 15, 105])
def test_cyclotomic_factors_are_recognised(order: int) -> None:
    """Phi_d(m) for m = q^2 t^3 and q^2/t^3, against sympy's cyclotomic polynomial."""
    x = sympy.Symbol("x")
    coefficients = [int(c) for c in sympy.Poly(sympy.cyclotomic_poly(order, x), x).all_coeffs()]
    degree = len(coefficients) - 1
    for direction in ((3, 2), (-3, 2), (0, 1), (1, 0)):
        factor = cyclotomic(RING, direction, order)
        terms = {tuple(d * (degree - k) for d in direction): c for k, c in enumerate(coefficients)}
        value = total(Scalar.monomial_of(RING, e, c) for e, c in terms.items())
        _, _, primitive = RING.split(polynomial_of(value.numerator()))
        assert primitive in (factor.polynomial, -factor.polynomial)
        assert irreducible(RING, factor.polynomial) is factor
        assert (factor.order, factor.direction) == (order, direction)


def test_large_binomials_are_refused() -> None:
    with pytest.raises(OverBudget):
        Scalar.one_minus(RING, (0, 10**9))
    with pytest.raises(OverBudget):
        (ONE - q**20_000).inverse()
    with pytest.raises(OverBudget):
        cyclotomic(RING, (0, 1), 10**6)


def test_powers_that_would_not_end_are_refused() -> None:
    with pytest.raises(OverBudget):
        (ONE + q + 2 * t) ** 10_000_000
    with pytest.raises(OverBudget) as caught:
        Scalar.number(RING, 3) ** 10_000_000
    assert caught.value.code == "number-too-long"
    with budget.using(budget.Budget(max_terms=10)), pytest.raises(OverBudget):
        (ONE + q + 2 * t) ** 10


# rings


@settings(max_examples=effort(40))
@given(scalars(), scalars())
def test_equality_and_hash_across_rings(a: Scalar, b: Scalar) -> None:
    for ring in (WIDER, RING.extended(has_root=True), WIDER.extended(has_root=True)):
        lifted = a.lift(ring)
        assert lifted.ring is ring
        assert lifted == a and a == lifted and hash(lifted) == hash(a)
        same(total([lifted]), a)
        assert (lifted == b) == (a == b)
        same(total([lifted, b.lift(ring)]), a + b)
        same(lifted * b, a * b)
    beta = Scalar.parameter(WIDER, "beta")
    assert scalar_text(a.lift(WIDER)) == scalar_text(a)
    same((a + beta) - beta, a)
    assert beta not in (a, b)
    assert (a * beta).parameters() == a.parameters() | ({"beta"} if a else set())


def test_rings_are_one_object_each() -> None:
    assert RING.extended(["b", "a"]) is RING.extended(["a"]).extended(["b"])
    assert RING.extended() is RING
    assert RING.extended(["a"]).union(RING.extended(["b"])) is RING.extended(["a", "b"])
    assert ParameterRing.get().exponents({"q": 2, "t": -1}) == (-1, 2)
    assert RING.extended(has_root=True).exponents({"q": 2, "t": -1}) == (-2, 2)
    with pytest.raises(OutsideDomain):
        RING.monomial((-1, 0))
    with pytest.raises(OutsideDomain):
        RING.polynomial({(0, -1): 1})
    assert monomials(RING.polynomial({(0, 1): 2, (3, 0): 1})) == [(3, 0), (0, 1)]


# t^(1/2)


@settings(max_examples=effort(40))
@given(scalars(), nonzero_scalars())
def test_root_of_t_descends(a: Scalar, b: Scalar) -> None:
    """(a + b r)(a - b r) = a^2 - b^2 t lies in Q(q, t) again, and so do sums and quotients."""
    plus, minus = a + b * ROOT, a - b * ROOT
    assert plus.ring.has_root
    same(plus * minus, a * a - b * b * t)
    assert (plus * minus).ring is RING
    same(plus + minus, 2 * a)
    same((plus - minus) / ROOT, 2 * b)
    if a:
        same((a * ROOT) / (b * ROOT), a / b)
    same(plus.inverse() * plus, ONE)


def test_root_of_t_squares_to_t() -> None:
    same(ROOT**2, t)
    same(ROOT**-4, t**-2)
    same((1 - t) / (1 - ROOT), 1 + ROOT)
    assert scalar_text(1 / ROOT) == "1/t^(1/2)"
    assert Scalar.one_minus(RING, (1, 0)).lift(ROOT.ring).factors.keys() == {
        *(1 - ROOT).inverse().factors, *(1 + ROOT).inverse().factors}


# substitution


FIELD, *GENERATORS = sympy.field("q, t", sympy.QQ)


def _in_sympy(value: Scalar, **names: object) -> object:
    """The printed form, evaluated in sympy's field of rational functions."""
    return eval(plain(value), dict(zip("qt", GENERATORS, strict=True)) | names)


@settings(max_examples=effort(40))
@given(scalars(), polynomials(top=2), nonzero_scalars())
def test_substitution_against_sympy(a: Scalar, top: Scalar, bottom: Scalar) -> None:
    image = top / bottom.numerator()
    q_image = FIELD(_in_sympy(image))
    try:
        expected = FIELD(_in_sympy(a, q=q_image))
    except ZeroDivisionError:
        with pytest.raises(OutsideDomain):
            a.substitute({"q": image})
        return
    assert _in_sympy(a.substitute({"q": image})) == expected


def _attempt(a: Scalar, images: dict[str, Scalar]) -> Scalar | None:
    try:
        return a.substitute(images)
    except OutsideDomain:
        return None


@settings(max_examples=effort(60))
@given(scalars(), scalars(), polynomials(top=1), monomial_scalars())
def test_substitution_is_a_homomorphism(a: Scalar, b: Scalar, u: Scalar, v: Scalar) -> None:
    images = {"q": u, "t": v}
    x, y = _attempt(a, images), _attempt(b, images)
    if x is not None and y is not None:
        same(x + y, (a + b).substitute(images))
        same(x * y, (a * b).substitute(images))
    swapped = {"q": t, "t": q}
    same(a.substitute(swapped).substitute(swapped), a)
    same(a.substitute({"q": q**-1}).substitute({"q": q**-1}), a)
    same(a.substitute({}), a)


def test_poles_and_indeterminate_values() -> None:
    with pytest.raises(Pole) as caught:
        (1 / (1 - q * t) ** 3).substitute({"q": t**-1})
    assert caught.value.order == 3
    with pytest.raises(OutsideDomain) as vague:
        ((1 - q) / (1 - t)).substitute({"q": ONE, "t": ONE})
    assert vague.value.code == "indeterminate"
    same(((1 - q**2) / (1 - q)).substitute({"q": ONE}), Scalar.number(RING, 2))
    same(q.substitute({"q": ZERO}), ZERO)
    with pytest.raises(DivisionByZero):
        ONE / ZERO
    with pytest.raises(DivisionByZero):
        Scalar.number(RING, 1, 0)


def test_substitution_with_roots() -> None:
    """t -> t^2 turns t^(1/2) into t; t -> q needs a root of q, which no ring here has."""
    same((1 + ROOT).substitute({"t": t**2}), 1 + t)
    same((1 + ROOT).substitute({"t": (1 + q) ** 2}), 2 + q)
    same((1 + ROOT).substitute({"t": q**2 * t}), 1 + q * ROOT)
    same((1 + t).substitute({"t": ROOT}), 1 + ROOT)
    with pytest.raises(OutsideDomain) as caught:
        (1 + ROOT).substitute({"t": q})
    assert caught.value.code == "no-root"


# residues


@settings(max_examples=effort(80))
@given(scalars(WIDER), st.integers(2, WITNESS_PRIME - 1), st.integers(2, 10**9))
def test_residues_agree(a: Scalar, u: int, v: int) -> None:
    """At small primes and at the large one, against Python's own fractions."""
    point = ModularPoint({"q": u, "t": v, "beta": 5, "y_1": 77})
    values = {"q": Fraction(u), "t": Fraction(v * v), "beta": Fraction(5), "y_1": Fraction(77)}
    try:
        exact = at(a, values)
    except ZeroDivisionError:
        return
    if exact.denominator % WITNESS_PRIME:
        expected = exact.numerator * pow(exact.denominator, -1, WITNESS_PRIME) % WITNESS_PRIME
        assert a.modular(point) == expected
    assert point.root("t") == v and point.parameter("t") == v * v % WITNESS_PRIME


def test_residue_of_a_pole() -> None:
    with pytest.raises(Pole):
        (1 / (q - 3)).modular(ModularPoint({"q": 3, "t": 2}))
    assert (q + ROOT).modular(ModularPoint({"q": 3, "t": 2}, prime=7)) == 5


@settings(max_examples=effort(40))
@given(st.lists(nonzero_scalars(), min_size=1, max_size=4))
def test_common_denominator(values: list[Scalar]) -> None:
    """Every value over it is a polynomial, and all of them share no factor with it."""
    scale = common_denominator(RING, values)
    cleared = [v / scale for v in values]
    assert all(c.is_polynomial for c in cleared)
    gcd = polynomial_of(cleared[0])
    for c in cleared[1:]:
        gcd = gcd.gcd(polynomial_of(c))
    assert polynomial_of(scale.denominator()).gcd(gcd).is_one()


def test_representation_names_what_is_inside() -> None:
    shown = repr(2 * q / (1 - t))
    assert "2" in shown and "q^1" in shown and "-1" in shown
