"""The one place that reads and writes files for sentences, below one folder unless allowed.

Paths and symbolic links that lead outside are refused. With an `output` folder, as a replay has,
whatever is written lands below that folder and nowhere else.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import stat
from dataclasses import dataclass
from pathlib import Path

MAX_BYTES = 256 * 10**6
"""Larger files are no scripts or values; reading one would only fill the memory."""


class FileRefused(Exception):
    """A file that cannot be read or written; `code` is that of a diagnostic."""

    def __init__(self, code: str, message: str) -> None:
        super().__init__(message)
        self.code = code


@dataclass(frozen=True, slots=True)
class Folder:
    """Where the paths of a script start; links that lead outside count as outside.

    `output`, when given, takes all that is written, and is looked in first for what is read.
    """

    root: Path
    allows_outside: bool = False
    output: Path | None = None

    def resolve(self, path: str) -> Path:
        """The place of a path to read; raises FileRefused when it lies outside."""
        if self.output is not None:
            with contextlib.suppress(FileRefused):
                written = _below(self.output, path)
                if written.is_file():
                    return written
        return _below(self.root, path, allows_outside=self.allows_outside)

    def read(self, path: str) -> tuple[Path, str]:
        """The text of a file below this folder, and its place."""
        found = self.resolve(path)
        if found.exists() and not found.is_file():
            # a pipe or a device would keep the reader waiting
            raise FileRefused("unreadable-file", f"{path} is no file")
        return found, read_text(found, path)

    def place_to_write(self, path: str) -> Path:
        """Where a path is written, below this folder or below `output`; raises FileRefused."""
        if self.output is None:
            found = _below(self.root, path, allows_outside=self.allows_outside)
        else:
            # a replay never leaves its output folder, whatever else it was allowed
            found = _below(self.output, path)
        if found.exists() and not found.is_file():
            raise FileRefused("unwritable-file", f"{path} is no file")
        try:
            if self.output is not None:
                found.parent.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise FileRefused("unwritable-file", f"{path}: {_reason(error)}") from error
        return found

    def write(self, path: str, content: str) -> Path:
        """Write a file at its place: whole, or not at all; raises FileRefused."""
        found = self.place_to_write(path)
        try:
            _write_whole(found, content)
        except OSError as error:
            raise FileRefused("unwritable-file", f"{path}: {_reason(error)}") from error
        return found


def _below(root: Path, path: str, *, allows_outside: bool = False) -> Path:
    """The place of a path that starts at a root, links followed."""
    if "\0" in path or not path.strip():
        raise FileRefused("unreadable-file", "this is no file name")
    try:
        found = (root / path).resolve()
        base = root.resolve()
    except (OSError, RuntimeError) as error:
        raise FileRefused("unreadable-file", f"{path}: {_reason(error)}") from error
    if not allows_outside and not found.is_relative_to(base):
        raise FileRefused("outside-folder", f"{path} leads outside the folder of the script")
    return found


def _write_whole(place: Path, content: str) -> None:
    """A draft of an unguessable name beside the file, then the file itself: no link is followed."""
    draft = place.with_name(f".{place.name[:80]}.{secrets.token_hex(8)}.part")
    flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_NOFOLLOW", 0)
    handle = os.open(draft, flags, 0o666)
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as stream:
            stream.write(content)
        os.replace(draft, place)
    except OSError:
        with contextlib.suppress(OSError):
            os.unlink(draft)
        raise


def read_text(place: Path, shown: str) -> str:
    """A UTF-8 text; what is not UTF-8 becomes the replacement character, a diagnostic later."""
    try:
        found = place.stat()
        if stat.S_ISREG(found.st_mode) and found.st_size > MAX_BYTES:
            raise FileRefused(
                "unreadable-file", f"{shown} is larger than {MAX_BYTES // 10**6} MB")
        return place.read_bytes().decode("utf-8", errors="replace").removeprefix("\ufeff")
    except OSError as error:
        raise FileRefused("unreadable-file", f"{shown}: {_reason(error)}") from error


def _reason(error: BaseException) -> str:
    return (getattr(error, "strerror", None) or str(error)).lower()
