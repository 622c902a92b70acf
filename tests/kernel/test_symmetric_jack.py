"""Jack polynomials: the limit of P, the differential operator, integrality, special alphas."""

from __future__ import annotations

import pytest

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain, Pole
from spanwright.kernel.families import macdonald
from spanwright.kernel.families.jack import (
    ALPHA,
    ONE,
    RING,
    expand_in_jack,
    integral_jack,
    jack,
    linear_factor,
)
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import conjugate, partitions
from spanwright.kernel.laurent import LaurentPolynomial

CASES = [(index, n) for n in (2, 3, 4) for size in range(5) for index in partitions(size, n)]


def derivative(f: LaurentPolynomial, i: int) -> LaurentPolynomial:
    """x_i d/dx_i, i from 0."""
    return LaurentPolynomial.of_scalars(f.n, RING, {e: c * e[i] for e, c in f.items()})


@pytest.mark.parametrize(("index", "n"), CASES)
def test_jack_is_an_eigenfunction(index: tuple[int, ...], n: int) -> None:
    """(alpha/2) sum x_i^2 d_i^2 + sum_(i<j) (x_i^2 d_i - x_j^2 d_j)/(x_i - x_j).

    Eigenvalue (alpha/2) sum l_i (l_i - 1) + sum (n - i) l_i: Stanley (1989), section 3.
    """
    f = jack(index, n)
    x = [LaurentPolynomial.generator(n, RING, j) for j in range(1, n + 1)]
    half = ALPHA * Scalar.number(RING, 1, 2)
    image = LaurentPolynomial.zero(n, RING)
    for i in range(n):
        once = derivative(f, i)
        image = image + (derivative(once, i) - once).scaled(half)
        for j in range(i + 1, n):
            top = x[i] * once - x[j] * derivative(f, j)
            if top:
                image = image + top.divided_exactly(x[i] - x[j])
    eigenvalue = half * sum(part * (part - 1) for part in index) + sum(
        (n - i) * part for i, part in enumerate(index, 1))
    assert image == f.scaled(eigenvalue)


@pytest.mark.parametrize("alpha", [1, 2, 3])
def test_jack_is_the_limit_of_P_for_whole_alpha(alpha: int) -> None:
    """q = t^alpha first, then t = 1: the factors 1 - t are gone by then."""
    base = macdonald.RING
    t = Scalar.parameter(base, "t")
    for index, n in CASES:
        f = family("P").to_monomials(index, n).substitute_parameters({"q": t**alpha})
        f = f.substitute_parameters({"t": Scalar.one(base)})
        assert f == jack(index, n, Scalar.number(RING, alpha))


def test_jack_is_the_limit_of_P_for_half_alphas() -> None:
    """q = t^3 with t^2 in the place of t is alpha = 3/2."""
    base = macdonald.RING
    t = Scalar.parameter(base, "t")
    for index, n in CASES:
        f = family("P").to_monomials(index, n).substitute_parameters({"q": t**3, "t": t**2})
        f = f.substitute_parameters({"t": Scalar.one(base)})
        assert f == jack(index, n, Scalar.number(RING, 3, 2))


def test_special_alphas() -> None:
    """alpha = 1 Schur, 0 elementary of the conjugate, and zonal polynomials at 2 (Stanley 1989)."""
    for index, n in CASES:
        assert jack(index, n, ONE) == family("s").to_monomials(index, n)
        assert jack(index, n, Scalar.zero(RING)) == family("e").to_monomials(conjugate(index), n)
    two = Scalar.number(RING, 2)
    assert jack((2,), 2, two).coefficient((1, 1)) == Scalar.number(RING, 2, 3)


def test_integral_form_has_natural_coefficients() -> None:
    """Knop and Sahi, A recursion and a combinatorial formula for Jack polynomials (1997)."""
    for size in range(1, 6):
        factorial = 1
        for k in range(2, size + 1):
            factorial *= k
        for index in partitions(size):
            f = integral_jack(index, size)
            for _, c in f.items():
                assert c.is_polynomial and all(v > 0 for v in c.expanded_rest().coeffs())
            assert f.coefficient((1,) * size) == factorial


def test_expansion_inverts() -> None:
    for index, n in CASES:
        assert expand_in_jack(jack(index, n)) == {index: ONE}
    f = family("s").to_monomials((2, 1), 3)
    found = expand_in_jack(f)
    back = LaurentPolynomial.zero(3, RING)
    for index, c in found.items():
        back = back + jack(index, 3).scaled(c)
    assert back == f
    with pytest.raises(OutsideDomain) as caught:
        expand_in_jack(family("P").to_monomials((2, 1), 3))
    assert caught.value.code == "mixed-parameters"


def test_poles_are_named() -> None:
    with pytest.raises(Pole, match="pole"):
        jack((2,), 2, Scalar.number(RING, -1))
    assert linear_factor(0, 3) == 3
