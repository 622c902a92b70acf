"""Symmetric Macdonald polynomials: P_lambda monic, J_lambda integral; Pieri rules, limits.

Coefficients in m_mu come from the tableau formula and do not depend on n. Macdonald, Symmetric
Functions and Hall Polynomials (1995), VI.4, VI.6 to VI.8. Parameters as in E: P_lambda is the
symmetric polynomial in the span of the E_mu, mu in the orbit of lambda.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import lru_cache

from flint import fmpz_mpoly

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families import nonsymmetric_macdonald as nonsymmetric
from spanwright.kernel.families.base import Coefficients, Family, Index, linear, shown
from spanwright.kernel.families.derivations import Derivation, RuleRow
from spanwright.kernel.families.diagrams import (
    Partition,
    boxes,
    horizontal_strips_above,
    horizontal_strips_below,
    vertical_strips_above,
)
from spanwright.kernel.families.nonsymmetric_macdonald import ONE, one_minus, weights
from spanwright.kernel.families.symmetric_base import (
    RING,
    SymmetricFamily,
    applied_in_e,
    polynomial_of_monomial_symmetric,
)
from spanwright.kernel.indices import decreasing, orbit, padded, partitions, trimmed
from spanwright.kernel.laurent import LaurentPolynomial, Terms
from spanwright.kernel.lines import hecke_image
from spanwright.kernel.parameters import Exponents

BoxRatio = Callable[[Partition, int, int], Scalar]
"""b_lambda(s) for the box s = (row, column) of lambda."""

REFERENCE = "Macdonald, Symmetric Functions and Hall Polynomials (1995), VI (6.24)"


# factors of strips


@lru_cache(maxsize=100_000)
def box_ratio(partition: Partition, row: int, column: int) -> Scalar:
    """b_lambda(s) = (1 - q^a t^(l+1))/(1 - q^(a+1) t^l), rows and columns from 1 (VI.6.20)."""
    arm = partition[row - 1] - column
    leg = sum(1 for part in partition if part >= column) - row
    return one_minus((arm, leg + 1)) * one_minus((arm + 1, leg)).inverse()


def _touched(outer: Partition, inner: Partition) -> tuple[set[int], set[int]]:
    """Rows and columns of the boxes of outer/inner, from 1."""
    rows: set[int] = set()
    columns: set[int] = set()
    for i, part in enumerate(outer, 1):
        before = inner[i - 1] if i <= len(inner) else 0
        if part > before:
            rows.add(i)
            columns.update(range(before + 1, part + 1))
    return rows, columns


def strip_boxes(
    outer: Partition, inner: Partition, *, in_rows: bool, in_columns: bool
) -> Iterator[tuple[int, int]]:
    """Boxes of `inner` whose row meets outer/inner or not, and whose column does or not."""
    rows, columns = _touched(outer, inner)
    for i, part in enumerate(inner, 1):
        if (i in rows) == in_rows:
            for j in range(1, part + 1):
                if (j in columns) == in_columns:
                    yield i, j


@lru_cache(maxsize=100_000)
def psi(outer: Partition, inner: Partition) -> Scalar:
    """psi_(outer/inner): the weight of a horizontal strip in the tableau formula for P."""
    return _tableau_weight(outer, inner, box_ratio)


def _tableau_weight(outer: Partition, inner: Partition, b: BoxRatio) -> Scalar:
    value = ONE
    for i, j in strip_boxes(outer, inner, in_rows=True, in_columns=False):
        value = value * b(inner, i, j) * b(outer, i, j).inverse()
    return value


@lru_cache(maxsize=100_000)
def psi_prime(outer: Partition, inner: Partition) -> Scalar:
    """psi'_(outer/inner): the coefficient of P_outer in e_r P_inner, a vertical strip."""
    value = ONE
    for _, factor in _vertical_factors(outer, inner):
        value = value * factor
    return value


def _vertical_factors(outer: Partition, inner: Partition) -> Iterator[tuple[str, Scalar]]:
    for i, j in strip_boxes(outer, inner, in_rows=False, in_columns=True):
        yield f"box ({i}, {j})", box_ratio(outer, i, j) * box_ratio(inner, i, j).inverse()


