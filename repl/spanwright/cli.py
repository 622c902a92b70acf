"""The command line: arguments, exit statuses, and what a script prints.

Exit status 0 when every sentence succeeded and every claim holds, 1 when not, 2 for wrong usage.
"""

from __future__ import annotations

import argparse
import contextlib
import json
import os
import sys
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from io import TextIOWrapper
from pathlib import Path
from typing import TYPE_CHECKING, Any, TextIO

from spanwright import __version__

if TYPE_CHECKING:
    from spanwright.conversation import Conversation
    from spanwright.journal import Journal
    from spanwright.replies import Progress, Reply

OK, FAILED, USAGE = 0, 1, 2
PLAIN_WIDTH = 100
PROGRESS_APART = 5.0


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; the exit status."""
    try:
        return _main(sys.argv[1:] if arguments is None else list(arguments))
    except BrokenPipeError:
        # the reader of the pipe has gone; nothing can be said to it any more
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return FAILED
    except OSError as error:
        # what reads and writes files answers for them itself; what is left is the output
        with contextlib.suppress(OSError):
            print(f"spanwright: {(error.strerror or str(error)).lower()}", file=sys.stderr)
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return USAGE
    except KeyboardInterrupt:
        print("stopped", file=sys.stderr)
        return 130


def _main(arguments: list[str]) -> int:
    _print_safely()
    options = _parser().parse_args(arguments)
    if options.command == "run":
        if options.sentences:
            _parser().error("`run` and -e do not go together")
        return _run(options)
    if options.sentences:
        # arguments that are not UTF-8 hold surrogates; they become replacement characters
        text = "\n".join(options.sentences).encode("utf-8", "surrogateescape")
        sources = [("-e", text.decode("utf-8", errors="replace"))]
        return _run_sources(sources, options, Path.cwd())
    if options.command in _COMMANDS:
        return _COMMANDS[options.command](options)
    if options.json or options.stop_at_first:
        _parser().error("--json and --stop-at-first go with a command or -e")
    if sys.stdin.isatty() and sys.stdout.isatty():
        from spanwright.shell import loop

        return loop.run(allows_outside=options.allow_outside)
    return _run_sources([("-", _standard_input())], options, Path.cwd())


def _standard_input() -> str:
    """All of standard input; what is not UTF-8 becomes the replacement character."""
    content = sys.stdin.buffer.read()
    return content.decode("utf-8", errors="replace").removeprefix("\ufeff")


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="spanwright",
        description="An algebra workbench for special bases of polynomial rings. "
        "Without arguments: the shell, or a script from standard input.")
    parser.add_argument("--version", action="version", version=f"spanwright {__version__}")
    parser.add_argument(
        "-e", dest="sentences", action="append", metavar="SENTENCES",
        help="evaluate these sentences; may be given several times")
    _result_options(parser, is_default=True)
    commands = parser.add_subparsers(dest="command", metavar="COMMAND")
    run = commands.add_parser("run", help="run scripts, one session for each")
    run.add_argument("files", nargs="+", metavar="FILE", help="a script, or - for standard input")
    run.add_argument("--log", metavar="FILE", help="record the run of one script in a new log")
    _many_cases_options(run)
    _result_options(run, is_default=False)
    from spanwright import log_commands

    log_commands.add_commands(commands)
    _editor_parsers(commands)
    return parser


def _editor_parsers(commands: Any) -> None:
    """The parsers of `serve`, `check` and `format`."""
    serve = commands.add_parser("serve", help="be a language server, on standard input and output")
    serve.add_argument("--tcp", type=_port, metavar="PORT", help="listen on this loopback port")
    check = commands.add_parser("check", help="say what is wrong with scripts, running nothing")
    check.add_argument("files", nargs="+", metavar="FILE", help="a script, or - for standard input")
    check.add_argument(
        "--json", action="store_true", default=argparse.SUPPRESS, help="a JSON object a finding")
    form = commands.add_parser("format", help="set scripts in the house style")
    form.add_argument("files", nargs="+", metavar="FILE", help="a script, or - for standard input")
    form.add_argument("--diff", action="store_true", help="show what would change, change nothing")
    form.add_argument("--check", action="store_true", help="status 1 when something would change")


def _many_cases_options(run: argparse.ArgumentParser) -> None:
    """How many cases are worked on, by whom, and from where on."""
    run.add_argument(
        "--jobs", type=int, metavar="N", help="work on so many cases of a `for` at once")
    run.add_argument(
        "--cluster", metavar="ADDRESS", help="send cases to the scheduler at this address; "
        "without --resume, finished ones are kept beside the script")
    run.add_argument(
        "--resume", dest="kept", metavar="FILE",
        help="keep finished cases in this file, and skip those that it holds")
    run.add_argument(
        "--only-failed", action="store_true",
        help="with --resume: run the cases again that failed or were not decided")
    run.add_argument(
        "--case-seconds", type=float, metavar="N", help="at most so many seconds for one case")


def _result_options(parser: argparse.ArgumentParser, *, is_default: bool) -> None:
    """Options that stand before or behind `run`; only the outer parser sets defaults."""
    default = False if is_default else argparse.SUPPRESS
    for name, meaning in (
        ("--json", "print a JSON object a sentence"),
        ("--stop-at-first", "end at the first sentence that fails"),
        ("--allow-outside", "let scripts read and write outside their own folder"),
    ):
        parser.add_argument(name, action="store_true", default=default, help=meaning)


def _print_safely() -> None:
    """Characters that the terminal's encoding lacks are printed as escapes."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


