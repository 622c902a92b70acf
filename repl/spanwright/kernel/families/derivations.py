"""A rule laid out as rows: every term it names, with the reason where a term vanishes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.families.base import Coefficients, Index
from spanwright.kernel.indices import Permutation, extended, reduced_size
from spanwright.kernel.parameters import ParameterRing


class RuleRow(Protocol):
    """One term of a rule; each rule has its own row class, with its factors or its tableau."""

    @property
    def target(self) -> Index:
        """The index that the term belongs to."""

    @property
    def coefficient(self) -> Scalar:
        """What the term contributes, 0 for a vanishing one."""

    @property
    def obstacle(self) -> str | None:
        """Why the term vanishes, in a few words."""


@dataclass(frozen=True, slots=True)
class Row:
    """One term of a rule whose coefficient is known at once.

    `steps` are the transpositions (a, b) of positions in the order in which they are applied, or
    positions (i,), or nothing. `obstacle` says in a few words why the term is 0; then the
    coefficient is 0.
    """

    steps: tuple[tuple[int, ...], ...]
    target: Index
    coefficient: Scalar
    obstacle: str | None = None


@dataclass(frozen=True, slots=True)
class Derivation:
    """A rule applied once: its name, its statement, its source, one row for each term."""

    rule: str
    statement: str
    reference: str
    rows: tuple[RuleRow, ...]

    def result(self) -> Coefficients:
        """The sum of the rows."""
        collected: dict[Index, list[Scalar]] = {}
        for row in self.rows:
            collected.setdefault(row.target, []).append(row.coefficient)
        found = {target: total(values) for target, values in collected.items()}
        return {target: c for target, c in found.items() if not c.is_zero}


def transposed(w: Permutation, a: int, b: int) -> Permutation:
    """w t_ab, the entries in positions a < b exchanged, ends trimmed."""
    found = list(extended(w, max(len(w), b)))
    found[a - 1], found[b - 1] = found[b - 1], found[a - 1]
    return reduced_size(tuple(found))


def cover_obstacle(w: Permutation, a: int, b: int) -> str | None:
    """Why w t_ab, a < b, has not length l(w) + 1; None when it has."""
    w = extended(w, max(len(w), b))
    if w[a - 1] > w[b - 1]:
        return f"w({a}) = {w[a - 1]} > w({b}) = {w[b - 1]}, the length falls"
    for k in range(a + 1, b):
        if w[a - 1] < w[k - 1] < w[b - 1]:
            return (
                f"w({k}) = {w[k - 1]} lies between w({a}) = {w[a - 1]} and "
                f"w({b}) = {w[b - 1]}, the length grows by more than 1")
    return None


def cover_row(w: Permutation, a: int, b: int, sign: int) -> Row:
    """The row of w t_ab with coefficient `sign`, or 0 where the length condition fails."""
    obstacle = cover_obstacle(w, a, b)
    return Row(
        ((a, b),), transposed(w, a, b), integer(0 if obstacle else sign), obstacle)


def integer(value: int) -> Scalar:
    """An integer as a scalar."""
    return Scalar.number(ParameterRing.get(), value)
