"""Polynomials cut into lines x_i^k x_(i+1)^(size-k), on which s_i and divided differences act."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from flint import fmpz_mpoly

from spanwright.kernel.laurent import Terms


@dataclass(frozen=True, slots=True)
class Line:
    """The terms that differ in x_i^k x_(i+1)^(size-k) alone."""

    before: tuple[int, ...]
    after: tuple[int, ...]
    size: int
    coefficients: dict[int, fmpz_mpoly]

    def exponents(self, k: int) -> tuple[int, ...]:
        """The exponent tuple of x_i^k x_(i+1)^(size-k) on this line."""
        return (*self.before, k, self.size - k, *self.after)


def lines(terms: Terms, i: int) -> Iterator[Line]:
    """A polynomial cut into lines for s_i, i from 1."""
    found: dict[tuple[tuple[int, ...], tuple[int, ...], int], dict[int, fmpz_mpoly]] = {}
    for e, c in terms.items():
        key = (e[: i - 1], e[i + 1 :], e[i - 1] + e[i])
        found.setdefault(key, {})[e[i - 1]] = c
    for (before, after, size), coefficients in found.items():
        yield Line(before, after, size, coefficients)


def divided_differences(line: Line) -> dict[int, fmpz_mpoly]:
    """d_i on a line: coefficients of x_i^k x_(i+1)^(size-1-k)."""
    coefficients, size = line.coefficients, line.size
    low = min(min(coefficients), size - max(coefficients))
    result: dict[int, fmpz_mpoly] = {}
    # (x^k y^(s-k) - x^(s-k) y^k)/(x - y): the result is symmetric, so half of it is enough
    running = None
    for k in range(low, (size - 1) // 2 + 1):
        left, right = coefficients.get(k), coefficients.get(size - k)
        if left is not None:
            running = -left if running is None else running - left
        if right is not None:
            running = right if running is None else running + right
        if running is not None and running:
            result[k] = running
            result[size - 1 - k] = running
    return result
