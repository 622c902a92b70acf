"""The evaluator process: runs a session for a front end, one checkpoint before each sentence.

A checkpoint is a fork: the child carries the sentence out under its limits, up to the text of the
reply, and becomes the session when that is done; its parent then ends. When the child is stopped,
aborts, crashes or fails, the parent goes on with the session from before the sentence. The parent
alone decides which, so that a late request to stop never ends a finished sentence.

    front end ──requests──► holder ──fork──► child        frames: length, then JSON
              ◄──frames───  holder ◄──notes── child       control: the id of the request to stop

Only the holder writes frames: a child tells its parent, or is the holder by then. The first
process adopts orphans (PR_SET_CHILD_SUBREAPER) and ends when the last holder has ended. A child
dies with its parent (PR_SET_PDEATHSIG), and all die when the front end is gone: its end of the
pipes closes, whatever ended it. Systems without prctl lose only what these two give.
"""

from __future__ import annotations

import contextlib
import gc
import json
import os
import resource
import select
import signal
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any, NoReturn

from spanwright import means
from spanwright.confinement import (
    adopt_orphans,
    default_memory,
    end_with_parent,
    mapped_memory,
    outlive_parent,
)
from spanwright.context import Failure, failure
from spanwright.crashes import MemoryLimit, crash, so_far, too_much_memory
from spanwright.files import Folder
from spanwright.frames import HEADER, encoded, read_exactly, receive, write_all
from spanwright.kernel import budget
from spanwright.means import Means
from spanwright.quick import is_quick
from spanwright.session import Outcome, Session
from spanwright.settings import Bounds
from spanwright_grammar import syntax
from spanwright_grammar.parsing import Chunk, parse
from spanwright_grammar.source import Source, Span

REQUESTS, STANDARD_OUTPUT, ERRORS = 0, 1, 2

NOTES_APART = 0.2
"""Seconds between two notes on what has been reached."""
BURIAL = 0.15
"""Seconds that a killed child has to give its memory back before the reply goes out."""
MOST_SHOWN = 200
"""Characters of a running sentence, or of what it has reached, that a front end is told."""


class _Stopped(BaseException):
    """The front end asked to stop while this process was at work itself."""


# the session


@dataclass(frozen=True, slots=True)
class _Links:
    """A child's ends of its two pipes."""

    notes: int
    answers: int

    def close(self) -> None:
        os.close(self.notes)
        os.close(self.answers)


