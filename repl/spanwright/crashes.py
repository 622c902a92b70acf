"""What a sentence meant that was ended from outside: by its limit on memory, or by a crash."""

from __future__ import annotations

import os
import signal
from dataclasses import dataclass

from spanwright.context import Failure, failure
from spanwright_grammar.source import Span


@dataclass(frozen=True, slots=True)
class MemoryLimit:
    """What a sentence may take: `bound` is that of the address space, None where none holds."""

    amount: int
    bound: int | None
    is_systems: bool = False


def so_far(reached: str) -> str:
    return f"; reached: {reached}" if reached else ""


def crash(
    status: int, words: str, most_memory: int, limit: MemoryLimit, place: Span, reached: str
) -> Failure:
    """What ended a child that nobody stopped, in the reader's words."""
    ended_by = os.WTERMSIG(status) if os.WIFSIGNALED(status) else 0
    wants_memory = "memory" in words.lower() or "alloc" in words.lower()
    if (ended_by == signal.SIGABRT and not words) or (
        ended_by in (0, signal.SIGABRT) and wants_memory
    ):
        return too_much_memory(limit, place, reached)
    if ended_by in (signal.SIGSEGV, signal.SIGBUS) and (
        wants_memory or most_memory > limit.amount // 2
    ):
        return too_much_memory(limit, place, reached)
    if ended_by == signal.SIGKILL:
        return failure(
            "over-budget", place,
            f"the system ended this computation (SIGKILL), as it does when memory runs short"
            f"{so_far(reached)}; the session is as it was before",
            "fix memory = …   to end such a sentence sooner")
    name = (signal.Signals(ended_by).name if ended_by
            else f"status {os.waitstatus_to_exitcode(status)}")
    # what the interpreter says of itself is for us, not for the reader
    said = f": {words[:100]}" if words and not words.startswith("Traceback") else ""
    return failure(
        "internal-error", place,
        f"the computation ended by itself ({name}{said}){so_far(reached)}; the session is as it "
        "was before")


def too_much_memory(limit: MemoryLimit, place: Span, reached: str) -> Failure:
    size = _amount(limit.amount)
    if limit.is_systems:
        return failure(
            "over-budget", place,
            f"this sentence needs more than the {size} of memory that the system leaves to this "
            f"program{so_far(reached)}", "ulimit -v unlimited   before the start")
    return failure(
        "over-budget", place, f"this sentence needs more than {size} of memory{so_far(reached)}",
        f"fix memory = {_amount(2 * limit.amount, is_whole=True)}")


def _amount(size: int, *, is_whole: bool = False) -> str:
    """A size as `fix memory` takes it; with `is_whole`, rounded up."""
    unit, name = (10**9, "GB") if size >= 2 * 10**9 else (10**6, "MB")
    if is_whole or name == "MB":
        return f"{-(-size // unit)} {name}"
    return f"{size / unit:.3g} {name}"
