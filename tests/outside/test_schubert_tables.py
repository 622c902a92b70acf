"""Published values and outside routes for Schubert polynomials, each with its source beside it."""

from __future__ import annotations

from itertools import product as pairs
from math import comb, factorial, prod

import networkx
import pytest
import sympy

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families import double_schubert, schubert
from spanwright.kernel.families.base import linear
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import (
    code,
    extended,
    from_code,
    is_bruhat_below,
    length,
    longest,
    partitions,
    permutations,
    reduced_size,
    trimmed,
)
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing
from written import expansion, polynomial

S = family("S")
DOUBLE = double_schubert.FAMILIES["double Schubert"]


def w_of(digits: str) -> tuple[int, ...]:
    return reduced_size(tuple(map(int, digits)))


def trimmed_expansion(text: str):
    return {reduced_size(w): c for w, c in expansion(text).items()}


def value_at_1(w: tuple[int, ...]) -> int:
    return sum(schubert.polynomial(w).values())


def count_132(w: tuple[int, ...]) -> int:
    n = len(w)
    return sum(
        1 for i in range(n) for j in range(i + 1, n) for k in range(j + 1, n)
        if w[i] < w[k] < w[j])


def words(w: tuple[int, ...]) -> list[tuple[int, ...]]:
    """All reduced words."""
    if not w:
        return [()]
    return [
        (*word, i) for i in range(1, len(w)) if w[i - 1] > w[i]
        for word in words(reduced_size((*w[: i - 1], w[i], w[i - 1], *w[i + 1 :])))]


# Macdonald, Notes on Schubert Polynomials (1991), table; typed from memory, recomputed.
TABLE_S_4 = {
    "1234": "1", "1243": "x1+x2+x3", "1324": "x1+x2", "1342": "x1x2+x1x3+x2x3",
    "1423": "x1^2+x1x2+x2^2", "1432": "x1^2x2+x1^2x3+x1x2^2+x1x2x3+x2^2x3", "2134": "x1",
    "2143": "x1^2+x1x2+x1x3", "2314": "x1x2", "2341": "x1x2x3", "2413": "x1^2x2+x1x2^2",
    "2431": "x1^2x2x3+x1x2^2x3", "3124": "x1^2", "3142": "x1^2x2+x1^2x3", "3214": "x1^2x2",
    "3241": "x1^2x2x3", "3412": "x1^2x2^2", "3421": "x1^2x2^2x3", "4123": "x1^3",
    "4132": "x1^3x2+x1^3x3", "4213": "x1^3x2", "4231": "x1^3x2x3", "4312": "x1^3x2^2",
    "4321": "x1^3x2^2x3",
}


@pytest.mark.parametrize("w", TABLE_S_4)
def test_table_of_s_4(w: str) -> None:
    f = polynomial(TABLE_S_4[w], 3)
    assert S.to_monomials(w_of(w), 3) == f
    assert S.from_monomials(f) == {w_of(w): Scalar.one(ParameterRing.get())}


def test_the_table_is_complete() -> None:
    assert set(TABLE_S_4) == {"".join(map(str, w)) for w in permutations(4)}


# Recomputed by brute force in the design notes; no published source claimed.
@pytest.mark.parametrize(("u", "v", "text"), [
    ("132", "132", "S_1423+S_231"), ("132", "213", "S_231+S_312"), ("213", "213", "S_312"),
    ("2143", "2143", "S_31524+S_3241+S_4132+S_51234"),
    ("1432", "132", "S_15324+S_2431+S_3412"),
    ("1432", "1432", "S_164235+S_25413+S_263145+S_34512+S_35214+S_45123"),
])
def test_products(u: str, v: str, text: str) -> None:
    assert schubert.scalars(schubert.multiply(w_of(u), w_of(v))) == trimmed_expansion(text)


@pytest.mark.parametrize(("r", "w", "text"), [
    (3, "321", "S_3241"), (2, "132", "S_1423-S_312"), (3, "2143", "S_21534-S_2413-S_4123"),
])
def test_products_with_a_variable(r: int, w: str, text: str) -> None:
    assert S.times_generator(w_of(w), 4, r, 1) == trimmed_expansion(text)