class CheckpointedSession(Session):
    """A session that survives whatever one sentence does."""

    control: int = -1
    """Where the requests to stop come in; reading it does not block."""
    frames: int = STANDARD_OUTPUT
    usual_memory: int = 4 * 10**9
    means: Means = Means()
    is_digested: bool = False
    _request: dict[str, Any]
    _is_stopped: bool = False
    _dying: tuple[int, ...] = ()
    # of a child alone
    _links: _Links | None = None
    _limit: MemoryLimit = MemoryLimit(0, None)
    _last_note: float = 0.0
    _reached: str = ""

    def serve(self) -> None:
        """Answer requests until there are no more."""
        while True:
            while self._dying and not select.select([REQUESTS], [], [], 0.05)[0]:
                self._bury()
            request = receive(REQUESTS)
            if request is None:
                return
            self.answer(request)

    def answer(self, request: dict[str, Any]) -> None:
        """Run a text's sentences but for the first `skip`, and send a frame for each.

        A `begin` frame goes before each reply, a `state` frame behind the last.
        """
        self._request, self._is_stopped, self.has_quit = request, False, False
        self.n_sentences = request["after"]
        source = Source(request["say"], request["name"])
        try:
            # long texts take their time, and nothing can be lost
            with self._interruptible():
                chunks = parse(source).chunks[request["skip"]:]
        except _Stopped:
            first = Span(0, len(source.text.partition("\n")[0]))
            chunks = (Chunk(first, None, (failure("stopped", first, "stopped").diagnostic,)),)
        for chunk in chunks:
            status = self._answer_one(source, chunk)
            if self._is_stopped or self.has_quit:
                break
            if status != "ok" and request["stops_at_first"]:
                break
        write_all(encoded({"state": asdict(self.state()), "id": request["id"]}), self.frames)

    def _answer_one(self, source: Source, chunk: Chunk) -> str:
        """Run one sentence, send what came of it, and tell its status."""
        line, column = source.position(chunk.span.start)
        write_all(encoded({"begin": {
            "sentence": self.n_sentences + 1, "line": line, "column": column,
            "source": source.slice(chunk.span).strip()[:MOST_SHOWN]}}), self.frames)
        if chunk.sentence is not None and self._must_stop():
            outcome = self._undone(source, chunk, "stopped", "stopped")
        elif chunk.sentence is None or is_quick(chunk.sentence, self.context):
            outcome = self._run_chunk(source, chunk)
        else:
            return self._at_checkpoint(source, chunk)
        write_all(self._frame(outcome), self.frames)
        return outcome.status

    def _at_checkpoint(self, source: Source, chunk: Chunk) -> str:
        """Run one sentence in a child, which returns from here when the session is now in it."""
        limit = self._memory_limit()
        if os.lseek(ERRORS, 0, os.SEEK_CUR):
            _forget_errors()
        notes, child_notes = os.pipe()
        child_answers, answers = os.pipe()
        started = time.monotonic()
        holder = os.getpid()
        try:
            child = os.fork()
        except OSError as error:
            for fd in (notes, child_notes, child_answers, answers):
                os.close(fd)
            outcome = self._undone(
                source, chunk, "over-budget",
                f"the system has no room for one more process ({error.strerror})")
            write_all(self._frame(outcome), self.frames)
            return outcome.status
        if child == 0:
            os.close(notes)
            os.close(answers)
            return self._as_child(
                source, chunk, _Links(child_notes, child_answers), limit, holder)
        os.close(child_notes)
        os.close(child_answers)
        try:
            found = self._watch(child, source, chunk, notes, answers, limit, started)
        finally:
            os.close(notes)
            os.close(answers)
        if isinstance(found, bytes):
            # the sentence was wrong; its numbers went with the child
            self.n_sentences += 1
            write_all(found, self.frames)
            return "error"
        write_all(self._frame(found), self.frames)
        return found.status

    # the child

    def _as_child(
        self, source: Source, chunk: Chunk, links: _Links, limit: MemoryLimit, holder: int
    ) -> str:
        end_with_parent(holder)
        limits = resource.getrlimit(resource.RLIMIT_AS)
        self._links, self._limit, self._dying = links, limit, ()
        self._last_note, self._reached = 0.0, ""
        if limit.bound is not None:
            resource.setrlimit(resource.RLIMIT_AS, (limit.bound, limits[1]))
        outcome = self._run_chunk(source, chunk)
        try:
            frame = self._frame(outcome)
        except Exception as error:
            # a result that cannot be shown is as good as none
            self.n_sentences -= 1
            if isinstance(error, MemoryError):
                self._lift_limit()
                found = too_much_memory(limit, chunk.span, self._reached)
            else:
                found = failure(
                    "internal-error", chunk.span,
                    "the program failed here, and the fault is not yours; please report "
                    f"{type(error).__name__}: {str(error)[:200]}")
            outcome = self._failed(source, chunk, found)
            frame = self._frame(outcome)
        if outcome.status == "error":
            # nothing has changed: the parent is the better session, it holds no debris
            write_all(b"E" + frame, links.notes)
            os._exit(0)
        resource.setrlimit(resource.RLIMIT_AS, limits)
        outlive_parent()
        write_all(b"D", links.notes)
        if os.read(links.answers, 1) != b"G":
            os._exit(1)
        links.close()
        self._links = None
        write_all(frame, self.frames)
        return outcome.status

    def guarded(self, sentence: syntax.Sentence, action: Callable[[], Any]) -> Any:
        """Carry `action` out with the clock left to the parent, which needs no help to stop it."""
        limits = replace(
            budget.current(), is_spent=_never, report=self._report,
            max_bytes=self.context.settings.memory or self.usual_memory)
        try:
            by = replace(self.means, progress=self._report, folder=self.folder)
            with budget.using(limits), means.using(by):
                return action()
        except MemoryError as error:
            self._lift_limit()
            raise too_much_memory(self._limit, sentence.place, self._reached) from error
        except Failure as error:
            cause = error.__cause__
            while isinstance(cause, Failure):
                cause = cause.__cause__
            if not isinstance(cause, MemoryError):
                raise
            self._lift_limit()
            raise too_much_memory(self._limit, sentence.place, self._reached) from error

    def _lift_limit(self) -> None:
        """What is said about memory needs a little of it; this child ends soon."""
        if self._links is not None:
            hard = resource.getrlimit(resource.RLIMIT_AS)[1]
            resource.setrlimit(resource.RLIMIT_AS, (hard, hard))

    def _report(self, reached: str) -> None:
        """Tell what has been reached, a few times a second at most."""
        now = time.monotonic()
        if self._links is not None and now - self._last_note > NOTES_APART:
            self._last_note = now
            self._reached = reached[:MOST_SHOWN]
            text = self._reached.encode()
            write_all(b"N" + HEADER.pack(len(text)) + text, self._links.notes)

    # the parent

    def _watch(
        self, child: int, source: Source, chunk: Chunk, notes: int, answers: int,
        limit: MemoryLimit, started: float,
    ) -> Outcome | bytes:
        """Wait for a child; ends this process when it has become the session."""
        seconds = self.context.settings.seconds
        reached = ""
        while True:
            left = None if seconds is None else max(0.0, started + seconds - time.monotonic())
            ready, _, _ = select.select([notes, self.control], [], [], left)
            if self.control in ready and self._must_stop():
                return self._killed(child, source, chunk, started, "stopped", "stopped", reached)
            if notes in ready:
                mark = os.read(notes, 1)
                if mark == b"D":
                    if self._must_stop():
                        return self._killed(
                            child, source, chunk, started, "stopped", "stopped", reached)
                    # from here on the child is the session
                    write_all(b"G", answers)
                    os._exit(0)
                told = _told(notes) if mark else None
                if told is None:
                    # cut in the middle: the child is no more
                    break
                if mark == b"E":
                    os.waitpid(child, 0)
                    return HEADER.pack(len(told)) + told
                reached = told.decode()
                write_all(encoded({"progress": reached}), self.frames)
            elif not ready:
                return self._killed(
                    child, source, chunk, started, "over-budget",
                    f"stopped after {seconds} second{'' if seconds == 1 else 's'}", reached,
                    f"fix seconds = {2 * (seconds or 1)}")
        _, status, usage = os.wait4(child, 0)
        found = crash(
            status, _last_words(), usage.ru_maxrss * 1024, limit, chunk.span, reached)
        return self._failed(source, chunk, found, time.monotonic() - started)

    def _killed(
        self, child: int, source: Source, chunk: Chunk, started: float, code: str, message: str,
        reached: str, *hints: str,
    ) -> Outcome:
        """End a child that has not been told to go on."""
        os.kill(child, signal.SIGKILL)
        self._dying = (*self._dying, child)
        # some gigabytes take longer to give back than a prompt should wait
        until = time.monotonic() + BURIAL
        while self._bury() and time.monotonic() < until:
            time.sleep(0.002)
        return self._undone(source, chunk, code, f"{message}{so_far(reached)}", *hints,
                            seconds=time.monotonic() - started)

    def _bury(self) -> bool:
        """Whether killed children are still about."""
        self._dying = tuple(pid for pid in self._dying if os.waitpid(pid, os.WNOHANG)[0] == 0)
        return bool(self._dying)

    def _undone(
        self, source: Source, chunk: Chunk, code: str, message: str, *hints: str,
        seconds: float = 0.0,
    ) -> Outcome:
        """The outcome of a sentence that left no trace."""
        self.n_sentences += 1
        found = failure(code, chunk.span, message, *hints).diagnostic
        return self._outcome(source, chunk.span, "error", None, None, (found,), seconds)

    def _failed(
        self, source: Source, chunk: Chunk, found: Failure, seconds: float = 0.0
    ) -> Outcome:
        return self._undone(
            source, chunk, found.diagnostic.code, found.diagnostic.message,
            *found.diagnostic.hints, seconds=seconds)

    def _frame(self, outcome: Outcome) -> bytes:
        wanted = bool(self._request["is_recorded"])
        reply = outcome.reply(
            is_recorded=wanted or outcome.status == "error", is_digested=self.is_digested)
        return encoded({"reply": reply.to_data()})

    def _must_stop(self) -> bool:
        """Whether the front end has asked to stop this request; ends when it is gone."""
        while True:
            try:
                asked = os.read(self.control, HEADER.size)
            except BlockingIOError:
                return self._is_stopped
            if not asked:
                _end_quietly()
            if HEADER.unpack(asked)[0] == self._request["id"]:
                self._is_stopped = True

    @contextlib.contextmanager
    def _interruptible(self) -> Iterator[None]:
        """Look out for requests to stop while this process is at work itself, in Python alone."""
        def look_out(*_: object) -> None:
            if self._must_stop():
                raise _Stopped

        signal.signal(signal.SIGALRM, look_out)
        signal.setitimer(signal.ITIMER_REAL, 0.1, 0.1)
        try:
            yield
        finally:
            signal.setitimer(signal.ITIMER_REAL, 0)

    def _memory_limit(self) -> MemoryLimit:
        """What the next sentence may take: what is mapped now, and the budget."""
        amount = self.context.settings.memory or self.usual_memory
        try:
            mapped = mapped_memory()
        except (OSError, ValueError):
            # this system does not say, and does not hold anybody to such a bound either
            return MemoryLimit(amount, None)
        hard = resource.getrlimit(resource.RLIMIT_AS)[1]
        if hard != resource.RLIM_INFINITY and hard < mapped + amount:
            return MemoryLimit(max(0, hard - mapped), hard, is_systems=True)
        return MemoryLimit(amount, mapped + amount)


