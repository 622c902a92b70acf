"""The history on disk: one JSON string a line, one line an entry, whole entries of several lines.

Each entry is appended by one write, so that several shells may share the file. A folder or file
that cannot be written is no fault: the history then lasts as long as the shell.
"""

from __future__ import annotations

import json
import os
from collections.abc import Iterable
from pathlib import Path

from prompt_toolkit.history import History

FILE_NAME = "entries.jsonl"
READ_AT_MOST = 2 * 2**20
"""Bytes that are read from the end of the file: some 20,000 entries."""


def default_path() -> Path:
    """The file in the user's data folder."""
    # Loaded when the history is first read, after the first prompt stands on the screen.
    from platformdirs import user_data_path

    return user_data_path("spanwright", appauthor=False) / FILE_NAME


class EntryHistory(History):
    """The entries of this and earlier shells; those of this one alone when there is no file."""

    def __init__(self, path: Path | None = None) -> None:
        super().__init__()
        self._path = path

    @property
    def path(self) -> Path:
        """Where the entries are kept."""
        if self._path is None:
            self._path = default_path()
        return self._path

    def load_history_strings(self) -> Iterable[str]:
        """The entries, the newest first; what another program has spoilt is left out."""
        try:
            with self.path.open("rb") as file:
                size = file.seek(0, os.SEEK_END)
                start = max(0, size - READ_AT_MOST)
                file.seek(start)
                data = file.read()
        except OSError:
            return []
        lines = data.split(b"\n")
        return [
            entry
            for line in reversed(lines[1:] if start else lines)
            if (entry := _entry(line)) is not None
        ]

    def store_string(self, string: str) -> None:
        """Append one entry at once."""
        line = json.dumps(string, ensure_ascii=True).encode() + b"\n"
        try:
            self.path.parent.mkdir(parents=True, exist_ok=True)
            handle = os.open(self.path, os.O_WRONLY | os.O_CREAT | os.O_APPEND, 0o600)
        except OSError:
            return
        try:
            os.write(handle, line)
        except OSError:
            return
        finally:
            os.close(handle)


def _entry(line: bytes) -> str | None:
    try:
        found = json.loads(line)
    except ValueError:
        return None
    return found if isinstance(found, str) and found.strip() else None
