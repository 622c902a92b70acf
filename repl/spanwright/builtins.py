"""The functions of the language: vocabulary name to kernel function.

Signatures, meanings and examples stand in the vocabulary; here is only what each computes.
"""

from __future__ import annotations

from collections.abc import Callable
from math import comb, factorial
from typing import Any

from spanwright import theory
from spanwright.context import SIZE_LIMIT, Evaluation, failure
from spanwright.kernel import indices, reduction
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.values import (
    IndexSet,
    ListValue,
    as_scalar,
    is_index,
    kind_name,
)
from spanwright_grammar import syntax
from spanwright_grammar.vocabulary import lookup_all

Builtin = Callable[[Evaluation, syntax.Call], Any]


def call_builtin(e: Evaluation, node: syntax.Call) -> Any:
    """Evaluate a call of a function of the language; raises Failure for unknown names."""
    entry = _TABLE.get(node.function)
    if entry is None:
        if lookup_all(node.function):
            raise failure("not-a-function", node.place,
                          f"{node.function} is not a function",
                          lookup_all(node.function)[0].example)
        raise e.unknown(node.function, node.place)
    low, high, rule = entry
    if not low <= len(node.arguments) <= high:
        counts = str(low) if low == high else f"{low} or more"
        signature = next(
            (x.signature for x in lookup_all(node.function) if x.kind in ("function", "set")),
            node.function)
        raise failure("wrong-number-of-arguments", node.place,
                      f"{node.function} takes {counts} argument{'' if counts == '1' else 's'}, "
                      f"here are {len(node.arguments)}", signature)
    return rule(e, node)


# what arguments must be


def index_argument(e: Evaluation, node: syntax.Node) -> tuple[int, ...]:
    """An argument that must be an index."""
    value = e.value(node)
    if is_index(value):
        return tuple(value)
    whole = e.as_integer(value)
    if whole is not None:
        return (whole,)
    raise failure("wrong-kind", node.place, f"an index is needed here; this is {kind_name(value)}",
                  "(2,0,1)")


def partition_argument(e: Evaluation, node: syntax.Node) -> tuple[int, ...]:
    """An argument that must be a partition."""
    found = index_argument(e, node)
    if not indices.is_partition(found):
        raise failure("not-a-partition", node.place,
                      "the parts of a partition weakly decrease and are not negative",
                      f"({','.join(map(str, indices.decreasing(found)))})")
    return found


def permutation_argument(e: Evaluation, node: syntax.Node) -> tuple[int, ...]:
    """An argument that must be a permutation."""
    return e.permutation(node, 10**6) if isinstance(node, syntax.Number) else \
        _checked_permutation(e, node)


def _checked_permutation(e: Evaluation, node: syntax.Node) -> tuple[int, ...]:
    found = index_argument(e, node)
    if not indices.is_permutation(found):
        raise failure("not-a-permutation", node.place,
                      "a permutation in one-line notation is needed here", "(3,1,2)")
    return found


def scalar_argument(e: Evaluation, node: syntax.Node) -> Any:
    """An argument that must be a scalar."""
    value = e.value(node)
    scalar = as_scalar(value)
    if scalar is None:
        raise failure("wrong-kind", node.place,
                      f"a scalar is needed here; this is {kind_name(value)}", "1 - q t")
    return scalar


# polynomials and expansions


def _degree(e: Evaluation, node: syntax.Call) -> Any:
    value = theory.element_argument(e, node.arguments[0])
    polynomial = reduction.to_polynomial(value, e.n or 1)
    if polynomial.is_zero:
        raise failure("wrong-kind", node.place, "the zero polynomial has no degree")
    return max(polynomial.degrees())


def _support(e: Evaluation, node: syntax.Call) -> Any:
    value = theory.element_argument(e, node.arguments[0])
    if isinstance(value, Expansion | LaurentPolynomial):
        return ListValue(tuple(value.support()))
    return ListValue(((0,) * (e.n or 1),) if not value.is_zero else ())


