"""The same quantities modulo a large prime, at seeded random values of the parameters.

Polynomials in x keep their exponents; their coefficients are residues. Two different elements of
Q(q,t)[x] agree at a random point with probability at most d/p, d the degree in the parameters of
the numerator of their difference (Schwartz, Fast probabilistic algorithms for verification of
polynomial identities, 1980); `height` bounds it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from functools import cache
from typing import Any

from flint import fmpz_mpoly, nmod_mpoly, nmod_mpoly_ctx

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import NotAUnit, Pole
from spanwright.kernel.families.base import Family
from spanwright.kernel.families.nonsymmetric_macdonald import ratio, recursion_path, weights
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.residues import WITNESS_PRIME, ModularPoint

PRIME = WITNESS_PRIME
LARGEST_N_ELEMENTS = 3_000
"""More basis elements than this are not remembered."""

Exponents = tuple[int, ...]


@cache
def _context(n: int) -> Any:
    return nmod_mpoly_ctx.get([f"x{j}" for j in range(1, n + 1)], modulus=PRIME)


class ModularPolynomial:
    """A Laurent polynomial in x_1, ..., x_n with residues as coefficients.

    It is `body` times (x_1 ... x_n)^low. `height` bounds the degrees in the parameters of
    numerators and common denominator of the polynomial that this is the image of.
    """

    __slots__ = ("n", "body", "low", "height")

    def __init__(self, n: int, body: nmod_mpoly, low: int = 0, height: int = 0) -> None:
        self.n = n
        self.body = body
        self.low = low
        self.height = height

    @staticmethod
    def of_terms(n: int, terms: Mapping[Exponents, int], height: int = 0) -> ModularPolynomial:
        """From exponents, negative ones too, and residues."""
        low = min((min(e) for e in terms), default=0)
        body = _context(n).from_dict({
            tuple(k - low for k in e): c % PRIME for e, c in terms.items()})
        return ModularPolynomial(n, body, low, height)

    @property
    def is_zero(self) -> bool:
        """Whether every coefficient is 0."""
        return bool(self.body.is_zero())

    def _lowered(self, low: int) -> nmod_mpoly:
        """The body with respect to a smaller `low`."""
        if low == self.low:
            return self.body
        factor: nmod_mpoly = _context(self.n).from_dict({(self.low - low,) * self.n: 1})
        return self.body * factor

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, ModularPolynomial):
            return NotImplemented
        low = min(self.low, other.low)
        return self.n == other.n and bool(self._lowered(low) == other._lowered(low))

    __hash__ = None  # type: ignore[assignment]

    def __neg__(self) -> ModularPolynomial:
        return ModularPolynomial(self.n, -self.body, self.low, self.height)

    def __add__(self, other: ModularPolynomial) -> ModularPolynomial:
        low = min(self.low, other.low)
        return ModularPolynomial(
            self.n, self._lowered(low) + other._lowered(low), low, self.height + other.height)

    @staticmethod
    def total(polynomials: Iterable[ModularPolynomial]) -> ModularPolynomial:
        """The sum of one polynomial or more."""
        first, *others = polynomials
        for p in others:
            first = first + p
        return first

    def __mul__(self, other: ModularPolynomial) -> ModularPolynomial:
        budget.current().check_terms(len(self.body) * len(other.body) // 50, "this product")
        return ModularPolynomial(
            self.n, self.body * other.body, self.low + other.low, self.height + other.height)

    def scaled(self, factor: int, height: int = 0) -> ModularPolynomial:
        """The product with a residue, the image of a scalar of that height."""
        return ModularPolynomial(
            self.n, self.body * (factor % PRIME), self.low, self.height + height)

    def power(self, exponent: int) -> ModularPolynomial:
        """An integer power; a negative one of a single term alone."""
        if exponent < 0:
            if len(self.body) != 1:
                raise NotAUnit("a polynomial with more than one term has no inverse here")
            (e, c), = self.body.to_dict().items()
            inverse = {tuple(-k - self.low for k in e): pow(int(c), -1, PRIME)}
            return ModularPolynomial.of_terms(self.n, inverse, self.height).power(-exponent)
        budget.current().check_terms(len(self.body) * exponent // 10, "this power")
        return ModularPolynomial(
            self.n, self.body**exponent, self.low * exponent, self.height * exponent)

    def shifted(self, exponents: Exponents) -> ModularPolynomial:
        """The product with x^exponents."""
        low = min(exponents)
        monomial = _context(self.n).from_dict({tuple(e - low for e in exponents): 1})
        return ModularPolynomial(self.n, self.body * monomial, self.low + low, self.height)

    def moved(self, w: Exponents) -> ModularPolynomial:
        """The permutation w of the variables applied: x_i becomes x_w(i)."""
        gens = _context(self.n).gens()
        return ModularPolynomial(
            self.n, self.body.compose(*(gens[k - 1] for k in w)), self.low, self.height)

    def divided_difference(self, i: int) -> ModularPolynomial:
        """(f - s_i f)/(x_i - x_(i+1))."""
        gens = _context(self.n).gens()
        swapped = self.moved(_swap(i, self.n)).body
        return ModularPolynomial(
            self.n, (self.body - swapped) / (gens[i - 1] - gens[i]), self.low, self.height)


@cache
def _swap(i: int, n: int) -> Exponents:
    return indices.from_word((i,), n)


def height(value: Scalar) -> int:
    """A bound for the degrees of numerator and denominator, t^(1/2) counting as one."""
    total = sum(map(abs, value.monomial)) + int(value.numerator_rest.total_degree())
    for f, e in value.factors.items():
        total += abs(e) * int(f.polynomial.total_degree())
    return total if value.ring.has_root else 2 * total


class RandomPoint:
    """Random residues for q, t^(1/2) and further parameters, with E_mu remembered there.

    `draw` gives the residue of a parameter by its name, so that the order in which they are
    met plays no part.
    """

    def __init__(self, draw: Callable[[str], int]) -> None:
        self._point = ModularPoint({}, default=draw)
        self.q = self._point.parameter("q")
        self.t = self._point.parameter("t")
        self._inverse_of_q = pow(self.q, -1, PRIME)
        self.inverse_of_t = pow(self.t, -1, PRIME)
        self._elements: dict[Exponents, ModularPolynomial] = {}
        self._others: dict[tuple[str, Exponents, int], ModularPolynomial] = {}

    def parameter(self, name: str) -> int:
        """The residue of a parameter."""
        return self._point.parameter(name)

    def variables(self, n: int) -> Exponents:
        """Residues for x_1, ..., x_n."""
        return tuple(self._point.parameter(f"x_{j}") for j in range(1, n + 1))

    def root_of_t(self) -> int:
        """The residue of t^(1/2)."""
        return self._point.root("t")

    def scalar(self, value: Scalar) -> int:
        """The residue of a scalar; raises Pole when its denominator vanishes here."""
        return self._point.value(value)

    def polynomial(self, value: LaurentPolynomial) -> ModularPolynomial:
        """A polynomial reduced modulo the prime."""
        scale = self.scalar(value.scale)
        degree = max((_degree(c) for c in value.terms.values()), default=0)
        return ModularPolynomial.of_terms(value.n, {
            e: self._point.polynomial(value.ring, c) * scale for e, c in value.terms.items()},
            height(value.scale) + 2 * degree)

    def described(self) -> str:
        """The point, for the record."""
        return f"q = {self.q}, t = {self.t} modulo 2^61 - 1"

    def element(self, target: Family, index: Exponents, n: int) -> ModularPolynomial:
        """A basis element here."""
        if target.name == "E":
            low = min(index)
            found = self._macdonald(tuple(part - low for part in index))
            return found.shifted((low,) * n) if low else found
        key = (target.name, index, n)
        known = self._others.get(key)
        if known is None:
            if len(self._others) >= LARGEST_N_ELEMENTS:
                self._others.clear()
            known = self._others[key] = self.polynomial(target.to_monomials(index, n))
        return known

    def _macdonald(self, mu: Exponents) -> ModularPolynomial:
        """E_mu by the intertwiner recursion, over residues."""
        known = self._elements.get(mu)
        if known is not None:
            return known
        if len(self._elements) >= LARGEST_N_ELEMENTS:
            self._elements.clear()
        path = [("", mu), *recursion_path(mu)]
        start = next(k for k, (_, nu) in enumerate(path)
                     if nu in self._elements or not any(nu))
        current = self._elements.get(path[start][1]) or ModularPolynomial.of_terms(
            len(mu), {(0,) * len(mu): 1})
        for k in range(start, 0, -1):
            budget.current().check()
            step, nu = path[k]
            if step == "tau_pi":
                current = self.turned(current).shifted(
                    (1, *([0] * (len(mu) - 1)))).scaled(pow(self.q, nu[-1], PRIME), 2 * nu[-1])
            else:
                i = int(step[4:])
                u = weights(nu)
                a, b = ratio(u[i - 1], u[i])
                z = pow(self.q, a, PRIME) * pow(self.t, b, PRIME) % PRIME
                if z == 1:
                    raise Pole("the denominator vanishes at the chosen point")
                mixing = (1 - self.t) * pow(1 - z, -1, PRIME) % PRIME
                # T_i f + c f over the denominator of c alone
                added = 2 * (abs(a) + abs(b) + 1)
                current = ModularPolynomial(
                    current.n, self.hecke(current, i).body + current.body * mixing, current.low,
                    current.height + added)
            self._elements[path[k - 1][1]] = current
        return current

    def turned(self, f: ModularPolynomial) -> ModularPolynomial:
        """T_pi f = f(x_2, ..., x_n, x_1/q)."""
        gens = _context(f.n).gens()
        body = f.body.compose(*gens[1:], gens[0] * self._inverse_of_q)
        return ModularPolynomial(f.n, body * pow(self._inverse_of_q, f.low, PRIME), f.low,
                                 f.height + _turning(f))

    def turned_back(self, f: ModularPolynomial) -> ModularPolynomial:
        """T_pi^-1 f = f(q x_n, x_1, ..., x_(n-1))."""
        gens = _context(f.n).gens()
        body = f.body.compose(gens[-1] * self.q, *gens[:-1])
        return ModularPolynomial(
            f.n, body * pow(self.q, f.low, PRIME), f.low, f.height + _turning(f))

    def hecke(self, f: ModularPolynomial, i: int) -> ModularPolynomial:
        """T_i f = t s_i f + (1 - t) x_(i+1) d_i f."""
        gens = _context(f.n).gens()
        x, y = gens[i - 1], gens[i]
        swapped = f.moved(_swap(i, f.n)).body
        quotient = (f.body - swapped) / (x - y)
        body = swapped * self.t + quotient * (y * ((1 - self.t) % PRIME))
        return ModularPolynomial(f.n, body, f.low, f.height + 2)

    def hecke_inverse(self, f: ModularPolynomial, i: int) -> ModularPolynomial:
        """T_i^-1 f = (T_i f + (1 - t) f)/t."""
        body = self.hecke(f, i).body + f.body * ((1 - self.t) % PRIME)
        return ModularPolynomial(f.n, body * self.inverse_of_t, f.low, f.height + 2)


def _degree(c: fmpz_mpoly) -> int:
    return int(c.total_degree())


def _turning(f: ModularPolynomial) -> int:
    """How much q^e, e the exponents that occur, adds to the height."""
    if f.is_zero:
        return 0
    return 2 * (abs(f.low) + int(max(f.body.degrees())))
