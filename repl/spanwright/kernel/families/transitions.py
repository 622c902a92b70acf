"""Transition numbers between the bases m, e, h, p, s of symmetric polynomials in n variables.

In n variables m and s run over partitions with at most n parts, e, h and p over those with no
part above n. Each edge of a small graph is one classical rule, and a transition goes along the
shortest path: `transition("p", "m", index, n)`. Macdonald, Symmetric Functions and Hall
Polynomials (1995), I.2, I.3, I.6.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator, Mapping
from fractions import Fraction
from functools import lru_cache

from flint import Ordering, fmpq_mpoly, fmpq_mpoly_ctx

from spanwright.kernel import budget
from spanwright.kernel.families.diagrams import (
    Partition,
    border_strips_above,
    centralizer_order,
    horizontal_strips_above,
    straightened,
    vertical_strips_above,
)
from spanwright.kernel.families.kostka import kostka_row
from spanwright.kernel.indices import conjugate, orbit, padded, partitions

Numbers = dict[Partition, Fraction]
"""A sum over partitions with rational coefficients, no zeros."""

Strips = Callable[[Partition, int, int], Iterator[tuple[int, Partition]]]


def combined(terms: Mapping[Partition, Fraction], rule: Callable[[Partition], Numbers]) -> Numbers:
    """Apply a linear rule, given on basis elements, to a sum."""
    found: Numbers = {}
    for index, c in terms.items():
        budget.current().check()
        for target, d in rule(index).items():
            found[target] = found.get(target, Fraction(0)) + c * d
    return {target: c for target, c in found.items() if c}


# into s: strips put on one after another


def _horizontal(shape: Partition, size: int, n: int) -> Iterator[tuple[int, Partition]]:
    return ((1, outer) for outer in horizontal_strips_above(shape, size, n))


def _vertical(shape: Partition, size: int, n: int) -> Iterator[tuple[int, Partition]]:
    return ((1, outer) for outer in vertical_strips_above(shape, size, n))


def _border(shape: Partition, size: int, n: int) -> Iterator[tuple[int, Partition]]:
    return border_strips_above(shape, size, n)


STRIPS: dict[str, Strips] = {"h": _horizontal, "e": _vertical, "p": _border}
"""g_k s_lambda = sum of signed s_mu over strips mu/lambda of size k: for h and e Pieri's rule."""


def strips_on_schur(source: str, index: Partition, shape: Partition, n: int) -> Numbers:
    """g_index s_shape in s, g one of h, e, p, one strip for every part."""
    rule = STRIPS[source]
    current: dict[Partition, int] = {shape: 1} if len(shape) <= n else {}
    for part in reversed(index):
        budget.current().check_terms(len(current), "this product")
        following: dict[Partition, int] = {}
        for inner, c in current.items():
            for sign, outer in rule(inner, part, n):
                following[outer] = following.get(outer, 0) + sign * c
        current = {outer: c for outer, c in following.items() if c}
    return {outer: Fraction(c) for outer, c in current.items()}


def _into_schur(source: str) -> Callable[[Partition, int], Numbers]:
    return lambda index, n: strips_on_schur(source, index, (), n)


def _monomial_into_schur(index: Partition, n: int) -> Numbers:
    """m_mu = sum of s_alpha over the orbit of mu, straightened."""
    # from |mu| variables on nothing changes
    n_used = min(n, sum(index))
    found: Numbers = {}
    for alpha in orbit(padded(index, n_used)):
        term = straightened(alpha)
        if term is not None:
            sign, shape = term
            found[shape] = found.get(shape, Fraction(0)) + sign
    return {shape: c for shape, c in found.items() if c}


def _schur_into_monomial(index: Partition, n: int) -> Numbers:
    return {mu: Fraction(c) for mu, c in kostka_row(index, n).items()}


# e, h and p are polynomial rings in their first n members: the rest goes by substitution


