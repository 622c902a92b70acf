"""Published values for Grothendieck polynomials, each with its source beside it."""

from __future__ import annotations

import pytest

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families import grothendieck, schubert
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import reduced_size
from written import expansion, polynomial

G = family("G")


def w_of(digits: str) -> tuple[int, ...]:
    return reduced_size(tuple(map(int, digits)))


def combination(text: str):
    return {reduced_size(w): c for w, c in expansion(text).items()}


# Recomputed by brute force in the design notes from the definition; no published source claimed.
@pytest.mark.parametrize(("w", "text"), [
    ("132", "x1+x2+b x1x2"),
    ("1243", "x1+x2+x3+b x1x2+b x1x3+b x2x3+b^2 x1x2x3"),
    ("1342", "x1x2+x1x3+x2x3+2b x1x2x3"),
    ("1423", "x1^2+x1x2+x2^2+b x1^2x2+b x1x2^2"),
    ("2143", "x1^2+x1x2+x1x3+b x1^2x2+b x1^2x3+b x1x2x3+b^2 x1^2x2x3"),
    ("2413", "x1^2x2+x1x2^2+b x1^2x2^2"),
    ("3142", "x1^2x2+x1^2x3+b x1^2x2x3"),
    ("1432", "x1^2x2+x1^2x3+x1x2^2+x1x2x3+x2^2x3"
             "+b x1^2x2^2+2b x1^2x2x3+2b x1x2^2x3+b^2 x1^2x2^2x3"),
])
def test_table(w: str, text: str) -> None:
    f = polynomial(text, 3)
    assert G.to_monomials(w_of(w), 3) == f
    assert G.from_monomials(f) == {w_of(w): Scalar.one(grothendieck.RING)}


# Recomputed in the design notes; the rule is Lenart, A K-theory version of Monk's formula (2003).
@pytest.mark.parametrize(("r", "w", "text"), [
    (2, "1", "G_132-G_21-b G_231"),
    (2, "132", "G_1423-G_312-b G_321"),
])
def test_products_with_a_variable(r: int, w: str, text: str) -> None:
    assert G.times_generator(w_of(w), 3, r, 1) == combination(text)


def test_squares() -> None:
    # G_132^2: recomputed. Buch, A Littlewood-Richardson rule for the K-theory of Grassmannians
    # (2002): G_1^2 = G_2 + G_11 + beta G_21 at beta = -1; from memory, shapes in two variables.
    found = G.times_element((1, 3, 2), 3, G, (1, 3, 2))
    assert found == combination("G_1423+G_231+b G_2413")
    one, two, columns, hook = (
        schubert.grassmannian(shape, 2) for shape in ((1,), (2,), (1, 1), (2, 1)))
    assert found == {
        two: grothendieck.beta_power(0), columns: grothendieck.beta_power(0),
        hook: grothendieck.beta_power(1)}
    assert one == (1, 3, 2)


@pytest.mark.parametrize(("n", "numbers"), [
    # Kirillov; polygon dissection numbers of Kirkman and Cayley. From memory.
    (3, (2, 1)), (4, (5, 5, 1)), (5, (14, 21, 9, 1)), (6, (42, 84, 56, 14, 1)),
])
def test_dissections_of_polygons(n: int, numbers: tuple[int, ...]) -> None:
    parts = grothendieck.parts((1, *range(n, 1, -1)))
    assert tuple(sum(part.values()) for part in parts) == numbers
