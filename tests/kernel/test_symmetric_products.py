"""Product rules of symmetric families, each against multiplying out, and their explanations."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families import littlewood_richardson as rule
from spanwright.kernel.families import nonsymmetric_macdonald as nonsymmetric
from spanwright.kernel.families.diagrams import (
    border_strips_above,
    horizontal_strips_above,
    horizontal_strips_below,
    vertical_strips_above,
)
from spanwright.kernel.families.kostka import kostka, kostka_row
from spanwright.kernel.families.macdonald import derive_e, derive_row, multiply_by_e
from spanwright.kernel.families.nonsymmetric_products import (
    elementary_times_E,
    into_E,
    times_E,
)
from spanwright.kernel.families.registry import family
from spanwright.kernel.families.schur import derive_product
from spanwright.kernel.indices import compositions, conjugate, padded, partitions

SMALL = [index for size in range(5) for index in partitions(size)]


def rows_between(inner: tuple[int, ...], outer: tuple[int, ...]) -> list[tuple[int, int]]:
    n = max(len(inner), len(outer))
    return list(zip(padded(inner, n), padded(outer, n), strict=True))


@given(st.sampled_from(SMALL), st.integers(0, 4), st.sampled_from([None, 1, 2, 3, 4]))
@settings(max_examples=effort(40))
def test_strips_against_their_definition(
    inner: tuple[int, ...], size: int, n: int | None
) -> None:
    limit = sum(inner) + size if n is None else n
    outers = [
        outer for outer in partitions(sum(inner) + size, limit)
        if all(a <= b for a, b in rows_between(inner, outer))]
    horizontal = {
        outer for outer in outers
        if all(b <= a for (a, _), (_, b) in
               zip(rows_between(inner, outer), rows_between(inner, outer)[1:]))}
    vertical = {
        outer for outer in outers if all(b - a <= 1 for a, b in rows_between(inner, outer))}
    if len(inner) > limit:
        return
    found = list(horizontal_strips_above(inner, size, n))
    assert len(found) == len(set(found)) and set(found) == horizontal
    found = list(vertical_strips_above(inner, size, n))
    assert len(found) == len(set(found)) and set(found) == vertical
    for outer in horizontal:
        assert inner in list(horizontal_strips_below(outer, size))
    for sign, outer in border_strips_above(inner, size, n) if size else ():
        rows = [(a, b) for a, b in rows_between(inner, outer) if b > a]
        assert sign == (-1) ** (len(rows) - 1)
        # consecutive rows overlap in exactly one column
        assert all(low_b == high_a + 1 for (high_a, _), (_, low_b) in zip(rows, rows[1:]))


@given(st.sampled_from("mehpsPJ"), st.sampled_from("mehpsPJ"), st.sampled_from(SMALL),
       st.sampled_from(SMALL), st.integers(1, 3))
@settings(max_examples=effort(120))
def test_products_against_multiplying_out(
    one: str, two: str, left: tuple[int, ...], right: tuple[int, ...], n: int
) -> None:
    first, second = family(one), family(two)
    found = first.times_element(left, n, second, right)
    if found is None:
        assert one != two
        return
    product = first.to_monomials(left, n) * second.to_monomials(right, n)
    assert found == first.from_monomials(product)


@given(st.sampled_from([p for size in range(7) for p in partitions(size)]),
       st.sampled_from([p for size in range(7) for p in partitions(size)]))
@settings(max_examples=effort(60))
def test_littlewood_richardson_symmetries(left: tuple[int, ...], right: tuple[int, ...]) -> None:
    found = rule.littlewood_richardson(left, right)
    assert found == rule.littlewood_richardson(right, left)
    turned = rule.littlewood_richardson(conjugate(left), conjugate(right))
    assert {conjugate(shape): c for shape, c in turned.items()} == found
    # dimensions: f^left f^right binomial = sum c f^nu
    one, two, size = (1,) * sum(left), (1,) * sum(right), sum(left) + sum(right)
    number = kostka(left, one) * kostka(right, two)
    for k in range(sum(right)):
        number = number * (size - k) // (k + 1)
    assert sum(c * kostka(shape, (1,) * size) for shape, c in found.items()) == number
    for n in (1, 2, 3):
        kept = {shape: c for shape, c in found.items() if len(shape) <= n}
        assert rule.littlewood_richardson(left, right, n) == kept


def is_lattice(word: tuple[int, ...]) -> bool:
    return all(
        word[:k].count(letter) >= word[:k].count(letter + 1)
        for k in range(len(word) + 1) for letter in range(1, max(word, default=0)))


@pytest.mark.parametrize(("left", "right"), [((2, 1), (2, 1)), ((3, 1), (2, 2)), ((2,), (1, 1))])
def test_tableaux_are_what_the_rule_asks(left: tuple[int, ...], right: tuple[int, ...]) -> None:
    explanation = derive_product(left, right)
    counts: dict[tuple[int, ...], int] = {}
    for row in explanation.rows:
        assert isinstance(row, rule.TableauRow)
        counts[row.target] = counts.get(row.target, 0) + 1
        assert tuple(row.word.count(k + 1) for k in range(len(right))) == right
        assert is_lattice(row.word)
        assert row.word == tuple(letter for r in row.rows for letter in reversed(r))
        columns: dict[tuple[int, int], int] = {}
        for i, letters in enumerate(row.rows):
            start = left[i] if i < len(left) else 0
            assert list(letters) == sorted(letters) and start + len(letters) == row.target[i]
            for k, letter in enumerate(letters):
                columns[i, start + k] = letter
                assert columns.get((i - 1, start + k), 0) < letter
    assert counts == rule.littlewood_richardson(left, right)
    assert len(set(explanation.rows)) == len(explanation.rows)
    assert explanation.result() == family("s").times_element(left, 8, family("s"), right)
    assert rule.coefficient((9, 9), left, right) == 0
    assert rule.tableau_rows(left, right, 1) == [
        row for row in explanation.rows if len(row.target) <= 1]


def test_kostka_numbers_count_tableaux() -> None:
    def count(shape: tuple[int, ...], content: tuple[int, ...]) -> int:
        """Semistandard fillings, letter by letter from the largest, without the memory."""
        if not any(content):
            return int(not any(shape))
        return sum(
            count(inner, content[:-1]) for inner in horizontal_strips_below(shape, content[-1]))

    for size in range(6):
        for shape in partitions(size):
            for content in compositions(size, 3):
                assert kostka(shape, content) == count(shape, content)
            assert set(kostka_row(shape, 3)) <= set(partitions(size, 3))
    assert kostka((2, 1), (1, 1)) == 0


@pytest.mark.parametrize("mu", [
    (0, 0), (2, 0), (-1, 1), (1, 0, 2), (0, 2, 0), (0, -1, 1), (1, 0, 2, 0), (0, 1, 1, 2)])
def test_elementary_times_E_against_multiplying_out(mu: tuple[int, ...]) -> None:
    n, e = len(mu), family("e")
    for r in range(n + 1):
        product = e.to_monomials((r,), n) * nonsymmetric.to_monomials(mu)
        assert elementary_times_E(r, mu) == nonsymmetric.from_monomials(product)
    assert elementary_times_E(n + 1, mu) == {} and elementary_times_E(-1, mu) == {}


@given(st.sampled_from("mehpsPJ"), st.sampled_from(SMALL),
       st.tuples(st.integers(0, 2), st.integers(-1, 1), st.integers(0, 2)))
@settings(max_examples=effort(25))
def test_symmetric_times_E_against_multiplying_out(
    name: str, index: tuple[int, ...], mu: tuple[int, ...]
) -> None:
    one = family(name)
    product = one.to_monomials(index, 3) * nonsymmetric.to_monomials(mu)
    assert times_E(one, index, mu) == nonsymmetric.from_monomials(product)


@pytest.mark.parametrize("name", "mehpsPJ")
def test_into_E_against_the_way_through_monomials(name: str) -> None:
    one = family(name)
    for index in [(1,), (2, 1), (2, 2), (1, 1, 1), (3, 1), (4,)]:
        assert into_E(one, index, 3) == nonsymmetric.from_monomials(one.to_monomials(index, 3))
    assert into_E(family("E"), (1, 0), 2) is None
    assert times_E(family("E"), (1, 0), (1, 0)) is None


def test_pieri_rows_explain_the_product() -> None:
    P = family("P")
    for n in (2, 3):
        for index in partitions(4, n):
            for r in range(n + 1):
                explanation = derive_e(index, r, n)
                assert explanation.result() == multiply_by_e(index, r, n)
                vanishing = {row.target for row in explanation.rows if row.obstacle}
                assert vanishing == {
                    outer for outer in vertical_strips_above(index, r) if len(outer) > n}
                by_rows = derive_row(index, r, n)
                assert by_rows.result() == P.times_element(index, n, P, (r,) if r else ())
                assert "Macdonald" in by_rows.reference and "psi'" in explanation.statement
    row = derive_e((1, 1), 1, 2).rows[-1]
    assert row.obstacle == "more than 2 parts"
    assert row.coefficient == Scalar.zero(row.coefficient.ring)
