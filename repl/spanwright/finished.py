"""Finished cases in a JSON Lines file: appended as they come, found again by what they depend on.

A case's key is a hash of version, sentence, what the sentence looks up, and the case's values;
nothing else decides its result. A torn last line, which a killed run leaves, is passed over.
"""

from __future__ import annotations

import hashlib
import json
import os
from importlib.metadata import version
from pathlib import Path
from typing import IO, Any

from spanwright.cases import FAILED, UNDECIDED, Result

FORMAT = 1
LOST = "lost"
"""The code of a case whose evaluator ended."""


class Unreadable(Exception):
    """The file cannot be read or written, or holds something else."""


def sentence_key(sentence: str, packed_context: dict[str, Any]) -> str:
    """The hash of all that the cases of one sentence have in common."""
    whole = json.dumps([FORMAT, version("spanwright"), sentence, packed_context], sort_keys=True)
    return hashlib.sha256(whole.encode()).hexdigest()


def case_key(common: str, packed_values: list[Any]) -> str:
    """The key of one case."""
    whole = f"{common}|{json.dumps(packed_values, sort_keys=True)}"
    return hashlib.sha256(whole.encode()).hexdigest()[:32]


class FinishedCases:
    """The file: what it already says, and a way to say more."""

    def __init__(self, place: Path, *, only_failed: bool = False) -> None:
        self.place = place
        self.only_failed = only_failed
        self._known: dict[str, int] = {}
        self._failed: set[str] = set()
        try:
            self._file: IO[bytes] = place.open("a+b")
            self._read()
        except OSError as error:
            raise Unreadable(f"{place.name}: {(error.strerror or str(error)).lower()}") from error

    def _read(self) -> None:
        # places in the file, not results, are kept in memory
        self._file.seek(0)
        end = 0
        for line in iter(self._file.readline, b""):
            if not line.endswith(b"\n"):
                break
            try:
                record = json.loads(line)
                key, result = record["key"], record["result"]
                status = result["status"]
            except (ValueError, KeyError, TypeError) as error:
                raise Unreadable(
                    f"{self.place.name} is no file of finished cases: byte {end + 1}") from error
            # what stayed undecided may have been stopped by a limit: it has yet to be finished
            if status != UNDECIDED:
                self._known[key] = end
            self._failed.discard(key)
            if status in (FAILED, UNDECIDED):
                self._failed.add(key)
            end += len(line)
        # a torn line is overwritten by what comes next
        self._file.truncate(end)
        self._file.seek(0, os.SEEK_END)

    def is_wanted(self, key: str) -> bool:
        """Whether a case takes part: with `only_failed`, those that failed or are undecided."""
        return not self.only_failed or key in self._failed

    def result(self, key: str) -> Result | None:
        """The result of a finished case; None when it has yet to be run."""
        at = self._known.get(key)
        if at is None or self.only_failed:
            return None
        self._file.seek(at)
        found: Result = json.loads(self._file.readline())["result"]
        return found

    def add(self, key: str, case: str, result: Result) -> None:
        """Append one finished case; after this returns it survives the end of this process."""
        record = {"key": key, "case": case, "result": result}
        self._file.seek(0, os.SEEK_END)
        self._file.write(json.dumps(record).encode() + b"\n")
        self._file.flush()

    def close(self) -> None:
        """Write out what is held back, and close."""
        self._file.close()
