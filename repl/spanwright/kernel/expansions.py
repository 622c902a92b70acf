"""Finite sums over a family's indices, immutable and canonical: no zero coefficients."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import Mixed
from spanwright.kernel.families.base import Family, Index
from spanwright.kernel.laurent import LaurentPolynomial, total_polynomial
from spanwright.kernel.parameters import ParameterRing


class Expansion:
    """sum c_index * (family element), in a ring of n variables."""

    __slots__ = ("family", "n", "terms")

    def __init__(self, family: Family, n: int, terms: Mapping[Index, Scalar]) -> None:
        """Indices must be canonical for n; zero coefficients are dropped."""
        self.family = family
        self.n = n
        self.terms: dict[Index, Scalar] = {i: c for i, c in terms.items() if not c.is_zero}

    @staticmethod
    def element(family: Family, n: int, index: Index) -> Expansion:
        """One basis element; raises OutsideDomain for a wrong index."""
        return Expansion(
            family, n, {family.check_index(index, n): Scalar.one(ParameterRing.get())})

    @property
    def is_zero(self) -> bool:
        """Whether this is 0."""
        return not self.terms

    def __bool__(self) -> bool:
        return bool(self.terms)

    def __len__(self) -> int:
        return len(self.terms)

    def support(self) -> list[Index]:
        """The indices that occur, in the order in which they are shown."""
        return sorted(self.terms, key=self.family.order_key)

    def items(self) -> Iterator[tuple[Index, Scalar]]:
        """Indices and coefficients, in the order in which they are shown."""
        for index in self.support():
            yield index, self.terms[index]

    def coefficient(self, index: Index) -> Scalar:
        """The coefficient of one element."""
        found = self.terms.get(index)
        return Scalar.zero(ParameterRing.get()) if found is None else found

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Expansion):
            return NotImplemented
        return (
            self.family is other.family and self.n == other.n and self.terms == other.terms)

    def __hash__(self) -> int:
        return hash((self.family.name, self.n, frozenset(self.terms)))

    def __repr__(self) -> str:
        return f"Expansion<{self.family.name}, n={self.n}, {self.terms}>"

    def _with(self, terms: Mapping[Index, Scalar]) -> Expansion:
        return Expansion(self.family, self.n, terms)

    def __neg__(self) -> Expansion:
        return self._with({i: -c for i, c in self.terms.items()})

    def __add__(self, other: Expansion) -> Expansion:
        if self.family is not other.family or self.n != other.n:
            raise Mixed(f"a sum in {self.family.name} and one in {other.family.name}")
        terms: dict[Index, Scalar] = dict(self.terms)
        for index, c in other.terms.items():
            known = terms.get(index)
            terms[index] = c if known is None else total((known, c))
        return self._with(terms)

    def __sub__(self, other: Expansion) -> Expansion:
        return self + (-other)

    def scaled(self, factor: Scalar) -> Expansion:
        """The product with a scalar."""
        return self._with({i: c * factor for i, c in self.terms.items()})

    def map_coefficients(self, image: Any) -> Expansion:
        """Every coefficient sent through a map of scalars."""
        return self._with({i: image(c) for i, c in self.terms.items()})

    def to_monomials(self) -> LaurentPolynomial:
        """The polynomial that this sum is."""
        if not self.terms:
            return LaurentPolynomial.zero(self.n, ParameterRing.get())
        return total_polynomial(
            self.family.to_monomials(index, self.n).scaled(c)
            for index, c in sorted(self.terms.items()))
