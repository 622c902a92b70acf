"""Schubert polynomials S_w, w in S_infinity: monomials, Monk, Pieri, transition, products.

S_w is the polynomial with leading monomial x^code(w) (reverse-lexicographic order) that the divided
differences carry to each other: d_i S_w = S_(w s_i) where w(i) > w(i+1), else 0. Lascoux and
Schuetzenberger, Polynomes de Schubert (1982); Macdonald, Notes on Schubert Polynomials (1991).
Permutations here are trimmed: without fixed points at the end, the identity is ().
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families.base import Coefficients, Family, Index, shown
from spanwright.kernel.families.derivations import (
    Derivation,
    Row,
    cover_row,
    integer,
    transposed,
)
from spanwright.kernel.families.packed import (
    DIGIT,
    by_leaders,
    digits,
    from_laurent,
    scalar,
    to_laurent,
)
from spanwright.kernel.families.schubert_products import forget_products, multiply_by_rows
from spanwright.kernel.indices import (
    Permutation,
    code,
    extended,
    from_code,
    inverse,
    is_permutation,
    length,
    reduced_size,
    reduced_word,
    swapped,
    trimmed,
)
from spanwright.kernel.laurent import LaurentPolynomial

Integers = dict[Permutation, int]
"""A sum of basis elements with integer coefficients."""

# Polynomials are remembered up to this many monomials in all, then the memory starts afresh.
REMEMBERED_MONOMIALS = 2_000_000


# indices


def check_permutation(index: Index, name: str) -> Permutation:
    """A permutation in one-line notation, trimmed; raises OutsideDomain with what is wrong."""
    if is_permutation(index):
        return reduced_size(index)
    element = f"{name}_{shown(index)}"
    size = len(index)
    for value in index:
        if not 1 <= value <= size:
            fact = f"{element} is not indexed by a permutation: {value} is not one of 1..{size}"
            break
        if index.count(value) > 1:
            missing = min(set(range(1, size + 1)) - set(index))
            fact = (
                f"{element} is not indexed by a permutation: {value} occurs twice, "
                f"{missing} is missing")
            break
    raise OutsideDomain(fact, code="bad-index")


def n_variables(w: Permutation) -> int:
    """The number of variables that S_w and G_w need: the last descent of w."""
    return next((i for i in range(len(w) - 1, 0, -1) if w[i - 1] > w[i]), 0)


def check_variables(w: Permutation, n: int, name: str) -> None:
    """Raise OutsideDomain when S_w or G_w needs more than n variables: nothing is cut off."""
    needed = n_variables(w)
    if needed > n:
        raise OutsideDomain(
            f"{name}_{shown(w)} needs x_1, ..., x_{needed}, the ring has n = {n}",
            code="needs-more-variables", hints=(f"fix n = {needed}",))


# into monomials


class _Memory:
    """Packed polynomials S_w by the inverse permutation, by w, and by the leading monomial."""

    def __init__(self) -> None:
        self.by_inverse: dict[Permutation, dict[int, int]] = {}
        self.by_index: dict[Permutation, dict[int, int]] = {}
        self.by_leader: dict[int, dict[int, int]] = {}
        self.indices: dict[int, Permutation] = {}
        self.n_monomials = 0

    def make_room(self) -> None:
        if self.n_monomials > REMEMBERED_MONOMIALS:
            self.forget()

    def forget(self) -> None:
        self.by_inverse.clear()
        self.by_index.clear()
        self.by_leader.clear()
        self.indices.clear()
        self.n_monomials = 0


_memory = _Memory()


def forget_polynomials() -> None:
    """Drop the remembered S_w and products: for measurements and for memory."""
    _memory.forget()
    forget_products()


def first_rows(
    inverse_of_w: Permutation,
) -> Iterator[tuple[tuple[int, ...], int, Permutation]]:
    """All first rows of reduced pipe dreams of w: (letters, n_left, v^-1).

    A row is a decreasing word a_1 > ... > a_p with w = s_(a_1) ... s_(a_p) (1 x v), lengths adding
    up, so that S_w = sum x_1^p S_v(x_2, ...). On the inverse, s_a exchanges the entries a and a+1:
    letters below w(1) are forced, those above may be taken where the larger entry stands first.
    `n_left` counts letters that might have been taken and were not (K-theory needs it). Nothing
    for the identity. Fomin and Kirillov, The Yang-Baxter equation, symmetric functions, and
    Schubert polynomials (1996).
    """
    if not inverse_of_w:
        return
    at = inverse_of_w.index(1)
    head = [place - 1 for place in inverse_of_w[:at]]
    tail = [place - 1 for place in inverse_of_w[at + 1 :]]
    forced = tuple(range(at, 0, -1))
    if not tail:
        yield forced, 0, reduced_size(tuple(head))
        return
    # from the largest letter down: the entry now in front, what stands behind it, taken, n_left
    states: list[tuple[int, tuple[int, ...], tuple[int, ...], int]] = [(tail[-1], (), (), 0)]
    letter = len(inverse_of_w)
    for entry in reversed(tail[:-1]):
        letter -= 1
        found = []
        for front, behind, taken, n_left in states:
            if entry > front:
                found.append((entry, (front, *behind), taken, n_left + 1))
                found.append((front, (entry, *behind), (*taken, letter), n_left))
            else:
                found.append((entry, (front, *behind), taken, n_left))
        states = found
    for front, behind, taken, n_left in states:
        yield taken + forced, n_left, reduced_size((*head, front, *behind))


def polynomial(w: Permutation) -> Mapping[int, int]:
    """S_w in packed monomials (see packed.py), remembered."""
    found = _memory.by_index.get(w)
    if found is None:
        found = _polynomial(reduced_size(inverse(w)))
        _memory.by_index[w] = found
    return found


def _polynomial(inverse_of_w: Permutation) -> dict[int, int]:
    known = _memory.by_inverse
    found = known.get(inverse_of_w)
    if found is not None:
        return found
    _memory.make_room()
    known.setdefault((), {0: 1})
    pending = [(inverse_of_w, list(first_rows(inverse_of_w)))]
    while pending:
        target, rows = pending[-1]
        missing = [v for _, _, v in rows if v not in known]
        if missing:
            pending.extend((v, list(first_rows(v))) for v in missing)
            continue
        pending.pop()
        if target in known:
            continue
        budget.current().check()
        terms: dict[int, int] = {}
        for letters, _, v in rows:
            power = len(letters)
            for key, c in known[v].items():
                key = (key << DIGIT) + power
                terms[key] = terms.get(key, 0) + c
        known[target] = terms
        _memory.n_monomials += len(terms)
        budget.current().check_terms(len(terms), "this Schubert polynomial")
    return known[inverse_of_w]


def _with_leader(key: int) -> dict[int, int]:
    """S_w by its leading monomial x^code(w)."""
    found = _memory.by_leader.get(key)
    if found is None:
        found = _polynomial(reduced_size(inverse(with_code(key))))
        _memory.by_leader[key] = found
    return found


def with_code(key: int) -> Permutation:
    """The permutation whose code is packed in the key, remembered."""
    found = _memory.indices.get(key)
    if found is None:
        found = _memory.indices[key] = from_code(digits(key))
    return found


def to_monomials(w: Permutation, n: int) -> LaurentPolynomial:
    """S_w in n variables; raises OutsideDomain when it needs more."""
    check_variables(w, n, "S")
    return to_laurent(polynomial(w), n)


# from monomials


def from_packed(terms: Mapping[int, Any]) -> dict[Permutation, Any]:
    """The coefficients of a packed polynomial in the S_w."""
    return {with_code(key): c for key, c in by_leaders(terms, _with_leader).items()}


def from_monomials(given: LaurentPolynomial) -> Coefficients:
    """The coefficients in the S_w with at most n variables, a basis of Z[x_1, ..., x_n]."""
    return {
        w: scalar(c, given) for w, c in from_packed(from_laurent(given, "S")).items()}


# closed product rules


def upward_from(w: Permutation, r: int) -> Iterator[Permutation]:
    """The w t_rj, j > r, of length l(w) + 1, trimmed. At most one new letter appears."""
    w = extended(w, max(len(w), r) + 1)
    own = w[r - 1]
    best = len(w) + 1
    for j in range(r, len(w)):
        if own < w[j] < best:
            best = w[j]
            yield reduced_size(w[: r - 1] + (best,) + w[r:j] + (own,) + w[j + 1 :])


def upward_into(w: Permutation, r: int) -> Iterator[Permutation]:
    """The w t_ir, i < r, of length l(w) + 1, trimmed."""
    w = extended(w, max(len(w), r))
    own = w[r - 1]
    best = 0
    for i in range(r - 2, -1, -1):
        if best < w[i] < own:
            best = w[i]
            yield w[:i] + (own,) + w[i + 1 : r - 1] + (best,) + w[r:]


def multiply_by_generator(w: Permutation, r: int) -> Integers:
    """x_r S_w = sum_(j > r) S_(w t_rj) - sum_(i < r) S_(w t_ir), lengths growing by 1.

    Monk's rule for S_(s_r) less that for S_(s_(r-1)); Monk, The geometry of flag manifolds (1959).
    """
    found = dict.fromkeys(upward_from(w, r), 1)
    for v in upward_into(w, r):
        found[v] = -1
    return found


def monk(w: Permutation, r: int) -> Integers:
    """S_(s_r) S_w = (x_1 + ... + x_r) S_w = sum over i <= r < j of S_(w t_ij), lengths + 1."""
    return dict.fromkeys(_covers_across(w, r, max(len(w), r) + 1), 1)


def _covers_across(w: Permutation, r: int, size: int) -> Iterator[Permutation]:
    for _, _, v in _steps_across(extended(w, size), r):
        yield reduced_size(v)


def _steps_across(w: Permutation, r: int) -> Iterator[tuple[int, int, Permutation]]:
    """(i, j, w t_ij) for the covers with i <= r < j, positions from 1, all of one size."""
    for i in range(r):
        own = w[i]
        best = len(w) + 1
        for j in range(i + 1, len(w)):
            if own < w[j] < best:
                best = w[j]
                if j >= r:
                    yield i + 1, j + 1, (
                        w[:i] + (best,) + w[i + 1 : j] + (own,) + w[j + 1 :])


def pieri_e(w: Permutation, r: int, k: int) -> Integers:
    """e_k(x_1, ..., x_r) S_w: each w t_(a_1 b_1) ... t_(a_k b_k) once.

    a_i <= r < b_i, every step of length + 1, the a_i distinct. Sottile, Pieri's formula for flag
    manifolds and Schubert polynomials (1996); Lascoux and Schuetzenberger (1982).
    """
    return dict.fromkeys(_pieri_ends(w, r, k, "e"), 1)


def pieri_h(w: Permutation, r: int, k: int) -> Integers:
    """h_k(x_1, ..., x_r) S_w: as `pieri_e` with the b_i distinct instead of the a_i."""
    return dict.fromkeys(_pieri_ends(w, r, k, "h"), 1)


def _pieri_ends(w: Permutation, r: int, k: int, kind: str) -> list[Permutation]:
    if k < 0 or (kind == "e" and k > r) or (r == 0 and k):
        return []
    start = extended(w, max(len(w), r) + k)
    ends = {start}
    for _ in range(k):
        # a position moved once, and moved with it distinct, shows: its entry is not the old one
        ends = {
            v for u in ends for i, j, v in _steps_across(u, r)
            if (u[i - 1] == start[i - 1] if kind == "e" else u[j - 1] == start[j - 1])}
        budget.current().check_terms(len(ends), "this product")
    return sorted(map(reduced_size, ends))


@dataclass(frozen=True, slots=True)
class Transition:
    """S_w = x_r S_v + sum of S_u over `others`."""

    r: int
    s: int
    v: Permutation
    others: tuple[Permutation, ...]


def transition(w: Permutation) -> Transition:
    """The maximal transition of w, not the identity.

    r is the last descent, s the last position with w(s) < w(r), v = w t_rs, the others are the
    v t_ir, i < r, of length l(w). Lascoux and Schuetzenberger, Schubert polynomials and the
    Littlewood-Richardson rule (1985).
    """
    r = n_variables(w)
    if not r:
        raise OutsideDomain("S_(1) = 1 has no transition", code="bad-index")
    s = max(k for k in range(r + 1, len(w) + 1) if w[k - 1] < w[r - 1])
    v = transposed(w, r, s)
    return Transition(r, s, v, tuple(upward_into(v, r)))


def multiply(u: Permutation, v: Permutation) -> Integers:
    """S_u S_v: Pieri's rule where it applies, else by first rows."""
    for first, second in ((u, v), (v, u)):
        found = as_pieri(first)
        if found is not None:
            kind, r, k = found
            return pieri_e(second, r, k) if kind == "e" else pieri_h(second, r, k)
    return multiply_by_rows(u, v)


