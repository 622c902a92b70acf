"""Exact scalars: the fraction field of Z[q, t, ...] with factored denominators, over `fmpz_mpoly`.

A scalar is content * monomial * numerator * product of irreducible factors to integer powers.
Denominators are always factored, so adding takes least common multiples of known irreducibles
and cancelling is trial division: no general gcd is ever taken. Products of binomials
1 - q^a t^b stay products. The factors of 1 - m^g over Q are the Phi_d(m), d | g (cyclotomic
polynomials; common practice).
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import gcd
from typing import Any

from flint import Ordering, fmpq, fmpz, fmpz_mpoly, fmpz_mpoly_ctx, fmpz_poly
from flint.utils.flint_exceptions import DomainError

from spanwright.kernel import budget
from spanwright.kernel.errors import DivisionByZero, OutsideDomain, OverBudget, Pole

Exponents = tuple[int, ...]

WITNESS_PRIME = 2**61 - 1
"""The prime of hashes and of refutation at random points."""

# Numerators up to this size are shown factored; larger ones only when they are a product of
# binomials. Both bounds keep factoring for display below a millisecond.
SHORT_TERMS = 24
SHORT_DEGREE = 40

_ONE = fmpq(1)


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

    __slots__ = (
        "names", "has_root", "context", "one", "zero", "nil", "_slots", "_factors", "_binomials",
    )

    _instances: dict[tuple[tuple[str, ...], bool], ParameterRing] = {}

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
        self._factors: dict[Any, Factor] = {}
        self._binomials: dict[Exponents, Scalar] = {}

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
        content = polynomial.content()
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

    def cyclotomic(self, direction: Exponents, order: int) -> Factor:
        """Phi_order at the Laurent monomial `direction` (primitive), made a polynomial."""
        key = (direction, order)
        found = self._factors.get(key)
        if found is None:
            if order > 5000:
                raise OverBudget(f"the cyclotomic polynomial of order {order} is too large")
            coefficients = [int(c) for c in fmpz_poly.cyclotomic(order).coeffs()]
            top = len(coefficients) - 1
            terms = {
                tuple(max(e, 0) * k + max(-e, 0) * (top - k) for e in direction): c
                for k, c in enumerate(coefficients) if c
            }
            polynomial = self.context.from_dict(terms)
            if polynomial.coefficient(len(polynomial) - 1) < 0:
                polynomial = -polynomial
            found = self._intern(polynomial, direction, order)
            self._factors[key] = found
        return found

    def irreducible(self, polynomial: fmpz_mpoly) -> Factor:
        """The factor of a primitive irreducible polynomial whose last term is positive."""
        found = self._factors.get(_key(polynomial))
        if found is not None:
            return found
        recognised = _as_cyclotomic(polynomial)
        if recognised is not None:
            return self.cyclotomic(*recognised)
        return self._intern(polynomial, self.nil, 0)

    def _intern(self, polynomial: fmpz_mpoly, direction: Exponents, order: int) -> Factor:
        key = _key(polynomial)
        found = self._factors.get(key)
        if found is None:
            found = self._factors[key] = Factor(self, polynomial, direction, order)
        return found

    def one_minus(self, exponents: Exponents) -> Scalar:
        """1 - m for a Laurent monomial m, as a product of irreducible factors."""
        found = self._binomials.get(exponents)
        if found is None:
            found = self._binomials[exponents] = self._one_minus(exponents)
        return found

    def _one_minus(self, exponents: Exponents) -> Scalar:
        power = gcd(*exponents)
        if power == 0:
            return Scalar.zero(self)
        direction = tuple(e // power for e in exponents)
        content, monomial = fmpq(1), self.nil
        if next(e for e in reversed(direction) if e) < 0:  # 1 - 1/m = -(1 - m)/m
            content, monomial = fmpq(-1), exponents
            direction = tuple(-e for e in direction)
        if min(direction) < 0:  # 1 - a/b = (b - a)/b
            monomial = tuple(m + power * min(e, 0) for m, e in zip(monomial, direction, strict=True))
            first = self.cyclotomic(direction, 1).polynomial
            if first[tuple(max(e, 0) for e in direction)] > 0:
                content = -content
        factors = {self.cyclotomic(direction, d): 1 for d in range(1, power + 1) if power % d == 0}
        return Scalar(self, content, monomial, self.one, factors)

    def factorise(self, polynomial: fmpz_mpoly) -> tuple[fmpz, Exponents, dict[Factor, int]]:
        """Content, monomial and irreducible factors of a nonzero polynomial."""
        content, monomial, rest = self.split(polynomial)
        if rest.is_one():
            return content, monomial, {}
        if len(rest) == 2 and sorted(map(int, rest.coeffs())) in ([-1, 1], [1, 1]):
            binomial = self._binomial_factors(rest)
            if binomial is not None:
                return content, monomial, binomial
        factors: dict[Factor, int] = {}
        unit, found = rest.factor()
        sign = int(unit)
        for factor, multiplicity in found:
            if factor.coefficient(len(factor) - 1) < 0:
                factor = -factor
                sign = -sign if multiplicity % 2 else sign
            factors[self.irreducible(factor)] = multiplicity
        return content * sign, monomial, factors

    def _binomial_factors(self, rest: fmpz_mpoly) -> dict[Factor, int] | None:
        (high, low), (first, second) = monomials(rest), rest.coeffs()
        difference = tuple(a - b for a, b in zip(high, low, strict=True))
        if gcd(*difference) > 5000:
            raise OverBudget("the exponents are too large to factor")
        if first == second:  # 1 + m = (1 - m^2)/(1 - m)
            doubled = self.one_minus(tuple(2 * d for d in difference))
            scalar = doubled * self.one_minus(difference).inverse()
        else:
            scalar = self.one_minus(difference)
        return dict(scalar.factors)

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


class Factor:
    """An irreducible polynomial, one object per ring; `order` > 0 marks Phi_order(direction)."""

    __slots__ = ("ring", "polynomial", "direction", "order", "sort_key", "_powers", "_lifts")

    def __init__(
        self, ring: ParameterRing, polynomial: fmpz_mpoly, direction: Exponents, order: int
    ) -> None:
        self.ring = ring
        self.polynomial = polynomial
        self.direction = direction
        self.order = order
        self.sort_key = (int(polynomial.total_degree()), _key(polynomial))
        self._powers = [ring.one, polynomial]
        self._lifts: dict[ParameterRing, Scalar] = {}

    def power(self, exponent: int) -> fmpz_mpoly:
        """The expanded power, remembered."""
        powers = self._powers
        while len(powers) <= exponent:
            powers.append(powers[-1] * self.polynomial)
        return powers[exponent]

    def lift(self, ring: ParameterRing) -> Scalar:
        """This factor in a larger ring, where t^(1/2) may split it."""
        found = self._lifts.get(ring)
        if found is None:
            polynomial = ring.lift(self.polynomial, self.ring)
            found = self._lifts[ring] = Scalar.factored(ring, polynomial)
        return found

    def __repr__(self) -> str:
        return f"Factor({self.polynomial})"


def _key(polynomial: fmpz_mpoly) -> tuple[Any, ...]:
    return (tuple(monomials(polynomial)), tuple(int(c) for c in polynomial.coeffs()))


def _as_cyclotomic(polynomial: fmpz_mpoly) -> tuple[Exponents, int] | None:
    """Direction and order of an irreducible Phi_d(m), or None."""
    monoms = monomials(polynomial)
    if len(monoms) < 2:
        return None
    base = monoms[-1]
    steps = [tuple(a - b for a, b in zip(m, base, strict=True)) for m in monoms]
    direction = steps[0]
    power = gcd(*direction)
    direction = tuple(d // power for d in direction)
    slot = next(k for k, d in enumerate(direction) if d)
    coefficients = [0] * (power + 1)
    for step, c in zip(steps, polynomial.coeffs(), strict=True):
        k, rest = divmod(step[slot], direction[slot])
        if rest or not 0 <= k <= power or tuple(k * d for d in direction) != step:
            return None
        coefficients[k] = int(c)
    univariate = fmpz_poly(coefficients)
    if coefficients[power] < 0:
        univariate = -univariate
    order = univariate.is_cyclotomic()
    if not order:
        return None
    if next(e for e in reversed(direction) if e) < 0:  # Phi_d(1/m) is Phi_d(m) up to a unit
        direction = tuple(-d for d in direction)
    return direction, int(order)


@dataclass(frozen=True, slots=True)
class ProductForm:
    """A scalar laid out for reading: sign and numbers, powers of parameters, polynomial factors.

    `powers` maps a parameter to its exponent (a half when t^(1/2) occurs); polynomial factors
    have multiplicities.
    """

    numerator_content: int
    denominator_content: int
    powers: tuple[tuple[str, Fraction], ...]
    numerator: tuple[tuple[PolynomialForm, int], ...]
    denominator: tuple[tuple[PolynomialForm, int], ...]


class PolynomialForm:
    """A parameter polynomial laid out for reading: terms in printing order, or joined as text."""

    __slots__ = ("_polynomial", "_ring")

    def __init__(self, ring: ParameterRing, polynomial: fmpz_mpoly) -> None:
        self._ring = ring
        self._polynomial = polynomial

    def __len__(self) -> int:
        return len(self._polynomial)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, PolynomialForm) and list(self.terms()) == list(other.terms())

    def __hash__(self) -> int:
        return hash(tuple(self.terms()))

    def terms(self) -> Iterator[tuple[int, tuple[tuple[str, Fraction], ...]]]:
        """Coefficients and powers of parameters, constant term first."""
        for e, c in zip(
            reversed(monomials(self._polynomial)), reversed(self._polynomial.coeffs()),
            strict=True,
        ):
            yield int(c), _cached_powers(self._ring, e)

    def joined(self, times: str, power: str) -> str | None:
        """The text with these signs, from flint's own; None when it needs another layout.

        Flint prints descending and in the order of the context: turned round here, term by term.
        """
        if self._ring.has_root:
            return None
        text = str(self._polynomial)
        if len(self._ring.names) == 2:
            text = _T_BEFORE_Q.sub(r"\2*\1", text)
        else:
            text = _MONOMIAL.sub(lambda m: "*".join(reversed(m.group().split("*"))), text)
        if text[0] == "-":
            text = "- " + text[1:]
        else:
            text = "+ " + text
        pieces = text.split(" ")
        signs, terms = pieces[0::2], pieces[1::2]
        joined = " ".join(
            f"{sign} {term}" for sign, term in zip(reversed(signs), reversed(terms), strict=True))
        joined = joined[2:] if joined[0] == "+" else "-" + joined[2:]
        if times != "*":
            joined = joined.replace("*", times)
        return joined if power == "^" else joined.replace("^", power)


_T_BEFORE_Q = re.compile(r"(t(?:\^\d+)?)\*(q(?:\^\d+)?)")
_MONOMIAL = re.compile(r"[A-Za-z]\w*(?:\^\d+)?(?:\*[A-Za-z]\w*(?:\^\d+)?)+")


class Scalar:
    """An element of the fraction field, immutable, reduced on construction.

    Invariant: content is nonzero unless the value is zero; the numerator is primitive, has no
    monomial content, a positive last term, and no factor in common with those of negative power.
    """

    __slots__ = ("ring", "content", "monomial", "numerator_rest", "factors", "_expanded", "_hash")

    def __init__(
        self,
        ring: ParameterRing,
        content: fmpq,
        monomial: Exponents,
        numerator_rest: fmpz_mpoly,
        factors: dict[Factor, int],
    ) -> None:
        self.ring = ring
        self.content = content
        self.monomial = monomial
        self.numerator_rest = numerator_rest
        self.factors = factors
        self._expanded: fmpz_mpoly | None = None
        self._hash: int | None = None

    # construction

    @staticmethod
    def zero(ring: ParameterRing) -> Scalar:
        """The scalar 0."""
        return Scalar(ring, fmpq(0), ring.nil, ring.one, {})

    @staticmethod
    def one(ring: ParameterRing) -> Scalar:
        """The scalar 1."""
        return Scalar(ring, _ONE, ring.nil, ring.one, {})

    @staticmethod
    def number(ring: ParameterRing, numerator: int | fmpz, denominator: int | fmpz = 1) -> Scalar:
        """An integer or a quotient of two."""
        if denominator == 0:
            raise DivisionByZero("division by zero")
        return Scalar(ring, fmpq(numerator, denominator), ring.nil, ring.one, {})

    @staticmethod
    def monomial_of(ring: ParameterRing, exponents: Exponents, content: int = 1) -> Scalar:
        """A Laurent monomial in the parameters."""
        return Scalar(ring, fmpq(content), exponents, ring.one, {})

    @staticmethod
    def parameter(ring: ParameterRing, name: str) -> Scalar:
        """A parameter by its name."""
        return Scalar.monomial_of(ring, ring.exponents({name: 1}))

    @staticmethod
    def root_of_t() -> Scalar:
        """t^(1/2)."""
        ring = ParameterRing.get(("q", "t"), has_root=True)
        return Scalar.monomial_of(ring, tuple(int(k == ring.slot("t")) for k in range(2)))

    @staticmethod
    def of_polynomial(ring: ParameterRing, polynomial: fmpz_mpoly) -> Scalar:
        """A polynomial in the parameters."""
        if polynomial.is_zero():
            return Scalar.zero(ring)
        content, monomial, rest = ring.split(polynomial)
        return Scalar(ring, fmpq(content), monomial, rest, {})._settled()

    @staticmethod
    def factored(ring: ParameterRing, polynomial: fmpz_mpoly) -> Scalar:
        """A nonzero polynomial, factored into irreducibles."""
        content, monomial, factors = ring.factorise(polynomial)
        return Scalar(ring, fmpq(content), monomial, ring.one, factors)

    # reading

    @property
    def is_zero(self) -> bool:
        """Whether this is 0."""
        return not self.content

    @property
    def is_one(self) -> bool:
        """Whether this is 1."""
        return self == 1

    def __bool__(self) -> bool:
        return bool(self.content)

    @property
    def is_number(self) -> bool:
        """Whether no parameter occurs."""
        return self.is_zero or (
            not any(self.monomial) and not self.factors and self.numerator_rest.is_one())

    def as_fraction(self) -> Fraction | None:
        """The rational number, or None when a parameter occurs."""
        if not self.is_number:
            return None
        return Fraction(int(self.content.p), int(self.content.q))

    def as_integer(self) -> int | None:
        """The integer, or None."""
        value = self.as_fraction()
        return int(value) if value is not None and value.denominator == 1 else None

    @property
    def is_polynomial(self) -> bool:
        """Whether the denominator is 1."""
        return (
            self.content.q == 1
            and min(self.monomial, default=0) >= 0
            and all(e > 0 for e in self.factors.values()))

    def denominator_factors(self) -> dict[Factor, int]:
        """The irreducible factors of the denominator with their multiplicities."""
        return {f: -e for f, e in self.factors.items() if e < 0}

    def expanded_rest(self) -> fmpz_mpoly:
        """The numerator without content and monomial, multiplied out (remembered)."""
        if self._expanded is None:
            product = self.numerator_rest
            for factor, exponent in self.factors.items():
                if exponent > 0:
                    product = product * factor.power(exponent)
            self._expanded = product
        return self._expanded

    def numerator(self) -> Scalar:
        """The numerator of the reduced quotient, a polynomial with integer coefficients."""
        return Scalar(
            self.ring, fmpq(self.content.p), tuple(max(e, 0) for e in self.monomial),
            self.numerator_rest, {f: e for f, e in self.factors.items() if e > 0})

    def denominator(self) -> Scalar:
        """The denominator of the reduced quotient."""
        return Scalar(
            self.ring, fmpq(self.content.q), tuple(max(-e, 0) for e in self.monomial),
            self.ring.one, self.denominator_factors())

    def __eq__(self, other: object) -> bool:
        if isinstance(other, int):
            return self.as_fraction() == other if self.is_number else False
        if not isinstance(other, Scalar):
            return NotImplemented
        a, b = self, other
        if a.content != b.content:
            return False
        if not a.content:
            return True
        if a.ring is not b.ring:
            ring = a.ring.union(b.ring)
            a, b = a.lift(ring), b.lift(ring)
        if a.monomial != b.monomial:
            return False
        if a.factors == b.factors and a.numerator_rest == b.numerator_rest:
            return True
        if a.denominator_factors() != b.denominator_factors():
            return False
        return bool(a.expanded_rest() == b.expanded_rest())

    def __hash__(self) -> int:
        if self._hash is None:
            self._hash = hash((self.content.p, self.content.q, self.modular(hash_point)))
        return self._hash

    def __repr__(self) -> str:
        parts = [str(self.content), *(
            f"{name}^{e}" for name, e in zip(reversed(self.ring.names), self.monomial, strict=True)
            if e)]
        if not self.numerator_rest.is_one():
            parts.append(f"({self.numerator_rest})")
        parts += [f"({f.polynomial})^{e}" for f, e in self.factors.items()]
        return f"Scalar<{' '.join(parts)}>"

    # arithmetic

    def lift(self, ring: ParameterRing) -> Scalar:
        """This value in a ring that holds its own."""
        if ring is self.ring:
            return self
        result = Scalar(
            ring, self.content, ring.lift_exponents(self.monomial, self.ring),
            ring.lift(self.numerator_rest, self.ring), {})
        if ring.has_root and not self.ring.has_root:
            for factor, exponent in self.factors.items():
                result = result * factor.lift(ring) ** exponent
            return result
        factors: dict[Factor, int] = {}
        for factor, exponent in self.factors.items():
            (lifted, _), = factor.lift(ring).factors.items()
            factors[lifted] = exponent
        result.factors = factors
        return result

    def _settled(self) -> Scalar:
        """The same value without t^(1/2) when it occurs to even powers only."""
        ring = self.ring
        if not ring.has_root:
            return self
        slot = ring.slot("t")
        if self.monomial[slot] % 2:
            return self
        top = self.expanded_rest()
        bottom = self.denominator().expanded_rest()
        if not (ring.is_even(top) and ring.is_even(bottom)):
            return self
        base, plain_top = ring.without_root(top)
        _, plain_bottom = ring.without_root(bottom)
        monomial = self.monomial[:slot] + (self.monomial[slot] // 2,) + self.monomial[slot + 1:]
        result = Scalar.of_polynomial(base, plain_top) * Scalar.factored(
            base, plain_bottom).inverse()
        return result * Scalar(base, self.content, monomial, base.one, {})

    def _coerced(self, other: object) -> tuple[Scalar, Scalar] | None:
        if isinstance(other, Scalar):
            if other.ring is self.ring:
                return self, other
            ring = self.ring.union(other.ring)
            return self.lift(ring), other.lift(ring)
        if isinstance(other, int):
            return self, Scalar.number(self.ring, other)
        if isinstance(other, Fraction):
            return self, Scalar.number(self.ring, other.numerator, other.denominator)
        return None

    def __neg__(self) -> Scalar:
        return Scalar(self.ring, -self.content, self.monomial, self.numerator_rest, self.factors)

    def __mul__(self, other: object) -> Scalar:
        pair = self._coerced(other)
        if pair is None:
            return NotImplemented
        a, b = pair
        if not a.content or not b.content:
            return Scalar.zero(a.ring)
        factors = _merged(a.factors, b.factors)
        rest_a, rest_b = a.numerator_rest, b.numerator_rest
        if not (rest_a.is_one() and rest_b.is_one()):
            factors = factors.copy()  # it may be the dictionary of a or of b
        if not rest_a.is_one():
            rest_a = _cancel(rest_a, factors, a.factors)
        if not rest_b.is_one():
            rest_b = _cancel(rest_b, factors, b.factors)
        result = Scalar(
            a.ring, a.content * b.content,
            tuple(map(int.__add__, a.monomial, b.monomial)), rest_a * rest_b, factors)
        return result._settled() if a.ring.has_root else result

    __rmul__ = __mul__

    def inverse(self) -> Scalar:
        """1 / self; the numerator is factored for it, once."""
        if not self.content:
            raise DivisionByZero("division by zero")
        content, factors = 1 / self.content, {f: -e for f, e in self.factors.items()}
        monomial = tuple(-e for e in self.monomial)
        if not self.numerator_rest.is_one():
            unit, _, found = self.ring.factorise(self.numerator_rest)
            content = content / fmpq(unit)
            for factor, multiplicity in found.items():
                exponent = factors.get(factor, 0) - multiplicity
                if exponent:
                    factors[factor] = exponent
                else:
                    factors.pop(factor, None)
        return Scalar(self.ring, content, monomial, self.ring.one, factors)

    def __truediv__(self, other: object) -> Scalar:
        pair = self._coerced(other)
        if pair is None:
            return NotImplemented
        return pair[0] * pair[1].inverse()

    def __rtruediv__(self, other: object) -> Scalar:
        return self.inverse() * other

    def __pow__(self, exponent: int) -> Scalar:
        if exponent < 0:
            return self.inverse() ** -exponent
        if exponent == 0:
            return Scalar.one(self.ring)
        if not self.content:
            return self
        n_terms = len(self.numerator_rest)
        if n_terms > 1:
            budget.current().check_terms(exponent * n_terms, "this power")
        height = max(int(self.content.p).bit_length(), int(self.content.q).bit_length())
        if height > 1 and height * exponent > 4_000_000:
            raise OverBudget(
                f"this power would have about {height * exponent // 3:,} digits",
                code="number-too-long")
        result = Scalar(
            self.ring, self.content**exponent, tuple(e * exponent for e in self.monomial),
            self.numerator_rest**exponent, {f: e * exponent for f, e in self.factors.items()})
        return result._settled()

    def __add__(self, other: object) -> Scalar:
        pair = self._coerced(other)
        return NotImplemented if pair is None else total(pair)

    __radd__ = __add__

    def __sub__(self, other: object) -> Scalar:
        pair = self._coerced(other)
        return NotImplemented if pair is None else total((pair[0], -pair[1]))

    def __rsub__(self, other: object) -> Scalar:
        return (-self) + other

    # evaluation

    def modular(self, point: ModularPoint) -> int:
        """The value modulo the point's prime; raises Pole when the denominator vanishes there."""
        return point.value(self)

    def substitute(self, images: Mapping[str, Scalar]) -> Scalar:
        """The value with parameters replaced by scalars; raises Pole, or OutsideDomain at 0/0."""
        if self.is_zero or not images:
            return self
        substitution = Substitution.of(self.ring, images)
        bottom_order = 0
        result = Scalar(substitution.ring, self.content, substitution.ring.nil,
                        substitution.ring.one, {})
        vanishes = False
        tops: list[tuple[Scalar, int]] = [
            (substitution.parameter(name), e)
            for name, e in zip(reversed(self.ring.names), self.monomial, strict=True) if e]
        if not self.numerator_rest.is_one():
            tops.append((substitution.polynomial(self.numerator_rest), 1))
        tops += [(substitution.factor(f), e) for f, e in self.factors.items()]
        for value, exponent in tops:
            if value.is_zero:
                if exponent > 0:
                    vanishes = True
                else:
                    bottom_order -= exponent
            else:
                result = result * value**exponent
        if bottom_order and vanishes:
            raise OutsideDomain("0/0 here: the value depends on the order of the substitutions",
                                code="indeterminate")
        if bottom_order:
            raise Pole("the denominator vanishes", order=bottom_order)
        return Scalar.zero(substitution.ring) if vanishes else result

    def parameters(self) -> frozenset[str]:
        """The names of the parameters that occur."""
        used = {k for k, e in enumerate(self.monomial) if e}
        for polynomial in (self.numerator_rest, *(f.polynomial for f in self.factors)):
            used |= {k for k, d in enumerate(polynomial.degrees()) if d}
        names = tuple(reversed(self.ring.names))
        return frozenset(names[k] for k in used)

    # layout

    def form(self, show: str = "short") -> ProductForm:
        """The layout for printing: one for each value, whichever way the value was made.

        `short` factors numerators of at most 24 terms, and larger ones when they are products of
        binomials; `factored` factors all; `expanded` multiplies numerators out.
        """
        ring = self.ring
        numerator: tuple[tuple[PolynomialForm, int], ...] = ()
        content = self.content
        factors: dict[Factor, int] | None = None
        rest: fmpz_mpoly | None = None
        if not self.is_zero:
            unit, factors, rest = self._numerator_for(show)
            content = content * unit
        if factors:
            numerator = _grouped(ring, factors)
        elif rest is not None and not rest.is_one():
            numerator = ((PolynomialForm(ring, rest), 1),)
        return ProductForm(
            int(content.p), int(content.q), _powers(ring, self.monomial), numerator,
            _grouped(ring, self.denominator_factors()))

    def _numerator_for(
        self, show: str
    ) -> tuple[int, dict[Factor, int] | None, fmpz_mpoly | None]:
        """A unit, then either all factors of the numerator or the numerator multiplied out."""
        ring = self.ring
        positive = {f: e for f, e in self.factors.items() if e > 0}
        is_binomial_product = (
            self.numerator_rest.is_one()
            and all(f.order for f in positive)
            and len({k for f in positive for k, d in enumerate(f.direction) if d}) <= 2)
        if is_binomial_product and show != "expanded":
            return 1, positive, None
        expanded = self.expanded_rest()
        if show == "expanded":
            return 1, None, expanded
        if show == "factored" or (
            len(expanded) <= SHORT_TERMS and expanded.total_degree() <= SHORT_DEGREE
        ):
            unit, _, factors = ring.factorise(expanded)
            return int(unit), factors, None
        found = binomial_factors(ring, expanded)
        return (1, found, None) if found is not None else (1, None, expanded)


