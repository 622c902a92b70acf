"""Numbers of the theory: norms, the pairing, principal specialisations, hooks.

The pairing <f, g> = CT[f(x; q, t) g(1/x; 1/q, 1/t) K]/CT[K], K the kernel
prod_(i<j) (x_i/x_j; q)_k (q x_j/x_i; q)_k at t = q^k, is computed for generic t through
expansions in E, which are orthogonal. Macdonald, Affine Hecke Algebras and Orthogonal Polynomials
(2003), chapter 5; Cherednik, Nonsymmetric Macdonald polynomials (1995).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families.base import Index, shown
from spanwright.kernel.families.diagrams import (
    Box,
    Partition,
    boxes,
    centralizer_order,
    composition_boxes,
    row_excess,
)
from spanwright.kernel.families.macdonald import integral_factor, ratio_product
from spanwright.kernel.families.nonsymmetric_macdonald import (
    ONE,
    from_monomials,
    one_minus,
    weight_scalar,
)
from spanwright.kernel.families.symmetric_base import RING
from spanwright.kernel.indices import Composition, decreasing, is_partition, trimmed
from spanwright.kernel.laurent import LaurentPolynomial

# diagrams


def hooks(index: Composition) -> tuple[Box, ...]:
    """Arm and leg of every box of a partition or composition with parts >= 0.

    A partition is read as rows (arm = lambda_i - j, leg = lambda'_j - i), any other composition
    as columns of heights mu_i, as for E_mu.
    """
    if min(index, default=0) < 0:
        raise OutsideDomain("a diagram has parts that are at least 0", code="bad-index")
    return boxes(trimmed(index)) if is_partition(index) else composition_boxes(index)


def _raised(mu: Composition) -> tuple[Composition, int]:
    """mu with its least part brought to 0, and that part."""
    low = min(mu, default=0)
    return tuple(part - low for part in mu), low


def _product(factors: Iterable[Scalar]) -> Scalar:
    value = ONE
    for factor in factors:
        value = value * factor
    return value


# norms


def norm_E(mu: Composition) -> Scalar:
    """<E_mu, E_mu> with <1, 1> = 1, mu in Z^n.

    Over boxes of mu, (1 - q^(l+1) t^a)/(1 - q^(l+1) t^(a+1)); over boxes (i, j) of the sorted
    mu, (1 - q^j t^(n+1-i))/(1 - q^j t^(n-i)). Shifting all parts changes nothing.
    """
    n = len(mu)
    mu, _ = _raised(mu)
    value = ONE
    for box in composition_boxes(mu):
        value = (value * one_minus((box.leg + 1, box.arm))
                 * one_minus((box.leg + 1, box.arm + 1)).inverse())
    for box in boxes(trimmed(decreasing(mu))):
        i, j = box.row, box.column
        value = value * one_minus((j, n + 1 - i)) * one_minus((j, n - i)).inverse()
    return value


def norm_P(partition: Partition, n: int) -> Scalar:
    """<P_lambda, P_lambda>' with <1, 1>' = 1 for the symmetric kernel in n variables.

    The kernel is prod_(i != j) (x_i/x_j; q)_k at t = q^k (Macdonald 1995, VI.9). It is invariant,
    and for symmetric f, g its normalised constant term is that of the pairing of this module.
    """
    _check_parts(partition, n)
    value = ratio_product(trimmed(partition)).inverse()
    for box in boxes(trimmed(partition)):
        i, j = box.row, box.column
        value = value * one_minus((j - 1, n + 1 - i)) * one_minus((j, n - i)).inverse()
    return value


def power_norm_P(partition: Partition) -> Scalar:
    """<P_lambda, P_lambda> for the power-sum product, 1/b_lambda (Macdonald 1995, VI.6.19)."""
    return ratio_product(trimmed(partition)).inverse()


def _check_parts(partition: Partition, n: int) -> None:
    if not is_partition(partition) or len(trimmed(partition)) > n:
        raise OutsideDomain(
            f"{shown(partition)} is no partition with at most {n} parts",
            code="bad-index")


# pairings


def inverted_parameters(value: Scalar) -> Scalar:
    """The scalar with q and t replaced by 1/q and 1/t."""
    return value.substitute({"q": weight_scalar((-1, 0)), "t": weight_scalar((0, -1))})


def inner_of_E(left: Mapping[Index, Scalar], right: Mapping[Index, Scalar]) -> Scalar:
    """The pairing of two sums of E_mu, given by their coefficients.

    Linear in the first argument; coefficients of the second have q and t inverted.
    """
    return total(
        [c * inverted_parameters(right[mu]) * norm_E(mu)
         for mu, c in left.items() if mu in right], RING)


def inner(f: LaurentPolynomial, g: LaurentPolynomial) -> Scalar:
    """The pairing of two Laurent polynomials, through their expansions in E."""
    return inner_of_E(from_monomials(f), from_monomials(g))


def power_sum_weight(cycles: Partition) -> Scalar:
    """<p_lambda, p_lambda> = z_lambda prod (1 - q^(lambda_i))/(1 - t^(lambda_i))."""
    value = Scalar.number(RING, centralizer_order(cycles))
    for part in cycles:
        value = value * one_minus((part, 0)) * one_minus((0, part)).inverse()
    return value


def power_sum_product(
    left: Mapping[Index, Scalar], right: Mapping[Index, Scalar], n: int
) -> Scalar:
    """<f, g> with <p_lambda, p_mu> = delta z_lambda prod (1 - q^(lambda_i))/(1 - t^(lambda_i)).

    Arguments are coefficients in p, bilinear. It is a product of symmetric functions: raises
    OutsideDomain when a degree is larger than n, where the p_lambda are dependent.
    """
    degree = max((sum(index) for index in (*left, *right)), default=0)
    if degree > n:
        raise OutsideDomain(
            f"the power-sum product of degree {degree} needs n >= {degree}, n is {n}",
            code="too-few-variables")
    return total(
        [c * right[cycles] * power_sum_weight(cycles)
         for cycles, c in left.items() if cycles in right], RING)


# principal specialisation


def principal(f: LaurentPolynomial) -> Scalar:
    """f(1, t, ..., t^(n-1)), by evaluation."""
    value = f.evaluate({j: weight_scalar((0, j - 1)) for j in range(1, f.n + 1)}).as_scalar()
    assert value is not None
    return value


def principal_E(mu: Composition) -> Scalar:
    """E_mu(1, t, ..., t^(n-1)) in closed form, mu in Z^n.

    t^n(lambda) prod (1 - q^j t^(n+1-i)) over boxes of the sorted mu, over
    prod (1 - q^(l+1) t^(a+1)) over boxes of mu (Cherednik 1995, as above).
    """
    n = len(mu)
    mu, low = _raised(mu)
    shape = trimmed(decreasing(mu))
    value = weight_scalar((0, row_excess(shape) + low * (n * (n - 1) // 2)))
    for box in boxes(shape):
        value = value * one_minus((box.column, n + 1 - box.row))
    return value * _product(
        one_minus((box.leg + 1, box.arm + 1)) for box in composition_boxes(mu)).inverse()


def principal_P(partition: Partition, n: int) -> Scalar:
    """P_lambda(1, t, ..., t^(n-1)) in closed form (Macdonald 1995, VI.6.11')."""
    _check_parts(partition, n)
    shape = trimmed(partition)
    return principal_J(shape, n) * integral_factor(shape).inverse()


def principal_J(partition: Partition, n: int) -> Scalar:
    """J_lambda(1, t, ..., t^(n-1)) = t^n(lambda) prod (1 - q^(j-1) t^(n+1-i)) (VI.8.8)."""
    _check_parts(partition, n)
    shape = trimmed(partition)
    return weight_scalar((0, row_excess(shape))) * _product(
        one_minus((box.column - 1, n + 1 - box.row)) for box in boxes(shape))


def principal_s(partition: Partition, n: int) -> Scalar:
    """s_lambda(1, t, ..., t^(n-1)) by hooks and contents (Macdonald 1995, I.3, Example 1)."""
    _check_parts(partition, n)
    shape = trimmed(partition)
    value = weight_scalar((0, row_excess(shape)))
    for box in boxes(shape):
        value = (value * one_minus((0, n + box.column - box.row))
                 * one_minus((0, box.hook)).inverse())
    return value
