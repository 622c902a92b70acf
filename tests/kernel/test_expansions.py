"""Expansions are vectors: axioms, order of terms, the polynomial they stand for."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from kernel_values import ONE, RING, WIDER, ZERO, q, scalars, t
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import Mixed, OutsideDomain
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial

E, KAPPA = family("E"), family("kappa")
N = 3
TERMS = st.dictionaries(st.tuples(*[st.integers(-1, 2)] * N), scalars(), max_size=4)
EXPANSIONS = TERMS.map(lambda terms: Expansion(E, N, terms))
NIL = Expansion(E, N, {})


def same(a: Expansion, b: Expansion) -> None:
    """Equal, hashed alike, and without zero coefficients."""
    assert a == b and hash(a) == hash(b)
    assert (a - b).is_zero
    assert all(not c.is_zero for c in a.terms.values())


@settings(max_examples=effort(40))
@given(EXPANSIONS, EXPANSIONS, EXPANSIONS, scalars(), scalars())
def test_vector_space_axioms(
    a: Expansion, b: Expansion, c: Expansion, u: Scalar, v: Scalar
) -> None:
    same((a + b) + c, a + (b + c))
    same(a + b, b + a)
    same(a + NIL, a)
    same(a + (-a), NIL)
    same((a + b).scaled(u), a.scaled(u) + b.scaled(u))
    same(a.scaled(u + v), a.scaled(u) + a.scaled(v))
    same(a.scaled(u).scaled(v), a.scaled(u * v))
    same(a.scaled(ONE), a)
    same(a.map_coefficients(lambda d: d * u), a.scaled(u))


@settings(max_examples=effort(25))
@given(EXPANSIONS, EXPANSIONS, scalars())
def test_to_monomials_is_linear(a: Expansion, b: Expansion, u: Scalar) -> None:
    assert (a + b).to_monomials() == a.to_monomials() + b.to_monomials()
    assert a.scaled(u).to_monomials() == a.to_monomials().scaled(u)
    assert a.to_monomials().is_zero == a.is_zero


@settings(max_examples=effort(25))
@given(TERMS)
def test_reading(terms: dict[tuple[int, ...], Scalar]) -> None:
    expansion = Expansion(E, N, terms)
    present = {index: c for index, c in terms.items() if c}
    assert dict(expansion.items()) == present and len(expansion) == len(present)
    assert bool(expansion) == bool(present) == (not expansion.is_zero)
    assert expansion.support() == sorted(present, key=E.order_key)
    for index in terms:
        assert expansion.coefficient(index) == terms[index]
    assert expansion.coefficient((9, 9, 9)) == 0


def test_elements() -> None:
    element = Expansion.element(E, N, (1, 0, 2))
    assert element.terms == {(1, 0, 2): ONE}
    assert element.to_monomials() == E.to_monomials((1, 0, 2), N)
    assert "E" in repr(element)
    with pytest.raises(OutsideDomain):
        Expansion.element(E, N, (1, 0))
    assert NIL.to_monomials() == LaurentPolynomial.zero(N, RING)


def test_different_families_and_sizes_do_not_mix() -> None:
    e = Expansion.element(E, N, (1, 0, 0))
    assert e != Expansion.element(KAPPA, N, (1, 0, 0))
    assert e != Expansion.element(E, 2, (1, 0)) and e != 1
    with pytest.raises(Mixed):
        e + Expansion.element(KAPPA, N, (1, 0, 0))
    with pytest.raises(Mixed):
        e + Expansion.element(E, 2, (1, 0))


def test_coefficients_may_live_in_different_rings() -> None:
    beta, root = Scalar.parameter(WIDER, "beta"), Scalar.root_of_t()
    e = Expansion(E, N, {(1, 0, 0): beta, (0, 1, 0): root, (0, 0, 1): ZERO})
    assert len(e) == 2
    same(e.scaled(root).scaled(1 / (root * beta)).scaled(beta), e)
    same(e - Expansion(E, N, {(1, 0, 0): beta}), Expansion(E, N, {(0, 1, 0): root}))
    assert e.to_monomials().coefficient((0, 1, 0)) == root
    assert e.to_monomials().coefficient((1, 0, 0)) == beta + root * (1 - t) / (1 - q * t**2)
