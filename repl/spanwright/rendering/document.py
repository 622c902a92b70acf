"""What a report consists of, before it is set in any way: entries with their values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

SHOWN_TERMS = 12
"""A sum with more terms is folded behind its first ones."""

FIRST_TERMS = 8


@dataclass(frozen=True, slots=True)
class Cell:
    """A place in a table: its text, and the value when the text is one.

    `factors` are the values of a text `a · b · c`, which must not be multiplied out.
    """

    text: str
    value: Any = None
    factors: tuple[Any, ...] = ()


@dataclass(frozen=True, slots=True)
class Grid:
    """A table with its caption above and its notes below."""

    columns: tuple[str, ...]
    rows: tuple[tuple[Cell, ...], ...]
    caption: str = ""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Entry:
    """One input and what came of it.

    `prose` are paragraphs before it. `code` is the input in coloured pieces (kind, text), empty
    for a remark. `value` is None when the result is no value or was not recorded whole; `name`
    is that of a definition, `cut` says what the log left out. `notes` say how sure a claim is,
    and how many cases were tried.
    """

    line: int
    prose: tuple[str, ...] = ()
    code: tuple[tuple[str, str], ...] = ()
    status: str = "ok"
    tag: int | None = None
    kind: str = ""
    text: str = ""
    value: Any = None
    name: str = ""
    cut: str = ""
    grid: Grid | None = None
    picture: str = ""
    digest: str = ""
    notes: tuple[str, ...] = ()

    @property
    def typed(self) -> str:
        """The input as it was typed."""
        return "".join(text for _, text in self.code)


@dataclass(frozen=True, slots=True)
class Document:
    """A report: a title, facts for its head, and entries; `source` is the log itself."""

    title: str
    file_name: str
    facts: tuple[tuple[str, str], ...]
    replay: str
    entries: tuple[Entry, ...]
    closing_prose: tuple[str, ...] = ()
    source: str = ""
    tags: Mapping[int, int] = field(default_factory=dict)
