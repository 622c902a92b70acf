"""Sets the whole suite up: the same cases every run, no clock in the verdict, its own folder."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import pytest
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


@pytest.fixture(scope="session", autouse=True)
def away_from_the_project(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """Sessions write in the current folder, and random sentences may: never in the project's."""
    before = Path.cwd()
    os.chdir(tmp_path_factory.mktemp("current"))
    yield
    os.chdir(before)
