"""Two-parameter Kostka polynomials K_(lambda, mu)(q, t) and the modified ones, by plethysm.

J_mu(x; q, t) = sum of K_(lambda, mu) s_lambda[X (1 - t)], so K_(lambda, mu) is the coefficient of
s_lambda when p_k is divided by 1 - t^k in J_mu. Macdonald, Symmetric Functions and Hall
Polynomials (1995), VI.8.
"""

from __future__ import annotations

from functools import lru_cache

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OutsideDomain
from spanwright.kernel.families.base import Coefficients, Index, linear, shown
from spanwright.kernel.families.diagrams import Partition, row_excess
from spanwright.kernel.families.macdonald import in_monomial_symmetric, integral_factor
from spanwright.kernel.families.nonsymmetric_macdonald import one_minus, weight_scalar
from spanwright.kernel.families.symmetric_base import RING, scalars
from spanwright.kernel.families.transitions import transition
from spanwright.kernel.indices import is_partition, trimmed


def macdonald_kostka(shape: Partition, index: Partition) -> Scalar:
    """K_(shape, index)(q, t), a polynomial; 0 when the sizes differ."""
    shape, index = _checked(shape), _checked(index)
    if sum(shape) != sum(index):
        return Scalar.zero(RING)
    return _column(index).get(shape, Scalar.zero(RING))


def modified_macdonald_kostka(shape: Partition, index: Partition) -> Scalar:
    """t^n(index) K_(shape, index)(q, 1/t), the coefficient of s_shape in the modified H_index."""
    inverted = macdonald_kostka(shape, index).substitute({"t": weight_scalar((0, -1))})
    return inverted * weight_scalar((0, row_excess(trimmed(index))))


def kostka_foulkes(shape: Partition, index: Partition) -> Scalar:
    """K_(shape, index)(t) = K_(shape, index)(0, t) (VI.8)."""
    return macdonald_kostka(shape, index).substitute({"q": Scalar.zero(RING)})


def _checked(index: Index) -> Partition:
    if not is_partition(index):
        raise OutsideDomain(
            f"{shown(index)} is not a partition", code="not-a-partition")
    return trimmed(index)


@lru_cache(maxsize=500)
def _column(index: Partition) -> Coefficients:
    """All K_(lambda, index), computed in |index| variables, where all bases are free."""
    size = sum(index)
    n = max(size, 1)
    in_m = in_monomial_symmetric(index, n)
    in_p = linear(in_m, lambda mu: scalars(transition("m", "p", mu, n)))
    divided = {}
    for cycles, c in in_p.items():
        budget.current().check()
        value = c * integral_factor(index)
        for part in cycles:
            value = value * one_minus((0, part)).inverse()
        divided[cycles] = value
    collected: dict[Index, list[Scalar]] = {}
    for cycles, c in divided.items():
        for shape, d in scalars(transition("p", "s", cycles, n)).items():
            collected.setdefault(shape, []).append(c * d)
    return {shape: total(values) for shape, values in collected.items()}
