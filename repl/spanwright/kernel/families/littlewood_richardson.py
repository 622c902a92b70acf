"""Littlewood-Richardson numbers by the tableau rule, row contents of equal letters merged.

c^nu_(lambda, mu) counts the semistandard fillings of nu/lambda with content mu whose reading,
rows from right to left and from the top down, is a lattice word. Littlewood and Richardson,
Group characters and algebra (1934); Fulton, Young Tableaux (1997), chapter 5.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.diagrams import Partition
from spanwright.kernel.indices import conjugate, padded, trimmed
from spanwright.kernel.parameters import ParameterRing

REFERENCE = (
    "Littlewood and Richardson, Group characters and algebra (1934); "
    "Fulton, Young Tableaux (1997), chapter 5"
)

Layer = tuple[int, ...]
"""How many boxes of one letter lie in each row."""


def littlewood_richardson(
    left: Partition, right: Partition, n: int | None = None
) -> dict[Partition, int]:
    """s_left s_right = sum of c^nu s_nu, over nu with at most n parts.

    A tableau is built letter by letter; fillings that agree in the shape reached and in the rows
    of the last letter have the same continuations, and are counted together.
    """
    left, right = trimmed(left), trimmed(right)
    if n is not None and max(len(left), len(right)) > n:
        return {}
    # fewer letters, fewer layers
    if (len(right), right) > (len(left), left):
        left, right = right, left
    turned_left, turned_right = conjugate(left), conjugate(right)
    shorter = min(len(turned_left), len(turned_right))
    if shorter < len(right):
        # c^nu is the same for all three shapes transposed
        if (len(turned_right), turned_right) > (len(turned_left), turned_left):
            turned_left, turned_right = turned_right, turned_left
        found = _products(turned_left, turned_right)
        turned = {conjugate(shape): c for shape, c in found.items()}
        return turned if n is None else {s: c for s, c in turned.items() if len(s) <= n}
    return dict(_products(left, right, n))


def coefficient(outer: Partition, left: Partition, right: Partition) -> int:
    """The Littlewood-Richardson number c^outer_(left, right)."""
    return littlewood_richardson(left, right).get(trimmed(outer), 0)


@lru_cache(maxsize=2_000)
def _products(left: Partition, right: Partition, n: int | None = None) -> dict[Partition, int]:
    n_rows = len(left) + len(right) if n is None else min(n, len(left) + len(right))
    start = padded(left, n_rows)
    states: dict[tuple[Partition, Layer], int] = {(start, ()): 1}
    for size in right:
        following: dict[tuple[Partition, Layer], int] = {}
        for (shape, layer), count in states.items():
            for added in _layers(shape, size, layer):
                grown = tuple(map(int.__add__, shape, added))
                key = (grown, added)
                following[key] = following.get(key, 0) + count
        states = following
        budget.current().check_terms(len(states), "this product")
    result: dict[Partition, int] = {}
    for (shape, _), count in states.items():
        key_shape = trimmed(shape)
        result[key_shape] = result.get(key_shape, 0) + count
    return result


def _layers(shape: Partition, size: int, before: Layer) -> Iterator[Layer]:
    """Horizontal strips on `shape` that keep the word a lattice word after the letter before.

    Read from the top, the new letter in rows 1..k is at most the former letter in rows 1..k-1.
    """
    n_rows = len(shape)
    if before:
        allowed = [0]
        for count in before[:-1]:
            allowed.append(allowed[-1] + count)
    else:
        allowed = [size] * n_rows
    # rows from k on can take so many boxes
    room = [0] * (n_rows + 1)
    for k in range(n_rows - 1, -1, -1):
        room[k] = room[k + 1] + (shape[k - 1] - shape[k] if k else size)
    stack: list[tuple[int, int, Layer]] = [(0, 0, ())]
    while stack:
        k, placed, layer = stack.pop()
        if placed == size:
            yield layer + (0,) * (n_rows - k)
            continue
        if k == n_rows:
            continue
        most = min(allowed[k], size) - placed
        if k:
            most = min(most, shape[k - 1] - shape[k])
        least = max(0, size - placed - room[k + 1])
        for added in range(least, most + 1):
            stack.append((k + 1, placed + added, (*layer, added)))


@dataclass(frozen=True, slots=True)
class TableauRow:
    """One tableau of the rule: the outer shape, its rows of letters, its reading word."""

    target: Partition
    rows: tuple[tuple[int, ...], ...]
    word: tuple[int, ...]

    @property
    def coefficient(self) -> Scalar:
        """Every tableau counts once."""
        return Scalar.one(ParameterRing.get())

    @property
    def obstacle(self) -> str | None:
        """None: no tableau of the list vanishes."""
        return None


def tableau_rows(left: Partition, right: Partition, n: int | None = None) -> list[TableauRow]:
    """Every tableau behind s_left s_right: shapes largest first, rows from the top.

    `rows` leaves the boxes of `left` out. The number of rows with one target is c^target.
    """
    left, right = trimmed(left), trimmed(right)
    if n is not None and max(len(left), len(right)) > n:
        return []
    n_rows = len(left) + len(right) if n is None else min(n, len(left) + len(right))
    partial: list[tuple[Partition, tuple[Layer, ...]]] = [(padded(left, n_rows), ())]
    for size in right:
        partial = [
            (tuple(map(int.__add__, shape, added)), (*layers, added))
            for shape, layers in partial
            for added in _layers(shape, size, layers[-1] if layers else ())]
        budget.current().check_terms(len(partial), "this list of tableaux")
    found = []
    for shape, layers in partial:
        rows = tuple(
            tuple(letter for letter, layer in enumerate(layers, 1) for _ in range(layer[k]))
            for k in range(n_rows))
        word = tuple(letter for row in rows for letter in reversed(row))
        target = trimmed(shape)
        found.append(TableauRow(target, rows[: len(target)], word))
    found.sort(key=lambda row: (tuple(-part for part in row.target), row.rows))
    return found
