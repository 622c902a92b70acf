"""The commands about logs: `replay`, `report`, `resume`, and the log of `run --log`.

They print nothing: whoever calls them hands in where a line goes and how a question is asked.
"""

from __future__ import annotations

import argparse
import json
import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from spanwright.conversation import Conversation
    from spanwright.files import Folder
    from spanwright.journal import Journal
    from spanwright.replay import Options, Replayed
    from spanwright.settings import Bounds

OK, FAILED, USAGE = 0, 1, 2

Write = Callable[[str], None]
Ask = Callable[[str], bool]

_SHOWN_DIFFERENCES = 20
_SHOWN_ROWS = 40


def add_commands(commands: Any) -> None:
    """Add the parsers of these commands to those of the command line."""
    replay = commands.add_parser(
        "replay", help="run logs again and compare every result with what they record")
    replay.add_argument("logs", nargs="+", metavar="LOG")
    replay.add_argument(
        "--only", metavar="LINES", help="compare only what stands on these lines: 12-30,45")
    replay.add_argument(
        "--jobs", type=_from_one, default=1, metavar="N", help="so many logs at the same time")
    replay.add_argument(
        "--seconds", type=_from_one, metavar="N", help="at most so many seconds for a sentence")
    replay.add_argument(
        "--terms", type=_from_one, metavar="N", help="at most so many terms in a result")
    replay.add_argument(
        "--memory", type=_memory, metavar="MB", help="at most so much memory for a sentence")
    replay.add_argument(
        "--output", type=Path, metavar="FOLDER",
        help="where what a log writes is put; without it, nothing is kept")
    replay.add_argument(
        "--folder", type=Path, metavar="FOLDER",
        help="where the paths in a log start, when that is not the log's own folder")
    replay.add_argument(
        "--rewrite", action="store_true", help="put the results found now in place of the old ones")
    replay.add_argument("--yes", action="store_true", help="rewrite without asking")
    _shared(replay)
    report = commands.add_parser("report", help="a log as a page, an article, or Markdown")
    report.add_argument("log", metavar="LOG")
    report.add_argument(
        "-o", dest="place", type=Path, required=True, metavar="FILE",
        help="where it goes; the ending says how it is set: .html, .tex, .md")
    report.add_argument("--title", default="", help="what stands above it")
    resume = commands.add_parser("resume", help="bring a session back from its log and go on in it")
    resume.add_argument(
        "log", nargs="?", type=Path, metavar="LOG", help="the last session that was lost, if none")


def _shared(parser: argparse.ArgumentParser) -> None:
    """Options that may stand before the command too; only the outer parser sets defaults."""
    for name, meaning in (
        ("--json", "print a JSON object a log"),
        ("--allow-outside", "let logs read outside their own folder"),
    ):
        parser.add_argument(name, action="store_true", default=argparse.SUPPRESS, help=meaning)


def _from_one(text: str) -> int:
    if not (text.isascii() and text.isdigit() and 0 < int(text[:19]) <= 10**18):
        raise argparse.ArgumentTypeError(f"a whole number from 1 on, not {text!r}")
    return int(text)


def _memory(text: str) -> int:
    found = _from_one(text.removesuffix("MB").strip())
    if found < 64:
        raise argparse.ArgumentTypeError("a sentence needs 64 MB at least")
    return found


def default_settings() -> tuple[str, ...]:
    """The settings that a session starts with, as sentences."""
    from spanwright.headers import settings_as_sentences
    from spanwright.settings import Settings

    return settings_as_sentences(Settings())


def open_conversation(folder: Folder, bounds: Bounds) -> Conversation:
    """A fresh session whose files lie below a folder, and that keeps to bounds."""
    from spanwright.conversation import local

    return local(folder, is_digested=True, bounds=asdict(bounds))


# --- replay --------------------------------------------------------------------------------------


