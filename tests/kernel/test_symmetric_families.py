"""The bases m, e, h, p, s, P, J: indices, round trips between all pairs, what is refused."""

from __future__ import annotations

from fractions import Fraction
from itertools import product as pairs

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain, OverBudget
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import linear
from spanwright.kernel.families.registry import family
from spanwright.kernel.families.symmetric_base import (
    NotSymmetric,
    SymmetricFamily,
    moving_transposition,
)
from spanwright.kernel.families.transitions import (
    character,
    combined,
    members,
    route,
    transition,
)
from spanwright.kernel.indices import partitions, permutations, swapped
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
CLASSICAL = "mehps"
ALL = "mehpsPJ"


def symmetric_family(name: str) -> SymmetricFamily:
    found = family(name)
    assert isinstance(found, SymmetricFamily)
    return found


def canonical_indices(name: str, size: int, n: int) -> list[tuple[int, ...]]:
    if name in "ehp":
        return [index for index in partitions(size) if not index or index[0] <= n]
    return list(partitions(size, n))


scalars = st.builds(
    lambda top, bottom, a, b: Scalar.number(RING, top, bottom) * Scalar.monomial_of(RING, (a, b))
    * Scalar.one_minus(RING, (1, 1)).inverse(),
    st.integers(-5, 5).filter(bool), st.integers(1, 4), st.integers(-1, 2), st.integers(-1, 2))


@st.composite
def expansions(draw: st.DrawFn, names: str = ALL) -> Expansion:
    name = draw(st.sampled_from(names))
    n = draw(st.integers(1, 4))
    indices = [
        index for size in range(5) for index in canonical_indices(name, size, n)]
    chosen = draw(st.lists(st.sampled_from(indices), min_size=1, max_size=3, unique=True))
    return Expansion(family(name), n, {index: draw(scalars) for index in chosen})


@given(expansions(), st.sampled_from(ALL))
@settings(max_examples=effort(60))
def test_conversion_agrees_with_the_way_through_monomials(f: Expansion, name: str) -> None:
    target = symmetric_family(name)
    polynomial = f.to_monomials()
    rows = {}
    for index in f.terms:
        row = target.convert_from(f.family, index, f.n)
        assert row is not None
        rows[index] = row
    converted = Expansion(target, f.n, linear(f.terms, rows.__getitem__))
    assert converted.terms == target.from_monomials(polynomial)
    assert converted.to_monomials() == polynomial
    for index in converted.terms:
        assert target.check_index(index, f.n) == index


@given(expansions())
@settings(max_examples=effort(40))
def test_from_monomials_inverts_to_monomials(f: Expansion) -> None:
    assert f.family.from_monomials(f.to_monomials()) == f.terms


@pytest.mark.parametrize(("source", "target"), list(pairs(CLASSICAL, CLASSICAL)))
def test_transition_numbers_agree_in_m(source: str, target: str) -> None:
    for n in range(1, 5):
        for size in range(6):
            for index in partitions(size):
                image = transition(source, target, index, n)
                in_m = combined(image, lambda nu, n=n: transition(target, "m", nu, n))
                assert in_m == transition(source, "m", index, n)
                assert set(image) <= set(canonical_indices(target, size, n))


def test_routes_are_the_short_ones() -> None:
    assert route("e", "h") == ("e", "h")
    assert route("m", "p") == ("m", "s", "p")
    assert all(len(route(a, b)) <= 3 for a, b in pairs(CLASSICAL, CLASSICAL))


@pytest.mark.parametrize("n", range(1, 7))
def test_newton_and_wronski_identities(n: int) -> None:
    """Macdonald, Symmetric Functions and Hall Polynomials (1995), I (2.6') and (2.11')."""
    size = n + 3
    e, h, p = (members(name, "e", n, size) for name in "ehp")
    for k in range(1, size + 1):
        assert sum((-1) ** i * e[i] * h[k - i] for i in range(k + 1)) == 0
        assert k * e[k] == sum((-1) ** (i - 1) * e[k - i] * p[i] for i in range(1, k + 1))
        assert k * h[k] == sum(h[k - i] * p[i] for i in range(1, k + 1))


def test_members_beyond_the_variables_are_rewritten() -> None:
    """h_3 = 2 h_21 - h_111 and p_3 = (3 p_21 - p_111)/2 in two variables, by hand."""
    h, p, e, s = (symmetric_family(name) for name in "hpes")
    assert transition("h", "h", (3,), 2) == {(2, 1): 2, (1, 1, 1): -1}
    assert transition("p", "p", (3,), 2) == {(2, 1): Fraction(3, 2), (1, 1, 1): Fraction(-1, 2)}
    for one in (h, p):
        polynomial = one.to_monomials((3,), 2)
        assert one.canonical((3,), 2) == one.from_monomials(polynomial)
        assert polynomial.coefficient((3, 0)) == 1
    assert h.to_monomials((3,), 2).coefficient((2, 1)) == 1
    assert e.canonical((3,), 2) == {} and s.canonical((1, 1, 1), 2) == {}
    assert e.to_monomials((3,), 2).is_zero and s.to_monomials((1, 1, 1), 2).is_zero