def _merged(a: dict[Factor, int], b: dict[Factor, int]) -> dict[Factor, int]:
    if not b:
        return a
    if not a:
        return b
    factors = a.copy()
    for factor, exponent in b.items():
        exponent += factors.get(factor, 0)
        if exponent:
            factors[factor] = exponent
        else:
            del factors[factor]
    return factors


def _cancel(
    rest: fmpz_mpoly, factors: dict[Factor, int], own: dict[Factor, int]
) -> fmpz_mpoly:
    """Divide `rest` by factors of the denominator that are not its own; `factors` is changed."""
    for factor, exponent in list(factors.items()):
        if exponent < 0 and own.get(factor, 0) >= 0:
            rest, n_times = divide_out(rest, factor.polynomial, -exponent)
            if n_times:
                exponent += n_times
                if exponent:
                    factors[factor] = exponent
                else:
                    del factors[factor]
    return rest


def divide_out(
    polynomial: fmpz_mpoly, divisor: fmpz_mpoly, at_most: int
) -> tuple[fmpz_mpoly, int]:
    """Divide as often as it goes without remainder, at most so many times."""
    n_times = 0
    while n_times < at_most:
        try:
            polynomial = polynomial / divisor
        except DomainError:
            break
        n_times += 1
    return polynomial, n_times


