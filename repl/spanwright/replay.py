"""Runs a log again in a clean session and compares every result with what it records.

A difference is looked at twice: a recorded text that is another way of writing the value found now
is told apart from one that is another value.
"""

from __future__ import annotations

import difflib
import re
import tempfile
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from spanwright import journal
from spanwright.conversation import Conversation
from spanwright.files import Folder
from spanwright.headers import writer
from spanwright.log_format import Altered, Composer, Log, Record
from spanwright.replies import Reply
from spanwright.settings import Bounds
from spanwright_grammar import syntax
from spanwright_grammar.parsing import ParseFailure, parse, parse_expression
from spanwright_grammar.source import Source

AGREES = "agrees"
OTHER_FORM = "other form"
DIFFERS = "differs"
MISSING = "missing"
EXTRA = "extra"

FAULTS = (DIFFERS, MISSING, EXTRA)

@dataclass(frozen=True, slots=True)
class Check:
    """What became of one recorded result."""

    line: int
    last_line: int
    source: str
    verdict: str
    recorded: str = ""
    found: str = ""
    note: str = ""

    def to_data(self) -> dict[str, Any]:
        """As JSON holds it; the results only where they are not the same."""
        data: dict[str, Any] = {
            "line": self.line, "last_line": self.last_line, "source": self.source,
            "verdict": self.verdict}
        if self.verdict != AGREES:
            data.update(recorded=self.recorded, found=self.found)
        if self.note:
            data["note"] = self.note
        return data


@dataclass(frozen=True, slots=True)
class Replayed:
    """A log run again: its checks, and what is wrong with its text."""

    path: str
    checks: tuple[Check, ...]
    altered: tuple[Altered, ...] = ()
    torn: int | None = None
    written_by: str = ""
    renewed: str = ""

    def of(self, *verdicts: str) -> tuple[Check, ...]:
        """The checks with one of these verdicts."""
        return tuple(check for check in self.checks if check.verdict in verdicts)

    @property
    def agrees(self) -> bool:
        """Whether every result is the recorded one and no line was changed."""
        return not self.of(*FAULTS) and not self.altered

    def to_data(self) -> dict[str, Any]:
        """As JSON holds it."""
        counts = {v: len(self.of(v)) for v in (AGREES, OTHER_FORM, DIFFERS, MISSING, EXTRA)}
        return {
            "log": self.path, "agrees": self.agrees, "counts": counts,
            "altered": [[a.first, a.last] for a in self.altered], "torn": self.torn,
            "written_by": self.written_by,
            "checks": [check.to_data() for check in self.checks]}


@dataclass(frozen=True, slots=True)
class Options:
    """How a log is run again.

    `only` are the lines whose results are compared, all when None. `folder` is where its paths
    start, the log's own when None; `output` takes what it writes, a folder that is thrown away
    when None. No sentence of the log, nor of a script that it uses, lifts the `bounds`.
    """

    only: tuple[tuple[int, int], ...] | None = None
    bounds: Bounds = Bounds()
    folder: Path | None = None
    output: Path | None = None
    allows_outside: bool = False
    is_renewed: bool = False


Opening = Callable[[Folder, Bounds], Conversation]


def replay_file(path: Path, options: Options, opening: Opening) -> Replayed:
    """Run one log again; raises LogFailure when it cannot be read."""
    log = journal.read(path)
    root = options.folder or path.resolve().parent
    with tempfile.TemporaryDirectory(prefix="spanwright-") as thrown_away:
        output = options.output or Path(thrown_away)
        conversation = opening(Folder(root, options.allows_outside, output), options.bounds)
        try:
            return replay(log, str(path), options, conversation)
        finally:
            conversation.close()


def replay(log: Log, name: str, options: Options, conversation: Conversation) -> Replayed:
    """Run a log again in a fresh conversation, which keeps to the bounds itself."""
    rerun = Rerun(conversation, name)
    rerun.begin(log.settings)
    checks: list[Check] = []
    replies: dict[int, Reply] = {}
    last = None if options.only is None else max((b for _, b in options.only), default=0)
    for place, record in enumerate(log.records):
        if record.is_refused:
            continue
        if last is not None and record.line > last:
            break
        is_wanted = options.only is None or any(
            record.line <= b and record.last_line >= a for a, b in options.only)
        if not is_wanted and not record.changes_session:
            continue
        reply = rerun.say(record)
        replies[place] = reply
        if is_wanted or reply.status == "error":
            check = compared(record, reply, rerun, is_log=log.format is not None)
            if check is not None:
                checks.append(check)
    renewed = _renewed(log, replies) if options.is_renewed else ""
    return Replayed(name, tuple(checks), log.altered, log.torn, log.writer, renewed)


