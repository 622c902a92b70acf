"""What one process may use, and whom it outlives: the system's bounds on memory and its ties."""

from __future__ import annotations

import contextlib
import ctypes
import os
import signal
from pathlib import Path
from typing import Any

try:
    import resource
except ImportError:  # a system without such limits
    resource = None  # type: ignore[assignment]

PR_SET_PDEATHSIG, PR_SET_CHILD_SUBREAPER = 1, 36
WITHOUT_MEASURE = 4 * 10**9
"""The limit where the system does not say how much memory is free."""


def default_memory() -> int:
    """Four fifths of the memory that is free now, in bytes."""
    with contextlib.suppress(OSError, ValueError):
        for line in Path("/proc/meminfo").read_text().splitlines():
            if line.startswith("MemAvailable:"):
                return int(line.split()[1]) * 1024 * 4 // 5
    return WITHOUT_MEASURE


def mapped_memory() -> int:
    """The address space that is mapped now, in bytes; raises OSError or ValueError if unknown."""
    pages = int(Path("/proc/self/statm").read_text().split()[0])
    return pages * os.sysconf("SC_PAGE_SIZE")


def limit_memory(allowed: int) -> None:
    """Bound the address space at what is mapped now and `allowed` more."""
    if resource is None:
        return
    with contextlib.suppress(OSError, ValueError):
        soft = mapped_memory() + allowed
        _, hard = resource.getrlimit(resource.RLIMIT_AS)
        if hard != resource.RLIM_INFINITY:
            soft = min(soft, hard)
        resource.setrlimit(resource.RLIMIT_AS, (soft, hard))


def end_with_parent(parent: int) -> None:
    """Let the system kill this process when its parent ends, where it can."""
    _prctl(PR_SET_PDEATHSIG, signal.SIGKILL)
    if os.getppid() != parent:
        # it ended before the system could be told
        os._exit(1)


def outlive_parent() -> None:
    """Take back what `end_with_parent` asked for."""
    _prctl(PR_SET_PDEATHSIG, 0)


def adopt_orphans() -> None:
    """Become the parent of all processes below that lose theirs, where the system can."""
    _prctl(PR_SET_CHILD_SUBREAPER, 1)


def _prctl(option: int, value: int) -> None:
    if _library is not None:
        _library(option, value, 0, 0, 0)


def _find_prctl() -> Any:
    try:
        return ctypes.CDLL(None).prctl
    except (OSError, AttributeError):
        return None


# Found once: a child that was forked off for one sentence has no time to look for it.
_library = _find_prctl()
