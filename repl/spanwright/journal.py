"""Keeps the log of a session: every record on the disk before its result is shown.

A `Journal` owns one file, locked against a second writer. It never loses the session to a full
disk: what could not be written waits, and goes out in order with the next record.
"""

from __future__ import annotations

import contextlib
import os
import time
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import Any, TypeVar

from spanwright.files import MAX_BYTES
from spanwright.headers import writer
from spanwright.log_files import (
    CLOEXEC,
    LogFailure,
    all_of,
    default_folder,
    lock,
    reason,
    undisturbed,
)
from spanwright.log_format import Composer, Log, read_log
from spanwright.log_marks import FORMAT, SUFFIX
from spanwright.replies import Reply
from spanwright_grammar.parsing import Chunk, Comment, parse
from spanwright_grammar.source import Source, Span

Item = TypeVar("Item")


class Journal:
    """A log that is being written.

    `trouble` says why the last record is not on the disk, and is empty when it is.
    """

    def __init__(self, path: Path, handle: int, size: int, composer: Composer) -> None:
        self.path = path
        self.trouble = ""
        self.n_records = 0
        self._handle = handle
        self._size = size
        self._composer = composer
        self._pending = b""

    # opening and closing

    @staticmethod
    def create(path: Path, settings: Iterable[str] = ()) -> Journal:
        """A new log with its header; `settings` are the `fix` sentences in force.

        Raises LogFailure when the file exists, or cannot be made.
        """
        composer = Composer()
        header = composer.header(writer(), settings).encode("utf-8")
        # the name appears with the whole header behind it, so that no log is ever without one
        draft = path.with_name(f".{path.name[:80]}.{os.getpid()}.part")
        try:
            with contextlib.suppress(FileNotFoundError):
                os.unlink(draft)
            handle = os.open(draft, os.O_RDWR | os.O_CREAT | os.O_EXCL | CLOEXEC, 0o666)
            try:
                lock(handle, path)
                _write_all(handle, header)
                _name(draft, path)
                _sync_folder(path.parent)
            except (OSError, LogFailure):
                os.close(handle)
                raise
            finally:
                with contextlib.suppress(FileNotFoundError):
                    os.unlink(draft)
        except FileExistsError as error:
            raise LogFailure(
                f"{path} exists already: take another name, or go on in it with "
                f"`spanwright resume {path}`") from error
        except OSError as error:
            raise LogFailure(f"{path} cannot be written: {reason(error)}") from error
        return Journal(path, handle, len(header), composer)

    @staticmethod
    def reopen(path: Path) -> tuple[Journal, Log, Path | None]:
        """A log to go on in, what it holds, and where its torn end was set aside, if it had one.

        Raises LogFailure when it is no log, when it is being written by another, or when it
        cannot be written.
        """
        try:
            handle = os.open(path, os.O_RDWR | CLOEXEC)
        except OSError as error:
            raise LogFailure(f"{path} cannot be opened: {reason(error)}") from error
        try:
            lock(handle, path)
            content = all_of(handle)
            log = _read(content, path)
            if log.format is None:
                raise LogFailure(
                    f"{path} is no log: its first line is not `# Spanwright log, format {FORMAT}`")
            aside = _set_aside(path, log, content)
            size = len(log.whole.encode("utf-8"))
            # what stays is written anew when line ends or bytes had to be mended
            if content[:size] != log.whole.encode("utf-8"):
                raise LogFailure(
                    f"{path} holds bytes that are not UTF-8, or line ends of another system: "
                    f"`spanwright replay {path} --rewrite` makes it whole")
            os.ftruncate(handle, size)
            os.lseek(handle, size, os.SEEK_SET)
            journal = Journal(path, handle, size, Composer(_since_last_seal(log.whole)))
            journal.n_records = len(log.records)
            if log.whole and not log.whole.endswith("\n"):
                journal._append("\n")
            os.fsync(handle)
        except OSError as error:
            os.close(handle)
            raise LogFailure(f"{path} cannot be written: {reason(error)}") from error
        except LogFailure:
            os.close(handle)
            raise
        return journal, log, aside

    def close(self, *, keeps_empty: bool = True) -> None:
        """Mark the session as left by its user; without `keeps_empty` an unused log goes away."""
        if self._handle < 0:
            return
        if self.n_records == 0 and not keeps_empty:
            self._discard()
            return
        with undisturbed():
            self._append(self._composer.closing())
            os.close(self._handle)
            self._handle = -1

    def let_go(self) -> None:
        """Close the file without a mark: the session was not brought back."""
        if self._handle >= 0:
            os.close(self._handle)
            self._handle = -1

    def _discard(self) -> None:
        with contextlib.suppress(OSError):
            os.unlink(self.path)
        os.close(self._handle)
        self._handle = -1

    # writing

    def recorded(
        self, text: str, items: Iterable[Item], reply_of: Callable[[Item], Reply] | None = None,
    ) -> Iterator[Item]:
        """The items of an answer, each one passed on when its record is on the disk.

        `items` are what running `text` yields, replies or what `reply_of` makes replies of.
        """
        source = Source(text)
        parsed = parse(source)
        place = 0
        for k, item in enumerate(items):
            reply: Any = item if reply_of is None else reply_of(item)
            chunk = parsed.chunks[k] if k < len(parsed.chunks) else None
            with undisturbed():
                if chunk is None:
                    # an answer to no sentence of this text: kept as it is, never run again
                    content = self._composer.record(reply.source, reply, None)
                else:
                    before, behind, place = _around(source, parsed.comments, chunk, place)
                    content = self._composer.prose(before) + self._composer.record(
                        source.slice(chunk.span), reply, chunk.sentence, behind)
                self.n_records += not reply.is_quit  # leaving at once is no reason for a log
                self._append(content)
            yield item
        rest = [
            source.slice(c.span) for c in parsed.comments[place:] if not c.is_result]
        if rest:
            with undisturbed():
                self._append(self._composer.prose(rest))

    def _append(self, content: str) -> None:
        """Write and sync; what fails is taken back whole and kept for the next time."""
        data = self._pending + content.encode("utf-8")
        if not data:
            return
        try:
            _write_all(self._handle, data)
            if os.fstat(self._handle).st_nlink == 0:
                raise FileNotFoundError(2, "the file has been removed")
        except OSError as error:
            self.trouble = f"{self.path}: this is not in the log: {reason(error)}"
            if isinstance(error, FileNotFoundError):
                # written, to a file without a name: it is lost when this process ends
                self._size += len(data)
                self._pending = b""
                return
            self._pending = data
            with contextlib.suppress(OSError):
                os.ftruncate(self._handle, self._size)
                os.lseek(self._handle, self._size, os.SEEK_SET)
            return
        self._size += len(data)
        self._pending = b""
        self.trouble = ""


