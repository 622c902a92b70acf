"""Operator words over a finite field: on polynomials letter by letter, on functions for equality.

Two operators are one when they agree on a function that takes random values: both are sums of
a_w(x) w, w in the extended affine Weyl group, and at a point x in general position the values
f(w x) are independent, so each a_w(x) is seen.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from spanwright.algebra import Unsupported
from spanwright.kernel import budget, indices
from spanwright.kernel.operators.words import normalising
from spanwright.kernel.witness import PRIME, ModularPolynomial, RandomPoint, height

LARGEST_HEIGHT = 2**45
"""Above it a point modulo 2^61 - 1 says too little."""

Point = tuple[int, ...]


class OrbitFunction:
    """A function on the orbit of a point under permutations and x_n -> x_1/q; values by a rule.

    `height` bounds the degrees of what its values are the images of.
    """

    __slots__ = ("n", "height", "_rule", "_known")

    def __init__(self, n: int, height: int, rule: Callable[[Point], int]) -> None:
        if height > LARGEST_HEIGHT:
            raise Unsupported("a word too long for one random point")
        self.n = n
        self.height = height
        self._rule = rule
        self._known: dict[Point, int] = {}

    def at(self, x: Point) -> int:
        """The value at a point."""
        found = self._known.get(x)
        if found is None:
            budget.current().check()
            found = self._known[x] = self._rule(x) % PRIME
        return found

    def __add__(self, other: OrbitFunction) -> OrbitFunction:
        return OrbitFunction(
            self.n, self.height + other.height, lambda x: self.at(x) + other.at(x))

    def scaled(self, factor: int, height: int = 0) -> OrbitFunction:
        """The product with a residue, the image of a scalar of that height."""
        return OrbitFunction(self.n, self.height + height, lambda x: factor * self.at(x))

    def shifted(self, exponents: Point) -> OrbitFunction:
        """The product with x^exponents."""
        def rule(x: Point) -> int:
            value = self.at(x)
            for base, e in zip(x, exponents, strict=True):
                if e:
                    value = value * pow(base, e, PRIME) % PRIME
            return value

        # where the orbit's x_j are q^k x_i, powers of q count too
        return OrbitFunction(self.n, self.height + 4 * sum(map(abs, exponents)), rule)

    def moved(self, w: Point) -> OrbitFunction:
        """The permutation w of the variables applied."""
        return OrbitFunction(
            self.n, self.height, lambda x: self.at(tuple(x[k - 1] for k in w)))

    def divided_difference(self, i: int) -> OrbitFunction:
        """(f - s_i f)/(x_i - x_(i+1))."""
        return OrbitFunction(
            self.n, 2 * self.height + 4,
            lambda x: (self.at(x) - self.at(_swapped(x, i))) * _inverse(x[i - 1] - x[i]))

    def hecke(self, i: int, t: int) -> OrbitFunction:
        """T_i f = t s_i f + (1 - t) x_(i+1) d_i f."""
        def rule(x: Point) -> int:
            here, there = self.at(x), self.at(_swapped(x, i))
            return t * there + (1 - t) * x[i] % PRIME * _inverse(x[i - 1] - x[i]) % PRIME * (
                here - there)

        return OrbitFunction(self.n, 2 * self.height + 6, rule)

    def turned(self, q: int) -> OrbitFunction:
        """f(x_2, ..., x_n, x_1/q)."""
        inverse = _inverse(q)
        return OrbitFunction(
            self.n, self.height, lambda x: self.at((*x[1:], x[0] * inverse % PRIME)))

    def turned_back(self, q: int) -> OrbitFunction:
        """f(q x_n, x_1, ..., x_(n-1))."""
        return OrbitFunction(
            self.n, self.height, lambda x: self.at((x[-1] * q % PRIME, *x[:-1])))


def _swapped(x: Point, i: int) -> Point:
    return (*x[: i - 1], x[i], x[i - 1], *x[i + 1:])


@lru_cache(maxsize=10_000)
def _inverse(value: int) -> int:
    return pow(value, -1, PRIME)


def random_function(n: int) -> OrbitFunction:
    """A function whose values are as good as independent random residues."""
    def rule(x: Point) -> int:
        digest = hashlib.blake2b(repr(x).encode(), digest_size=16).digest()
        return int.from_bytes(digest, "big") % PRIME

    return OrbitFunction(n, 1, rule)


Operand = Any
"""A ModularPolynomial or an OrbitFunction: the letters act on both alike."""


@dataclass(frozen=True, slots=True)
class ModularOperator:
    """An operator whose coefficients are residues: what it does to an operand."""

    n: int
    apply: Callable[[Operand], Operand]

    def __add__(self, other: ModularOperator) -> ModularOperator:
        return ModularOperator(self.n, lambda f: self.apply(f) + other.apply(f))

    def __mul__(self, other: ModularOperator) -> ModularOperator:
        return ModularOperator(self.n, lambda f: self.apply(other.apply(f)))

    def power(self, exponent: int) -> ModularOperator:
        """A power, 1 or more."""
        result = self
        for _ in range(exponent - 1):
            result = result * self
        return result


def modular_operator(value: Any, point: RandomPoint) -> ModularOperator:
    """An exact operator over the finite field."""
    return ModularOperator(value.n, lambda f: act(value, f, point))


def multiplication(n: int, factor: int, height: int) -> ModularOperator:
    """The operator that multiplies by a residue."""
    return ModularOperator(n, lambda f: f.scaled(factor, height))


def act(operator: Any, f: Operand, point: RandomPoint) -> Operand:
    """The operator applied to f, the last letter first."""
    word_of = operator.to_operator() if hasattr(operator, "to_operator") else operator
    balanced = word_of.normalisation != "plain"
    total: Operand = None
    for word, c in word_of.terms.items():
        current = f
        for letter in reversed(word):
            current = _letter(letter, current, point)
        if balanced:
            c = c * normalising(word, word_of.n)
        current = current.scaled(point.scalar(c), height(c))
        total = current if total is None else total + current
    return f.scaled(0) if total is None else total


def _letter(letter: Any, f: Operand, point: RandomPoint) -> Operand:
    budget.current().check()
    inner = getattr(letter, "operator", None)
    if inner is not None:
        for _ in range(letter.power):
            f = act(inner, f, point)
        return f
    kind, subscript = letter.kind, letter.subscript
    if kind == "X":
        return f.shifted(subscript)
    if kind == "s":
        return f.moved(subscript)
    if kind == "Y":
        for i, exponent in enumerate(subscript, 1):
            for _ in range(abs(exponent)):
                f = _cherednik(f, i, exponent > 0, point)
        return f
    if kind in ("T", "d", "pi"):
        for _ in range(abs(letter.power)):
            f = _along_word(kind, subscript, letter.power > 0, f, point)
        return f
    if kind in ("T_pi", "tau_pi"):
        for _ in range(abs(letter.power)):
            f = _turn(kind, f, letter.power > 0, point)
        return f
    if kind in ("symmetrizer", "antisymmetrizer"):
        for _ in range(letter.power):
            f = _symmetrized(f, 1 if kind == "symmetrizer" else -point.inverse_of_t, point)
        return f
    raise Unsupported(f"{kind} over a finite field")


def _hecke(f: Operand, i: int, point: RandomPoint) -> Operand:
    return point.hecke(f, i) if isinstance(f, ModularPolynomial) else f.hecke(i, point.t)


def _hecke_inverse(f: Operand, i: int, point: RandomPoint) -> Operand:
    """T_i^-1 f = (T_i f + (1 - t) f)/t."""
    if isinstance(f, ModularPolynomial):
        return point.hecke_inverse(f, i)
    return (f.hecke(i, point.t) + f.scaled(1 - point.t)).scaled(point.inverse_of_t, 2)


def _around(f: Operand, is_positive: bool, point: RandomPoint) -> Operand:
    """T_pi f, or T_pi^-1 f."""
    if isinstance(f, ModularPolynomial):
        return point.turned(f) if is_positive else point.turned_back(f)
    return f.turned(point.q) if is_positive else f.turned_back(point.q)


def _along_word(
    kind: str, w: tuple[int, ...], is_positive: bool, f: Operand, point: RandomPoint
) -> Operand:
    word = indices.reduced_word(w)
    for i in reversed(word) if is_positive else word:
        if kind == "T":
            f = _hecke(f, i, point) if is_positive else _hecke_inverse(f, i, point)
        elif kind == "d":
            f = f.divided_difference(i)
        else:
            f = f.shifted(tuple(int(k == i - 1) for k in range(f.n))).divided_difference(i)
    return f


def _turn(kind: str, f: Operand, is_positive: bool, point: RandomPoint) -> Operand:
    first = (1, *([0] * (f.n - 1)))
    if kind == "T_pi":
        return _around(f, is_positive, point)
    if is_positive:
        return _around(f, True, point).shifted(first)
    return _around(f.shifted(tuple(-e for e in first)), False, point)


def _symmetrized(f: Operand, sign: int, point: RandomPoint) -> Operand:
    """The sum of sign^(length of w) T_w, coset by coset along S_2, S_3, ..."""
    for k in range(1, f.n):
        current = total = f
        for j in range(k, 0, -1):
            current = _hecke(current, j, point).scaled(sign, 2)
            total = total + current
        f = total
    return f


def _cherednik(f: Operand, i: int, is_positive: bool, point: RandomPoint) -> Operand:
    """Y_i = t^(i-1) T_(i-1)^-1 ... T_1^-1 T_pi T_(n-1) ... T_i, or its inverse."""
    if is_positive:
        for k in range(i, f.n):
            f = _hecke(f, k, point)
        f = _around(f, True, point)
        for k in range(1, i):
            f = _hecke_inverse(f, k, point)
        return f.scaled(pow(point.t, i - 1, PRIME), 2 * (i - 1))
    for k in range(i - 1, 0, -1):
        f = _hecke(f, k, point)
    f = _around(f, False, point)
    for k in range(f.n - 1, i - 1, -1):
        f = _hecke_inverse(f, k, point)
    return f.scaled(pow(point.inverse_of_t, i - 1, PRIME), 2 * (i - 1))
