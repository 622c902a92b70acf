"""Symmetric polynomials against published tables and against sympy, each with its source."""

from __future__ import annotations

from fractions import Fraction
from itertools import product as words
from typing import Any

import pytest
import sympy

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.base import linear
from spanwright.kernel.families.jack import integral_jack
from spanwright.kernel.families.kostka import kostka
from spanwright.kernel.families.littlewood_richardson import coefficient, littlewood_richardson
from spanwright.kernel.families.macdonald_kostka import macdonald_kostka, modified_macdonald_kostka
from spanwright.kernel.families.registry import family
from spanwright.kernel.families.transitions import character, transition
from spanwright.kernel.indices import conjugate, padded, partitions
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
q, t = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")
ONE, ZERO = Scalar.one(RING), Scalar.zero(RING)
Shape = tuple[int, ...]

# Kostka numbers, rows lambda, columns mu, both from (n) down to (1^n): Macdonald, Symmetric
# Functions and Hall Polynomials (1995), I.6; from memory.
KOSTKA = {
    3: ["111", "012", "001"],
    4: ["11111", "01123", "00112", "00013", "00001"],
    5: ["1111111", "0112234", "0011235", "0001136", "0000125", "0000014", "0000001"],
}


@pytest.mark.parametrize("size", KOSTKA)
def test_kostka_tables(size: int) -> None:
    shapes = list(partitions(size))
    for shape, row in zip(shapes, KOSTKA[size], strict=True):
        assert [kostka(shape, mu) for mu in shapes] == [int(digit) for digit in row]


# The character table of S_4, rows lambda from (4) down, columns 1^4, 21^2, 2^2, 31, 4: standard.
CHARACTERS = [
    [1, 1, 1, 1, 1], [3, 1, -1, 0, -1], [2, 0, 2, -1, 0], [3, -1, -1, 0, 1], [1, -1, 1, 1, -1]]


def test_character_table() -> None:
    classes = [(1, 1, 1, 1), (2, 1, 1), (2, 2), (3, 1), (4,)]
    for shape, row in zip(partitions(4), CHARACTERS, strict=True):
        assert [character(shape, c) for c in classes] == row
        for c, value in zip(classes, row, strict=True):
            assert transition("p", "s", c, 4).get(shape, 0) == value


def test_littlewood_richardson_examples() -> None:
    """Fulton, Young Tableaux (1997), chapter 5; Stanley's product of rectangles; from memory."""
    assert littlewood_richardson((2, 1), (2, 1)) == {
        (4, 2): 1, (4, 1, 1): 1, (3, 3): 1, (3, 2, 1): 2, (3, 1, 1, 1): 1, (2, 2, 2): 1,
        (2, 2, 1, 1): 1}
    assert littlewood_richardson((2, 2), (2, 2)) == {
        (4, 4): 1, (4, 3, 1): 1, (4, 2, 2): 1, (3, 3, 1, 1): 1, (3, 2, 2, 1): 1,
        (2, 2, 2, 2): 1}
    # the skew shape 4321/321 is four separate boxes: f^mu
    found = [coefficient((4, 3, 2, 1), (3, 2, 1), mu) for mu in partitions(4)]
    assert found == [1, 3, 2, 3, 1]


# qt-Kostka matrices, rows mu, columns lambda, both from (n) down: Macdonald (1995), VI.8, tables;
# from memory.
QT_KOSTKA: dict[int, list[list[Any]]] = {
    2: [[1, q], [t, 1]],
    3: [[1, q + q**2, q**3], [t, 1 + q * t, q], [t**3, t + t**2, 1]],
    4: [
        [1, q + q**2 + q**3, q**2 + q**4, q**3 + q**4 + q**5, q**6],
        [t, 1 + q * t + q**2 * t, q + q**2 * t, q + q**2 + q**3 * t, q**3],
        [t**2, t + q * t + q * t**2, 1 + q**2 * t**2, q + q * t + q**2 * t, q**2],
        [t**3, t + t**2 + q * t**3, t + q * t**2, 1 + q * t + q * t**2, q],
        [t**6, t**3 + t**4 + t**5, t**2 + t**4, t + t**2 + t**3, 1]],
}


@pytest.mark.parametrize("size", QT_KOSTKA)
def test_macdonald_kostka_tables(size: int) -> None:
    shapes = list(partitions(size))
    for mu, row in zip(shapes, QT_KOSTKA[size], strict=True):
        for shape, expected in zip(shapes, row, strict=True):
            assert macdonald_kostka(shape, mu) == expected


