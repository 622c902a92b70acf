"""Laurent polynomials: ring axioms, one form, both routes of a product, division, maps, lines."""

from __future__ import annotations

from fractions import Fraction
from itertools import product

import pytest
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
    laurent_polynomials,
    nonzero_scalars,
    q,
    scalars,
    t,
)
from spanwright.kernel import budget, laurent
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import DivisionByZero, Mixed, NotAUnit, OverBudget, Pole
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.lines import divided_differences, lines
from spanwright.kernel.residues import WITNESS_PRIME, ModularPoint

N = 3
ROOT = Scalar.root_of_t()
POLYNOMIALS = laurent_polynomials(N)
NIL = LaurentPolynomial.zero(N, RING)
UNIT = LaurentPolynomial.constant(N, ONE)
x = [LaurentPolynomial.generator(N, RING, j) for j in (1, 2, 3)]
XS = (Fraction(2, 3), Fraction(-3, 5), Fraction(7, 2))


def same(a: LaurentPolynomial, b: LaurentPolynomial) -> None:
    """Equal, and the same data: the form is canonical."""
    assert a == b
    assert hash(a) == hash(b)
    assert (a - b).is_zero
    assert a.terms == b.terms and a.scale == b.scale


def value(f: LaurentPolynomial, xs: tuple[Fraction, ...] = XS) -> Fraction:
    """The value at a rational point, coefficient by coefficient."""
    result = Fraction(0)
    for exponents, c in f.items():
        term = at(c)
        for at_j, e in zip(xs, exponents, strict=True):
            term *= at_j**e
        result += term
    return result


@settings(max_examples=effort(40))
@given(POLYNOMIALS, POLYNOMIALS, POLYNOMIALS, scalars())
def test_ring_axioms(
    f: LaurentPolynomial, g: LaurentPolynomial, h: LaurentPolynomial, c: Scalar
) -> None:
    same(f + g, g + f)
    same((f + g) + h, f + (g + h))
    same(f * g, g * f)
    same((f * g) * h, f * (g * h))
    same(f * (g + h), f * g + f * h)
    same(f + NIL, f)
    same(f * UNIT, f)
    same(f - f, NIL)
    same(f * c, c * f)
    same(f.scaled(c), f * LaurentPolynomial.constant(N, c))
    same((f + g).scaled(c), f.scaled(c) + g.scaled(c))
    same(f * 3, f + f + f)


@settings(max_examples=effort(40))
@given(POLYNOMIALS, POLYNOMIALS)
def test_values_at_a_rational_point(f: LaurentPolynomial, g: LaurentPolynomial) -> None:
    assert value(f + g) == value(f) + value(g)
    assert value(f * g) == value(f) * value(g)
    assert value(-f) == -value(f)


@settings(max_examples=effort(40))
@given(POLYNOMIALS, scalars())
def test_equal_coefficients_are_one_object(f: LaurentPolynomial, c: Scalar) -> None:
    f = f + LaurentPolynomial.of_scalars(N, RING, {(k,) * N: c for k in range(3)})
    found = dict(f.items())
    assert found == {e: f.coefficient(e) for e in f.terms}
    assert len({id(c) for c in found.values()}) == len(
        {f.terms[e].repr() for e in f.terms})


@given(POLYNOMIALS, nonzero_scalars())
def test_the_form_is_canonical(f: LaurentPolynomial, c: Scalar) -> None:
    """Terms jointly primitive over a denominator that no common factor divides."""
    same(LaurentPolynomial.of_scalars(N, RING, dict(f.items())), f)
    same(f.scaled(c).scaled(c.inverse()), f)
    if not f:
        return
    terms = list(f.terms.values())
    common = terms[0]
    for term in terms[1:]:
        common = common.gcd(term)
    assert common.content() == 1 and not any(map(int, common.term_content().monomial(0)))
    for factor in f.scale.factors:
        assert common.gcd(factor.polynomial).is_one()
    assert f.scale.numerator_rest.is_one()


