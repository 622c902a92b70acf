"""Schur polynomials s_lambda in n variables, with the tableau rule for products.

Macdonald, Symmetric Functions and Hall Polynomials (1995), I.3, I.5, I.9.
"""

from __future__ import annotations

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.families.base import Coefficients, Family, Index
from spanwright.kernel.families.derivations import Derivation
from spanwright.kernel.families.diagrams import Partition
from spanwright.kernel.families.littlewood_richardson import (
    REFERENCE,
    littlewood_richardson,
    tableau_rows,
)
from spanwright.kernel.families.symmetric_base import (
    RING,
    ClassicalFamily,
    scalars,
)
from spanwright.kernel.families.transitions import STRIPS, strips_on_schur
from spanwright.kernel.indices import trimmed


def derive_product(left: Partition, right: Partition, n: int | None = None) -> Derivation:
    """s_left s_right with every tableau of the Littlewood-Richardson rule."""
    return Derivation(
        "Littlewood-Richardson rule",
        "s_lambda s_mu = sum of c^nu s_nu, c^nu the number of semistandard fillings of nu/lambda "
        "with content mu whose reading, rows from right to left and from the top down, is a "
        "lattice word",
        REFERENCE, tuple(tableau_rows(left, right, n)))


class Schur(ClassicalFamily):
    """s_lambda, at most n parts."""

    name = "s"

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """s by Littlewood-Richardson, e and h by Pieri, p by Murnaghan-Nakayama."""
        index, other_index = trimmed(index), trimmed(other_index)
        if other is self:
            return {
                shape: Scalar.number(RING, c)
                for shape, c in littlewood_richardson(index, other_index, n).items()}
        if other.name in STRIPS:
            return scalars(strips_on_schur(other.name, other_index, index, n))
        return None


FAMILIES = {"s": Schur()}
