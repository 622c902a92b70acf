"""What the families of symmetric polynomials share: partitions as indices, the way through m.

Every one of them tells its elements in monomial symmetric polynomials m_mu and back; a direct
rule, where there is one, goes first.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable, Mapping
from fractions import Fraction

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families.base import Coefficients, Family, Index, linear, shown
from spanwright.kernel.families.diagrams import Partition
from spanwright.kernel.families.transitions import transition
from spanwright.kernel.indices import is_partition, orbit, padded, swapped, trimmed
from spanwright.kernel.laurent import LaurentPolynomial, Terms
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()

CLASSICAL = ("m", "e", "h", "p", "s")
"""The bases with rational transition numbers."""


class NotSymmetric(OutsideDomain):
    """A polynomial that s_i moves; `difference` is f - s_i f, `position` is i."""

    code = "not-symmetric"

    def __init__(self, position: int, difference: LaurentPolynomial) -> None:
        super().__init__(
            f"the polynomial is not symmetric: s_{position}, which exchanges x_{position} and "
            f"x_{position + 1}, moves it")
        self.position = position
        self.difference = difference


def moving_transposition(polynomial: LaurentPolynomial) -> int | None:
    """The first i with s_i f != f, or None when f is symmetric."""
    terms = polynomial.terms
    for i in range(1, polynomial.n):
        budget.current().check()
        for e, c in terms.items():
            if e[i - 1] != e[i]:
                mirror = terms.get(swapped(e, i))
                if mirror is None or mirror != c:
                    return i
    return None


def check_symmetric(polynomial: LaurentPolynomial) -> None:
    """Raise NotSymmetric, with the difference that shows it, unless all s_i fix f."""
    i = moving_transposition(polynomial)
    if i is not None:
        raise NotSymmetric(i, polynomial - polynomial.moved(lambda e: swapped(e, i)))


def monomial_symmetric_coefficients(polynomial: LaurentPolynomial) -> Coefficients:
    """The coefficients c_mu of f = sum c_mu m_mu; raises OutsideDomain when there are none."""
    check_symmetric(polynomial)
    found = {}
    for e in polynomial.terms:
        low = min(e, default=0)
        if low < 0:
            j = e.index(low) + 1
            raise OutsideDomain(
                f"x_{j}^{low} occurs: the symmetric families span polynomials without negative "
                "exponents", code="not-a-polynomial")
        if is_partition(e):
            found[trimmed(e)] = polynomial.coefficient(e)
    return found


def polynomial_of_monomial_symmetric(terms: Mapping[Index, Scalar], n: int) -> LaurentPolynomial:
    """sum of c_mu m_mu as a polynomial."""
    leaders = LaurentPolynomial.of_scalars(
        n, RING, {padded(mu, n): c for mu, c in terms.items() if len(mu) <= n})
    spread: Terms = {}
    for e, c in leaders.terms.items():
        for arrangement in orbit(e):
            spread[arrangement] = c
        budget.current().check_terms(len(spread), "this polynomial")
    # the largest exponent is a partition, so the scale stays canonical
    return LaurentPolynomial(n, leaders.ring, spread, leaders.scale)


def scalars(numbers: Mapping[Index, Fraction]) -> Coefficients:
    """Rational numbers as scalars."""
    return {
        index: Scalar.number(RING, c.numerator, c.denominator) for index, c in numbers.items()}


def sum_of(left: Coefficients, right: Coefficients) -> Coefficients:
    """The sum of two sums in one basis."""
    found = dict(left)
    for index, c in right.items():
        known = found.get(index)
        found[index] = c if known is None else total((known, c))
    return {index: c for index, c in found.items() if not c.is_zero}


def applied_in_e(
    terms: Coefficients, start: Coefficients, times_e: Callable[[int, Index], Coefficients]
) -> Coefficients:
    """A sum of e_lambda times `start`, by Horner's scheme in e_1, ..., e_n.

    `times_e(r, index)` is e_r times a basis element. Factors with a common end are shared.
    """
    result: Coefficients = {}
    groups: dict[int, Coefficients] = {}
    for index, c in terms.items():
        if index:
            groups.setdefault(index[0], {})[index[1:]] = c
        else:
            result = {nu: c * d for nu, d in start.items()}
    for r, rest in groups.items():
        inner = applied_in_e(rest, start, times_e)
        result = sum_of(result, linear(inner, lambda nu, r=r: times_e(r, nu)))  # type: ignore[misc]
    return result


class SymmetricFamily(Family):
    """A basis of the symmetric polynomials in n variables, indexed by partitions."""

    index_kind = "partition"

    bounds_parts = False
    """Whether canonical indices bound the parts by n (e, h, p) and not their number (m, s, P)."""

    def check_index(self, index: Index, n: int) -> Index:
        """A partition without zeros, within the bound for n variables."""
        if min(index, default=0) < 0:
            raise OutsideDomain(
                f"the parts of an index of {self.name} are at least 0", code="bad-index")
        if not is_partition(index):
            raise OutsideDomain(
                f"{shown(index)} is not a partition: an index of {self.name} has weakly decreasing "
                "parts", code="not-a-partition",
                hints=(f"{self.name}_{shown(tuple(sorted(index, reverse=True)))}",))
        index = trimmed(index)
        if self.bounds_parts:
            if index and index[0] > n:
                raise OutsideDomain(
                    f"{self.name}_{shown(index)} is no basis element in n = {n} variables: a part "
                    "is larger than n", code="too-large-part")
        elif len(index) > n:
            raise OutsideDomain(
                f"{self.name}_{shown(index)} has {len(index)} parts and is 0 in n = {n} variables",
                code="too-many-parts")
        return index

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Largest size first, then lexicographically decreasing, as dominance goes."""
        return (-sum(index), tuple(-part for part in index))

    def n_variables(self, index: Index) -> int:
        """The least n for which the index is canonical."""
        index = trimmed(index)
        return (index[0] if index else 0) if self.bounds_parts else len(index)

    def show_index(self, index: Index, n: int) -> Index:
        """Without zeros at the end, but (0) for the empty partition."""
        return trimmed(index) or (0,)

    @abstractmethod
    def in_monomial_symmetric(self, index: Partition, n: int) -> Coefficients:
        """The element with any partition as its index, in the basis m for n variables."""

    def in_e(self, index: Partition, n: int) -> Coefficients:
        """The element with any partition as its index, in e_1, ..., e_n."""
        if self.name in CLASSICAL:
            return scalars(transition(self.name, "e", index, n))
        return linear(
            self.in_monomial_symmetric(index, n),
            lambda mu: scalars(transition("m", "e", mu, n)))

    @abstractmethod
    def of_monomial_symmetric(self, terms: Coefficients, n: int) -> Coefficients:
        """A sum of m_mu in this basis, indices canonical for n."""

    def canonical(self, index: Partition, n: int) -> Coefficients:
        """The element with any partition as its index, in canonical ones of this family.

        s and m with more than n parts and e_k with k > n are 0; h_k and p_k are rewritten.
        """
        return self.of_monomial_symmetric(self.in_monomial_symmetric(index, n), n)

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """Through m; the index is any partition, whether canonical for n or not."""
        return polynomial_of_monomial_symmetric(self.in_monomial_symmetric(trimmed(index), n), n)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """Through m; raises NotSymmetric, or OutsideDomain at a negative exponent."""
        return self.of_monomial_symmetric(
            monomial_symmetric_coefficients(polynomial), polynomial.n)

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """By a direct rule or through m, from every family of symmetric polynomials."""
        if not isinstance(other, SymmetricFamily):
            return None
        index = trimmed(index)
        if other is self:
            return self.canonical(index, n)
        direct = self.direct_from(other, index, n)
        if direct is not None:
            return direct
        return self.of_monomial_symmetric(other.in_monomial_symmetric(index, n), n)

    def direct_from(
        self, other: SymmetricFamily, index: Partition, n: int
    ) -> Coefficients | None:
        """A rule that does not pass through m, or None."""
        return None