def phi(outer: Partition, inner: Partition) -> Scalar:
    """phi_(outer/inner): the coefficient of P_outer in g_r P_inner, a horizontal strip."""
    value = ONE
    for _, factor in _horizontal_factors(outer, inner):
        value = value * factor
    return value


def _horizontal_factors(outer: Partition, inner: Partition) -> Iterator[tuple[str, Scalar]]:
    _, columns = _touched(outer, inner)
    for i, part in enumerate(outer, 1):
        for j in range(1, part + 1):
            if j in columns:
                factor = box_ratio(outer, i, j)
                if i <= len(inner) and j <= inner[i - 1]:
                    factor = factor * box_ratio(inner, i, j).inverse()
                yield f"box ({i}, {j})", factor


def ratio_product(partition: Partition) -> Scalar:
    """b_lambda = product of b_lambda(s) = 1/<P_lambda, P_lambda> (VI.6.19)."""
    value = ONE
    for box in boxes(partition):
        value = value * box_ratio(partition, box.row, box.column)
    return value


@lru_cache(maxsize=20_000)
def integral_factor(partition: Partition) -> Scalar:
    """c_lambda = product of 1 - q^a t^(l+1): J_lambda = c_lambda P_lambda (VI.8.1)."""
    value = ONE
    for box in boxes(partition):
        value = value * one_minus((box.arm, box.leg + 1))
    return value


# into m and back


@lru_cache(maxsize=200_000)
def _tableau_sum(shape: Partition, content: Partition) -> Scalar | None:
    """The sum of psi_T over tableaux of that shape and content; None when there are none."""
    if len(shape) > len(content):
        return None
    if not content:
        return ONE
    budget.current().check()
    values = []
    for inner in horizontal_strips_below(shape, content[-1]):
        rest = _tableau_sum(inner, content[:-1])
        if rest is not None:
            values.append(psi(shape, inner) * rest)
    return total(values) if values else None


@lru_cache(maxsize=5_000)
def in_monomial_symmetric(partition: Partition, n: int) -> Coefficients:
    """P_lambda in the basis m for n variables, by the tableau formula (VI.7.13')."""
    found = {}
    for content in partitions(sum(partition), n):
        value = _tableau_sum(partition, content)
        if value is not None:
            found[content] = value
    return found


def of_monomial_symmetric(terms: Mapping[Index, Scalar], n: int) -> Coefficients:
    """A sum of m_mu in the basis P: the largest index first, each subtracted in turn."""
    return peeled(terms, lambda index: in_monomial_symmetric(index, n))


def peeled(
    terms: Mapping[Index, Scalar], element: Callable[[Index], Mapping[Index, Scalar]]
) -> Coefficients:
    """Coefficients c with sum c_lambda element(lambda) = terms, elements monic and triangular.

    Triangular for lexicographic order inside a size; one sum, over one denominator, an index.
    """
    known: dict[Index, list[Scalar]] = {mu: [c] for mu, c in terms.items()}
    result: Coefficients = {}
    while known:
        index = max(known, key=lambda mu: (sum(mu), mu))
        budget.current().check()
        c = total(known.pop(index))
        if c.is_zero:
            continue
        result[index] = c
        for mu, d in element(index).items():
            if mu != index:
                known.setdefault(mu, []).append(-(c * d))
    return result


# from E


def in_nonsymmetric(partition: Partition, n: int) -> Coefficients:
    """P_lambda in the E_mu of its orbit: products of (t - z)/(1 - z) over i < j, mu_i > mu_j.

    z = u_i(mu)/u_j(mu), u_i = q^(mu_i) t^(v_mu(i)); the increasing mu has coefficient 1.
    Macdonald, Affine Hecke Algebras and Orthogonal Polynomials (2003), chapter 5.
    """
    found = {}
    for mu in orbit(padded(partition, n)):
        u = weights(mu)
        value = ONE
        for i in range(n):
            for j in range(i + 1, n):
                if mu[i] > mu[j]:
                    a, b = nonsymmetric.ratio(u[i], u[j])
                    # (t - z)/(1 - z) = t (1 - z/t)/(1 - z)
                    value = (value * one_minus((a, b - 1)) * one_minus((a, b)).inverse()
                             * nonsymmetric.weight_scalar((0, 1)))
        found[mu] = value
    return found


