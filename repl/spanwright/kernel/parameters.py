"""Z[q, t, further parameters] over `fmpz_mpoly`: names, places of parameters, lifts, contents."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, ClassVar

from flint import Ordering, fmpz, fmpz_mpoly, fmpz_mpoly_ctx

from spanwright.kernel.errors import OutsideDomain

Exponents = tuple[int, ...]


def monomials(polynomial: fmpz_mpoly) -> list[Exponents]:
    """The exponent tuples of a polynomial, leading term first, as Python integers."""
    return [tuple(map(int, e)) for e in polynomial.monoms()]


def _whole(exponents: Iterable[Any]) -> Exponents:
    return tuple(map(int, exponents))


class ParameterRing:
    """Z[q, t, further parameters by name]; with `has_root`, the generator in t's place is t^(1/2).

    Exponent tuples run over `names` backwards, so that `deglex` read from its end goes
    1, q, t, q^2, ...: the order in which polynomials are printed.
    """

    __slots__ = ("names", "has_root", "context", "one", "zero", "nil", "_slots")

    _instances: ClassVar[dict[tuple[tuple[str, ...], bool], ParameterRing]] = {}

    names: tuple[str, ...]
    has_root: bool

    def __init__(self, names: tuple[str, ...], has_root: bool) -> None:
        self.names = names
        self.has_root = has_root
        self.context = fmpz_mpoly_ctx.get(tuple(reversed(names)), Ordering.deglex)
        self.one: fmpz_mpoly = self.context.constant(1)
        self.zero: fmpz_mpoly = self.context.constant(0)
        self.nil: Exponents = (0,) * len(names)
        self._slots = {name: len(names) - 1 - k for k, name in enumerate(names)}

    @classmethod
    def get(cls, names: Iterable[str] = ("q", "t"), has_root: bool = False) -> ParameterRing:
        """The ring with these parameters, the same object at every call."""
        key = (tuple(names), has_root)
        found = cls._instances.get(key)
        if found is None:
            found = cls._instances[key] = cls(*key)
        return found

    def __repr__(self) -> str:
        return f"ParameterRing({self.names}, has_root={self.has_root})"

    def __reduce__(self) -> tuple[Any, ...]:
        return (ParameterRing.get, (self.names, self.has_root))

    def extended(self, names: Iterable[str] = (), has_root: bool = False) -> ParameterRing:
        """The ring with further parameters, or with t^(1/2), added."""
        # one order of names for all rings, so that the sign of a last term never changes
        further = sorted({*self.names[2:], *names} - {"q", "t"})
        return ParameterRing.get(("q", "t", *further), self.has_root or has_root)

    def union(self, other: ParameterRing) -> ParameterRing:
        """The smallest ring here that holds both."""
        return self if self is other else self.extended(other.names, other.has_root)

    def slot(self, name: str) -> int:
        """The place of a parameter in exponent tuples."""
        return self._slots[name]

    def exponents(self, powers: Mapping[str, int]) -> Exponents:
        """The exponent tuple of a monomial with whole powers, negative ones included."""
        found = [0] * len(self.names)
        for name, power in powers.items():
            found[self._slots[name]] = power * (2 if self.has_root and name == "t" else 1)
        return tuple(found)

    def monomial(self, exponents: Exponents) -> fmpz_mpoly:
        """The polynomial of one term; all exponents must be >= 0."""
        # from_dict turns -1 into 1 without a word, hence the check
        if min(exponents, default=0) < 0:
            raise OutsideDomain("a negative exponent in a polynomial")
        return self.context.from_dict({exponents: 1})

    def polynomial(self, terms: Mapping[Exponents, int]) -> fmpz_mpoly:
        """The polynomial with these terms; all exponents must be >= 0."""
        if any(min(e, default=0) < 0 for e in terms):
            raise OutsideDomain("a negative exponent in a polynomial")
        return self.context.from_dict(dict(terms))

    def lift(self, polynomial: fmpz_mpoly, source: ParameterRing) -> fmpz_mpoly:
        """A polynomial of a smaller ring `source` as one of this ring."""
        if source is self:
            return polynomial
        images = []
        for name in reversed(source.names):
            image = self.context.gen(self._slots[name])
            images.append(image**2 if self.has_root and not source.has_root and name == "t"
                          else image)
        return polynomial.compose(*images, ctx=self.context)

    def lift_exponents(self, exponents: Exponents, source: ParameterRing) -> Exponents:
        """An exponent tuple of a smaller ring `source` as one of this ring."""
        if source is self:
            return exponents
        found = [0] * len(self.names)
        for name, power in zip(reversed(source.names), exponents, strict=True):
            found[self._slots[name]] = power * (
                2 if self.has_root and not source.has_root and name == "t" else 1)
        return tuple(found)

    def split(self, polynomial: fmpz_mpoly) -> tuple[fmpz, Exponents, fmpz_mpoly]:
        """Content with sign, monomial content, and the primitive rest with positive last term."""
        n_terms = len(polynomial)
        content: fmpz = polynomial.content()  # type: ignore[attr-defined]  # not in flint's stubs
        if polynomial.coefficient(n_terms - 1) < 0:
            content = -content
        if n_terms == 1:
            return content, _whole(polynomial.monomial(0)), self.one
        # the last term of deglex is 1 for most polynomials met here: no monomial content then
        last = polynomial.monomial(n_terms - 1)
        if any(last):
            monomial = _whole(polynomial.term_content().monomial(0))
            if any(monomial):
                return content, monomial, polynomial / self.context.from_dict(
                    {monomial: content})
        if content != 1:
            polynomial = polynomial / content
        return content, self.nil, polynomial

    def is_even(self, polynomial: fmpz_mpoly) -> bool:
        """Whether t^(1/2) occurs to even powers only."""
        slot = self._slots["t"]
        return all(e[slot] % 2 == 0 for e in monomials(polynomial))

    def without_root(self, polynomial: fmpz_mpoly) -> tuple[ParameterRing, fmpz_mpoly]:
        """An even polynomial, in the ring without t^(1/2)."""
        base = ParameterRing.get(self.names)
        slot = self._slots["t"]
        return base, base.context.from_dict({
            e[:slot] + (e[slot] // 2,) + e[slot + 1:]: c
            for e, c in zip(monomials(polynomial), polynomial.coeffs(), strict=True)})
