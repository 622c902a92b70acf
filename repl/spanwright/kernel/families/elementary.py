"""Elementary symmetric polynomials e_lambda = e_(lambda_1) e_(lambda_2) ...

Macdonald, Symmetric Functions and Hall Polynomials (1995), I.2.
"""

from __future__ import annotations

from spanwright.kernel.families.symmetric_base import MultiplicativeFamily


class Elementary(MultiplicativeFamily):
    """e_lambda, parts at most n."""

    name = "e"


FAMILIES = {"e": Elementary()}
