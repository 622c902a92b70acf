"""Exact scalars: the fraction field of Z[q, t, ...] with factored denominators, over `fmpz_mpoly`.

A scalar is content * monomial * numerator * product of irreducible factors to integer powers.
Denominators are always factored, so adding takes least common multiples of known irreducibles
and cancelling is trial division: no general gcd is ever taken. Products of binomials
1 - q^a t^b stay products.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction

from flint import fmpq, fmpz, fmpz_mpoly

from spanwright.kernel import budget
from spanwright.kernel.errors import DivisionByZero, OverBudget, Pole
from spanwright.kernel.factors import Factor, divide_out, factorise, one_minus, probe
from spanwright.kernel.parameters import Exponents, ParameterRing
from spanwright.kernel.product_form import ProductForm, product_form
from spanwright.kernel.residues import ModularPoint, hash_point

_ONE = fmpq(1)


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
        content, monomial, factors = factorise(ring, polynomial)
        return Scalar(ring, fmpq(content), monomial, ring.one, factors)

    @staticmethod
    def one_minus(ring: ParameterRing, exponents: Exponents) -> Scalar:
        """1 - m for a Laurent monomial m, as a product of irreducible factors."""
        if not any(exponents):
            return Scalar.zero(ring)
        content, monomial, factors = one_minus(ring, exponents)
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
        if isinstance(other, int | Fraction):
            return self.as_fraction() == other
        if not isinstance(other, Scalar):
            return NotImplemented
        a, b = self, other
        if not (a.content and b.content):
            return bool(a.content == b.content)
        if a.ring is not b.ring:  # which may change signs: first of all
            ring = a.ring.union(b.ring)
            a, b = a.lift(ring), b.lift(ring)
        if a.content != b.content or a.monomial != b.monomial:
            return False
        if a.factors == b.factors and a.numerator_rest == b.numerator_rest:
            return True
        if a.denominator_factors() != b.denominator_factors():
            return False
        return bool(a.expanded_rest() == b.expanded_rest())

    def __hash__(self) -> int:
        if self._hash is None:
            number = self.as_fraction()
            self._hash = hash(self._residue() if number is None else number)
        return self._hash

    def _residue(self) -> int:
        """The same for equal scalars of whatever ring."""
        try:
            return self.modular(hash_point)
        except Pole:
            return 0

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
        for factor, exponent in self.factors.items():
            # by hand: `*` would settle back into the smaller ring
            content, monomial, factors = factor.lift(ring)
            result.content *= fmpq(content) ** exponent
            result.monomial = tuple(
                m + e * exponent for m, e in zip(result.monomial, monomial, strict=True))
            result.factors = _merged(
                result.factors, {f: e * exponent for f, e in factors.items()})
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
            unit, _, found = factorise(self.ring, self.numerator_rest)
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
        from spanwright.kernel.substitution import substituted  # it builds scalars

        return substituted(self, images)

    def parameters(self) -> frozenset[str]:
        """The names of the parameters that occur."""
        used = {k for k, e in enumerate(self.monomial) if e}
        for polynomial in (self.numerator_rest, *(f.polynomial for f in self.factors)):
            used |= {k for k, d in enumerate(polynomial.degrees()) if d}
        names = tuple(reversed(self.ring.names))
        return frozenset(names[k] for k in used)

    def form(self, show: str = "short") -> ProductForm:
        """The layout for printing: one for each value, whichever way the value was made."""
        return product_form(self, show)


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
    value = probe(rest)
    for factor, exponent in list(factors.items()):
        if exponent >= 0 or (value and factor.probe and value % factor.probe):
            continue
        if own.get(factor, 0) < 0:
            continue
        rest, n_times, value = divide_out(rest, factor, -exponent, value)
        if n_times == -exponent:
            del factors[factor]
        elif n_times:
            factors[factor] = exponent + n_times
    return rest


def multiples(
    ring: ParameterRing, polynomials: Iterable[fmpz_mpoly], scale: Scalar
) -> Iterator[Scalar]:
    """Nonzero polynomials in the parameters times one scale; equal ones give one object.

    Of the coefficients of a polynomial with some symmetry many are equal.
    """
    seen: dict[tuple[int, int], list[tuple[fmpz_mpoly, Scalar]]] = {}
    for polynomial in polynomials:
        n_terms = len(polynomial)
        alike = seen.setdefault((n_terms, int(polynomial.coefficient(n_terms // 2))), [])
        found = next((scalar for known, scalar in alike if known == polynomial), None)
        if found is None:
            found = Scalar.of_polynomial(ring, polynomial) * scale
            alike.append((polynomial, found))
        yield found


def total(scalars: Iterable[Scalar], ring: ParameterRing | None = None) -> Scalar:
    """The sum over one least common denominator; `ring` serves an empty sum."""
    terms = [s for s in scalars if s.content]
    if not terms:
        return Scalar.zero(ring or ParameterRing.get())
    if len(terms) == 1:
        return terms[0]._settled()
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
    value = probe(rest)
    for factor, exponent in common.items():
        # a factor whose full power stands in one term alone cannot cancel
        if exponent < 0 and holders[factor] > 1 and not rest.is_one():
            rest, n_times, value = divide_out(rest, factor, -exponent, value)
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
    numerator = s.numerator_rest * (s.content.p * (denominator // s.content.q))
    if s.monomial != low:
        numerator = numerator * s.ring.context.from_dict(
            {tuple(map(int.__sub__, s.monomial, low)): 1})
    own = s.factors
    for factor, exponent in common.items():
        missing = own.get(factor, 0) - exponent
        if missing:
            numerator = numerator * factor.power(missing)
    return numerator


def polynomial_of(value: Scalar) -> fmpz_mpoly:
    """A scalar without denominator as a kernel polynomial."""
    rest = value.expanded_rest() * value.content.p
    if any(value.monomial):
        rest = rest * value.ring.monomial(value.monomial)
    return rest


def common_denominator(ring: ParameterRing, scalars: Iterable[Scalar]) -> Scalar:
    """1 over the least common denominator, Laurent monomials included."""
    least: dict[Factor, int] = {}
    denominator = fmpz(1)
    low: Exponents | None = None
    for s in scalars:
        denominator = denominator.lcm(s.content.q)
        low = s.monomial if low is None else tuple(map(min, low, s.monomial))
        for f, e in s.factors.items():
            if e < least.get(f, 0):
                least[f] = e
    return Scalar(ring, fmpq(1, denominator), low or ring.nil, ring.one, least)
