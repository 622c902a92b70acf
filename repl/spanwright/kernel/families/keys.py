"""Key polynomials kappa_alpha, alpha in N^n: monomials, isobaric differences, conversions.

kappa_lambda = x^lambda for a partition, kappa_(s_i alpha) = pi_i kappa_alpha for
alpha_i > alpha_(i+1), pi_i f = d_i(x_i f). Demazure, Une nouvelle formule des caracteres (1974);
Lascoux and Schuetzenberger, Keys and standard bases (1990).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.families.base import Coefficients, Family, Index, check_composition
from spanwright.kernel.families.derivations import Derivation, Row, integer
from spanwright.kernel.families.packed import (
    by_leaders,
    digits,
    from_laurent,
    isobaric,
    multiplied,
    pack,
    scalar,
    to_laurent,
)
from spanwright.kernel.families.schubert import (
    check_variables,
    is_vexillary,
    polynomial,
    scalars,
)
from spanwright.kernel.indices import (
    Composition,
    Permutation,
    code,
    padded,
    swapped,
    trimmed,
)
from spanwright.kernel.laurent import LaurentPolynomial

Integers = dict[Composition, int]
"""A sum of basis elements with integer coefficients."""

# Polynomials are remembered up to this many monomials in all, then the memory starts afresh.
REMEMBERED_MONOMIALS = 2_000_000


class OrbitMemory:
    """Packed polynomials of one family by packed index, each built from one nearer a partition.

    f_lambda = x^lambda for a partition, f_(s_i alpha) = step(f_alpha, i) for
    alpha_i > alpha_(i+1).
    """

    def __init__(self, step: Callable[[Mapping[int, int], int], dict[int, int]]) -> None:
        self.step = step
        self.known: dict[int, dict[int, int]] = {}
        self.n_monomials = 0

    def forget(self) -> None:
        """Start afresh."""
        self.known.clear()
        self.n_monomials = 0

    def polynomial(self, key: int) -> Mapping[int, int]:
        """The polynomial with leading monomial `key`."""
        found = self.known.get(key)
        if found is not None:
            return found
        if self.n_monomials > REMEMBERED_MONOMIALS:
            self.forget()
        alpha = digits(key)
        pending: list[tuple[int, int]] = []
        while key not in self.known:
            i = first_ascent(alpha)
            if i is None:
                self.known[key] = {key: 1}
                break
            pending.append((key, i))
            alpha = swapped(alpha, i)
            key = pack(alpha)
        terms = self.known[key]
        for target, i in reversed(pending):
            budget.current().check()
            terms = self.known[target] = self.step(terms, i)
            self.n_monomials += len(terms)
            budget.current().check_terms(len(terms), "this polynomial")
        return terms


def first_ascent(alpha: Composition) -> int | None:
    """The first i with alpha_i < alpha_(i+1), from 1; None for a partition."""
    return next(
        (i for i in range(1, len(alpha)) if alpha[i - 1] < alpha[i]), None)


_memory = OrbitMemory(isobaric)


def forget_polynomials() -> None:
    """Drop the remembered kappa_alpha: for measurements and for memory."""
    _memory.forget()


def key_polynomial(alpha: Composition) -> Mapping[int, int]:
    """kappa_alpha in packed monomials (see packed.py), remembered."""
    return _memory.polynomial(pack(alpha))


def leader_order(alpha: Composition) -> tuple[object, ...]:
    """Sort key of the display: largest size first, then leading monomials, largest first."""
    return (-sum(alpha), tuple(-part for part in reversed(alpha)))


def from_packed(terms: Mapping[int, Any], n: int) -> dict[Composition, Any]:
    """The coefficients of a packed polynomial in the kappa_alpha with n parts."""
    return {
        padded(digits(key), n): c
        for key, c in by_leaders(terms, _memory.polynomial).items()}


def from_monomials(given: LaurentPolynomial) -> Coefficients:
    """The coefficients in the kappa_alpha, a basis of Z[x_1, ..., x_n]."""
    found = from_packed(from_laurent(given, "kappa"), given.n)
    return {alpha: scalar(c, given) for alpha, c in found.items()}


def multiply(alpha: Composition, beta: Composition) -> Integers:
    """kappa_alpha kappa_beta in keys, by monomials; coefficients may be negative."""
    product = multiplied(key_polynomial(alpha), key_polynomial(beta))
    return from_packed(product, max(len(alpha), len(beta)))


# operators


def apply_isobaric(alpha: Composition, i: int) -> Integers:
    """pi_i kappa_alpha: kappa_(s_i alpha) where alpha_i > alpha_(i+1), else kappa_alpha."""
    return {swapped(alpha, i) if alpha[i - 1] > alpha[i] else alpha: 1}


def apply_isobaric_hat(alpha: Composition, i: int) -> Integers:
    """pihat_i kappa_alpha = pi_i kappa_alpha - kappa_alpha."""
    if alpha[i - 1] <= alpha[i]:
        return {}
    return {swapped(alpha, i): 1, alpha: -1}


# conversions


def sorting_permutation(alpha: Composition) -> Permutation:
    """v_alpha, the shortest v with alpha_(v(1)), alpha_(v(2)), ... weakly decreasing."""
    return tuple(
        place + 1 for place in sorted(range(len(alpha)), key=lambda k: (-alpha[k], k)))


def below(alpha: Composition) -> set[Composition]:
    """The beta <= alpha: rearrangements of alpha with v_beta <= v_alpha in Bruhat order.

    Built up from the partition: below(s_i alpha) is below(alpha) and its image under s_i, for
    alpha_i > alpha_(i+1).
    """
    steps = []
    while (i := first_ascent(alpha)) is not None:
        steps.append(i)
        alpha = swapped(alpha, i)
    found = {alpha}
    for i in reversed(steps):
        found |= {swapped(beta, i) for beta in found}
        budget.current().check_terms(len(found), "this expansion")
    return found


def from_schubert(w: Permutation, n: int) -> Integers:
    """S_w in keys with n parts, coefficients >= 0; raises OutsideDomain when n is too small.

    One key, kappa_code(w), exactly when w avoids 2143. Lascoux and Schuetzenberger, Keys and
    standard bases (1990); Reiner and Shimozono, Key polynomials and a flagged
    Littlewood-Richardson rule (1995).
    """
    check_variables(w, n, "S")
    if is_vexillary(w):
        return {padded(trimmed(code(w)), n): 1}
    return from_packed(polynomial(w), n)


def from_atom(alpha: Composition) -> Integers:
    """atom_alpha in keys: pihat_i applied to keys along a way up from the partition."""
    steps = []
    while (i := first_ascent(alpha)) is not None:
        steps.append(i)
        alpha = swapped(alpha, i)
    terms: Integers = {alpha: 1}
    for i in reversed(steps):
        found: Integers = {}
        for beta, c in terms.items():
            for gamma, d in apply_isobaric_hat(beta, i).items():
                found[gamma] = found.get(gamma, 0) + c * d
        terms = {beta: c for beta, c in found.items() if c}
        budget.current().check_terms(len(terms), "this expansion")
    return terms


def from_schur(partition: Index, n: int) -> Composition:
    """The alpha with kappa_alpha = s_partition(x_1, ..., x_n): its parts in increasing order."""
    return tuple(reversed(padded(trimmed(partition), n)))


# rules laid out


def isobaric_derivation(alpha: Composition, i: int) -> Derivation:
    """pi_i kappa_alpha as the one row of its rule."""
    (target, c), = apply_isobaric(alpha, i).items()
    return Derivation(
        "Isobaric divided difference of a key",
        "pi_i kappa_alpha = kappa_(s_i alpha) if alpha_i > alpha_(i+1), else kappa_alpha",
        "Demazure, Une nouvelle formule des caracteres (1974)",
        (Row(((i,),), target, integer(c)),))


def schubert_derivation(w: Permutation, n: int) -> Derivation:
    """S_w in keys."""
    found = from_schubert(w, n)
    rows = tuple(
        Row((), alpha, integer(found[alpha])) for alpha in sorted(found, key=leader_order))
    if is_vexillary(w):
        return Derivation(
            "A vexillary Schubert polynomial is a key",
            "S_w = kappa_code(w) when w avoids 2143",
            "Lascoux and Schuetzenberger, Keys and standard bases (1990)", rows)
    return Derivation(
        "Schubert polynomial as a sum of keys",
        "S_w is a sum of keys with coefficients >= 0, found by leading monomials",
        "Reiner and Shimozono, Key polynomials and a flagged Littlewood-Richardson rule (1995)",
        rows)


class LeaderFamily(Family):
    """A basis indexed by compositions that is ordered by its leading monomials: keys, atoms."""

    index_kind = "composition"

    def check_index(self, index: Index, n: int) -> Index:
        """n parts, each at least 0."""
        return check_composition(index, n, self.name)

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Largest size first, then leading monomials, largest first (last variable decides)."""
        return leader_order(index)

    def n_variables(self, index: Index) -> int:
        """The last position with a positive part."""
        return len(trimmed(index))


class Key(LeaderFamily):
    """kappa_alpha, alpha a composition with n parts."""

    name = "kappa"

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """By isobaric differences from x^lambda."""
        return to_laurent(key_polynomial(index), n)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """By leading monomials."""
        return from_monomials(polynomial)

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """With another key, or with a Schur polynomial of x_1, ..., x_n: that is one too."""
        if other is self:
            return scalars(multiply(index, other_index))
        if other.name == "s":
            return scalars(multiply(index, from_schur(other_index, n)))
        return None

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """From S, atoms, and Schur polynomials of x_1, ..., x_n."""
        if other.name == "S":
            return scalars(from_schubert(index, n))
        if other.name == "atom":
            return scalars(from_atom(index))
        if other.name == "s":
            return scalars({from_schur(index, n): 1})
        return None


FAMILIES = {"kappa": Key()}
