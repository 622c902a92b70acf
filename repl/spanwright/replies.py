"""Plain data between a session and those who show it: replies, a summary of the state, progress.

Nothing here knows the kernel, so a front end stays light; all of it passes through JSON.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any


@dataclass(frozen=True, slots=True)
class Reply:
    """One sentence's outcome, ready to be shown or sent to another process.

    `terms` are the signed terms of an expansion, for wrapping and cutting; `messages` are
    diagnostics with line and caret; `record` is the object that `--json` prints, there for every
    error and otherwise when it was asked for; `note` says where a result lives when that is not
    the ring in force.
    """

    sentence: int
    line: int
    column: int
    source: str
    status: str
    kind: str
    tag: int | None
    n: int | None
    text: str
    terms: tuple[str, ...]
    messages: tuple[str, ...]
    record: dict[str, Any]
    seconds: float
    is_quit: bool = False
    note: str = ""
    digest: str = ""

    def to_data(self) -> dict[str, Any]:
        """As `from_data` takes it; the parts are not copied."""
        return {name: getattr(self, name) for name in self.__slots__}

    @staticmethod
    def from_data(data: dict[str, Any]) -> Reply:
        """The inverse of `to_data`, after JSON."""
        return Reply(**{
            **data, "terms": tuple(data["terms"]), "messages": tuple(data["messages"])})


@dataclass(frozen=True, slots=True)
class State:
    """What a prompt and a completer must know of a session; without arguments, a fresh one's.

    `names` maps the session's own names to what they are ("a polynomial", "a function of a, b").
    """

    n: int | None = None
    basis: str | None = None
    parameters: tuple[str, ...] = ()
    names: dict[str, str] = field(default_factory=dict)
    last_tag: int = 0

    @staticmethod
    def from_data(data: dict[str, Any]) -> State:
        """The inverse of `dataclasses.asdict`, after JSON."""
        return State(**{**data, "parameters": tuple(data["parameters"])})


@dataclass(frozen=True, slots=True)
class Progress:
    """A sentence that has run for a while: since when, what it has reached, and its text."""

    seconds: float
    reached: str
    sentence: str = ""