def total(scalars: Iterable[Scalar], ring: ParameterRing | None = None) -> Scalar:
    """The sum over one least common denominator; `ring` serves an empty sum."""
    terms = [s for s in scalars if s.content]
    if not terms:
        return Scalar.zero(ring or ParameterRing.get())
    if len(terms) == 1:
        return terms[0]
    common_ring = terms[0].ring
    if any(s.ring is not common_ring for s in terms):
        for s in terms:
            common_ring = common_ring.union(s.ring)
        terms = [s.lift(common_ring) for s in terms]
    n_terms = len(terms)
    # exponent of every factor: the least over all terms, 0 counting where it is absent
    least: dict[Factor, int] = {}
    holders: dict[Factor, int] = {}
    seen: dict[Factor, int] = {}
    for s in terms:
        for factor, exponent in s.factors.items():
            known = seen.get(factor)
            if known is None:
                seen[factor], least[factor], holders[factor] = 1, exponent, 1
            else:
                seen[factor] = known + 1
                if exponent < least[factor]:
                    least[factor], holders[factor] = exponent, 1
                elif exponent == least[factor]:
                    holders[factor] += 1
    common: dict[Factor, int] = {}
    for factor, exponent in least.items():
        if seen[factor] < n_terms and exponent > 0:
            exponent = 0
        common[factor] = exponent
    low = tuple(map(min, *(s.monomial for s in terms)))
    denominator = fmpz(1)
    for s in terms:
        denominator = denominator.lcm(s.content.q)
    accumulated = common_ring.zero
    for s in terms:
        accumulated = accumulated + _over_common(s, common, low, denominator)
    if accumulated.is_zero():
        return Scalar.zero(common_ring)
    content, monomial, rest = common_ring.split(accumulated)
    factors: dict[Factor, int] = {}
    for factor, exponent in common.items():
        # a factor whose full power stands in one term alone cannot cancel
        if exponent < 0 and holders[factor] > 1 and not rest.is_one():
            rest, n_times = divide_out(rest, factor.polynomial, -exponent)
            exponent += n_times
        if exponent:
            factors[factor] = exponent
    result = Scalar(
        common_ring, fmpq(content, denominator), tuple(map(int.__add__, low, monomial)), rest,
        factors)
    return result._settled() if common_ring.has_root else result