@lru_cache(maxsize=100_000)
def as_pieri(w: Permutation) -> tuple[str, int, int] | None:
    """("e", r, k) or ("h", r, k) when S_w is e_k or h_k of x_1, ..., x_r; None else."""
    c = trimmed(code(w))
    parts = {part for part in c if part}
    r, first = len(c), next((i for i, part in enumerate(c) if part), 0)
    if parts == {1} and all(c[first:]):
        return "e", r, r - first
    return ("h", r, c[-1]) if c and first == r - 1 else None


Rows = list[tuple[tuple[int, ...], int, Permutation]]


def row_levels(u: Permutation) -> tuple[Permutation, list[dict[Permutation, Rows]]]:
    """u^-1, and for r = 1, 2, ... the first rows of every permutation that occurs at row r."""
    top = reduced_size(inverse(u))
    levels: list[dict[Permutation, Rows]] = []
    level = {top}
    while level:
        levels.append({w: list(first_rows(w)) for w in sorted(level)})
        level = {below for rows in levels[-1].values() for _, _, below in rows}
    return top, levels


# operators


def divided_difference(w: Permutation, i: int) -> Permutation | None:
    """d_i S_w = S of this permutation, w s_i where w(i) > w(i+1); None when it is 0."""
    if i < len(w) and w[i - 1] > w[i]:
        return reduced_size(swapped(w, i))
    return None


