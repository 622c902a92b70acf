"""The command line: arguments, exit statuses, and what a script prints.

Exit status 0 when every sentence succeeded and every claim holds, 1 when not, 2 for wrong usage.
"""

from __future__ import annotations

import argparse
import json
import os
import sys
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from spanwright import __version__

if TYPE_CHECKING:
    from spanwright.session import Reply, Session

OK, FAILED, USAGE = 0, 1, 2
PLAIN_WIDTH = 100


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; the exit status."""
    try:
        return _main(sys.argv[1:] if arguments is None else list(arguments))
    except BrokenPipeError:
        # the reader of the pipe has gone; nothing can be said to it any more
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return FAILED
    except KeyboardInterrupt:
        print("stopped", file=sys.stderr)
        return 130


def _main(arguments: list[str]) -> int:
    options = _parser().parse_args(arguments)
    if options.command == "run":
        return _run(options)
    if options.sentences:
        return _run_sources([("-e", "\n".join(options.sentences))], options, Path.cwd())
    if options.json or options.stop_at_first:
        _parser().error("--json and --stop-at-first go with `run` or -e")
    if sys.stdin.isatty() and sys.stdout.isatty():
        from spanwright.shell import loop

        return loop.run()
    return _run_sources([("-", sys.stdin.read())], options, Path.cwd())


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="spanwright",
        description="An algebra workbench for special bases of polynomial rings. "
        "Without arguments: the shell, or a script from standard input.")
    parser.add_argument("--version", action="version", version=f"spanwright {__version__}")
    parser.add_argument(
        "-e", dest="sentences", action="append", metavar="SENTENCES",
        help="evaluate these sentences; may be given several times")
    _result_options(parser)
    commands = parser.add_subparsers(dest="command", metavar="COMMAND")
    run = commands.add_parser("run", help="run scripts, one session for each")
    run.add_argument("files", nargs="+", metavar="FILE", help="a script, or - for standard input")
    _result_options(run)
    return parser


def _result_options(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--json", action="store_true", help="print a JSON object a sentence")
    parser.add_argument(
        "--stop-at-first", action="store_true", help="end at the first sentence that fails")
    parser.add_argument(
        "--allow-outside", action="store_true",
        help="let scripts read and write outside their own folder")


def _run(options: argparse.Namespace) -> int:
    sources = []
    for name in options.files:
        if name == "-":
            sources.append((name, sys.stdin.buffer.read().decode("utf-8", errors="replace")))
            continue
        from spanwright.files import FileRefused, read_text

        try:
            sources.append((name, read_text(Path(name), name)))
        except FileRefused as error:
            print(f"spanwright: {error}", file=sys.stderr)
            return USAGE
    return _run_sources(sources, options, None)


@dataclass(frozen=True, slots=True)
class Fault:
    """A sentence that failed, for the list at the end."""

    name: str
    line: int
    column: int
    what: str


def _run_sources(
    sources: list[tuple[str, str]], options: argparse.Namespace, folder: Path | None
) -> int:
    from spanwright.files import Folder
    from spanwright.session import Session

    faults: list[Fault] = []
    for name, text in sources:
        root = folder or (Path.cwd() if name == "-" else Path(name).resolve().parent)
        session = Session(folder=Folder(root, options.allow_outside))
        faults += _run_one(session, name, text, options)
        if faults and options.stop_at_first:
            break
    if faults and not options.json:
        count = "1 sentence" if len(faults) == 1 else f"{len(faults)} sentences"
        print(f"{count} failed:", file=sys.stderr)
        for f in faults:
            print(f"  {f.name}:{f.line}:{f.column}: {f.what}", file=sys.stderr)
    return FAILED if faults else OK


def _run_one(
    session: Session, name: str, text: str, options: argparse.Namespace
) -> Iterator[Fault]:
    from spanwright_grammar.source import Source

    for outcome in session.run_all(Source(text, name)):
        reply = outcome.reply()
        if options.json:
            print(json.dumps(reply.record, ensure_ascii=True), flush=True)
        else:
            _print_block(reply, sys.stdout)
        if reply.status != "ok":
            line, column = reply.line, reply.column
            if outcome.diagnostics:
                line, column = outcome.source.position(outcome.diagnostics[0].span.start)
            what = (outcome.diagnostics[0].message if outcome.diagnostics
                    else "the claim does not hold")
            yield Fault(name, line, column, what)
            if options.stop_at_first:
                return


def _print_block(reply: Reply, stream: TextIO) -> None:
    """A result as a script's reader sees it; every line of a value pastes back."""
    if reply.status == "error":
        print("\n".join(reply.messages), file=stream, flush=True)
        return
    if not reply.text:
        return
    from spanwright.rendering.layout import wrapped

    lines = wrapped(reply.terms, PLAIN_WIDTH) if reply.terms else reply.text.split("\n")
    if reply.tag is not None:
        lines[-1] = f"{lines[-1]}   # ({reply.tag})"
    print("\n".join(lines), file=stream, flush=True)