@settings(max_examples=effort(20))
@given(laurent_polynomials(3, n_terms=25), laurent_polynomials(3, n_terms=25))
def test_both_routes_of_a_product(f: LaurentPolynomial, g: LaurentPolynomial) -> None:
    """One packed flint polynomial, and a double loop over the terms."""
    if not f or not g:
        return
    packed_f, low_f = laurent.packed(RING, N, f.terms)
    packed_g, low_g = laurent.packed(RING, N, g.terms)
    low = tuple(map(int.__add__, low_f, low_g))
    assert laurent.unpacked(RING, N, packed_f * packed_g, low) == laurent._convolved(
        f.terms, g.terms)
    assert laurent.unpacked(RING, N, packed_f, low_f) == f.terms


def test_a_large_product_takes_the_packed_route() -> None:
    f = (UNIT + x[0] + x[1].scaled(q) + x[2].scaled(t)) ** 4
    g = (UNIT - x[0].inverse() + x[1] * x[2]) ** 4
    assert len(f) * len(g) >= laurent.PACKING_THRESHOLD
    assert laurent.multiplied(f, g) == laurent._convolved(f.terms, g.terms)
    assert value(f * g) == value(f) * value(g)


@settings(max_examples=effort(40))
@given(POLYNOMIALS, POLYNOMIALS)
def test_exact_division(f: LaurentPolynomial, g: LaurentPolynomial) -> None:
    if not g:
        with pytest.raises(DivisionByZero):
            f.divided_exactly(g)
        return
    same((f * g).divided_exactly(g), f)
    if len(g) > 1:
        # g divides f g + 1 only if it is a unit, and a sum of two monomials or more is none
        with pytest.raises(NotAUnit):
            (f * g + UNIT).divided_exactly(g)


@settings(max_examples=effort(25))
@given(laurent_polynomials(2, n_terms=3), st.integers(0, 4), st.integers(0, 3))
def test_powers(f: LaurentPolynomial, j: int, k: int) -> None:
    same(f**j * f**k, f ** (j + k))
    same(f**1, f)
    same(f**0, LaurentPolynomial.constant(2, ONE))


def test_negative_powers_of_one_term() -> None:
    term = (x[0] * x[1] ** 2).scaled(q / (1 - t))
    same(term**-2, ((x[0] ** -2) * (x[1] ** -4)).scaled((1 - t) ** 2 / q**2))
    same(term.inverse() * term, UNIT)
    with pytest.raises(NotAUnit):
        (x[0] + x[1]) ** -1
    with pytest.raises(DivisionByZero):
        NIL.inverse()
    assert (NIL**3).is_zero and (NIL**0) == UNIT


def test_results_that_are_too_large_are_refused() -> None:
    with pytest.raises(OverBudget) as caught:
        (x[0] + x[1] + x[2]) ** 100_000
    assert caught.value.code == "too-many-terms"
    with pytest.raises(OverBudget):
        (x[0] + x[1]) ** 10**12
    same((x[0] * x[1]) ** 10**12, x[0] ** 10**12 * x[1] ** 10**12)
    f = (UNIT + x[0] + x[1] + x[2]) ** 6
    with budget.using(budget.Budget(max_terms=100)), pytest.raises(OverBudget):
        f * f
    with budget.using(budget.Budget(is_spent=lambda: "stopped")), pytest.raises(OverBudget) as out:
        f * f
    assert out.value.fact == "stopped"


def test_rings_of_different_size_do_not_mix() -> None:
    with pytest.raises(Mixed):
        x[0] + LaurentPolynomial.generator(2, RING, 1)
    with pytest.raises(Mixed):
        x[0] * LaurentPolynomial.generator(2, RING, 1)
    with pytest.raises(Mixed):
        LaurentPolynomial.monomial(3, (1, 0), ONE)
    assert x[0] != LaurentPolynomial.generator(2, RING, 1)
    assert x[0].__add__(1) is NotImplemented and x[0].__mul__("q") is NotImplemented


