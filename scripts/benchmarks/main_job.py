"""E_mu, its products and its printed form: against sympy, against other routes, against a floor."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from typing import Any

from benchmarking import Case, Contender
from spanwright.kernel import reduction
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families import nonsymmetric_macdonald as nonsymmetric
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.product_form import _grouped_once, _row, _short_numerators
from spanwright.rendering.scalars import _factor_texts, _terms
from spanwright.rendering.text import text

Index = tuple[int, ...]
E = family("E")


def forget() -> None:
    """Empty the memories of E_mu, of intertwiners and of texts."""
    nonsymmetric.forget_polynomials()
    nonsymmetric.quadratic.cache_clear()
    nonsymmetric.mixing.cache_clear()
    forget_texts()


def forget_texts() -> None:
    """Empty the memories of printed factors and monomials."""
    _grouped_once.cache_clear()
    _row.cache_clear()
    _short_numerators.clear()
    _terms.cache_clear()
    _factor_texts.cache_clear()


def shown(mu: Index) -> str:
    """An index for a label."""
    return f"E_({','.join(map(str, mu))})"


# E_mu from 1


def in_sympy(mu: Index) -> dict[Index, Any]:
    """The same recursion with sympy's rational functions as coefficients, one dictionary a step."""
    import sympy

    field, q, t = sympy.field("q, t", sympy.QQ)
    f = {(0,) * len(mu): field.one}
    for step, nu in reversed(nonsymmetric.recursion_path(mu)):
        found: dict[Index, Any] = {}
        if step == "tau_pi":
            for e, c in f.items():
                found[(e[-1] + 1, *e[:-1])] = c * q ** (nu[-1] - e[-1])
            f = found
            continue
        i = int(step.removeprefix("tau_"))
        u = nonsymmetric.weights(nu)
        a, b = nonsymmetric.ratio(u[i - 1], u[i])
        z = q**a * t**b
        mixing = (1 - t) / (1 - z)

        def add(e: Index, c: Any, found: dict[Index, Any] = found) -> None:
            found[e] = found[e] + c if e in found else c

        # T_i f + mixing f, with T_i = t s_i + (1 - t) x_(i+1) d_i
        for e, c in f.items():
            before, (k, m), after = e[: i - 1], e[i - 1 : i + 1], e[i + 1 :]
            add(e, c * mixing)
            add((*before, m, k, *after), c * t)
            low, high, sign = (m, k, 1) if k > m else (k, m, -1)
            for j in range(low, high):
                add((*before, j, k + m - j, *after), c * (sign * (1 - t)))
        f = {e: c for e, c in found.items() if c}
    return f


def at_a_point(value: object) -> object:
    """Either answer at q = 2/7, t = 3/5, exactly."""
    from fractions import Fraction

    if isinstance(value, LaurentPolynomial):
        ring = value.ring
        images = {
            "q": Scalar.number(ring, 2, 7),
            "t": Scalar.number(ring, 3, 5)}
        return {e: c.substitute(images).as_fraction() for e, c in value.items()}
    found = {}
    for e, c in value.items():  # type: ignore[attr-defined]
        parts = []
        for p in (c.numer, c.denom):
            terms = [Fraction(int(k)) * Fraction(2, 7) ** m[0] * Fraction(3, 5) ** m[1]
                     for m, k in p.terms()]
            parts.append(sum(terms))
        found[e] = parts[0] / parts[1]
    return found


def floor(mu: Index) -> Contender:
    """One multiplication of every coefficient of the answer by a binomial, for each step."""
    polynomial = nonsymmetric.to_monomials(mu)
    context = polynomial.ring.context
    coefficients = list(polynomial.terms.values())
    binomial = context.from_dict({(0, 0): 1, (2, 1): -1})
    n_steps = len(nonsymmetric.recursion_path(mu))
    return Contender(
        f"the floor: {n_steps} such multiplications",
        lambda: [c * binomial for c in coefficients], times=n_steps)


def recursion_case(mu: Index) -> Case:
    """E_mu by us, by sympy and the floor's time."""
    return Case(
        name=f"recursion-{''.join(map(str, mu))}",
        what=f"{shown(mu)} from 1",
        contenders=[
            Contender("ours", lambda: nonsymmetric.to_monomials(mu), prepare=forget),
            Contender("sympy's rational functions", lambda: in_sympy(mu))],
        answer=at_a_point, n_units=len(nonsymmetric.to_monomials(mu)), unit="coefficient")


def floor_case(mu: Index) -> Case:
    """E_mu against its floor: their answers are different things."""
    return Case(
        name=f"floor-{''.join(map(str, mu))}",
        what=f"{shown(mu)} from 1 against the kernel's floor",
        contenders=[
            floor(mu), Contender("ours", lambda: nonsymmetric.to_monomials(mu), prepare=forget)])