def _over_common(
    s: Scalar, common: dict[Factor, int], low: Exponents, denominator: fmpz
) -> fmpz_mpoly:
    """The numerator of `s` over the common denominator."""
    numerator = s.numerator_rest * (s.content.p * (denominator / s.content.q).p
                                    if denominator != s.content.q else s.content.p)
    if s.monomial != low:
        numerator = numerator * s.ring.context.from_dict(
            {tuple(map(int.__sub__, s.monomial, low)): 1})
    own = s.factors
    for factor, exponent in common.items():
        missing = own.get(factor, 0) - exponent
        if missing:
            numerator = numerator * factor.power(missing)
    return numerator


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


class ModularPoint:
    """Values for the parameters modulo a prime, with the images of factors remembered."""

    __slots__ = ("prime", "_values", "_factors", "_default")

    def __init__(
        self, values: Mapping[str, int], prime: int = WITNESS_PRIME, default: Any = None
    ) -> None:
        self.prime = prime
        self._values = dict(values)
        self._factors: dict[Factor, int] = {}
        self._default = default

    def root(self, name: str) -> int:
        """The value of a parameter; for t, that of t^(1/2)."""
        if name not in self._values and self._default is not None:
            self._values[name] = self._default(name)
        return self._values[name]

    def parameter(self, name: str) -> int:
        """The value of a parameter."""
        value = self.root(name)
        return value * value % self.prime if name == "t" else value

    def _generators(self, ring: ParameterRing) -> list[int]:
        return [self.root(n) if ring.has_root else self.parameter(n)
                for n in reversed(ring.names)]

    def polynomial(self, ring: ParameterRing, polynomial: fmpz_mpoly) -> int:
        """The value of a polynomial."""
        prime = self.prime
        generators = self._generators(ring)
        tables = [
            _power_table(g, d, prime) for g, d in zip(generators, polynomial.degrees(), strict=True)]
        value = 0
        for exponents, c in zip(monomials(polynomial), polynomial.coeffs(), strict=True):
            term = int(c % prime)
            for table, e in zip(tables, exponents, strict=True):
                term = term * table[e] % prime
            value += term
        return value % prime

    def value(self, scalar: Scalar) -> int:
        """The value of a scalar; raises Pole when its denominator vanishes here."""
        prime = self.prime
        ring = scalar.ring
        bottom = int(scalar.content.q % prime)
        value = int(scalar.content.p % prime)
        for g, e in zip(self._generators(ring), scalar.monomial, strict=True):
            if e > 0:
                value = value * pow(g, e, prime) % prime
            elif e < 0:
                bottom = bottom * pow(g, -e, prime) % prime
        if not scalar.numerator_rest.is_one():
            value = value * self.polynomial(ring, scalar.numerator_rest) % prime
        for factor, e in scalar.factors.items():
            at = self._factors.get(factor)
            if at is None:
                at = self._factors[factor] = self.polynomial(ring, factor.polynomial)
            if e > 0:
                value = value * pow(at, e, prime) % prime
            else:
                bottom = bottom * pow(at, -e, prime) % prime
        if bottom == 0:
            raise Pole("the denominator vanishes at the chosen point")
        return value * pow(bottom, -1, prime) % prime


