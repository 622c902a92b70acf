"""Symmetric families: P from E and by tableaux against sympy's eigenproblem, products, tables."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

from benchmarking import Case, Contender
from spanwright.kernel.families import littlewood_richardson as rule
from spanwright.kernel.families import macdonald, nonsymmetric_products
from spanwright.kernel.families import nonsymmetric_macdonald as nonsymmetric
from spanwright.kernel.families.diagrams import straightened
from spanwright.kernel.families.kostka import kostka
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import orbit, padded, partitions
from spanwright.kernel.laurent import LaurentPolynomial

Shape = tuple[int, ...]


def forget() -> None:
    """Start with empty memories: no E, no tableau sums, no products."""
    nonsymmetric.forget_polynomials()
    macdonald.in_monomial_symmetric.cache_clear()
    macdonald._tableau_sum.cache_clear()
    macdonald.psi.cache_clear()
    macdonald.psi_prime.cache_clear()
    macdonald.box_ratio.cache_clear()
    rule._products.cache_clear()
    nonsymmetric_products._elementary_times_E.cache_clear()


def eigenproblem_in_sympy(index: Shape, n: int) -> dict[Shape, Any]:
    """P_index in m: the difference operator on m by Macdonald (1995), VI (3.5), solved in Q(q, t).

    D m_mu = sum over the orbit of (sum_i t^(n-i) q^(alpha_i)) s_alpha is triangular; sympy's
    sparse fields, the quickest that sympy has, do the arithmetic.
    """
    from sympy import QQ
    from sympy.polys.fields import field

    _, q, t = field("q,t", QQ)
    shapes = [mu for mu in partitions(sum(index), n) if mu <= index]
    rows: dict[Shape, dict[Shape, Any]] = {}
    for mu in shapes:
        in_s: dict[Shape, Any] = {}
        for alpha in orbit(padded(mu, n)):
            found = straightened(alpha)
            if found is not None:
                sign, shape = found
                value = sum(t ** (n - i) * q**part for i, part in enumerate(alpha, 1))
                in_s[shape] = in_s.get(shape, 0) + sign * value
        rows[mu] = {
            nu: sum(c * kostka(shape, nu) for shape, c in in_s.items()) for nu in shapes}
    eigenvalue = rows[index][index]
    solved: dict[Shape, Any] = {}
    for nu in shapes:
        if not solved:
            solved[nu] = 1
            continue
        known = sum(c * rows[mu][nu] for mu, c in solved.items())
        solved[nu] = known / (eigenvalue - rows[nu][nu])
    return {mu: c for mu, c in solved.items() if c != 0}


def eigenproblem_with_polynomials(index: Shape, n: int) -> dict[Shape, Any]:
    """The same, the operator applied to polynomials in x: products, then exact division."""
    from sympy import ZZ
    from sympy.polys.fields import field
    from sympy.polys.rings import ring

    scalars, q, t = field("q,t", ZZ)
    x_ring, *x = ring([f"x{i}" for i in range(1, n + 1)], scalars)
    shapes = [mu for mu in partitions(sum(index), n) if mu <= index]
    rows: dict[Shape, dict[Shape, Any]] = {}
    vandermonde = x_ring(1)
    for i in range(n):
        for j in range(i + 1, n):
            vandermonde = vandermonde * (x[i] - x[j])
    for mu in shapes:
        image = x_ring(0)
        for i in range(n):
            f = x_ring.from_dict({e: q ** e[i] for e in orbit(padded(mu, n))})
            cofactor = x_ring(1)
            for j in range(n):
                if j != i:
                    f = f * (t * x[i] - x[j])
                for k in range(j + 1, n):
                    if i not in (j, k):
                        cofactor = cofactor * (x[j] - x[k])
            image = image + (-1) ** i * f * cofactor
        quotient = image.exquo(vandermonde)
        rows[mu] = {nu: quotient.get(padded(nu, n), scalars(0)) for nu in shapes}
    eigenvalue = rows[index][index]
    solved: dict[Shape, Any] = {}
    for nu in shapes:
        if not solved:
            solved[nu] = scalars(1)
            continue
        known = sum(c * rows[mu][nu] for mu, c in solved.items())
        solved[nu] = known / (eigenvalue - rows[nu][nu])
    return {mu: c for mu, c in solved.items() if c != 0}


def at_a_point(value: object) -> dict[Shape, Any]:
    """Coefficients at q = 2, t = 3 by partition, whichever contender made them."""
    if isinstance(value, LaurentPolynomial):
        from spanwright.kernel.coefficients import Scalar

        images = {name: Scalar.number(value.ring, k) for name, k in (("q", 2), ("t", 3))}
        return {
            tuple(part for part in e if part): c.substitute(images).as_fraction()
            for e, c in value.items() if e == tuple(sorted(e, reverse=True))}
    assert isinstance(value, dict)
    found = {}
    for mu, c in value.items():
        top, bottom = (c, 1) if isinstance(c, int) else (c.numer(2, 3), c.denom(2, 3))
        found[mu] = Fraction(int(top), int(bottom))
    return found


def _expand_product(left: Shape, right: Shape, n: int) -> Callable[[], object]:
    P = family("P")
    return lambda: P.from_monomials(P.to_monomials(left, n) * P.to_monomials(right, n))


def _eigenproblem_case(index: Shape, n: int) -> Case:
    P = family("P")
    return Case(
        name="symmetric-macdonald" if index == (5, 2, 1) else
        "symmetric-macdonald-" + "".join(map(str, index)),
        what=f"P_{index} in {n} variables to monomials, nothing remembered",
        contenders=[
            Contender(
                "from E by symmetrisation", lambda: macdonald.by_symmetrisation(index, n), forget),
            Contender("by tableaux", lambda: P.to_monomials(index, n), forget),
            Contender(
                "sympy, operator on polynomials", lambda: eigenproblem_with_polynomials(index, n),
                forget),
            Contender(
                "sympy, operator on m by our Kostka numbers",
                lambda: eigenproblem_in_sympy(index, n), forget),
        ],
        answer=at_a_point)


def cases(is_quick: bool) -> list[Case]:
    """P at n = 4, products in s and P, e_r E_mu."""
    n = 4
    P, e, s = family("P"), family("e"), family("s")
    # the largest, one in the middle, the least: sympy's work shrinks faster than ours
    shapes = [(3, 2, 1)] if is_quick else [(8,), (5, 2, 1), (2, 2, 2, 2)]
    shape = (4, 3, 2, 1, 1, 1)
    left, right = ((2, 1), (2, 1)) if is_quick else ((4, 2, 1), (3, 2, 1))
    mu = (0, 1, 2, 3)
    return [
        *(_eigenproblem_case(index, n) for index in shapes),
        Case(
            name="littlewood-richardson",
            what="s_lambda s_lambda, lambda = (4,3,2,1,1,1)",
            contenders=[Contender(
                "tableau rule", lambda: rule.littlewood_richardson(shape, shape), forget)],
            n_units=len(rule.littlewood_richardson(shape, shape))),
        Case(
            name="schur-product",
            what="s_(4,3,1) s_(4,3,1) in 4 variables",
            contenders=[
                Contender(
                    "tableau rule", lambda: s.times_element((4, 3, 1), 4, s, (4, 3, 1)), forget),
                Contender(
                    "multiplied out and re-expanded", lambda: s.from_monomials(
                        s.to_monomials((4, 3, 1), 4) * s.to_monomials((4, 3, 1), 4)), forget)],
            answer=lambda found: found),
        Case(
            name="macdonald-product",
            what=f"P_{left} P_{right} in 4 variables",
            contenders=[
                Contender("Pieri rules", lambda: P.times_element(left, 4, P, right), forget),
                Contender(
                    "multiplied out and re-expanded", _expand_product(left, right, 4), forget)],
            answer=lambda found: found),
        Case(
            name="elementary-times-E",
            what=f"e_2 E_{mu}",
            contenders=[
                Contender(
                    "closed steps",
                    lambda: nonsymmetric_products.elementary_times_E(2, mu), forget),
                Contender(
                    "multiplied out and re-expanded", lambda: nonsymmetric.from_monomials(
                        e.to_monomials((2,), 4) * nonsymmetric.to_monomials(mu)), forget)],
            answer=lambda found: found),
    ]
