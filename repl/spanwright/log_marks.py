"""The marks in a log: its first line, the seal of every record, and how its text ended.

Patterns of lines alone, so that the shell can tell how the last session ended before it has
loaded the language.
"""

from __future__ import annotations

import re
from enum import Enum

SUFFIX = ".span"

FORMAT = 1
"""Raised when a log of the earlier kind could be misread; every kind stays readable."""

FIRST = re.compile(r"# Spanwright log, format ([0-9]{1,6})$")
SEAL = re.compile(r"#= # ([^#\n]*?),? ?check ([0-9a-f]{8})$")

CLOSED = "closed"
HEADER = "header"

_TAIL = 1 << 16  # bytes; most records are shorter


class Ending(Enum):
    """How the text of a log ends."""

    NO_LOG = "no log"
    UNUSED = "nothing but a header"
    LEFT = "left by its user"
    LOST = "in the middle of a session"


def ending(content: bytes) -> Ending:
    """How a log ends, by its first line and its last whole seal."""
    first = content[:200].removeprefix(b"\xef\xbb\xbf").partition(b"\n")[0]
    found = FIRST.match(first.decode("utf-8", "replace").rstrip("\r"))
    if found is None or int(found.group(1)) > FORMAT:
        # what a newer program wrote is for that to offer
        return Ending.NO_LOG
    facts = _last_seal(content[-_TAIL:]) or _last_seal(content)
    if facts == CLOSED:
        return Ending.LEFT
    return Ending.UNUSED if facts in (None, HEADER) else Ending.LOST


def _last_seal(content: bytes) -> str | None:
    for line in reversed(content.decode("utf-8", "replace").split("\n")):
        found = SEAL.match(line.rstrip("\r"))
        if found is not None:
            return found.group(1)
    return None
