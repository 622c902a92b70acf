"""By what means many cases are run: how many processes, a cluster, a file to go on from.

Set by whoever owns the session, for the time of a sentence; the sentences themselves see no
option of a command line.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass
from pathlib import Path

from spanwright.files import Folder


@dataclass(frozen=True, slots=True)
class Means:
    """What a run of many cases may use.

    `jobs` overrides the setting of that name, 0 means the process at hand alone. `cluster` is the
    address of a scheduler. Finished cases are kept in the file `kept` and taken from it;
    `only_failed` runs those again that the file calls failed or undecided, and no others.
    `progress` is told a line of plain text a few times a second at most. `case_seconds` bounds
    every single case.
    """

    jobs: int | None = None
    cluster: str | None = None
    kept: Path | None = None
    only_failed: bool = False
    stops_at_first: bool = False
    case_seconds: float | None = None
    folder: Folder | None = None
    progress: Callable[[str], None] | None = None


_PLAIN = Means()
_in_force: ContextVar[Means] = ContextVar("spanwright_means", default=_PLAIN)


def current() -> Means:
    """The means in force."""
    return _in_force.get()


@contextmanager
def using(means: Means) -> Iterator[None]:
    """Put `means` in force for a block."""
    token = _in_force.set(means)
    try:
        yield
    finally:
        _in_force.reset(token)
