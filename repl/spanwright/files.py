"""The one place that reads and writes files for sentences, below one folder unless allowed."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path


class FileRefused(Exception):
    """A file that cannot be read or written; `code` is that of a diagnostic."""

    def __init__(self, code: str, message: str) -> None:
        super().__init__(message)
        self.code = code


@dataclass(frozen=True, slots=True)
class Folder:
    """Where the paths of a script start; links that lead outside count as outside."""

    root: Path
    allows_outside: bool = False

    def resolve(self, path: str) -> Path:
        """The place of a path; raises FileRefused when it lies outside."""
        if "\0" in path or not path.strip():
            raise FileRefused("unreadable-file", "this is no file name")
        try:
            found = (self.root / path).resolve()
        except (OSError, RuntimeError) as error:
            raise FileRefused("unreadable-file", f"{path}: {_reason(error)}") from error
        if not self.allows_outside and not found.is_relative_to(self.root.resolve()):
            raise FileRefused(
                "outside-folder", f"{path} leads outside the folder of the script")
        return found

    def read(self, path: str) -> tuple[Path, str]:
        """The text of a file below this folder, and its place."""
        found = self.resolve(path)
        return found, read_text(found, path)

    def write(self, path: str, content: str) -> Path:
        """Write a file below this folder: whole, or not at all."""
        found = self.resolve(path)
        draft = found.with_name(found.name + ".part")
        try:
            draft.write_text(content, encoding="utf-8")
            draft.replace(found)
        except OSError as error:
            raise FileRefused("unwritable-file", f"{path}: {_reason(error)}") from error
        return found


def read_text(place: Path, shown: str) -> str:
    """A UTF-8 text; what is not UTF-8 becomes the replacement character, a diagnostic later."""
    try:
        return place.read_bytes().decode("utf-8", errors="replace").removeprefix("\ufeff")
    except OSError as error:
        raise FileRefused("unreadable-file", f"{shown}: {_reason(error)}") from error


def _reason(error: BaseException) -> str:
    return (getattr(error, "strerror", None) or str(error)).lower()
