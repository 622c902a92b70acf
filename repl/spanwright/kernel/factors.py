"""Irreducible factors of parameter polynomials, one object each, the cyclotomic ones known by name.

The factors of 1 - m^g over Q are the Phi_d(m), d | g (cyclotomic polynomials; common practice).
"""

from __future__ import annotations

from collections.abc import Sequence
from math import gcd
from typing import Any

from flint import fmpz, fmpz_mpoly, fmpz_poly
from flint.utils.flint_exceptions import DomainError

from spanwright.kernel.errors import OverBudget
from spanwright.kernel.parameters import Exponents, ParameterRing, monomials

# Phi_d and 1 - m^d with d above this are refused.
LARGEST_ORDER = 5000

# Where polynomials up to a degree are evaluated before a division is tried.
PROBE = tuple(map(fmpz, (101, 103, 107, 109, 113, 127, 131, 137)))
PROBED_DEGREE = 200


REMEMBERED_POWERS = 64
"""Higher powers of a factor are computed anew: each is large, and few are asked for twice."""


class Factor:
    """An irreducible polynomial, one object per ring; `order` > 0 marks Phi_order(direction)."""

    __slots__ = (
        "ring", "polynomial", "direction", "order", "sort_key", "probe", "_powers", "_lifts")

    def __init__(
        self, ring: ParameterRing, polynomial: fmpz_mpoly, direction: Exponents, order: int
    ) -> None:
        self.ring = ring
        self.polynomial = polynomial
        self.direction = direction
        self.order = order
        self.sort_key = (int(polynomial.total_degree()), polynomial_key(polynomial))
        self.probe = probe(polynomial)
        self._powers = [ring.one, polynomial]
        self._lifts: dict[ParameterRing, Product] = {}

    def power(self, exponent: int) -> fmpz_mpoly:
        """The expanded power, remembered."""
        if exponent > REMEMBERED_POWERS:
            return self.polynomial**exponent
        powers = self._powers
        while len(powers) <= exponent:
            powers.append(powers[-1] * self.polynomial)
        return powers[exponent]

    def lift(self, ring: ParameterRing) -> Product:
        """This factor in a larger ring, where t^(1/2) may split it."""
        found = self._lifts.get(ring)
        if found is None:
            found = self._lifts[ring] = factorise(ring, ring.lift(self.polynomial, self.ring))
        return found

    def __repr__(self) -> str:
        return f"Factor({self.polynomial})"


def polynomial_key(polynomial: fmpz_mpoly) -> tuple[Any, ...]:
    """Exponents and coefficients, leading term first: hashable, and an order of polynomials."""
    return (tuple(monomials(polynomial)), tuple(int(c) for c in polynomial.coeffs()))


Product = tuple[fmpz, Exponents, dict[Factor, int]]
"""A number, a Laurent monomial and irreducible factors with their multiplicities."""

# every factor met so far, by ring and polynomial, cyclotomic ones by direction and order too
_known: dict[tuple[Any, ...], Factor] = {}


def cyclotomic(ring: ParameterRing, direction: Exponents, order: int) -> Factor:
    """Phi_order(m) made a polynomial; `direction`, the exponents of m, is primitive and ends in a
    positive entry (zeros aside): Phi_d(1/m) is the same up to a monomial."""
    key = (ring, direction, order)
    found = _known.get(key)
    if found is None:
        if order > LARGEST_ORDER:
            raise OverBudget(f"the cyclotomic polynomial of order {order} is too large")
        coefficients = [int(c) for c in fmpz_poly.cyclotomic(order).coeffs()]
        top = len(coefficients) - 1
        terms = {
            tuple(max(e, 0) * k + max(-e, 0) * (top - k) for e in direction): c
            for k, c in enumerate(coefficients) if c
        }
        polynomial = ring.context.from_dict(terms)
        if polynomial.coefficient(len(polynomial) - 1) < 0:
            polynomial = -polynomial
        found = _interned(ring, polynomial, direction, order)
        _known[key] = found
    return found


def irreducible(ring: ParameterRing, polynomial: fmpz_mpoly) -> Factor:
    """The factor of a primitive irreducible polynomial whose last term is positive."""
    found = _known.get((ring, *polynomial_key(polynomial)))
    if found is not None:
        return found
    recognised = _as_cyclotomic(polynomial)
    if recognised is not None:
        return cyclotomic(ring, *recognised)
    return _interned(ring, polynomial, ring.nil, 0)


