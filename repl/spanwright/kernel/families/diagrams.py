"""Diagrams of partitions: arms and legs of boxes, horizontal, vertical and border strips.

A partition is a weakly decreasing tuple without zeros. Macdonald, Symmetric Functions and Hall
Polynomials (1995), I.1.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from spanwright.kernel.indices import Composition, conjugate, padded, trimmed

Partition = tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Box:
    """One box of a diagram, row and column from 1, with its arm and leg.

    For a composition the columns of the diagram have heights mu_i, so `row` is the position i
    and `column` the height j.
    """

    row: int
    column: int
    arm: int
    leg: int

    @property
    def hook(self) -> int:
        """The hook length."""
        return self.arm + self.leg + 1


@lru_cache(maxsize=20_000)
def boxes(partition: Partition) -> tuple[Box, ...]:
    """The boxes of a partition, row by row: arm = lambda_i - j, leg = lambda'_j - i."""
    columns = conjugate(partition)
    return tuple(
        Box(i, j, part - j, columns[j - 1] - i)
        for i, part in enumerate(partition, 1) for j in range(1, part + 1))


def composition_boxes(mu: Composition) -> tuple[Box, ...]:
    """The boxes of a composition with parts >= 0.

    Haglund, Haiman and Loehr, A combinatorial formula for nonsymmetric Macdonald polynomials
    (2008): leg = mu_i - j,
    arm = #{r < i : j <= mu_r <= mu_i} + #{r > i : j - 1 <= mu_r < mu_i}.
    """
    return tuple(
        Box(i + 1, j,
            sum(1 for other in mu[:i] if j <= other <= part)
            + sum(1 for other in mu[i + 1:] if j - 1 <= other < part),
            part - j)
        for i, part in enumerate(mu) for j in range(1, part + 1))


def row_excess(partition: Partition) -> int:
    """n(lambda) = sum of (i - 1) lambda_i."""
    return sum(i * part for i, part in enumerate(partition))


def centralizer_order(partition: Partition) -> int:
    """z_lambda = product of m_i! i^(m_i) over the parts."""
    value = 1
    run = 0
    for k, part in enumerate(partition):
        run = run + 1 if k and partition[k - 1] == part else 1
        value *= part * run
    return value


# strips


def horizontal_strips_below(outer: Partition, size: int) -> Iterator[Partition]:
    """Partitions mu with outer/mu a horizontal strip of that size."""
    lows = (*outer[1:], 0)

    def descend(k: int, left: int) -> Iterator[tuple[int, ...]]:
        if k == len(outer):
            if left == 0:
                yield ()
            return
        # what the rows below can still give up
        rest = outer[k + 1] if k + 1 < len(outer) else 0
        for removed in range(max(0, left - rest), min(left, outer[k] - lows[k]) + 1):
            for tail in descend(k + 1, left - removed):
                yield (outer[k] - removed, *tail)

    for found in descend(0, size):
        yield trimmed(found)


def horizontal_strips_above(
    inner: Partition, size: int, max_parts: int | None = None
) -> Iterator[Partition]:
    """Partitions mu with mu/inner a horizontal strip of that size, at most `max_parts` parts."""
    n_rows = len(inner) + 1 if max_parts is None else min(len(inner) + 1, max_parts)
    rows = padded(inner, n_rows)

    def descend(k: int, left: int) -> Iterator[tuple[int, ...]]:
        if k == n_rows:
            if left == 0:
                yield ()
            return
        room = left if k == 0 else min(left, rows[k - 1] - rows[k])
        # the rows further down take rows[k] boxes at most
        least = max(0, left - (rows[k] if k + 1 < n_rows else 0))
        for added in range(room, least - 1, -1):
            for tail in descend(k + 1, left - added):
                yield (rows[k] + added, *tail)

    for found in descend(0, size):
        yield trimmed(found)


def vertical_strips_above(
    inner: Partition, size: int, max_parts: int | None = None
) -> Iterator[Partition]:
    """Partitions mu with mu/inner a vertical strip of that size, at most `max_parts` parts."""
    n_rows = len(inner) + size if max_parts is None else min(len(inner) + size, max_parts)
    rows = padded(inner, n_rows)

    def descend(k: int, left: int, last_grew: bool) -> Iterator[tuple[int, ...]]:
        if left == 0:
            yield rows[k:]
            return
        if n_rows - k < left:
            return
        may_grow = k == 0 or rows[k - 1] > rows[k] or last_grew
        if may_grow:
            for tail in descend(k + 1, left - 1, True):
                yield (rows[k] + 1, *tail)
        for tail in descend(k + 1, left, False):
            yield (rows[k], *tail)

    for found in descend(0, size, True):
        yield trimmed(found)


def straightened(parts: tuple[int, ...]) -> tuple[int, Partition] | None:
    """Sign and partition with s_parts = sign * s_partition by the bialternant; None for 0."""
    n = len(parts)
    shifted = [part + n - 1 - k for k, part in enumerate(parts)]
    if len(set(shifted)) < n or min(shifted, default=0) < 0:
        return None
    n_inversions = sum(
        1 for i in range(n) for j in range(i + 1, n) if shifted[i] < shifted[j])
    shifted.sort(reverse=True)
    partition = trimmed(tuple(value - (n - 1 - k) for k, value in enumerate(shifted)))
    return (-1) ** n_inversions, partition


def border_strips_above(
    inner: Partition, size: int, max_parts: int | None = None
) -> Iterator[tuple[int, Partition]]:
    """(-1)^height and mu for every border strip mu/inner of that size.

    Murnaghan (1937), Nakayama (1940); in Macdonald (1995), I.3, Example 11.
    """
    n_rows = len(inner) + size if max_parts is None else min(len(inner) + size, max_parts)
    rows = padded(inner, n_rows)
    for k in range(n_rows):
        found = straightened((*rows[:k], rows[k] + size, *rows[k + 1:]))
        if found is not None:
            yield found