def from_nonsymmetric(terms: Mapping[Index, Scalar], n: int) -> Coefficients:
    """A sum of E_mu in P: the coefficients at increasing mu; raises OutsideDomain when unequal.

    Indices have parts >= 0.
    """
    found: Coefficients = {}
    for mu, c in terms.items():
        if mu == tuple(sorted(mu)) and not c.is_zero:
            if min(mu, default=0) < 0:
                raise OutsideDomain(
                    f"E_{shown(mu)} has a negative part", code="not-a-polynomial")
            found[trimmed(decreasing(mu))] = c
    back = linear(found, lambda index: in_nonsymmetric(index, n))
    moved = [mu for mu, c in terms.items() if c != back.get(mu, 0)]
    moved += [mu for mu in back if mu not in terms]
    if moved:
        raise OutsideDomain(
            f"the sum is not symmetric: see its coefficient at E_{shown(moved[0])}",
            code="not-symmetric")
    return found


def applied_t(polynomial: LaurentPolynomial, i: int) -> LaurentPolynomial:
    """T_i f = t s_i f + (1 - t) x_(i+1) (f - s_i f)/(x_i - x_(i+1)), i from 1."""
    ring = polynomial.ring
    terms = hecke_image(polynomial.terms, i, ring.context.gen(ring.slot("t")))
    # T_i is invertible over Z[t, 1/t]: no factor of a denominator can come to divide all terms
    return LaurentPolynomial.reduced(polynomial.n, ring, terms, polynomial.scale, suspects=())


def by_symmetrisation(partition: Partition, n: int) -> LaurentPolynomial:
    """P_lambda = sum over minimal coset representatives w of T_w E_lambda, lambda decreasing.

    E_lambda is symmetric in every block of equal parts. The longest block grows by a position at
    a time, to the right by 1 + T_b + T_(b-1) T_b + ..., then to the left; the other blocks act by
    their Poincare polynomials, divided out at the end. Of the last sum only one exponent an orbit
    is worked out.
    """
    lam = padded(partition, n)
    if lam[0] == lam[-1]:
        return nonsymmetric.to_monomials(lam)
    if lam[-1]:
        low = lam[-1]
        below = trimmed(tuple(part - low for part in lam))
        return by_symmetrisation(below, n).shifted((low,) * n)
    f = nonsymmetric.to_monomials(lam)
    ring = f.ring
    t = ring.context.gen(ring.slot("t"))
    chains, poincare = _coset_chains(lam)
    terms = f.terms
    for chain in chains[:-1]:
        terms = _summed_along(terms, chain, t)
    # where the last T_i takes two exponents, small ones make for short lines
    is_leftwards = chains[-1][-1] > chains[-1][0]
    wanted = {
        padded(nu, n) if is_leftwards else padded(nu, n)[::-1]
        for nu in partitions(sum(lam), n) if nu <= trimmed(lam)}
    terms = _summed_along(terms, chains[-1], t, wanted)
    # decreasing exponents, among them the largest of all, settle the sign
    representatives = LaurentPolynomial.reduced(
        n, ring, {decreasing(e): c for e, c in terms.items()}, f.scale * poincare.inverse())
    return LaurentPolynomial(
        n, ring, {e: c for nu, c in representatives.terms.items() for e in orbit(nu)},
        representatives.scale)


def _coset_chains(lam: Index) -> tuple[list[list[int]], Scalar]:
    """For every position that the longest block grows by, the i of T_i, T_j T_i, ...; and [k]_t!.

    The product of [k]_t! is over the lengths k of the other blocks.
    """
    n = len(lam)
    longest = max(set(lam), key=lam.count)
    first = lam.index(longest)
    last = first + lam.count(longest) - 1
    chains = [list(range(b, first, -1)) for b in range(last + 1, n)]
    chains += [list(range(a, n)) for a in range(first, 0, -1)]
    poincare = ONE
    for part in set(lam) - {longest}:
        for k in range(2, lam.count(part) + 1):  # [k]_t = (1 - t^k)/(1 - t)
            poincare = poincare * one_minus((0, k)) * one_minus((0, 1)).inverse()
    return chains, poincare


