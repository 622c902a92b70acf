"""Products of Schubert polynomials by their first rows, everything indexed by packed codes.

The first rows of the pipe dreams of w give S_w = sum x_1^p S_v(x_2, x_3, ...) (Fomin and Kirillov,
The Yang-Baxter equation, symmetric functions, and Schubert polynomials, 1996). The lowest power is
p = w(1) - 1, with v = w(2) w(3) ... flattened: the code of w is (p, code of v). So products go

    S_u S_v = sum x_1^(p+q) (S_u' S_v')(x_2, ...) over rows of u and of v,

and what stands there is gathered from the lowest power up: c x_1^p S_v'(x_2, ...) belongs to c S_w,
code(w) = (p, code(v')), whose other rows have higher powers and are taken off. Keys are codes as
packed.py packs exponents: digit j in base 2^16 is entry j.
"""

from __future__ import annotations

from spanwright.kernel import budget
from spanwright.kernel.families.packed import DIGIT, LARGEST
from spanwright.kernel.indices import Permutation

Row = tuple[int, int]
"""p and the key of v in x_1^p S_v(x_2, x_3, ...)."""

REMEMBERED_TERMS = 1_000_000
"""Terms of products and rows, in all, after which the memory starts afresh."""

CHECKED_EVERY = 64
"""So many small steps go between two looks at the budget."""


class _Memory:
    """Products by the two keys, the smaller first; rows but for the lowest, by the key."""

    def __init__(self) -> None:
        self.products: dict[tuple[int, int], dict[int, int]] = {}
        self.rows: dict[int, tuple[Row, ...]] = {}
        self.size = 0

    def forget(self) -> None:
        self.products.clear()
        self.rows.clear()
        self.size = 0


_memory = _Memory()


def forget_products() -> None:
    """Drop what is remembered: for measurements and for memory."""
    _memory.forget()


def multiply_by_rows(u: Permutation, v: Permutation) -> dict[Permutation, int]:
    """S_u S_v; permutations trimmed."""
    if _memory.size > REMEMBERED_TERMS:
        _memory.forget()
    product = _product(key_of(u), key_of(v))
    budget.current().check_terms(len(product), "this product")
    return {permutation_of(key): c for key, c in product.items()}


def key_of(w: Permutation) -> int:
    """The packed code: entry i counts the smaller entries to the right."""
    left = list(range(1, len(w) + 1))
    key = shift = 0
    for value in w:
        place = left.index(value)
        del left[place]
        key += place << shift
        shift += DIGIT
    return key


def permutation_of(key: int) -> Permutation:
    """The permutation, trimmed, with a packed code."""
    found: list[int] = []
    left: list[int] = []
    n = 0
    while key:
        entry = key & LARGEST
        key >>= DIGIT
        while len(left) <= entry:
            n += 1
            left.append(n)
        found.append(left.pop(entry))
    return (*found, *left)


def _product(a: int, b: int) -> dict[int, int]:
    """The coefficients of the product of two elements; not to be changed, for it is remembered."""
    if a > b:
        a, b = b, a
    if not a:
        return {b: 1}
    known = _memory.products.get((a, b))
    if known is not None:
        return known
    if len(_memory.products) % CHECKED_EVERY == 0:
        budget.current().check()
    lowest_a, lowest_b = (a & LARGEST, a >> DIGIT), (b & LARGEST, b >> DIGIT)
    power = lowest_a[0] + lowest_b[0]
    at_hand = _product(lowest_a[1], lowest_b[1])
    waiting: dict[int, dict[int, int]] = {}
    upper_a, upper_b = _upper_rows(a), _upper_rows(b)
    for q, v in upper_b:
        _add(waiting, lowest_a[0] + q, _product(lowest_a[1], v))
    for p, u in upper_a:
        for q, v in (lowest_b, *upper_b):
            _add(waiting, p + q, _product(u, v))
    found: dict[int, int] = {}
    rows = _memory.rows
    while True:
        for v, c in at_hand.items():
            if c:
                w = v << DIGIT | power
                found[w] = c
                upper = rows.get(w)
                if upper is None:
                    upper = _upper_rows(w)
                for p, key in upper:
                    row = waiting.get(p)
                    if row is None:
                        waiting[p] = {key: -c}
                    else:
                        row[key] = row.get(key, 0) - c
        if len(found) > CHECKED_EVERY:
            budget.current().check_terms(len(found), "this product")
        if not waiting:
            break
        power = min(waiting)
        at_hand = waiting.pop(power)
    _memory.products[a, b] = found
    _memory.size += len(found)
    return found


def _add(waiting: dict[int, dict[int, int]], power: int, terms: dict[int, int]) -> None:
    row = waiting.get(power)
    if row is None:
        waiting[power] = terms.copy()
        return
    for key, c in terms.items():
        row[key] = row.get(key, 0) + c


def _upper_rows(key: int) -> tuple[Row, ...]:
    """All first rows of w, code(w) = (p, code of v), but for the lowest, (p, v).

    With values of v from 0, the letters b = ..., p + 1, p in this order may each be taken where
    b + 1 stands left of b: then the two change places, which takes 1 from the code where b + 1
    stood.
    """
    known = _memory.rows.get(key)
    if known is not None:
        return known
    lowest, v = key & LARGEST, key >> DIGIT
    if not _is_larger_first(lowest, v):
        _memory.rows[key] = ()
        _memory.size += 1
        return ()
    order = permutation_of(v)
    n = len(order)
    places = [0] * n
    for place, value in enumerate(order):
        places[value - 1] = place
    # power, code, and where the larger of the next two values stands
    states = [(lowest, v, places[n - 1])]
    for b in range(n - 2, lowest - 1, -1):
        place = places[b]
        found = []
        for p, code, larger in states:
            found.append((p, code, place))
            if larger < place:
                found.append((p + 1, code - (1 << DIGIT * larger), larger))
        states = found
        if len(states) > CHECKED_EVERY:
            budget.current().check_terms(len(states), "this product")
    upper = tuple([(p, code) for p, code, _ in states if p > lowest])
    _memory.rows[key] = upper
    _memory.size += len(upper) + 1
    return upper


def _is_larger_first(low: int, v: int) -> bool:
    """Whether, of the values from `low` on (they count from 0), some larger one stands first."""
    n_low = low  # values below `low` that are still to come
    while v:
        entry = v & LARGEST
        if entry > n_low:
            return True
        if entry < n_low:
            n_low -= 1
        v >>= DIGIT
    return False
