"""Kostka numbers K_(lambda, mu): semistandard tableaux counted by horizontal strips.

Kostka (1882); Macdonald, Symmetric Functions and Hall Polynomials (1995), I.6.
"""

from __future__ import annotations

from functools import lru_cache

from spanwright.kernel import budget
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families.diagrams import Partition, horizontal_strips_below
from spanwright.kernel.indices import Composition, decreasing, partitions, trimmed


def kostka(shape: Partition, content: Composition) -> int:
    """The number of semistandard tableaux of a shape and a content (in any order).

    Raises OutsideDomain when the shape is no partition or the content has a negative part.
    """
    shape = trimmed(shape)
    if any(a < b for a, b in zip(shape, shape[1:], strict=False)) or min(shape, default=0) < 0:
        raise OutsideDomain("the shape of a tableau is a partition", code="not-a-partition")
    if min(content, default=0) < 0:
        raise OutsideDomain("a content has parts that are at least 0", code="bad-index")
    if sum(shape) != sum(content):
        return 0
    return _kostka(shape, trimmed(decreasing(content)))


@lru_cache(maxsize=200_000)
def _kostka(shape: Partition, content: Partition) -> int:
    if len(shape) > len(content):
        return 0
    if not content:
        return 1
    budget.current().check()
    # the largest letter occurs least often, so that few strips come off
    return sum(
        _kostka(inner, content[:-1]) for inner in horizontal_strips_below(shape, content[-1]))


@lru_cache(maxsize=5_000)
def kostka_row(shape: Partition, n: int) -> dict[Partition, int]:
    """All mu with at most n parts and K_(shape, mu) > 0: s_shape in monomial symmetric ones."""
    row = {}
    for content in partitions(sum(shape), n):
        number = _kostka(shape, content)
        if number:
            row[content] = number
    return row
