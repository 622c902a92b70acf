"""The commands for editors and for checks without a shell: `serve`, `check` and `format`.

Each takes plain arguments, writes to a stream, and returns the exit status; `cli` reads the
arguments.
"""

from __future__ import annotations

import difflib
import importlib.util
import json
import secrets
import sys
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from spanwright.files import FileRefused, read_text

if TYPE_CHECKING:
    from spanwright_grammar.diagnostics import Diagnostic
    from spanwright_grammar.document import Document

OK, FAILED, USAGE = 0, 1, 2
STANDARD_INPUT = "-"


def serve(port: int | None = None, errors: TextIO | None = None) -> int:
    """Be a language server over standard input and output, or over a loopback port.

    Ends when the client goes away; status 2 when the extra packages are missing.
    """
    stream = errors or sys.stderr
    missing = [name for name in ("lsprotocol", "pygls") if importlib.util.find_spec(name) is None]
    if missing:
        stream.write(
            f"spanwright: the language server needs {' and '.join(missing)}: "
            'pip install "spanwright[lsp]"\n'
        )
        return USAGE
    from spanwright.server import serving

    try:
        serving.serve(port)
    except OSError as error:
        stream.write(f"spanwright: port {port}: {error.strerror or error}\n")
        return USAGE
    except KeyboardInterrupt:
        return 130
    return OK


def check(
    names: Sequence[str], *, as_json: bool = False, out: TextIO | None = None,
    errors: TextIO | None = None, standard_input: str = "",
) -> int:
    """Print what is wrong with scripts: a line each, or an object each with `as_json`.

    Status 1 when there is an error or a warning, 2 when a file cannot be read. Information, such
    as a definition that is not used, does not count.
    """
    stream, error_stream = out or sys.stdout, errors or sys.stderr
    status = OK
    for name, found in _checked(names, standard_input):
        if isinstance(found, str):
            error_stream.write(f"spanwright: {found}\n")
            status = USAGE
            continue
        document, diagnostics = found
        for item in diagnostics:
            if item.severity != "information":
                status = max(status, FAILED)
            line, column = document.source.position(item.span.start)
            if as_json:
                end_line, end_column = document.source.position(item.span.end)
                record = {
                    "file": name, "line": line, "column": column, "end_line": end_line,
                    "end_column": end_column, "severity": item.severity, "code": item.code,
                    "message": item.message, "hints": list(item.hints),
                }  # fmt: skip
                stream.write(json.dumps(record, ensure_ascii=True) + "\n")
            else:
                message = f"{item.severity}: {item.message} [{item.code}]"
                stream.write(f"{name}:{line}:{column}: {message}\n")
    return status


def _checked(
    names: Sequence[str], standard_input: str
) -> Iterator[tuple[str, str | tuple[Document, tuple[Diagnostic, ...]]]]:
    """The findings in each file, or why it cannot be read."""
    # not at the top: a server is to answer before it knows the grammar
    from spanwright.workspace import Workspace, resolved

    workspace = Workspace()
    for name in names:
        try:
            text = standard_input if name == STANDARD_INPUT else read_text(Path(name), name)
        except FileRefused as error:
            yield name, str(error)
            continue
        path = resolved(Path.cwd() / name)
        document = workspace.put(path, text)
        yield name, (document, workspace.diagnostics(path))
        workspace.close(path)


def format_files(
    names: Sequence[str], *, shows_diff: bool = False, only_checks: bool = False,
    out: TextIO | None = None, errors: TextIO | None = None, standard_input: str = "",
) -> int:
    """Bring scripts into house style; `-` reads standard input and prints what becomes of it.

    With `shows_diff` the changes are printed and no file is written; with `only_checks` the names
    of the files that would change. Either way status 1 when something would change. Status 2 when
    a file cannot be read or written.
    """
    from spanwright_grammar.document import Document
    from spanwright_grammar.formatting import applied, format_edits

    stream, error_stream = out or sys.stdout, errors or sys.stderr
    status = OK
    for name in names:
        try:
            before = standard_input if name == STANDARD_INPUT else read_exactly(Path(name), name)
            document = Document(before, name)
            after = applied(before, format_edits(before, document.flat_pieces()))
            if shows_diff:
                stream.writelines(_difference(name, before, after))
            if only_checks and before != after:
                stream.write(f"{name}\n")
            if shows_diff or only_checks:
                status = max(status, FAILED if before != after else OK)
            elif name == STANDARD_INPUT:
                stream.write(after)
            elif before != after:
                write_exactly(Path(name), name, after)
        except FileRefused as error:
            error_stream.write(f"spanwright: {error}\n")
            status = USAGE
    return status


def read_exactly(place: Path, shown: str) -> str:
    """A script's text with its line ends as they are; raises FileRefused unless it is UTF-8."""
    try:
        return place.read_bytes().decode("utf-8")
    except UnicodeDecodeError as error:
        message = f"{shown}: byte {error.start + 1} is not UTF-8; the file is left as it is"
        raise FileRefused("unreadable-file", message) from error
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise FileRefused("unreadable-file", f"{shown}: {reason}") from error


def write_exactly(place: Path, shown: str, text: str) -> None:
    """Write a script: whole, or not at all; raises FileRefused."""
    draft = place.with_name(f".{place.name[:80]}.{secrets.token_hex(8)}.part")
    try:
        with draft.open("xb") as stream:
            stream.write(text.encode())
        draft.chmod(place.stat().st_mode & 0o777)
        draft.replace(place)
    except OSError as error:
        draft.unlink(missing_ok=True)
        reason = (error.strerror or str(error)).lower()
        raise FileRefused("unwritable-file", f"{shown}: {reason}") from error


def _difference(name: str, before: str, after: str) -> Iterator[str]:
    for line in difflib.unified_diff(
        before.splitlines(keepends=True), after.splitlines(keepends=True),
        f"{name} (as it is)", f"{name} (in house style)",
    ):  # fmt: skip
        yield line if line.endswith("\n") else line + "\n\\ no line end here\n"
