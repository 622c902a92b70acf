"""The evaluator process: runs a session for a front end, with a checkpoint close behind.

A checkpoint is a fork: the child goes on as the session, and its parent stays as its keeper, with
the session as it was. While a sentence runs, the keeper watches its time and the requests to stop.
When the session is stopped, aborts, crashes or is full of debris, the keeper takes its place: it
runs again what was run since the fork, and answers for the sentence. The keeper alone decides
which, so that a late request to stop never ends a finished sentence. A checkpoint is renewed before
there is more than RENEWED_AFTER to run again, if possible while nobody waits.

    front end ──requests──► session ◄─answers── keeper      frames: length, then JSON
              ◄──frames───  session ──notes───► keeper      control: the id of the request to stop

The session writes the frames, and the keeper those on what a running sentence has reached. The
first process adopts orphans (PR_SET_CHILD_SUBREAPER) and ends when all others have. A session at
work dies with its keeper (PR_SET_PDEATHSIG), and all die when the front end is gone: its end of
the pipes closes, whatever ended it. Systems without prctl lose only what these two give.
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
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from typing import Any, NoReturn

from spanwright import gateway, means
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
from spanwright.session import Outcome, Session
from spanwright.settings import Bounds
from spanwright_grammar import syntax
from spanwright_grammar.parsing import Chunk, parse
from spanwright_grammar.source import Source, Span

REQUESTS, STANDARD_OUTPUT, ERRORS = 0, 1, 2

RENEWED_AFTER = 0.1
"""Seconds of work that a keeper may have to do again."""
NOTES_APART = 0.2
"""Seconds between two notes on what has been reached."""
BURIAL = 0.15
"""Seconds that a killed session has to give its memory back before the reply goes out."""
MOST_SHOWN = 200
"""Characters of a running sentence, or of what it has reached, that a front end is told."""
ORDINARY = "claim x_1 x_2 + {0} = x_2 x_1 + {0}; x_1 E_(0,1,0)"
"""With a number that makes it a new text each time, for texts are remembered."""
LEAVES_DEBRIS = ("internal-error", "over-budget", "too-large")
"""Codes of failures behind which memory may be full of what came to nothing."""


class _Stopped(BaseException):
    """The front end asked to stop while this process was at work itself."""


class _NoProcess(Exception):
    """The system has no room for one more process."""


class _Restored(Exception):
    """This keeper is the session again; `rest` is the text at hand, with what is left of it."""

    def __init__(self, rest: _Text) -> None:
        super().__init__()
        self.rest = rest


# the session


@dataclass(frozen=True, slots=True)
class _Links:
    """The keeper's process, and a session's ends of the two pipes to it."""

    keeper: int
    notes: int
    answers: int

    def close(self) -> None:
        os.close(self.notes)
        os.close(self.answers)


@dataclass(frozen=True, slots=True)
class _NoticingFolder(Folder):
    """A folder that knows whether it was used: that must not be done a second time."""

    uses: list[str] = field(default_factory=list)

    def read(self, path: str) -> tuple[Path, str]:
        self.uses.append(path)
        return Folder.read(self, path)

    def place_to_write(self, path: str) -> Path:
        self.uses.append(path)
        return Folder.place_to_write(self, path)


@dataclass(frozen=True, slots=True)
class _Text:
    """A request, and its text in sentences."""

    request: dict[str, Any]
    source: Source
    chunks: tuple[Chunk, ...]


NO_TEXT = _Text({"id": 0}, Source(""), ())


class CheckpointedSession(Session):
    """A session that survives whatever one sentence does."""

    control: int = -1
    """Where the requests to stop come in; reading it does not block."""
    frames: int = STANDARD_OUTPUT
    usual_memory: int = 4 * 10**9
    means: Means = Means()
    is_digested: bool = False
    uses: list[str]
    """The files that sentences have used since the last checkpoint."""
    _text: _Text = NO_TEXT
    _is_stopped: bool = False
    _dying: tuple[int, ...] = ()
    # the keeper, the seconds since it was made, the sentences and texts it does not know yet
    _links: _Links | None = None
    _age: float = 0.0
    _untold: tuple[tuple[dict[str, Any], int], ...] = ()
    _known: frozenset[int] = frozenset()
    # the sentence that is watched
    _is_watched: bool = False
    _limit: MemoryLimit = MemoryLimit(0, None)
    _last_note: float = 0.0
    _reached: str = ""

    def __post_init__(self) -> None:
        super().__post_init__()
        self.uses = []
        place = self.folder
        self.folder = _NoticingFolder(
            place.root, place.allows_outside, place.output, self.uses)

    def serve(self) -> None:
        """Answer requests until there are no more."""
        text: _Text | None = None
        while True:
            try:
                if text is not None:
                    self._text = text
                    self._answer_text()
                # a tree that a keeper holds as well would be copied to be let go
                text, self._text = None, NO_TEXT
                if self._is_due():
                    # now, when nobody may be waiting, rather than with the next sentence
                    with contextlib.suppress(_NoProcess):
                        self._checkpoint()
                        self._touch()
                while self._dying and not select.select([REQUESTS], [], [], 0.05)[0]:
                    self._bury()
                request = receive(REQUESTS)
                if request is None:
                    return
                text = self._text_of(request)
            except _Restored as restored:
                text = restored.rest

    def _answer_text(self) -> None:
        """Run a text's sentences but for the first `skip`, and send a frame for each.

        A `begin` frame goes before each reply, a `state` frame behind the last.
        """
        request = self._text.request
        self.has_quit, self._is_stopped = False, request.get("is_over", False)
        self.n_sentences = request["after"]
        for place in range(request["skip"], len(self._text.chunks)):
            if self._is_stopped or self.has_quit:
                break
            status = self._answer_one(place)
            if status != "ok" and request["stops_at_first"]:
                break
        write_all(encoded({"state": asdict(self.state()), "id": request["id"]}), self.frames)

    def _text_of(self, request: dict[str, Any]) -> _Text:
        """A request with its text in sentences."""
        source = Source(request["say"], request["name"])
        self._text, self._is_stopped = _Text(request, source, ()), False
        started = time.monotonic()
        try:
            # long texts take their time, and nothing can be lost
            with self._interruptible():
                chunks = parse(source).chunks
        except _Stopped:
            first = Span(0, len(source.text.partition("\n")[0]))
            wrong = Chunk(first, None, (failure("stopped", first, "stopped").diagnostic,))
            chunks = (wrong,) * (request["skip"] + 1)
        self._age += time.monotonic() - started
        return _Text(request, source, chunks)

    def _answer_one(self, place: int) -> str:
        """Run one sentence, send what came of it, and tell its status."""
        source, chunk = self._text.source, self._text.chunks[place]
        line, column = source.position(chunk.span.start)
        write_all(encoded({"begin": {
            "sentence": self.n_sentences + 1, "line": line, "column": column,
            "source": source.slice(chunk.span).strip()[:MOST_SHOWN]}}), self.frames)
        started = time.monotonic()
        if self._must_stop():
            outcome = self._undone(source, chunk.span, failure("stopped", chunk.span, "stopped"))
            frame, status = self._frame(outcome), outcome.status
        elif chunk.sentence is None:
            outcome = self._run_chunk(source, chunk)
            frame, status = self._frame(outcome), outcome.status
        else:
            frame, status = self._run_watched(source, chunk, place)
        write_all(frame, self.frames)
        self._age += time.monotonic() - started
        if status != "error":
            self._untold = (*self._untold, (self._text.request, place))
        return status

    # with a keeper

    def _is_due(self) -> bool:
        """Whether there must be a new checkpoint before a sentence is watched."""
        return self._links is None or self._age > RENEWED_AFTER or bool(self.uses)

    def _checkpoint(self) -> None:
        """Go on as a child of this process, which is its keeper from here on.

        Raises _NoProcess, and in the keeper _Restored when that is to be the session again.
        """
        keeper, former = os.getpid(), self._links
        ends: list[int] = []
        try:
            ends += os.pipe()
            ends += os.pipe()
            child = os.fork()
        except OSError as error:
            for fd in ends:
                os.close(fd)
            raise _NoProcess(error.strerror) from error
        notes, their_notes, their_answers, answers = ends
        if child == 0:
            os.close(notes)
            os.close(answers)
            if former is not None:
                former.close()
            self._links = _Links(keeper, their_notes, their_answers)
            self._age, self._untold, self._dying = 0.0, (), ()
            self._known = frozenset((self._text.request["id"],))
            self.uses.clear()
            return
        os.close(their_notes)
        os.close(their_answers)
        if former is not None:
            with contextlib.suppress(BrokenPipeError):
                write_all(b"X", former.notes)
            former.close()
        self._links = None
        self._stand_by(child, notes, answers)

    def _touch(self) -> None:
        """Write to most memory that a sentence writes to, so that the next one copies less."""
        if select.select([REQUESTS], [], [], 0)[0]:
            return
        for outcome in Session(n=3).run_all(Source(ORDINARY.format(os.getpid()))):
            encoded({"reply": outcome.reply(is_digested=self.is_digested).to_data()})

    def _run_watched(self, source: Source, chunk: Chunk, place: int) -> tuple[bytes, str]:
        """Run one sentence under its limits while the keeper watches; its frame and status."""
        try:
            limit = self._begin(place)
        except _NoProcess as error:
            outcome = self._undone(source, chunk.span, failure(
                "over-budget", chunk.span,
                f"the system has no room for one more process ({error})",
                "ulimit -u   says how many it allows"))
            return self._frame(outcome), outcome.status
        assert self._links is not None
        if os.lseek(ERRORS, 0, os.SEEK_CUR):
            _forget_errors()
        started = time.monotonic()
        end_with_parent(self._links.keeper)
        limits = resource.getrlimit(resource.RLIMIT_AS)
        self._limit, self._last_note, self._reached, self._is_watched = limit, 0.0, "", True
        if limit.bound is not None:
            resource.setrlimit(resource.RLIMIT_AS, (limit.bound, limits[1]))
        outcome = self._run_chunk(source, chunk)
        try:
            frame = self._frame(outcome)
        except Exception as error:
            # a result that cannot be shown is as good as none, and the session holds it already
            self.n_sentences -= 1
            if isinstance(error, MemoryError):
                self._lift_limit()
                found = too_much_memory(limit, chunk.span, self._reached)
            else:
                found = failure(
                    "internal-error", chunk.span,
                    "the program failed here, and the fault is not yours; please report "
                    f"{type(error).__name__}: {str(error)[:200]}")
            self._give_up(self._frame(self._undone(source, chunk.span, found)))
        if outcome.status == "error" and (
            outcome.diagnostics[0].code in LEAVES_DEBRIS
            or time.monotonic() - started > RENEWED_AFTER
        ):
            self._give_up(frame)
        resource.setrlimit(resource.RLIMIT_AS, limits)
        self._is_watched = False
        outlive_parent()
        write_all(b"D", self._links.notes)
        if os.read(self._links.answers, 1) != b"G":
            os._exit(1)
        return frame, outcome.status

    def _begin(self, place: int) -> MemoryLimit:
        """Have a keeper watch a sentence from here on; what it may take. Raises _NoProcess."""
        while True:
            if self._is_due():
                try:
                    self._checkpoint()
                except _NoProcess:
                    # an old keeper has more to do again, but is better than none
                    if self._links is None or self.uses:
                        raise
            assert self._links is not None
            limit = self._memory_limit()
            sentences = (*self._untold, (self._text.request, place))
            requests = {request["id"]: request for request, _ in sentences}
            note = {
                "sentences": [(request["id"], place) for request, place in sentences],
                "requests": [r for number, r in requests.items() if number not in self._known],
                "after": self.n_sentences,
                "amount": limit.amount, "bound": limit.bound, "is_systems": limit.is_systems,
                "seconds": self.context.settings.seconds}
            try:
                write_all(b"B" + encoded(note), self._links.notes)
            except BrokenPipeError:
                # the keeper has ended, and a new one is made
                self._links.close()
                self._links = None
                continue
            self._untold, self._known = (), self._known | requests.keys()
            return limit

    def _give_up(self, frame: bytes) -> NoReturn:
        """Nothing has changed: the keeper is the better session, it holds no debris."""
        assert self._links is not None
        write_all(b"E" + frame, self._links.notes)
        os._exit(0)

    def guarded(self, sentence: syntax.Sentence, action: Callable[[], Any]) -> Any:
        """Carry `action` out with the clock left to the keeper, which needs no help to stop it."""
        if self.means.kept is not None:
            # cases that are finished are so for good
            self.uses.append(str(self.means.kept))
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
        """What is said about memory needs a little of it; this process ends soon."""
        if self._is_watched:
            hard = resource.getrlimit(resource.RLIMIT_AS)[1]
            resource.setrlimit(resource.RLIMIT_AS, (hard, hard))

    def _report(self, reached: str) -> None:
        """Tell what has been reached, a few times a second at most."""
        now = time.monotonic()
        if self._is_watched and self._links is not None and now - self._last_note > NOTES_APART:
            self._last_note = now
            self._reached = reached[:MOST_SHOWN]
            text = self._reached.encode()
            write_all(b"N" + HEADER.pack(len(text)) + text, self._links.notes)

    # as a keeper

    def _stand_by(self, child: int, notes: int, answers: int) -> NoReturn:
        """Watch the session until there is a new keeper, or this one must take its place."""
        texts = {self._text.request["id"]: self._text}
        since: list[tuple[int, int]] = []
        while True:
            mark = os.read(notes, 1)
            note = receive(notes) if mark == b"B" else None
            if note is None:
                # X: there is a new keeper; nothing: the session ended between two sentences
                os._exit(0)
            texts.update({
                request["id"]: _Text(request, Source(""), ()) for request in note["requests"]})
            *others, (number, place) = note["sentences"]
            since += others
            self._text, self._is_stopped = texts[number], False
            found = self._watch(child, note, notes, answers)
            if found is not None:
                break
        os.close(notes)
        os.close(answers)
        for key in {number, *(key for key, _ in since)}:
            request = texts[key].request
            if not texts[key].chunks:
                source = Source(request["say"], request["name"])
                texts[key] = _Text(request, source, parse(source).chunks)
        for key, k in since:
            if self._run_chunk(texts[key].source, texts[key].chunks[k]).status == "error":
                # it was no error before: the front end tells a new evaluator all of it
                os._exit(1)
        self._text = text = texts[number]
        self.n_sentences = note["after"]
        if isinstance(found, bytes):
            self.n_sentences += 1
            write_all(found, self.frames)
        else:
            span = text.chunks[place].span
            outcome = self._undone(text.source, span, found(span), note["elapsed"])
            write_all(self._frame(outcome), self.frames)
        rest = {
            **text.request, "skip": place + 1, "after": self.n_sentences,
            "is_over": self._is_stopped or text.request["stops_at_first"]}
        raise _Restored(replace(text, request=rest))

    def _watch(
        self, child: int, note: dict[str, Any], notes: int, answers: int
    ) -> Callable[[Span], Failure] | bytes | None:
        """Wait for the end of a sentence: None when all is well, else what is to be answered.

        That is a frame, or the failure for the sentence's place; `note` gets the time it took.
        """
        seconds = note["seconds"]
        started = time.monotonic()
        reached = ""
        while True:
            left = None if seconds is None else max(0.0, started + seconds - time.monotonic())
            ready, _, _ = select.select([notes, self.control], [], [], left)
            note["elapsed"] = time.monotonic() - started
            if self.control in ready and self._must_stop():
                return self._killed(child, "stopped", "stopped", reached)
            if notes in ready:
                mark = os.read(notes, 1)
                if mark == b"D":
                    if self._must_stop():
                        return self._killed(child, "stopped", "stopped", reached)
                    # from here on the sentence stands
                    with contextlib.suppress(BrokenPipeError):
                        write_all(b"G", answers)
                        return None
                    break
                told = _told(notes) if mark else None
                if told is None:
                    # cut in the middle: the session is no more
                    break
                if mark == b"E":
                    os.waitpid(child, 0)
                    return HEADER.pack(len(told)) + told
                reached = told.decode()
                write_all(encoded({"progress": reached}), self.frames)
            elif not ready:
                return self._killed(
                    child, "over-budget",
                    f"stopped after {seconds} second{'' if seconds == 1 else 's'}", reached,
                    f"fix seconds = {2 * (seconds or 1)}")
        _, status, usage = os.wait4(child, 0)
        gateway.stop_work()
        limit = MemoryLimit(note["amount"], note["bound"], note["is_systems"])
        words, most = _last_words(), usage.ru_maxrss * 1024
        return lambda span: crash(status, words, most, limit, span, reached)

    def _killed(
        self, child: int, code: str, message: str, reached: str, *hints: str
    ) -> Callable[[Span], Failure]:
        """End a session that has not been told to go on."""
        os.kill(child, signal.SIGKILL)
        gateway.stop_work()
        self._dying = (*self._dying, child)
        # some gigabytes take longer to give back than a prompt should wait
        until = time.monotonic() + BURIAL
        while self._bury() and time.monotonic() < until:
            time.sleep(0.002)
        return lambda span: failure(code, span, f"{message}{so_far(reached)}", *hints)

    def _bury(self) -> bool:
        """Whether killed children are still about."""
        left = []
        for process in self._dying:
            with contextlib.suppress(ChildProcessError):
                if os.waitpid(process, os.WNOHANG)[0] == 0:
                    left.append(process)
        self._dying = tuple(left)
        return bool(left)

    # outcomes and limits

    def _undone(
        self, source: Source, span: Span, found: Failure, seconds: float = 0.0
    ) -> Outcome:
        """The outcome of a sentence that left no trace."""
        self.n_sentences += 1
        return self._outcome(source, span, "error", None, None, (found.diagnostic,), seconds)

    def _frame(self, outcome: Outcome) -> bytes:
        wanted = bool(self._text.request["is_recorded"])
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
            if HEADER.unpack(asked)[0] == self._text.request["id"]:
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
    # a child of the process that stays, and held by those that come and go
    ends = gateway.start_ahead(given["means"].get("cluster"))
    if os.fork():
        _reap(control, *ends)
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


def _reap(*ends: int) -> NoReturn:
    """Wait for all that are or become children of this process, which holds no ends of pipes."""
    for fd in (*ends, REQUESTS, STANDARD_OUTPUT):
        os.close(fd)
    while True:
        try:
            os.wait()
        except ChildProcessError:
            os._exit(0)


if __name__ == "__main__":
    main()
