"""The smash product of Laurent polynomials with the group algebra: X^mu s_w, s_w f = (w f) s_w."""

from __future__ import annotations

from spanwright.kernel import indices
from spanwright.kernel.errors import Mixed
from spanwright.kernel.operators.elements import Algebra, Element, Rows
from spanwright.kernel.operators.words import Letter


class SmashProduct(Algebra):
    """Left multiplication in the basis X^mu s_w."""

    kinds = frozenset({"X", "s"})

    def multiply(self, letter: Letter, element: Element) -> Element:
        """letter * element."""
        if letter.kind == "X":
            return self.shifted(element, letter.subscript)
        if letter.kind != "s":
            raise Mixed(f"{letter.kind} is not in the smash product with the group algebra")
        w = letter.subscript
        rows: Rows = {
            indices.act(w, mu): {(indices.product(w, v), nu): c for (v, nu), c in row.items()}
            for mu, row in element.rows.items()}
        return Element(self.ring, rows, element.scale)