def _context(n: int) -> fmpq_mpoly_ctx:
    return fmpq_mpoly_ctx.get(tuple(f"g{k}" for k in range(1, n + 1)), Ordering.deglex)


def _as_polynomial(index: Partition, n: int) -> fmpq_mpoly:
    """The product of generators g_part."""
    return _context(n).from_dict({_exponents(index, n): 1})


def _exponents(index: Partition, n: int) -> tuple[int, ...]:
    return tuple(index.count(k) for k in range(1, n + 1))


def _read(polynomial: fmpq_mpoly) -> Numbers:
    found: Numbers = {}
    for row, c in zip(polynomial.monoms(), polynomial.coeffs(), strict=True):
        exponents = tuple(map(int, row))
        index = tuple(k for k in range(len(exponents), 0, -1) for _ in range(exponents[k - 1]))
        found[index] = Fraction(int(c.p), int(c.q))
    return found


@lru_cache(maxsize=500)
def members(target: str, source: str, n: int, size: int) -> tuple[fmpq_mpoly, ...]:
    """target_0, ..., target_size as polynomials in source_1, ..., source_n, n variables.

    One of the two names is e, or both are the same; other pairs pass through e. Newton's
    identities and their kin: sum (-1)^i e_i h_(k-i) = 0, k e_k = sum (-1)^(i-1) e_(k-i) p_i
    (Macdonald 1995, I.2).
    """
    context = _context(n)
    if target == source:
        return tuple(_member_itself(target, n, k) for k in range(size + 1))
    if "e" not in (target, source):
        through = members("e", source, n, n)[1:]
        return tuple(f.compose(*through, ctx=context) for f in members(target, "e", n, size))
    found = [context.constant(1)]
    # e comes from h or p, and h and p come from e, which ends at e_n
    own = members(source, source, n, n)
    for k in range(1, size + 1):
        budget.current().check()
        value = context.constant(0)
        if target == "e" and k > n:
            found.append(value)
            continue
        for i in range(1, min(k, n) + 1):
            # in Newton's identity for p_k the term of e_k has the factor k
            factor = k if target == "p" and i == k else 1
            value += (-1) ** (i - 1) * factor * found[k - i] * own[i]
        found.append(value / k if (target, source) == ("e", "p") else value)
    return tuple(found)


def _member_itself(name: str, n: int, k: int) -> fmpq_mpoly:
    """g_k in g_1, ..., g_n: for k > n through e."""
    if k == 0:
        return _context(n).constant(1)
    if k <= n:
        return _as_polynomial((k,), n)
    if name == "e":
        return _context(n).constant(0)
    through_e = members(name, "e", n, k)[k]
    return through_e.compose(*members("e", name, n, n)[1:], ctx=_context(n))


def _between(source: str, target: str) -> Callable[[Partition, int], Numbers]:
    """The rule that sends source_index, whatever its parts, into target_1, ..., target_n."""

    def rule(index: Partition, n: int) -> Numbers:
        value = _context(n).constant(1)
        if index:
            generators = members(source, target, n, index[0])
            for part in index:
                value *= generators[part]
        return _read(value)

    return rule


def _determinant(rows: list[list[fmpq_mpoly]], n: int) -> fmpq_mpoly:
    """Laplace expansion, minors of the first rows remembered by their columns."""
    minors = {0: _context(n).constant(1)}
    for row in rows:
        budget.current().check()
        following: dict[int, fmpq_mpoly] = {}
        for used, minor in minors.items():
            for j, entry in enumerate(row):
                if used >> j & 1 or not entry:
                    continue
                sign = -1 if (used >> j).bit_count() % 2 else 1
                key = used | 1 << j
                term = sign * minor * entry
                following[key] = following[key] + term if key in following else term
        minors = {key: minor for key, minor in following.items() if minor}
    return minors.get((1 << len(rows)) - 1, _context(n).constant(0))