def divided_difference_by(w: Permutation, u: Permutation) -> Permutation | None:
    """d_u S_w = S of w u^-1 when l(w u^-1) = l(w) - l(u); None when it is 0."""
    found: Permutation | None = w
    for i in reversed(reduced_word(u)):
        found = None if found is None else divided_difference(found, i)
    return found


# conversions


def is_vexillary(w: Permutation) -> bool:
    """Whether w avoids 2143: then, and only then, S_w is the one key kappa_code(w).

    Lascoux and Schuetzenberger, Keys and standard bases (1990).
    """
    # 2143 occurs when some descent pair stands below and left of another
    low = len(w) + 1  # least upper entry of a pair (a, b), a > b, that ends before position k
    for k in range(len(w)):
        if any(low < w[j] < w[k] for j in range(k + 1, len(w))):
            return False
        low = min([low, *(w[i] for i in range(k) if w[i] > w[k])])
    return True


def grassmannian(partition: Index, n: int) -> Permutation:
    """The w with S_w = s_partition(x_1, ..., x_n); the partition has at most n parts."""
    return from_code(tuple(reversed(trimmed(partition) + (0,) * (n - len(trimmed(partition))))))


def from_symmetric(name: str, partition: Index, n: int, start: Permutation = ()) -> Integers:
    """e_lambda, h_lambda or s_lambda of x_1, ..., x_n times S_start, by Pieri's rules."""
    if name == "s":
        return multiply(grassmannian(partition, n), start)
    pieri = pieri_e if name == "e" else pieri_h
    terms: Integers = {start: 1}
    for part in trimmed(partition):
        found: Integers = {}
        for w, c in terms.items():
            for v in pieri(w, n, part):
                found[v] = found.get(v, 0) + c
        terms = found
        budget.current().check_terms(len(terms), "this product")
    return terms