class Rerun:
    """A conversation in which recorded sentences are said again."""

    def __init__(self, conversation: Conversation, name: str = "<log>") -> None:
        self._conversation = conversation
        self._name = name

    def begin(self, settings: Iterable[str]) -> None:
        """Put the settings of a header in force."""
        for text in settings:
            sentences = parse(Source(text)).chunks
            # a header is a stranger's text: only `fix` is taken from it
            if len(sentences) == 1 and isinstance(sentences[0].sentence, syntax.Fix):
                for _ in self._conversation.say(text, self._name):
                    continue

    def say(self, record: Record) -> Reply:
        """Say a recorded sentence; its reply."""
        replies = list(self._conversation.say(record.text, self._name))
        if not replies:
            return Reply(0, record.line, 1, record.text, "error", "error", None, None, "", (),
                         ("this holds no sentence",), {}, 0.0)
        return replies[-1]

    def holds(self, claim: str) -> bool | None:
        """Whether a claim holds in the session as it is; None when it cannot be decided."""
        replies = list(self._conversation.say(claim, self._name))
        if len(replies) != 1 or replies[0].status == "error" or replies[0].kind != "truth":
            return None
        return replies[0].status == "ok"


# --- Comparing -----------------------------------------------------------------------------------


def compared(record: Record, reply: Reply, rerun: Rerun, *, is_log: bool) -> Check | None:
    """A recorded result against the one found now; None when nothing was recorded to compare."""
    seal = record.seal
    recorded, found = record.result_text, reply.text

    def check(verdict: str, note: str = "") -> Check:
        return Check(
            record.line, record.last_line, record.text, verdict, recorded, found, note)

    if reply.status == "error":
        found = "\n".join(reply.messages)
        is_recorded = bool(record.result) or seal is not None
        if not is_recorded and not is_log:
            return None if _is_told(record) else check(MISSING, _first_message(reply))
        return check(MISSING, _first_message(reply))
    if seal is None and not record.result:
        return check(EXTRA, "the log holds no result of this") if is_log and found else None
    if seal is not None and not seal.digest and not record.result:
        return check(AGREES)  # help and remarks have no result of their own
    if seal is not None and seal.tag != reply.tag:
        return check(DIFFERS, f"recorded as {_tag(seal.tag)}, now {_tag(reply.tag)}")
    same_text = _is_same_text(record, reply)
    has_digests = seal is not None and bool(seal.digest) and bool(reply.digest)
    if has_digests and seal is not None:
        if seal.digest == reply.digest and same_text:
            return check(AGREES)
    elif same_text:
        return check(AGREES)
    is_equal = None if record.is_cut else _is_equal(record, reply, rerun)
    if is_equal:
        return check(OTHER_FORM, "an equal value, written in another way")
    if has_digests and seal is not None and seal.digest == reply.digest:
        if is_equal is None and not same_text and record.is_cut:
            return check(DIFFERS, "the digest is right, the text is not its beginning")
        if is_equal is None and reply.kind in _LAID_OUT:
            return check(OTHER_FORM, "the same value by its digest, shown in another way")
        return check(DIFFERS, "the digest is right, the recorded text is another value")
    if record.is_cut:
        return check(DIFFERS, "the recorded text is cut, and its digest belongs to another value")
    if same_text:
        return check(DIFFERS, "the text is the same, the recorded digest is not that of the value")
    return check(DIFFERS)


_LAID_OUT = ("table", "list", "operator", "definition")
"""Kinds whose text may change its layout and still mean the same."""


def _is_told(record: Record) -> bool:
    return record.sentence is not None and isinstance(record.sentence, syntax.Help)


def _first_message(reply: Reply) -> str:
    return reply.messages[0].split("\n")[0] if reply.messages else "an error"


def _tag(tag: int | None) -> str:
    return "untagged" if tag is None else f"({tag})"


def plain(text: str, *, drops_comments: bool = False) -> str:
    """A result on one line with single blanks, for comparing."""
    if drops_comments:
        # how a claim was decided is prose; a script's own remarks behind a result are too
        text = "\n".join(line.split("#")[0] for line in text.split("\n"))
    return " ".join(text.split())


def _is_same_text(record: Record, reply: Reply) -> bool:
    drops = reply.kind == "truth" or record.seal is None
    recorded, found = plain(record.result_text, drops_comments=drops), plain(
        reply.text, drops_comments=drops)
    if record.is_cut:
        return found.startswith(recorded)
    return recorded == found


def _is_equal(record: Record, reply: Reply, rerun: Rerun) -> bool | None:
    """Whether the recorded text is another form of the value found; None when undecidable."""
    text = plain(record.result_text, drops_comments=True)
    if reply.tag is not None:
        target = f"eq_{reply.tag}"
    elif isinstance(record.sentence, syntax.LetValue):
        target = record.sentence.name
        head, _, text = text.partition("=")
        if head.strip() != target:
            return None
    else:
        return None
    try:
        parse_expression(text)
    except ParseFailure:
        return None
    return rerun.holds(f"claim ({text}) = {target}")


# --- Showing a difference, renewing a log --------------------------------------------------------


