"""Indices: statistics by brute force, Bruhat order as a graph, codes, words, sizes of lists."""

from __future__ import annotations

from collections import Counter
from itertools import permutations as arrangements
from itertools import product
from math import comb, factorial, prod

import networkx
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel import indices

COMPOSITIONS = st.lists(st.integers(-3, 4), min_size=1, max_size=6).map(tuple)
PERMUTATIONS = st.integers(1, 6).flatmap(lambda n: st.permutations(range(1, n + 1))).map(tuple)
SMALL = [w for n in range(1, 5) for w in arrangements(range(1, n + 1))]


# compositions


@settings(max_examples=effort(100))
@given(COMPOSITIONS)
def test_ranks(mu: tuple[int, ...]) -> None:
    """v_mu(i) = 1 + #{r < i : mu_r <= mu_i} + #{r > i : mu_r < mu_i}."""
    assert indices.ranks(mu) == tuple(
        1 + sum(a <= part for a in mu[:i]) + sum(a < part for a in mu[i + 1 :])
        for i, part in enumerate(mu))


@settings(max_examples=effort(60))
@given(COMPOSITIONS)
def test_rearrangements(mu: tuple[int, ...]) -> None:
    assert list(indices.orbit(mu)) == sorted(set(arrangements(mu)), reverse=True)
    assert indices.decreasing(mu) == next(indices.orbit(mu))
    increasing = indices.decreasing(mu)[::-1]
    # inside an orbit the increasing rearrangement is the largest
    assert max(indices.orbit(mu), key=indices.macdonald_order) == increasing
    assert min(indices.orbit(mu), key=indices.macdonald_order) == indices.decreasing(mu)
    for i in range(1, len(mu)):
        swapped = indices.swapped(mu, i)
        assert (swapped[i - 1], swapped[i]) == (mu[i], mu[i - 1])
        assert indices.swapped(swapped, i) == mu and Counter(swapped) == Counter(mu)
    assert indices.trimmed((*mu, 0, 0)) == indices.trimmed(mu)
    assert indices.padded(indices.trimmed(mu), len(mu)) == mu
    assert indices.is_partition(mu) == (mu == indices.decreasing(mu) and min(mu) >= 0)


def test_macdonald_order_extends_dominance() -> None:
    """lam dominates mu and differs: then every rearrangement of lam is larger."""
    for size in range(7):
        shapes = [indices.padded(p, 4) for p in indices.partitions(size, 4)]
        for lam, mu in product(shapes, repeat=2):
            dominates = all(sum(lam[:k]) >= sum(mu[:k]) for k in range(5))
            if dominates and lam != mu:
                assert min(map(indices.macdonald_order, indices.orbit(lam))) > max(
                    map(indices.macdonald_order, indices.orbit(mu)))