def _run(options: argparse.Namespace) -> int:
    if options.log is not None and len(options.files) > 1:
        _parser().error("--log records one script")
    if options.only_failed and options.kept is None:
        _parser().error("--only-failed goes with --resume")
    sources = []
    for name in options.files:
        if name == "-":
            sources.append((name, _standard_input()))
            continue
        from spanwright.files import FileRefused, read_text

        try:
            sources.append((name, read_text(Path(name), name)))
        except FileRefused as error:
            print(f"spanwright: {error}", file=sys.stderr)
            return USAGE
    return _run_sources(sources, options, None)


def _replay(options: argparse.Namespace) -> int:
    from spanwright import log_commands

    return log_commands.replay(options, print, _complain, _ask)


def _report(options: argparse.Namespace) -> int:
    from spanwright import log_commands

    return log_commands.report(options, print, _complain)


def _resume(options: argparse.Namespace) -> int:
    from spanwright import log_commands

    path = log_commands.to_resume(options, _complain)
    if path is None:
        return USAGE
    if not (sys.stdin.isatty() and sys.stdout.isatty()):
        _complain("spanwright: resume goes on in the shell, which needs a terminal")
        return USAGE
    from spanwright.shell import loop

    return loop.run(resumed=path, allows_outside=options.allow_outside)


def _serve(options: argparse.Namespace) -> int:
    from spanwright import editor_commands

    return editor_commands.serve(options.tcp)


def _port(text: str) -> int:
    if not (text.isascii() and text.isdigit() and len(text) < 6 and int(text) < 2**16):
        raise argparse.ArgumentTypeError(f"a port is a number from 0 to 65535, not {text[:20]!r}")
    return int(text)


def _check(options: argparse.Namespace) -> int:
    from spanwright import editor_commands

    return editor_commands.check(
        options.files, as_json=options.json, standard_input=_input_for(options.files))


def _format(options: argparse.Namespace) -> int:
    from spanwright import editor_commands

    return editor_commands.format_files(
        options.files, shows_diff=options.diff, only_checks=options.check,
        standard_input=_input_for(options.files))


def _input_for(names: Sequence[str]) -> str:
    return _standard_input() if "-" in names else ""


def _complain(line: str) -> None:
    print(line, file=sys.stderr)


def _ask(question: str) -> bool:
    """A question that only a person at a terminal can answer with yes."""
    if not sys.stdin.isatty():
        return False
    print(f"{question} (yes or no) ", end="", flush=True)
    return sys.stdin.readline().strip().lower() in ("yes", "y")