def fillings_sum(mu: Shape, content: Shape) -> Scalar:
    """[x^content] of the modified H_mu: sum of q^inv t^maj over fillings of the diagram of mu.

    Haglund, Haiman and Loehr, A combinatorial formula for Macdonald polynomials (2005): rows of
    lengths mu_1, mu_2, ... upwards, reading from the top row down and from left to right.
    """
    cells = [(i, j) for i in reversed(range(len(mu))) for j in range(mu[i])]
    columns = conjugate(mu)
    place = {cell: k for k, cell in enumerate(cells)}
    attacking = [
        (u, v) for u in cells for v in cells if place[u] < place[v] and (
            u[0] == v[0] or (u[0] == v[0] + 1 and u[1] > v[1]))]
    total = ZERO
    for word in words(range(len(content)), repeat=len(cells)):
        if any(word.count(k) != part for k, part in enumerate(content)):
            continue
        filling = dict(zip(cells, word, strict=True))
        inversions = sum(1 for u, v in attacking if filling[u] > filling[v])
        major = 0
        for i, j in cells:
            if i and filling[i, j] > filling[i - 1, j]:
                major += columns[j] - i  # leg + 1
                inversions -= mu[i] - j - 1  # arm
        total = total + q**inversions * t**major
    return total


@pytest.mark.parametrize("size", [2, 3, 4, 5])
def test_macdonald_kostka_by_fillings(size: int) -> None:
    shapes = list(partitions(size))
    for mu in shapes if size < 5 else [(3, 2), (3, 1, 1), (2, 2, 1)]:
        in_m = {
            content: fillings_sum(mu, content) for content in shapes
            # words with five letters are many: degree 5 by the contents with few letters
            if size < 5 or len(content) < 4}
        for content, value in in_m.items():
            expected = ZERO
            for shape in shapes:
                expected = expected + modified_macdonald_kostka(shape, mu) * kostka(shape, content)
            assert value == expected


# P in the monomial basis: Macdonald (1995), VI.4 and VI.7; from memory.
P_TABLE: dict[Shape, dict[Shape, Scalar]] = {
    (2,): {(2,): ONE, (1, 1): (1 + q) * (1 - t) / (1 - q * t)},
    (2, 1): {
        (2, 1): ONE,
        (1, 1, 1): (1 - t) * (2 + q + t + 2 * q * t) / (1 - q * t**2)},
    (3,): {
        (3,): ONE,
        (2, 1): (1 - t) * (1 + q + q**2) / (1 - q**2 * t),
        (1, 1, 1): (1 - t) ** 2 * (1 + q) * (1 + q + q**2)
        / ((1 - q * t) * (1 - q**2 * t))},
    (1, 1, 1): {(1, 1, 1): ONE},
}


@pytest.mark.parametrize("index", P_TABLE)
def test_P_expansions(index: Shape) -> None:
    assert family("m").convert_from(family("P"), index, 3) == P_TABLE[index]


def test_jack_expansions() -> None:
    """J of Stanley, Some combinatorial properties of Jack symmetric functions (1989); memory."""
    alpha = Scalar.parameter(RING.extended(["alpha"]), "alpha")
    table: dict[Shape, dict[Shape, Any]] = {
        (2,): {(2,): 1 + alpha, (1, 1): 2},
        (3,): {
            (3,): (1 + alpha) * (1 + 2 * alpha), (2, 1): 3 * (1 + alpha), (1, 1, 1): 6},
        (2, 1): {(2, 1): 2 + alpha, (1, 1, 1): 6},
        (2, 2): {
            (2, 2): 4 + 6 * alpha + 2 * alpha**2, (2, 1, 1): 8 + 4 * alpha, (1, 1, 1, 1): 24},
        (2, 1, 1): {(2, 1, 1): 6 + 2 * alpha, (1, 1, 1, 1): 24},
    }
    for index, row in table.items():
        f = integral_jack(index, sum(index))
        found = {e for e in f.terms if e == tuple(sorted(e, reverse=True))}
        assert found == {padded(mu, sum(index)) for mu in row}
        for mu, value in row.items():
            assert f.coefficient(padded(mu, sum(index))) == value


# sympy as an outside reference


def as_sympy(f: LaurentPolynomial) -> Any:
    """A polynomial with rational coefficients."""
    x = sympy.symbols(f"x1:{f.n + 1}")
    found = sympy.Integer(0)
    for e, c in f.items():
        value = c.as_fraction()
        assert value is not None
        term = sympy.Rational(value.numerator, value.denominator)
        for variable, power in zip(x, e, strict=True):
            term *= variable**power
        found += term
    return found


