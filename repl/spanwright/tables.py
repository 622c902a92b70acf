"""Tables streamed into files: text, CSV, LaTeX, JSON, SQLite and Parquet, row by row.

A table is written beside its place and moved there when it is whole.
"""

from __future__ import annotations

import csv
import json
import sqlite3
import tempfile
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from importlib import import_module
from pathlib import Path
from typing import IO, Any, Protocol

SUFFIXES = {
    ".txt": "text", ".csv": "text", ".tex": "latex", ".json": "json", ".sqlite": "text",
    ".db": "text", ".parquet": "text"}
"""The endings of a table's file, and the form that its cells take."""

BATCH = 5_000
"""Rows that are held back and written together."""


class TableRefused(Exception):
    """A table that cannot be written, for a reason that is told to the reader."""


class Writer(Protocol):
    """Takes rows one by one."""

    n_rows: int

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row: the bound values as data and as text, and the cell in the form asked for."""
        ...

    def finish(self) -> None:
        """Write what is held back, and what closes the table."""
        ...

    def close(self) -> None:
        """Let go of the file, finished or not."""
        ...


@contextmanager
def writer(place: Path, suffix: str, columns: tuple[str, ...]) -> Iterator[Writer]:
    """A writer for a file; the file is in its place when the block ends well, else untouched."""
    draft = place.with_name(f".{place.name[:80]}.part")
    draft.unlink(missing_ok=True)
    made = _WRITERS[suffix](draft, columns)
    try:
        yield made
        made.finish()
        made.close()
        draft.replace(place)
    finally:
        made.close()
        draft.unlink(missing_ok=True)


class _TextFile:
    """A file of text, and the number of its rows."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        self.n_rows = 0
        self.columns = columns
        self.file: IO[str] = draft.open("w", encoding="utf-8", newline="")

    def close(self) -> None:
        """Close the file."""
        self.file.close()


class PlainTable(_TextFile):
    """Aligned columns; rows wait in a temporary file until all widths are known."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        super().__init__(draft, columns)
        self._rows: IO[str] = tempfile.TemporaryFile(  # noqa: SIM115 -- `close` closes it
            "w+", encoding="utf-8")
        self._widths = [len(head) for head in columns]

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row."""
        row = [*shown, cell]
        self._widths = [max(w, len(c)) for w, c in zip(self._widths, row, strict=True)]
        self._rows.write(json.dumps(row) + "\n")
        self.n_rows += 1

    def finish(self) -> None:
        """Heads, a rule, the rows."""
        self._line(self.columns)
        self._line(["-" * w for w in self._widths])
        self._rows.seek(0)
        for line in self._rows:
            self._line(json.loads(line))

    def _line(self, row: Sequence[str]) -> None:
        cells = (c.ljust(w) for c, w in zip(row, self._widths, strict=True))
        self.file.write("  ".join(cells).rstrip() + "\n")

    def close(self) -> None:
        """Close both files."""
        self._rows.close()
        super().close()


class CsvTable(_TextFile):
    """Comma-separated values (RFC 4180)."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        super().__init__(draft, columns)
        self._rows = csv.writer(self.file, lineterminator="\n")
        self._rows.writerow(columns)

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row."""
        self._rows.writerow([*shown, cell])
        self.n_rows += 1

    def finish(self) -> None:
        """Nothing closes such a table."""


class LatexTable(_TextFile):
    """A `longtable` of mathematics, for a document that loads that package."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        super().__init__(draft, columns)
        heads = " & ".join(f"\\verb|{head}|" for head in columns)
        self.file.write(
            f"\\begin{{longtable}}{{{'l' * len(columns)}}}\n{heads} \\\\\n\\hline\n\\endhead\n")

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row."""
        cells = " & ".join(f"${c}$" for c in [*shown, cell])
        self.file.write(f"{cells} \\\\\n")
        self.n_rows += 1

    def finish(self) -> None:
        """The end of the environment."""
        self.file.write("\\end{longtable}\n")


class JsonTable(_TextFile):
    """One JSON object, as the session prints a table, a row a line."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        super().__init__(draft, columns)
        self.file.write(
            f'{{"kind": "table", "columns": {json.dumps(list(columns))}, "rows": [')

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row."""
        row = [*map(_bound_data, packed), cell]
        self.file.write((",\n" if self.n_rows else "\n") + json.dumps(row))
        self.n_rows += 1

    def finish(self) -> None:
        """The closing brackets."""
        self.file.write("\n]}\n")


