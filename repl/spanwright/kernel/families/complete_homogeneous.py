"""Complete homogeneous symmetric polynomials h_lambda = h_(lambda_1) h_(lambda_2) ...

Macdonald, Symmetric Functions and Hall Polynomials (1995), I.2.
"""

from __future__ import annotations

from spanwright.kernel.families.symmetric_base import MultiplicativeFamily


class CompleteHomogeneous(MultiplicativeFamily):
    """h_lambda, parts at most n."""

    name = "h"


FAMILIES = {"h": CompleteHomogeneous()}
