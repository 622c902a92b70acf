"""Operators acting: closed rules against polynomials, eigenvalues, matrices."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel import indices
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import Mixed, OutsideDomain
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.operators.actions import act, act_on_polynomial, as_polynomial
from spanwright.kernel.operators.questions import NotAnEigenvector, eigenvalue, matrix
from spanwright.kernel.operators.words import Operator
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
Q, T = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")
E = family("E")
NORMALISATIONS = ("plain", "balanced")
CLOSED_ON_E = (
    "X", "T", "Y", "tau", "T_pi", "tau_pi", "T_w", "symmetrizer", "antisymmetrizer")


def letter(n, kind, subscript=None, normalisation="plain"):
    return Operator.letter(n, kind, subscript, normalisation)


def element(name, n, index):
    return Expansion.element(family(name), n, index)


@st.composite
def words(draw, n, kinds, normalisation="plain", longest=3):
    result = Operator.identity(n, normalisation)
    for _ in range(draw(st.integers(1, longest))):
        kind = draw(st.sampled_from(kinds))
        exponent = draw(st.sampled_from((-1, 1, 2, 3)))
        if kind in ("symmetrizer", "antisymmetrizer"):
            factor = letter(n, kind, None, normalisation)
        elif kind in ("T_pi", "tau_pi"):
            factor = letter(n, kind, None, normalisation) ** exponent
        elif kind in ("T_w", "s", "d", "pi"):
            w = tuple(draw(st.permutations(range(1, n + 1))))
            factor = letter(n, kind[0] if kind == "T_w" else kind, w, normalisation)
        elif kind == "tau":
            factor = letter(n, kind, draw(st.integers(1, n - 1)), normalisation)
        else:
            i = draw(st.integers(1, n if kind in ("X", "Y") else n - 1))
            factor = letter(n, kind, i, normalisation) ** exponent
        result = result * factor
    return result


# --- E --------------------------------------------------------------------------------------


@pytest.mark.parametrize("normalisation", NORMALISATIONS)
@pytest.mark.parametrize("kind", CLOSED_ON_E)
@settings(max_examples=effort(8))
@given(data=st.data())
def test_closed_rules_on_e_agree_with_polynomials(kind, normalisation, data):
    n = data.draw(st.integers(2, 4))
    word = data.draw(words(n, (kind,), normalisation, 1))
    mu = data.draw(st.tuples(*[st.integers(-1, 2)] * n))
    closed = act(word, element("E", n, mu))
    assert isinstance(closed, Expansion)
    assert closed.family is E
    f = element("E", n, mu).to_monomials()
    if kind == "tau":
        # (T_i - tau_i)(Y_(i+1) - Y_i) = (1-t) Y_i up to sign, without tau on polynomials
        (tau,), = (w for w in word.terms)
        i = tau.subscript[0]
        u, v = eigenvalue(letter(n, "Y", i), mu), eigenvalue(letter(n, "Y", i + 1), mu)
        scale = 1 if normalisation == "plain" else Scalar.root_of_t().inverse()
        by_hand = letter(n, "T", i) if mu[i - 1] == mu[i] else None
        if by_hand is None:
            expected = act_on_polynomial(letter(n, "T", i), f) + f.scaled((1 - T) / (1 - v / u))
            assert closed.to_monomials() == expected * (Scalar.one(RING) * scale)
        else:
            assert closed.is_zero
    else:
        assert closed.to_monomials() == act(word, f)


@pytest.mark.parametrize("normalisation", NORMALISATIONS)
@settings(max_examples=effort(20))
@given(data=st.data())
def test_words_on_sums_of_e_agree_with_polynomials(normalisation, data):
    n = data.draw(st.integers(2, 3))
    operator = data.draw(words(n, CLOSED_ON_E, normalisation)) + data.draw(
        words(n, CLOSED_ON_E, normalisation, 2)) * (Q - 2)
    terms = data.draw(st.dictionaries(
        st.tuples(*[st.integers(-1, 2)] * n),
        st.sampled_from((Scalar.one(RING), Q, 1 / (1 - Q * T))), min_size=1, max_size=2))
    value = Expansion(E, n, terms)
    assert as_polynomial(act(operator, value)) == act_on_polynomial(
        operator, value.to_monomials())


@settings(max_examples=effort(15))
@given(data=st.data())
def test_a_letter_and_its_inverse_cancel_on_e(data):
    n = data.draw(st.integers(2, 4))
    word = data.draw(words(n, ("X", "T", "Y", "T_pi", "tau_pi", "T_w"), longest=2))
    mu = data.draw(st.tuples(*[st.integers(-1, 2)] * n))
    value = element("E", n, mu)
    assert act(word.inverse(), act(word, value)) == value


def test_letters_without_a_rule_go_through_monomials():
    value = element("E", 2, (0, 2))
    image = act(letter(2, "d", 1), value)
    assert isinstance(image, LaurentPolynomial)
    assert image == act(letter(2, "d", 1), value.to_monomials())
    # tau on a polynomial that is no E_mu reduces it to E first
    x_2 = LaurentPolynomial.generator(2, RING, 2)
    expansion = Expansion(E, 2, E.from_monomials(x_2))
    assert act(letter(2, "tau", 1), x_2) == act(letter(2, "tau", 1), expansion)


# --- other families -------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["P", "J", "m", "e", "h", "p", "s"])
@pytest.mark.parametrize("kind", ["T", "s", "d", "pi", "symmetrizer", "antisymmetrizer"])
def test_symmetric_families(name, kind):
    n = 3
    value = element(name, n, (2, 1))
    subscript = None if kind.endswith("symmetrizer") else (3, 1, 2)
    image = act(letter(n, kind, subscript), value)
    assert isinstance(image, Expansion)
    assert image.to_monomials() == act(letter(n, kind, subscript), value.to_monomials())


@settings(max_examples=effort(25))
@given(data=st.data())
def test_divided_differences_of_schubert_polynomials(data):
    w = indices.reduced_size(tuple(data.draw(st.permutations(range(1, 5)))))
    u = tuple(data.draw(st.permutations(range(1, 5))))
    value = element("S", 4, w)
    image = act(letter(4, "d", u), value)
    assert isinstance(image, Expansion)
    assert len(image) <= 1
    assert image.to_monomials() == act(letter(4, "d", u), value.to_monomials())


@pytest.mark.parametrize("name", ["kappa", "atom"])
@settings(max_examples=effort(25))
@given(data=st.data())
def test_isobaric_divided_differences_of_keys_and_atoms(name, data):
    alpha = data.draw(st.tuples(*[st.integers(0, 2)] * 3))
    w = tuple(data.draw(st.permutations(range(1, 4))))
    value = element(name, 3, alpha)
    image = act(letter(3, "pi", w), value)
    assert isinstance(image, Expansion)
    assert image.to_monomials() == act(letter(3, "pi", w), value.to_monomials())


# --- questions ------------------------------------------------------------------------------


@pytest.mark.parametrize("normalisation", NORMALISATIONS)
@settings(max_examples=effort(15))
@given(data=st.data())
def test_spectrum_of_y(normalisation, data):
    """Y_i E_mu = q^(-mu_i) t^(n - v_mu(i)) E_mu; balanced: t^((n+1)/2 - v_mu(i))."""
    n = data.draw(st.integers(1, 4))
    mu = data.draw(st.tuples(*[st.integers(-2, 3)] * n))
    i = data.draw(st.integers(1, n))
    half = 2 * n if normalisation == "plain" else n + 1
    expected = Q ** -mu[i - 1] * Scalar.root_of_t() ** (half - 2 * indices.ranks(mu)[i - 1])
    assert eigenvalue(letter(n, "Y", i, normalisation), mu) == expected
    # the same on the polynomial, by the word of Y_i in T_1, ..., T_(n-1), T_pi
    small = tuple(part % 3 - 1 for part in mu)
    f = element("E", n, small).to_monomials()
    value = eigenvalue(letter(n, "Y", i, normalisation), small)
    assert act(letter(n, "Y", i, normalisation), f) == f.scaled(value)
    assert eigenvalue(letter(n, "Y", i, normalisation), f) == value


def test_symmetric_functions_of_y_on_symmetric_macdonald_polynomials():
    total_y = letter(3, "Y", 1) + letter(3, "Y", 2) + letter(3, "Y", 3)
    value = eigenvalue(total_y, element("P", 3, (2, 1)))
    assert value == Q**-2 + Q**-1 * T + T**2


def test_no_eigenvalue_comes_with_the_result():
    with pytest.raises(NotAnEigenvector) as caught:
        eigenvalue(letter(2, "T", 1), (1, 0))
    assert caught.value.result == act(letter(2, "T", 1), element("E", 2, (1, 0)))
    with pytest.raises(OutsideDomain, match="0 is no eigenvector"):
        eigenvalue(letter(2, "T", 1), Expansion(E, 2, {}))
    assert eigenvalue(letter(2, "T", 1), (1, 1)) == T
    assert eigenvalue(letter(2, "tau", 1), (1, 1)) == 0
    assert eigenvalue(letter(2, "d", 1), element("P", 2, (1,))) == 0


def test_matrix_on_an_orbit():
    elements = [element("E", 3, mu) for mu in indices.orbit((2, 1, 0))]
    for i in (1, 2):
        found = matrix(letter(3, "T", i), elements)
        assert found.outside == ()
        for k, value in enumerate(elements):
            image = Expansion(E, 3, {})
            for row, other in zip(found.rows, elements, strict=True):
                image = image + other.scaled(row[k])
            assert image == act(letter(3, "T", i), value)
    diagonal = matrix(letter(3, "Y", 1), elements).rows
    assert [[bool(c) for c in row] for row in diagonal] == [
        [j == k for j in range(6)] for k in range(6)]


def test_matrix_says_what_is_missing():
    elements = [element("E", 2, mu) for mu in ((1, 0), (0, 0))]
    found = matrix(letter(2, "T", 1), elements)
    assert (found.rows, found.missing, found.outside) == ((), ((0, 1),), (0,))
    assert found.family_name == "E"


def test_matrix_on_polynomials():
    x, y = (LaurentPolynomial.generator(2, RING, j) for j in (1, 2))
    found = matrix(letter(2, "s", 1), [x + y, x - y])
    assert found.rows == ((1, 0), (0, -1))
    found = matrix(letter(2, "d", 1), [x, x * x])
    assert (found.outside, found.missing) == ((0, 1), ((0, 1), (0, 0)))
    with pytest.raises(OutsideDomain, match="linearly dependent"):
        matrix(letter(2, "s", 1), [x, y, x + y])


def test_operators_and_polynomials_need_the_same_n():
    with pytest.raises(Mixed, match="on 3 variables and a polynomial in 2"):
        act(letter(3, "T", 1), element("E", 2, (1, 0)))
