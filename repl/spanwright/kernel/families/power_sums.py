"""Power sums p_lambda = p_(lambda_1) p_(lambda_2) ..., p_k = x_1^k + ... + x_n^k.

Macdonald, Symmetric Functions and Hall Polynomials (1995), I.2.
"""

from __future__ import annotations

from spanwright.kernel.families.symmetric_base import MultiplicativeFamily


class PowerSums(MultiplicativeFamily):
    """p_lambda, parts at most n; a basis over Q."""

    name = "p"


FAMILIES = {"p": PowerSums()}
