"""Hecke operators and Y_i written plainly on sympy's polynomials: an independent second opinion."""

from __future__ import annotations

from typing import Any

import sympy

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import PLAIN, scalar_text

FIELD, q, t = sympy.field("q, t", sympy.QQ)
Polynomial = Any
"""An element of a sympy ring over Q(q, t)."""


def ring_of(n: int) -> Any:
    """Q(q, t)[x_1, ..., x_n]."""
    return sympy.ring([f"x{j}" for j in range(1, n + 1)], FIELD.to_domain())[0]


def scalar(value: Scalar) -> Any:
    """A scalar of ours in sympy's field, through its printed form."""
    return FIELD(eval(scalar_text(value, PLAIN), {"q": q, "t": t}))


def polynomial(f: LaurentPolynomial) -> Polynomial:
    """A polynomial of ours, no negative exponents, as one of sympy's."""
    return ring_of(f.n).from_dict({e: scalar(c) for e, c in f.items()})


def swapped(f: Polynomial, i: int) -> Polynomial:
    """s_i f: x_i and x_(i+1) exchanged."""
    return f.ring.from_dict(
        {(*e[: i - 1], e[i], e[i - 1], *e[i + 1 :]): c for e, c in f.terms()})


def divided_difference(f: Polynomial, i: int) -> Polynomial:
    """(f - s_i f)/(x_i - x_(i+1)), by sympy's exact division."""
    x = f.ring.gens
    return (f - swapped(f, i)).exquo(x[i - 1] - x[i])


def T(f: Polynomial, i: int) -> Polynomial:
    """T_i f = t f - (t x_i - x_(i+1)) (f - s_i f)/(x_i - x_(i+1))."""
    x = f.ring.gens
    return f * t - (x[i - 1] * t - x[i]) * divided_difference(f, i)


def T_inverse(f: Polynomial, i: int) -> Polynomial:
    """T_i^-1 = (T_i + 1 - t)/t, from (T_i - t)(T_i + 1) = 0."""
    return (T(f, i) + f * (1 - t)) * (1 / t)


def T_pi(f: Polynomial) -> Polynomial:
    """f(x_2, ..., x_n, x_1/q)."""
    return f.ring.from_dict({(e[-1], *e[:-1]): c / q ** e[-1] for e, c in f.terms()})


def Y(f: Polynomial, i: int) -> Polynomial:
    """Y_i = t^(i-1) T_(i-1)^-1 ... T_1^-1 T_pi T_(n-1) ... T_i, no roots of t."""
    for k in range(i, f.ring.ngens):
        f = T(f, k)
    f = T_pi(f)
    for k in range(1, i):
        f = T_inverse(f, k)
    return f * t ** (i - 1)


def isobaric(f: Polynomial, i: int) -> Polynomial:
    """pi_i f = (x_i f - x_(i+1) s_i f)/(x_i - x_(i+1))."""
    return divided_difference(f.ring.gens[i - 1] * f, i)
