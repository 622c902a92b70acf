"""Double Schubert polynomials S_w(x; y): monomials over Z[y], equivariant Monk rule, products.

S_w0(x; y) = product over i + j <= n of (x_i - y_j), and d_i acts on x as on S_w; y = 0 gives S_w.
The y_j are parameters by the names "y_1", "y_2", ... Lascoux and Schuetzenberger (1982);
Macdonald, Notes on Schubert Polynomials (1991).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from flint import fmpz_mpoly

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.base import Coefficients, Family, Index
from spanwright.kernel.families.derivations import Derivation, Row, cover_row, integer
from spanwright.kernel.families.packed import DIGIT, digits, from_laurent, unpack
from spanwright.kernel.families.schubert import (
    PermutationFamily,
    Rows,
    check_permutation,
    check_variables,
    from_packed,
    from_symmetric,
    monk,
    multiply_by_generator,
    n_variables,
    polynomial,
    row_levels,
    upward_from,
    upward_into,
)
from spanwright.kernel.indices import Permutation, extended, inverse, length, reduced_size
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing

Double = dict[tuple[int, int], int]
"""Packed monomials in x and in y (see packed.py) to integer coefficients."""

Polynomials = dict[Permutation, fmpz_mpoly]
"""A sum of basis elements with coefficients in Z[y]."""

# Polynomials are remembered up to this many monomials in all, then the memory starts afresh.
REMEMBERED_MONOMIALS = 1_000_000


def alphabet(k: int) -> ParameterRing:
    """The parameters of a session and y_1, ..., y_k."""
    return ParameterRing.get().extended([f"y_{j}" for j in range(1, k + 1)])


def y(j: int) -> Scalar:
    """y_j."""
    return Scalar.parameter(ParameterRing.get().extended([f"y_{j}"]), f"y_{j}")


# into monomials


class _Memory:
    """Packed S_w(x; y) by the inverse permutation."""

    def __init__(self) -> None:
        self.polynomials: dict[Permutation, Double] = {}
        self.n_monomials = 0

    def forget(self) -> None:
        self.polynomials.clear()
        self.n_monomials = 0


_memory = _Memory()


def forget_polynomials() -> None:
    """Drop the remembered S_w(x; y): for measurements and for memory."""
    _memory.forget()


def double_polynomial(w: Permutation) -> Mapping[tuple[int, int], int]:
    """S_w(x; y) in packed monomials, by rows of pipe dreams: weight x_1 - y_a for the letter a."""
    if _memory.n_monomials > REMEMBERED_MONOMIALS:
        _memory.forget()
    known = _memory.polynomials
    known.setdefault((), {(0, 0): 1})
    top, levels = row_levels(w)
    for level in reversed(levels):
        for target, rows in level.items():
            if target not in known:
                budget.current().check()
                terms = known[target] = _combined(rows, known)
                _memory.n_monomials += len(terms)
                budget.current().check_terms(len(terms), "this double Schubert polynomial")
    return known[top]


def _combined(rows: Rows, known: Mapping[Permutation, Double]) -> Double:
    terms: Double = {}
    for letters, _, v in rows:
        summand = {(x_key << DIGIT, y_key): c for (x_key, y_key), c in known[v].items()}
        for a in letters:
            unit = 1 << DIGIT * (a - 1)
            found = {(x_key + 1, y_key): c for (x_key, y_key), c in summand.items()}
            for (x_key, y_key), c in summand.items():
                key = (x_key, y_key + unit)
                found[key] = found.get(key, 0) - c
            summand = found
        for key, c in summand.items():
            terms[key] = terms.get(key, 0) + c
    return {key: c for key, c in terms.items() if c}


def to_monomials(w: Permutation, n: int) -> LaurentPolynomial:
    """S_w(x; y) in n variables x over Z[y]; raises OutsideDomain when it needs more."""
    check_variables(w, n, "S")
    ring = alphabet(n_variables(inverse(w)))
    rows: dict[int, dict[tuple[int, ...], int]] = {}
    for (x_key, y_key), c in double_polynomial(w).items():
        rows.setdefault(x_key, {})[_y_exponents(ring, y_key)] = c
    terms = {unpack(key, n): ring.polynomial(row) for key, row in rows.items()}
    return LaurentPolynomial.reduced(n, ring, terms, Scalar.one(ring))


def _y_exponents(ring: ParameterRing, key: int) -> tuple[int, ...]:
    return ring.exponents({f"y_{j}": e for j, e in enumerate(digits(key), 1)})


def single_in_y(w: Permutation, ring: ParameterRing, sign: int = 1) -> fmpz_mpoly:
    """S_w(y), or S_w(-y) with sign -1, in a ring that holds enough y_j."""
    factor = sign ** length(w)
    return ring.polynomial(
        {_y_exponents(ring, key): c * factor for key, c in polynomial(w).items()})


# conversions


def right_factors(w: Permutation) -> Iterator[tuple[Permutation, Permutation]]:
    """All (a, u) with w = a u and l(w) = l(a) + l(u), longest u first; trimmed."""
    level: dict[Permutation, Permutation] = {reduced_size(w): ()}
    seen: dict[Permutation, Permutation] = dict(level)
    while level:
        found: dict[Permutation, Permutation] = {}
        for u, a in level.items():
            yield a, u
            places = inverse(u)
            for i in range(1, len(u)):
                if places[i - 1] > places[i]:
                    # s_i u exchanges the values i and i + 1; a s_i the positions
                    lower = reduced_size(tuple(
                        i + 1 if k == i else i if k == i + 1 else k for k in u))
                    if lower not in found:
                        longer = list(extended(a, max(len(a), i + 1)))
                        longer[i - 1], longer[i] = longer[i], longer[i - 1]
                        found[lower] = reduced_size(tuple(longer))
        seen.update(found)
        budget.current().check_terms(len(seen), "this expansion")
        level = found


def in_schubert(w: Permutation) -> Coefficients:
    """S_w(x; y) in the S_u(x): the sum over w = a u, lengths adding up, of S_(a^-1)(-y) S_u(x)."""
    ring = alphabet(max(len(w) - 1, 0))
    return {
        u: Scalar.of_polynomial(ring, single_in_y(inverse(a), ring, -1))
        for a, u in right_factors(w)}


def from_schubert(w: Permutation) -> Coefficients:
    """S_w(x) in the S_u(x; y): the sum over w = a u, lengths adding up, of S_a(y) S_u(x; y)."""
    ring = alphabet(max(len(w) - 1, 0))
    return {u: Scalar.of_polynomial(ring, single_in_y(a, ring)) for a, u in right_factors(w)}


def from_monomials(given: LaurentPolynomial) -> Coefficients:
    """The coefficients in the S_w(x; y), through the S_w(x)."""
    singles = from_packed(from_laurent(given, "S"))
    ring = given.ring.union(alphabet(max((len(w) - 1 for w in singles if w), default=0)))
    found: Polynomials = {}
    for w, c in singles.items():
        lifted = ring.context.constant(c) if isinstance(c, int) else ring.lift(c, given.ring)
        for a, u in right_factors(w):
            term = lifted * single_in_y(a, ring)
            known = found.get(u)
            found[u] = term if known is None else known + term
    scale = given.scale.lift(ring)
    return {u: Scalar.of_polynomial(ring, c) * scale for u, c in found.items() if c}


# closed product rules


def times_generator(w: Permutation, r: int) -> Coefficients:
    """x_r S_w(x; y) = y_(w(r)) S_w + sum_(j > r) S_(w t_rj) - sum_(i < r) S_(w t_ir).

    Lengths growing by 1. Macdonald, Notes on Schubert Polynomials (1991).
    """
    found: Coefficients = {v: integer(c) for v, c in multiply_by_generator(w, r).items()}
    found[w] = y(extended(w, max(len(w), r))[r - 1])
    return found


def equivariant_monk(w: Permutation, r: int) -> Coefficients:
    """S_(s_r)(x; y) S_w(x; y) = (sum_(i <= r) (y_(w(i)) - y_i)) S_w + Monk's terms.

    Kostant and Kumar, The nil Hecke ring and cohomology of G/P (1986).
    """
    found: Coefficients = {v: integer(c) for v, c in monk(w, r).items()}
    own = _own_factor(w, r)
    if not own.is_zero:
        found[w] = own
    return found


def _own_factor(w: Permutation, r: int) -> Scalar:
    places = extended(w, max(len(w), r))
    value = Scalar.zero(ParameterRing.get())
    for i in range(1, r + 1):
        value = value + y(places[i - 1]) - y(i)
    return value


def multiply(u: Permutation, v: Permutation) -> Coefficients:
    """S_u(x; y) S_v(x; y): the rows of S_u act on S_v by the equivariant rule for x_r."""
    if length(u) > length(v):
        u, v = v, u
    ring = alphabet(max(len(u), len(v)) + length(u))
    values = [ring.context.gen(ring.slot(f"y_{j}")) for j in range(1, len(ring.names) - 1)]
    top, levels = row_levels(u)
    known: dict[Permutation, Polynomials] = {}
    for r in range(len(levels), 0, -1):
        known = {
            target: _row_by_row(rows, r, known, v, ring, values)
            for target, rows in levels[r - 1].items()}
    return {
        w: Scalar.of_polynomial(ring, c) for w, c in known[top].items() if not c.is_zero()}


def _row_by_row(
    rows: Rows, r: int, known: Mapping[Permutation, Polynomials], v: Permutation,
    ring: ParameterRing, values: list[fmpz_mpoly],
) -> Polynomials:
    if not rows:
        return {v: ring.one}
    # what is shared goes last: the smaller letters of a row are common to many rows
    tails: dict[tuple[int, ...], Polynomials] = {}
    for letters, _, below in rows:
        _add(tails.setdefault(letters, {}), known[below])
    for n_letters in range(max(map(len, tails)), 0, -1):
        for letters in sorted(word for word in tails if len(word) == n_letters):
            moved = _shifted_generator(tails.pop(letters), r, values[letters[0] - 1], values)
            _add(tails.setdefault(letters[1:], {}), moved)
    return tails[()]


def _add(target: Polynomials, terms: Mapping[Permutation, fmpz_mpoly]) -> None:
    for w, c in terms.items():
        known = target.get(w)
        target[w] = c if known is None else known + c


def _shifted_generator(
    terms: Polynomials, r: int, shift: fmpz_mpoly, values: list[fmpz_mpoly]
) -> Polynomials:
    """(x_r - shift) times a sum."""
    found: Polynomials = {}
    for w, c in terms.items():
        if not c:
            continue
        budget.current().check()
        own = values[w[r - 1] - 1 if r <= len(w) else r - 1] - shift
        if own:
            _add(found, {w: c * own})
        _add(found, dict.fromkeys(upward_from(w, r), c))
        _add(found, dict.fromkeys(upward_into(w, r), -c))
    budget.current().check_terms(len(found), "this product")
    return found


# rules laid out


def generator_derivation(w: Permutation, r: int) -> Derivation:
    """x_r S_w(x; y) with every transposition of the rule, vanishing ones with the reason."""
    size = max(len(w), r) + 1
    rows = [
        Row((), w, y(extended(w, size)[r - 1])),
        *(cover_row(w, r, j, 1) for j in range(r + 1, size + 1)),
        *(cover_row(w, i, r, -1) for i in range(1, r))]
    return Derivation(
        "Equivariant Monk rule for a variable",
        "x_r S_w(x;y) = y_(w(r)) S_w + sum_(j > r) S_(w t_rj) - sum_(i < r) S_(w t_ir), "
        "where the length grows by 1",
        "Macdonald, Notes on Schubert Polynomials (1991)", tuple(rows))


def monk_derivation(w: Permutation, r: int) -> Derivation:
    """S_(s_r) S_w with every transposition of the equivariant rule, vanishing ones with reason."""
    size = max(len(w), r) + 1
    rows = [
        Row((), w, _own_factor(w, r)),
        *(cover_row(w, i, j, 1) for i in range(1, r + 1) for j in range(r + 1, size + 1))]
    return Derivation(
        "Equivariant Monk rule",
        "S_(s_r) S_w = (sum_(i <= r) (y_(w(i)) - y_i)) S_w + sum_(i <= r < j) S_(w t_ij), "
        "where the length grows by 1",
        "Kostant and Kumar, The nil Hecke ring and cohomology of G/P (1986)", tuple(rows))


class DoubleSchubert(PermutationFamily):
    """S_w(x; y), w a permutation."""

    name = "double Schubert"

    def check_index(self, index: Index, n: int) -> Index:
        """Any permutation, as for S, which the language writes for both."""
        return check_permutation(index, "S")

    def order_key(self, index: Index) -> tuple[object, ...]:
        """Largest length first, then lexicographically by one-line notation."""
        return (-length(index), index)

    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """Row by row; raises OutsideDomain when n variables are not enough."""
        return to_monomials(index, n)

    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """Through the S_w(x)."""
        return from_monomials(polynomial)

    def times_generator(self, index: Index, n: int, j: int, power: int) -> Coefficients | None:
        """By the equivariant Monk rule for a variable."""
        return times_generator(index, j) if power == 1 else None

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """With another S_v(x; y): S_(s_r) by the equivariant Monk rule, else row by row."""
        if other is not self:
            return None
        for first, second in ((index, other_index), (other_index, index)):
            if length(first) == 1:
                return equivariant_monk(second, n_variables(first))
        return multiply(index, other_index)

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """From S_w(x), and from e, h, s of x_1, ..., x_n through it."""
        if other.name == "S":
            return from_schubert(index)
        if other.name in ("e", "h", "s"):
            found: dict[Index, Scalar] = {}
            for w, c in from_symmetric(other.name, index, n).items():
                for u, d in from_schubert(w).items():
                    known = found.get(u)
                    found[u] = d * c if known is None else known + d * c
            return {u: c for u, c in found.items() if not c.is_zero}
        return None


FAMILIES = {"double Schubert": DoubleSchubert()}