def side_by_side(recorded: str, found: str, width: int = 100) -> list[str]:
    """Two results in two columns, term by term; equal stretches are counted, not shown."""
    half = max(20, (width - 5) // 2)
    left, right = _pieces(recorded), _pieces(found)
    rows = [f"{'recorded':<{half}}   found now", f"{'-' * half}   {'-' * half}"]
    matcher = difflib.SequenceMatcher(None, left, right, autojunk=False)
    if max(len(left), len(right)) > 2_000:  # aligning takes the square of it
        matcher = difflib.SequenceMatcher(None, left[:2_000], right[:2_000], autojunk=False)
    for kind, a, b, c, d in matcher.get_opcodes():
        if kind == "equal":
            count = b - a
            rows.append(f"… {count:,} equal {'piece' if count == 1 else 'pieces'} …")
            continue
        lefts = [line for piece in left[a:b] for line in _folded(piece, half)]
        rights = [line for piece in right[c:d] for line in _folded(piece, half)]
        for k in range(max(len(lefts), len(rights))):
            one = lefts[k] if k < len(lefts) else ""
            two = rights[k] if k < len(rights) else ""
            rows.append(f"{one:<{half}} | {two}".rstrip())
    return rows


def _pieces(text: str) -> list[str]:
    """A sum, wrapped or not, by its terms; anything else by its lines."""
    lines = [line for line in text.split("\n") if line.strip()]
    is_sum = all(line.endswith((" +", " -")) for line in lines[:-1])
    return _terms(plain(text)) if lines and is_sum else lines


def _terms(text: str) -> list[str]:
    """A sum parted before its signs, not before those in brackets."""
    terms: list[str] = []
    depth = start = 0
    for place, c in enumerate(text):
        depth += (c == "(") - (c == ")")
        if depth == 0 and c == " " and text[place + 1:place + 3] in ("+ ", "- "):
            terms.append(text[start:place])
            start = place + 1
    return [*terms, text[start:]]


def _folded(text: str, width: int) -> list[str]:
    return [text[k:k + width] for k in range(0, len(text), width)] or [""]


def _renewed(log: Log, replies: dict[int, Reply]) -> str:
    """The log with the results found now, written by this version."""
    composer = Composer()
    parts = [composer.header(writer(), log.settings)]
    for place, record in enumerate(log.records):
        parts.append(composer.prose([f"# {line}".rstrip() for line in record.prose]))
        reply = replies.get(place)
        if reply is None:
            said = tuple(line.removeprefix("# ") for line in record.result)
            is_quit = record.text.strip() == "quit"
            reply = Reply(0, record.line, 1, record.text, "error", "error", None, None, "", (),
                          said, {}, 0.0, is_quit)
        parts.append(composer.record(record.text, reply, record.sentence))
    parts.append(composer.prose([f"# {line}".rstrip() for line in log.closing_prose]))
    if log.is_closed:
        parts.append(composer.closing())
    return "".join(parts)


# --- Bringing a session back ---------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Resumed:
    """A session brought back: the journal to go on in, and what came out differently."""

    journal: journal.Journal
    n_said: int
    differences: tuple[Check, ...]
    altered: tuple[Altered, ...]
    set_aside: Path | None


def resume(
    path: Path, conversation: Conversation,
    on_record: Callable[[int, int], None] | None = None,
) -> Resumed:
    """Bring a session back from its log, leaving out what changes nothing; go on in the log.

    `on_record` is told how many of how many sentences have been said. Raises LogFailure when the
    log cannot be read, or is being written by another session.
    """
    opened, log, aside = journal.Journal.reopen(path)
    try:
        rerun = Rerun(conversation, name=str(path))
        rerun.begin(log.settings)
        wanted = [record for record in log.records if record.changes_session]
        differences: list[Check] = []
        for k, record in enumerate(wanted, 1):
            check = compared(record, rerun.say(record), rerun, is_log=True)
            if check is not None and check.verdict in FAULTS:
                differences.append(check)
            if on_record is not None:
                on_record(k, len(wanted))
    except BaseException:
        opened.let_go()
        raise
    return Resumed(opened, len(wanted), tuple(differences), log.altered, aside)


def lines_of(text: str) -> tuple[tuple[int, int], ...]:
    """`12-30,45` as pairs of lines; raises ValueError with what is right.

    >>> lines_of("12-30,45")
    ((12, 30), (45, 45))
    """
    found = []
    for piece in text.split(","):
        match = re.fullmatch(r"\s*(\d{1,9})(?:\s*-\s*(\d{1,9}))?\s*", piece)
        if match is None:
            raise ValueError(f"lines are written 12 or 12-30, joined by commas; this is {piece!r}")
        first = int(match.group(1))
        last = int(match.group(2) or first)
        if first < 1 or last < first:
            raise ValueError(f"lines go from 1 upwards; this is {piece.strip()}")
        found.append((first, last))
    return tuple(found)


def checks_in_order(replayed: Replayed) -> Iterator[Check]:
    """What does not agree, the first first."""
    yield from sorted(replayed.of(*FAULTS, OTHER_FORM), key=lambda check: check.line)
