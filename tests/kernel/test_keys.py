"""Laws of key polynomials and Demazure atoms, their conversions, and Schubert in keys."""

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
from spanwright.kernel.families import atoms, keys, packed, schubert
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import (
    code,
    compositions,
    decreasing,
    is_bruhat_below,
    length,
    orbit,
    padded,
    partitions,
    permutations,
    reduced_size,
    swapped,
    trimmed,
)
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
KAPPA, ATOM, S = family("kappa"), family("atom"), family("S")
N = 4
ALL = [alpha for size in range(6) for alpha in compositions(size, N)]


def x(n: int, j: int) -> LaurentPolynomial:
    return LaurentPolynomial.generator(n, RING, j)


def in_monomials(terms, of) -> LaurentPolynomial:
    n = len(next(iter(terms))) if terms else N
    return Expansion(of, n, schubert.scalars(terms)).to_monomials()


def isobaric(f: LaurentPolynomial, i: int) -> LaurentPolynomial:
    """pi_i f = d_i(x_i f) by its definition."""
    def exchange(e):
        return e[: i - 1] + (e[i], e[i - 1]) + e[i + 1 :]

    g = f * x(f.n, i)
    change = g - g.moved(exchange)
    return change.divided_exactly(x(f.n, i) - x(f.n, i + 1)) if change else change


@st.composite
def polynomials(draw, n: int, degree: int) -> LaurentPolynomial:
    exponents = st.tuples(*[st.integers(0, degree)] * n)
    terms = {}
    for e in draw(st.lists(exponents, max_size=4, unique=True)):
        c = Scalar.number(RING, draw(st.integers(-4, 4)))
        for name in draw(st.lists(st.sampled_from(("q", "t")), max_size=2)):
            factor = Scalar.parameter(RING, name)
            c = draw(st.sampled_from([c * factor, c + factor, c / (factor - 1)]))
        terms[e] = c
    return LaurentPolynomial.of_scalars(n, RING, terms)


def test_packed_isobaric_difference_is_the_definition() -> None:
    for e in pairs(range(4), repeat=3):
        f = LaurentPolynomial.of_integers(3, RING, {e: 2, (1, 2, 0): 5})
        for i in (1, 2):
            found = packed.isobaric(packed.from_laurent(f, "kappa"), i)
            g = LaurentPolynomial.of_integers(
                3, RING, {packed.unpack(key, 3): c for key, c in found.items()})
            assert g.scaled(f.scale) == isobaric(f, i)


def test_action_of_the_isobaric_differences() -> None:
    for alpha in ALL:
        kappa, atom = KAPPA.to_monomials(alpha, N), ATOM.to_monomials(alpha, N)
        for i in range(1, N):
            up, of_atom = isobaric(kappa, i), isobaric(atom, i)
            assert in_monomials(keys.apply_isobaric(alpha, i), KAPPA) == up
            assert in_monomials(keys.apply_isobaric_hat(alpha, i), KAPPA) == up - kappa
            assert in_monomials(atoms.apply_isobaric(alpha, i), ATOM) == of_atom
            assert in_monomials(atoms.apply_isobaric_hat(alpha, i), ATOM) == of_atom - atom
            assert keys.isobaric_derivation(alpha, i).result() == schubert.scalars(
                keys.apply_isobaric(alpha, i))


def test_partitions_are_monomials_and_leaders_are_indices() -> None:
    for of in (KAPPA, ATOM):
        for alpha in ALL:
            f = of.to_monomials(alpha, N)
            assert max(f.terms, key=lambda e: e[::-1]) == alpha
            assert f.coefficient(alpha).is_one
            integers = [f.coefficient(e).as_integer() for e in f.terms]
            assert all(value is not None and value > 0 for value in integers)
            if alpha == decreasing(alpha):
                assert len(f) == 1