def _power_table(base: int, degree: int, prime: int) -> list[int]:
    table = [1]
    for _ in range(int(degree)):
        table.append(table[-1] * base % prime)
    return table


def _named_value(name: str) -> int:
    """A fixed pseudo-random value for a name: equal scalars of different rings hash alike."""
    value = 1469598103934665603
    for byte in name.encode():
        value = (value ^ byte) * 1099511628211 % 2**64
    return value % WITNESS_PRIME


hash_point = ModularPoint({}, default=_named_value)


# layout


def decimal(value: int) -> str:
    """The digits of an integer of any size (Python's own conversion stops at 4300)."""
    return str(fmpz(value)) if value.bit_length() > 13_000 else str(value)


def from_decimal(digits: str) -> int:
    """The integer with these digits, however many."""
    return int(digits) if len(digits) < 4000 else int(fmpz(digits))


def _powers(ring: ParameterRing, exponents: Exponents) -> tuple[tuple[str, Fraction], ...]:
    found = []
    for k, name in enumerate(ring.names):
        e = exponents[len(exponents) - 1 - k]
        if e:
            found.append((name, Fraction(e, 2 if ring.has_root and name == "t" else 1)))
    return tuple(found)


@lru_cache(maxsize=200_000)
def _cached_powers(ring: ParameterRing, exponents: Exponents) -> tuple[tuple[str, Fraction], ...]:
    return _powers(ring, exponents)


