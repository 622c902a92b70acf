"""Laurent polynomials in x_1, ..., x_n: exponent tuples to parameter polynomials, one denominator.

value = scale * sum of terms[a] x^a. The scale is content * monomial / product of irreducibles,
and canonical: the terms are jointly primitive, have no common monomial, no factor of the
denominator divides them all, and the term with the largest exponent has a positive last term.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Container, Iterable, Iterator, Mapping, Sequence
from math import comb, log2, prod
from typing import Any

from flint import Ordering, fmpq, fmpz, fmpz_mpoly, fmpz_mpoly_ctx
from flint.utils.flint_exceptions import DomainError

from spanwright.kernel import budget
from spanwright.kernel.coefficients import (
    Scalar,
    common_denominator,
    multiples,
    polynomial_of,
    total,
)
from spanwright.kernel.errors import DivisionByZero, Mixed, NotAUnit, Pole
from spanwright.kernel.factors import Factor
from spanwright.kernel.parameters import Exponents, ParameterRing, monomials
from spanwright.kernel.residues import ModularPoint
from spanwright.kernel.substitution import Substitution

Terms = dict[Exponents, fmpz_mpoly]

# Below this many term products a plain double loop beats packing into one flint polynomial.
PACKING_THRESHOLD = 400


def support_order(exponents: Exponents) -> tuple[Any, ...]:
    """Sort key of monomials as they are shown: higher degree first, then x_1 before x_2."""
    return (-sum(exponents), tuple(-e for e in exponents))


class LaurentPolynomial:
    """An element of K[x_1^±1, ..., x_n^±1], immutable and canonical."""

    __slots__ = ("n", "ring", "terms", "scale")

    def __init__(self, n: int, ring: ParameterRing, terms: Terms, scale: Scalar) -> None:
        """Trusts that the data are canonical; use `reduced` when they may not be."""
        self.n = n
        self.ring = ring
        self.terms = terms
        self.scale = scale

    # construction

    @staticmethod
    def reduced(
        n: int, ring: ParameterRing, terms: Terms, scale: Scalar,
        suspects: Container[Factor] | None = None,
    ) -> LaurentPolynomial:
        """The canonical polynomial scale * sum terms; the scale may be any scalar of `ring`.

        `suspects` are the factors of the denominator that may divide all terms, when that is
        known: no others are tried.
        """
        if not terms or scale.is_zero:
            return LaurentPolynomial(n, ring, {}, Scalar.one(ring))
        scale = scale.lift(ring)  # a product may have settled where t^(1/2) does not occur
        top = scale.expanded_rest()
        if not top.is_one():
            terms = {e: c * top for e, c in terms.items()}
        factors = {f: e for f, e in scale.factors.items() if e < 0}
        terms = _divided_by_common(terms, factors, suspects)
        content, low = _common_part(ring, terms)
        lead = terms[max(terms)]
        if lead.coefficient(len(lead) - 1) < 0:
            content = -content
        if content != 1 or any(low):
            common = ring.context.from_dict({low: content})
            terms = {e: c / common for e, c in terms.items()}
        monomial = tuple(map(int.__add__, scale.monomial, low))
        result = LaurentPolynomial(
            n, ring, terms,
            Scalar(ring, scale.content * fmpq(content), monomial, ring.one, factors))
        return result._settled() if ring.has_root else result

    @staticmethod
    def of_scalars(
        n: int, ring: ParameterRing, coefficients: Mapping[Exponents, Scalar]
    ) -> LaurentPolynomial:
        """The polynomial with these coefficients."""
        present = {e: c for e, c in coefficients.items() if not c.is_zero}
        if not present:
            return LaurentPolynomial.zero(n, ring)
        for c in present.values():
            ring = ring.union(c.ring)
        lifted = {e: c.lift(ring) for e, c in present.items()}
        scale = common_denominator(ring, lifted.values())
        inverse = scale.inverse()
        terms = {}
        for e, c in lifted.items():
            cleared = c * inverse
            terms[e] = polynomial_of(cleared.lift(ring))
        return LaurentPolynomial.reduced(n, ring, terms, scale)

    @staticmethod
    def zero(n: int, ring: ParameterRing) -> LaurentPolynomial:
        """The polynomial 0."""
        return LaurentPolynomial(n, ring, {}, Scalar.one(ring))

    @staticmethod
    def constant(n: int, value: Scalar) -> LaurentPolynomial:
        """A scalar as a polynomial."""
        return LaurentPolynomial.monomial(n, (0,) * n, value)

    @staticmethod
    def monomial(n: int, exponents: Exponents, value: Scalar) -> LaurentPolynomial:
        """A scalar times x^exponents."""
        if len(exponents) != n:
            raise Mixed(f"{len(exponents)} exponents in a ring of {n} variables")
        ring = value.ring
        return LaurentPolynomial.reduced(n, ring, {exponents: ring.one}, value)

    @staticmethod
    def generator(n: int, ring: ParameterRing, j: int) -> LaurentPolynomial:
        """x_j, j from 1."""
        exponents = tuple(int(k == j - 1) for k in range(n))
        return LaurentPolynomial(n, ring, {exponents: ring.one}, Scalar.one(ring))

    @staticmethod
    def of_integers(
        n: int, ring: ParameterRing, coefficients: Mapping[Exponents, int]
    ) -> LaurentPolynomial:
        """The polynomial with these integer coefficients."""
        constant = ring.context.constant
        return LaurentPolynomial.reduced(
            n, ring, {e: constant(c) for e, c in coefficients.items() if c}, Scalar.one(ring))

    # reading

    @property
    def is_zero(self) -> bool:
        """Whether this is 0."""
        return not self.terms

    def __bool__(self) -> bool:
        return bool(self.terms)

    def __len__(self) -> int:
        return len(self.terms)

    def coefficient(self, exponents: Exponents) -> Scalar:
        """The coefficient of x^exponents."""
        c = self.terms.get(exponents)
        if c is None:
            return Scalar.zero(self.ring)
        return Scalar.of_polynomial(self.ring, c) * self.scale

    def support(self) -> list[Exponents]:
        """The exponents that occur, in the order in which they are shown."""
        return sorted(self.terms, key=support_order)

    def items(self) -> Iterator[tuple[Exponents, Scalar]]:
        """Exponents and coefficients, in the order in which they are shown."""
        support = self.support()
        terms = map(self.terms.__getitem__, support)
        return zip(support, multiples(self.ring, terms, self.scale), strict=True)

    def as_scalar(self) -> Scalar | None:
        """The scalar, or None when some x_i occurs."""
        if not self.terms:
            return Scalar.zero(self.ring)
        nil = (0,) * self.n
        if len(self.terms) == 1 and nil in self.terms:
            return self.coefficient(nil)
        return None

    def has_integer_terms(self) -> bool:
        """Whether every term is an integer up to the common scale."""
        return all(c.is_constant() for c in self.terms.values())

    def degrees(self) -> set[int]:
        """The total degrees that occur."""
        return {sum(e) for e in self.terms}

    def lowest(self) -> Exponents:
        """The least exponent of every variable."""
        return tuple(min(e[k] for e in self.terms) for k in range(self.n))

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, LaurentPolynomial):
            return NotImplemented
        if self.n != other.n or self.terms.keys() != other.terms.keys():
            return False
        if self.ring is not other.ring:
            ring = self.ring.union(other.ring)
            return self.lift(ring) == other.lift(ring)
        return not self.terms or (self.scale == other.scale and self.terms == other.terms)

    def __hash__(self) -> int:
        return hash((self.n, frozenset(self.terms)))

    def __repr__(self) -> str:
        return f"LaurentPolynomial<{self.scale} * {self.terms}>"

    # arithmetic

    def lift(self, ring: ParameterRing) -> LaurentPolynomial:
        """This polynomial over a ring that holds its own."""
        if ring is self.ring:
            return self
        terms = {e: ring.lift(c, self.ring) for e, c in self.terms.items()}
        return LaurentPolynomial(self.n, ring, terms, self.scale.lift(ring))

    def _settled(self) -> LaurentPolynomial:
        """Without t^(1/2) when every coefficient is."""
        coefficients = {e: self.coefficient(e) for e in self.terms}
        if any(c.ring.has_root for c in coefficients.values()):
            return self
        ring = ParameterRing.get(self.ring.names)
        return LaurentPolynomial.of_scalars(self.n, ring, coefficients)

    def _aligned(self, other: LaurentPolynomial) -> tuple[LaurentPolynomial, LaurentPolynomial]:
        if self.n != other.n:
            raise Mixed(f"polynomials in {self.n} and in {other.n} variables")
        if self.ring is other.ring:
            return self, other
        ring = self.ring.union(other.ring)
        return self.lift(ring), other.lift(ring)

    def __neg__(self) -> LaurentPolynomial:
        return LaurentPolynomial(self.n, self.ring, self.terms, -self.scale)

    def __add__(self, other: LaurentPolynomial) -> LaurentPolynomial:
        if not isinstance(other, LaurentPolynomial):
            return NotImplemented
        return total_polynomial(self._aligned(other))

    def __sub__(self, other: LaurentPolynomial) -> LaurentPolynomial:
        return self + (-other)

    def __mul__(self, other: object) -> LaurentPolynomial:
        if isinstance(other, Scalar):
            return self.scaled(other)
        if isinstance(other, int):
            return self.scaled(Scalar.number(self.ring, other))
        if not isinstance(other, LaurentPolynomial):
            return NotImplemented
        a, b = self._aligned(other)
        if not a.terms or not b.terms:
            return LaurentPolynomial.zero(a.n, a.ring)
        return LaurentPolynomial.reduced(a.n, a.ring, multiplied(a, b), a.scale * b.scale)

    __rmul__ = __mul__

    def scaled(self, factor: Scalar) -> LaurentPolynomial:
        """The product with a scalar."""
        if factor.ring is not self.ring:
            ring = self.ring.union(factor.ring)
            return self.lift(ring).scaled(factor.lift(ring))
        if factor.is_zero or not self.terms:
            return LaurentPolynomial.zero(self.n, self.ring)
        if factor.numerator_rest.is_one() and not factor.factors and not self.ring.has_root:
            return LaurentPolynomial(self.n, self.ring, self.terms, self.scale * factor)
        # a Scalar numerator may cancel the denominator, and the other way round
        return LaurentPolynomial.reduced(self.n, self.ring, self.terms, self.scale * factor)

    def shifted(self, exponents: Exponents) -> LaurentPolynomial:
        """The product with x^exponents."""
        terms = {tuple(map(int.__add__, e, exponents)): c for e, c in self.terms.items()}
        return LaurentPolynomial(self.n, self.ring, terms, self.scale)

    def __pow__(self, exponent: int) -> LaurentPolynomial:
        if exponent < 0:
            return self.inverse() ** -exponent
        if exponent == 0:
            return LaurentPolynomial.constant(self.n, Scalar.one(self.ring))
        if len(self.terms) == 1:
            (e, c), = self.terms.items()
            return LaurentPolynomial.reduced(
                self.n, self.ring, {tuple(k * exponent for k in e): self.ring.one},
                (Scalar.of_polynomial(self.ring, c) * self.scale) ** exponent)
        _check_power(self, exponent)
        result = self
        for bit in bin(exponent)[3:]:
            result = result * result
            if bit == "1":
                result = result * self
        return result

    def inverse(self) -> LaurentPolynomial:
        """1 / self, for a single term; raises NotAUnit else."""
        if not self.terms:
            raise DivisionByZero("division by zero")
        if len(self.terms) > 1:
            raise NotAUnit("a polynomial with more than one term has no inverse here")
        (e, _), = self.terms.items()
        return LaurentPolynomial.monomial(
            self.n, tuple(-k for k in e), self.coefficient(e).inverse())

    def divided_exactly(self, other: LaurentPolynomial) -> LaurentPolynomial:
        """The quotient, when the division leaves no remainder; raises NotAUnit else."""
        if not other.terms:
            raise DivisionByZero("division by zero")
        a, b = self._aligned(other)
        if len(b.terms) == 1:
            return a * b.inverse()
        if not a.terms:
            return a
        packed_a, low_a = packed(a.ring, a.n, a.terms)
        packed_b, low_b = packed(b.ring, b.n, b.terms)
        try:
            quotient = packed_a / packed_b
        except DomainError:
            raise NotAUnit("the division leaves a remainder") from None
        terms = unpacked(a.ring, a.n, quotient, tuple(map(int.__sub__, low_a, low_b)))
        return LaurentPolynomial.reduced(a.n, a.ring, terms, a.scale / b.scale)

    # maps of the variables

    def moved(self, image: Callable[[Exponents], Exponents]) -> LaurentPolynomial:
        """The polynomial with every exponent tuple sent through an injective map."""
        return LaurentPolynomial.reduced(
            self.n, self.ring, {image(e): c for e, c in self.terms.items()}, self.scale)

    def map_coefficients(self, image: Callable[[Scalar], Scalar]) -> LaurentPolynomial:
        """The polynomial with every coefficient sent through a map."""
        return LaurentPolynomial.of_scalars(
            self.n, self.ring, {e: image(self.coefficient(e)) for e in self.terms})

    def substitute_parameters(self, images: Mapping[str, Scalar]) -> LaurentPolynomial:
        """The polynomial with parameters replaced; raises Pole as scalars do."""
        if not self.terms:
            return self
        substitution = Substitution.of(self.ring, images)
        images_of_terms = {e: substitution.polynomial(c) for e, c in self.terms.items()}
        try:
            scale = self.scale.substitute(images)
        except Pole as pole:
            # the terms have no common factor, so somebody keeps the pole
            pole.fact = "a coefficient has a pole there"
            raise
        return LaurentPolynomial.of_scalars(
            self.n, substitution.ring, {e: c * scale for e, c in images_of_terms.items()})

    def evaluate(self, values: Mapping[int, Scalar]) -> LaurentPolynomial:
        """The polynomial with some x_j (j from 1) replaced by scalars."""
        collected: dict[Exponents, list[Scalar]] = {}
        powers: dict[tuple[int, int], Scalar] = {}
        for e in self.terms:
            value = self.coefficient(e)
            rest = list(e)
            for j, at in values.items():
                power = rest[j - 1]
                rest[j - 1] = 0
                if power:
                    if power < 0 and at.is_zero:
                        raise Pole(f"x_{j}^{power} has a pole at x_{j} = 0", order=-power)
                    if (j, power) not in powers:
                        powers[j, power] = at**power
                    value = value * powers[j, power]
            collected.setdefault(tuple(rest), []).append(value)
        return LaurentPolynomial.of_scalars(
            self.n, self.ring, {e: total(vs, self.ring) for e, vs in collected.items()})

    def modular(self, point: ModularPoint, xs: Mapping[int, int]) -> int:
        """The value modulo the point's prime, x_j taking xs[j]."""
        value = 0
        for e, c in self.terms.items():
            term = point.polynomial(self.ring, c)
            for j, power in enumerate(e, 1):
                if power:
                    term = term * pow(xs[j], power, point.prime) % point.prime
            value += term
        return value * point.value(self.scale) % point.prime


