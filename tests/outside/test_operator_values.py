"""Operators against a plain sympy implementation of their definitions and published values."""

from __future__ import annotations

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.operators.actions import act_on_polynomial
from spanwright.kernel.operators.canonical import straighten
from spanwright.kernel.operators.words import Operator
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get()
Q, T = Scalar.parameter(RING, "q"), Scalar.parameter(RING, "t")
q, t = sympy.symbols("q t")


class Plain:
    """The definitions, word for word: T_i, T_i^-1, T_pi^±1, Y_i, d_i, pi_i on sympy expressions."""

    def __init__(self, n):
        self.n = n
        self.x = sympy.symbols(f"x1:{n + 1}")

    def s(self, i, f):
        a, b = self.x[i - 1], self.x[i]
        return f.subs({a: b, b: a}, simultaneous=True)

    def d(self, i, f):
        return sympy.cancel((f - self.s(i, f)) / (self.x[i - 1] - self.x[i]))

    def pi(self, i, f):
        return self.d(i, self.x[i - 1] * f)

    def t(self, i, f):
        return sympy.cancel(t * f - (t * self.x[i - 1] - self.x[i]) * self.d(i, f))

    def t_inverse(self, i, f):
        return sympy.cancel((self.t(i, f) + (1 - t) * f) / t)

    def t_pi(self, f):
        images = (*self.x[1:], self.x[0] / q)
        return f.subs(dict(zip(self.x, images)), simultaneous=True)

    def t_pi_inverse(self, f):
        images = (q * self.x[-1], *self.x[:-1])
        return f.subs(dict(zip(self.x, images)), simultaneous=True)

    def y(self, i, f):
        """Y_1 = T_pi T_(n-1) ... T_1, Y_(i+1) = t T_i^-1 Y_i T_i^-1."""
        if i == 1:
            for j in range(1, self.n):
                f = self.t(j, f)
            return self.t_pi(f)
        return t * self.t_inverse(i - 1, self.y(i - 1, self.t_inverse(i - 1, f)))


def in_sympy(f: LaurentPolynomial, x) -> sympy.Expr:
    found = sympy.Integer(0)
    for exponents, c in f.items():
        found += scalar_in_sympy(c) * sympy.prod([v**e for v, e in zip(x, exponents)])
    return found


def scalar_in_sympy(c: Scalar) -> sympy.Expr:
    generators = [{"q": q, "t": t}[name] for name in reversed(c.ring.names)]

    def monomial(exponents):
        return sympy.prod([g ** int(e) for g, e in zip(generators, exponents)])

    def polynomial(p):
        return sum(int(k) * monomial(e) for e, k in zip(p.monoms(), p.coeffs()))

    value = sympy.Rational(int(c.content.p), int(c.content.q)) * monomial(c.monomial)
    value *= polynomial(c.numerator_rest)
    for factor, e in c.factors.items():
        value *= polynomial(factor.polynomial) ** e
    return value


@settings(max_examples=effort(6))
@given(data=st.data())
def test_letters_agree_with_their_definitions(data):
    n = data.draw(st.integers(2, 3))
    plain = Plain(n)
    terms = data.draw(st.dictionaries(
        st.tuples(*[st.integers(-1, 2)] * n), st.integers(-2, 2).filter(bool), min_size=1,
        max_size=2))
    f = LaurentPolynomial.of_integers(n, RING, terms)
    g = in_sympy(f, plain.x)
    i, j = data.draw(st.integers(1, n - 1)), data.draw(st.integers(1, n))

    def letter(kind, subscript=None):
        return Operator.letter(n, kind, subscript)

    for operator, expected in (
        (letter("s", i), plain.s(i, g)), (letter("d", i), plain.d(i, g)),
        (letter("pi", i), plain.pi(i, g)), (letter("T", i), plain.t(i, g)),
        (letter("T", i) ** -1, plain.t_inverse(i, g)), (letter("T_pi"), plain.t_pi(g)),
        (letter("T_pi") ** -1, plain.t_pi_inverse(g)), (letter("Y", j), plain.y(j, g)),
        (letter("tau_pi"), plain.x[0] * plain.t_pi(g)),
        (letter("T", i) * letter("Y", j), plain.t(i, plain.y(j, g))),
    ):
        found = in_sympy(act_on_polynomial(operator, f), plain.x)
        assert sympy.cancel(found - expected) == 0


def canonical(operator):
    return straighten(operator).terms


