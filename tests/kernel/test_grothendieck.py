"""Laws of Grothendieck polynomials, the K-theoretic Monk rules against multiplying out."""

from __future__ import annotations

from itertools import product as pairs

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel.budget import Budget, using
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain, OverBudget
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families import grothendieck, schubert
from spanwright.kernel.families.base import linear
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import (
    extended,
    from_code,
    from_word,
    identity,
    length,
    longest,
    permutations,
    product,
    reduced_size,
)
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

G, S = family("G"), family("S")
RING = grothendieck.RING
BETA = grothendieck.beta_power(1)


def group(n: int) -> list[tuple[int, ...]]:
    return [reduced_size(w) for w in permutations(n)]


def x(n: int, j: int) -> LaurentPolynomial:
    return LaurentPolynomial.generator(n, RING, j)


def in_monomials(terms, n: int, of=G) -> LaurentPolynomial:
    return Expansion(of, n, terms).to_monomials()


def isobaric(f: LaurentPolynomial, i: int) -> LaurentPolynomial:
    """D_i f = d_i((1 + beta x_(i+1)) f) by its definition."""
    def exchange(e):
        return e[: i - 1] + (e[i], e[i - 1]) + e[i + 1 :]

    g = f + f * x(f.n, i + 1) * BETA
    change = g - g.moved(exchange)
    return change.divided_exactly(x(f.n, i) - x(f.n, i + 1)) if change else change


permutations_of = {
    n: st.permutations(range(1, n + 1)).map(lambda w: reduced_size(tuple(w))) for n in (4, 5)}


@st.composite
def polynomials(draw, n: int, degree: int) -> LaurentPolynomial:
    exponents = st.tuples(*[st.integers(0, degree)] * n)
    terms = {}
    for e in draw(st.lists(exponents, max_size=3, unique=True)):
        c = Scalar.number(RING, draw(st.integers(-4, 4)))
        for name in draw(st.lists(st.sampled_from(("q", "t", "beta")), max_size=2)):
            factor = Scalar.parameter(RING, name)
            c = draw(st.sampled_from([c * factor, c + factor, c / (factor - 1)]))
        terms[e] = c
    return LaurentPolynomial.of_scalars(n, RING, terms)


# the polynomials


def test_longest_element_and_isobaric_differences() -> None:
    for n in (3, 4):
        assert G.to_monomials(longest(n), n) == LaurentPolynomial.monomial(
            n, tuple(range(n - 1, -1, -1)), Scalar.one(RING))
        for w in group(n):
            f = G.to_monomials(w, n)
            for i in range(1, n):
                v, c = grothendieck.isobaric_difference(w, i)
                assert isobaric(f, i) == G.to_monomials(v, n).scaled(c)


def test_pipe_dreams_with_0_hecke_products() -> None:
    # all pipe dreams D with 0-Hecke product w, weight beta^(|D| - l(w)) x^D, for S_4
    n = 4
    boxes = [(i, j) for i in range(1, n) for j in range(n - 1, i - 1, -1)]
    sums: dict[tuple[int, ...], LaurentPolynomial] = {}
    for chosen in pairs((False, True), repeat=len(boxes)):
        w, e = identity(n), [0] * n
        for (i, j), is_crossing in zip(boxes, chosen, strict=True):
            if is_crossing:
                e[i - 1] += 1
                longer = product(w, from_word((j,), n))
                w = longer if length(longer) > length(w) else w
        term = LaurentPolynomial.monomial(
            n, tuple(e), grothendieck.beta_power(sum(e) - length(w)))
        sums[w] = sums[w] + term if w in sums else term
    assert len(sums) == 24
    for w, f in sums.items():
        assert G.to_monomials(reduced_size(w), n) == f


def test_beta_0_is_schubert_and_parts_are_degrees() -> None:
    for w in group(5):
        first, *higher = grothendieck.parts(w)
        assert first == schubert.polynomial(w)
        for k, part in enumerate(higher, 1):
            assert part
            assert {grothendieck.degree(key) for key in part} == {length(w) + k}
    f = G.to_monomials((1, 4, 3, 2), 3).substitute_parameters({"beta": Scalar.zero(RING)})
    assert f == S.to_monomials((1, 4, 3, 2), 3)


def test_simple_reflections_are_products() -> None:
    for r in range(1, 6):
        left = LaurentPolynomial.constant(r, Scalar.one(RING))
        for i in range(1, r + 1):
            left = left * (LaurentPolynomial.constant(r, Scalar.one(RING)) + x(r, i) * BETA)
        g = G.to_monomials(from_code((0,) * (r - 1) + (1,)), r)
        assert left == LaurentPolynomial.constant(r, Scalar.one(RING)) + g * BETA


def test_same_values_after_forgetting() -> None:
    w = (2, 1, 5, 3, 4)
    before = [dict(part) for part in grothendieck.parts(w)]
    grothendieck.forget_polynomials()
    assert grothendieck.parts(w) == before


# rules


@pytest.mark.parametrize("r", range(1, 6))
def test_k_theoretic_rules_against_multiplying_out(r: int) -> None:
    n = 6
    g = G.to_monomials(from_code((0,) * (r - 1) + (1,)), n)
    for w in group(4):
        f = G.to_monomials(w, n)
        by_generator = G.times_generator(w, n, r, 1)
        assert in_monomials(by_generator, n) == x(n, r) * f
        assert grothendieck.generator_derivation(w, r).result() == by_generator
        found = grothendieck.with_beta(grothendieck.monk(w, r), length(w) + 1)
        assert in_monomials(found, n) == g * f
        assert grothendieck.monk_derivation(w, r).result() == found
        s_r = reduced_size(from_word((r,), r + 1))
        assert G.times_element(w, n, G, s_r) == found


