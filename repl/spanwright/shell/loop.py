"""The shell's loop: ask, say, show; the only part of the shell that writes."""

from __future__ import annotations

import io
import os
import shutil
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from spanwright import __version__, log_files
from spanwright.conversation import Conversation, local
from spanwright.files import Folder
from spanwright.replies import Progress, Reply, State
from spanwright.shell.display import (
    PLAIN_MARK,
    Line,
    Screen,
    greeting,
    progress_text,
    reply_lines,
    ring_text,
)

if TYPE_CHECKING:
    from spanwright.journal import Journal
    from spanwright.shell.prompt import Prompt

Ask = Callable[[State], str]
Write = Callable[[list[Line]], None]

NOT_BROUGHT_BACK = 2
"""The exit status when the log to go on in cannot be read, as for other unreadable files."""
STOPPED: Line = [("class:message", "stopped; the session is as it was before this sentence")]
CUT_OFF: Line = [("class:aside", "not shown further; recall lists what has been found")]


def run(
    folder: Path | None = None, *, resumed: Path | None = None, allows_outside: bool = False
) -> int:
    """The interactive shell, on its own or going on in the log `resumed`; the exit status."""
    # The evaluator loads the kernel while this process loads what reads the keys.
    conversation = local(Folder(folder or Path.cwd(), allows_outside), is_digested=True)
    if isinstance(sys.stdout, io.TextIOWrapper):
        sys.stdout.reconfigure(errors="replace")  # a terminal without all our signs
    try:
        if os.environ.get("TERM", "dumb") in ("dumb", "unknown"):
            return _logged(conversation, _ask_plainly, _write_plainly, resumed)
        with keys_kept():
            return _logged(conversation, make_prompt().ask, write_styled, resumed)
    finally:
        conversation.close()


def _logged(
    conversation: Conversation, ask: Ask, write: Write, resumed: Path | None
) -> int:
    """Converse with a log, new or gone on in; without one when none can be written."""

    def tell(line: str) -> None:
        write([[("class:aside", line)]])

    write([greeting(__version__)])
    log = SessionLog(tell)
    if resumed is None:
        offered = log_files.offer()
        if offered:
            tell(offered)
    elif not log.go_on_in(resumed, conversation):
        return NOT_BROUGHT_BACK
    try:
        return converse(conversation, ask, write, log)
    finally:
        log.close()


class SessionLog:
    """The log of this session, made at the first entry: the first prompt need not wait for it."""

    def __init__(self, tell: Callable[[str], None]) -> None:
        self._tell = tell
        self._journal: Journal | None = None
        self._is_open = False

    def go_on_in(self, path: Path, conversation: Conversation) -> bool:
        """Bring the session of a log back; False, with the reason told, when that fails."""
        from spanwright import log_commands

        self._is_open = True
        try:
            self._journal = log_commands.bring_back(path, conversation, self._tell)
        except log_files.LogFailure as error:
            # what was asked for is not there: an empty session would only look like it
            self._tell(f"not brought back: {error}")
        return self._journal is not None

    def journal(self) -> Journal | None:
        """What takes the records; None, the reason told once, when no log can be written."""
        if not self._is_open:
            # an interrupt waits: a session that lost its log unnoticed would be worse
            with log_files.undisturbed():
                from spanwright import journal, log_commands

                try:
                    self._journal = journal.create_default(log_commands.default_settings())
                except log_files.LogFailure as error:
                    self._tell(f"no log is kept: {error}")
                self._is_open = True
        return self._journal

    def close(self) -> None:
        """Mark the session as left; a log without entries goes away."""
        if self._journal is not None:
            self._journal.close(keeps_empty=False)


def make_prompt() -> Prompt:
    """The line editor with the user's history."""
    from spanwright.shell.history import EntryHistory
    from spanwright.shell.prompt import Prompt

    return Prompt(EntryHistory())