def test_reduction_examples_of_one_kind_of_letter():
    """Hand computations from d_i f = (s_i f) d_i + (d_i f), d_i d_i = 0 (Demazure 1974), and for
    T_i from Lusztig (1989), (1 + T_1)-eigenspaces checked on x_1 and x_2.
    """
    def a(kind, i):
        return Operator.letter(3, kind, i)

    one = Scalar.one(RING)
    e, s_1, s_2, s_12 = (1, 2, 3), (2, 1, 3), (1, 3, 2), (2, 3, 1)
    X, d = (lambda i: a("X", i)), (lambda i: a("d", i))
    assert canonical(d(1) * X(1) * d(1)) == {((0, 0, 0), s_1): one}
    assert canonical(d(1) * X(1) * X(1) * d(2) * X(2) * X(3)) == {
        ((1, 2, 1), s_12): one, ((1, 1, 1), s_2): one}
    assert canonical(a("pi", 1) * X(1) ** 2) == {
        ((0, 2, 0), s_1): one, ((2, 0, 0), e): one, ((1, 1, 0), e): one}
    assert canonical(a("T", 1) * X(1) ** 2) == {
        ((0, 2, 0), s_1): one, ((1, 1, 0), e): 1 - T, ((0, 2, 0), e): 1 - T}
    assert canonical(a("T", 1) * X(2) * a("T", 1)) == {
        ((1, 0, 0), s_1): T - 1, ((0, 1, 0), s_1): T - 1, ((1, 0, 0), e): T}


def test_cross_relations_of_rank_two():
    """Y_i X_j for n = 2 in the basis X^mu T_w Y^nu, each recomputed from the definitions by sympy.

    The table is a consequence of Cherednik's presentation (1995).
    """
    e, s = (1, 2), (2, 1)
    u = 1 / T - 1
    table = {
        (1, 1): {((1, 0), e, (1, 0)): 1 / Q, ((1, 0), s, (0, 1)): u / Q},
        (1, 2): {((0, 1), e, (1, 0)): Scalar.one(RING), ((1, 0), s, (0, 1)): -u / Q},
        (2, 1): {((1, 0), e, (0, 1)): Scalar.one(RING), ((1, 0), s, (0, 1)): -u},
        (2, 2): {((0, 1), e, (0, 1)): 1 / Q, ((1, 0), s, (0, 1)): u / Q},
    }
    plain = Plain(2)
    x = plain.x
    f = x[0] ** 2 + x[1] / x[0]
    for (i, j), terms in table.items():
        assert canonical(Operator.letter(2, "Y", i) * Operator.letter(2, "X", j)) == terms
        total = 0
        for (mu, w, nu), c in terms.items():
            g = f
            for k, power in enumerate(nu, 1):
                for _ in range(power):
                    g = plain.y(k, g)
            g = plain.t(1, g) if w == s else g
            total += scalar_in_sympy(c) * x[0] ** mu[0] * x[1] ** mu[1] * g
        assert sympy.cancel(total - plain.y(i, x[j - 1] * f)) == 0


@pytest.mark.parametrize(("n", "mu"), [(2, (1, 0)), (2, (0, 1)), (3, (0, 1, 0)), (3, (0, 0, 1))])
def test_first_nonsymmetric_macdonald_polynomials_are_common_eigenvectors(n, mu):
    """E_(eps_i) = x_i + (1-t)/(1 - q t^(n+1-i)) sum_(j<i) x_j, and its eigenvalues under Y.

    Haglund, Haiman and Loehr, A combinatorial formula for nonsymmetric Macdonald polynomials
    (2008); from memory.
    """
    plain = Plain(n)
    i = mu.index(1) + 1
    f = plain.x[i - 1] + (1 - t) / (1 - q * t ** (n + 1 - i)) * sum(plain.x[: i - 1])
    lower = (1 - T) / (1 - Q * T ** (n + 1 - i))
    g = LaurentPolynomial.of_scalars(n, RING, {
        tuple(int(k == j) for k in range(1, n + 1)): Scalar.one(RING) if j == i else lower
        for j in range(1, i + 1)})
    assert sympy.cancel(in_sympy(g, plain.x) - f) == 0
    order = sorted(range(n), key=lambda k: (mu[k], k))
    for k in range(1, n + 1):
        expected = Q ** -mu[k - 1] * T ** (n - 1 - order.index(k - 1))
        assert act_on_polynomial(Operator.letter(n, "Y", k), g) == g.scaled(expected)
        in_plain = sympy.cancel(plain.y(k, f) - scalar_in_sympy(expected) * f)
        assert in_plain == 0