@pytest.mark.parametrize(("f", "text"), [
    ("x2", "S_132-S_21"), ("x2^2", "S_1423-S_231-S_312"),
])
def test_expansions_of_monomials(f: str, text: str) -> None:
    assert S.from_monomials(polynomial(f, 2)) == trimmed_expansion(text)


def test_values_at_1() -> None:
    # Merzon and Smirnov, Determinantal identities for flagged Schur and Schubert polynomials:
    # the maxima; the sums recomputed, no source claimed. From memory.
    maxima, sums = [], []
    for n in range(1, 8):
        values = {w: value_at_1(reduced_size(w)) for w in permutations(n)}
        maxima.append(max(values.values()))
        sums.append(sum(values.values()))
    assert maxima == [1, 1, 2, 5, 14, 84, 660]
    assert sums == [1, 2, 7, 41, 393, 6080, 150371]
    assert [w for w, v in values.items() if v == 660] == [(1, 3, 2, 7, 6, 5, 4)]
    # numbers of monomials: recomputed, no source claimed
    shapes = [w_of(w) for w in ("1432", "15432", "126543", "1327654")]
    assert [len(schubert.polynomial(w)) for w in shapes] == [5, 14, 65, 280]
    assert [value_at_1(w) for w in shapes] == [5, 14, 84, 660]


def test_catalan_numbers() -> None:
    # Woo, Catalan numbers and Schubert polynomials for w = 1(n+1)...2 (2004); from memory
    for n in range(3, 8):
        assert value_at_1((1, *range(n, 1, -1))) == comb(2 * n - 2, n - 1) // n


def test_shifted_longest_elements() -> None:
    # Fomin and Kirillov, Reduced words and plane partitions (1997); from memory
    for n, k in pairs(range(1, 6), range(4)):
        w = reduced_size((*range(1, k + 1), *(k + v for v in longest(n))))
        top, bottom = 1, 1
        for i in range(1, n + 1):
            for j in range(i + 1, n + 1):
                top *= 2 * k + i + j - 1
                bottom *= i + j - 1
        assert value_at_1(w) * bottom == top


def test_reduced_words_weighted() -> None:
    # Macdonald, Notes (1991), (6.11); the q-version conjectured there, proved by Fomin and
    # Stanley, Schubert polynomials and the nil-Coxeter algebra (1994). From memory.
    q = sympy.Symbol("q")

    def bracket(k: int) -> sympy.Poly:
        return sympy.Poly(sum(q**i for i in range(k)), q)

    for w in map(reduced_size, permutations(4)):
        total, weighted = 0, sympy.Poly(0, q)
        for word in words(w):
            total += prod(word)
            weight = sympy.Poly(
                q ** sum(i for i, (a, b) in enumerate(zip(word, word[1:]), 1) if a < b), q)
            for a in word:
                weight = weight * bracket(a)
            weighted = weighted + weight
        assert total == factorial(length(w)) * value_at_1(w)
        value = sympy.Poly(0, q)
        for e, c in S.to_monomials(w, 3).items():
            value = value + sympy.Poly(int(c.content.p) * q ** (e[1] + 2 * e[2]), q)
        for k in range(1, length(w) + 1):
            value = value * bracket(k)
        assert weighted == value


def test_value_1_and_pattern_132() -> None:
    # Macdonald (1991): 1 iff 132-avoiding; Stanley's conjecture, Weigandt, Schubert polynomials,
    # 132-patterns, and Stanley's conjecture (2018): at least 1 + number of 132. From memory.
    for w in permutations(6):
        value, patterns = value_at_1(reduced_size(w)), count_132(w)
        assert (value == 1) == (patterns == 0)
        assert (value == 2) == (patterns == 1)
        assert value >= 1 + patterns


