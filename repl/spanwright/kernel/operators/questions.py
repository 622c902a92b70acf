"""Questions about an operator: its eigenvalue on an element, its matrix on the span of a list."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Index
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import support_order
from spanwright.kernel.operators.actions import Value, act, as_polynomial
from spanwright.kernel.operators.words import Operator
from spanwright.kernel.parameters import ParameterRing


class NotAnEigenvector(OutsideDomain):
    """The element is no eigenvector; `result` is what the operator makes of it."""

    code = "not-an-eigenvector"

    def __init__(self, fact: str, result: Value) -> None:
        super().__init__(fact)
        self.result = result


def eigenvalue(operator: Operator, element: Value | Index) -> Scalar:
    """The scalar c with operator(element) = c element; a tuple mu stands for E_mu.

    Raises NotAnEigenvector, with the result, when there is none, OutsideDomain for the element 0.
    """
    if isinstance(element, tuple):
        element = Expansion.element(family("E"), operator.n, element)
    source = _coordinates(element)
    if not source:
        raise OutsideDomain("0 is no eigenvector")
    image = act(operator, element)
    if isinstance(element, Expansion) and not (
        isinstance(image, Expansion) and image.family is element.family
    ):
        source = _coordinates(as_polynomial(element))
        target = _coordinates(as_polynomial(image))
    elif isinstance(image, Expansion) and not isinstance(element, Expansion):
        target = _coordinates(as_polynomial(image))
    else:
        target = _coordinates(image)
    index = min(source)
    found = target.get(index)
    value = Scalar.zero(ParameterRing.get()) if found is None else found / source[index]
    expected = {i: c * value for i, c in source.items()} if value else {}
    if expected != target:
        raise NotAnEigenvector("the element is no eigenvector of this operator", image)
    return value


def _coordinates(value: Value) -> dict[Index, Scalar]:
    return dict(value.items())


@dataclass(frozen=True)
class OperatorMatrix:
    """The matrix of an operator on the span of a list: column k is the image of element k.

    `missing` names the indices (of the elements' family, or exponents of monomials) that the
    images reach outside the span, and `outside` the places of those images; both are empty when
    the span is stable, and `rows` is empty when it is not.
    """

    rows: tuple[tuple[Scalar, ...], ...]
    missing: tuple[Index, ...]
    outside: tuple[int, ...]
    family_name: str


def matrix(operator: Operator, elements: Sequence[Value]) -> OperatorMatrix:
    """The matrix on the span of linearly independent elements; raises OutsideDomain else."""
    values = list(elements)
    images = [act(operator, v) for v in values]
    together = [*values, *images]
    first = together[0] if together else None
    name = "x"
    order: Callable[[Index], Any] = support_order
    if isinstance(first, Expansion) and all(
        isinstance(v, Expansion) and v.family is first.family for v in together
    ):
        name, order = first.family.name, first.family.order_key
    else:
        values = [as_polynomial(v) for v in values]
        images = [as_polynomial(v) for v in images]
    span = _Span([_coordinates(v) for v in values])
    columns: list[list[Scalar]] = []
    missing: set[Index] = set()
    outside = []
    for k, image in enumerate(images):
        budget.current().check()
        combination, rest = span.coordinates(_coordinates(image))
        columns.append(combination)
        if rest:
            outside.append(k)
            missing |= set(rest)
    rows = () if outside else tuple(zip(*columns))
    return OperatorMatrix(rows, tuple(sorted(missing, key=order)), tuple(outside), name)


class _Span:
    """Linearly independent vectors in echelon form, with what each row is made of."""

    def __init__(self, vectors: list[dict[Index, Scalar]]) -> None:
        self.n_vectors = len(vectors)
        self.rows: list[tuple[Index, dict[Index, Scalar], list[Scalar]]] = []
        one = Scalar.one(ParameterRing.get())
        for k, vector in enumerate(vectors):
            used, rest = self.coordinates(vector)
            if not rest:
                raise OutsideDomain("the elements of the list are linearly dependent")
            pivot = min(rest)
            inverse = rest[pivot].inverse()
            own = [-c * inverse for c in used]
            own[k] = inverse if used[k].is_zero else own[k] + inverse
            row = {i: c * inverse for i, c in rest.items()}
            row[pivot] = one
            self.rows.append((pivot, row, own))

    def coordinates(
        self, vector: dict[Index, Scalar]
    ) -> tuple[list[Scalar], dict[Index, Scalar]]:
        """The combination of the vectors, and what is left over."""
        zero = Scalar.zero(ParameterRing.get())
        combination = [zero] * self.n_vectors
        rest = dict(vector)
        for pivot, row, made_of in self.rows:
            c = rest.get(pivot)
            if c is None:
                continue
            for i, d in row.items():
                known = rest.get(i)
                changed = -(c * d) if known is None else known - c * d
                if changed.is_zero:
                    rest.pop(i, None)
                else:
                    rest[i] = changed
            combination = [
                x if m.is_zero else x + c * m for x, m in zip(combination, made_of)]
        return combination, rest