def _summed_along(
    terms: Terms, chain: list[int], t: fmpz_mpoly, wanted: set[Exponents] | None = None
) -> Terms:
    """f + T_i f + T_j T_i f + ... for the chain i, j, ...; at the `wanted` exponents alone."""
    needed: list[set[Exponents] | None] = [wanted]
    for i in reversed(chain):
        needed.append(None if needed[-1] is None else _on_lines(needed[-1], i))
    needed.reverse()
    result: Terms = {}
    for place in range(len(chain) + 1):
        if place:
            terms = hecke_image(_restricted(terms, needed[place - 1]), chain[place - 1], t)
        budget.current().check()
        for e, c in _restricted(terms, wanted).items():
            known = result.get(e)
            result[e] = c if known is None else known + c
    return {e: c for e, c in result.items() if c}


def _on_lines(exponents: set[Exponents], i: int) -> set[Exponents]:
    """All exponents on whose coefficients those of T_i f at the given ones depend."""
    return {
        (*e[: i - 1], k, e[i - 1] + e[i] - k, *e[i + 1 :])
        for e in exponents for k in range(e[i - 1] + e[i] + 1)}


def _restricted(terms: Terms, exponents: set[Exponents] | None) -> Terms:
    if exponents is None:
        return terms
    return {e: c for e, c in terms.items() if e in exponents}


# Pieri rules


@dataclass(frozen=True, slots=True)
class PieriRow:
    """One strip of a Pieri rule: its outer shape, a factor for each box that gives one.

    `obstacle` says why the row vanishes: the shape has more parts than there are variables.
    """

    target: Partition
    factors: tuple[tuple[str, Scalar], ...]
    obstacle: str | None

    @property
    def coefficient(self) -> Scalar:
        """The product of the factors, 0 for a vanishing row."""
        if self.obstacle is not None:
            return Scalar.zero(RING)
        value = ONE
        for _, factor in self.factors:
            value = value * factor
        return value


def multiply_by_e(partition: Partition, r: int, n: int) -> Coefficients:
    """e_r P_lambda in P: vertical strips with psi' (VI.6.24 iv)."""
    if len(partition) > n:
        return {}
    return {
        outer: psi_prime(outer, partition)
        for outer in vertical_strips_above(partition, r, n)}


def multiply_by_row(partition: Partition, r: int, n: int) -> Coefficients:
    """P_(r) P_lambda in P: horizontal strips with phi / b_(r), as g_r = b_(r) P_(r) (VI.6.24 i)."""
    if len(partition) > n:
        return {}
    unit = ratio_product((r,) if r else ()).inverse()
    return {
        outer: phi(outer, partition) * unit
        for outer in horizontal_strips_above(partition, r, n)}


def derive_e(partition: Partition, r: int, n: int) -> Derivation:
    """e_r P_lambda explained: all vertical strips, those with too many parts included."""
    rows: list[RuleRow] = []
    for outer in vertical_strips_above(partition, r):
        obstacle = f"more than {n} parts" if len(outer) > n else None
        rows.append(PieriRow(outer, tuple(_vertical_factors(outer, partition)), obstacle))
    return Derivation(
        "Pieri rule for e_r P",
        "e_r P_lambda = sum of psi'_(mu/lambda) P_mu over vertical r-strips mu/lambda: the product "
        "of b_mu(s)/b_lambda(s) over boxes s of lambda whose column meets the strip and whose row "
        "does not, b_lambda(s) = (1 - q^a t^(l+1))/(1 - q^(a+1) t^l)",
        REFERENCE, tuple(rows))


def derive_row(partition: Partition, r: int, n: int) -> Derivation:
    """P_(r) P_lambda explained: all horizontal strips, those with too many parts included."""
    rows: list[RuleRow] = []
    unit = ratio_product((r,) if r else ()).inverse()
    for outer in horizontal_strips_above(partition, r):
        obstacle = f"more than {n} parts" if len(outer) > n else None
        rows.append(PieriRow(
            outer, (("1/b of the row", unit), *_horizontal_factors(outer, partition)), obstacle))
    return Derivation(
        "Pieri rule for P_(r) P",
        "P_(r) P_lambda = sum of phi_(mu/lambda)/b_(r) P_mu over horizontal r-strips mu/lambda: "
        "the product of b_mu(s)/b_lambda(s) over boxes s whose column meets the strip, "
        "b_lambda(s) = (1 - q^a t^(l+1))/(1 - q^(a+1) t^l) for s in lambda, else 1",
        REFERENCE, tuple(rows))


