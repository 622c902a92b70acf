"""The same quantities modulo a large prime, at seeded random values of the parameters.

Polynomials in x keep their exponents; their coefficients are residues. Two different elements of
Q(q,t)[x] of numerator degree d agree at a random point with probability at most d/p
(Schwartz 1980, Zippel 1979).
"""

from __future__ import annotations

import random
from collections.abc import Iterable, Mapping

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import WITNESS_PRIME, ModularPoint, Scalar
from spanwright.kernel.errors import NotAUnit, Pole
from spanwright.kernel.families.base import Family
from spanwright.kernel.families.nonsymmetric_macdonald import ratio, recursion_path, weights
from spanwright.kernel.laurent import LaurentPolynomial

PRIME = WITNESS_PRIME

Exponents = tuple[int, ...]
Residues = dict[Exponents, int]


class ModularPolynomial:
    """A Laurent polynomial in x_1, ..., x_n with residues as coefficients."""

    __slots__ = ("n", "terms")

    def __init__(self, n: int, terms: Mapping[Exponents, int]) -> None:
        self.n = n
        self.terms: Residues = {e: c % PRIME for e, c in terms.items() if c % PRIME}

    def __eq__(self, other: object) -> bool:
        return isinstance(other, ModularPolynomial) and self.terms == other.terms

    def __hash__(self) -> int:
        return hash(frozenset(self.terms.items()))

    def __neg__(self) -> ModularPolynomial:
        return ModularPolynomial(self.n, {e: -c for e, c in self.terms.items()})

    def __add__(self, other: ModularPolynomial) -> ModularPolynomial:
        return ModularPolynomial.total((self, other))

    @staticmethod
    def total(polynomials: Iterable[ModularPolynomial]) -> ModularPolynomial:
        """The sum of one polynomial or more."""
        n = 0
        terms: Residues = {}
        for p in polynomials:
            n = p.n
            for e, c in p.terms.items():
                terms[e] = terms.get(e, 0) + c
        return ModularPolynomial(n, terms)

    def __mul__(self, other: ModularPolynomial) -> ModularPolynomial:
        budget.current().check_terms(len(self.terms) * len(other.terms) // 50, "this product")
        terms: Residues = {}
        for e, c in self.terms.items():
            for f, d in other.terms.items():
                key = tuple(map(int.__add__, e, f))
                terms[key] = (terms.get(key, 0) + c * d) % PRIME
        return ModularPolynomial(self.n, terms)

    def scaled(self, factor: int) -> ModularPolynomial:
        """The product with a residue."""
        return ModularPolynomial(self.n, {e: c * factor for e, c in self.terms.items()})

    def power(self, exponent: int) -> ModularPolynomial:
        """An integer power; a negative one of a single term alone."""
        if exponent < 0:
            if len(self.terms) != 1:
                raise NotAUnit("a polynomial with more than one term has no inverse here")
            (e, c), = self.terms.items()
            return ModularPolynomial(
                self.n, {tuple(k * exponent for k in e): pow(c, exponent, PRIME)})
        result = ModularPolynomial(self.n, {(0,) * self.n: 1})
        for _ in range(exponent):
            result = result * self
        return result

    def shifted(self, exponents: Exponents) -> ModularPolynomial:
        """The product with x^exponents."""
        return ModularPolynomial(
            self.n, {tuple(map(int.__add__, e, exponents)): c for e, c in self.terms.items()})

    def moved(self, w: Exponents) -> ModularPolynomial:
        """The permutation w of the variables applied."""
        return ModularPolynomial(
            self.n, {indices.act(w, e): c for e, c in self.terms.items()})

    def divided_difference(self, i: int) -> ModularPolynomial:
        """(f - s_i f)/(x_i - x_(i+1))."""
        terms: Residues = {}
        for e, c in self.terms.items():
            a, b = e[i - 1], e[i]
            sign, low, high = (1, b, a) if a > b else (-1, a, b)
            for k in range(low, high):
                key = (*e[: i - 1], k, a + b - 1 - k, *e[i + 1 :])
                terms[key] = terms.get(key, 0) + sign * c
        return ModularPolynomial(self.n, terms)


class RandomPoint:
    """Random residues for q, t^(1/2) and further parameters, with E_mu remembered there."""

    def __init__(self, source: random.Random) -> None:
        self._point = ModularPoint({}, default=lambda name: source.randrange(2, PRIME - 1))
        # fixed order of drawing, so that a seed means the same point in every session
        self.q = self._point.parameter("q")
        self.t = self._point.parameter("t")
        self._elements: dict[Exponents, ModularPolynomial] = {}

    def parameter(self, name: str) -> int:
        """The residue of a parameter."""
        return self._point.parameter(name)

    def root_of_t(self) -> int:
        """The residue of t^(1/2)."""
        return self._point.root("t")

    def scalar(self, value: Scalar) -> int:
        """The residue of a scalar; raises Pole when its denominator vanishes here."""
        return self._point.value(value)

    def polynomial(self, value: LaurentPolynomial) -> ModularPolynomial:
        """A polynomial reduced modulo the prime."""
        scale = self.scalar(value.scale)
        return ModularPolynomial(value.n, {
            e: self._point.polynomial(value.ring, c) * scale for e, c in value.terms.items()})

    def described(self) -> str:
        """The point, for the record."""
        return f"q = {self.q}, t = {self.t} modulo 2^61 - 1"

    def element(self, target: Family, index: Exponents, n: int) -> ModularPolynomial:
        """A basis element here."""
        if target.name == "E":
            low = min(index)
            found = self._macdonald(tuple(part - low for part in index))
            return found.shifted((low,) * n) if low else found
        return self.polynomial(target.to_monomials(index, n))

    def _macdonald(self, mu: Exponents) -> ModularPolynomial:
        """E_mu by the intertwiner recursion, over residues."""
        known = self._elements.get(mu)
        if known is not None:
            return known
        path = [("", mu), *recursion_path(mu)]
        start = next(k for k, (_, nu) in enumerate(path)
                     if nu in self._elements or not any(nu))
        current = self._elements.get(path[start][1]) or ModularPolynomial(
            len(mu), {(0,) * len(mu): 1})
        for k in range(start, 0, -1):
            budget.current().check()
            step, nu = path[k]
            if step == "tau_pi":
                current = self.turned(current).shifted(
                    (1, *([0] * (len(mu) - 1)))).scaled(pow(self.q, nu[-1], PRIME))
            else:
                i = int(step[4:])
                u = weights(nu)
                a, b = ratio(u[i - 1], u[i])
                z = pow(self.q, a, PRIME) * pow(self.t, b, PRIME) % PRIME
                if z == 1:
                    raise Pole("the denominator vanishes at the chosen point")
                mixing = (1 - self.t) * pow(1 - z, -1, PRIME)
                current = self.hecke(current, i) + current.scaled(mixing)
            self._elements[path[k - 1][1]] = current
        return current

    def turned(self, f: ModularPolynomial) -> ModularPolynomial:
        """T_pi f = f(x_2, ..., x_n, x_1/q)."""
        return ModularPolynomial(f.n, {
            (e[-1], *e[:-1]): c * pow(self.q, -e[-1], PRIME) for e, c in f.terms.items()})

    def turned_back(self, f: ModularPolynomial) -> ModularPolynomial:
        """T_pi^-1 f = f(q x_n, x_1, ..., x_(n-1))."""
        return ModularPolynomial(f.n, {
            (*e[1:], e[0]): c * pow(self.q, e[0], PRIME) for e, c in f.terms.items()})

    def hecke(self, f: ModularPolynomial, i: int) -> ModularPolynomial:
        """T_i f = t s_i f + (1 - t) x_(i+1) d_i f."""
        swap = indices.from_word((i,), f.n)
        right = f.divided_difference(i).shifted(
            tuple(int(k == i) for k in range(f.n)))
        return f.moved(swap).scaled(self.t) + right.scaled(1 - self.t)

    def hecke_inverse(self, f: ModularPolynomial, i: int) -> ModularPolynomial:
        """T_i^-1 f = (T_i f + (1 - t) f)/t."""
        found = self.hecke(f, i) + f.scaled(1 - self.t)
        return found.scaled(pow(self.t, -1, PRIME))
