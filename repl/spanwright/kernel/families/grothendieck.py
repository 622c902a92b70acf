"""Grothendieck polynomials G_w with parameter beta: monomials, K-theoretic Monk rules, products.

D_i = d_i (1 + beta x_(i+1)) carries them to each other: D_i G_w = G_(w s_i) where
w(i) > w(i+1), else -beta G_w. beta = 0 gives S_w, beta = -1 the classical G_w of Lascoux and
Schuetzenberger, Structure de Hopf de l'anneau de cohomologie et de l'anneau de Grothendieck d'une
variete de drapeaux (1982); beta: Fomin and Kirillov, Grothendieck polynomials and the Yang-Baxter
equation (1994). beta has degree -1, which makes G_w homogeneous of degree l(w): so coefficients
are integers inside, and powers of beta come from degrees.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from heapq import heapify, heappop
from math import comb
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.base import Coefficients, Family, Index
from spanwright.kernel.families.derivations import Derivation, Row, cover_row
from spanwright.kernel.families.packed import (
    DIGIT,
    Packed,
    degree,
    digits,
    from_laurent,
    multiplied,
    scalar,
    subtract,
    unpack,
)
from spanwright.kernel.families.schubert import (
    Integers,
    PermutationFamily,
    check_variables,
    first_rows,
    from_packed,
    n_variables,
    polynomial,
)
from spanwright.kernel.indices import (
    Permutation,
    extended,
    from_code,
    inverse,
    length,
    reduced_size,
    swapped,
)
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

Parts = list[dict[int, int]]
"""A polynomial by degree above the lowest: packed monomials (see packed.py) to integers."""

RING = ParameterRing.get().extended(["beta"])
"""Q(q, t, beta)."""

# Polynomials are remembered up to this many monomials in all, then the memory starts afresh.
REMEMBERED_MONOMIALS = 2_000_000


def beta_power(k: int, c: int = 1) -> Scalar:
    """c beta^k."""
    if not c:
        return Scalar.zero(RING)
    return Scalar.monomial_of(RING, RING.exponents({"beta": k}), c)


# into monomials


class _Memory:
    """G_w at beta = 1 by the inverse permutation, and by the leading monomial."""

    def __init__(self) -> None:
        self.by_inverse: dict[Permutation, Parts] = {}
        self.by_leader: dict[int, Parts] = {}
        self.n_monomials = 0

    def forget(self) -> None:
        self.by_inverse.clear()
        self.by_leader.clear()
        self.n_monomials = 0


_memory = _Memory()


def forget_polynomials() -> None:
    """Drop the remembered G_w: for measurements and for memory."""
    _memory.forget()


def parts(w: Permutation) -> Sequence[Mapping[int, int]]:
    """G_w at beta = 1 cut by degree, parts(w)[0] being S_w, remembered.

    The coefficient of beta^k is parts(w)[k]. Sum over all pipe dreams whose 0-Hecke product is w,
    a row at a time: a letter that might have been taken and was not counts 1 + beta x_1.
    """
    return _parts(reduced_size(inverse(w)))


def _parts(inverse_of_w: Permutation) -> Parts:
    known = _memory.by_inverse
    found = known.get(inverse_of_w)
    if found is not None:
        return found
    if _memory.n_monomials > REMEMBERED_MONOMIALS:
        _memory.forget()
    known.setdefault((), [{0: 1}])
    pending = [(inverse_of_w, list(first_rows(inverse_of_w)))]
    while pending:
        target, rows = pending[-1]
        missing = [v for _, _, v in rows if v not in known]
        if missing:
            pending.extend((v, list(first_rows(v))) for v in missing)
            continue
        pending.pop()
        if target in known:
            continue
        budget.current().check()
        combined: Parts = []
        for letters, n_left, v in rows:
            for k in range(n_left + 1):
                power, factor = len(letters) + k, comb(n_left, k)
                for extra, part in enumerate(known[v], k):
                    while len(combined) <= extra:
                        combined.append({})
                    terms = combined[extra]
                    for key, c in part.items():
                        key = (key << DIGIT) + power
                        terms[key] = terms.get(key, 0) + c * factor
        known[target] = combined
        n_terms = sum(map(len, combined))
        _memory.n_monomials += n_terms
        budget.current().check_terms(n_terms, "this Grothendieck polynomial")
    return known[inverse_of_w]


def _with_leader(key: int) -> Parts:
    found = _memory.by_leader.get(key)
    if found is None:
        found = _memory.by_leader[key] = _parts(reduced_size(inverse(from_code(digits(key)))))
    return found


def to_monomials(w: Permutation, n: int) -> LaurentPolynomial:
    """G_w in n variables over Z[beta]; raises OutsideDomain when it needs more."""
    check_variables(w, n, "G")
    beta = RING.exponents({"beta": 1})
    context = RING.context
    # positive coefficients, one of them 1: nothing to reduce
    terms = {
        unpack(key, n): context.from_dict({tuple(k * e for e in beta): c})
        for k, part in enumerate(parts(w)) for key, c in part.items()}
    return LaurentPolynomial(n, RING, terms, Scalar.one(RING))


# from monomials


def _by_degree(terms: Mapping[int, Any]) -> dict[int, Packed]:
    found: dict[int, Packed] = {}
    for key, c in terms.items():
        found.setdefault(degree(key), {})[key] = c
    return found


def _expanded(by_degree: dict[int, Packed]) -> dict[Permutation, Any]:
    """The coefficients at beta = 1 of a sum, cut by degree (it is used up).

    Lowest degree first, and inside a degree the reverse-lexicographic leader. Products of
    Grothendieck polynomials and all polynomials have finite expansions: Lenart, A K-theory
    version of Monk's formula and some related multiplication formulas (2003).
    """
    found: dict[Permutation, Any] = {}
    while by_degree:
        d = min(by_degree)
        left = by_degree.pop(d)
        waiting = [-key for key in left]
        heapify(waiting)
        while waiting:
            key = -heappop(waiting)
            c = left.pop(key)
            if not c:
                continue
            found[from_code(digits(key))] = c
            budget.current().check_terms(len(found), "this expansion")
            first, *higher = _with_leader(key)
            subtract(left, first, c, waiting, key)
            for extra, part in enumerate(higher, d + 1):
                target = by_degree.setdefault(extra, {})
                get = target.get
                for k, a in part.items():
                    target[k] = get(k, 0) - c * a
    return found


def from_monomials(given: LaurentPolynomial) -> Coefficients:
    """The coefficients in the G_w with at most n variables."""
    by_degree = _by_degree(from_laurent(given, "G"))
    found: Coefficients = {}
    for d, part in sorted(by_degree.items()):
        for w, c in _expanded({d: part}).items():
            value = scalar(c, given) * beta_power(length(w) - d)
            known = found.get(w)
            found[w] = value if known is None else known + value
    return {w: c for w, c in found.items() if not c.is_zero}


def from_schubert(w: Permutation) -> Coefficients:
    """S_w in the G_u: signs alternate with the length."""
    lowest = length(w)
    return {
        u: beta_power(length(u) - lowest, c)
        for u, c in _expanded({lowest: dict(polynomial(w))}).items()}


def in_schubert(w: Permutation) -> Coefficients:
    """G_w in the S_u, coefficients in N[beta]."""
    return {
        u: beta_power(k, c)
        for k, part in enumerate(parts(w)) for u, c in from_packed(part).items()}


# products


def multiply(u: Permutation, v: Permutation) -> Integers:
    """G_u G_v = sum of c_w beta^(l(w) - l(u) - l(v)) G_w: the integers c_w, all positive."""
    lowest = length(u) + length(v)
    product: dict[int, Packed] = {}
    for i, a in enumerate(parts(u)):
        for j, b in enumerate(parts(v), lowest + i):
            target = product.setdefault(j, {})
            for key, c in multiplied(a, b).items():
                target[key] = target.get(key, 0) + c
    return _expanded(product)


def with_beta(terms: Mapping[Permutation, int], lowest: int) -> Coefficients:
    """Integer coefficients c_w as c_w beta^(l(w) - lowest)."""
    return {w: beta_power(length(w) - lowest, c) for w, c in terms.items() if c}


def _generator_order(w: Permutation, r: int) -> Iterator[tuple[int, int, int]]:
    """The transpositions (a, b) with signs for x_r, in the order in which they act."""
    for i in range(r - 1, 0, -1):
        yield i, r, -1
    for j in range(max(len(w), r) + 1, r, -1):
        yield r, j, 1


def _monk_order(w: Permutation, r: int) -> Iterator[tuple[int, int, int]]:
    for i in range(1, r + 1):
        for j in range(max(len(w), r) + 1, r, -1):
            yield i, j, 1


def _chain_sum(w: Permutation, order: Iterator[tuple[int, int, int]], r: int) -> Integers:
    """Ends of the non-empty chains that follow the order, each step of length + 1, signed."""
    start = extended(w, max(len(w), r) + 1)
    terms = {start: 1}
    for a, b, sign in order:
        fresh: Integers = {}
        for v, c in terms.items():
            own, other = v[a - 1], v[b - 1]
            if own < other and not any(own < k < other for k in v[a : b - 1]):
                target = v[: a - 1] + (other,) + v[a : b - 1] + (own,) + v[b:]
                fresh[target] = fresh.get(target, 0) + sign * c
        for v, c in fresh.items():
            terms[v] = terms.get(v, 0) + c
        budget.current().check_terms(len(terms), "this product")
    terms[start] -= 1
    return {reduced_size(v): c for v, c in terms.items() if c}


def multiply_by_generator(w: Permutation, r: int) -> Integers:
    """x_r G_w = sum of c_v beta^(l(v) - l(w) - 1) G_v: the integers c_v.

    (1 + beta x_r) G_w is the product of (1 - beta T_ir), i = r-1, ..., 1 in time, then of
    (1 + beta T_rj), j = N, ..., r+1, on G_w, where T_ab G_v = G_(v t_ab) if the length grows by 1,
    else 0. Lenart, A K-theory version of Monk's formula and some related multiplication formulas
    (2003).
    """
    return _chain_sum(w, _generator_order(w, r), r)


def monk(w: Permutation, r: int) -> Integers:
    """G_(s_r) G_w = sum of c_v beta^(l(v) - l(w) - 1) G_v: the integers c_v.

    (1 + beta G_(s_r)) G_w is the product of (1 + beta T_ij), i = 1, ..., r in time and inside
    each i j = N, ..., r+1, on G_w. Lenart (2003).
    """
    return _chain_sum(w, _monk_order(w, r), r)


# operators


def isobaric_difference(w: Permutation, i: int) -> tuple[Permutation, Scalar]:
    """D_i G_w = c G_v as (v, c): (w s_i, 1) where w(i) > w(i+1), else (w, -beta)."""
    if i < len(w) and w[i - 1] > w[i]:
        return reduced_size(swapped(w, i)), beta_power(0)
    return w, beta_power(1, -1)


# rules laid out


def _chain_rows(w: Permutation, order: Iterator[tuple[int, int, int]], r: int) -> list[Row]:
    """Every non-empty chain, and the first steps that fail with the reason."""
    chains: list[tuple[Permutation, tuple[tuple[int, int], ...], int]] = [(w, (), 1)]
    failing = []
    for a, b, sign in order:
        for v, steps, c in list(chains):
            row = cover_row(v, a, b, sign)
            if row.obstacle is None:
                chains.append((row.target, (*steps, (a, b)), c * sign))
            elif not steps:
                failing.append(row)
        budget.current().check_terms(len(chains), "this list of chains")
    rows = [
        Row(steps, v, beta_power(len(steps) - 1, c)) for v, steps, c in chains if steps]
    return [*sorted(rows, key=lambda row: (len(row.steps), row.steps)), *failing]


def generator_derivation(w: Permutation, r: int) -> Derivation:
    """x_r G_w: the chains of the rule, and the single steps that fail with the reason."""
    return Derivation(
        "K-theoretic Monk rule for a variable",
        "x_r G_w = sum over non-empty chains of (-1)^(number of steps t_ir, i < r) "
        "beta^(steps - 1) G_end, first t_ir with i falling, then t_rj with j > r falling, every "
        "step of length + 1",
        "Lenart, A K-theory version of Monk's formula and some related multiplication formulas "
        "(2003)",
        tuple(_chain_rows(w, _generator_order(w, r), r)))


def monk_derivation(w: Permutation, r: int) -> Derivation:
    """G_(s_r) G_w: the chains of the rule, and the single steps that fail with the reason."""
    return Derivation(
        "K-theoretic Monk rule",
        "G_(s_r) G_w = sum over non-empty chains of beta^(steps - 1) G_end, steps t_ij with "
        "i <= r < j, i growing and inside each i j falling, every step of length + 1",
        "Lenart, A K-theory version of Monk's formula and some related multiplication formulas "
        "(2003)",
        tuple(_chain_rows(w, _monk_order(w, r), r)))


class Grothendieck(PermutationFamily):
    """G_w, w a permutation, with parameter beta."""

    name = "G"

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Smallest length first, as powers of beta grow; then by one-line notation."""
        return (length(index), index)

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """Row by row; raises OutsideDomain when n variables are not enough."""
        return to_monomials(index, n)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """By lowest leading monomials."""
        return from_monomials(polynomial)

    def times_generator(self, index: Index, n: int, j: int, power: int) -> Coefficients | None:
        """By the K-theoretic Monk rule for a variable."""
        if power != 1:
            return None
        return with_beta(multiply_by_generator(index, j), length(index) + 1)

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """With another G_v: G_(s_r) by the K-theoretic Monk rule, else by monomials."""
        if other is not self:
            return None
        lowest = length(index) + length(other_index)
        for first, second in ((index, other_index), (other_index, index)):
            if length(first) == 1:
                return with_beta(monk(second, n_variables(first)), lowest)
        return with_beta(multiply(index, other_index), lowest)

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """From S, whatever number of variables it needs."""
        return from_schubert(index) if other.name == "S" else None


FAMILIES = {"G": Grothendieck()}
