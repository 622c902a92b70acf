"""Finite and affine Hecke algebras of type GL_n: X^mu T_w, T_w Y^nu, T_w, the T_i plain.

T_i f(X) = (s_i f)(X) T_i + (1-t) X_(i+1) (d_i f)(X), and its mirror image for Y under the
anti-automorphism T_i -> T_i, X_i -> Y_i^-1 (Lusztig, Affine Hecke algebras and their
graded version, 1989; Macdonald, Affine Hecke Algebras and Orthogonal Polynomials, 2003).
"""

from __future__ import annotations

from functools import lru_cache

from flint import fmpz_mpoly

from spanwright.kernel import indices
from spanwright.kernel.errors import Mixed
from spanwright.kernel.operators.elements import (
    Algebra,
    Element,
    Row,
    Rows,
    Rule,
    add_row,
    parameter_t,
    raised,
    t_power,
    without_zeros,
)
from spanwright.kernel.operators.words import Letter
from spanwright.kernel.parameters import Exponents, ParameterRing


class HeckeRule(Rule):
    """T_i T_w = T_(s_i w), or (t-1) T_w + t T_(s_i w) when s_i w is shorter."""

    shift = (0, 1)

    def __init__(self, ring: ParameterRing) -> None:
        self.t = parameter_t(ring)
        self.t_minus_one = self.t - 1
        self.factor = -self.t_minus_one

    def left(self, i: int, row: Row) -> Row:
        """T_i times a row."""
        result: Row = {}
        t, t_minus_one = self.t, self.t_minus_one
        for (w, nu), c in row.items():
            target, is_longer = raised(w, i)
            if not is_longer:
                added = c * t_minus_one
                known = result.get((w, nu))
                result[w, nu] = added if known is None else known + added
                c = c * t
            known = result.get((target, nu))
            result[target, nu] = c if known is None else known + c
        return result


def power_of_t(ring: ParameterRing, m: int) -> tuple[fmpz_mpoly, fmpz_mpoly, int]:
    """(a, b, e) with T_i^m = t^e (a T_i + b), for any integer m.

    a = (t^m - (-1)^m)/(t+1) for m >= 0, from the eigenvalues t and -1.
    """
    size = abs(m)
    a, following = _alternating(ring, size), _alternating(ring, size + 1)
    if m >= 0:
        return a, parameter_t(ring) * _alternating(ring, size - 1) if size else ring.one, 0
    return (a, -following, -size) if size % 2 else (-a, following, -size)


def _alternating(ring: ParameterRing, m: int) -> fmpz_mpoly:
    """t^(m-1) - t^(m-2) + ... + (-1)^(m-1)."""
    return ring.polynomial({
        ring.exponents({"t": m - 1 - j}): (-1) ** j for j in range(m)})


class HeckeAlgebra(Algebra):
    """Left multiplication by X^mu and T_w^k; rows may carry Y^nu along."""

    kinds = frozenset({"X", "T", "symmetrizer", "antisymmetrizer"})

    def __init__(self, ring: ParameterRing, n: int) -> None:
        super().__init__(ring, n)
        self.rule = HeckeRule(ring)

    def multiply(self, letter: Letter, element: Element) -> Element:
        """letter * element."""
        if letter.kind == "X":
            return self.shifted(element, letter.subscript)
        if letter.kind == "T":
            return self.by_reduced_word(letter, element, self.power)
        for _ in range(letter.power):
            if letter.kind == "symmetrizer":
                element = self.symmetrized(element, lambda i, e: self.power(i, 1, e))
            elif letter.kind == "antisymmetrizer":
                element = self.symmetrized(
                    element, lambda i, e: self.power(i, 1, e).scaled(-t_power(self.ring, -1)))
            else:
                raise Mixed(f"{letter.kind} is not in the affine Hecke algebra")
        return element

    def power(self, i: int, k: int, element: Element) -> Element:
        """T_i^k * element, T_i applied once whatever k is."""
        rows = self.rule.applied(i, element.rows)
        if k == 1:
            return Element(self.ring, rows, element.scale)
        a, b, e = power_of_t(self.ring, k)
        found: Rows = {}
        for mu, row in rows.items():
            found[mu] = row if a.is_one() else {key: c * a for key, c in row.items()}
        for mu, row in element.rows.items():
            target = found.setdefault(mu, {})
            add_row(target, row, b)
        return Element(self.ring, without_zeros(found), element.scale * t_power(self.ring, e))


@lru_cache(maxsize=50_000)
def past_finite(
    ring: ParameterRing, nu: Exponents, w: indices.Permutation
) -> tuple[tuple[indices.Permutation, Exponents, fmpz_mpoly], ...]:
    """Y^nu T_w as a sum of c T_v Y^kappa: rows (v, kappa, c).

    The mirror image of T_(w^-1) X^(-nu).
    """
    algebra = HeckeAlgebra(ring, len(w))
    element = algebra.multiply(Letter("X", tuple(-e for e in nu)), algebra.one())
    mirrored = indices.inverse(w)
    element = algebra.multiply(Letter("T", mirrored), element)
    return tuple(
        (indices.inverse(v), tuple(-e for e in mu), c)
        for mu, row in element.rows.items() for (v, _), c in row.items())


