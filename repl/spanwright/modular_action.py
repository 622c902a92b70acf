"""Operator words acting on polynomials over a finite field, letter by letter."""

from __future__ import annotations

from typing import Any

from spanwright.algebra import Unsupported
from spanwright.kernel import indices
from spanwright.kernel.witness import PRIME, ModularPolynomial, RandomPoint


def act(operator: Any, f: ModularPolynomial, point: RandomPoint) -> ModularPolynomial:
    """The operator applied to f, the last letter first."""
    if operator.normalisation != "plain":
        raise Unsupported("another normalisation")
    parts = []
    for word, c in operator.terms.items():
        current = f
        for letter in reversed(word):
            current = _letter(letter, current, point)
        parts.append(current.scaled(point.scalar(c)))
    return ModularPolynomial.total(parts) if parts else ModularPolynomial(f.n, {})


def _letter(letter: Any, f: ModularPolynomial, point: RandomPoint) -> ModularPolynomial:
    inner = getattr(letter, "operator", None)
    if inner is not None:
        for _ in range(letter.power):
            f = act(inner, f, point)
        return f
    kind, subscript = letter.kind, letter.subscript
    if kind == "X":
        return f.shifted(subscript)
    if kind == "s":
        return f.moved(subscript)
    if kind == "Y":
        for i, exponent in enumerate(subscript, 1):
            for _ in range(abs(exponent)):
                f = _cherednik(f, i, exponent > 0, point)
        return f
    if kind in ("T", "d", "pi"):
        for _ in range(abs(letter.power)):
            f = _along_word(kind, subscript, letter.power > 0, f, point)
        return f
    if kind in ("T_pi", "tau_pi"):
        for _ in range(abs(letter.power)):
            f = _turn(kind, f, letter.power > 0, point)
        return f
    raise Unsupported(f"{kind} over a finite field")


def _along_word(
    kind: str, w: tuple[int, ...], is_positive: bool, f: ModularPolynomial, point: RandomPoint
) -> ModularPolynomial:
    word = indices.reduced_word(w)
    for i in reversed(word) if is_positive else word:
        if kind == "T":
            f = point.hecke(f, i) if is_positive else point.hecke_inverse(f, i)
        elif kind == "d":
            f = f.divided_difference(i)
        else:
            f = f.shifted(tuple(int(k == i - 1) for k in range(f.n))).divided_difference(i)
    return f


def _turn(
    kind: str, f: ModularPolynomial, is_positive: bool, point: RandomPoint
) -> ModularPolynomial:
    first = (1, *([0] * (f.n - 1)))
    if kind == "T_pi":
        return point.turned(f) if is_positive else point.turned_back(f)
    if is_positive:
        return point.turned(f).shifted(first)
    return point.turned_back(f.shifted(tuple(-e for e in first)))


def _cherednik(
    f: ModularPolynomial, i: int, is_positive: bool, point: RandomPoint
) -> ModularPolynomial:
    """Y_i = t^(i-1) T_(i-1)^-1 ... T_1^-1 T_pi T_(n-1) ... T_i, or its inverse."""
    if is_positive:
        for k in range(i, f.n):
            f = point.hecke(f, k)
        f = point.turned(f)
        for k in range(1, i):
            f = point.hecke_inverse(f, k)
        return f.scaled(pow(point.t, i - 1, PRIME))
    for k in range(i - 1, 0, -1):
        f = point.hecke(f, k)
    f = point.turned_back(f)
    for k in range(f.n - 1, i - 1, -1):
        f = point.hecke_inverse(f, k)
    return f.scaled(pow(point.t, -(i - 1), PRIME))