def _leading(e: Evaluation, node: syntax.Call) -> Any:
    value = theory.element_argument(e, node.arguments[0])
    if not isinstance(value, Expansion | LaurentPolynomial) or value.is_zero:
        raise failure("wrong-kind", node.place, "a nonzero polynomial or expansion is needed")
    index = value.support()[0]
    if isinstance(value, Expansion):
        return Expansion(value.family, value.n, {index: value.terms[index]})
    return LaurentPolynomial.monomial(value.n, index, value.coefficient(index))


def _monomial(e: Evaluation, node: syntax.Call) -> Any:
    index = index_argument(e, node.arguments[0])
    n = e.require_n(node)
    if len(index) != n:
        raise failure("wrong-number-of-parts", node.arguments[0].place,
                      f"{len(index)} exponents, the ring has n = {n}")
    return e.algebra.monomial(n, index)


def _numerator(e: Evaluation, node: syntax.Call) -> Any:
    return scalar_argument(e, node.arguments[0]).numerator()


def _denominator(e: Evaluation, node: syntax.Call) -> Any:
    return scalar_argument(e, node.arguments[0]).denominator()


# indices


def _sort(e: Evaluation, node: syntax.Call) -> Any:
    return indices.decreasing(index_argument(e, node.arguments[0]))


def _reverse(e: Evaluation, node: syntax.Call) -> Any:
    return tuple(reversed(index_argument(e, node.arguments[0])))


def _conjugate(e: Evaluation, node: syntax.Call) -> Any:
    return indices.conjugate(partition_argument(e, node.arguments[0]))


def _code(e: Evaluation, node: syntax.Call) -> Any:
    return indices.code(permutation_argument(e, node.arguments[0]))


def _length(e: Evaluation, node: syntax.Call) -> Any:
    return indices.length(permutation_argument(e, node.arguments[0]))


def _inverse(e: Evaluation, node: syntax.Call) -> Any:
    value = e.value(node.arguments[0])
    if is_index(value):
        return indices.inverse(permutation_argument(e, node.arguments[0]))
    return e.algebra.inverse(value)


# lists and integers


def _list(e: Evaluation, node: syntax.Call) -> Any:
    if len(node.arguments) == 1:
        value = e.value(node.arguments[0])
        if isinstance(value, ListValue):
            return value
        if isinstance(value, IndexSet):
            if value.size() > SIZE_LIMIT:
                raise failure("too-large", node.place, f"a list of {value.size():,} items")
            return ListValue(tuple(value))
        return ListValue((value,))
    return ListValue(tuple(e.value(a) for a in node.arguments))


def _count(e: Evaluation, node: syntax.Call) -> Any:
    value = e.value(node.arguments[0])
    if isinstance(value, IndexSet):
        return value.size()
    if isinstance(value, ListValue):
        return len(value.items)
    if isinstance(value, Expansion | LaurentPolynomial):
        return len(value)
    if isinstance(value, tuple):
        return len(value)
    raise failure("wrong-kind", node.place,
                  f"an index set or a list is needed here; this is {kind_name(value)}")


def _integers(e: Evaluation, node: syntax.Call) -> list[int]:
    if len(node.arguments) == 1:
        value = e.value(node.arguments[0])
        items = value.items if isinstance(value, ListValue) else value
        if isinstance(items, IndexSet):
            items = tuple(items)
        if isinstance(items, tuple) and items:
            found = [e.as_integer(i) for i in items]
            if all(i is not None for i in found):
                return [i for i in found if i is not None]
    return [e.integer(a, "an argument") for a in node.arguments]


def _max(e: Evaluation, node: syntax.Call) -> Any:
    return max(_integers(e, node))


def _min(e: Evaluation, node: syntax.Call) -> Any:
    return min(_integers(e, node))


def _abs(e: Evaluation, node: syntax.Call) -> Any:
    return abs(e.integer(node.arguments[0], "an argument"))


# index sets


