"""Scalars laid out for reading: numbers, powers, factors of numerator and of denominator."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import TYPE_CHECKING, Any

from flint import fmpz_mpoly

from spanwright.kernel.factors import (
    Factor,
    binomial_factors,
    cyclotomic,
    factorise,
    polynomial_key,
)
from spanwright.kernel.parameters import Exponents, ParameterRing, monomials

if TYPE_CHECKING:
    from spanwright.kernel.coefficients import Scalar

# Numerators up to this size are shown factored; larger ones only when they are a product of
# binomials. Both bounds keep factoring for display below a millisecond.
SHORT_TERMS = 16
SHORT_DEGREE = 40
REMEMBERED_NUMERATORS = 5_000

Powers = tuple[tuple[str, int | Fraction], ...]
"""Parameters with their exponents; those of t may be halves where t^(1/2) occurs."""


@dataclass(frozen=True, slots=True)
class ProductForm:
    """A scalar laid out for reading: sign and numbers, powers of parameters, polynomial factors.

    `powers` maps a parameter to its exponent (a half when t^(1/2) occurs); polynomial factors
    have multiplicities.
    """

    numerator_content: int
    denominator_content: int
    powers: Powers
    numerator: tuple[tuple[PolynomialForm, int], ...]
    denominator: tuple[tuple[PolynomialForm, int], ...]


class PolynomialForm:
    """A parameter polynomial laid out for reading: its terms in printing order."""

    __slots__ = ("_hash", "_polynomial", "ring")

    def __init__(self, ring: ParameterRing, polynomial: fmpz_mpoly) -> None:
        self.ring = ring
        self._polynomial = polynomial
        self._hash: int | None = None

    def __len__(self) -> int:
        return len(self._polynomial)

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, PolynomialForm):
            return NotImplemented
        if self.ring is other.ring:
            return bool(self._polynomial == other._polynomial)
        return list(self.terms()) == list(other.terms())

    def __hash__(self) -> int:
        # asked for with every coefficient that has this factor
        if self._hash is None:
            self._hash = hash((len(self._polynomial), int(self._polynomial.coefficient(0))))
        return self._hash

    def __repr__(self) -> str:
        return f"PolynomialForm({self._polynomial})"

    def terms(self) -> Iterator[tuple[int, Powers]]:
        """Coefficients and powers of parameters, constant term first."""
        for exponents, c in zip(
            reversed(monomials(self._polynomial)), reversed(self._polynomial.coeffs()),
            strict=True,
        ):
            yield int(c), powers(self.ring, exponents)

    def words(self) -> tuple[list[str], list[str]]:
        """Signs, and terms as flint writes them (3*t^2*q), the constant term first.

        Much quicker than `terms`; `powers_of_word` reads the monomials.
        """
        text = str(self._polynomial)
        words = text[1:].split(" ") if text[0] == "-" else text.split(" ")
        signs = words[-2::-2]
        signs.append("-" if text[0] == "-" else "+")
        return signs, words[::-2]


def powers(ring: ParameterRing, exponents: Exponents) -> Powers:
    """The powers of a Laurent monomial, in printing order."""
    found: list[tuple[str, int | Fraction]] = []
    for name, e in zip(ring.names, reversed(exponents), strict=True):
        if e:
            is_half = ring.has_root and name == "t" and e % 2
            whole = e // 2 if ring.has_root and name == "t" else e
            found.append((name, Fraction(e, 2) if is_half else whole))
    return tuple(found)


def powers_of_word(ring: ParameterRing, monomial: str) -> Powers:
    """Parameters with their exponents, in printing order, of a monomial in flint's writing."""
    exponents = dict.fromkeys(ring.names, 0)
    for power in monomial.split("*"):
        name, _, exponent = power.partition("^")
        exponents[name] = int(exponent or 1)
    return powers(ring, tuple(exponents[name] for name in reversed(ring.names)))


def product_form(value: Scalar, show: str = "short") -> ProductForm:
    """The layout for printing: one for each value, whichever way the value was made.

    `short` factors numerators of at most 16 terms, and larger ones when they are products of
    binomials; `factored` factors all; `expanded` multiplies numerators out.
    """
    ring = value.ring
    numerator: tuple[tuple[PolynomialForm, int], ...] = ()
    content = value.content
    factors: dict[Factor, int] | None = None
    rest: fmpz_mpoly | None = None
    if not value.is_zero:
        unit, factors, rest = _numerator_for(value, show)
        content = content * unit
    if factors:
        numerator = _grouped(ring, factors)
    elif rest is not None and not rest.is_one():
        numerator = ((PolynomialForm(ring, rest), 1),)
    return ProductForm(
        int(content.p), int(content.q), powers(ring, value.monomial), numerator,
        _grouped(ring, value.denominator_factors()))