def _around(
    source: Source, comments: tuple[Comment, ...], chunk: Chunk, place: int
) -> tuple[list[str], str, int]:
    """The remarks before a sentence, the one behind it on its line, and the next comment."""
    before: list[str] = []
    behind = ""
    line = source.position(max(chunk.span.end - 1, chunk.span.start))[0]
    while place < len(comments):
        comment = comments[place]
        is_inside = chunk.span.start <= comment.span.start < chunk.span.end
        if comment.span.start < chunk.span.start:
            if not comment.is_result:
                before.append(source.slice(comment.span))
        elif not is_inside:
            gap = source.slice(Span(chunk.span.end, comment.span.start))
            if source.position(comment.span.start)[0] != line or gap.strip() \
                    or comment.is_result:
                break
            behind = source.slice(comment.span)
        place += 1
    return before, behind, place


# --- Finding and reading logs --------------------------------------------------------------------


def read(path: Path) -> Log:
    """The log or script in a file; raises LogFailure when it cannot be read."""
    try:
        if path.stat().st_size > MAX_BYTES:
            raise LogFailure(f"{path} is larger than {MAX_BYTES // 10**6} MB")
        content = path.read_bytes()
    except OSError as error:
        raise LogFailure(f"{path} cannot be read: {reason(error)}") from error
    return _read(content, path)


def create_default(settings: Iterable[str] = (), folder: Path | None = None) -> Journal:
    """A new log in the folder of the shell's logs, named by the time of day."""
    place = folder or default_folder()
    try:
        place.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise LogFailure(f"{place} cannot be made: {reason(error)}") from error
    stem = time.strftime("%Y-%m-%d-%H%M%S")
    for k in range(1, 1000):
        path = place / f"{stem}{'' if k == 1 else f'-{k}'}{SUFFIX}"
        if not path.exists():
            with contextlib.suppress(FileExistsError):
                return Journal.create(path, settings)
    raise LogFailure(f"{place} holds too many logs of this second")


def rewrite(path: Path, content: str) -> None:
    """Put a new text in the place of a log: whole, or not at all; raises LogFailure."""
    draft = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        handle = os.open(path, os.O_RDWR | CLOEXEC)
        try:
            lock(handle, path)
            with open(draft, "x", encoding="utf-8", newline="\n") as stream:
                stream.write(content)
                stream.flush()
                os.fsync(stream.fileno())
            os.chmod(draft, os.fstat(handle).st_mode & 0o777)
            os.replace(draft, path)
            _sync_folder(path.parent)
        finally:
            os.close(handle)
    except OSError as error:
        with contextlib.suppress(OSError):
            os.unlink(draft)
        raise LogFailure(f"{path} cannot be written: {reason(error)}") from error


def _read(content: bytes, path: Path) -> Log:
    text = content.decode("utf-8", errors="replace").removeprefix("\ufeff")
    log = read_log(text, str(path))
    if log.format is not None and log.format > FORMAT:
        raise LogFailure(
            f"{path} is a log of format {log.format}; this program reads formats up to {FORMAT}, "
            "a newer one is needed")
    return log


def _set_aside(path: Path, log: Log, content: bytes) -> Path | None:
    """Keep what stands behind the last whole record in a file of its own."""
    if log.torn is None:
        return None
    aside = path.with_name(path.name + ".torn")
    torn = content[len(log.whole.encode("utf-8")):]
    with open(aside, "ab") as stream:
        stream.write(torn if torn.endswith(b"\n") else torn + b"\n")
        stream.flush()
        os.fsync(stream.fileno())
    return aside


def _since_last_seal(text: str) -> str:
    """What a checksum has to go on from."""
    lines = text.split("\n")
    for place in range(len(lines) - 1, -1, -1):
        if lines[place].startswith("#= # ") and "check " in lines[place]:
            # the line end of the seal itself counts for no record
            return "\n".join(lines[place + 1:])
    return text


# --- The system ----------------------------------------------------------------------------------


def _write_all(handle: int, data: bytes) -> None:
    """Write, and wait until it is on the disk."""
    view = memoryview(data)
    while view:
        view = view[os.write(handle, view):]
    os.fsync(handle)


def _name(draft: Path, path: Path) -> None:
    """Give a finished file its name; raises FileExistsError when the name is taken."""
    try:
        os.link(draft, path)
    except FileExistsError:
        raise
    except OSError:
        # a file system without links: a moment in which two could take one name
        if path.exists():
            raise FileExistsError(17, "file exists", str(path)) from None
        os.rename(draft, path)


def _sync_folder(folder: Path) -> None:
    """Make a new name in a folder last, where the system can."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)