@settings(max_examples=effort(30))
@given(POLYNOMIALS, POLYNOMIALS)
def test_parameter_rings_unify(f: LaurentPolynomial, g: LaurentPolynomial) -> None:
    beta = Scalar.parameter(WIDER, "beta")
    for ring in (WIDER, RING.extended(has_root=True)):
        assert f.lift(ring) == f and hash(f.lift(ring)) == hash(f)
        assert f.lift(ring) + g == f + g
        assert f.lift(ring) * g == f * g
    same((f.scaled(beta) + g.scaled(beta)).scaled(1 / beta).lift(WIDER), (f + g).lift(WIDER))
    lifted = f.scaled(ROOT) * g.scaled(ROOT)
    same(lifted, (f * g).scaled(t))
    assert lifted.is_zero or lifted.ring is RING
    same((f.scaled(1 + ROOT)).scaled(1 - ROOT), f.scaled(1 - t))


def test_reading() -> None:
    f = (x[0] ** 2 * x[2]).scaled(q / (1 - t)) - x[1].inverse() + UNIT.scaled(t)
    assert f.support() == [(2, 0, 1), (0, 0, 0), (0, -1, 0)]
    assert f.coefficient((2, 0, 1)) == q / (1 - t)
    assert f.coefficient((0, -1, 0)) == -1
    assert f.coefficient((5, 5, 5)) == 0
    assert f.degrees() == {3, 0, -1}
    assert f.lowest() == (0, -1, 0)
    assert f.as_scalar() is None and UNIT.scaled(q).as_scalar() == q and NIL.as_scalar() == 0
    assert (x[0] - x[1] * 3).has_integer_terms() and not (x[0] - x[1].scaled(q)).has_integer_terms()
    assert bool(f) and not bool(NIL) and len(f) == 3
    assert LaurentPolynomial.of_integers(3, RING, {(1, 0, 0): 2, (0, 1, 0): 0}) == x[0] * 2
    assert "LaurentPolynomial" in repr(f)


@settings(max_examples=effort(30))
@given(POLYNOMIALS, nonzero_scalars())
def test_evaluation(f: LaurentPolynomial, c: Scalar) -> None:
    """In one variable after another, or in all at once."""
    images = {1: Scalar.number(RING, 2, 3), 2: Scalar.number(RING, -3, 5),
              3: Scalar.number(RING, 7, 2)}
    everywhere = f.evaluate(images).as_scalar()
    assert everywhere is not None and at(everywhere) == value(f)
    stepwise = f
    for j, image in images.items():
        stepwise = stepwise.evaluate({j: image})
    same(stepwise, f.evaluate(images))
    # a homomorphism
    same((f * f).evaluate({2: c}), f.evaluate({2: c}) * f.evaluate({2: c}))


def test_evaluation_at_zero() -> None:
    f = x[0] ** 2 + x[1].scaled(q)
    same(f.evaluate({1: ZERO}), x[1].scaled(q))
    with pytest.raises(Pole) as caught:
        (x[0] ** -3 + x[1]).evaluate({1: ZERO})
    assert caught.value.order == 3


@settings(max_examples=effort(30))
@given(POLYNOMIALS)
def test_substitution_acts_on_coefficients(f: LaurentPolynomial) -> None:
    images = {"q": t**2, "t": q * t}
    same(f.substitute_parameters({"q": q**-1}).substitute_parameters({"q": q**-1}), f)
    try:
        expected = {e: c.substitute(images) for e, c in f.items()}
    except Pole:
        with pytest.raises(Pole):
            f.substitute_parameters(images)
        return
    same(f.substitute_parameters(images), LaurentPolynomial.of_scalars(N, RING, expected))


def test_poles_of_coefficients_cancel_over_the_common_denominator() -> None:
    f = x[0].scaled(1 / (1 - q)) + x[1]
    with pytest.raises(Pole):
        f.substitute_parameters({"q": ONE})
    same((f - x[0].scaled(1 / (1 - q))).substitute_parameters({"q": ONE}), x[1])


@settings(max_examples=effort(30))
@given(POLYNOMIALS, st.permutations(range(N)))
def test_maps_of_exponents(f: LaurentPolynomial, order: list[int]) -> None:
    moved = f.moved(lambda e: tuple(e[k] for k in order))
    assert value(moved, tuple(XS[k] for k in order)) == value(f)
    same(moved.moved(lambda e: tuple(e[order.index(k)] for k in range(N))), f)
    same(f.shifted((1, -2, 0)), f * x[0] * x[1] ** -2)
    same(f.map_coefficients(lambda c: c * q), f.scaled(q))