def _grouped(
    ring: ParameterRing, factors: Mapping[Factor, int]
) -> tuple[tuple[PolynomialForm, int], ...]:
    """Factors in a fixed order, full sets of cyclotomic ones gathered to binomials 1 - m^d."""
    return _grouped_once(ring, frozenset(factors.items())) if factors else ()


@lru_cache(maxsize=20_000)
def _grouped_once(
    ring: ParameterRing, factors: frozenset[tuple[Factor, int]]
) -> tuple[tuple[PolynomialForm, int], ...]:
    rows: list[tuple[tuple[Any, ...], fmpz_mpoly, int]] = []
    by_direction: dict[Exponents, dict[int, int]] = {}
    for factor, multiplicity in factors:
        if factor.order:
            by_direction.setdefault(factor.direction, {})[factor.order] = multiplicity
        else:
            rows.append((factor.sort_key, factor.polynomial, multiplicity))
    for direction, orders in by_direction.items():
        while orders:
            top = max(orders)
            divisors = [d for d in range(1, top + 1) if top % d == 0]
            if all(d in orders for d in divisors):
                multiplicity = min(orders[d] for d in divisors)
                used = divisors
                polynomial = ring.context.from_dict({
                    tuple(max(-e, 0) * top for e in direction): 1,
                    tuple(max(e, 0) * top for e in direction): -1})
                if polynomial.coefficient(1) < 0:
                    polynomial = -polynomial
            else:
                multiplicity, used = orders[top], [top]
                polynomial = ring.cyclotomic(direction, top).polynomial
            for d in used:
                orders[d] -= multiplicity
                if not orders[d]:
                    del orders[d]
            rows.append(((int(polynomial.total_degree()), _key(polynomial)), polynomial,
                         multiplicity))
    rows.sort(key=lambda row: row[0])
    return tuple((PolynomialForm(ring, p), m) for _, p, m in rows)


