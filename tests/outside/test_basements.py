"""Permuted basements and the reversed convention against fillings and independent formulas.

Fillings: J. Haglund, M. Haiman, N. Loehr, A combinatorial formula for nonsymmetric Macdonald
polynomials (2008), with the basement row permuted as in P. Alexandersson, Non-symmetric Macdonald
polynomials and Demazure-Lusztig operators (2016); written out from memory here.
"""

from __future__ import annotations

from itertools import combinations, product

import pytest

from spanwright.kernel import indices
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.families.basements import with_basement
from spanwright.kernel.families.reversed_macdonald import FAMILIES
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.operators.actions import act
from spanwright.kernel.operators.words import Operator
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
Q, T = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")
ONE = Scalar.one(RING)


def fillings_sum(mu: tuple[int, ...], basement: tuple[int, ...]) -> LaurentPolynomial:
    """The sum over non-attacking fillings of the columns mu above a basement row."""
    n = len(mu)
    boxes = [(i, j) for i in range(n) for j in range(1, mu[i] + 1)]
    cells = [(i, 0) for i in range(n)] + boxes

    def leg(i: int, j: int) -> int:
        return mu[i] - j

    def arm(i: int, j: int) -> int:
        left = sum(1 for r in range(i) if j <= mu[r] <= mu[i])
        return left + sum(1 for r in range(i + 1, n) if j - 1 <= mu[r] < mu[i])

    def attack(b: tuple[int, int], c: tuple[int, int]) -> bool:
        (i, j), (k, m) = b, c
        return j == m or (j == m + 1 and k > i) or (m == j + 1 and i > k)

    order = sorted(cells, key=lambda b: (-b[1], -b[0]))
    found: dict[tuple[int, ...], list[Scalar]] = {}
    for values in product(range(1, n + 1), repeat=len(boxes)):
        filling = {(i, 0): basement[i] for i in range(n)}
        filling.update(zip(boxes, values, strict=True))
        if any(filling[b] == filling[c] for b, c in combinations(cells, 2)
               if attack(b, c) and (b[1] or c[1])):
            continue
        weight, maj, inversions = ONE, 0, 0
        for i, j in boxes:
            if filling[i, j] > filling[i, j - 1]:
                maj += leg(i, j) + 1
                inversions -= arm(i, j)
            if filling[i, j] != filling[i, j - 1]:
                weight = weight * (1 - T) / (1 - Q ** (leg(i, j) + 1) * T ** (arm(i, j) + 1))
        inversions += sum(
            1 for b, c in combinations(order, 2)
            if attack(b, c) and filling[b] > filling[c])
        inversions -= sum(1 for i, j in combinations(range(n), 2) if mu[i] <= mu[j])
        coinversions = sum(arm(*b) for b in boxes) - inversions
        exponents = [0] * n
        for b in boxes:
            exponents[filling[b] - 1] += 1
        found.setdefault(tuple(exponents), []).append(weight * Q**maj * T**coinversions)
    return LaurentPolynomial.of_scalars(n, RING, {e: total(c) for e, c in found.items()})


@pytest.mark.parametrize("mu", [(1, 0, 2), (0, 1, 1), (2, 0, 0), (0, 2, 1), (1, 2, 0)])
def test_basement_is_the_fillings_sum_made_monic(mu: tuple[int, ...]) -> None:
    for w in indices.permutations(3):
        expected = fillings_sum(mu, w)
        leader = indices.act(w, mu)
        monic = expected * expected.coefficient(leader).inverse()
        assert with_basement(mu, w).to_monomials() == monic


@pytest.mark.parametrize("eta", [(1, 0, 2), (0, 1, 1), (2, 0, 0), (0, -1, 1), (1, 2, 0)])
def test_reversed_convention_is_the_eigenfunction_of_z(eta: tuple[int, ...]) -> None:
    # Z_i = t^(i-n) T_i ... T_(n-1) T_pi^-1 T_1^-1 ... T_(i-1)^-1 (Baker and Forrester,
    # A q-analogue of the type A Dunkl operator and integral kernel, 1997; from memory),
    # eigenvalue q^(eta_i) t^(-#{k<i: eta_k >= eta_i} - #{k>i: eta_k > eta_i})
    n = 3
    f = FAMILIES["E (reversed)"].to_monomials(eta, n)
    for i in range(1, n + 1):
        word = Operator.scalar(n, T ** (i - n))
        for k in range(i, n):
            word = word * Operator.letter(n, "T", k)
        word = word * Operator.letter(n, "T_pi").inverse()
        for k in range(1, i):
            word = word * Operator.letter(n, "T", k).inverse()
        above = sum(1 for k in range(i - 1) if eta[k] >= eta[i - 1])
        above += sum(1 for k in range(i, n) if eta[k] > eta[i - 1])
        assert act(word, f) == f * (Q ** eta[i - 1] * T**-above)
    assert f.coefficient(eta) == 1


def test_reversed_product_rule_multiplies_out() -> None:
    family = FAMILIES["E (reversed)"]
    for eta in [(1, 0, 2), (0, 2, 1), (0, 0, 1)]:
        f = family.to_monomials(eta, 3)
        for j in (1, 2, 3):
            x = LaurentPolynomial.generator(3, RING, j)
            assert family.times_generator(eta, 3, j, 1) == family.from_monomials(x * f)
