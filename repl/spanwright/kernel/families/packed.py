"""Polynomials in x with one integer a monomial, and expansion by leading monomials.

The exponent of x_j is digit j of the key in base 2^16. Multiplying monomials adds keys, and the
reverse-lexicographic order (the last variable in which two monomials differ decides) is the order
of integers. Coefficients are integers or parameter polynomials.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from heapq import heapify, heappop, heappush
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain, OverBudget
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import Exponents, ParameterRing

DIGIT = 16
LARGEST = (1 << DIGIT) - 1

Packed = dict[int, Any]
"""Packed exponents to coefficients, all of one kind: `int` or `fmpz_mpoly`; no zeros."""


def pack(exponents: Exponents) -> int:
    """The key of x^exponents; exponents from 0 to LARGEST."""
    key = 0
    for exponent in reversed(exponents):
        key = key << DIGIT | exponent
    return key


def unpack(key: int, n: int) -> Exponents:
    """The n exponents of a key; variables after x_n are dropped."""
    return tuple(key >> shift & LARGEST for shift in range(0, DIGIT * n, DIGIT))


def digits(key: int) -> Exponents:
    """The exponents of a key, up to the last variable that occurs."""
    found = []
    while key:
        found.append(key & LARGEST)
        key >>= DIGIT
    return tuple(found)


def degree(key: int) -> int:
    """The total degree of a monomial."""
    return sum(digits(key))


def multiplied(a: Mapping[int, int], b: Mapping[int, int]) -> Packed:
    """The product of two polynomials with integer coefficients."""
    if len(a) > len(b):
        a, b = b, a
    found: Packed = {}
    items = list(b.items())
    get = found.get
    limits = budget.current()
    for k, c in a.items():
        limits.check()
        for m, d in items:
            key = k + m
            found[key] = get(key, 0) + c * d
    return {k: c for k, c in found.items() if c}


def by_leaders(
    terms: Mapping[int, Any], element: Callable[[int], Mapping[int, int]]
) -> Packed:
    """The coefficients a_k of `terms` = sum of a_k element(k).

    element(k) must have coefficient 1 at k and all its other keys smaller. The leader of what is
    left is subtracted until nothing is.
    """
    left = dict(terms)
    waiting = [-key for key in left]
    heapify(waiting)
    found: Packed = {}
    limits = budget.current()
    while waiting:
        key = -heappop(waiting)
        c = left.pop(key)
        if not c:
            continue
        found[key] = c
        limits.check_terms(len(found), "this expansion")
        subtract(left, element(key), c, waiting, key)
    return found


def subtract(
    left: Packed, element: Mapping[int, int], c: Any, waiting: list[int], leader: int | None
) -> None:
    """left -= c * element without its leader; keys new to `left` join the heap `waiting`."""
    get = left.get
    for k, a in element.items():
        if k == leader:
            continue
        known = get(k)
        if known is None:
            left[k] = -c * a
            heappush(waiting, -k)
        else:
            left[k] = known - c * a


def check_polynomial(polynomial: LaurentPolynomial, name: str) -> None:
    """Raise OutsideDomain when a negative power occurs, OverBudget when one is far too large."""
    for e in polynomial.terms:
        for j, exponent in enumerate(e, 1):
            if exponent < 0:
                raise OutsideDomain(
                    f"x_{j}^{exponent} occurs, and {name} is a basis of the polynomials, "
                    "without negative powers", code="negative-power")
            if exponent > LARGEST:
                raise OverBudget(
                    f"x_{j}^{exponent} occurs, the limit is {LARGEST:,}", code="too-large")


def from_laurent(polynomial: LaurentPolynomial, name: str) -> Packed:
    """The terms of polynomial / polynomial.scale; raises OutsideDomain on negative powers."""
    check_polynomial(polynomial, name)
    if polynomial.has_integer_terms():
        return {
            pack(e): int(c.leading_coefficient()) for e, c in polynomial.terms.items()}
    return {pack(e): c for e, c in polynomial.terms.items()}


def scalar(value: Any, polynomial: LaurentPolynomial) -> Scalar:
    """A coefficient found from `from_laurent(polynomial)`, with the scale put back."""
    ring = polynomial.ring
    if isinstance(value, int):
        return Scalar.number(ring, value) * polynomial.scale
    return Scalar.of_polynomial(ring, value) * polynomial.scale


def to_laurent(terms: Mapping[int, int], n: int) -> LaurentPolynomial:
    """A polynomial with positive integer coefficients, one of them 1, in n variables."""
    ring = ParameterRing.get()
    constant, one = ring.context.constant, ring.one
    # such coefficients are jointly primitive with a positive leading term: nothing to reduce
    return LaurentPolynomial(
        n, ring, {unpack(key, n): one if c == 1 else constant(c) for key, c in terms.items()},
        Scalar.one(ring))


def isobaric(terms: Mapping[int, Any], i: int) -> Packed:
    """pi_i f = d_i(x_i f) of a polynomial, i from 1.

    On the monomials x_i^k x_(i+1)^(s-k) with all else equal, the coefficients r_k of the result
    are symmetric under k <-> s-k, and r_k = r_(k-1) + c_(s-k) - c_(k-1) up to the middle.
    """
    shift = DIGIT * (i - 1)
    both = (LARGEST << DIGIT | LARGEST) << shift
    lines: dict[tuple[int, int], dict[int, Any]] = {}
    for key, c in terms.items():
        first, second = key >> shift & LARGEST, key >> (shift + DIGIT) & LARGEST
        lines.setdefault((key & ~both, first + second), {})[first] = c
    found: Packed = {}
    for (rest, size), line in lines.items():
        value: Any = 0
        low = min(min(line), size - max(line))
        for k in range(low, size // 2 + 1):
            value = value + line.get(size - k, 0) - line.get(k - 1, 0)
            if value:
                found[rest + ((k + ((size - k) << DIGIT)) << shift)] = value
                found[rest + ((size - k + (k << DIGIT)) << shift)] = value
    return found