def _common_part(ring: ParameterRing, terms: Terms) -> tuple[fmpz, Exponents]:
    """The positive integer and the monomial that divide all terms."""
    content = fmpz(0)
    for c in terms.values():
        content = content.gcd(c.content())  # type: ignore[attr-defined]
        if content == 1:
            break
    # most polynomials have a term with a constant part, which comes last
    for c in terms.values():
        if not any(c.monomial(len(c) - 1)):
            return content, ring.nil
    low: Exponents | None = None
    for c in terms.values():
        own = tuple(map(int, c.term_content().monomial(0)))
        low = own if low is None else tuple(map(min, low, own))
        if not any(low):
            break
    assert low is not None
    return content, low


def _divided_by_common(
    terms: Terms, factors: dict[Factor, int], suspects: Container[Factor] | None
) -> Terms:
    """Cancel factors of the denominator that divide every term; `factors` is changed."""
    for factor in list(factors):
        if suspects is not None and factor not in suspects:
            continue
        while factor in factors:
            divided: Terms = {}
            try:
                for e, c in terms.items():
                    divided[e] = c / factor.polynomial
            except DomainError:
                break
            terms = divided
            factors[factor] += 1
            if not factors[factor]:
                del factors[factor]
    return terms


def total_polynomial(polynomials: Iterable[LaurentPolynomial]) -> LaurentPolynomial:
    """The sum over one common denominator; the summands live in one ring."""
    summands = list(polynomials)
    present = [p for p in summands if p.terms]
    if not present:
        return LaurentPolynomial.zero(summands[0].n, summands[0].ring)
    ring, n = present[0].ring, present[0].n
    if any(p.ring is not ring for p in present):
        for p in present:
            ring = ring.union(p.ring)
        present = [p.lift(ring) for p in present]
    scale = common_denominator(ring, (p.scale for p in present))
    inverse = scale.inverse()
    terms: Terms = {}
    for p in present:
        factor = polynomial_of((p.scale * inverse).lift(ring))
        is_unit = factor.is_one()
        for e, c in p.terms.items():
            added = c if is_unit else c * factor
            known = terms.get(e)
            terms[e] = added if known is None else known + added
    return LaurentPolynomial.reduced(n, ring, {e: c for e, c in terms.items() if c}, scale)