def converse(
    conversation: Conversation, ask: Ask, write: Write, log: SessionLog | None = None
) -> int:
    """Ask and answer until the user leaves."""
    # does not wait: the evaluator may still be loading
    state = conversation.state()
    while True:
        text = ""
        try:
            text = ask(state)
            if not text.strip():
                continue
            journal = None if log is None else log.journal()
            if show_replies(conversation, text, write, journal):
                return 0
            state = conversation.state()
        except EOFError:
            return 0
        except KeyboardInterrupt:
            # between a reply and the next prompt there is nothing to stop, before the first
            # reply an entry that has not begun
            if text.strip():
                write([STOPPED])


def show_replies(
    conversation: Conversation, text: str, write: Write, journal: Journal | None = None
) -> bool:
    """Run an entry, record it and show what comes; whether the user has left."""
    status = StatusLine()
    replies = conversation.say(text, on_progress=status.show)
    if journal is not None:
        replies = journal.recorded(text, replies)
    is_muted = False
    for reply in _until_stopped(replies, status, write):
        if reply.is_quit:
            return True
        if is_muted:
            continue
        try:
            if journal is not None and journal.trouble:
                write([[("class:message", journal.trouble)]])
            write(reply_lines(reply, screen()))
        except KeyboardInterrupt:
            # The rest is still taken in: the session and this side must stay in step.
            is_muted = True
            write([CUT_OFF])
    return False


def _until_stopped(
    replies: Iterator[Reply], status: StatusLine, write: Write
) -> Iterator[Reply]:
    """The replies; a session in this process ends its answer when the user stops it."""
    while True:
        try:
            reply = next(replies)
        except StopIteration:
            return
        except KeyboardInterrupt:
            status.clear()
            write([STOPPED])
            return
        finally:
            status.clear()
        yield reply


@contextmanager
def keys_kept() -> Iterator[None]:
    """Keys pressed while a sentence runs wait for the next prompt, and leave no traces before.

    Left to itself the terminal would echo them, and swallow Ctrl-D.
    """
    try:
        import termios
    except ImportError:
        yield
        return
    try:
        handle = sys.stdin.fileno()
        before = termios.tcgetattr(handle)
    except (termios.error, OSError, ValueError):
        yield
        return
    changed = [*before[:6], [*before[6]]]
    changed[0] &= ~termios.ICRNL
    changed[3] &= ~(termios.ECHO | termios.ICANON)
    changed[6][termios.VMIN], changed[6][termios.VTIME] = 1, 0
    termios.tcsetattr(handle, termios.TCSANOW, changed)
    try:
        yield
    finally:
        termios.tcsetattr(handle, termios.TCSANOW, before)


def screen() -> Screen:
    """The size of the terminal now."""
    size = shutil.get_terminal_size()
    return Screen(size.columns, size.lines)


class StatusLine:
    """One line below the entry that tells how long a sentence has run; gone when it is done."""

    def __init__(self) -> None:
        self._width = 0

    def show(self, progress: Progress) -> None:
        """Write the line over what it said before."""
        text = progress_text(progress)[: screen().columns - 1]
        self._put(text + " " * (self._width - len(text)))
        self._width = len(text)

    def clear(self) -> None:
        """Leave an empty line."""
        if self._width:
            self._put(" " * self._width)
            self._put("")
            self._width = 0

    def _put(self, text: str) -> None:
        sys.stdout.write(f"\r{text}")
        sys.stdout.flush()


# --- Two ways to read and write ------------------------------------------------------------------


def write_styled(lines: list[Line]) -> None:
    """Lines with their styles, as far as the terminal and NO_COLOR allow."""
    from prompt_toolkit import print_formatted_text
    from prompt_toolkit.formatted_text import FormattedText

    from spanwright.shell.colouring import STYLE

    for line in lines:
        print_formatted_text(
            FormattedText(line), style=STYLE, include_default_pygments_style=False)


def _write_plainly(lines: list[Line]) -> None:
    for line in lines:
        print("".join(text for _, text in line))


def _ask_plainly(state: State) -> str:
    """An entry from a terminal that knows no cursor movement."""
    lead = f"{ring_text(state)} {PLAIN_MARK} "
    text = input(lead)
    from spanwright import services

    while text.strip() and services.is_incomplete(text):
        line = input(" " * len(lead))
        if not line.strip():
            break
        text = f"{text}\n{line}"
    return text
