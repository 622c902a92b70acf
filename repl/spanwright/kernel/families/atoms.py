"""Demazure atoms atom_alpha, alpha in N^n: monomials, isobaric differences, conversions.

atom_lambda = x^lambda for a partition, atom_(s_i alpha) = pihat_i atom_alpha for
alpha_i > alpha_(i+1), pihat_i = pi_i - 1. A key is the sum of the atoms below it. Lascoux and
Schuetzenberger, Keys and standard bases (1990); Mason, An explicit construction of type A
Demazure atoms (2009).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from spanwright.kernel.families.base import Coefficients, Family, Index, shown
from spanwright.kernel.families.derivations import Derivation, Row, integer
from spanwright.kernel.families.keys import (
    Integers,
    LeaderFamily,
    OrbitMemory,
    below,
    from_schubert,
    from_schur,
    leader_order,
    sorting_permutation,
)
from spanwright.kernel.families.packed import (
    by_leaders,
    digits,
    from_laurent,
    isobaric,
    pack,
    scalar,
    to_laurent,
)
from spanwright.kernel.families.schubert import scalars
from spanwright.kernel.indices import Composition, orbit, padded, swapped
from spanwright.kernel.laurent import LaurentPolynomial


def _isobaric_hat(terms: Mapping[int, int], i: int) -> dict[int, int]:
    found = isobaric(terms, i)
    for key, c in terms.items():
        left = found.get(key, 0) - c
        if left:
            found[key] = left
        else:
            found.pop(key, None)
    return found


_memory = OrbitMemory(_isobaric_hat)


def forget_polynomials() -> None:
    """Drop the remembered atom_alpha: for measurements and for memory."""
    _memory.forget()


def atom_polynomial(alpha: Composition) -> Mapping[int, int]:
    """atom_alpha in packed monomials (see packed.py), remembered."""
    return _memory.polynomial(pack(alpha))


def from_packed(terms: Mapping[int, Any], n: int) -> dict[Composition, Any]:
    """The coefficients of a packed polynomial in the atom_alpha with n parts."""
    return {
        padded(digits(key), n): c
        for key, c in by_leaders(terms, _memory.polynomial).items()}


def from_monomials(given: LaurentPolynomial) -> Coefficients:
    """The coefficients in the atom_alpha, a basis of Z[x_1, ..., x_n]."""
    found = from_packed(from_laurent(given, "atom"), given.n)
    return {alpha: scalar(c, given) for alpha, c in found.items()}


# operators


def apply_isobaric_hat(alpha: Composition, i: int) -> Integers:
    """pihat_i atom_alpha: atom_(s_i alpha), 0 or -atom_alpha as alpha_i >, = or < alpha_(i+1)."""
    if alpha[i - 1] > alpha[i]:
        return {swapped(alpha, i): 1}
    return {} if alpha[i - 1] == alpha[i] else {alpha: -1}


def apply_isobaric(alpha: Composition, i: int) -> Integers:
    """pi_i atom_alpha = atom_alpha + pihat_i atom_alpha."""
    found = apply_isobaric_hat(alpha, i)
    own = found.pop(alpha, 0) + 1
    return {alpha: own, **found} if own else found


# conversions


def from_key(alpha: Composition) -> Integers:
    """kappa_alpha = sum of the atom_beta, beta <= alpha, in Bruhat order on the orbit."""
    return dict.fromkeys(below(alpha), 1)


def key_derivation(alpha: Composition) -> Derivation:
    """kappa_alpha in atoms over its whole orbit, those not below alpha with the reason."""
    present = below(alpha)
    own = sorting_permutation(alpha)
    rows = []
    for beta in sorted(orbit(alpha), key=leader_order):
        obstacle = None
        if beta not in present:
            obstacle = (
                f"v_beta = {shown(sorting_permutation(beta))} is not below "
                f"v_alpha = {shown(own)} in Bruhat order")
        rows.append(Row((), beta, integer(int(obstacle is None)), obstacle))
    return Derivation(
        "A key as a sum of atoms",
        "kappa_alpha = sum_(beta <= alpha) atom_beta over the rearrangements of alpha",
        "Lascoux and Schuetzenberger, Keys and standard bases (1990)", tuple(rows))


class Atom(LeaderFamily):
    """atom_alpha, alpha a composition with n parts."""

    name = "atom"

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """By isobaric differences from x^lambda."""
        return to_laurent(atom_polynomial(index), n)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """By leading monomials."""
        return from_monomials(polynomial)

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """From keys, from S through keys, and from Schur polynomials of x_1, ..., x_n."""
        if other.name == "kappa":
            return scalars(from_key(index))
        if other.name == "S":
            found: Integers = {}
            for alpha, c in from_schubert(index, n).items():
                for beta in below(alpha):
                    found[beta] = found.get(beta, 0) + c
            return scalars(found)
        if other.name == "s":
            return scalars(from_key(from_schur(index, n)))
        return None


FAMILIES = {"atom": Atom()}