class ClassicalFamily(SymmetricFamily):
    """One of m, e, h, p, s: transition numbers are rational."""

    def in_monomial_symmetric(self, index: Partition, n: int) -> Coefficients:
        """By the transition numbers."""
        return scalars(transition(self.name, "m", index, n))

    def of_monomial_symmetric(self, terms: Coefficients, n: int) -> Coefficients:
        """By the transition numbers."""
        return linear(terms, lambda mu: scalars(transition("m", self.name, mu, n)))

    def direct_from(
        self, other: SymmetricFamily, index: Partition, n: int
    ) -> Coefficients | None:
        """From m, e, h, p, s along the shortest path of classical rules."""
        if other.name in CLASSICAL:
            return scalars(transition(other.name, self.name, index, n))
        return None

    def canonical(self, index: Partition, n: int) -> Coefficients:
        """By the relations between members beyond the n-th."""
        return scalars(transition(self.name, self.name, index, n))


class MultiplicativeFamily(ClassicalFamily):
    """One of e, h, p: b_lambda is the product of the b_(lambda_i)."""

    bounds_parts = True

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """b_lambda b_mu = b_nu, nu the parts of both sorted."""
        if other is not self:
            return None
        joined = tuple(sorted((*trimmed(index), *trimmed(other_index)), reverse=True))
        return self.canonical(joined, n)