def _interned(
    ring: ParameterRing, polynomial: fmpz_mpoly, direction: Exponents, order: int
) -> Factor:
    key = (ring, *polynomial_key(polynomial))
    found = _known.get(key)
    if found is None:
        found = _known[key] = Factor(ring, polynomial, direction, order)
    return found


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


def one_minus(ring: ParameterRing, exponents: Exponents) -> Product:
    """1 - m for a Laurent monomial m other than 1."""
    power = gcd(*exponents)
    if power > LARGEST_ORDER:
        raise OverBudget("the exponents are too large to factor")
    direction = tuple(e // power for e in exponents)
    content, monomial = fmpz(1), ring.nil
    if next(e for e in reversed(direction) if e) < 0:  # 1 - 1/m = -(1 - m)/m
        content, monomial = fmpz(-1), exponents
        direction = tuple(-e for e in direction)
    if min(direction) < 0:  # 1 - a/b = (b - a)/b
        monomial = tuple(m + power * min(e, 0) for m, e in zip(monomial, direction, strict=True))
        first = cyclotomic(ring, direction, 1).polynomial
        if first[tuple(max(e, 0) for e in direction)] > 0:
            content = -content
    factors = {cyclotomic(ring, direction, d): 1 for d in range(1, power + 1) if power % d == 0}
    return content, monomial, factors


def factorise(ring: ParameterRing, polynomial: fmpz_mpoly) -> Product:
    """Content, monomial and irreducible factors of a nonzero polynomial."""
    content, monomial, rest = ring.split(polynomial)
    if rest.is_one():
        return content, monomial, {}
    if len(rest) == 2 and sorted(map(int, rest.coeffs())) in ([-1, 1], [1, 1]):
        return content, monomial, _binomial_factors(ring, rest)
    factors: dict[Factor, int] = {}
    unit, found = rest.factor()
    sign = int(unit)
    for factor, multiplicity in found:
        if factor.coefficient(len(factor) - 1) < 0:
            factor = -factor
            sign = -sign if multiplicity % 2 else sign
        factors[irreducible(ring, factor)] = multiplicity
    return content * sign, monomial, factors


def _binomial_factors(ring: ParameterRing, rest: fmpz_mpoly) -> dict[Factor, int]:
    (high, low), (first, second) = monomials(rest), rest.coeffs()
    difference = tuple(a - b for a, b in zip(high, low, strict=True))
    if first == second:  # 1 + m = (1 - m^2)/(1 - m)
        _, _, halves = one_minus(ring, difference)
        _, _, factors = one_minus(ring, tuple(2 * d for d in difference))
        return {f: e for f, e in factors.items() if f not in halves}
    return one_minus(ring, difference)[2]


def probe(polynomial: fmpz_mpoly) -> fmpz:
    """The value at one integer point, to see that a division leaves a remainder; 0 says nothing."""
    if polynomial.total_degree() > PROBED_DEGREE:
        return fmpz(0)
    n = polynomial.context().nvars()
    return polynomial(*PROBE[:n]) if n <= len(PROBE) else fmpz(0)


def divide_out(
    polynomial: fmpz_mpoly, factor: Factor, at_most: int, value: fmpz
) -> tuple[fmpz_mpoly, int, fmpz]:
    """Divide as often as it goes without remainder: the quotient, how often, its probe.

    Most divisions leave a remainder, and most of those show it in `value`, the polynomial's probe.
    """
    n_times = 0
    while n_times < at_most:
        if value and factor.probe and value % factor.probe:
            break
        try:
            polynomial = polynomial / factor.polynomial
        except DomainError:
            break
        value = value // factor.probe if factor.probe else fmpz(0)
        n_times += 1
    return polynomial, n_times, value


def binomial_factors(ring: ParameterRing, polynomial: fmpz_mpoly) -> dict[Factor, int] | None:
    """The factors of a primitive polynomial that is a product of Phi_d(m), else None.

    Only for polynomials in at most two parameters. The Newton polygon of such a product is a sum
    of segments, and the part of the product along an edge holds the factors of that direction.
    """
    active = [k for k, d in enumerate(polynomial.degrees()) if d]
    if not active or len(active) > 2:
        return None
    # products of Phi_d read the same backwards, up to sign, and start and end with 1 or -1
    last = len(polynomial) - 1
    for place in (0, 1, 2):
        if place < last and abs(polynomial.coefficient(place)) != abs(
                polynomial.coefficient(last - place)):
            return None
    if abs(polynomial.coefficient(0)) != 1:
        return None
    coefficients = polynomial.coeffs()
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
            factors[cyclotomic(ring, tuple(direction), int(order))] = multiplicity
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
