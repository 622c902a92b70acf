"""What one process may use: memory bounded by the system, and an end when its parent ends."""

from __future__ import annotations

import contextlib
import ctypes
import os
import signal
from pathlib import Path

try:
    import resource
except ImportError:  # a system without such limits
    resource = None  # type: ignore[assignment]

PR_SET_PDEATHSIG = 1
WITHOUT_MEASURE = 4 * 10**9
"""The limit where the system does not say how much memory is free."""


def default_memory() -> int:
    """Four fifths of the memory that is free now, in bytes."""
    with contextlib.suppress(OSError, ValueError):
        for line in Path("/proc/meminfo").read_text().splitlines():
            if line.startswith("MemAvailable:"):
                return int(line.split()[1]) * 1024 * 4 // 5
    return WITHOUT_MEASURE


def limit_memory(allowed: int) -> None:
    """Bound the address space at what is mapped now and `allowed` more."""
    if resource is None:
        return
    with contextlib.suppress(OSError, ValueError):
        pages = int(Path("/proc/self/statm").read_text().split()[0])
        _, hard = resource.getrlimit(resource.RLIMIT_AS)
        soft = pages * os.sysconf("SC_PAGE_SIZE") + allowed
        if hard != resource.RLIM_INFINITY:
            soft = min(soft, hard)
        resource.setrlimit(resource.RLIMIT_AS, (soft, hard))


def end_with_parent(parent: int) -> None:
    """Let the system kill this process when its parent ends, where it can."""
    with contextlib.suppress(OSError, AttributeError):
        ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGKILL, 0, 0, 0)
    if os.getppid() != parent:
        os._exit(1)
