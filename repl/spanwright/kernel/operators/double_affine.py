"""The double affine Hecke algebra of type GL_n: canonical form X^mu T_w Y^nu, plain normalisation.

T_pi X^mu = q^(-mu_n) X^(mu_n, mu_1, ..., mu_(n-1)) T_pi, then T_pi T_w is a remembered sum of
T_v Y_j; Y^nu is a word in T_i and T_pi (Cherednik, Double affine Hecke algebras and Macdonald's
conjectures, 1995). A sum without X meets Y^nu by its mirror image instead.
"""

from __future__ import annotations

from functools import lru_cache

from flint import fmpz_mpoly

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.operators.elements import (
    Element,
    Row,
    Rows,
    add_row,
    t_power,
    without_zeros,
)
from spanwright.kernel.operators.hecke import HeckeAlgebra, HeckeRule, past_finite
from spanwright.kernel.operators.words import Letter, cherednik_steps
from spanwright.kernel.parameters import Exponents, ParameterRing

Table = tuple[tuple[indices.Permutation, Exponents, fmpz_mpoly], ...]


class DoubleAffineHeckeAlgebra(HeckeAlgebra):
    """Left multiplication by X^mu, T_w, Y^nu, T_pi, tau_pi; rows are sums of T_w Y^nu."""

    kinds = HeckeAlgebra.kinds | {"Y", "T_pi", "tau_pi"}

    def multiply(self, letter: Letter, element: Element) -> Element:
        """letter * element."""
        if letter.kind == "Y":
            return self._times_y(letter.subscript, element)
        if letter.kind == "T_pi":
            return self._times_t_pi(letter.power, element)
        if letter.kind == "tau_pi":
            sign = 1 if letter.power > 0 else -1
            first = tuple(sign * int(k == 0) for k in range(self.n))
            for _ in range(abs(letter.power)):  # tau_pi = X_1 T_pi
                if sign < 0:
                    element = self.shifted(element, first)
                element = self._times_t_pi(sign, element)
                if sign > 0:
                    element = self.shifted(element, first)
            return element
        return super().multiply(letter, element)

    def _times_y(self, nu: Exponents, element: Element) -> Element:
        if set(element.rows) <= {self.origin}:
            row = element.rows.get(self.origin, {})
            tables = {w: past_finite(self.ring, nu, w) for w, _ in row}
            return Element(
                self.ring, without_zeros({self.origin: _through(row, tables)}), element.scale)
        steps, m, e = cherednik_steps(self.n, nu)
        if m:
            element = self._times_all_y(m, element)
        for i, k in steps:
            element = self.power(i, k, element) if i else self._times_t_pi(k, element)
            budget.current().check_terms(element.n_terms(), "this canonical form")
        return element.scaled(t_power(self.ring, e))

    def _times_all_y(self, m: int, element: Element) -> Element:
        """(Y_1 ... Y_n)^m: it commutes with every T_i, and with X^mu up to q^(-|mu|)."""
        rows: Rows = {
            mu: {(w, tuple(e + m for e in nu)): c for (w, nu), c in row.items()}
            for mu, row in element.rows.items()}
        return self._times_q_powers(rows, {mu: -m * sum(mu) for mu in rows}, element.scale)

    def _times_q_powers(
        self, rows: Rows, powers: dict[Exponents, int], scale: Scalar
    ) -> Element:
        """Each row times its power of q, the least power taken out."""
        ring = self.ring
        low = min(powers.values(), default=0)
        found: Rows = {}
        for mu, row in rows.items():
            if powers[mu] != low:
                factor = ring.monomial(ring.exponents({"q": powers[mu] - low}))
                row = {key: c * factor for key, c in row.items()}
            found[mu] = row
        return Element(
            ring, found, scale * Scalar.monomial_of(ring, ring.exponents({"q": low})))

    def _times_t_pi(self, k: int, element: Element) -> Element:
        # T_pi^n = t^(-n(n-1)/2) Y_1 ... Y_n
        turns, k = divmod(k, self.n)
        if 2 * k > self.n:
            turns, k = turns + 1, k - self.n
        if turns:
            element = self._times_all_y(turns, element).scaled(
                t_power(self.ring, -turns * self.n * (self.n - 1) // 2))
        for _ in range(abs(k)):
            element = self._one_t_pi(1 if k > 0 else -1, element)
        return element

    def _one_t_pi(self, sign: int, element: Element) -> Element:
        rows: Rows = {}
        powers: dict[Exponents, int] = {}
        tables: dict[indices.Permutation, Table] = {}
        for mu, row in element.rows.items():
            if sign > 0:
                target, power = (mu[-1], *mu[:-1]), -mu[-1]
            else:
                target, power = (*mu[1:], mu[0]), mu[0]
            for w, _ in row:
                if w not in tables:
                    tables[w] = turned_finite(self.ring, w, sign)
            rows[target] = _through(row, tables)
            powers[target] = power
        result = self._times_q_powers(without_zeros(rows), powers, element.scale)
        return result.scaled(t_power(self.ring, 1 - self.n)) if sign > 0 else result


def _through(row: Row, tables: dict[indices.Permutation, Table]) -> Row:
    """sum of c T_w Y^nu with each T_w replaced by its table."""
    result: Row = {}
    for (w, nu), c in row.items():
        for v, kappa, d in tables[w]:
            key = (v, tuple(map(int.__add__, kappa, nu)))
            known = result.get(key)
            added = c if d.is_one() else c * d
            result[key] = added if known is None else known + added
    return result


@lru_cache(maxsize=20_000)
def turned_finite(ring: ParameterRing, w: indices.Permutation, sign: int) -> Table:
    """T_pi^sign T_w as rows (v, nu, c) for c T_v Y^nu; times t^(n-1) when the sign is +1.

    T_pi = Y_1 T_1^-1 ... T_(n-1)^-1.
    """
    n = len(w)
    rule = HeckeRule(ring)
    first = tuple(sign * int(k == 0) for k in range(n))
    row: Row = {(w, (0,) * n): ring.one}
    if sign > 0:
        for i in range(n - 1, 0, -1):  # t T_i^-1 = T_i + 1 - t
            turned = rule.left(i, row)
            add_row(turned, row, rule.factor)
            row = {key: c for key, c in turned.items() if c}
    row = _through(row, {v: past_finite(ring, first, v) for v, _ in row})
    if sign < 0:
        for i in range(1, n):
            row = rule.left(i, row)
    return tuple((v, nu, c) for (v, nu), c in row.items() if c)
