"""What a family of basis elements promises: index check, order, to and from monomials, rules.

A family is one file in this folder with one subclass of `Family`; `registry.py` names it.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.laurent import LaurentPolynomial

Index = tuple[int, ...]
Coefficients = dict[Index, Scalar]


class Family(ABC):
    """A basis of (part of) a polynomial ring in x_1, ..., x_n."""

    name: str
    """What tells the family from all others; the symbol in the language unless `symbol` is."""

    symbol: str = ""
    """The symbol in the language, when another family has it for a name."""

    @property
    def sign(self) -> str:
        """How the family is written."""
        return self.symbol or self.name

    index_kind: str
    """`composition`, `partition` or `permutation`."""

    grows: bool = False
    """Whether products may need more variables than n (Schubert, Grothendieck)."""

    @abstractmethod
    def check_index(self, index: Index, n: int) -> Index:
        """The canonical form of an index for n variables; raises OutsideDomain else."""

    @abstractmethod
    def order_key(self, index: Index) -> Any:
        """Sort key of the order in which terms are shown, first term smallest."""

    @abstractmethod
    def to_monomials(self, index: Index, n: int) -> LaurentPolynomial:
        """The basis element as a polynomial in n variables; the index is canonical."""

    @abstractmethod
    def from_monomials(self, polynomial: LaurentPolynomial) -> Coefficients:
        """The coefficients in this basis; raises OutsideDomain when outside its span."""

    def times_generator(self, index: Index, n: int, j: int, power: int) -> Coefficients | None:
        """x_j^power times an element by a closed rule, power 1 or -1; None when there is none."""
        return None

    def times_element(
        self, index: Index, n: int, other: Family, other_index: Index
    ) -> Coefficients | None:
        """The product with an element of a family by a closed rule; None when there is none."""
        return None

    def convert_from(self, other: Family, index: Index, n: int) -> Coefficients | None:
        """An element of another family in this one by a direct rule; None when there is none."""
        return None

    def n_variables(self, index: Index) -> int:
        """The least number of variables in which the element can be written."""
        return len(index)

    def show_index(self, index: Index, n: int) -> Index:
        """The index as it is printed: canonical, and read back to the same element."""
        return index


def shown(index: Index) -> str:
    """An index as a message writes it."""
    return f"({','.join(map(str, index))})"


def check_composition(index: Index, n: int, name: str, *, least: int | None = 0) -> Index:
    """A composition with n parts, each at least `least`; raises OutsideDomain with the fact."""
    if len(index) != n:
        counted = "1 part" if len(index) == 1 else f"{len(index)} parts"
        raise OutsideDomain(
            f"{name}_{shown(index)} has {counted}, the ring has n = {n}",
            code="wrong-number-of-parts")
    if least is not None and any(part < least for part in index):
        raise OutsideDomain(
            f"the parts of an index of {name} are at least {least}", code="bad-index")
    return index


def linear(
    terms: Mapping[Index, Scalar], rule: Callable[[Index], Mapping[Index, Scalar]]
) -> Coefficients:
    """Apply a linear rule, given on basis elements, to a sum of them, one sum a target."""
    collected: dict[Index, list[Scalar]] = {}
    for index, c in terms.items():
        budget.current().check()
        for target, d in rule(index).items():
            collected.setdefault(target, []).append(c * d)
    found = {target: total(values) for target, values in collected.items()}
    return {target: c for target, c in found.items() if not c.is_zero}