@pytest.mark.parametrize("size", range(9))
def test_numbers_of_partitions(size: int) -> None:
    """Against Euler's recurrence by pentagonal numbers."""
    counts = [1]
    for m in range(1, size + 1):
        counts.append(sum(
            (-1) ** (k + 1) * counts[m - pentagonal]
            for k in range(1, m + 1)
            for pentagonal in (k * (3 * k - 1) // 2, k * (3 * k + 1) // 2) if pentagonal <= m))
    found = list(indices.partitions(size))
    assert len(found) == counts[size]
    assert found == sorted(found, reverse=True)
    for partition in found:
        assert indices.is_partition(partition) and sum(partition) == size and 0 not in partition
        conjugate = indices.conjugate(partition)
        assert indices.conjugate(conjugate) == partition and sum(conjugate) == size
        assert conjugate == tuple(
            sum(part >= k for part in partition) for k in range(1, max(partition, default=0) + 1))
    for n in range(5):
        assert list(indices.partitions(size, n)) == [p for p in found if len(p) <= n]


def test_numbers_of_compositions() -> None:
    for size, n in product(range(6), range(1, 5)):
        found = list(indices.compositions(size, n))
        assert len(found) == len(set(found)) == comb(size + n - 1, n - 1)
        assert found == sorted(found)
        assert all(sum(mu) == size and len(mu) == n and min(mu) >= 0 for mu in found)
    assert list(indices.compositions(0, 0)) == [()]
    assert list(indices.compositions(2, 0)) == []
    assert list(indices.compositions(-1, 1)) == list(indices.compositions(-1, 3)) == []
    assert list(indices.partitions(-1)) == []


def test_subsets() -> None:
    found = list(indices.subsets((3, 5, 9, 2)))
    assert len(set(found)) == 2**4
    assert [len(s) for s in found] == sorted(len(s) for s in found)
    assert found[:6] == [(), (3,), (5,), (9,), (2,), (3, 5)]


# permutations


def test_enumeration() -> None:
    for n in range(6):
        found = list(indices.permutations(n))
        assert len(set(found)) == factorial(n) and found == sorted(found)
        assert all(indices.is_permutation(w) for w in found)
    assert not indices.is_permutation((1, 1)) and not indices.is_permutation((0, 1))


@settings(max_examples=effort(80))
@given(PERMUTATIONS, PERMUTATIONS)
def test_products_and_inverses(u: tuple[int, ...], v: tuple[int, ...]) -> None:
    n = max(len(u), len(v))
    w = indices.product(u, v)
    a, b = indices.extended(u, n), indices.extended(v, n)
    assert w == tuple(a[b[i] - 1] for i in range(n))
    assert indices.product(u, indices.inverse(u)) == indices.identity(len(u))
    assert indices.inverse(indices.inverse(u)) == u
    assert indices.reduced_size(indices.extended(u, len(u) + 3)) == indices.reduced_size(u)
    # w mu is a left action: (u v) mu = u (v mu)
    mu = tuple(range(10, 10 + n))
    assert indices.act(w, mu) == indices.act(a, indices.act(b, mu))


@settings(max_examples=effort(80))
@given(PERMUTATIONS)
def test_lengths_codes_and_words(w: tuple[int, ...]) -> None:
    n = len(w)
    n_inversions = sum(w[i] > w[j] for i in range(n) for j in range(i + 1, n))
    code = indices.code(w)
    word = indices.reduced_word(w)
    assert indices.length(w) == n_inversions == sum(code) == len(word)
    assert code == tuple(sum(b < a for b in w[i + 1 :]) for i, a in enumerate(w))
    assert indices.from_code(code) == indices.reduced_size(w)
    assert indices.from_word(word, n) == w
    image = indices.identity(n)
    for a in word:
        step = indices.from_word((a,), n)
        image = indices.product(image, step)
    assert image == w


def test_codes_are_all_sequences() -> None:
    """Every sequence of at most three parts up to 3 is the code of exactly one permutation."""
    found = {indices.from_code(c): c for c in product(range(4), repeat=3)}
    assert len(found) == 4**3
    for w, c in found.items():
        assert indices.trimmed(indices.code(w)) == indices.trimmed(c)
    assert indices.from_code(()) == ()


def test_longest_element() -> None:
    for n in range(1, 6):
        w = indices.longest(n)
        assert indices.length(w) == comb(n, 2)
        assert max(indices.permutations(n), key=indices.length) == w


# Bruhat order


def _cover_graph(n: int) -> networkx.DiGraph:
    """Edges w -> w t_ab of length one more, by trying all transpositions."""
    graph = networkx.DiGraph()
    for w in arrangements(range(1, n + 1)):
        graph.add_node(w)
        for a in range(n):
            for b in range(a + 1, n):
                image = list(w)
                image[a], image[b] = image[b], image[a]
                if indices.length(tuple(image)) == indices.length(w) + 1:
                    graph.add_edge(w, tuple(image), positions=(a + 1, b + 1))
    return graph


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_covers_and_bruhat_order(n: int) -> None:
    """Covers by trying all transpositions; the order as reachability along covers."""
    graph = _cover_graph(n)
    for w in graph:
        found = {image: (a, b) for a, b, image in indices.covers(w)}
        assert found == {image: graph.edges[w, image]["positions"] for image in graph[w]}
        above = {w} | networkx.descendants(graph, w)
        assert {v for v in graph if indices.is_bruhat_below(w, v)} == above
    assert networkx.is_directed_acyclic_graph(graph)
    # the tableau criterion's covers are the covers: the graph has no shortcut edge
    assert networkx.transitive_reduction(graph).edges == graph.edges


@settings(max_examples=effort(60))
@given(PERMUTATIONS, PERMUTATIONS)
def test_bruhat_order_by_subwords(u: tuple[int, ...], v: tuple[int, ...]) -> None:
    """u <= v when a reduced word of v has a subword with product u (subword property)."""
    n = max(len(u), len(v))
    reached = {indices.identity(n)}
    for a in indices.reduced_word(indices.extended(v, n)):
        step = indices.from_word((a,), n)
        reached |= {indices.product(w, step) for w in reached}
    assert indices.is_bruhat_below(u, v) == (indices.extended(u, n) in reached)


def test_size_of_the_bruhat_order() -> None:
    """Pairs u <= v in S_1, ..., S_4: 1, 3, 19, 213 (from memory)."""
    counts = [
        sum(indices.is_bruhat_below(u, v) for u in group for v in group)
        for group in (list(indices.permutations(n)) for n in range(1, 5))]
    assert counts == [1, 3, 19, 213]


def test_lengths_have_the_generating_function_of_the_group() -> None:
    """sum of q^length = [n]_q! at q = 2 (Stanley, Enumerative Combinatorics 1, 1.3)."""
    for n in range(1, 6):
        assert sum(2 ** indices.length(w) for w in indices.permutations(n)) == prod(
            2**k - 1 for k in range(1, n + 1))
