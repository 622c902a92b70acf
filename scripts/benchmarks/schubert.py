"""Schubert, Grothendieck and key polynomials: ours against multiplying out in sympy's `ring`."""

from __future__ import annotations

from collections.abc import Callable
from random import Random
from typing import Any

from benchmarking import Case, Contender
from spanwright.kernel.families import grothendieck, schubert, schubert_products
from spanwright.kernel.families.packed import multiplied
from spanwright.kernel.indices import code, from_code, padded, permutations, reduced_size, trimmed

Permutation = tuple[int, ...]


class SympySchubert:
    """Schubert polynomials in sympy's `ring`, in two ways.

    `by_definition`: every S_w from x^delta by divided differences, exact divisions of the ring,
    and nothing remembered. Else our best help for sympy: from the dominant element above, the
    divided difference a loop over terms, everything remembered.
    """

    def __init__(self, n: int, *, by_definition: bool = False) -> None:
        import sympy

        self.n = n
        self.by_definition = by_definition
        self.ring = sympy.ring(f"x1:{n + 1}", sympy.ZZ)[0]
        self.known: dict[Permutation, Any] = {}

    def forget(self) -> None:
        """Drop the remembered polynomials."""
        self.known.clear()

    def element(self, w: Permutation) -> Any:
        """S_w."""
        if self.by_definition:
            return self._from_delta(w)
        return self._from_dominant(padded(trimmed(code(w)), self.n))

    def _from_delta(self, w: Permutation) -> Any:
        size = max(len(w), 1)
        entries, word = list(w), []
        while (
            i := next((k for k in range(size - 1) if entries[k] < entries[k + 1]), None)
        ) is not None:
            entries[i], entries[i + 1] = entries[i + 1], entries[i]
            word.append(i)
        delta = padded(tuple(range(size - 1, 0, -1)), self.n)
        f = self.ring.from_dict({delta: self.ring.domain.one})
        for i in reversed(word):
            exchanged = self.ring.from_dict(
                {(*e[:i], e[i + 1], e[i], *e[i + 2 :]): c for e, c in f.items()})
            f = (f - exchanged).exquo(self.ring.gens[i] - self.ring.gens[i + 1])
        return f

    def _from_dominant(self, c: Permutation) -> Any:
        found = self.known.get(c)
        if found is None:
            i = next((k for k in range(self.n - 1) if c[k] < c[k + 1]), None)
            if i is None:
                found = self.ring.from_dict({c: self.ring.domain.one})
            else:
                above = self._from_dominant((*c[:i], c[i + 1] + 1, c[i], *c[i + 2 :]))
                found = self._divided(above, i)
            self.known[c] = found
        return found

    def _divided(self, f: Any, i: int) -> Any:
        terms: dict[Permutation, Any] = {}
        for e, c in f.items():
            a, b = e[i], e[i + 1]
            sign = c if a > b else -c
            for k in range(min(a, b), max(a, b)):
                key = (*e[:i], k, a + b - 1 - k, *e[i + 2 :])
                terms[key] = terms.get(key, 0) + sign
        return self.ring.from_dict({e: c for e, c in terms.items() if c})

    def product(self, u: Permutation, v: Permutation) -> dict[Permutation, int]:
        """Multiply out, then subtract the S_w of the leader until nothing is left."""
        left = self.element(u) * self.element(v)
        found: dict[Permutation, int] = {}
        while left:
            c = max(left, key=lambda e: e[::-1])
            coefficient = left[c]
            found[from_code(c)] = int(coefficient)
            left = left - coefficient * self.element(from_code(c))
        return found


def _forget() -> None:
    schubert.forget_polynomials()
    grothendieck.forget_polynomials()


def _leave_smaller(chosen: list[tuple[Permutation, Permutation]]) -> None:
    """As after a while of such products: smaller ones are remembered, these are not."""
    known = schubert_products._memory.products
    for u, v in chosen:
        schubert.multiply(u, v)
    for u, v in chosen:
        known.pop(tuple(sorted(map(schubert_products.key_of, (u, v)))), None)


def _by_monomials(u: Permutation, v: Permutation) -> dict[Permutation, int]:
    return schubert.from_packed(multiplied(schubert.polynomial(u), schubert.polynomial(v)))


def _product_case(name: str, what: str, chosen: list[tuple[Permutation, Permutation]]) -> Case:
    # the divided differences from x^delta pass through as many variables as w has entries
    size = max(len(w) for u, v in chosen for w in schubert.multiply(u, v))
    defined, helped = SympySchubert(size, by_definition=True), SympySchubert(size)

    def products(route: Callable[[Permutation, Permutation], Any]) -> Callable[[], object]:
        return lambda: [route(u, v) for u, v in chosen]

    return Case(
        name=name,
        what=what,
        contenders=[
            Contender(
                "ours, in a session", products(schubert.multiply),
                prepare=lambda: _leave_smaller(chosen)),
            Contender("ours, from nothing", products(schubert.multiply), prepare=_forget),
            Contender("ours, by monomials", products(_by_monomials), prepare=_forget),
            Contender("ours, by monomials, S_w remembered", products(_by_monomials)),
            Contender("sympy, S_w by definition", products(defined.product)),
            Contender("sympy, helped", products(helped.product), prepare=helped.forget),
            Contender("sympy, helped, S_w remembered", products(helped.product)),
        ],
        answer=lambda found: found,
        n_units=len(chosen),
        unit="product",
    )


def cases(is_quick: bool) -> list[Case]:
    """Tables, products, and a K-theoretic product."""
    size = 5 if is_quick else 6
    group = [reduced_size(w) for w in permutations(size)]
    table = SympySchubert(size)
    generator = Random(6)
    chosen = [
        (generator.choice(group), generator.choice(group)) for _ in range(5 if is_quick else 20)]
    u, v = reduced_size((1, 4, 3, 2)), (1, 5, 3, 4, 2)
    return [
        Case(
            name="schubert-table",
            what=f"all Schubert polynomials of S_{size} to monomials, nothing remembered",
            contenders=[
                Contender(
                    "ours", lambda: [schubert.to_monomials(w, size) for w in group],
                    prepare=_forget),
                Contender(
                    "sympy, helped", lambda: [table.element(w) for w in group],
                    prepare=table.forget),
            ],
            n_units=len(group),
            unit="polynomial",
        ),
        _product_case(
            "schubert-product", f"S_u S_v for random u, v in S_{size}", chosen),
        _product_case(
            "schubert-product-large", "S_u S_v for u, v in S_6 with many monomials",
            [((2, 1, 6, 5, 4, 3), (1, 2, 6, 5, 4, 3))]),
        Case(
            name="grothendieck-product",
            what="G_1432 G_15342",
            contenders=[
                Contender("ours", lambda: grothendieck.multiply(u, v)),
                Contender(
                    "ours, nothing remembered", lambda: grothendieck.multiply(u, v),
                    prepare=_forget),
            ],
            answer=lambda found: found,
        ),
    ]