def binomial_factors(ring: ParameterRing, polynomial: fmpz_mpoly) -> dict[Factor, int] | None:
    """The factors of a primitive polynomial that is a product of Phi_d(m), else None.

    Only for polynomials in at most two parameters. The Newton polygon of such a product is a sum
    of segments, and the part of the product along an edge holds the factors of that direction.
    """
    active = [k for k, d in enumerate(polynomial.degrees()) if d]
    if not active or len(active) > 2:
        return None
    coefficients = polynomial.coeffs()
    # products of Phi_d read the same backwards, up to sign, and start and end with 1 or -1
    if abs(coefficients[0]) != 1 or abs(coefficients[-1]) != 1:
        return None
    backwards = coefficients[::-1]
    if coefficients != backwards and coefficients != [-c for c in backwards]:
        return None
    a, b = (active[0], active[-1])
    points = {
        (e[a], e[b] if a != b else 0): int(c)
        for e, c in zip(monomials(polynomial), coefficients, strict=True)}
    factors: dict[Factor, int] = {}
    hull = _hull(sorted(points))
    for start, end in zip(hull, hull[1:], strict=False):
        step = (end[0] - start[0], end[1] - start[1])
        length = gcd(*step)
        unit = (step[0] // length, step[1] // length)
        edge = [points.get((start[0] + k * unit[0], start[1] + k * unit[1]), 0)
                for k in range(length + 1)]
        _, found = fmpz_poly(edge).factor()
        direction = [0] * len(ring.names)
        direction[a] += unit[0]
        direction[b] += unit[1] if a != b else 0
        if next(e for e in reversed(direction) if e) < 0:
            direction = [-e for e in direction]
        for part, multiplicity in found:
            order = part.is_cyclotomic() or (-part).is_cyclotomic()
            if not order:
                return None
            factors[ring.cyclotomic(tuple(direction), int(order))] = multiplicity
    product = ring.one
    for factor, multiplicity in factors.items():
        product = product * factor.power(multiplicity)
        if len(product) > 4 * len(polynomial) + 100:
            break
    return factors if product == polynomial else None


def _hull(points: Sequence[tuple[int, int]]) -> list[tuple[int, int]]:
    """The lower chain of the convex hull of sorted points, from the first to the last."""
    if points[0][0] == points[-1][0]:
        return [points[0], points[-1]]
    chain: list[tuple[int, int]] = []
    for p in points:
        while len(chain) > 1 and (
            (chain[-1][0] - chain[-2][0]) * (p[1] - chain[-2][1])
            - (chain[-1][1] - chain[-2][1]) * (p[0] - chain[-2][0]) <= 0
        ):
            chain.pop()
        chain.append(p)
    return chain