def multiplied(a: LaurentPolynomial, b: LaurentPolynomial) -> Terms:
    """The terms of the product, scales left out."""
    n_products = len(a.terms) * len(b.terms)
    if len(a.terms) == 1 or len(b.terms) == 1 or n_products < PACKING_THRESHOLD:
        return _convolved(a.terms, b.terms)
    check_product([a, b])
    packed_a, low_a = packed(a.ring, a.n, a.terms)
    packed_b, low_b = packed(b.ring, b.n, b.terms)
    return unpacked(a.ring, a.n, packed_a * packed_b, tuple(map(int.__add__, low_a, low_b)))


def check_product(factors: Sequence[LaurentPolynomial]) -> None:
    """Raise OverBudget when a product of polynomials is too large to be begun."""
    if not all(f.terms for f in factors):
        return
    n_terms = min(prod(len(f.terms) for f in factors), _box([f.terms for f in factors]))
    budget.current().check_terms(n_terms, "this product")


def _check_power(base: LaurentPolynomial, exponent: int) -> None:
    if not base.terms:
        return
    box = _box([base.terms], exponent)
    budget.current().check_terms(
        min(_n_choices(len(base.terms), exponent), box), "this power")
    n_joint = min(_n_choices(sum(map(len, base.terms.values())), exponent),
                  box * _box([{m for c in base.terms.values() for m in monomials(c)}], exponent))
    budget.current().check_size(n_joint, int(exponent * _sum_of_sizes(base)), "this power")


