"""The functions of the theory: norms, pairings, special values, Kostka numbers, positivity."""

from __future__ import annotations

from typing import Any

from spanwright.context import Evaluation, failure
from spanwright.kernel import indices, reduction
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import KernelError, OutsideDomain
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.text import by_how_much, element_text, text
from spanwright.values import (
    FamilyMark,
    ListValue,
    Table,
    Truth,
    as_scalar,
    is_element,
    is_index,
    is_operator,
    kind_name,
    single_element,
)
from spanwright_grammar import syntax


def element_argument(e: Evaluation, node: syntax.Node) -> Any:
    """An argument that must be a scalar, polynomial or expansion."""
    value = e.value(node)
    if not is_element(value):
        raise failure("wrong-kind", node.place,
                      f"a polynomial or an expansion is needed here; this is {kind_name(value)}")
    scalar = as_scalar(value)
    return value if scalar is None else scalar


def _partition(e: Evaluation, node: syntax.Node) -> tuple[int, ...]:
    value = e.value(node)
    whole = e.as_integer(value)
    index = (whole,) if whole is not None else value
    if not is_index(index) or not indices.is_partition(index):
        raise failure("not-a-partition", node.place,
                      "a partition is needed here: weakly decreasing parts, none negative",
                      "(2,1)")
    return indices.trimmed(tuple(index))


def norm(e: Evaluation, node: syntax.Call) -> Any:
    """<f, f> with <1, 1> = 1: closed formulas for one E_mu or P_lambda."""
    from spanwright.kernel.families import statistics

    value = element_argument(e, node.arguments[0])
    n = e.require_n(node)
    single = single_element(value)
    if single is not None and single[0] == "E":
        return statistics.norm_E(single[1])
    if single is not None and single[0] == "P":
        return statistics.norm_P(single[1], n)
    terms = reduction.expand(e.algebra.aligned(value), family("E"), n).terms
    return statistics.inner_of_E(terms, terms)


def inner(e: Evaluation, node: syntax.Call) -> Any:
    """The constant-term pairing for which the E_mu are orthogonal, normalised by <1, 1> = 1."""
    from spanwright.kernel.families import statistics

    n = e.require_n(node)
    left, right = (
        reduction.expand(e.algebra.aligned(element_argument(e, a)), family("E"), n).terms
        for a in node.arguments)
    return statistics.inner_of_E(left, right)


def principal(e: Evaluation, node: syntax.Call) -> Any:
    """The value at x = (1, t, ..., t^(n-1)), in closed form for one element of E, P, J, s."""
    from spanwright.kernel.families import statistics

    value = element_argument(e, node.arguments[0])
    n = e.require_n(node)
    single = single_element(value)
    if single is not None:
        name, index = single
        if name == "E":
            return statistics.principal_E(index)
        rules = {"P": statistics.principal_P, "J": statistics.principal_J,
                 "s": statistics.principal_s}
        if name in rules:
            return rules[name](index, n)
    return statistics.principal(reduction.to_polynomial(e.algebra.aligned(value), n))


def hooks(e: Evaluation, node: syntax.Call) -> Any:
    """Arm and leg of every box."""
    from spanwright.kernel.families import statistics

    value = e.value(node.arguments[0])
    if not is_index(value):
        raise failure("wrong-kind", node.arguments[0].place,
                      f"an index is needed here; this is {kind_name(value)}", "hooks((2,1,0))")
    rows = tuple((b.row, b.column, b.arm, b.leg, b.hook) for b in statistics.hooks(value))
    reading = (
        "rows of a partition" if indices.is_partition(value)
        else "columns of heights mu_i: row is the position i, column the height")
    return Table(("row", "column", "arm", "leg", "hook"), rows, f"{text(value)}, {reading}")


def kostka(e: Evaluation, node: syntax.Call) -> Any:
    """K_{lambda mu}: a number; with one scalar K(t), Kostka-Foulkes; with two K(q, t)."""
    from spanwright.kernel.families.kostka import kostka as number
    from spanwright.kernel.families.macdonald_kostka import kostka_foulkes, macdonald_kostka

    shape, content = (_partition(e, a) for a in node.arguments[:2])
    values = [_scalar(e, a) for a in node.arguments[2:]]
    if not values:
        return number(shape, content)
    if len(values) == 1:
        return kostka_foulkes(shape, content).substitute({"t": values[0]})
    return macdonald_kostka(shape, content).substitute(dict(zip(("q", "t"), values, strict=True)))