# products


def monk_case(mu: Index, j: int) -> Case:
    """x_j E_mu by the closed rule, and multiplied out and re-expanded."""
    n = len(mu)
    x_j = LaurentPolynomial.generator(n, nonsymmetric.RING, j)
    return Case(
        name=f"monk-{''.join(map(str, mu))}",
        what=f"x_{j} {shown(mu)} in the E basis",
        contenders=[
            Contender("closed rule", lambda: nonsymmetric.multiply_by_generator(mu, j),
                      prepare=forget),
            Contender("multiplied out and re-expanded, memory empty",
                      lambda: nonsymmetric.from_monomials(nonsymmetric.to_monomials(mu) * x_j),
                      prepare=forget),
            Contender("the same, every E remembered",
                      lambda: nonsymmetric.from_monomials(nonsymmetric.to_monomials(mu) * x_j))],
        answer=lambda found: found)


def long_rule_case(n: int) -> Case:
    """x_j E_mu with n distinct parts: 2^(n-1) terms."""
    mu = tuple(range(n))
    j = n // 2
    n_terms = len(nonsymmetric.multiply_by_generator(mu, j))
    return Case(
        name=f"closed-rule-{n}", what=f"x_{j} E_mu for n = {n} and distinct parts",
        contenders=[
            ("closed rule", lambda: nonsymmetric.multiply_by_generator(mu, j)),
            Contender("the same, nothing remembered",
                      lambda: nonsymmetric.multiply_by_generator(mu, j), prepare=forget)],
        n_units=n_terms)


def product_case(mu: Index, nu: Index) -> Case:
    """E_mu E_nu by both routes, each E remembered, and what is chosen by itself."""
    n = len(mu)
    factor, other = E.to_monomials(mu, n), Expansion.element(E, n, nu)
    polynomial = E.to_monomials(nu, n)
    return Case(
        name=f"product-{''.join(map(str, mu))}-{''.join(map(str, nu))}",
        what=f"{shown(mu)} {shown(nu)} in the E basis",
        contenders=[
            ("as chosen", lambda: reduction.multiply_polynomial(factor, other)),
            ("x_1, ..., x_n by the closed rule",
             lambda: reduction._by_closed_rule(factor, other)),
            ("multiplied out and re-expanded",
             lambda: Expansion(E, n, E.from_monomials(factor * polynomial)))],
        answer=lambda found: found)


# printing


def rendering_case(mu: Index) -> Case:
    """The printed form, the memory of factors and monomials empty, against computing E_mu."""
    polynomial = nonsymmetric.to_monomials(mu)

    return Case(
        name=f"rendering-{''.join(map(str, mu))}", what=f"{shown(mu)} computed and as text",
        contenders=[
            Contender("computed", lambda: nonsymmetric.to_monomials(mu), prepare=forget),
            Contender("as text", lambda: text(polynomial), prepare=forget_texts)],
        n_units=sum(len(c) for c in polynomial.terms.values()), unit="parameter term")


# starting


def _fresh(*arguments: str) -> Callable[[], object]:
    return lambda: subprocess.run(
        [sys.executable, *arguments], check=True, stdout=subprocess.DEVNULL)


def start_case() -> Case:
    """What a reader waits for."""
    return Case(
        name="first-answer", what="a fresh interpreter to the end of its first answer",
        contenders=[
            ("bare Python", _fresh("-c", "pass")),
            ("spanwright --version", _fresh("-m", "spanwright", "--version")),
            ("spanwright -e 1+1", _fresh("-m", "spanwright", "-e", "1+1")),
            ("spanwright -e 'fix n = 3; x_1 E_201'",
             _fresh("-m", "spanwright", "-e", "fix n = 3; x_1 E_201")),
            ("import of the shell", _fresh("-c", "import spanwright.shell.loop"))])


def cases(is_quick: bool) -> list[Case]:
    """Computing, multiplying, printing, starting."""
    small: list[Case] = [
        recursion_case((0, 1, 2, 3)),
        floor_case((0, 1, 2, 3)),
        floor_case((0, 2, 3, 5)),
        monk_case((0, 1, 2, 1), 2),
        long_rule_case(12),
        product_case((0, 2, 1), (1, 0, 2)),
        rendering_case((0, 2, 3, 5)),
        start_case()]
    if is_quick:
        return small
    return [
        *small,
        recursion_case((0, 2, 3, 5)),
        monk_case((0, 2, 1, 3), 2),
        product_case((0, 1, 2, 0), (1, 0, 0, 1))]