def test_numbers_of_reduced_words_of_the_longest_element() -> None:
    # Stanley, On the number of reduced decompositions of elements of Coxeter groups (1984);
    # Edelman and Greene (1987). From memory. Here by networkx: paths in the weak order.
    for n, expected in ((2, 1), (3, 2), (4, 16), (5, 768)):
        graph = networkx.DiGraph()
        for w in map(reduced_size, permutations(n)):
            for i in range(1, n):
                below = schubert.divided_difference(w, i)
                if below is not None:
                    graph.add_edge(w, below)
        paths = {(): 1}
        for w in reversed(list(networkx.topological_sort(graph))):
            if w:
                paths[w] = sum(paths[v] for v in graph.successors(w))
        assert paths[longest(n)] == expected


def test_numbers_of_vexillary_permutations() -> None:
    # West; Macdonald (1991). From memory.
    assert [
        sum(map(schubert.is_vexillary, permutations(n))) for n in (3, 4, 5, 6)
    ] == [6, 23, 103, 513]


def power_by_monk(start, r, steps, keep):
    """Apply Monk's rule for the sum over `r` again and again, keeping some permutations."""
    terms = schubert.scalars({start: 1})
    for _ in range(steps):
        def rule(w):
            found: dict[tuple[int, ...], int] = {}
            for k in r:
                for v in schubert.monk(w, k):
                    if keep(v):
                        found[v] = found.get(v, 0) + 1
            return schubert.scalars(found)

        terms = linear(terms, rule)
    return terms


def test_degree_of_the_flag_variety() -> None:
    # degree of the flag variety in this embedding: Stembridge (2002), Postnikov and Stanley
    # (2009). From memory.
    for n, expected in ((3, 6), (4, 720)):
        terms = power_by_monk((), range(1, n), comb(n, 2), lambda v, n=n: len(v) <= n)
        assert terms == schubert.scalars({longest(n): expected})


def test_degrees_of_grassmannians() -> None:
    # Schubert (1886). From memory.
    for k, n, expected in ((2, 4, 2), (2, 5, 5), (2, 6, 14), (3, 6, 42)):
        terms = power_by_monk((), (k,), k * (n - k), lambda v, n=n: len(v) <= n)
        top = (*range(n - k + 1, n + 1), *range(1, n - k + 1))
        assert terms == schubert.scalars({top: expected})


@pytest.mark.parametrize(("u", "text"), [
    # Fulton, Young Tableaux, ch. 5; from memory
    ((2, 1), {(4, 2): 1, (4, 1, 1): 1, (3, 3): 1, (3, 2, 1): 2, (3, 1, 1, 1): 1, (2, 2, 2): 1,
              (2, 2, 1, 1): 1}),
    # product of rectangles, Stanley; from memory
    ((2, 2), {(4, 4): 1, (4, 3, 1): 1, (4, 2, 2): 1, (3, 3, 1, 1): 1, (3, 2, 2, 1): 1,
              (2, 2, 2, 2): 1}),
])
def test_squares_of_schur_polynomials(u, text) -> None:
    n = 4
    w = schubert.grassmannian(u, n)
    assert schubert.multiply(w, w) == {
        schubert.grassmannian(shape, n): c for shape, c in text.items()}


def test_stable_limit_counts_reduced_words() -> None:
    # Stanley (1984): the limit of S_(1_m x w) as m grows is sum c_lambda s_lambda with
    # sum c_lambda f^lambda reduced words; for w0(4) it is s_321 alone. From memory.
    m = 6
    w = (*range(1, m + 1), *(m + v for v in longest(4)))
    # the limit is seen in the first m variables: cut the others off
    f = S.to_monomials(w, m + 3)
    kept = {e[:m]: c for e, c in f.terms.items() if not any(e[m:])}
    g = S.to_monomials(schubert.grassmannian((3, 2, 1), m), m)
    assert kept == g.terms
    assert len(words(longest(4))) == 16


# outside routes