def replay(
    options: argparse.Namespace, write: Write, complain: Write, ask: Ask,
    opening: Callable[[Folder, Bounds], Conversation] = open_conversation,
) -> int:
    """Run logs again; 0 when all agree, 1 when not, 2 when one cannot be read."""
    from spanwright.replay import Options, lines_of
    from spanwright.settings import Bounds

    try:
        only = None if options.only is None else lines_of(options.only)
    except ValueError as error:
        complain(f"spanwright: --only: {error}")
        return USAGE
    if only is not None and options.rewrite:
        complain("spanwright: --only and --rewrite do not go together: a log is renewed whole")
        return USAGE
    memory = None if options.memory is None else options.memory * 10**6
    # a stranger's log starts no more processes than there are cores
    bounds = Bounds(options.seconds, options.terms, memory, os.cpu_count())
    settings = Options(
        only, bounds, options.folder,
        options.output, options.allow_outside, options.rewrite)
    paths = [Path(name) for name in options.logs]
    if options.jobs == 1 or len(paths) == 1:
        one_by_one = (_replayed(path, settings, opening) for path in paths)
        return _told_all(one_by_one, options, write, complain, ask)
    with ThreadPoolExecutor(min(options.jobs, len(paths))) as pool:
        # in the order of the command line, however they end
        found = pool.map(lambda path: _replayed(path, settings, opening), paths)
        return _told_all(found, options, write, complain, ask)


def _replayed(
    path: Path, settings: Options, opening: Callable[[Folder, Bounds], Conversation]
) -> tuple[Path, Replayed | str]:
    from spanwright.log_files import LogFailure
    from spanwright.replay import replay_file

    try:
        return path, replay_file(path, settings, opening)
    except LogFailure as error:
        return path, str(error)


def _told_all(
    found: Any, options: argparse.Namespace, write: Write, complain: Write, ask: Ask
) -> int:
    status = OK
    for path, replayed in found:
        if isinstance(replayed, str):
            complain(f"spanwright: {replayed}")
            status = USAGE
            continue
        if options.json:
            write(json.dumps(replayed.to_data(), ensure_ascii=True))
        else:
            for line in replay_lines(replayed):
                write(line)
        if options.rewrite:
            problem = _rewritten(path, replayed, options, write, ask)
            if problem:
                complain(f"spanwright: {problem}")
                status = max(status, FAILED)
        elif not replayed.agrees:
            status = max(status, FAILED)
    return status


def _rewritten(
    path: Path, replayed: Replayed, options: argparse.Namespace, write: Write, ask: Ask
) -> str:
    """Renew a log after a confirmation; what went wrong, or nothing."""
    from spanwright.journal import rewrite
    from spanwright.log_files import LogFailure

    n_new = len(replayed.checks) - len(replayed.of("agrees"))
    question = (f"write {path} anew, with {_count(n_new, 'result')} other than recorded"
                f"{' and its altered lines as they are now' if replayed.altered else ''}?")
    if not options.yes and not ask(question):
        return f"{path} is left as it was: only `yes` at a terminal, or --yes, renews it"
    try:
        rewrite(path, replayed.renewed)
    except LogFailure as error:
        return str(error)
    if not options.json:
        write(f"{path}: written anew")
    return ""