def _n_choices(n_terms: int, exponent: int) -> int:
    """How many monomials of this degree there are in so many letters, up to a large number."""
    if min(n_terms - 1, exponent) > 50:
        return 10**30
    return comb(exponent + n_terms - 1, n_terms - 1)


def _box(factors: Sequence[Collection[Exponents]], power: int = 1) -> int:
    """How many exponents a product of polynomials, or of their powers, may have at most."""
    spreads = [
        [max(column) - min(column) for column in zip(*((sum(e), *e) for e in f), strict=True)]
        for f in factors]
    n_degrees, *sides = [int(sum(column)) * power + 1 for column in zip(*spreads, strict=True)]
    if not sides:
        return 1
    size: int = prod(sides)
    n = len(sides)
    # how far the degree goes above the corner of the least exponents: a simplex, cut off below
    height = power * sum(
        max(map(sum, f)) - sum(min(column) for column in zip(*f, strict=True)) for f in factors)
    simplex = comb(height + n, n) - comb(height + n - n_degrees, n)
    # the degree and all exponents but one leave no choice
    return min(size, size // max(sides) * n_degrees, simplex)


def _sum_of_sizes(polynomial: LaurentPolynomial) -> float:
    """The binary logarithm of the sum of all absolute values, which bounds those of products."""
    numbers = (abs(number) for c in polynomial.terms.values() for number in c.coeffs())
    return log2(int(sum(numbers, fmpz(0))))


def _convolved(a: Terms, b: Terms) -> Terms:
    terms: Terms = {}
    for e, c in a.items():
        for f, d in b.items():
            key = tuple(map(int.__add__, e, f))
            known = terms.get(key)
            terms[key] = c * d if known is None else known + c * d
    return {e: c for e, c in terms.items() if c}


def _joint_context(ring: ParameterRing, n: int) -> fmpz_mpoly_ctx:
    names = (*(f"x{k}" for k in range(n)), *reversed(ring.names))
    return fmpz_mpoly_ctx.get(names, Ordering.lex)


def packed(ring: ParameterRing, n: int, terms: Terms) -> tuple[fmpz_mpoly, Exponents]:
    """One polynomial in x and the parameters, after a shift that makes exponents >= 0."""
    low = tuple(min(e[k] for e in terms) for k in range(n))
    joint: dict[Exponents, Any] = {}
    for e, c in terms.items():
        head = tuple(map(int.__sub__, e, low))
        for m, value in zip(monomials(c), c.coeffs(), strict=True):
            joint[head + m] = value
    return _joint_context(ring, n).from_dict(joint), low


def unpacked(ring: ParameterRing, n: int, polynomial: fmpz_mpoly, low: Exponents) -> Terms:
    """The inverse of `packed`."""
    rows: dict[Exponents, dict[Exponents, Any]] = {}
    for e, value in zip(monomials(polynomial), polynomial.coeffs(), strict=True):
        head = tuple(map(int.__add__, e[:n], low))
        rows.setdefault(head, {})[e[n:]] = value
    return {e: ring.context.from_dict(row) for e, row in rows.items()}