def _bound_data(value: Any) -> dict[str, Any]:
    if isinstance(value, int):
        return {"kind": "scalar", "value": str(value)}
    if isinstance(value, list):
        return {"kind": "index", "value": value}
    return {"kind": "text", "text": value["text"]}


class SqliteTable:
    """The table `cases` of an SQLite database; indices as text, integers as integers."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        self.n_rows = 0
        self._connection = sqlite3.connect(draft)
        names = ", ".join(_quoted(name) for name in _distinct(columns))
        self._connection.execute(f"CREATE TABLE cases ({names})")
        self._insert = f"INSERT INTO cases VALUES ({', '.join('?' * len(columns))})"
        self._held: list[tuple[Any, ...]] = []

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row."""
        # integers of more than 64 bits are no integers there
        values = [p if isinstance(p, int) and abs(p) < 2**63 else s
                  for p, s in zip(packed, shown, strict=True)]
        self._held.append((*values, cell))
        self.n_rows += 1
        if len(self._held) >= BATCH:
            self._write()

    def _write(self) -> None:
        self._connection.executemany(self._insert, self._held)
        self._held.clear()

    def finish(self) -> None:
        """Write and commit."""
        self._write()
        self._connection.commit()

    def close(self) -> None:
        """Close the database."""
        self._connection.close()


class ParquetTable:
    """A Parquet file; integers as integers, indices as lists, the rest as text."""

    def __init__(self, draft: Path, columns: tuple[str, ...]) -> None:
        try:
            pyarrow: Any = import_module("pyarrow")
            parquet: Any = import_module("pyarrow.parquet")
        except ImportError as error:
            raise TableRefused(
                "Parquet files need the package pyarrow: install spanwright[tables], "
                "or write to a file that ends in .sqlite") from error
        self.n_rows = 0
        self._arrow = pyarrow
        self._parquet = parquet
        self._draft = draft
        self._columns = _distinct(columns)
        self._held: list[list[Any]] = []
        self._file: Any = None
        self._schema: Any = None

    def add(self, packed: Sequence[Any], shown: Sequence[str], cell: Any) -> None:
        """One row."""
        self._held.append([
            *(v if isinstance(v, int | list) else v["text"] for v in packed), cell])
        self.n_rows += 1
        if len(self._held) >= BATCH:
            self._write()

    def _write(self) -> None:
        if self._file is None:
            kinds = [self._kind(v) for v in self._held[0]] if self._held else [
                self._arrow.string()] * len(self._columns)
            self._schema = self._arrow.schema(
                list(zip(self._columns, kinds, strict=True)))
            self._file = self._parquet.ParquetWriter(self._draft, self._schema)
        arrays = [list(column) for column in zip(*self._held, strict=True)] or [
            [] for _ in self._columns]
        try:
            self._file.write_table(self._arrow.table(arrays, schema=self._schema))
        except self._arrow.ArrowException as error:
            raise TableRefused(f"a column of mixed kinds: {error}") from error
        self._held.clear()

    def _kind(self, value: Any) -> Any:
        if isinstance(value, int):
            return self._arrow.int64()
        if isinstance(value, list):
            return self._arrow.list_(self._arrow.int64())
        return self._arrow.string()

    def finish(self) -> None:
        """Write what is held back."""
        if self._held or self._file is None:
            self._write()
        self._file.close()

    def close(self) -> None:
        """Close the file."""
        if self._file is not None and self._file.is_open:
            self._file.close()


def _quoted(name: str) -> str:
    escaped = name.replace('"', '""')
    return f'"{escaped}"'


def _distinct(columns: tuple[str, ...]) -> list[str]:
    """Heads without repetition, as databases want them."""
    found: list[str] = []
    for name in columns:
        found.append(name if name not in found else f"{name} ({len(found) + 1})")
    return found


_WRITERS: dict[str, Callable[[Path, tuple[str, ...]], Writer]] = {
    ".txt": PlainTable, ".csv": CsvTable, ".tex": LatexTable, ".json": JsonTable,
    ".sqlite": SqliteTable, ".db": SqliteTable, ".parquet": ParquetTable}
