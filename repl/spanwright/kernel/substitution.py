"""Parameters of polynomials and scalars replaced by scalars; t^(1/2) is adjoined when needed."""

from __future__ import annotations

from collections.abc import Mapping

from flint import fmpq, fmpz, fmpz_mpoly
from flint.utils.flint_exceptions import DomainError

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain, Pole
from spanwright.kernel.factors import Factor
from spanwright.kernel.parameters import Exponents, ParameterRing, monomials


def substituted(value: Scalar, images: Mapping[str, Scalar]) -> Scalar:
    """The value with parameters replaced by scalars; raises Pole, or OutsideDomain at 0/0."""
    if value.is_zero or not images:
        return value
    substitution = Substitution.of(value.ring, images)
    bottom_order = 0
    result = Scalar(substitution.ring, value.content, substitution.ring.nil,
                    substitution.ring.one, {})
    vanishes = False
    tops: list[tuple[Scalar, int]] = [
        (substitution.parameter(name), e)
        for name, e in zip(reversed(value.ring.names), value.monomial, strict=True) if e]
    if not value.numerator_rest.is_one():
        tops.append((substitution.polynomial(value.numerator_rest), 1))
    tops += [(substitution.factor(f), e) for f, e in value.factors.items()]
    for image, exponent in tops:
        if image.is_zero:
            if exponent > 0:
                vanishes = True
            else:
                bottom_order -= exponent
        else:
            result = result * image**exponent
    if bottom_order and vanishes:
        raise OutsideDomain("0/0 here: the value depends on the order of the substitutions",
                            code="indeterminate")
    if bottom_order:
        raise Pole("the denominator vanishes", order=bottom_order)
    return Scalar.zero(substitution.ring) if vanishes else result


class Substitution:
    """Parameters replaced by scalars, with the images of powers remembered."""

    def __init__(self, ring: ParameterRing, images: dict[int, Scalar], target: ParameterRing):
        self.ring = target
        self._source = ring
        self._images = images
        self._factors: dict[Factor, Scalar] = {}

    @staticmethod
    def of(ring: ParameterRing, images: Mapping[str, Scalar]) -> Substitution:
        """The substitution on `ring`; parameters without an image stay."""
        target = ring
        for image in images.values():
            target = target.union(image.ring)
        by_slot: dict[int, Scalar] = {}
        for name in ring.names:
            if name in images:
                image = images[name].lift(target)
                if name == "t" and ring.has_root:
                    image = square_root(image)
                    target = target.union(image.ring)
            else:
                exponents = [0] * len(target.names)
                is_whole = target.has_root and not ring.has_root and name == "t"
                exponents[target.slot(name)] = 2 if is_whole else 1
                image = Scalar.monomial_of(target, tuple(exponents))
            by_slot[ring.slot(name)] = image
        return Substitution(ring, by_slot, target)

    def parameter(self, name: str) -> Scalar:
        """The image of a parameter."""
        return self._images[self._source.slot(name)]

    def factor(self, factor: Factor) -> Scalar:
        """The image of an irreducible factor (remembered)."""
        found = self._factors.get(factor)
        if found is None:
            found = self._factors[factor] = self.polynomial(factor.polynomial)
        return found

    def polynomial(self, polynomial: fmpz_mpoly) -> Scalar:
        """The image of a polynomial."""
        monomials_only = all(
            image.numerator_rest.is_one() and not image.factors and image.ring is self.ring
            for image in self._images.values())
        if monomials_only:
            return self._by_monomials(polynomial)
        return self._by_horner(polynomial, 0)

    def _by_monomials(self, polynomial: fmpz_mpoly) -> Scalar:
        width = len(self.ring.names)
        terms: dict[Exponents, fmpq] = {}
        images = [self._images[k] for k in range(len(self._source.names))]
        for exponents, coefficient in zip(monomials(polynomial), polynomial.coeffs(), strict=True):
            content = fmpq(coefficient)
            found = [0] * width
            for image, power in zip(images, exponents, strict=True):
                if power:
                    content = content * image.content**power
                    for k, e in enumerate(image.monomial):
                        found[k] += e * power
            if content:
                key = tuple(found)
                terms[key] = terms.get(key, fmpq(0)) + content
        terms = {e: c for e, c in terms.items() if c}
        if not terms:
            return Scalar.zero(self.ring)
        low = tuple(min(e[k] for e in terms) for k in range(width))
        denominator = fmpz(1)
        for c in terms.values():
            denominator = denominator.lcm(c.q)
        shifted = {
            tuple(map(int.__sub__, e, low)): c.p * (denominator // c.q) for e, c in terms.items()}
        value = Scalar.of_polynomial(self.ring, self.ring.context.from_dict(shifted))
        return value * Scalar(self.ring, fmpq(1, denominator), low, self.ring.one, {})

    def _by_horner(self, polynomial: fmpz_mpoly, slot: int) -> Scalar:
        """Replace the parameters one after another, from the first place on."""
        width = len(self._source.names)
        rows: dict[int, dict[Exponents, fmpz]] = {}
        if slot == width:
            return Scalar.number(self.ring, polynomial.coeffs()[0])
        for exponents, c in zip(monomials(polynomial), polynomial.coeffs(), strict=True):
            rest = exponents[:slot] + (0,) + exponents[slot + 1:]
            rows.setdefault(exponents[slot], {})[rest] = c
        image = self._images[slot]
        value = Scalar.zero(self.ring)
        last: int | None = None
        for power in sorted(rows, reverse=True):
            if last is not None:
                value = value * image ** (last - power)
            row = self._source.context.from_dict(rows[power])
            value = value + self._by_horner(row, slot + 1)
            last = power
        return value * image ** (last or 0)


def square_root(value: Scalar) -> Scalar:
    """The square root of a scalar whose root lies in some ring here; t^(1/2) may be adjoined."""
    ring = value.ring
    if not ring.has_root and "t" in ring.names and value.monomial[ring.slot("t")] % 2:
        ring = ring.extended(has_root=True)
        value = value.lift(ring)
    expanded = value.expanded_rest()
    try:
        top, bottom = value.content.p.sqrt(), value.content.q.sqrt()
        if any(e % 2 for e in value.monomial) or top * top != value.content.p:
            raise DomainError
        if bottom * bottom != value.content.q or value.content.p < 0:
            raise DomainError
        root = expanded.sqrt()
        if any(e % 2 for e in value.denominator_factors().values()):
            raise DomainError
    except (DomainError, ValueError):
        raise OutsideDomain(
            "the square root of this scalar does not lie in the field", code="no-root") from None
    result = Scalar.of_polynomial(ring, root) * Scalar(
        ring, fmpq(top, bottom), tuple(e // 2 for e in value.monomial), ring.one,
        {f: -(e // 2) for f, e in value.denominator_factors().items()})
    return result
