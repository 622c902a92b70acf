"""The shell's logs as files: where they lie, who holds one, and whether a session was lost.

Loads no grammar: the shell asks before its first prompt.
"""

from __future__ import annotations

import contextlib
import os
import signal
import time
from collections.abc import Iterator
from pathlib import Path

import platformdirs

from spanwright.log_marks import SUFFIX, Ending, ending

OFFERED_FOR = 14 * 24 * 3600
"""Seconds for which a session that ended without leave is offered again."""

CLOEXEC = getattr(os, "O_CLOEXEC", 0)


class LogFailure(Exception):
    """A log that cannot be read, locked or written; the message is for the user."""


def default_folder() -> Path:
    """Where the shell keeps its logs."""
    return platformdirs.user_state_path("spanwright") / "logs"


def interrupted(folder: Path | None = None, *, is_last: bool = False) -> Path | None:
    """The latest log in a folder whose session was lost, not left; None when there is none.

    Sessions that still run do not count. With `is_last` no session may have been left since.
    """
    place = folder or default_folder()
    try:
        dated = [(path.stat().st_mtime_ns, path.name, path) for path in place.glob(f"*{SUFFIX}")]
    except OSError:
        return None
    for changed, _, path in sorted(dated, reverse=True):
        if time.time() - changed / 10**9 > OFFERED_FOR:
            return None
        ended = _ending(path)
        if ended is Ending.LOST:
            return path
        if ended is Ending.LEFT and is_last:
            return None
    return None


def offer() -> str:
    """What the shell's first line says when the last session was lost, else nothing."""
    found = interrupted(is_last=True)
    return "" if found is None else f"the last session was lost: spanwright resume {found}"


def _ending(path: Path) -> Ending:
    """How the log in a file ended; none of ours while it is being written, or unreadable."""
    try:
        handle = os.open(path, os.O_RDWR | CLOEXEC)
    except OSError:
        return Ending.NO_LOG
    try:
        lock(handle, path)
        return ending(all_of(handle))
    except (LogFailure, OSError):
        return Ending.NO_LOG
    finally:
        os.close(handle)


def all_of(handle: int) -> bytes:
    """The content of an open file."""
    os.lseek(handle, 0, os.SEEK_SET)
    pieces = []
    while piece := os.read(handle, 1 << 20):
        pieces.append(piece)
    return b"".join(pieces)


def lock(handle: int, path: Path) -> None:
    """Hold a file against other writers until it is closed; raises LogFailure when one has it."""
    try:
        import fcntl
    except ImportError:
        # no such locks on this system: two shells still never meet, since `create` never opens
        # a file that exists
        return
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError as error:
        raise LogFailure(f"{path} is being written by another session") from error


def reason(error: OSError) -> str:
    """What the system says, in lower case."""
    return (error.strerror or str(error)).lower()


@contextlib.contextmanager
def undisturbed() -> Iterator[None]:
    """Hold an interrupt back while a log is made or written: half a record spoils it."""
    mask = getattr(signal, "pthread_sigmask", None)
    if mask is None:
        yield
        return
    before = mask(signal.SIG_BLOCK, {signal.SIGINT, signal.SIGTERM})
    try:
        yield
    finally:
        mask(signal.SIG_SETMASK, before)
