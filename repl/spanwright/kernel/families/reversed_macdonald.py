"""E_mu in the reversed convention: F_mu(x; q, t) = E_rev(mu)(x_n, ..., x_1; 1/q, 1/t).

F_mu is the common eigenfunction of Z_i = t^(i-n) T_i ... T_(n-1) w T_1^-1 ... T_(i-1)^-1,
(w f)(x) = f(q x_n, x_1, ..., x_(n-1)), with the decreasing exponent leading in its orbit; at
q = t = 0 it is the Demazure atom. From memory the convention of T. H. Baker and P. J. Forrester,
A q-analogue of the type A Dunkl operator and integral kernel (1997).
"""

from __future__ import annotations

from collections.abc import Mapping

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families import nonsymmetric_macdonald as standard
from spanwright.kernel.families.base import Coefficients, Family, Index
from spanwright.kernel.indices import decreasing
from spanwright.kernel.laurent import LaurentPolynomial

_INVERTED = {"q": standard.weight_scalar((-1, 0)), "t": standard.weight_scalar((0, -1))}


def inverted_parameters(value: Scalar) -> Scalar:
    """The scalar at 1/q and 1/t."""
    return value.substitute(_INVERTED)


def turned(polynomial: LaurentPolynomial) -> LaurentPolynomial:
    """f(x_n, ..., x_1; 1/q, 1/t), its own inverse."""
    return polynomial.moved(lambda e: e[::-1]).substitute_parameters(_INVERTED)


def _turned_terms(terms: Mapping[Index, Scalar]) -> Coefficients:
    return {index[::-1]: inverted_parameters(c) for index, c in terms.items()}


class ReversedMacdonald(Family):
    """E_mu of the reversed convention, mu in Z^n."""

    name = "E (reversed)"
    symbol = "E"
    index_kind = "composition"

    def check_index(self, index: Index, n: int) -> Index:
        """Any n integers."""
        return standard.FAMILIES["E"].check_index(index, n)

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Largest size first, then the order of leading monomials, largest first."""
        return (-sum(index), tuple(-part for part in decreasing(index)),
                tuple(-part for part in index))

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """From the standard E of the reversed index."""
        return turned(standard.to_monomials(index[::-1]))

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """Through the standard E."""
        return _turned_terms(standard.from_monomials(turned(polynomial)))

    def times_generator(self, index: Index, n: int, j: int, power: int) -> Coefficients | None:
        """By the closed rule of the standard E at the mirrored position."""
        found = standard.FAMILIES["E"].times_generator(index[::-1], n, n + 1 - j, power)
        return None if found is None else _turned_terms(found)


FAMILIES = {"E (reversed)": ReversedMacdonald()}
