"""Compositions, partitions and permutations: statistics, orders, codes, covers, enumeration.

Positions count from 1 in the language; tuples here are Python tuples, indexed from 0.
A permutation is its one-line notation, (w(1), ..., w(n)).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import combinations

Composition = tuple[int, ...]
Permutation = tuple[int, ...]

# compositions


def ranks(mu: Composition) -> Permutation:
    """v_mu: the place of each part when mu is sorted increasingly and stably."""
    order = sorted(range(len(mu)), key=lambda i: (mu[i], i))
    places = [0] * len(mu)
    for place, i in enumerate(order, 1):
        places[i] = place
    return tuple(places)


def decreasing(mu: Composition) -> Composition:
    """The parts in weakly decreasing order."""
    return tuple(sorted(mu, reverse=True))


def is_partition(mu: Composition) -> bool:
    """Whether the parts are weakly decreasing and none is negative."""
    return all(a >= b for a, b in zip(mu, mu[1:], strict=False)) and (not mu or mu[-1] >= 0)


def swapped(mu: Composition, i: int) -> Composition:
    """s_i mu, i from 1: the parts at i and i+1 exchanged."""
    return mu[: i - 1] + (mu[i], mu[i - 1]) + mu[i + 1 :]


def trimmed(mu: Composition) -> Composition:
    """mu without the zeros at its end."""
    n = len(mu)
    while n and mu[n - 1] == 0:
        n -= 1
    return mu[:n]


def padded(mu: Composition, n: int) -> Composition:
    """mu with zeros appended up to n parts."""
    return mu + (0,) * (n - len(mu))


def conjugate(partition: Composition) -> Composition:
    """The transposed partition, without zeros."""
    height = partition[0] if partition else 0
    return tuple(sum(1 for part in partition if part > k) for k in range(height))


def macdonald_order(mu: Composition) -> tuple[object, ...]:
    """Sort key of the order in which E_mu is triangular, largest last.

    Size, then the decreasing rearrangement (a linear extension of dominance), then, inside an
    orbit, the increasing rearrangement is the largest.
    """
    return (sum(mu), decreasing(mu), tuple(-part for part in mu))


def compositions(size: int, n: int) -> Iterator[Composition]:
    """Weak compositions of `size` into n parts, lexicographically from (0, ..., size)."""
    if size < 0:
        return
    if n == 0:
        if size == 0:
            yield ()
        return
    if n == 1:
        yield (size,)
        return
    for first in range(size + 1):
        for rest in compositions(size - first, n - 1):
            yield (first, *rest)


def partitions(size: int, max_parts: int | None = None) -> Iterator[Composition]:
    """Partitions of `size`, without zeros, lexicographically decreasing from (size)."""
    limit = size if max_parts is None else max_parts

    def descend(left: int, largest: int, parts: int) -> Iterator[Composition]:
        if left == 0:
            yield ()
            return
        if parts == 0:
            return
        for first in range(min(left, largest), 0, -1):
            if first * parts < left:
                return
            for rest in descend(left - first, first, parts - 1):
                yield (first, *rest)

    yield from descend(size, size, limit)


def orbit(mu: Composition) -> Iterator[Composition]:
    """The distinct rearrangements of mu, lexicographically decreasing."""
    parts = sorted(mu, reverse=True)

    def arrange(left: list[int]) -> Iterator[Composition]:
        if not left:
            yield ()
            return
        previous: int | None = None
        for k, part in enumerate(left):
            if part != previous:
                previous = part
                for rest in arrange(left[:k] + left[k + 1 :]):
                    yield (part, *rest)

    yield from arrange(parts)


def subsets(items: Sequence[int]) -> Iterator[tuple[int, ...]]:
    """All subsets, by size and then lexicographically."""
    for size in range(len(items) + 1):
        yield from combinations(items, size)


# permutations


def is_permutation(w: Sequence[int]) -> bool:
    """Whether w is a one-line notation of 1..len(w)."""
    return sorted(w) == list(range(1, len(w) + 1))


def identity(n: int) -> Permutation:
    """The identity of S_n."""
    return tuple(range(1, n + 1))


def longest(n: int) -> Permutation:
    """w_0, the longest element of S_n."""
    return tuple(range(n, 0, -1))


def permutations(n: int) -> Iterator[Permutation]:
    """S_n in lexicographic order of one-line notation."""
    from itertools import permutations as arrangements

    yield from arrangements(range(1, n + 1))


def product(u: Permutation, v: Permutation) -> Permutation:
    """u v, the composite i -> u(v(i)); the shorter one is extended by fixed points."""
    n = max(len(u), len(v))
    u, v = extended(u, n), extended(v, n)
    return tuple(u[k - 1] for k in v)


def inverse(w: Permutation) -> Permutation:
    """The inverse permutation."""
    found = [0] * len(w)
    for place, value in enumerate(w, 1):
        found[value - 1] = place
    return tuple(found)


def extended(w: Permutation, n: int) -> Permutation:
    """w as an element of S_n, n at least its own size."""
    return w + tuple(range(len(w) + 1, n + 1))


def reduced_size(w: Permutation) -> Permutation:
    """w without the fixed points at its end."""
    n = len(w)
    while n and w[n - 1] == n:
        n -= 1
    return w[:n]


def length(w: Permutation) -> int:
    """The number of inversions."""
    return sum(1 for i in range(len(w)) for j in range(i + 1, len(w)) if w[i] > w[j])


def code(w: Permutation) -> Composition:
    """The Lehmer code: c_i counts the j > i with w(j) < w(i)."""
    return tuple(sum(1 for later in w[i + 1 :] if later < w[i]) for i in range(len(w)))


def from_code(c: Composition) -> Permutation:
    """The permutation with this code, of the least size that holds it, ends trimmed."""
    c = trimmed(c)
    size = max((part + i for i, part in enumerate(c, 1)), default=0)
    left = list(range(1, size + 1))
    w = [left.pop(part) for part in padded(c, size)]
    return reduced_size(tuple(w))


def reduced_word(w: Permutation) -> tuple[int, ...]:
    """A reduced word (a_1, ..., a_l) with w = s_{a_1} ... s_{a_l}."""
    letters: list[int] = []
    current = list(w)
    while True:
        descent = next(
            (i for i in range(len(current) - 1) if current[i] > current[i + 1]), None)
        if descent is None:
            return tuple(reversed(letters))
        current[descent], current[descent + 1] = current[descent + 1], current[descent]
        letters.append(descent + 1)


def from_word(word: Sequence[int], n: int) -> Permutation:
    """s_{a_1} ... s_{a_l} in S_n."""
    w = list(range(1, n + 1))
    for a in word:
        w[a - 1], w[a] = w[a], w[a - 1]
    return tuple(w)


def act(w: Permutation, mu: Composition) -> Composition:
    """w mu: the part at i goes to position w(i)."""
    found = [0] * len(mu)
    for i, part in enumerate(mu):
        found[w[i] - 1] = part
    return tuple(found)


def covers(w: Permutation) -> Iterator[tuple[int, int, Permutation]]:
    """Bruhat covers from above: (a, b, w t_ab) of length one more, positions a < b from 1."""
    n = len(w)
    for a in range(n):
        best = None
        for b in range(a + 1, n):
            # a cover when no value between w(a) and w(b) stands between them
            if w[b] > w[a] and (best is None or w[b] < best):
                best = w[b]
                found = list(w)
                found[a], found[b] = found[b], found[a]
                yield a + 1, b + 1, tuple(found)


def is_bruhat_below(u: Permutation, v: Permutation) -> bool:
    """Whether u <= v in Bruhat order, by the tableau criterion.

    Ehresmann, Sur la topologie de certains espaces homogenes (1934).
    """
    n = max(len(u), len(v))
    u, v = extended(u, n), extended(v, n)
    for k in range(1, n):
        if any(a > b for a, b in zip(sorted(u[:k]), sorted(v[:k]), strict=True)):
            return False
    return True
