"""Random scalars and Laurent polynomials for tests, and their values at rational points."""

from __future__ import annotations

import re
from collections.abc import Mapping
from fractions import Fraction

from hypothesis import strategies as st

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing
from spanwright.rendering.scalars import PLAIN, scalar_text

RING = ParameterRing.get()
WIDER = RING.extended(["beta", "y_1"])
q, t = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")
ZERO, ONE = Scalar.zero(RING), Scalar.one(RING)

# No zero and no one of a denominator met here: 1 - q^a t^b vanishes at no such point.
POINT = {"q": Fraction(3, 7), "t": Fraction(-5, 11), "beta": Fraction(2, 13), "y_1": Fraction(7, 3)}


def polynomials(ring: ParameterRing = RING, top: int = 3) -> st.SearchStrategy[Scalar]:
    """Polynomials in the parameters with few terms and small coefficients, as scalars."""
    exponents = st.tuples(*[st.integers(0, top)] * len(ring.names))
    return st.dictionaries(exponents, st.integers(-4, 4), max_size=4).map(
        lambda terms: Scalar.of_polynomial(
            ring, ring.polynomial({e: c for e, c in terms.items() if c})))


def binomials(ring: ParameterRing = RING) -> st.SearchStrategy[Scalar]:
    """1 - m for Laurent monomials m other than 1, to a power from -2 to 2."""
    exponents = st.tuples(*[st.integers(-4, 4)] * len(ring.names)).filter(any)
    return st.tuples(exponents, st.sampled_from([-2, -1, 1, 2])).map(
        lambda pair: Scalar.one_minus(ring, pair[0]) ** pair[1])


def monomial_scalars(ring: ParameterRing = RING) -> st.SearchStrategy[Scalar]:
    """A rational number times a Laurent monomial."""
    return st.tuples(
        st.tuples(*[st.integers(-3, 3)] * len(ring.names)), st.integers(-6, 6), st.integers(1, 6),
    ).map(lambda row: Scalar.monomial_of(ring, row[0], row[1]) / row[2])


def scalars(ring: ParameterRing = RING) -> st.SearchStrategy[Scalar]:
    """Products of a monomial, a polynomial, up to two binomials, over a polynomial at times."""
    denominators = st.one_of(st.just(Scalar.one(ring)), polynomials(ring, 2).filter(bool))
    return st.tuples(
        monomial_scalars(ring), polynomials(ring),
        st.lists(binomials(ring), max_size=2), denominators,
    ).map(lambda row: row[0] * row[1] * _product(ring, row[2]) / row[3])


def nonzero_scalars(ring: ParameterRing = RING) -> st.SearchStrategy[Scalar]:
    """Scalars other than 0."""
    return scalars(ring).filter(bool)


def _product(ring: ParameterRing, factors: list[Scalar]) -> Scalar:
    value = Scalar.one(ring)
    for factor in factors:
        value = value * factor
    return value


def laurent_polynomials(n: int, *, low: int = -2, n_terms: int = 4) -> st.SearchStrategy[
    LaurentPolynomial
]:
    """Laurent polynomials in n variables over Q(q, t)."""
    exponents = st.tuples(*[st.integers(low, 3)] * n)
    return st.dictionaries(exponents, scalars(), max_size=n_terms).map(
        lambda terms: LaurentPolynomial.of_scalars(n, RING, terms))


def plain(value: Scalar) -> str:
    """The scalar as Python and sympy read it."""
    return scalar_text(value, PLAIN)


def at(value: Scalar | str, point: Mapping[str, Fraction] = POINT) -> Fraction:
    """The value at a rational point, computed by Python from the printed form."""
    text = value if isinstance(value, str) else plain(value)
    names = {name: point[name.removesuffix("_")] for name in ("q", "t", "y_1", "beta_")}
    exact = re.sub(r"(?<!\w)\d+", lambda m: f"Fraction({m.group()})", text)
    return Fraction(eval(exact, {"Fraction": Fraction}, names))  # our own printed form