def _scalar(e: Evaluation, node: syntax.Node) -> Scalar:
    value = as_scalar(e.value(node))
    if value is None:
        raise failure("wrong-kind", node.place, "a scalar is needed here",
                      "kostka((2,1), (1,1,1), q, t)")
    return value


def double(e: Evaluation, node: syntax.Call) -> Any:
    """f expanded in the double Schubert polynomials S_w(x;y), which no bare symbol names."""
    value = element_argument(e, node.arguments[0])
    n = e.require_n(node)
    return reduction.expand(e.algebra.aligned(value), e.algebra.family("double Schubert"), n)


def jack(e: Evaluation, node: syntax.Call) -> Any:
    """The Jack polynomial with parameter alpha."""
    from spanwright.kernel.families.jack import jack as polynomial

    n = e.require_n(node)
    index = _partition(e, node.arguments[0])
    if len(index) > n:
        raise failure("wrong-number-of-parts", node.arguments[0].place,
                      f"a partition with at most n = {n} parts is needed here")
    return polynomial(index, n)


def symmetric(e: Evaluation, node: syntax.Call) -> Any:
    """Whether every exchange of neighbouring variables leaves f alone."""
    from spanwright.kernel.families.symmetric_base import NotSymmetric, check_symmetric

    value = element_argument(e, node.arguments[0])
    n = e.require_n(node)
    polynomial = reduction.to_polynomial(e.algebra.aligned(value), n)
    try:
        check_symmetric(polynomial)
    except NotSymmetric as found:
        return Truth(False, found.difference, f"s_{found.position} moves it: f - s_"
                     f"{found.position} f is the difference")
    return Truth(True)


def positive(e: Evaluation, node: syntax.Call) -> Any:
    """Whether all coefficients in a basis are polynomials with coefficients in N."""
    value = element_argument(e, node.arguments[0])
    n = e.require_n(node)
    if len(node.arguments) == 2:
        mark = _family_mark(e, node.arguments[1])
        try:
            value = (reduction.to_polynomial(e.algebra.aligned(value), n) if mark == "x"
                     else reduction.expand(e.algebra.aligned(value), family(mark), n))
        except KernelError as error:
            raise failure("not-in-span", node.arguments[0].place,
                          error.fact + by_how_much(error)) from error
    if isinstance(value, Scalar):
        return Truth(is_positive(value), None, "" if is_positive(value) else text(value))
    items: Any = value.items()
    for index, c in items:
        if not is_positive(c):
            name = value.family.name if isinstance(value, Expansion) else "x"
            place = (element_text(name, index) if name != "x"
                     else f"x^({','.join(map(str, index))})")
            return Truth(False, None, f"the coefficient of {place} is {text(c)}")
    return Truth(True)


def _family_mark(e: Evaluation, node: syntax.Node) -> str:
    if isinstance(node, syntax.Name) and node.name == "x":
        return "x"
    value = e.value(node)
    if isinstance(value, FamilyMark):
        return value.family.name
    raise failure("wrong-kind", node.place,
                  f"a family is needed here; this is {kind_name(value)}", "positive(f, s)")


def is_positive(value: Scalar) -> bool:
    """Whether a scalar is a polynomial with coefficients in N."""
    if value.is_zero:
        return True
    if not value.is_polynomial or value.content < 0:
        return False
    return all(c > 0 for c in value.expanded_rest().coeffs())


def stable(e: Evaluation, node: syntax.Call) -> Any:
    """Whether f is what its counterpart in one variable more becomes at x_(n+1) = 0."""
    value = element_argument(e, node.arguments[0])
    if not isinstance(value, Expansion):
        raise failure("wrong-kind", node.arguments[0].place,
                      "stable takes a sum of basis elements, whose indices can be lengthened",
                      "stable(P_(2,1,0))")
    n = value.n
    one_more = Expansion(
        value.family, n + 1,
        {value.family.check_index(_lengthened(value, i), n + 1): c
         for i, c in value.terms.items()})
    try:
        above = one_more.to_monomials().evaluate({n + 1: Scalar.zero(value_ring(value))})
    except OutsideDomain as error:
        raise failure("pole", node.arguments[0].place, error.fact) from error
    cut = LaurentPolynomial(
        n, above.ring, {x[:n]: c for x, c in above.terms.items()}, above.scale)
    difference = cut - value.to_monomials()
    if difference.is_zero:
        return Truth(True)
    return Truth(False, difference, f"f in {n + 1} variables at x_{n + 1} = 0, minus f")


