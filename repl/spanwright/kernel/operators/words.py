"""Operators as written: immutable sums of words in letters, with scalar coefficients.

A product of sums stays a product, so that (Y_1 + Y_2 + Y_3)^6 is six factors, not 729 words.
Neighbouring letters that merge by themselves do so here: X's, Y's, permutations, powers.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeAlias

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import Mixed, NotAUnit, OutsideDomain, OverBudget
from spanwright.kernel.parameters import ParameterRing

NORMALISATIONS = ("plain", "balanced")
"""plain: (T_i - t)(T_i + 1) = 0; balanced: T_i/t^(1/2), tau_i/t^(1/2) and t^(-(n-1)/2) Y_i."""

MONOMIAL_KINDS = ("X", "Y")
PERMUTATION_KINDS = ("T", "s", "d", "pi")
SINGLE_KINDS = ("T_pi", "tau_pi", "symmetrizer", "antisymmetrizer")
KINDS = (*MONOMIAL_KINDS, *PERMUTATION_KINDS, "tau", *SINGLE_KINDS)

# Why a letter has no inverse.
_NO_INVERSE = {
    "d": "d_i d_i = 0, so a divided difference has no inverse",
    "pi": "pi_i pi_i = pi_i, so an isobaric divided difference has no inverse",
    "tau": "tau_i E_mu = 0 when mu_i = mu_(i+1), so tau_i has no inverse on polynomials",
    "symmetrizer": "the symmetrizer sends T_1 x_1 - t x_1 to 0, so it has no inverse",
    "antisymmetrizer": "the antisymmetrizer sends 1 to 0, so it has no inverse",
}


@dataclass(frozen=True, slots=True)
class Letter:
    """One letter: X and Y with exponents (power 1), T, s, d, pi with a permutation of 1..n,
    tau with (i,), the others with ().
    """

    kind: str
    subscript: tuple[int, ...] = ()
    power: int = 1

    def inverse(self, n: int) -> Letter:
        """The inverse letter; raises NotAUnit when there is none."""
        if self.kind in MONOMIAL_KINDS:
            return Letter(self.kind, tuple(-e for e in self.subscript))
        if self.kind == "s":
            return Letter("s", indices.inverse(self.subscript))
        if self.kind in _NO_INVERSE and not (n == 1 and self.kind.endswith("symmetrizer")):
            raise NotAUnit(_NO_INVERSE[self.kind])
        return Letter(self.kind, self.subscript, -self.power)

    def simple_position(self) -> int | None:
        """The i with s_i the subscript of T, s, d or pi, or None."""
        w = self.subscript
        moved = [k for k, value in enumerate(w, 1) if value != k]
        return moved[0] if len(moved) == 2 and moved[1] == moved[0] + 1 else None


@dataclass(frozen=True, slots=True)
class Group:
    """A sum in parentheses, to a positive power."""

    operator: Operator
    power: int = 1


Factor: TypeAlias = "Letter | Group"
Word: TypeAlias = "tuple[Factor, ...]"


class Operator:
    """sum of scalar * word, acting on Laurent polynomials in n variables; the last letter first."""

    __slots__ = ("n", "normalisation", "terms")

    def __init__(self, n: int, terms: Mapping[Word, Scalar], normalisation: str = "plain") -> None:
        """Words must be merged already (`letter` and `*` see to that); zeros are dropped."""
        if normalisation not in NORMALISATIONS:
            raise OutsideDomain(f"a Hecke normalisation is one of {', '.join(NORMALISATIONS)}")
        self.n = n
        self.normalisation = normalisation
        self.terms: dict[Word, Scalar] = {w: c for w, c in terms.items() if not c.is_zero}

    # construction

    @staticmethod
    def zero(n: int, normalisation: str = "plain") -> Operator:
        """The operator 0."""
        return Operator(n, {}, normalisation)

    @staticmethod
    def scalar(n: int, value: Scalar, normalisation: str = "plain") -> Operator:
        """Multiplication by a scalar."""
        return Operator(n, {(): value}, normalisation)

    @staticmethod
    def identity(n: int, normalisation: str = "plain") -> Operator:
        """The operator 1."""
        return Operator.scalar(n, Scalar.one(ParameterRing.get()), normalisation)

    @staticmethod
    def letter(
        n: int,
        kind: str,
        subscript: int | tuple[int, ...] | None = None,
        normalisation: str = "plain",
    ) -> Operator:
        """One letter. X, Y, tau take a position, T, s, d, pi a position or a permutation.

        Raises OutsideDomain for a position or a permutation that does not fit n.
        """
        made = _checked(n, kind, subscript)
        word = (made,) if made is not None else ()
        return Operator(n, {word: Scalar.one(ParameterRing.get())}, normalisation)

    @staticmethod
    def monomial(
        n: int, kind: str, exponents: tuple[int, ...], normalisation: str = "plain"
    ) -> Operator:
        """X^exponents or Y^exponents."""
        word = (Letter(kind, exponents),) if any(exponents) else ()
        return Operator(n, {word: Scalar.one(ParameterRing.get())}, normalisation)

    # reading

    @property
    def is_zero(self) -> bool:
        """Whether no term is left; straighten first to decide whether the operator is 0."""
        return not self.terms

    def as_scalar(self) -> Scalar | None:
        """The scalar, when no letter occurs."""
        if not self.terms:
            return Scalar.zero(ParameterRing.get())
        return self.terms[()] if set(self.terms) == {()} else None

    def kinds(self) -> frozenset[str]:
        """The kinds of letters that occur."""
        found: set[str] = set()
        for word in self.terms:
            for factor in word:
                if isinstance(factor, Letter):
                    found.add(factor.kind)
                else:
                    found |= factor.operator.kinds()
        return frozenset(found)

    def ring(self) -> ParameterRing:
        """The smallest ring of parameters that holds every coefficient."""
        ring = ParameterRing.get()
        for word, c in self.terms.items():
            ring = ring.union(c.ring)
            for factor in word:
                if isinstance(factor, Group):
                    ring = ring.union(factor.operator.ring())
        return ring

    def items(self) -> Iterator[tuple[Word, Scalar]]:
        """Words and coefficients, in the order in which they were written."""
        yield from self.terms.items()

    def multiplied_out(self) -> Operator:
        """The same operator without parentheses; raises OverBudget when it grows too long."""
        if all(isinstance(f, Letter) for word in self.terms for f in word):
            return self
        collected: dict[Word, list[Scalar]] = {}
        for word, c in self.terms.items():
            parts: dict[Word, Scalar] = {(): c}
            for factor in word:
                if isinstance(factor, Letter):
                    parts = {_joined(w, (factor,)): d for w, d in parts.items()}
                    continue
                inner = factor.operator.multiplied_out().terms
                for _ in range(factor.power):
                    budget.current().check_terms(len(parts) * len(inner), "this product of sums")
                    products: dict[Word, list[Scalar]] = {}
                    for w, d in parts.items():
                        for v, e in inner.items():
                            products.setdefault(_joined(w, v), []).append(d * e)
                    parts = {w: total(ds) for w, ds in products.items()}
            for w, d in parts.items():
                collected.setdefault(w, []).append(d)
        return self._with({w: total(ds) for w, ds in collected.items()})

    def __eq__(self, other: object) -> bool:
        """Whether the two are written alike; `canonical.is_same_operator` decides the identity."""
        if not isinstance(other, Operator):
            return NotImplemented
        return (
            self.n == other.n
            and self.normalisation == other.normalisation
            and self.terms == other.terms)

    def __hash__(self) -> int:
        return hash((self.n, self.normalisation, frozenset(self.terms)))

    def __repr__(self) -> str:
        return f"Operator<n={self.n}, {self.normalisation}, {self.terms}>"

    # arithmetic

    def _with(self, terms: Mapping[Word, Scalar]) -> Operator:
        return Operator(self.n, terms, self.normalisation)

    def _meet(self, other: Operator) -> None:
        if self.n != other.n:
            raise Mixed(f"operators on {self.n} and on {other.n} variables")
        if self.normalisation != other.normalisation:
            raise Mixed(
                f"operators of the {self.normalisation} and of the {other.normalisation} "
                "Hecke normalisation")

    def __neg__(self) -> Operator:
        return self._with({w: -c for w, c in self.terms.items()})

    def __add__(self, other: Operator) -> Operator:
        if not isinstance(other, Operator):
            return NotImplemented
        self._meet(other)
        terms = dict(self.terms)
        for word, c in other.terms.items():
            known = terms.get(word)
            terms[word] = c if known is None else total((known, c))
        return self._with(terms)

    def __sub__(self, other: Operator) -> Operator:
        if not isinstance(other, Operator):
            return NotImplemented
        return self + (-other)

    def __mul__(self, other: object) -> Operator:
        if isinstance(other, Scalar | int | Fraction):
            return self.scaled(other)
        if not isinstance(other, Operator):
            return NotImplemented
        self._meet(other)
        if not self.terms or not other.terms:
            return self._with({})
        for one, factor in ((self, other), (other, self)):
            scalar = one.as_scalar()
            if scalar is not None:
                return factor.scaled(scalar)
        (left, c), (right, d) = self._as_word(), other._as_word()
        return self._with({_joined(left, right): c * d})

    def __rmul__(self, other: object) -> Operator:
        return self.scaled(other) if isinstance(other, Scalar | int | Fraction) else NotImplemented

    def scaled(self, factor: Scalar | int | Fraction) -> Operator:
        """The product with a scalar."""
        return self._with({w: c * factor for w, c in self.terms.items()})

    def map_coefficients(self, image: Callable[[Scalar], Scalar]) -> Operator:
        """Every coefficient, those inside parentheses too, sent through a map of scalars."""
        terms: dict[Word, list[Scalar]] = {}
        for word, c in self.terms.items():
            mapped: Word = ()
            for factor in word:
                if isinstance(factor, Group):
                    factor = Group(factor.operator.map_coefficients(image), factor.power)
                mapped = _joined(mapped, (factor,))
            terms.setdefault(mapped, []).append(image(c))
        return self._with({w: total(cs) for w, cs in terms.items()})

    def __truediv__(self, other: object) -> Operator:
        if isinstance(other, int | Fraction):
            other = Scalar.one(ParameterRing.get()) * other
        if isinstance(other, Scalar):
            return self.scaled(other.inverse())
        return NotImplemented

    def _as_word(self) -> tuple[Word, Scalar]:
        if len(self.terms) == 1:
            (word, c), = self.terms.items()
            return word, c
        return (Group(self),), Scalar.one(ParameterRing.get())

    def inverse(self) -> Operator:
        """The inverse of a scalar times a product of invertible letters; raises NotAUnit else.

        `canonical.inverse` finds more: it looks at the canonical form.
        """
        if not self.terms:
            raise NotAUnit("the operator 0 has no inverse")
        if len(self.terms) > 1:
            raise NotAUnit("this sum of words has no inverse that is known here")
        (word, c), = self.terms.items()
        inverted: Word = ()
        for factor in reversed(word):
            if isinstance(factor, Group):
                raise NotAUnit("this product of sums has no inverse that is known here")
            inverted = _joined(inverted, (factor.inverse(self.n),))
        return self._with({inverted: c.inverse()})

    def __pow__(self, exponent: int) -> Operator:
        if exponent < 0:
            return self.inverse() ** -exponent
        if exponent == 0:
            return Operator.identity(self.n, self.normalisation)
        if not self.terms or exponent == 1:
            return self
        word, c = self._as_word()
        if len(word) == 1:
            factor = word[0]
            if isinstance(factor, Letter) and factor.kind in MONOMIAL_KINDS:
                factor = Letter(factor.kind, tuple(e * exponent for e in factor.subscript))
            elif isinstance(factor, Letter) and factor.kind == "s":
                factor = Letter("s", _permutation_power(factor.subscript, exponent))
                if factor.subscript == indices.identity(self.n):
                    return self._with({(): c**exponent})
            elif isinstance(factor, Letter):
                factor = Letter(factor.kind, factor.subscript, factor.power * exponent)
            else:
                factor = Group(factor.operator, factor.power * exponent)
            return self._with({(factor,): c**exponent})
        if len(word) * exponent > 100_000:
            raise OverBudget("this power would be a word of more than 100,000 letters")
        result: Word = ()
        for _ in range(exponent):
            result = _joined(result, word)
        return self._with({result: c**exponent})


def _permutation_power(w: tuple[int, ...], exponent: int) -> tuple[int, ...]:
    result, square = indices.identity(len(w)), w
    while exponent:
        if exponent & 1:
            result = indices.product(result, square)
        square = indices.product(square, square)
        exponent >>= 1
    return result


def _checked(n: int, kind: str, subscript: int | tuple[int, ...] | None) -> Letter | None:
    """The letter, None for the identity; raises OutsideDomain for a subscript that does not fit."""
    if kind in SINGLE_KINDS:
        if subscript is not None:
            raise OutsideDomain(f"{kind} takes no subscript")
        return Letter(kind)
    if kind not in KINDS:
        raise OutsideDomain(f"there is no operator {kind}")
    if isinstance(subscript, tuple):
        if kind not in PERMUTATION_KINDS:
            raise OutsideDomain(f"{kind} takes a position as its subscript", code="bad-index")
        shown = ",".join(map(str, subscript))
        if not indices.is_permutation(subscript):
            raise OutsideDomain(
                f"({shown}) is no permutation in one-line notation", code="bad-index")
        w = indices.reduced_size(subscript)
        if len(w) > n:
            raise OutsideDomain(
                f"{kind}_({shown}) moves position {len(w)}, the ring has n = {n}",
                code="bad-index")
        return Letter(kind, indices.extended(w, n)) if w else None
    top = n if kind in MONOMIAL_KINDS else n - 1
    if subscript is None:
        raise OutsideDomain(f"{kind} needs a subscript", code="bad-index")
    if not 1 <= subscript <= top:
        allowed = f"its positions are 1..{top}" if top else "it needs n >= 2"
        raise OutsideDomain(
            f"{kind}_{subscript} does not fit n = {n}: {allowed}", code="bad-index")
    if kind in MONOMIAL_KINDS:
        return Letter(kind, tuple(int(k == subscript) for k in range(1, n + 1)))
    if kind == "tau":
        return Letter(kind, (subscript,))
    return Letter(kind, simple(n, subscript))


def simple(n: int, i: int) -> tuple[int, ...]:
    """s_i in one-line notation."""
    return indices.swapped(indices.identity(n), i)


def _joined(left: Word, right: Word) -> Word:
    """The product of two words, letters merged where they meet."""
    while left and right:
        merged = _merged(left[-1], right[0])
        if merged is None:
            break
        left, right = left[:-1], right[1:]
        if merged:
            return left + merged + right
    return left + right


def _merged(a: Factor, b: Factor) -> Word | None:
    """The product of two neighbours as at most one factor; None when they do not merge."""
    if isinstance(a, Group) or isinstance(b, Group):
        if isinstance(a, Group) and isinstance(b, Group) and a.operator == b.operator:
            return (Group(a.operator, a.power + b.power),)
        return None
    if a.kind != b.kind:
        return None
    if a.kind in MONOMIAL_KINDS:
        exponents = tuple(map(int.__add__, a.subscript, b.subscript))
        return (Letter(a.kind, exponents),) if any(exponents) else ()
    if a.kind == "s":
        w = indices.product(a.subscript, b.subscript)
        return (Letter("s", w),) if w != indices.identity(len(w)) else ()
    if a.subscript != b.subscript:
        return None
    power = a.power + b.power
    return (Letter(a.kind, a.subscript, power),) if power else ()


def half_powers(letter: Letter, n: int) -> int:
    """The h with letter(balanced) = t^(h/2) letter(plain)."""
    if letter.kind == "T":
        return -indices.length(letter.subscript) * letter.power
    if letter.kind == "Y":
        return -(n - 1) * sum(letter.subscript)
    return -letter.power if letter.kind == "tau" else 0


def half_power(h: int) -> Scalar:
    """t^(h/2)."""
    if h % 2 == 0:
        return Scalar.parameter(ParameterRing.get(), "t") ** (h // 2)
    return Scalar.root_of_t() ** h


def normalising(word: Word, n: int) -> Scalar:
    """word(balanced) / word(plain), what stands in parentheses left out."""
    return half_power(sum(half_powers(f, n) for f in word if isinstance(f, Letter)))


def cherednik_steps(n: int, nu: tuple[int, ...]) -> tuple[list[tuple[int, int]], int, int]:
    """Y^nu as (steps, m, e): t^e (steps in order of time, T_i^k as (i, k), T_pi^k as (0, k))
    times (Y_1 ... Y_n)^m, plain normalisation, freely reduced.

    Y_i = t^(i-1) T_(i-1)^-1 ... T_1^-1 T_pi T_(n-1) ... T_i (Cherednik, Nonsymmetric Macdonald
    polynomials, 1995; Macdonald, Affine Hecke algebras and orthogonal polynomials, 2003).
    """
    m = sorted(nu)[n // 2]
    steps: list[tuple[int, int]] = []
    t_power = 0

    def push(i: int, k: int) -> None:
        if steps and steps[-1][0] == i:
            k += steps.pop()[1]
        if k:
            steps.append((i, k))

    # the last factor acts first: with Y_n first most neighbouring T's cancel when nu decreases
    for i in range(n, 0, -1):
        power = nu[i - 1] - m
        forward = [*((j, 1) for j in range(i, n)), (0, 1), *((j, -1) for j in range(1, i))]
        if power < 0:
            forward = [(j, -k) for j, k in reversed(forward)]
        for _ in range(abs(power)):
            for j, k in forward:
                push(j, k)
        t_power += (i - 1) * power
    return steps, m, t_power
