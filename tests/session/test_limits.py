"""Every claim of the dictionary of limits holds; its sources stand beside each in limits.py."""

from __future__ import annotations

import pytest

from spanwright import Session
from spanwright.limits import LIMITS, LimitEntry


@pytest.mark.parametrize("entry", LIMITS, ids=lambda e: f"{e.family} {e.values}")
def test_limit_holds(entry: LimitEntry) -> None:
    outcome = Session(n=3).run(entry.claim)
    assert outcome.status == "ok", outcome.text