# rules laid out


def generator_derivation(w: Permutation, r: int) -> Derivation:
    """x_r S_w with every transposition of the rule, vanishing ones with the reason."""
    size = max(len(w), r) + 1
    rows = [
        *(cover_row(w, r, j, 1) for j in range(r + 1, size + 1)),
        *(cover_row(w, i, r, -1) for i in range(1, r))]
    return Derivation(
        "Monk's rule for a variable",
        "x_r S_w = sum_(j > r) S_(w t_rj) - sum_(i < r) S_(w t_ir), where the length grows by 1",
        "Monk, The geometry of flag manifolds (1959)", tuple(rows))


def monk_derivation(w: Permutation, r: int) -> Derivation:
    """S_(s_r) S_w with every transposition of Monk's rule, vanishing ones with the reason."""
    size = max(len(w), r) + 1
    rows = (cover_row(w, i, j, 1) for i in range(1, r + 1) for j in range(r + 1, size + 1))
    return Derivation(
        "Monk's rule",
        "S_(s_r) S_w = sum_(i <= r < j) S_(w t_ij), where the length grows by 1",
        "Monk, The geometry of flag manifolds (1959)", tuple(rows))


def pieri_derivation(w: Permutation, r: int, k: int, kind: str) -> Derivation:
    """e_k or h_k of x_1, ..., x_r times S_w, `kind` "e" or "h": one chain for every term."""
    start = extended(w, max(len(w), r) + k)
    chains: dict[Permutation, tuple[tuple[int, int], ...]] = {start: ()}
    for _ in range(k if r else 0):
        found: dict[Permutation, tuple[tuple[int, int], ...]] = {}
        for u, steps in chains.items():
            for i, j, v in _steps_across(u, r):
                place = i if kind == "e" else j
                if u[place - 1] == start[place - 1]:
                    found.setdefault(v, (*steps, (i, j)))
        chains = found
        budget.current().check_terms(len(chains), "this product")
    if k and not r:
        chains = {}
    rows = tuple(sorted(
        (Row(steps, reduced_size(v), integer(1)) for v, steps in chains.items()),
        key=lambda row: row.target))
    which, distinct = ("e_k", "a_i") if kind == "e" else ("h_k", "b_i")
    return Derivation(
        f"Pieri's rule for {which}",
        f"{which}(x_1, ..., x_r) S_w = sum of the distinct S_(w t_(a_1 b_1) ... t_(a_k b_k)), "
        f"a_i <= r < b_i, every length one more, the {distinct} distinct",
        "Sottile, Pieri's formula for flag manifolds and Schubert polynomials (1996)", rows)


