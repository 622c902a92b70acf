"""How hard the random tests try: `effort(n)` is n cases times SPANWRIGHT_TEST_EFFORT.

Every test file may say `from effort import effort` and `@settings(max_examples=effort(30))`.
"""

from __future__ import annotations

import os

VARIABLE = "SPANWRIGHT_TEST_EFFORT"


def effort(cases: int) -> int:
    """The number of cases to try: `cases` times the environment's whole number (1 when unset)."""
    text = os.environ.get(VARIABLE, "1")
    if not (text.isascii() and text.isdigit() and int(text) > 0):
        raise ValueError(f"{VARIABLE} must be a whole number from 1 on, not {text!r}")
    return cases * int(text)
