"""Sets hypothesis up for the whole suite: the same cases every run, no clock in the verdict."""

from __future__ import annotations

from hypothesis import HealthCheck, settings

from effort import effort

__all__ = ["effort"]

# A busy machine must not fail a test: no deadline, and slow generation is no fault.
settings.register_profile(
    "spanwright",
    max_examples=effort(50),
    derandomize=True,
    deadline=None,
    print_blob=True,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.load_profile("spanwright")
