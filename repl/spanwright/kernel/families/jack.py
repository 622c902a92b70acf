"""Jack polynomials in the parameter alpha: the limit q = t^alpha, t -> 1 of P_lambda, exactly.

In the tableau formula every factor 1 - q^a t^b goes to (alpha a + b)(1 - t), and the 1 - t
cancel. Jack, A class of symmetric polynomials with a parameter (1970);
Stanley, Some combinatorial properties of Jack symmetric functions (1989);
Macdonald, Symmetric Functions and Hall Polynomials (1995), VI.10.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OutsideDomain, Pole
from spanwright.kernel.families.base import Coefficients, Index
from spanwright.kernel.families.diagrams import Partition, boxes, horizontal_strips_below
from spanwright.kernel.families.macdonald import peeled, strip_boxes
from spanwright.kernel.families.symmetric_base import (
    monomial_symmetric_coefficients,
    polynomial_of_monomial_symmetric,
)
from spanwright.kernel.indices import partitions
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get().extended(["alpha"])
ALPHA = Scalar.parameter(RING, "alpha")
ONE = Scalar.one(RING)


@lru_cache(maxsize=20_000)
def linear_factor(a: int, b: int) -> Scalar:
    """alpha a + b, where 1 - q^a t^b goes once 1 - t is divided out; not both 0."""
    if a == 0:
        return Scalar.number(RING, b)
    terms = {RING.exponents({"alpha": 1}): a, RING.nil: b}
    return Scalar.factored(RING, RING.polynomial({e: c for e, c in terms.items() if c}))


@lru_cache(maxsize=50_000)
def box_ratio(partition: Partition, row: int, column: int) -> Scalar:
    """(alpha a + l + 1)/(alpha (a + 1) + l) for one box."""
    arm = partition[row - 1] - column
    leg = sum(1 for part in partition if part >= column) - row
    return linear_factor(arm, leg + 1) * linear_factor(arm + 1, leg).inverse()


@lru_cache(maxsize=50_000)
def psi(outer: Partition, inner: Partition) -> Scalar:
    """The weight of a horizontal strip in the tableau formula (VI.10.10 to 10.12)."""
    value = ONE
    for i, j in strip_boxes(outer, inner, in_rows=True, in_columns=False):
        value = value * box_ratio(inner, i, j) * box_ratio(outer, i, j).inverse()
    return value


@lru_cache(maxsize=100_000)
def _tableau_sum(shape: Partition, content: Partition) -> Scalar | None:
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


def in_monomial_symmetric(partition: Partition, n: int) -> Coefficients:
    """The monic Jack polynomial in the basis m for n variables, over Q(alpha)."""
    found = {}
    for content in partitions(sum(partition), n):
        value = _tableau_sum(partition, content)
        if value is not None:
            found[content] = value
    return found


def of_monomial_symmetric(terms: Mapping[Index, Scalar], n: int) -> Coefficients:
    """A sum of m_mu in monic Jack polynomials, by triangularity."""
    return peeled(terms, lambda index: in_monomial_symmetric(index, n))


def jack(partition: Partition, n: int, alpha: Scalar = ALPHA) -> LaurentPolynomial:
    """The monic Jack polynomial, coefficient 1 at m_lambda, in n variables.

    `alpha` may be any scalar; raises Pole where a coefficient has a pole there.
    """
    terms = in_monomial_symmetric(partition, n)
    if alpha is not ALPHA:
        try:
            terms = {mu: c.substitute({"alpha": alpha}) for mu, c in terms.items()}
        except Pole as pole:
            raise Pole("this Jack polynomial has a pole at that alpha", order=pole.order) from None
    return polynomial_of_monomial_symmetric(terms, n)


def integral_factor(partition: Partition) -> Scalar:
    """The product of alpha a + l + 1: J_lambda = this times the monic one (VI.10.22)."""
    value = ONE
    for box in boxes(partition):
        value = value * linear_factor(box.arm, box.leg + 1)
    return value


def integral_jack(partition: Partition, n: int) -> LaurentPolynomial:
    """J_lambda(x; alpha), coefficients in N[alpha] at m_mu.

    Knop and Sahi, A recursion and a combinatorial formula for Jack polynomials (1997).
    """
    return jack(partition, n).scaled(integral_factor(partition))


def expand_in_jack(polynomial: LaurentPolynomial) -> Coefficients:
    """The coefficients of a symmetric polynomial in monic Jack polynomials.

    Raises NotSymmetric, or OutsideDomain when q or t occurs or at a negative exponent.
    """
    terms = monomial_symmetric_coefficients(polynomial)
    if any(c.parameters() & {"q", "t"} for c in terms.values()):
        raise OutsideDomain(
            "Jack polynomials depend on alpha: q and t may not occur", code="mixed-parameters")
    return of_monomial_symmetric(terms, polynomial.n)
