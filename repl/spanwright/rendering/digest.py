"""A short digest of a value's exact content, whichever way the value is shown."""

from __future__ import annotations

import hashlib
import json
from typing import Any

from spanwright.rendering.json import data
from spanwright.tally import Tally
from spanwright.values import Definition, IndexSet, Table, Truth

DIGITS = 12
"""48 bits: a log holds some thousand results, and an error must not go unseen."""

LARGEST_SET = 10_000
"""Larger sets of indices are known by their description and size; listing them is no digest."""


def digest(value: Any) -> str:
    """The first hexadecimal digits of the SHA-256 of the value's canonical JSON.

    Equal values written in one canonical form have one digest; `fix show` and the width of a line
    change nothing. What is prose about a value (evidence, captions, notes) does not count.

    >>> digest(1) == digest(1), digest(1) == digest(2), len(digest((2, 0, 1)))
    (True, False, 12)
    """
    content = json.dumps(
        _content(value), sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    return hashlib.sha256(content.encode("ascii")).hexdigest()[:DIGITS]


def _content(value: Any) -> Any:
    if isinstance(value, Definition) and value.value is not None:
        if hasattr(value.value, "body"):  # a function is the sentence that defines it
            return [value.name, value.text]
        return [value.name, _content(value.value)]
    if isinstance(value, Truth):
        difference = None if value.difference is None else _content(value.difference)
        return {"kind": "truth", "holds": value.holds, "difference": difference}
    if isinstance(value, Tally):
        first = value.counterexample
        return ["tally", value.n_held, value.n_failed, value.n_undecided, value.n_done,
                None if first is None else first.case, list(value.lines)]
    if isinstance(value, Table):
        return {"kind": "table", "columns": list(value.columns), "rows": [
            [cell if isinstance(cell, str) else _content(cell) for cell in row]
            for row in value.rows]}
    if isinstance(value, IndexSet) and value.size() > LARGEST_SET:
        return {"kind": "set", "description": value.description, "size": value.size()}
    return data(value)
