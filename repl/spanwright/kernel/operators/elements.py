"""Elements of an algebra in the course of straightening: X^mu times rows, one common scale.

value = scale * sum of X^mu * (sum of c * B), B the rest of a basis element: (w, nu) for T_w Y^nu,
d_w, pi_w or s_w. The c are polynomials in the parameters. Letters are multiplied from the left;
T_i, d_i, pi_i pass a whole polynomial f(X) by the closed rule D_i f = (s_i f) D_i + correction,
line by line, so the work grows with the result (Lusztig, Affine Hecke algebras and their graded
version, 1989).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Iterable, Iterator
from functools import lru_cache

from flint import fmpz_mpoly

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import Scalar, common_denominator, polynomial_of
from spanwright.kernel.errors import Mixed
from spanwright.kernel.operators.words import Group, Letter, Operator, normalising
from spanwright.kernel.parameters import Exponents, ParameterRing

Key = tuple[indices.Permutation, Exponents]
Row = dict[Key, fmpz_mpoly]
Rows = dict[Exponents, Row]


class Element:
    """scale * sum of X^mu * row."""

    __slots__ = ("ring", "rows", "scale")

    def __init__(self, ring: ParameterRing, rows: Rows, scale: Scalar) -> None:
        self.ring = ring
        self.rows = rows
        self.scale = scale

    def scaled(self, factor: Scalar) -> Element:
        """The product with a scalar."""
        return Element(self.ring, self.rows, self.scale * factor)

    def n_terms(self) -> int:
        """The number of terms."""
        return sum(map(len, self.rows.values()))

    def items(self) -> Iterator[tuple[Exponents, Key, Scalar]]:
        """X-exponents, the rest, and the coefficient."""
        for mu, row in self.rows.items():
            for key, c in row.items():
                if c:
                    yield mu, key, Scalar.of_polynomial(self.ring, c) * self.scale


def parameter_t(ring: ParameterRing) -> fmpz_mpoly:
    """t as a polynomial of the ring."""
    return ring.monomial(ring.exponents({"t": 1}))


def t_power(ring: ParameterRing, exponent: int) -> Scalar:
    """t^exponent."""
    return Scalar.monomial_of(ring, ring.exponents({"t": exponent}))


def add_row(target: Row, row: Row, factor: fmpz_mpoly | None = None) -> None:
    """Add factor * row to `target`, in place; terms that cancel stay as 0."""
    for key, c in row.items():
        if factor is not None:
            c = c * factor
        known = target.get(key)
        target[key] = c if known is None else known + c


def without_zeros(rows: Rows) -> Rows:
    """The rows without what cancelled."""
    found: Rows = {}
    for mu, row in rows.items():
        kept = {key: c for key, c in row.items() if c}
        if kept:
            found[mu] = kept
    return found


def total_element(elements: Iterable[Element]) -> Element:
    """The sum over one common denominator; the elements share their ring."""
    summands = list(elements)
    present = [e for e in summands if e.rows and not e.scale.is_zero]
    if len(present) < 2:
        return present[0] if present else Element(summands[0].ring, {}, summands[0].scale)
    ring = present[0].ring
    scale = common_denominator(ring, (e.scale.lift(ring) for e in present))
    inverse = scale.inverse().lift(ring)
    rows: Rows = {}
    for e in present:
        factor = polynomial_of((e.scale.lift(ring) * inverse).lift(ring))
        for mu, row in e.rows.items():
            add_row(rows.setdefault(mu, {}), row, None if factor.is_one() else factor)
    return Element(ring, without_zeros(rows), scale)


@lru_cache(maxsize=200_000)
def raised(w: indices.Permutation, i: int) -> tuple[indices.Permutation, bool]:
    """s_i w, and whether it is longer than w: the value i stands left of i + 1 then."""
    here, there = w.index(i), w.index(i + 1)
    found = list(w)
    found[here], found[there] = i + 1, i
    return tuple(found), here < there


class Rule(ABC):
    """How D_1, ..., D_(n-1) of one kind multiply basis elements D_w and pass X^mu."""

    shift: tuple[int, int] | None
    """The correction is factor * x_i^a x_(i+1)^b d_i f with (a, b) the shift; None: none."""

    factor: fmpz_mpoly | None = None

    @abstractmethod
    def left(self, i: int, row: Row) -> Row:
        """D_i times a row."""

    def applied(self, i: int, rows: Rows) -> Rows:
        """D_i times a sum of X^mu * row."""
        budget.current().check()
        result: Rows = {}
        lines: dict[tuple[Exponents, Exponents, int], dict[int, Row]] = {}
        for mu, row in rows.items():
            key = (mu[: i - 1], mu[i + 1 :], mu[i - 1] + mu[i])
            lines.setdefault(key, {})[mu[i - 1]] = row
            result[mu[: i - 1] + (mu[i], mu[i - 1]) + mu[i + 1 :]] = self.left(i, row)
        if self.shift is not None:
            a, b = self.shift
            for (before, after, size), line in lines.items():
                for k, row in divided_rows(line, size).items():
                    mu = (*before, k + a, size - 1 - k + b, *after)
                    add_row(result.setdefault(mu, {}), row, self.factor)
        return without_zeros(result)


def divided_rows(line: dict[int, Row], size: int) -> dict[int, Row]:
    """d_i of sum of x_i^k x_(i+1)^(size-k) row_k: the row at x_i^k x_(i+1)^(size-1-k)."""
    low = min(min(line), size - max(line))
    result: dict[int, Row] = {}
    running: Row = {}
    # the result is symmetric, so half of it is enough
    for k in range(low, (size - 1) // 2 + 1):
        left, right = line.get(k), line.get(size - k)
        if left is not None or right is not None:
            running = dict(running)
            for key, c in (left or {}).items():
                known = running.get(key)
                running[key] = -c if known is None else known - c
            if right is not None:
                add_row(running, right)
            running = {key: c for key, c in running.items() if c}
        if running:
            result[k] = running
            result[size - 1 - k] = running
    return result


class Algebra(ABC):
    """An algebra in which elements are multiplied from the left by letters."""

    kinds: frozenset[str]
    """The letters that it holds."""

    def __init__(self, ring: ParameterRing, n: int) -> None:
        self.ring = ring
        self.n = n
        self.origin: Exponents = (0,) * n

    def one(self, nu: Exponents = ()) -> Element:
        """The identity."""
        row = {(indices.identity(self.n), nu): self.ring.one}
        return Element(self.ring, {self.origin: row}, Scalar.one(self.ring))

    @abstractmethod
    def multiply(self, letter: Letter, element: Element) -> Element:
        """letter * element, in the plain normalisation."""

    def applied(self, operator: Operator, element: Element) -> Element:
        """operator * element, in the operator's normalisation."""
        balanced = operator.normalisation == "balanced"
        found = []
        for word, c in operator.terms.items():
            current = element
            for factor in reversed(word):
                if isinstance(factor, Group):
                    for _ in range(factor.power):
                        current = self.applied(factor.operator, current)
                    continue
                current = self.multiply(factor, current)
                budget.current().check_terms(current.n_terms(), "this canonical form")
            found.append(current.scaled(c * normalising(word, self.n) if balanced else c))
        return total_element(found) if found else Element(self.ring, {}, element.scale)

    def by_reduced_word(
        self, letter: Letter, element: Element, power: Callable[[int, int, Element], Element]
    ) -> Element:
        """T_w^k * element, from `power(i, k, element)`, which is T_i^k * element."""
        i = letter.simple_position()
        if i is not None:
            return power(i, letter.power, element)
        word = indices.reduced_word(letter.subscript)
        sign = 1 if letter.power > 0 else -1
        for _ in range(abs(letter.power)):
            for i in reversed(word) if sign > 0 else word:
                element = power(i, sign, element)
        return element

    def shifted(self, element: Element, mu: Exponents) -> Element:
        """X^mu * element."""
        rows = {tuple(map(int.__add__, nu, mu)): row for nu, row in element.rows.items()}
        return Element(self.ring, rows, element.scale)

    def by_steps(
        self, letter: Letter, element: Element, step: Callable[[int, Element], Element]
    ) -> Element:
        """D_w^power for a positive power, one D_i after another."""
        if letter.power < 0:
            raise Mixed(f"{letter.kind} has no inverse")
        word = indices.reduced_word(letter.subscript)
        for _ in range(letter.power):
            for i in reversed(word):
                element = step(i, element)
            if not element.rows:
                break
        return element

    def symmetrized(
        self, element: Element, step: Callable[[int, Element], Element]
    ) -> Element:
        """sum over w of D_w: the one of S_(k+1) is (1 + D_k + D_(k-1) D_k + ...) that of S_k."""
        for k in range(1, self.n):
            partial = [element]
            for i in range(k, 0, -1):
                partial.append(step(i, partial[-1]))
            element = total_element(partial)
        return element