def value_ring(value: Expansion) -> Any:
    """The parameter ring of an expansion's coefficients."""
    return next(iter(value.terms.values())).ring if value.terms else Scalar.root_of_t().ring


def _lengthened(value: Expansion, index: tuple[int, ...]) -> tuple[int, ...]:
    return (*index, 0) if value.family.index_kind == "composition" else index


def commutator(e: Evaluation, node: syntax.Call) -> Any:
    """A B - B A in canonical form."""
    from spanwright.kernel.operators.canonical import commutator as bracket

    a, b = (operator_argument(e, x) for x in node.arguments)
    return bracket(a, b)


def operator_argument(e: Evaluation, node: syntax.Node) -> Any:
    """An argument that must be an operator; scalars count."""
    value = e.value(node)
    if is_operator(value):
        return value.to_operator() if hasattr(value, "to_operator") else value
    scalar = as_scalar(value)
    if scalar is not None:
        from spanwright.kernel.operators.words import Operator

        return Operator.scalar(e.require_n(node), scalar, e.context.settings.hecke)
    raise failure("wrong-kind", node.place,
                  f"an operator is needed here; this is {kind_name(value)}", "Y_1")


def eigenvalue(e: Evaluation, node: syntax.Call) -> Any:
    """The scalar c with A f = c f."""
    operator = operator_argument(e, node.arguments[0])
    value = element_argument(e, node.arguments[1])
    from spanwright.kernel.operators.questions import NotAnEigenvector
    from spanwright.kernel.operators.questions import eigenvalue as found

    n = e.require_n(node)
    element = e.algebra.aligned(value)
    if isinstance(element, Scalar):
        element = reduction.to_polynomial(element, n)
    try:
        return e.algebra.specialised_coefficients(found(operator, element))
    except NotAnEigenvector as error:
        shown = text(error.result)
        shown = shown if len(shown) < 200 else shown[:198] + " …"
        raise failure("not-an-eigenvector", node.arguments[1].place,
                      f"this is no eigenvector: the operator makes it {shown}") from error


def matrix(e: Evaluation, node: syntax.Call) -> Any:
    """The matrix of an operator on the span of a list: column k is the image of entry k."""
    operator = operator_argument(e, node.arguments[0])
    value = e.value(node.arguments[1])
    if not isinstance(value, ListValue) or not value.items:
        raise failure("wrong-kind", node.arguments[1].place,
                      f"a list of basis elements is needed here; this is {kind_name(value)}",
                      "list(E_mu for mu in orbit((2,1,0)))")
    from spanwright.kernel.operators import questions

    elements = [e.algebra.aligned(v) if is_element(v) else v for v in value.items]
    n = e.require_n(node)
    elements = [reduction.to_polynomial(v, n) if isinstance(v, Scalar) else v for v in elements]
    wrong = next((v for v in elements if not isinstance(v, Expansion | LaurentPolynomial)), None)
    if wrong is not None:
        raise failure("wrong-kind", node.arguments[1].place,
                      f"the list holds {kind_name(wrong)}; it takes basis elements or polynomials")
    found = questions.matrix(operator, elements)
    if found.outside:
        shown = ", ".join(_named(found.family_name, i) for i in found.missing[:5])
        more = f" and {len(found.missing) - 5} more" if len(found.missing) > 5 else ""
        raise failure("not-in-span", node.arguments[1].place,
                      f"the span is not stable: the list misses {shown}{more}")
    heads = [text(v) for v in value.items]
    rows = tuple(
        (head, *(e.algebra.specialised_coefficients(c) for c in row))
        for head, row in zip(heads, found.rows, strict=True))
    return Table(("", *heads), rows, "column k holds the image of the k-th element")


def _named(name: str, index: tuple[int, ...]) -> str:
    return f"x^({','.join(map(str, index))})" if name == "x" else element_text(name, index)