def _never() -> None:
    return None


def _told(notes: int) -> bytes | None:
    """What follows a child's mark."""
    head = read_exactly(notes, HEADER.size)
    return None if head is None else read_exactly(notes, HEADER.unpack(head)[0])


# processes


def _last_words() -> str:
    """The first line that the kernel library left when it gave up."""
    if not os.lseek(ERRORS, 0, os.SEEK_CUR):
        return ""
    try:
        text = os.pread(ERRORS, 2000, 0).decode(errors="replace")
    except OSError:
        return ""
    _forget_errors()
    return " ".join(text.split())


def _forget_errors() -> None:
    with contextlib.suppress(OSError):
        os.ftruncate(ERRORS, 0)
        os.lseek(ERRORS, 0, os.SEEK_SET)


def _end_quietly() -> NoReturn:
    """The front end is gone: nobody is left to answer."""
    with contextlib.suppress(OSError):
        os.killpg(0, signal.SIGKILL)
    os._exit(0)


def main() -> None:
    """Serve one front end: `python -m spanwright.evaluating CONTROL-FD GIVEN`, GIVEN as JSON."""
    control, given = int(sys.argv[1]), json.loads(sys.argv[2])
    # the terminal sends its interrupt to the whole group; stopping is the front end's to ask
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    adopt_orphans()
    # an abort under the limits is nothing to keep an image of
    resource.setrlimit(resource.RLIMIT_CORE, (0, resource.getrlimit(resource.RLIMIT_CORE)[1]))
    if os.fork():
        _reap(control)
    os.set_blocking(control, False)
    output = None if given["output"] is None else Path(given["output"])
    session = CheckpointedSession(
        folder=Folder(Path(given["root"]), given["allows_outside"], output),
        bounds=Bounds(**given["bounds"]))
    kept = given["means"].pop("kept", None)
    session.control = control
    session.means = Means(**given["means"], kept=None if kept is None else Path(kept))
    session.is_digested = given["is_digested"]
    session.frames = os.dup(STANDARD_OUTPUT)
    _keep_what_is_printed()
    session.usual_memory = default_memory()
    # the grammar's tables are read at the first use
    parse(Source("1"))
    # what is there for good need not be looked through, nor copied, in every child
    gc.collect()
    gc.freeze()
    try:
        session.serve()
    except BrokenPipeError:
        _end_quietly()


def _keep_what_is_printed() -> None:
    """Send both outputs to memory: the kernel library says there why it gives up.

    It does so on standard output as well, in the middle of a frame if that were one's place.
    """
    if hasattr(os, "memfd_create"):
        fd = os.memfd_create("errors")
    else:
        fd = os.open(os.devnull, os.O_WRONLY)
    os.dup2(fd, STANDARD_OUTPUT)
    os.dup2(fd, ERRORS)
    os.close(fd)


def _reap(control: int) -> NoReturn:
    """Wait for all that are or become children of this process."""
    os.close(control)
    for fd in (REQUESTS, STANDARD_OUTPUT):
        os.close(fd)
    while True:
        try:
            os.wait()
        except ChildProcessError:
            os._exit(0)


if __name__ == "__main__":
    main()
