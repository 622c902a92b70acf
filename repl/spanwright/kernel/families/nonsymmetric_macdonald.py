"""Nonsymmetric Macdonald polynomials E_mu, mu in Z^n: spectrum, recursion, closed product rules.

Conventions: (T_i - t)(T_i + 1) = 0, Y_i E_mu = q^(-mu_i) t^(n - v_mu(i)) E_mu, leading
coefficient 1; this is the E_mu of Haglund, Haiman and Loehr, A combinatorial formula for
nonsymmetric Macdonald polynomials (2008). Intertwiners: Knop, Integrality of two variable
Kostka functions (1997); Cherednik, Nonsymmetric Macdonald polynomials (1995).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from flint.utils.flint_exceptions import DomainError

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.families.base import Coefficients, Family, Index, check_composition
from spanwright.kernel.indices import (
    Composition,
    decreasing,
    macdonald_order,
    ranks,
    subsets,
    swapped,
)
from spanwright.kernel.laurent import LaurentPolynomial, Terms
from spanwright.kernel.lines import hecke_images, lines
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
"""Q(q, t): every E_mu lives over it, whatever further parameters a session has."""

Weight = tuple[int, int]
"""A monomial q^a t^b as (a, b)."""

# E-polynomials are remembered up to this many monomials in all, then the memory starts afresh.
REMEMBERED_MONOMIALS = 2_000_000


def weight_scalar(weight: Weight) -> Scalar:
    """q^a t^b."""
    return Scalar.monomial_of(RING, (weight[1], weight[0]))


def one_minus(weight: Weight) -> Scalar:
    """1 - q^a t^b, as a product of irreducible factors."""
    return Scalar.one_minus(RING, (weight[1], weight[0]))


ONE_MINUS_T = one_minus((0, 1))
ONE = Scalar.one(RING)


def weights(mu: Composition) -> tuple[Weight, ...]:
    """u_i(mu) = q^(mu_i) t^(v_mu(i)), as exponent pairs."""
    return tuple(zip(mu, ranks(mu), strict=True))


def eigenvalue_weight(mu: Composition, i: int) -> Weight:
    """Exponents of the eigenvalue of Y_i on E_mu: q^(-mu_i) t^(n - v_mu(i)), i from 1."""
    return (-mu[i - 1], len(mu) - ranks(mu)[i - 1])


@lru_cache(maxsize=100_000)
def quadratic(z: Weight) -> Scalar:
    """(1 - t z)(t - z)/(1 - z)^2, the square of an intertwiner where Y_i^-1 Y_(i+1) is z."""
    a, b = z
    return (
        one_minus((a, b + 1)) * one_minus((a, b - 1)) * weight_scalar((0, 1))
        * one_minus(z) ** -2)


@lru_cache(maxsize=100_000)
def mixing(z: Weight) -> Scalar:
    """(1 - t)/(1 - z)."""
    return ONE_MINUS_T * one_minus(z).inverse()


def ratio(top: Weight, bottom: Weight) -> Weight:
    """The quotient of two monomials."""
    return (top[0] - bottom[0], top[1] - bottom[1])


# into monomials


class _Memory:
    """Polynomials E_mu by composition with least part 0."""

    def __init__(self) -> None:
        self.polynomials: dict[Composition, LaurentPolynomial] = {}
        self.n_monomials = 0

    def store(self, mu: Composition, polynomial: LaurentPolynomial) -> None:
        if self.n_monomials > REMEMBERED_MONOMIALS:
            self.polynomials.clear()
            self.n_monomials = 0
        self.polynomials[mu] = polynomial
        self.n_monomials += len(polynomial)


_memory = _Memory()


def forget_polynomials() -> None:
    """Drop the remembered E_mu: for measurements and for memory."""
    _memory.polynomials.clear()
    _memory.n_monomials = 0


def to_monomials(mu: Composition) -> LaurentPolynomial:
    """E_mu as a Laurent polynomial over Q(q, t), by the intertwiner recursion with memory."""
    low = min(mu)
    polynomial = _with_least_part_zero(tuple(part - low for part in mu))
    return polynomial.shifted((low,) * len(mu)) if low else polynomial


def recursion_path(mu: Composition) -> list[tuple[str, Composition]]:
    """The steps that build E_mu from 1, last first: ("tau_i", nu) or ("tau_pi", nu).

    Each step turns E_nu into the entry before it; i is the first position with nu_i > nu_(i+1).
    The least part of mu must be 0.
    """
    path: list[tuple[str, Composition]] = []
    while any(mu):
        step, mu = _previous(mu)
        path.append((step, mu))
    return path


def _previous(mu: Composition) -> tuple[str, Composition]:
    """One step back towards (0, ..., 0): bring the first positive part to the front, lower it."""
    if mu[0] > 0:
        return "tau_pi", (*mu[1:], mu[0] - 1)
    i = next(k for k, part in enumerate(mu) if part)
    return f"tau_{i}", swapped(mu, i)


def _with_least_part_zero(mu: Composition) -> LaurentPolynomial:
    known = _memory.polynomials
    pending: list[tuple[str, Composition]] = []
    while mu not in known:
        if not any(mu):
            _memory.store(mu, LaurentPolynomial.constant(len(mu), ONE))
            break
        pending.append(("", mu))
        _, mu = _previous(mu)
    current = known[mu]
    for _, target in reversed(pending):
        budget.current().check()
        step, source = _previous(target)
        if step == "tau_pi":
            current = _raised(current, source)
        else:
            current = _intertwined(current, source, int(step[4:]))
        _memory.store(target, current)
    return current


def _raised(polynomial: LaurentPolynomial, nu: Composition) -> LaurentPolynomial:
    """E_(pi nu) = q^(nu_n) X_1 T_pi E_nu, pi nu = (nu_n + 1, nu_1, ..., nu_(n-1))."""
    ring = polynomial.ring
    last = nu[-1]
    top = max(e[-1] for e in polynomial.terms)
    power = [ring.context.from_dict({(0, k): 1}) for k in range(max(top - last, last) + 1)]
    terms: Terms = {}
    low = 0
    try:
        for e, c in polynomial.terms.items():
            k = last - e[-1]
            terms[(e[-1] + 1, *e[:-1])] = c * power[k] if k > 0 else c / power[-k] if k else c
    except DomainError:
        # q^(nu_n - top) is taken out, so that all stays whole
        low = last - top
        for e, c in polynomial.terms.items():
            terms[(e[-1] + 1, *e[:-1])] = c * ring.context.from_dict({(0, top - e[-1]): 1})
    scale = polynomial.scale * weight_scalar((low, 0)) if low else polynomial.scale
    # powers of q apart, the coefficients are the old ones
    return LaurentPolynomial.reduced(polynomial.n, ring, terms, scale, suspects=())


def _intertwined(polynomial: LaurentPolynomial, nu: Composition, i: int) -> LaurentPolynomial:
    """E_(s_i nu) = (T_i + (1-t)/(1-z)) E_nu for nu_i > nu_(i+1), z = u_i(nu)/u_(i+1)(nu).

    Over the denominator 1 - z this is (1 - z) T_i f + (1 - t) f.
    """
    ring = polynomial.ring
    u = weights(nu)
    z = ratio(u[i - 1], u[i])
    q_power, t_power = z
    # multiply through by t^(-b) when b < 0, so that everything stays a polynomial
    shift = max(-t_power, 0)
    if q_power < 0:
        raise AssertionError("z has a positive power of q when nu_i > nu_(i+1)")
    power = ring.context.from_dict({(t_power + shift, q_power): 1})
    unit = ring.context.from_dict({(shift, 0): 1}) if shift else None
    t, zero = ring.context.gen(0), ring.context.constant(0)
    terms: Terms = {}
    for line in lines(polynomial.terms, i):
        own = line.coefficients
        moved = hecke_images(line, t)
        # powers of t and q are all that is multiplied by, and that is cheap
        for k in moved.keys() | own.keys():
            image, c = moved.get(k, zero), own.get(k, zero)
            value = image + c - c * t
            if unit is not None:
                value = value * unit
            value = value - image * power
            if value:
                terms[line.exponents(k)] = value
    scale = polynomial.scale * one_minus(z).inverse()
    if shift:
        scale = scale * weight_scalar((0, -shift))
    # the square of this step, times (1 - z)^2, is (1 - t z)(t - z): only that can cancel
    suspects = (
        *one_minus((q_power, t_power + 1)).factors, *one_minus((q_power, t_power - 1)).factors)
    return LaurentPolynomial.reduced(polynomial.n, ring, terms, scale, suspects)


# from monomials


def from_monomials(polynomial: LaurentPolynomial) -> dict[Composition, Scalar]:
    """The coefficients c_mu of sum c_mu E_mu = polynomial, by triangularity.

    c_mu = [x^mu] f - sum over larger nu of c_nu [x^mu] E_nu, in decreasing Macdonald order:
    one sum over one common denominator for each mu.
    """
    known: dict[Composition, list[Scalar]] = {
        e: [polynomial.coefficient(e)] for e in polynomial.terms}
    # a heap would do; new exponents are always smaller than the one at hand
    waiting = sorted(known, key=macdonald_order)
    result: dict[Composition, Scalar] = {}
    while waiting:
        mu = waiting.pop()
        budget.current().check()
        c = total(known.pop(mu), polynomial.ring)
        if c.is_zero:
            continue
        result[mu] = c
        element = to_monomials(mu)
        fresh = False
        for e in element.terms:
            if e != mu:
                if e not in known:
                    known[e] = []
                    waiting.append(e)
                    fresh = True
                known[e].append(-(c * element.coefficient(e)))
        if fresh:
            waiting.sort(key=macdonald_order)
        budget.current().check_terms(len(result), "this expansion")
    return result


# closed product rules


@dataclass(frozen=True, slots=True)
class MonkRow:
    """One subset of the closed rule for x_j E_mu: its target and factors, or why it vanishes.

    `factors` pairs a short description (kind and positions) with a scalar; their product is the
    coefficient. `obstacle` names the positions (carried from, met at) whose parts are equal.
    """

    subset: tuple[int, ...]
    target: Composition
    factors: tuple[tuple[str, Scalar], ...]
    obstacle: tuple[int, int] | None

    @property
    def coefficient(self) -> Scalar:
        """The product of the factors, 0 for a vanishing row."""
        if self.obstacle is not None:
            return Scalar.zero(RING)
        value = ONE
        for _, factor in self.factors:
            value = value * factor
        return value


class _Hops:
    """The hops a -> b of the closed rule at one mu, with what each contributes."""

    def __init__(self, mu: Composition) -> None:
        self.mu = mu
        self.n = len(mu)
        self.u = weights(mu)
        self._passing: dict[tuple[int, int], Scalar | int] = {}

    def carried(self, a: int) -> Weight:
        """The weight of the part of a after crossing the end: q u_a."""
        return (self.u[a][0] + 1, self.u[a][1])

    def passing(self, a: int, b: int) -> Scalar | int:
        """The product over positions strictly between a and b (0-based), rightwards and cyclic.

        A position with the carried part itself makes the hop vanish: then that position.
        """
        found = self._passing.get((a, b))
        if found is None:
            found = self._passing[a, b] = self._compute_passing(a, b)
        return found

    def between(self, a: int, b: int) -> Iterator[tuple[int, int, Weight]]:
        """Positions passed, with the part and the weight carried there."""
        if a < b:
            for i in range(a + 1, b):
                yield i, self.mu[a], self.u[a]
        else:
            for i in range(a + 1, self.n):
                yield i, self.mu[a], self.u[a]
            for i in range(b):
                yield i, self.mu[a] + 1, self.carried(a)

    def _compute_passing(self, a: int, b: int) -> Scalar | int:
        value = ONE
        for i, part, weight in self.between(a, b):
            if part == self.mu[i]:
                return i
            if part < self.mu[i]:
                value = value * quadratic(ratio(weight, self.u[i]))
        return value

    def departure(self, a: int, b: int) -> Weight:
        """The weight with which the part of a arrives at b."""
        return self.u[a] if a < b else self.carried(a)

    def target(self, subset: tuple[int, ...]) -> Composition:
        """mu^C: parts move one step along the cycle, the one that wraps grows by 1."""
        found = list(self.mu)
        for a, b in zip(subset, subset[1:], strict=False):
            found[b] = self.mu[a]
        found[subset[0]] = self.mu[subset[-1]] + 1
        return tuple(found)


def multiply_by_generator(mu: Composition, j: int) -> dict[Composition, Scalar]:
    """x_j E_mu in the E basis, j from 1, by the closed rule (MonkRow explains it).

    Coefficients are products of binomials throughout: no polynomial arithmetic. Baratta, Pieri-type
    formulas for nonsymmetric Macdonald polynomials (2009); Halverson and Ram, Monk rules for
    type GL_n Macdonald polynomials (2022).
    """
    return _chains(mu, j - 1)


def multiply_by_e1(mu: Composition) -> dict[Composition, Scalar]:
    """(x_1 + ... + x_n) E_mu in the E basis: the rule of one generator, summed in closed form."""
    return _chains(mu, None)


def divide_by_generator(mu: Composition, j: int) -> dict[Composition, Scalar]:
    """x_j^-1 E_mu in the E basis, from the rule for x_j by the inversion E_mu* (x) = E_mu(1/x)."""
    n = len(mu)
    return {inverted(nu): c for nu, c in multiply_by_generator(inverted(mu), n + 1 - j).items()}


def multiply_by_inverse_e1(mu: Composition) -> dict[Composition, Scalar]:
    """(1/x_1 + ... + 1/x_n) E_mu in the E basis."""
    return {inverted(nu): c for nu, c in multiply_by_e1(inverted(mu)).items()}


def inverted(mu: Composition) -> Composition:
    """mu* = (-mu_n, ..., -mu_1): E_mu*(x_1, ..., x_n) = E_mu(1/x_n, ..., 1/x_1)."""
    return tuple(-part for part in reversed(mu))


def _chains(mu: Composition, j: int | None) -> dict[Composition, Scalar]:
    """Sum over all chains a_1 < ... < a_m (through j, when there is one), built step by step."""
    hops = _Hops(mu)
    n, u = hops.n, hops.u
    steps: dict[tuple[int, int], Scalar] = {}
    for a in range(n):
        for b in range(n):
            passing = hops.passing(a, b)
            if not isinstance(passing, Scalar):
                continue
            arriving = hops.departure(a, b)
            if b == j:
                step = weight_scalar(arriving) * passing
            else:
                step = mixing(ratio(u[b], arriving)) * passing
            if a >= b:  # the closing hop carries the constant of the chain
                step = step * _closing(hops, a, j)
            steps[a, b] = step
    result: dict[Composition, Scalar] = {}
    starts = range(n) if j is None else range(j + 1)
    for first in starts:
        stack: list[tuple[tuple[int, ...], Scalar]] = [((first,), ONE)]
        while stack:
            chain, value = stack.pop()
            last = chain[-1]
            if j is None or last >= j:
                closing = steps.get((last, first))
                if closing is not None:
                    result[hops.target(chain)] = value * closing
            # a chain that has not met j yet may not jump over it
            end = n if j is None or last >= j else j + 1
            for b in range(last + 1, end):
                hop = steps.get((last, b))
                if hop is not None:
                    stack.append(((*chain, b), value * hop))
        budget.current().check_terms(len(result), "this product")
    return result


def _closing(hops: _Hops, last: int, j: int | None) -> Scalar:
    """What the last position of a chain contributes: t^-n q^(-mu-1), or that of e_1."""
    n = hops.n
    if j is not None:
        return weight_scalar((-hops.mu[last] - 1, -n))
    return -(one_minus((1, 0)) * ONE_MINUS_T.inverse()
             * weight_scalar((-1, hops.u[last][1] - n)))


def monk_rows(mu: Composition, j: int | None) -> list[MonkRow]:
    """All subsets through j with their factors, vanishing ones included, by size then order.

    Without j: all nonempty subsets, the rows of (x_1 + ... + x_n) E_mu.
    """
    hops = _Hops(mu)
    n, u = hops.n, hops.u
    through = () if j is None else (j - 1,)
    rows: list[MonkRow] = []
    for chosen in subsets([i for i in range(n) if i not in through]):
        chain = tuple(sorted((*chosen, *through)))
        if not chain:
            continue
        budget.current().check_terms(len(rows), "this table")
        factors: list[tuple[str, Scalar]] = [
            (f"constant at {chain[-1] + 1}",
             _closing(hops, chain[-1], None if j is None else j - 1))]
        obstacle = None
        for a, b in zip(chain, (*chain[1:], chain[0]), strict=True):
            arriving = hops.departure(a, b)
            if j is not None and b == j - 1:
                factors.append((f"arrival {a + 1} -> {b + 1}", weight_scalar(arriving)))
            else:
                factors.append((f"hop {a + 1} -> {b + 1}", mixing(ratio(u[b], arriving))))
            for i, part, weight in hops.between(a, b):
                if part == mu[i]:
                    obstacle = obstacle or (a + 1, i + 1)
                elif part < mu[i]:
                    factors.append((f"passing {i + 1}", quadratic(ratio(weight, u[i]))))
        rows.append(MonkRow(
            tuple(i + 1 for i in chain), hops.target(chain), tuple(factors), obstacle))
    return rows


class NonsymmetricMacdonald(Family):
    """E_mu, mu in Z^n."""

    name = "E"
    index_kind = "composition"

    def check_index(self, index: Index, n: int) -> Index:
        """Any n integers."""
        return check_composition(index, n, self.name, least=None)

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Largest size first, then the order of leading monomials, largest first."""
        return (-sum(index), tuple(-part for part in decreasing(index)), index)

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """By the intertwiner recursion."""
        return to_monomials(index)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """By triangularity."""
        return from_monomials(polynomial)

    def times_generator(self, index: Index, n: int, j: int, power: int) -> Coefficients | None:
        """By the closed rule."""
        if power == 1:
            return multiply_by_generator(index, j)
        return divide_by_generator(index, j) if power == -1 else None

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """By the closed rules for e_r, and for P over its orbit."""
        from spanwright.kernel.families import nonsymmetric_products

        return nonsymmetric_products.times_E(other, other_index, index)

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """A symmetric Macdonald polynomial over its orbit."""
        from spanwright.kernel.families import nonsymmetric_products

        return nonsymmetric_products.into_E(other, index, n)


FAMILIES = {"E": NonsymmetricMacdonald()}
