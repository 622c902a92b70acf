"""Operators acting: on polynomials by their defining formulas, on families by closed rules.

On sums of E_mu the letters X, T, Y, T_pi, tau_i, tau_pi, symmetrizer act without monomials
(Knop, Integrality of two variable Kostka functions, 1997; Cherednik, Nonsymmetric Macdonald
polynomials, 1995; Macdonald, Affine Hecke Algebras and Orthogonal Polynomials, 2003; for X the
closed product rule of the family).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import lru_cache, partial
from typing import TypeAlias

from flint import fmpz_mpoly

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import Mixed
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Coefficients, Family, Index, linear
from spanwright.kernel.families.nonsymmetric_macdonald import (
    ONE,
    eigenvalue_weight,
    mixing,
    one_minus,
    quadratic,
    ratio,
    weight_scalar,
    weights,
)
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import Composition
from spanwright.kernel.laurent import LaurentPolynomial, Terms, total_polynomial
from spanwright.kernel.lines import divided_differences, lines
from spanwright.kernel.operators.elements import parameter_t, t_power
from spanwright.kernel.operators.hecke import power_of_t
from spanwright.kernel.operators.words import (
    Group,
    Letter,
    Operator,
    Word,
    cherednik_steps,
    normalising,
)
from spanwright.kernel.parameters import ParameterRing

Value: TypeAlias = "LaurentPolynomial | Expansion"

CLOSED_ON_E = frozenset({
    "X", "T", "Y", "T_pi", "tau", "tau_pi", "symmetrizer", "antisymmetrizer"})
"""The letters with a closed rule on sums of E_mu."""

_SYMMETRIC_KINDS = frozenset({"T", "s", "d", "pi", "symmetrizer", "antisymmetrizer"})


def has_closed_rule(letter: Letter, basis: Family) -> bool:
    """Whether a letter maps sums over this family to sums over it without monomials."""
    if basis.name == "E":
        return letter.kind in CLOSED_ON_E
    if basis.index_kind == "partition":
        return letter.kind in _SYMMETRIC_KINDS
    return (basis.name in ("S", "double Schubert") and letter.kind == "d") or (
        basis.name in ("kappa", "atom") and letter.kind == "pi")


def act(operator: Operator, value: Value) -> Value:
    """operator applied to a polynomial or an expansion.

    An expansion stays in its family as long as every letter has a closed rule there, and goes
    through monomials else. tau_i turns everything into a sum of E_mu.
    """
    if operator.n != value.n:
        raise Mixed(
            f"an operator on {operator.n} variables and a polynomial in {value.n} variables",
            hints=(f"fix n = {value.n}",))
    return _applied(operator, value)


def act_on_polynomial(operator: Operator, polynomial: LaurentPolynomial) -> LaurentPolynomial:
    """operator applied to a polynomial, as a polynomial."""
    return as_polynomial(act(operator, polynomial))


def as_polynomial(value: Value) -> LaurentPolynomial:
    """An expansion multiplied out."""
    return value if isinstance(value, LaurentPolynomial) else value.to_monomials()


def _applied(operator: Operator, value: Value) -> Value:
    balanced = operator.normalisation == "balanced"
    images: list[Value] = []
    # words that end alike share the work on their common end
    ends: dict[Word, Value] = {}
    n_seen: dict[Word, int] = {}
    if len(operator.terms) > 1:
        for word in operator.terms:
            for k in range(len(word)):
                n_seen[word[k:]] = n_seen.get(word[k:], 0) + 1
    for word, c in operator.terms.items():
        start = next((k for k in range(len(word)) if word[k:] in ends), len(word))
        current = ends[word[start:]] if start < len(word) else value
        for k in range(start - 1, -1, -1):
            budget.current().check()
            factor = word[k]
            if isinstance(factor, Group):
                for _ in range(factor.power):
                    current = _applied(factor.operator, current)
            else:
                current = letter_on(factor, current)
            if n_seen.get(word[k:], 0) > 1:
                ends[word[k:]] = current
        # the powers of t^(1/2) of a word at once: they are often whole together
        images.append(current.scaled(c * normalising(word, operator.n) if balanced else c))
    return _sum(images) if images else value.scaled(Scalar.zero(ParameterRing.get()))


def _sum(values: list[Value]) -> Value:
    if len(values) == 1:
        return values[0]
    first = values[0]
    if isinstance(first, Expansion) and all(
        isinstance(v, Expansion) and v.family is first.family for v in values
    ):
        return Expansion(first.family, first.n, _added(
            [v.terms for v in values if isinstance(v, Expansion)]))
    return total_polynomial([as_polynomial(v) for v in values])


def letter_on(letter: Letter, value: Value) -> Value:
    """One letter, plain normalisation, on a polynomial or an expansion."""
    if isinstance(value, Expansion):
        if has_closed_rule(letter, value.family):
            rule = _rules.get(value.family.name, _on_symmetric)
            images = rule(letter, value.family, value.n, value.terms)
            return Expansion(value.family, value.n, images)
        value = value.to_monomials()
    if letter.kind == "tau":
        basis = family("E")
        expanded = Expansion(basis, value.n, basis.from_monomials(value))
        return letter_on(letter, expanded)
    return _on_polynomial(letter, value)


# on polynomials


def _on_polynomial(letter: Letter, f: LaurentPolynomial) -> LaurentPolynomial:
    if f.is_zero:
        return f
    kind, w = letter.kind, letter.subscript
    if kind == "X":
        return f.shifted(w)
    if kind == "s":
        return f.moved(lambda e: indices.act(w, e))
    work = _Work(f)
    if kind == "Y":
        steps, m, e = cherednik_steps(f.n, w)
        work.turn(m * f.n)  # (Y_1 ... Y_n)^m = t^(m n(n-1)/2) T_pi^(nm)
        work.scale = work.scale * t_power(f.ring, e + m * f.n * (f.n - 1) // 2)
        for position, k in steps:
            if position:
                work.hecke(position, k)
            else:
                work.turn(k)
    elif kind == "T_pi":
        work.turn(letter.power)
    elif kind == "tau_pi":
        sign = 1 if letter.power > 0 else -1
        first = tuple(sign * int(k == 0) for k in range(f.n))
        for _ in range(abs(letter.power)):  # tau_pi = X_1 T_pi
            if sign < 0:
                work.shift(first)
            work.turn(sign)
            if sign > 0:
                work.shift(first)
    elif kind in ("symmetrizer", "antisymmetrizer"):
        for _ in range(letter.power):
            work.symmetrize(kind)
    else:
        i = letter.simple_position()
        if kind == "T" and i is not None:
            work.hecke(i, letter.power)
        else:
            word = indices.reduced_word(w)
            for _ in range(abs(letter.power)):
                for j in reversed(word) if letter.power > 0 else word:
                    if kind == "T":
                        work.hecke(j, 1 if letter.power > 0 else -1)
                    else:
                        work.divide(j, shift=int(kind == "pi"))
    return LaurentPolynomial.reduced(f.n, f.ring, work.terms, work.scale)


class _Work:
    """A polynomial under several letters, reduced only at the end."""

    def __init__(self, f: LaurentPolynomial) -> None:
        self.n = f.n
        self.ring = f.ring
        self.terms: Terms = f.terms
        self.scale = f.scale

    def shift(self, exponents: tuple[int, ...]) -> None:
        """Times x^exponents."""
        self.terms = {tuple(map(int.__add__, e, exponents)): c for e, c in self.terms.items()}

    def hecke(self, i: int, k: int) -> None:
        """T_i^k: T_i f = t s_i f + (1-t) x_(i+1) d_i f."""
        budget.current().check()
        t = parameter_t(self.ring)
        a, b, e = power_of_t(self.ring, k)
        turned, straight = a * t, a * (1 - t)
        found: Terms = {}
        for line in lines(self.terms, i):
            row = {k: c * straight for k, c in divided_differences(line).items()}
            for k, c in line.coefficients.items():
                _add(row, line.size - k, c * turned)
                if b:
                    _add(row, k, c * b)
            for k, c in row.items():
                if c:
                    found[line.exponents(k)] = c
        self.terms = found
        if e:
            self.scale = self.scale * t_power(self.ring, e)

    def divide(self, i: int, *, shift: int) -> None:
        """d_i for shift 0, pi_i = 1 + x_(i+1) d_i for shift 1."""
        found: Terms = {}
        for line in lines(self.terms, i):
            row = divided_differences(line)
            if shift:
                for k, c in line.coefficients.items():
                    _add(row, k, c)
            for k, c in row.items():
                if c:
                    found[(*line.before, k, line.size - 1 + shift - k, *line.after)] = c
        self.terms = found

    def turn(self, k: int) -> None:
        """T_pi^k: x_i -> x_(i+1), x_n -> x_1/q, k times."""
        turns, rest = divmod(k, self.n)
        moved = {}
        low = None
        for e, c in self.terms.items():
            # the last `rest` variables cross the end once more than the others
            power = -turns * sum(e) - sum(e[self.n - rest:])
            low = power if low is None else min(low, power)
            moved[e[self.n - rest:] + e[:self.n - rest]] = (power, c)
        if low is None:
            return
        self.terms = {
            e: c if power == low
            else c * self.ring.monomial(self.ring.exponents({"q": power - low}))
            for e, (power, c) in moved.items()}
        if low:
            self.scale = self.scale * Scalar.monomial_of(
                self.ring, self.ring.exponents({"q": low}))

    def symmetrize(self, kind: str) -> None:
        """sum of T_w, or of (-1/t)^(length of w) T_w: factor by factor along S_2, S_3, ..."""
        t = parameter_t(self.ring)
        for k in range(1, self.n):
            # partial sums over t^k for the antisymmetrizer, so that terms stay polynomials
            accumulated = {e: c * t**k if kind == "antisymmetrizer" else c
                           for e, c in self.terms.items()}
            for step, i in enumerate(range(k, 0, -1), 1):
                self.hecke(i, 1)
                for e, c in self.terms.items():
                    if kind == "antisymmetrizer":
                        c = c * (-1) ** step * t ** (k - step)
                    known = accumulated.get(e)
                    accumulated[e] = c if known is None else known + c
            self.terms = {e: c for e, c in accumulated.items() if c}
            if kind == "antisymmetrizer":
                self.scale = self.scale * t_power(self.ring, -k)


def _add(row: dict[int, fmpz_mpoly], k: int, c: fmpz_mpoly) -> None:
    known = row.get(k)
    row[k] = c if known is None else known + c


# on sums of E_mu

Rule = Callable[[Letter, Family, int, Mapping[Index, Scalar]], Coefficients]


def _on_e(
    letter: Letter, basis: Family, n: int, terms: Mapping[Index, Scalar]
) -> Coefficients:
    kind = letter.kind
    found = dict(terms)
    if kind == "Y":
        return {mu: c * cherednik_eigenvalue(letter.subscript, mu) for mu, c in found.items()}
    if kind == "X":
        return _x_on_e(basis, letter.subscript, found)
    if kind == "T":
        i = letter.simple_position()
        if i is not None:
            return linear(found, partial(hecke_on_element, i, letter.power))
        word = indices.reduced_word(letter.subscript)
        sign = 1 if letter.power > 0 else -1
        for _ in range(abs(letter.power)):
            for i in reversed(word) if sign > 0 else word:
                found = linear(found, partial(hecke_on_element, i, sign))
        return found
    if kind == "T_pi":
        return _t_pi_on_e(basis, n, letter.power, found)
    for _ in range(abs(letter.power)):
        if kind == "tau":
            found = linear(found, partial(intertwiner_on_element, letter.subscript[0]))
        elif kind == "tau_pi":
            found = _tau_pi_on_e(1 if letter.power > 0 else -1, found)
        elif kind == "symmetrizer":
            found = linear(found, symmetrized_element)
        else:
            found = _antisymmetrized(n, found)
    return found


def _t_pi_on_e(basis: Family, n: int, k: int, terms: Coefficients) -> Coefficients:
    """T_pi = X_1^-1 tau_pi, and T_pi^n = t^(-n(n-1)/2) Y_1 ... Y_n."""
    turns, k = divmod(k, n)
    if 2 * k > n:
        turns, k = turns + 1, k - n
    if turns:
        terms = {
            mu: c * weight_scalar((-turns * sum(mu), 0)) for mu, c in terms.items()}
    sign = 1 if k > 0 else -1
    first = tuple(int(j == 0) for j in range(n))
    for _ in range(abs(k)):
        if sign > 0:
            terms = _x_on_e(basis, tuple(-e for e in first), _tau_pi_on_e(1, terms))
        else:
            terms = _tau_pi_on_e(-1, _x_on_e(basis, first, terms))
    return terms


def cherednik_eigenvalue(nu: Composition, mu: Composition) -> Scalar:
    """The eigenvalue of Y^nu (plain) on E_mu."""
    q_power = t_exponent = 0
    for i, e in enumerate(nu, 1):
        if e:
            a, b = eigenvalue_weight(mu, i)
            q_power, t_exponent = q_power + e * a, t_exponent + e * b
    return weight_scalar((q_power, t_exponent))


@lru_cache(maxsize=50_000)
def hecke_on_element(i: int, k: int, mu: Composition) -> Coefficients:
    """T_i^k E_mu, plain normalisation."""
    if mu[i - 1] == mu[i]:
        return {mu: weight_scalar((0, k))}
    ring = ParameterRing.get()
    u = weights(mu)
    z = ratio(u[i - 1], u[i])
    other = ONE if mu[i - 1] > mu[i] else quadratic(z)
    if k == 1:
        return {indices.swapped(mu, i): other, mu: -mixing(z)}
    if k == -1:
        return {
            indices.swapped(mu, i): other * weight_scalar((0, -1)),
            mu: -(mixing(z) * weight_scalar((z[0], z[1] - 1)))}
    a, b, e = power_of_t(ring, k)
    slope = Scalar.of_polynomial(ring, a) * weight_scalar((0, e))
    return {
        indices.swapped(mu, i): other * slope,
        mu: Scalar.of_polynomial(ring, b) * weight_scalar((0, e)) - mixing(z) * slope}


def intertwiner_on_element(i: int, mu: Composition) -> Coefficients:
    """tau_i E_mu, plain normalisation."""
    if mu[i - 1] == mu[i]:
        return {}
    u = weights(mu)
    other = ONE if mu[i - 1] > mu[i] else quadratic(ratio(u[i - 1], u[i]))
    return {indices.swapped(mu, i): other}


def _tau_pi_on_e(sign: int, terms: Mapping[Index, Scalar]) -> Coefficients:
    if sign > 0:
        return {
            (mu[-1] + 1, *mu[:-1]): c * weight_scalar((-mu[-1], 0)) for mu, c in terms.items()}
    return {(*mu[1:], mu[0] - 1): c * weight_scalar((mu[0] - 1, 0)) for mu, c in terms.items()}


def _x_on_e(basis: Family, exponents: Composition, terms: Coefficients) -> Coefficients:
    """X^exponents; a common power of all generators only shifts the index."""
    n = len(exponents)
    m = sorted(exponents)[n // 2]
    for j, e in enumerate(exponents, 1):
        for _ in range(abs(e - m)):
            terms = linear(terms, partial(_generator_on_element, basis, j, 1 if e > m else -1))
    if m:
        terms = {tuple(part + m for part in mu): c for mu, c in terms.items()}
    return terms


@lru_cache(maxsize=20_000)
def _generator_on_element(basis: Family, j: int, sign: int, mu: Composition) -> Coefficients:
    found = basis.times_generator(mu, len(mu), j, sign)
    assert found is not None
    return found


def symmetrized_element(mu: Composition) -> Coefficients:
    """(sum over w of T_w) E_mu = W_lam(t) prod (1-tz)/(1-z) P_lam, and P_lam in E (Macdonald 2003).

    The product runs over i < j with mu_i < mu_j, z = u_j/u_i.
    """
    u, n = weights(mu), len(mu)
    value = ONE
    for part in set(mu):
        for m in range(2, mu.count(part) + 1):  # [m]_t = (1 - t^m)/(1 - t)
            value = value * one_minus((0, m)) * one_minus((0, 1)).inverse()
    for i in range(n):
        for j in range(i + 1, n):
            if mu[i] < mu[j]:
                a, b = ratio(u[j], u[i])
                value = value * one_minus((a, b + 1)) * one_minus((a, b)).inverse()
    found: Coefficients = {}
    for nu in indices.orbit(mu):
        u = weights(nu)
        c = value
        for i in range(n):
            for j in range(i + 1, n):
                if nu[i] > nu[j]:  # (t - z)/(1 - z)
                    a, b = ratio(u[i], u[j])
                    c = c * one_minus((a, b - 1)) * weight_scalar((0, 1)) * one_minus(
                        (a, b)).inverse()
        found[nu] = c
    budget.current().check_terms(len(found), "this orbit")
    return found


def _antisymmetrized(n: int, terms: Coefficients) -> Coefficients:
    minus = -weight_scalar((0, -1))
    for k in range(1, n):
        partial_sums: list[Mapping[Index, Scalar]] = [terms]
        for i in range(k, 0, -1):
            step = linear(partial_sums[-1], partial(hecke_on_element, i, 1))
            partial_sums.append({mu: c * minus for mu, c in step.items()})
        terms = _added(partial_sums)
    return dict(terms)


def _added(sums: Sequence[Mapping[Index, Scalar]]) -> Coefficients:
    collected: dict[Index, list[Scalar]] = {}
    for terms in sums:
        for index, c in terms.items():
            collected.setdefault(index, []).append(c)
    return {index: total(cs) for index, cs in collected.items()}


# on other families


def _on_symmetric(
    letter: Letter, basis: Family, n: int, terms: Mapping[Index, Scalar]
) -> Coefficients:
    """A symmetric f: T_i f = t f, s_i f = f, d_i f = 0, pi_i f = f."""
    kind = letter.kind
    if kind == "d" or (kind == "antisymmetrizer" and n > 1):
        return {}
    value = ONE
    if kind == "T":
        value = weight_scalar((0, indices.length(letter.subscript) * letter.power))
    elif kind == "symmetrizer":
        for m in range(2, n + 1):
            value = value * one_minus((0, m)) * one_minus((0, 1)).inverse()
        value = value**letter.power
    return {index: c * value for index, c in terms.items()}


def _on_schubert(
    letter: Letter, basis: Family, n: int, terms: Mapping[Index, Scalar]
) -> Coefficients:
    """d_i S_w = S_(w s_i) when w(i) > w(i+1), else 0; the same for S_w(x;y).

    Lascoux and Schuetzenberger, Polynomes de Schubert (1982).
    """
    def step(i: int, w: Index) -> Coefficients:
        w = indices.extended(w, max(n, len(w)))
        if w[i - 1] < w[i]:
            return {}
        return {basis.check_index(indices.reduced_size(indices.swapped(w, i)), n): ONE}

    return _stepwise(letter, terms, step)


def _on_keys(
    letter: Letter, basis: Family, n: int, terms: Mapping[Index, Scalar]
) -> Coefficients:
    """pi_i on key polynomials and Demazure atoms.

    Reiner and Shimozono, Key polynomials and a flagged Littlewood-Richardson rule (1995).
    """
    def step(i: int, index: Index) -> Coefficients:
        a = indices.padded(index, n)
        turned = basis.check_index(indices.swapped(a, i), n)
        if basis.name == "kappa":
            return {turned if a[i - 1] > a[i] else index: ONE}
        if a[i - 1] > a[i]:
            return {index: ONE, turned: ONE}
        return {index: ONE} if a[i - 1] == a[i] else {}

    return _stepwise(letter, terms, step)


def _stepwise(
    letter: Letter, terms: Mapping[Index, Scalar], step: Callable[[int, Index], Coefficients]
) -> Coefficients:
    found = dict(terms)
    for _ in range(letter.power):
        for i in reversed(indices.reduced_word(letter.subscript)):
            found = linear(found, partial(step, i))
    return found


_rules: dict[str, Rule] = {
    "E": _on_e, "S": _on_schubert, "double Schubert": _on_schubert, "kappa": _on_keys,
    "atom": _on_keys}