def test_covers_against_transitive_reduction_of_bruhat_order() -> None:
    # networkx: the covers are what is left of the order by the tableau criterion
    n = 4
    everyone = [extended(reduced_size(w), n) for w in permutations(n)]
    order = networkx.DiGraph(
        (u, v) for u, v in pairs(everyone, repeat=2) if u != v and is_bruhat_below(u, v))
    covers = networkx.transitive_reduction(order)
    for w in everyone:
        for r in range(1, n):
            expected = set()
            for v in covers.successors(w):
                i, j = (k for k, (a, b) in enumerate(zip(w, v, strict=True), 1) if a != b)
                if i <= r < j:
                    expected.add(reduced_size(v))
            found = {v for v in schubert.monk(reduced_size(w), r) if len(v) <= n}
            assert found == expected


@pytest.mark.parametrize("r", [2, 3])
def test_grassmannian_ones_are_jacobi_trudi_determinants(r: int) -> None:
    xs = sympy.symbols(f"x1:{r + 1}")

    def h(k: int) -> sympy.Expr:
        if k < 0:
            return sympy.Integer(0)
        return sum(
            sympy.prod(x**e for x, e in zip(xs, es, strict=True))
            for es in pairs(range(k + 1), repeat=r) if sum(es) == k)

    for size in range(5):
        for shape in partitions(size, r):
            if len(shape) > r:
                continue
            parts = shape + (0,) * (r - len(shape))
            matrix = sympy.Matrix(r, r, lambda i, j, p=parts: h(p[i] - i + j))
            determinant = sympy.Poly(sympy.expand(matrix.det()), *xs)
            found = S.to_monomials(schubert.grassmannian(shape, r), r)
            assert {e: int(c) for e, c in determinant.terms()} == {
                e: c.as_integer() for e, c in found.items()}


def test_products_against_sympy() -> None:
    ring = sympy.ring("x1:6", sympy.ZZ)[0]

    def element(w):
        return ring.from_dict(
            {e: c.as_integer() for e, c in S.to_monomials(w, 5).items()})

    for u, v in (("13254", "21543"), ("31524", "14325"), ("215436", "132546")):
        u, v = w_of(u), w_of(v)
        total = ring.zero
        for w, c in schubert.multiply(u, v).items():
            total = total + c * element(w)
        assert element(u) * element(v) == total


# From memory, recomputed: S_w(x; y) is the product of the x_i - y_j over these (i, j).
@pytest.mark.parametrize(("w", "factors"), [
    ("21", [(1, 1)]), ("231", [(1, 1), (2, 1)]), ("312", [(1, 1), (1, 2)]),
])
def test_double_schubert_as_products(w: str, factors: list[tuple[int, int]]) -> None:
    f = schubert.to_monomials((), 2)
    for i, j in factors:
        f = f * (LaurentPolynomial.generator(2, f.ring, i)
                 - LaurentPolynomial.constant(2, double_schubert.y(j)))
    assert DOUBLE.to_monomials(w_of(w), 2) == f


def test_double_s_132() -> None:
    # x_1 + x_2 - y_1 - y_2; from memory, recomputed
    y = double_schubert.y
    assert DOUBLE.to_monomials((1, 3, 2), 2) == polynomial("x1+x2", 2) - (
        LaurentPolynomial.constant(2, y(1) + y(2)))


def test_square_of_double_s_21() -> None:
    # S_21^2 = S_312 + (y_2 - y_1) S_21; from memory, recomputed
    found = double_schubert.multiply((2, 1), (2, 1))
    assert found == {
        (3, 1, 2): Scalar.one(ParameterRing.get()),
        (2, 1): double_schubert.y(2) - double_schubert.y(1)}
    assert found == double_schubert.equivariant_monk((2, 1), 1)


def test_dominant_ones_are_their_code() -> None:
    # Lascoux and Schuetzenberger (1982): S_w = x^code iff the code is a partition
    assert schubert.polynomial(from_code((3, 3, 1))) == {3 | 3 << 16 | 1 << 32: 1}
    assert trimmed(code((4, 5, 2, 1, 3))) == (3, 3, 1)