def replay_lines(replayed: Replayed) -> list[str]:
    """What is told of one log: the first difference side by side, all others a line each."""
    from spanwright.replay import AGREES, OTHER_FORM, checks_in_order, side_by_side

    name = printable(replayed.path)
    lines = []
    for altered in replayed.altered:
        where = f"line {altered.first}" if altered.first == altered.last else \
            f"lines {altered.first} to {altered.last}"
        lines.append(f"{name}: {where}: altered since this was written")
    if replayed.torn is not None:
        lines.append(f"{name}: line {replayed.torn}: a torn record, left out")
    is_first = True
    told = list(checks_in_order(replayed))
    for k, check in enumerate(told):
        if k >= _SHOWN_DIFFERENCES and not is_first:
            lines.append(f"{name}: and {_count(len(told) - k, 'more')}: --json lists all")
            break
        source = check.source.split("\n")[0]
        shown = source if len(source) <= 60 else f"{source[:59]}…"
        note = f": {check.note}" if check.note else ""
        lines.append(printable(f"{name}:{check.line}: {check.verdict}: {shown}{note}"))
        if is_first and check.verdict not in (AGREES, OTHER_FORM):
            is_first = False
            rows = side_by_side(check.recorded, check.found)
            lines += [f"    {printable(row)}" for row in rows[:_SHOWN_ROWS]]
            if len(rows) > _SHOWN_ROWS:
                lines.append(f"    … {len(rows) - _SHOWN_ROWS:,} more rows: --json has all …")
    agreeing = len(replayed.of(AGREES))
    others = [
        f"{len(replayed.of(v)):,} {word}" for v, word in (
            (OTHER_FORM, "in another form"), ("differs", "different"), ("missing", "missing"),
            ("extra", "extra")) if replayed.of(v)]
    lines.append(f"{name}: {_count(agreeing, 'result')} as recorded"
                 + (f"; {', '.join(others)}" if others else ""))
    return lines


def _count(n: int, what: str) -> str:
    return f"{n:,} {what}" if n == 1 or what == "more" else f"{n:,} {what}s"


def printable(text: str) -> str:
    """A line without characters that a terminal acts on."""
    return "".join(c if c.isprintable() else f"\\x{ord(c):02x}" for c in text)


# --- report --------------------------------------------------------------------------------------


def report(options: argparse.Namespace, write: Write, complain: Write) -> int:
    """Set a log as a document; 2 when it cannot be read or written."""
    from spanwright.files import FileRefused, Folder
    from spanwright.journal import read
    from spanwright.log_files import LogFailure
    from spanwright.report import FORMS, written

    place: Path = options.place
    ending = place.suffix.lower()
    if ending not in FORMS:
        complain(f"spanwright: {place}: the ending says how a report is set: "
                 f"{', '.join(e for e in FORMS if e != '.htm')}")
        return USAGE
    if _is_same(place, Path(options.log)):
        complain("spanwright: a report does not go into the log itself")
        return USAGE
    try:
        log = read(Path(options.log))
        content = written(log, options.log, ending, options.title)
        Folder(place.parent, allows_outside=True).write(place.name, content)
    except (LogFailure, FileRefused) as error:
        complain(f"spanwright: {error}")
        return USAGE
    write(f"{place}: {_count(len(log.records), 'input')}, {len(content.encode()):,} bytes")
    return OK


def _is_same(one: Path, other: Path) -> bool:
    try:
        return one.samefile(other)
    except OSError:
        return False


# --- resume and run --log ------------------------------------------------------------------------


def to_resume(options: argparse.Namespace, complain: Write) -> Path | None:
    """The log that `resume` means; None, with a word why, when there is none."""
    from spanwright.log_files import interrupted

    found: Path | None = options.log or interrupted()
    if found is None:
        complain("spanwright: no session was lost; to go on in a log, name it")
    return found


def bring_back(path: Path, conversation: Conversation, write: Write) -> Journal:
    """Bring a session back into a fresh conversation, say how, and give its journal to go on in.

    Raises LogFailure.
    """
    from spanwright.replay import resume

    resumed = resume(path, conversation)
    if resumed.set_aside is not None:
        write(f"a torn record was set aside in {resumed.set_aside}")
    for altered in resumed.altered:
        write(f"line {altered.first}: altered since this was written")
    for check in resumed.differences:
        write(printable(
            f"line {check.line}: {check.verdict}: {check.source.split(chr(10))[0][:60]}"
            f"{f': {check.note}' if check.note else ''}"))
    write(f"{_count(resumed.n_said, 'sentence')} of {path} brought back")
    return resumed.journal