def _size_argument(e: Evaluation, node: syntax.Node) -> int:
    found = e.integer(node, "a size")
    if found < 0:
        raise failure(
            "setting-out-of-range", node.place, f"a size is not negative; this is {found}")
    return found


def _compositions(e: Evaluation, node: syntax.Call) -> Any:
    k = _size_argument(e, node.arguments[0])
    n = e.require_n(node)
    return IndexSet(
        f"compositions({k})", lambda: indices.compositions(k, n),
        lambda v: is_index(v) and len(v) == n and sum(v) == k and min(v) >= 0,
        lambda: comb(k + n - 1, n - 1))


def _partitions(e: Evaluation, node: syntax.Call) -> Any:
    k = _size_argument(e, node.arguments[0])
    n = e.require_n(node)

    def enumerate_padded() -> Any:
        return (indices.padded(p, n) for p in indices.partitions(k, n))

    return IndexSet(
        f"partitions({k})", enumerate_padded,
        lambda v: is_index(v) and len(v) == n and sum(v) == k and indices.is_partition(v),
        lambda: sum(1 for _ in enumerate_padded()))


def _permutations(e: Evaluation, node: syntax.Call) -> Any:
    k = _size_argument(e, node.arguments[0])
    if k > 10_000:
        raise failure("too-large", node.place, "the permutations of more than 10,000 numbers")
    return IndexSet(
        f"permutations({k})", lambda: indices.permutations(k),
        lambda v: is_index(v) and len(v) == k and indices.is_permutation(v),
        lambda: factorial(k))


def _subsets(e: Evaluation, node: syntax.Call) -> Any:
    base = e.domain(node.arguments[0])
    if base.size() > 10_000:
        raise failure("too-large", node.place, "the subsets of so large a set")
    items = list(base)
    return IndexSet(
        f"subsets({base.description})", lambda: indices.subsets(items),
        lambda v: is_index(v) and tuple(i for i in items if i in v) == v,
        lambda: int(2 ** len(items)))


def _orbit(e: Evaluation, node: syntax.Call) -> Any:
    mu = index_argument(e, node.arguments[0])
    size = factorial(len(mu))
    for part in set(mu):
        size //= factorial(mu.count(part))
    return IndexSet(
        f"orbit(({','.join(map(str, mu))}))", lambda: indices.orbit(mu),
        lambda v: is_index(v) and sorted(v) == sorted(mu), lambda: size)


_TABLE: dict[str, tuple[int, int, Builtin]] = {
    "degree": (1, 1, _degree), "support": (1, 1, _support), "leading": (1, 1, _leading),
    "monomial": (1, 1, _monomial), "numerator": (1, 1, _numerator),
    "denominator": (1, 1, _denominator), "sort": (1, 1, _sort), "reverse": (1, 1, _reverse),
    "conjugate": (1, 1, _conjugate), "code": (1, 1, _code), "length": (1, 1, _length),
    "inverse": (1, 1, _inverse), "list": (0, 10**6, _list), "count": (1, 1, _count),
    "max": (1, 10**6, _max), "min": (1, 10**6, _min), "abs": (1, 1, _abs),
    "compositions": (1, 1, _compositions), "partitions": (1, 1, _partitions),
    "norm": (1, 1, theory.norm), "inner": (2, 2, theory.inner),
    "principal": (1, 1, theory.principal), "hooks": (1, 1, theory.hooks),
    "kostka": (2, 4, theory.kostka),
    "double": (1, 1, theory.double), "jack": (1, 1, theory.jack),
    "symmetric": (1, 1, theory.symmetric),
    "positive": (1, 2, theory.positive), "stable": (1, 1, theory.stable),
    "commutator": (2, 2, theory.commutator), "eigenvalue": (2, 2, theory.eigenvalue),
    "matrix": (2, 2, theory.matrix),
    "permutations": (1, 1, _permutations), "subsets": (1, 1, _subsets), "orbit": (1, 1, _orbit),
}
