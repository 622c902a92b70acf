"""Polynomials cut into lines x_i^k x_(i+1)^(size-k), on which s_i and divided differences act."""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple

from flint import fmpz_mpoly

from spanwright.kernel.laurent import Terms


class Line(NamedTuple):
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


def hecke_images(line: Line, t: fmpz_mpoly) -> dict[int, fmpz_mpoly]:
    """T_i f = t s_i f + (1 - t) x_(i+1) d_i f on a line: coefficients of x_i^k x_(i+1)^(size-k).

    Zeros may occur. As t (s_i f - g) + g, g = x_(i+1) d_i f: multiplied by nothing but t.
    """
    divided, size = divided_differences(line), line.size
    result = dict(divided)
    for k, c in line.coefficients.items():
        g = divided.get(size - k)
        result[size - k] = c * t if g is None else (c - g) * t + g
    mirrors = {size - k for k in line.coefficients}
    for k, g in divided.items():
        if k not in mirrors:
            result[k] = g - g * t
    return result


def hecke_image(terms: Terms, i: int, t: fmpz_mpoly) -> Terms:
    """T_i f, i from 1, with no denominators: T_i has its inverse over Z[t, 1/t]."""
    found: Terms = {}
    for line in lines(terms, i):
        for k, c in hecke_images(line, t).items():
            if c:
                found[line.exponents(k)] = c
    return found