@pytest.mark.parametrize("index", [(2, 1), (3, 1), (2, 2), (3, 2, 1), (4,)])
def test_schur_by_determinants_of_sympy(index: Shape) -> None:
    """The bialternant (Cauchy 1815) and both Jacobi-Trudi determinants (Macdonald 1995, I.3)."""
    n = 3
    x = sympy.symbols(f"x1:{n + 1}")
    lam = padded(index, n)
    top = sympy.Matrix(n, n, lambda i, j: x[i] ** (lam[j] + n - 1 - j)).det()
    bottom = sympy.Matrix(n, n, lambda i, j: x[i] ** (n - 1 - j)).det()
    schur = as_sympy(family("s").to_monomials(index, n))
    assert sympy.expand(schur * bottom - top) == 0
    for name, shape in (("h", index), ("e", conjugate(index))):
        one = family(name)

        def entry(i: int, j: int, one: Any = one, shape: Shape = shape) -> Any:
            k = shape[i] - i + j
            return as_sympy(one.to_monomials((k,) if k else (), n)) if k >= 0 else 0

        determinant = sympy.Matrix(len(shape), len(shape), entry).det(method="berkowitz")
        assert sympy.expand(schur - determinant) == 0


def test_power_sums_and_complete_ones_by_sympy() -> None:
    n = 3
    x = sympy.symbols(f"x1:{n + 1}")
    z = sympy.Symbol("z")
    generating = sympy.series(
        sympy.prod([1 / (1 - variable * z) for variable in x]), z, 0, 5).removeO()
    for k in range(1, 5):
        p = as_sympy(family("p").to_monomials((k,), n))
        assert sympy.expand(p - sum(variable**k for variable in x)) == 0
        h = as_sympy(family("h").to_monomials((k,), n))
        assert sympy.expand(h - sympy.expand(generating).coeff(z, k)) == 0
        e = as_sympy(family("e").to_monomials((k,), n))
        product = sympy.expand(sympy.prod([1 + variable * z for variable in x]))
        assert sympy.expand(e - product.coeff(z, k)) == 0


def solved_by_sympy(index: Shape, n: int) -> dict[Shape, Any]:
    """P_index in m from the triangular eigenproblem of the difference operator, in sympy.

    D f = sum_i prod_(j != i) (t x_i - x_j)/(x_i - x_j) f(.., q x_i, ..) (Macdonald 1995, VI.3).
    """
    q_, t_ = sympy.symbols("q t")
    x = sympy.symbols(f"x1:{n + 1}")
    shapes = [padded(mu, n) for mu in partitions(sum(index), n) if mu <= index]

    def monomial(mu: Shape) -> Any:
        from sympy.utilities.iterables import multiset_permutations

        return sum(
            sympy.prod([v**k for v, k in zip(x, e, strict=True)])
            for e in multiset_permutations(list(mu)))

    def image(f: Any) -> Any:
        total = 0
        for i in range(n):
            factor = sympy.prod(
                [(t_ * x[i] - x[j]) / (x[i] - x[j]) for j in range(n) if j != i])
            total += factor * f.subs(x[i], q_ * x[i])
        return sympy.Poly(sympy.cancel(sympy.together(total)), *x)

    rows = []
    for mu in shapes:
        f = image(monomial(mu))
        rows.append([f.coeff_monomial(sympy.prod([v**k for v, k in zip(x, nu, strict=True)]))
                     for nu in shapes])
    eigenvalue = rows[0][0]
    solved: list[Any] = [sympy.Integer(1)]
    for k in range(1, len(shapes)):
        known = sum(solved[i] * rows[i][k] for i in range(k))
        solved.append(sympy.cancel(known / (eigenvalue - rows[k][k])))
    return {
        tuple(part for part in mu if part): value
        for mu, value in zip(shapes, solved, strict=True) if value != 0}


@pytest.mark.parametrize(("index", "n"), [((2,), 2), ((3, 1), 2), ((2, 1), 3), ((2, 2), 3)])
def test_P_by_the_eigenproblem_in_sympy(index: Shape, n: int) -> None:
    in_m = family("m").convert_from(family("P"), index, n)
    assert in_m is not None
    expected = solved_by_sympy(index, n)
    assert set(in_m) == set(expected)
    points = [(Fraction(2, 3), Fraction(1, 5)), (Fraction(3), Fraction(-2, 7))]
    for mu, value in expected.items():
        for at_q, at_t in points:
            number = value.subs({"q": sympy.Rational(at_q), "t": sympy.Rational(at_t)})
            ours = in_m[mu].substitute({
                "q": Scalar.number(RING, at_q.numerator, at_q.denominator),
                "t": Scalar.number(RING, at_t.numerator, at_t.denominator)}).as_fraction()
            assert ours == Fraction(int(number.p), int(number.q))


def test_schur_at_degree_six_sums_to_the_whole() -> None:
    """p_1^n = sum of f^lambda s_lambda, f by hooks (Frame, Robinson and Thrall 1954)."""
    from math import factorial, prod

    from spanwright.kernel.families.statistics import hooks

    size = 6
    found = linear({(1,) * size: ONE}, lambda index: family("s").convert_from(
        family("p"), index, size) or {})
    for shape in partitions(size):
        assert found[shape] == factorial(size) // prod(box.hook for box in hooks(shape))