def _pieri_cost(partition: Partition) -> int:
    """How many Pieri steps a factor P_lambda asks for, roughly: one for a row or a column."""
    return 1 if len(partition) <= 1 or partition[0] == 1 else sum(partition)


def multiply_by_e_product(terms: Coefficients, index: Partition, n: int) -> Coefficients:
    """e_index times a sum of P, one part after another."""
    for r in index:
        terms = linear(terms, lambda nu, r=r: multiply_by_e(nu, r, n))  # type: ignore[misc]
    return terms


# limits by name


def hall_littlewood(partition: Partition, n: int) -> LaurentPolynomial:
    """The Hall-Littlewood polynomial P_lambda(x; t): q = 0."""
    return _at(partition, n, {"q": Scalar.zero(RING)})


def q_whittaker(partition: Partition, n: int) -> LaurentPolynomial:
    """The q-Whittaker polynomial: P_lambda at t = 0."""
    return _at(partition, n, {"t": Scalar.zero(RING)})


def _at(partition: Partition, n: int, images: Mapping[str, Scalar]) -> LaurentPolynomial:
    return polynomial_of_monomial_symmetric(
        {mu: c.substitute(images) for mu, c in in_monomial_symmetric(partition, n).items()}, n)


class SymmetricMacdonald(SymmetricFamily):
    """P_lambda(x; q, t), at most n parts, coefficient 1 at m_lambda."""

    name = "P"

    def in_monomial_symmetric(self, index: Partition, n: int) -> Coefficients:
        """By the tableau formula."""
        return dict(in_monomial_symmetric(index, n))

    def of_monomial_symmetric(self, terms: Coefficients, n: int) -> Coefficients:
        """By triangularity."""
        return of_monomial_symmetric(terms, n)

    def direct_from(
        self, other: SymmetricFamily, index: Partition, n: int
    ) -> Coefficients | None:
        """J by its factor, e by the Pieri rule."""
        if other.name == "J":
            return {index: integral_factor(index)} if len(index) <= n else {}
        if other.name == "e":
            return multiply_by_e_product({(): ONE}, index, n)
        return None

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """By the Pieri rules: one row by the rule for g_r, all else through e."""
        if not isinstance(other, SymmetricFamily):
            return None
        index, other_index = trimmed(index), trimmed(other_index)
        if len(index) > n:
            return {}
        if other is self:
            if _pieri_cost(index) < _pieri_cost(other_index):
                index, other_index = other_index, index
            if len(other_index) <= 1:
                return multiply_by_row(index, sum(other_index), n)
            if other_index[0] == 1:
                return multiply_by_e(index, len(other_index), n)
        return applied_in_e(
            other.in_e(other_index, n), {index: ONE}, lambda r, nu: multiply_by_e(nu, r, n))


class IntegralMacdonald(SymmetricFamily):
    """J_lambda(x; q, t) = c_lambda P_lambda, coefficients in Z[q, t]."""

    name = "J"

    def in_monomial_symmetric(self, index: Partition, n: int) -> Coefficients:
        """By the factor of P."""
        factor = integral_factor(index)
        return {mu: c * factor for mu, c in in_monomial_symmetric(index, n).items()}

    def of_monomial_symmetric(self, terms: Coefficients, n: int) -> Coefficients:
        """Through P."""
        return _integral(of_monomial_symmetric(terms, n))

    def direct_from(
        self, other: SymmetricFamily, index: Partition, n: int
    ) -> Coefficients | None:
        """P by its factor, e by the Pieri rule."""
        if other.name == "P":
            return _integral({index: ONE} if len(index) <= n else {})
        if other.name == "e":
            return _integral(multiply_by_e_product({(): ONE}, index, n))
        return None

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """By the Pieri rules of P."""
        index, other_index = trimmed(index), trimmed(other_index)
        own, scale = FAMILIES["P"], integral_factor(index)
        partner = own if other is self else other
        found = own.times_element(index, n, partner, other_index)
        if found is None:
            return None
        if other is self:
            scale = scale * integral_factor(other_index)
        return {nu: c * scale for nu, c in _integral(found).items()}


def _integral(terms: Coefficients) -> Coefficients:
    """A sum of P as one of J."""
    return {index: c * integral_factor(index).inverse() for index, c in terms.items()}


FAMILIES: dict[str, SymmetricFamily] = {"P": SymmetricMacdonald(), "J": IntegralMacdonald()}