def test_characters_are_orthogonal() -> None:
    for size in range(1, 7):
        shapes = list(partitions(size))
        group = list(permutations(size))
        class_sizes: dict[tuple[int, ...], int] = {}
        for w in group:
            cycles = cycle_type(w)
            class_sizes[cycles] = class_sizes.get(cycles, 0) + 1
        for a in shapes:
            for b in shapes:
                total = sum(
                    count * character(a, c) * character(b, c) for c, count in class_sizes.items())
                assert total == (len(group) if a == b else 0)
    assert character((2, 1), (2,)) == 0


def cycle_type(w: tuple[int, ...]) -> tuple[int, ...]:
    left, found = set(range(1, len(w) + 1)), []
    while left:
        k, count = min(left), 0
        while k in left:
            left.remove(k)
            k, count = w[k - 1], count + 1
        found.append(count)
    return tuple(sorted(found, reverse=True))


@pytest.mark.parametrize(("name", "index", "n", "code"), [
    ("m", (1, 2), 3, "not-a-partition"),
    ("s", (2, -1), 3, "bad-index"),
    ("s", (2, 1, 1), 2, "too-many-parts"),
    ("P", (1, 1, 1), 2, "too-many-parts"),
    ("J", (0, 1), 2, "not-a-partition"),
    ("h", (3,), 2, "too-large-part"),
    ("p", (4, 1), 3, "too-large-part"),
    ("e", (3,), 2, "too-large-part"),
])
def test_a_wrong_index_is_named(name: str, index: tuple[int, ...], n: int, code: str) -> None:
    with pytest.raises(OutsideDomain) as caught:
        family(name).check_index(index, n)
    assert caught.value.code == code
    assert name in caught.value.fact


def test_zeros_in_an_index_are_trimmed_and_the_empty_one_is_shown() -> None:
    for name in ALL:
        one = family(name)
        assert one.check_index((1, 1, 0, 0), 2) == (1, 1)
        assert one.check_index((0, 0, 0), 2) == ()
        assert one.show_index((), 2) == (0,)
        assert one.to_monomials((0,), 2).as_scalar() == 1
        assert one.show_index((1, 1), 4) == (1, 1)
    assert family("s").n_variables((2, 1)) == 2 and family("h").n_variables((3, 1)) == 3


def test_order_is_by_size_then_dominance() -> None:
    indices = [(1, 1, 1), (3,), (), (2, 2), (2, 1)]
    ordered = sorted(indices, key=family("s").order_key)
    assert ordered == [(2, 2), (3,), (2, 1), (1, 1, 1), ()]


def test_what_is_not_symmetric_is_refused_with_the_difference() -> None:
    x = [LaurentPolynomial.generator(3, RING, j) for j in (1, 2, 3)]
    f = x[0] + x[1] + x[2] * x[2]
    for name in ALL:
        with pytest.raises(NotSymmetric, match="s_2") as caught:
            family(name).from_monomials(f)
        assert caught.value.code == "not-symmetric"
        assert caught.value.position == 2
        assert caught.value.difference == x[1] + x[2] ** 2 - x[2] - x[1] ** 2
    assert moving_transposition(x[0] * x[1] * x[2]) is None
    with pytest.raises(OutsideDomain, match="x_1\\^-1") as refused:
        family("m").from_monomials(x[0] ** -1 + x[1] ** -1 + x[2] ** -1)
    assert refused.value.code == "not-a-polynomial"


@given(expansions(), st.integers(1, 3))
@settings(max_examples=effort(25))
def test_elements_are_symmetric(f: Expansion, i: int) -> None:
    polynomial = f.to_monomials()
    if i < f.n:
        assert polynomial.moved(lambda e: swapped(e, i)) == polynomial


def test_no_direct_rule_from_elsewhere() -> None:
    assert family("s").convert_from(family("E"), (1, 0), 2) is None
    assert family("P").times_element((1,), 2, family("E"), (1, 0)) is None
    assert family("m").times_element((1,), 2, family("s"), (1,)) is None
    assert family("e").times_element((1,), 2, family("s"), (1,)) is None


def test_budget_is_kept() -> None:
    small = budget.Budget(max_terms=10)
    with budget.using(small), pytest.raises(OverBudget):
        family("m").to_monomials((5, 3, 1), 4)