def test_kohnert_diagrams() -> None:
    # move the last cell of a row to the nearest empty place below in its column
    for alpha in ALL:
        start = frozenset((r, c) for r, part in enumerate(alpha, 1) for c in range(1, part + 1))
        seen, waiting = {start}, [start]
        while waiting:
            diagram = waiting.pop()
            for r in range(1, N + 1):
                row = [c for s, c in diagram if s == r]
                if not row:
                    continue
                c = max(row)
                free = [s for s in range(1, r) if (s, c) not in diagram]
                if free:
                    moved = diagram - {(r, c)} | {(free[-1], c)}
                    if moved not in seen:
                        seen.add(moved)
                        waiting.append(moved)
        terms: dict[tuple[int, ...], int] = {}
        for diagram in seen:
            e = tuple(sum(1 for s, _ in diagram if s == r) for r in range(1, N + 1))
            terms[e] = terms.get(e, 0) + 1
        assert KAPPA.to_monomials(alpha, N) == LaurentPolynomial.of_integers(N, RING, terms)


def test_a_key_is_the_sum_of_the_atoms_below_it() -> None:
    for alpha in ALL:
        found = ATOM.convert_from(KAPPA, alpha, N)
        assert found == atoms.key_derivation(alpha).result()
        assert set(found) == {
            beta for beta in orbit(alpha)
            if is_bruhat_below(keys.sorting_permutation(beta), keys.sorting_permutation(alpha))}
        assert in_monomials(atoms.from_key(alpha), ATOM) == KAPPA.to_monomials(alpha, N)
        back = KAPPA.convert_from(ATOM, alpha, N)
        assert back is not None
        assert Expansion(KAPPA, N, back).to_monomials() == ATOM.to_monomials(alpha, N)


def test_vanishing_rows_say_why() -> None:
    rows = atoms.key_derivation((0, 2, 1)).rows
    assert sum(row.obstacle is None for row in rows) == 4
    assert next(row for row in rows if row.target == (0, 1, 2)).obstacle == (
        "v_beta = (3,2,1) is not below v_alpha = (2,3,1) in Bruhat order")


def test_sorting_permutation_is_the_shortest_one() -> None:
    for alpha in ALL:
        v = keys.sorting_permutation(alpha)
        sorting = [
            w for w in permutations(N)
            if tuple(alpha[k - 1] for k in w) == decreasing(alpha)]
        assert v in sorting and length(v) == min(map(length, sorting))


def test_increasing_keys_are_schur_polynomials() -> None:
    schur = family("s")
    for size in range(6):
        for shape in partitions(size, N):
            if len(shape) > N:
                continue
            alpha = padded(shape, N)[::-1]
            f = KAPPA.to_monomials(alpha, N)
            assert all(isobaric(f, i) == f for i in range(1, N))
            assert KAPPA.convert_from(schur, shape, N) == schubert.scalars({alpha: 1})
            assert f == S.to_monomials(schubert.grassmannian(shape, N), N)
            in_atoms = ATOM.convert_from(schur, shape, N)
            assert in_atoms is not None
            assert set(in_atoms) == set(orbit(padded(shape, N)))


def test_schubert_polynomials_are_sums_of_keys() -> None:
    for w in permutations(5):
        w = reduced_size(w)
        found = keys.from_schubert(w, N)
        assert all(c > 0 for c in found.values())
        assert in_monomials(found, KAPPA) == S.to_monomials(w, N)
        is_one_key = found == {padded(trimmed(code(w)), N): 1}
        assert is_one_key == schubert.is_vexillary(w)
        assert keys.schubert_derivation(w, N).result() == schubert.scalars(found)
        in_atoms = ATOM.convert_from(S, w, N)
        assert in_atoms is not None
        assert Expansion(ATOM, N, in_atoms).to_monomials() == S.to_monomials(w, N)
    with pytest.raises(OutsideDomain, match=r"needs x_1, \.\.\., x_4"):
        KAPPA.convert_from(S, (1, 2, 3, 5, 4), 3)