@settings(max_examples=effort(30))
@given(POLYNOMIALS)
def test_residues(f: LaurentPolynomial) -> None:
    prime = WITNESS_PRIME

    def residue(a: Fraction) -> int:
        return a.numerator * pow(a.denominator, -1, prime) % prime

    root = 123_456_789
    point = ModularPoint({"q": residue(POINT["q"]), "t": root})
    xs = {j: residue(a) for j, a in enumerate(XS, 1)}
    expected = 0
    for e, c in f.items():
        term = c.modular(point)
        for j, k in enumerate(e, 1):
            term = term * pow(xs[j], k, prime) % prime
        expected += term
    assert f.modular(point, xs) == expected % prime


@settings(max_examples=effort(40))
@given(POLYNOMIALS, st.integers(1, N - 1))
def test_divided_differences_on_lines(f: LaurentPolynomial, i: int) -> None:
    """(x_i - x_(i+1)) d_i f = f - s_i f, and the lines give the terms back."""
    assert {line.exponents(k): c for line in lines(f.terms, i)
            for k, c in line.coefficients.items()} == f.terms
    terms = {}
    for line in lines(f.terms, i):
        for k, c in divided_differences(line).items():
            terms[(*line.before, k, line.size - 1 - k, *line.after)] = c
    found = LaurentPolynomial.reduced(N, RING, terms, f.scale)
    swapped = f.moved(lambda e: (*e[: i - 1], e[i], e[i - 1], *e[i + 1 :]))
    same(found * (x[i - 1] - x[i]), f - swapped)


@pytest.mark.parametrize(("a", "b"), list(product((-2, 0, 3), repeat=2)))
def test_divided_difference_of_a_monomial(a: int, b: int) -> None:
    """d_1(x_1^a x_2^b), a > b: the sum of x_1^(a+b-1-k) x_2^k for b <= k < a."""
    (line,) = lines({(a, b): RING.one}, 1)
    low, high, sign = (b, a, 1) if a > b else (a, b, -1)
    found = {k: int(c.coefficient(0)) for k, c in divided_differences(line).items()}
    assert found == dict.fromkeys(range(low, high), sign)


def test_what_cannot_be_held_is_not_begun() -> None:
    one = UNIT
    with pytest.raises(OverBudget, match="1,000,001 terms with numbers of up to 301,0"):
        (x[0] + one.scaled(q)) ** 10**6
    with pytest.raises(OverBudget, match="1,003,003,001 terms"):
        laurent.check_product([(y + one) ** 1000 for y in x])
    with budget.using(budget.Budget(max_bytes=10**5)), pytest.raises(OverBudget):
        (x[0] + x[1]) ** 3000


@given(POLYNOMIALS, POLYNOMIALS, st.integers(1, 4))
def test_sizes_are_never_guessed_too_small(
    f: LaurentPolynomial, g: LaurentPolynomial, exponent: int
) -> None:
    if f and g:
        assert len(f * g) <= laurent._box([f.terms, g.terms])
        assert len(f**exponent) <= laurent._box([f.terms], exponent)
        laurent.check_product([f, g])


def test_a_homogeneous_product_is_not_refused_for_its_box() -> None:
    told: list[str] = []
    f = (x[0] + x[1] + x[2]) ** 20
    with budget.using(budget.Budget(max_terms=4_000, report=told.append)):
        assert len(f * f * f) == 62 * 61 // 2
        assert told[-1] == "a product of about 1,891 terms"
        assert len((x[0] + x[1] + x[2] + UNIT) ** 26) == 29 * 28 * 27 // 6


def test_what_is_reached_reads_well() -> None:
    told: list[str] = []
    for what in ("this expansion", "this product"):
        budget.Budget(report=told.append).check_terms(1_500, what)
    assert told == ["an expansion of about 1,500 terms", "a product of about 1,500 terms"]