def _numerator_for(
    value: Scalar, show: str
) -> tuple[int, dict[Factor, int] | None, fmpz_mpoly | None]:
    """A unit, then either all factors of the numerator or the numerator multiplied out."""
    ring = value.ring
    positive = {f: e for f, e in value.factors.items() if e > 0}
    is_binomial_product = (
        value.numerator_rest.is_one()
        and all(f.order for f in positive)
        and len({k for f in positive for k, d in enumerate(f.direction) if d}) <= 2)
    if is_binomial_product and show != "expanded":
        return 1, positive, None
    expanded = value.expanded_rest()
    if show == "expanded":
        return 1, None, expanded
    if len(expanded) <= SHORT_TERMS and expanded.total_degree() <= SHORT_DEGREE:
        return (*_factored_once(ring, expanded), None)
    if show == "factored":
        unit, _, factors = factorise(ring, expanded)
        return int(unit), factors, None
    found = binomial_factors(ring, expanded)
    return (1, found, None) if found is not None else (1, None, expanded)


_short_numerators: dict[tuple[ParameterRing, object], tuple[int, dict[Factor, int]]] = {}


def _factored_once(
    ring: ParameterRing, polynomial: fmpz_mpoly
) -> tuple[int, dict[Factor, int]]:
    """Unit and factors; many coefficients of a result share a short numerator."""
    key = ring, polynomial_key(polynomial)
    found = _short_numerators.get(key)
    if found is None:
        unit, _, factors = factorise(ring, polynomial)
        if len(_short_numerators) >= REMEMBERED_NUMERATORS:
            _short_numerators.clear()
        found = _short_numerators[key] = int(unit), factors
    return found


def _grouped(
    ring: ParameterRing, factors: Mapping[Factor, int]
) -> tuple[tuple[PolynomialForm, int], ...]:
    """Factors in a fixed order, full sets of cyclotomic ones gathered to binomials 1 - m^d."""
    return _grouped_once(ring, frozenset(factors.items())) if factors else ()


@lru_cache(maxsize=20_000)
def _grouped_once(
    ring: ParameterRing, factors: frozenset[tuple[Factor, int]]
) -> tuple[tuple[PolynomialForm, int], ...]:
    rows: list[tuple[_Row, int]] = []
    by_direction: dict[Exponents, dict[int, int]] = {}
    for factor, multiplicity in factors:
        if factor.order:
            by_direction.setdefault(factor.direction, {})[factor.order] = multiplicity
        else:
            rows.append(((factor.sort_key, PolynomialForm(ring, factor.polynomial)), multiplicity))
    for direction, orders in by_direction.items():
        while orders:
            top = max(orders)
            divisors = [d for d in range(1, top + 1) if top % d == 0]
            is_binomial = all(d in orders for d in divisors)
            used = divisors if is_binomial else [top]
            multiplicity = min(orders[d] for d in used)
            for d in used:
                orders[d] -= multiplicity
                if not orders[d]:
                    del orders[d]
            rows.append((_row(ring, direction, top, is_binomial), multiplicity))
    rows.sort(key=lambda row: row[0][0])
    return tuple((form, multiplicity) for (_, form), multiplicity in rows)


_Row = tuple[tuple[Any, ...], PolynomialForm]
"""What a factor is sorted by, and the factor."""


@lru_cache(maxsize=5_000)
def _row(ring: ParameterRing, direction: Exponents, order: int, is_binomial: bool) -> _Row:
    """1 - m^order or Phi_order(m) for m of that direction, its last term positive."""
    polynomial = cyclotomic(ring, direction, order).polynomial
    if is_binomial:
        polynomial = ring.context.from_dict({
            tuple(max(-e, 0) * order for e in direction): 1,
            tuple(max(e, 0) * order for e in direction): -1})
        if polynomial.coefficient(1) < 0:
            polynomial = -polynomial
    key = (int(polynomial.total_degree()), polynomial_key(polynomial))
    return key, PolynomialForm(ring, polynomial)