_COMMANDS: dict[str, Callable[[argparse.Namespace], int]] = {
    "replay": _replay, "report": _report, "resume": _resume,
    "serve": _serve, "check": _check, "format": _format,
}


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
    from spanwright.conversation import local
    from spanwright.files import Folder

    log = getattr(options, "log", None)
    faults: list[Fault] = []
    for name, text in sources:
        root = folder or (Path.cwd() if name == "-" else Path(name).resolve().parent)
        journal: Journal | None = None
        if log is not None:
            journal = _new_log(log)
            if journal is None:
                return USAGE
        conversation = local(
            Folder(root, options.allow_outside), means=_means(options, name),
            is_digested=journal is not None)
        try:
            faults += _run_one(conversation, name, text, options, journal)
        finally:
            conversation.close()
            if journal is not None:
                journal.close()
        if faults and options.stop_at_first:
            break
    if faults and not options.json:
        count = "1 sentence" if len(faults) == 1 else f"{len(faults)} sentences"
        print(f"{count} failed:", file=sys.stderr)
        for f in faults:
            print(f"  {f.name}:{f.line}:{f.column}: {f.what}", file=sys.stderr)
    return FAILED if faults else OK


def _new_log(name: str) -> Journal | None:
    """A log for a run; None, and a word why, when it cannot be made."""
    from spanwright import log_commands
    from spanwright.journal import Journal
    from spanwright.log_files import LogFailure

    try:
        return Journal.create(Path(name), log_commands.default_settings())
    except LogFailure as error:
        _complain(f"spanwright: {error}")
        return None


def _means(options: argparse.Namespace, name: str) -> dict[str, Any]:
    """The options for many cases of a script as plain data."""
    if options.command != "run":
        return {}
    kept = options.kept
    if kept is None and options.cluster is not None:
        # a scheduler may go away: what it has finished is never lost
        kept = "cases.jsonl" if name == "-" else str(Path(name).with_suffix(".cases.jsonl"))
        _complain(f"spanwright: finished cases are kept in {kept}")
    given = {
        "jobs": options.jobs, "cluster": options.cluster, "kept": kept,
        "only_failed": options.only_failed, "case_seconds": options.case_seconds,
        "stops_at_first": options.stop_at_first}
    return {name: value for name, value in given.items() if value}


def _run_one(
    conversation: Conversation, name: str, text: str, options: argparse.Namespace,
    journal: Journal | None,
) -> Iterator[Fault]:
    replies = conversation.say(
        text, name, _tell_progress(), is_recorded=options.json,
        stops_at_first=options.stop_at_first)
    if journal is not None:
        replies = journal.recorded(text, replies)
    for reply in replies:
        if journal is not None and journal.trouble:
            print(f"spanwright: {journal.trouble}", file=sys.stderr)
        if options.json:
            print(json.dumps(reply.record, ensure_ascii=True), flush=True)
        else:
            _print_block(reply, sys.stdout)
        if reply.status == "error":
            # the record of an error has the place of the fault
            record = reply.record
            yield Fault(name, record["line"], record["column"], record["message"])
            if record["code"] == "stopped":
                raise KeyboardInterrupt
        elif reply.status != "ok":
            is_open = reply.kind == "tally" and "fails" not in reply.text.split("\n")
            yield Fault(name, reply.line, reply.column, "not every case was decided" if is_open
                        else "the claim does not hold")


def _tell_progress() -> Callable[[Progress], None]:
    """Plain lines on standard error about a sentence that takes long, every few seconds."""
    last = 0.0

    def tell(progress: Progress) -> None:
        nonlocal last
        if progress.seconds < last:
            last = 0.0
        if progress.reached and progress.seconds - last >= PROGRESS_APART:
            last = progress.seconds
            print(f"{progress.seconds:.0f} s: {progress.reached}", file=sys.stderr, flush=True)

    return tell


def _print_block(reply: Reply, stream: TextIO) -> None:
    """A result as a script's reader sees it; every line of a value pastes back."""
    if reply.status == "error":
        print("\n".join(reply.messages), file=stream, flush=True)
        return
    if not reply.text:
        return
    from spanwright.rendering.wrapping import wrapped

    lines = wrapped(reply.terms, PLAIN_WIDTH) if reply.terms else reply.text.split("\n")
    remarks = [f"({reply.tag})"] if reply.tag is not None else []
    remarks += [reply.note] if reply.note else []
    if remarks:
        lines[-1] = f"{lines[-1]}   # {' '.join(remarks)}"
    print("\n".join(lines), file=stream, flush=True)
