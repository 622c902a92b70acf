"""Polynomials and expansions as tables print them, read for tests: "x1^2x2+b x1", "S_231+S_312"."""

from __future__ import annotations

import re

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

RING = ParameterRing.get().extended(["beta"])


def _terms(text: str) -> list[tuple[int, str]]:
    """The signed terms of a sum written without nested parentheses around signs."""
    pieces = re.findall(r"([+-]?)([^+-]+)", text.replace(" ", ""))
    return [(-1 if sign == "-" else 1, body) for sign, body in pieces]


def _coefficient(body: str) -> tuple[Scalar, str]:
    """A leading number and power of b (for beta), and the rest."""
    match = re.fullmatch(r"(\d*)(b?)(?:(?<=b)\^(\d+))?(.*)", body)
    assert match is not None
    number, letter, power, rest = match.groups()
    exponent = int(power or 1) if letter else 0
    return Scalar.monomial_of(
        RING, RING.exponents({"beta": exponent}), int(number or 1)), rest


def polynomial(text: str, n: int) -> LaurentPolynomial:
    """A polynomial in x1, ..., xn and b, products by juxtaposition."""
    found = LaurentPolynomial.zero(n, RING)
    for sign, body in _terms(text):
        c, rest = _coefficient(body)
        exponents = [0] * n
        factors = re.findall(r"x(\d)(?:\^(\d+))?", rest)
        assert "".join(f"x{j}" + (f"^{e}" if e else "") for j, e in factors) == rest
        for j, e in factors:
            exponents[int(j) - 1] += int(e or 1)
        found = found + LaurentPolynomial.monomial(n, tuple(exponents), c * sign)
    return found


def expansion(text: str) -> dict[tuple[int, ...], Scalar]:
    """A sum of basis elements, S_231 or kappa_(1,0,2), of one family with coefficients."""
    found: dict[tuple[int, ...], Scalar] = {}
    for sign, body in _terms(text):
        c, rest = _coefficient(body)
        match = re.fullmatch(r"[A-Za-z]+_(?:\(([\d,]+)\)|(\d+))", rest)
        assert match is not None, rest
        parts = match[1].split(",") if match[1] else match[2]
        found[tuple(map(int, parts))] = c * sign
    return found