def test_beta_0_of_the_rules_is_monk() -> None:
    for w, r in pairs(group(4), range(1, 5)):
        for rule in ("monk", "multiply_by_generator"):
            lowest = {
                v: c for v, c in getattr(grothendieck, rule)(w, r).items()
                if length(v) == length(w) + 1}
            assert lowest == getattr(schubert, rule)(w, r)


def test_the_order_of_the_steps_matters() -> None:
    # negative controls: with i rising, j rising, or the j-part first the rule is false
    r = 3

    def orders(w):
        falling_i = [(i, r, -1) for i in range(r - 1, 0, -1)]
        falling_j = [(r, j, 1) for j in range(max(len(w), r) + 1, r, -1)]
        return {
            "i rising": falling_i[::-1] + falling_j, "j rising": falling_i + falling_j[::-1],
            "j first": falling_j + falling_i}

    for name in ("i rising", "j rising", "j first"):
        assert any(
            grothendieck._chain_sum(w, iter(orders(w)[name]), r)
            != grothendieck.multiply_by_generator(w, r) for w in group(4)), name


def test_chains_are_laid_out_with_reasons() -> None:
    rows = grothendieck.generator_derivation((), 2).rows
    chains = {row.steps: row for row in rows if row.obstacle is None}
    assert set(chains) == {((2, 3),), ((1, 2),), ((1, 2), (2, 3))}
    assert chains[(1, 2), (2, 3)].target == (2, 3, 1)
    assert chains[(1, 2), (2, 3)].coefficient == -BETA
    failing = [row for row in grothendieck.monk_derivation((2, 1), 1).rows if row.obstacle]
    assert [row.obstacle for row in failing] == ["w(1) = 2 > w(2) = 1, the length falls"]


def test_products_against_multiplying_out() -> None:
    for u, v in pairs(group(3), group(4)):
        terms = grothendieck.multiply(u, v)
        assert all(c > 0 for c in terms.values())
        found = grothendieck.with_beta(terms, length(u) + length(v))
        assert in_monomials(found, 6) == G.to_monomials(u, 6) * G.to_monomials(v, 6)
        assert G.times_element(u, 6, G, v) == found


@settings(max_examples=effort(12))
@given(permutations_of[5], permutations_of[4])
def test_products_commute_and_agree_with_a_third_factor(u, v) -> None:
    assert grothendieck.multiply(u, v) == grothendieck.multiply(v, u)
    assert grothendieck.multiply(u, ()) == {u: 1}
    # x_1 (G_u G_v) = (x_1 G_u) G_v
    left = linear(
        G.times_element(u, 5, G, v) or {}, lambda w: G.times_generator(w, 5, 1, 1) or {})
    right = linear(
        G.times_generator(u, 5, 1, 1) or {}, lambda w: G.times_element(w, 5, G, v) or {})
    assert left == right


def test_limits_stop_a_long_product() -> None:
    with using(Budget(max_terms=10)), pytest.raises(OverBudget):
        grothendieck.multiply((1, 5, 3, 4, 2), (1, 4, 3, 2))


# expansions


@settings(max_examples=effort(30))
@given(polynomials(3, 2))
def test_round_trip(f: LaurentPolynomial) -> None:
    found = G.from_monomials(f)
    assert all(G.n_variables(w) <= 3 for w in found)
    assert in_monomials(found, 3) == f


def test_to_and_from_schubert() -> None:
    for w in group(4):
        there = G.convert_from(S, w, 3)
        assert there is not None
        assert in_monomials(there, 3) == S.to_monomials(w, 3)
        # signs alternate with the length
        for u, c in there.items():
            assert c.content * (-1) ** (length(u) - length(w)) > 0
        back = S.convert_from(G, w, 3)
        assert back is not None
        assert in_monomials(back, 3, S) == G.to_monomials(w, 3)
        assert all(c.content > 0 and c.is_polynomial for c in back.values())
    assert G.convert_from(family("kappa"), (1, 0), 2) is None


def test_indices_and_refusals() -> None:
    assert G.check_index((2, 1, 3), 1) == (2, 1)
    assert G.show_index((), 2) == (1,)
    assert sorted([(2, 4, 1, 3), (2, 3, 1), (1, 4, 2, 3)], key=G.order_key) == [
        (1, 4, 2, 3), (2, 3, 1), (2, 4, 1, 3)]
    with pytest.raises(OutsideDomain, match=r"G_\(1,3\) is not indexed by a permutation"):
        G.check_index((1, 3), 2)
    with pytest.raises(OutsideDomain, match=r"G_\(1,3,2\) needs x_1, ..., x_2"):
        G.to_monomials((1, 3, 2), 1)
    with pytest.raises(OutsideDomain, match="G is a basis of the polynomials"):
        G.from_monomials(LaurentPolynomial.monomial(1, (-1,), Scalar.one(RING)))
    assert G.times_generator((), 1, 1, -1) is None
    assert G.times_element((), 1, S, ()) is None
    assert ParameterRing.get().extended(["beta"]) is RING
    assert extended((), 2) == (1, 2)