def test_a_pattern_is_what_makes_it_more_than_one_key() -> None:
    def has_2143(w):
        return any(
            w[j] < w[i] < w[m] < w[k]
            for i in range(len(w)) for j in range(i + 1, len(w))
            for k in range(j + 1, len(w)) for m in range(k + 1, len(w)))

    for n in (4, 5, 6):
        for w in permutations(n):
            assert schubert.is_vexillary(w) != has_2143(w)


@settings(max_examples=effort(40))
@given(polynomials(3, 4))
def test_round_trips_over_q_and_t(f: LaurentPolynomial) -> None:
    for of in (KAPPA, ATOM):
        found = of.from_monomials(f)
        assert all(len(alpha) == 3 for alpha in found)
        assert Expansion(of, 3, found).to_monomials() == f


@settings(max_examples=effort(30))
@given(*[st.tuples(*[st.integers(0, 3)] * 3)] * 2)
def test_products_against_multiplying_out(alpha, beta) -> None:
    f = KAPPA.to_monomials(alpha, 3) * KAPPA.to_monomials(beta, 3)
    found = KAPPA.times_element(alpha, 3, KAPPA, beta)
    assert found is not None
    assert Expansion(KAPPA, 3, found).to_monomials() == f
    assert KAPPA.from_monomials(f) == found


def test_schur_times_key_is_positive() -> None:
    schur = family("s")
    for shape in ((1,), (2,), (1, 1), (2, 1)):
        for alpha in (a for size in range(4) for a in compositions(size, 3)):
            found = KAPPA.times_element(alpha, 3, schur, shape)
            assert found is not None
            assert all(c.as_integer() is not None and c.content > 0 for c in found.values())
            f = KAPPA.to_monomials(padded(shape, 3)[::-1], 3) * KAPPA.to_monomials(alpha, 3)
            assert Expansion(KAPPA, 3, found).to_monomials() == f
            g = KAPPA.to_monomials(padded(shape, 3)[::-1], 3) * ATOM.to_monomials(alpha, 3)
            assert all(c.content > 0 for c in ATOM.from_monomials(g).values())


def test_same_values_after_forgetting() -> None:
    for module, of in ((keys, KAPPA), (atoms, ATOM)):
        before = of.to_monomials((0, 2, 1, 3), 4)
        module.forget_polynomials()
        assert of.to_monomials((0, 2, 1, 3), 4) == before


def test_indices_and_refusals() -> None:
    for of in (KAPPA, ATOM):
        assert of.check_index((0, 2), 2) == (0, 2)
        with pytest.raises(OutsideDomain, match="has 2 parts, the ring has n = 3"):
            of.check_index((0, 2), 3)
        with pytest.raises(OutsideDomain, match=f"parts of an index of {of.name} are at least 0"):
            of.check_index((0, -2), 2)
        with pytest.raises(OutsideDomain, match=f"{of.name} is a basis of the polynomials"):
            of.from_monomials(LaurentPolynomial.monomial(2, (0, -1), Scalar.one(RING)))
        assert of.n_variables((0, 1, 0)) == 2
        shown = sorted([(2, 1, 0), (1, 2, 0), (1, 1, 1), (0, 0, 4)], key=of.order_key)
        assert shown == [(0, 0, 4), (1, 1, 1), (1, 2, 0), (2, 1, 0)]
        assert not of.grows and of.times_generator((1, 0), 2, 1, 1) is None
    assert ATOM.times_element((1, 0), 2, ATOM, (1, 0)) is None
    assert KAPPA.times_element((1, 0), 2, ATOM, (1, 0)) is None
    assert KAPPA.convert_from(family("G"), (2, 1), 2) is None
    assert ATOM.convert_from(family("G"), (2, 1), 2) is None
    keys.forget_polynomials()
    with using(Budget(max_terms=5)), pytest.raises(OverBudget):
        KAPPA.to_monomials((0, 0, 4), 3)
    assert swapped((0, 1), 1) == (1, 0)