def transition_derivation(w: Permutation) -> Derivation:
    """S_w = x_r S_v + the rows: every v t_ir, i < r, vanishing ones with the reason."""
    found = transition(w)
    v = shown(found.v or (1,))
    return Derivation(
        "Transition",
        f"S_w = x_{found.r} S_{v} + sum_(i < {found.r}) S_(v t_i{found.r}), "
        f"v = w t_({found.r},{found.s}) = {v}, where the length is that of w",
        "Lascoux and Schuetzenberger, Schubert polynomials and the Littlewood-Richardson rule "
        "(1985)",
        tuple(cover_row(found.v, i, found.r, 1) for i in range(1, found.r)))


def product_derivation(u: Permutation, v: Permutation) -> Derivation:
    """S_u S_v by the closed rule that applies to it, Monk's or Pieri's, else by its terms."""
    for first, second in ((u, v), (v, u)):
        found = as_pieri(first)
        if found is not None:
            kind, r, k = found
            if k == 1:
                return monk_derivation(second, r)
            return pieri_derivation(second, r, k, kind)
    rows = tuple(
        Row((), w, integer(c)) for w, c in sorted(multiply(u, v).items()))
    return Derivation(
        "Product of Schubert polynomials",
        "S_w = sum of x_1^p S_v(x_2, x_3, ...) over first rows of pipe dreams, for both factors; "
        "the products of what is left are gathered from the lowest power of x_1 up",
        "Fomin and Kirillov, The Yang-Baxter equation, symmetric functions, and Schubert "
        "polynomials (1996)", rows)


# the family


def scalars(terms: Mapping[Index, int]) -> Coefficients:
    """Integer coefficients as scalars."""
    return {index: integer(c) for index, c in terms.items() if c}


class PermutationFamily(Family):
    """A basis indexed by permutations; its elements may need more variables than there are."""

    index_kind = "permutation"
    grows = True

    def check_index(self, index: Index, n: int) -> Index:
        """Any permutation in one-line notation, trimmed; it may need more than n variables."""
        return check_permutation(index, self.name)

    def n_variables(self, index: Index) -> int:
        """The last descent."""
        return n_variables(index)

    def show_index(self, index: Index, n: int) -> Index:
        """One-line notation; the identity as (1)."""
        return index or (1,)


class Schubert(PermutationFamily):
    """S_w, w a permutation."""

    name = "S"

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Largest length first, then lexicographically by one-line notation."""
        return (-length(index), index)

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """Row by row; raises OutsideDomain when n variables are not enough."""
        return to_monomials(index, n)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """By leading monomials."""
        return from_monomials(polynomial)

    def times_generator(self, index: Index, n: int, j: int, power: int) -> Coefficients | None:
        """By Monk's rule for a variable."""
        return scalars(multiply_by_generator(index, j)) if power == 1 else None

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """With another S_v; with e, h, s of x_1, ..., x_n by Pieri's rules."""
        if other is self:
            return scalars(multiply(index, other_index))
        if other.name in ("e", "h", "s"):
            return scalars(from_symmetric(other.name, other_index, n, index))
        return None

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """From e, h, s of x_1, ..., x_n, G, double Schubert, and keys that are one S_w."""
        if other.name in ("e", "h", "s"):
            return scalars(from_symmetric(other.name, index, n))
        if other.name == "kappa":
            w = from_code(index)
            return scalars({w: 1}) if is_vexillary(w) else None
        # those two are built on this module
        if other.name == "G":
            from spanwright.kernel.families import grothendieck

            return grothendieck.in_schubert(index)
        if other.name == "double Schubert":
            from spanwright.kernel.families import double_schubert

            return double_schubert.in_schubert(index)
        return None


FAMILIES = {"S": Schubert()}