def _jacobi_trudi(index: Partition, generators: tuple[fmpq_mpoly, ...], n: int) -> fmpq_mpoly:
    """det(g_(lambda_i - i + j)) (Jacobi and Trudi; Macdonald 1995, I.3.4)."""
    zero = _context(n).constant(0)
    size = range(len(index))
    return _determinant(
        [[generators[index[i] - i + j] if index[i] - i + j >= 0 else zero for j in size]
         for i in size], n)


def _schur_into_e(index: Partition, n: int) -> Numbers:
    if len(index) > n:
        return {}
    turned = conjugate(index)
    top = max((turned[0] if turned else 0) + len(turned), index[0] + len(index) if index else 0)
    # the determinant in e has lambda_1 rows, that in h one for each part, with longer entries
    if len(turned) <= len(index) + 2:
        return _read(_jacobi_trudi(turned, members("e", "e", n, top), n))
    return _read(_jacobi_trudi(index, members("h", "e", n, top), n))


def _schur_into_h(index: Partition, n: int) -> Numbers:
    if len(index) > n:
        return {}
    top = index[0] + len(index) if index else 0
    return _read(_jacobi_trudi(index, members("h", "h", n, top), n))


def _schur_into_p(index: Partition, n: int) -> Numbers:
    """The characters over z_mu, or through e when a cycle is longer than n."""
    size = sum(index)
    if size > n:
        return combined(_schur_into_e(index, n), lambda nu: _between("e", "p")(nu, n))
    found = {}
    for cycles in partitions(size):
        value = character(index, cycles)
        if value:
            found[cycles] = Fraction(value, centralizer_order(cycles))
    return found


def character(shape: Partition, cycles: Partition) -> int:
    """chi^shape at the class of cycle type `cycles` (Murnaghan's rule; Macdonald 1995, I.7)."""
    size = sum(shape)
    return 0 if sum(cycles) != size else int(
        _power_into_schur(cycles, max(size, 1)).get(shape, 0))


@lru_cache(maxsize=2_000)
def _power_into_schur(index: Partition, n: int) -> Numbers:
    return strips_on_schur("p", index, (), n)


STEPS: dict[tuple[str, str], Callable[[Partition, int], Numbers]] = {
    ("m", "s"): _monomial_into_schur,
    ("s", "m"): _schur_into_monomial,
    ("e", "s"): _into_schur("e"),
    ("h", "s"): _into_schur("h"),
    ("p", "s"): _power_into_schur,
    ("s", "e"): _schur_into_e,
    ("s", "h"): _schur_into_h,
    ("s", "p"): _schur_into_p,
    **{(a, b): _between(a, b) for a in "ehp" for b in "ehp"},
}
"""The direct rules; (g, g) rewrites members of g beyond the n-th."""


@lru_cache(maxsize=64)
def route(source: str, target: str) -> tuple[str, ...]:
    """The bases passed from source to target, both ends included, on a shortest path."""
    paths: deque[tuple[str, ...]] = deque([(source,)])
    seen = {source}
    while paths:
        path = paths.popleft()
        if path[-1] == target:
            return path
        for start, end in STEPS:
            if start == path[-1] and end not in seen:
                seen.add(end)
                paths.append((*path, end))
    raise AssertionError(f"the rules do not join {source} and {target}")


@lru_cache(maxsize=20_000)
def transition(source: str, target: str, index: Partition, n: int) -> Numbers:
    """source_index in the basis `target` of symmetric polynomials in n variables.

    The index is any partition: e_k with k > n and s with more than n parts give 0, h_k and p_k
    with k > n are rewritten in the first n. Both names are among m, e, h, p, s.
    """
    if source == target and source in "ms":
        return {index: Fraction(1)} if len(index) <= n else {}
    if source == "m" and len(index) > n:
        return {}
    path = route(source, target) if source != target else (source, source)
    terms: Numbers = {index: Fraction(1)}
    for start, end in zip(path, path[1:], strict=False):
        step = STEPS[start, end]
        terms = combined(terms, lambda nu, step=step: step(nu, n))  # type: ignore[misc]
    return terms
