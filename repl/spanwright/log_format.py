"""What a log looks like: records as text, and text as records; opens no file.

A log is a script. Results stand in `#=` lines that read back when `#= ` is taken off, and the last
line of every record is its seal: the tag, the kind, the digest of the exact value, and a checksum
of every byte since the seal before. What was typed and not carried out stands behind `#!`.

    # Spanwright log, format 1
    # written by spanwright 0.1.0, python-flint 0.9.0, lark 1.3.1
    # settings: fix n = 3; fix seed = 1
    #= # header, check 51ab09e3

    x_1 E_(0,1)
    #= E_(1,1)
    #= # (1), expansion, digest 0f3a9c1b7d22, check 8a01b2c4
"""

from __future__ import annotations

import re
import zlib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from spanwright.log_marks import CLOSED, FIRST, FORMAT, HEADER, SEAL
from spanwright.replies import Reply
from spanwright_grammar import syntax
from spanwright_grammar.parsing import Comment, parse
from spanwright_grammar.source import Source

WIDTH = 96
"""Columns of a result, so that a log reads well beside an editor's margin."""

SHOWN_LINES = 40
SHOWN_CHARACTERS = 6_000
"""A longer result is cut in the text; its digest still covers all of it."""

SHOWN_MESSAGE = 2_000

_SETTINGS = re.compile(r"# settings: (.*)$")
_WRITER = re.compile(r"# written by (.*)$")
_TAG = re.compile(r"\((\d{1,12})\)$")
_DIGEST = re.compile(r"digest ([0-9a-f]{4,64})$")
_CUT = re.compile(r"([\d,]+) of ([\d,]+) (terms|lines)$")

REFUSED = "not carried out"
LEFT = "left"

UNCHANGING = (
    syntax.Claim, syntax.Derive, syntax.Draw, syntax.Help, syntax.Quit, syntax.Recall,
    syntax.Remark, syntax.Show, syntax.Tabulate, syntax.Write,
)
"""Sentences after which a session is as before: bringing one back can leave them out."""


@dataclass(frozen=True, slots=True)
class Seal:
    """The last line of a record: what the result is, and the digest of its exact value."""

    tag: int | None = None
    kind: str = ""
    digest: str = ""
    cut: str = ""
    check: str = ""


@dataclass(frozen=True, slots=True)
class Record:
    """One input with what came of it; lines count from 1.

    `result` are the lines behind `#= `, the seal left out. `is_refused` marks an input that was
    not carried out, `seal` is None in a script without digests.
    """

    text: str
    sentence: syntax.Sentence | None
    line: int
    last_line: int
    result: tuple[str, ...]
    seal: Seal | None
    is_refused: bool = False
    prose: tuple[str, ...] = ()

    @property
    def result_text(self) -> str:
        """The recorded result as it was shown."""
        return "\n".join(self.result)

    @property
    def is_cut(self) -> bool:
        """Whether the text holds the beginning of the result only."""
        return self.seal is not None and bool(self.seal.cut)

    @property
    def changes_session(self) -> bool:
        """Whether later sentences may depend on this one."""
        has_tag = self.seal is not None and self.seal.tag is not None
        return not self.is_refused and (has_tag or not isinstance(self.sentence, UNCHANGING))


@dataclass(frozen=True, slots=True)
class Altered:
    """Lines that are not as they were written."""

    first: int
    last: int


@dataclass(frozen=True, slots=True)
class Log:
    """A log, or a script, read; `format` is None for a script without a header.

    `torn` is the number of the first line that belongs to no whole record, None when all do;
    `whole` is the text before it.
    """

    source: Source
    format: int | None
    writer: str
    settings: tuple[str, ...]
    records: tuple[Record, ...]
    altered: tuple[Altered, ...]
    torn: int | None
    whole: str
    is_closed: bool
    closing_prose: tuple[str, ...] = ()


# --- Writing -------------------------------------------------------------------------------------


class Composer:
    """Records as text, with the checksum that runs over everything since the last seal."""

    def __init__(self, pending: str = "") -> None:
        self._sum = zlib.crc32(pending.encode("utf-8"))

    def header(self, writer: str, settings: Iterable[str]) -> str:
        """The first lines of a log."""
        text = (
            f"# Spanwright log, format {FORMAT}\n"
            f"# written by {writer}\n"
            f"# settings: {'; '.join(settings)}\n"
            "# a script: results stand behind #=, and `spanwright replay` checks them\n")
        return self._sealed(text, [HEADER])

    def closing(self) -> str:
        """The line that tells that a session was left, not lost."""
        return self._sealed("\n", [CLOSED])

    def prose(self, comments: Sequence[str]) -> str:
        """Remarks of the user, as comment lines."""
        text = "".join(f"{_without_marks(line)}\n" for line in comments)
        return self._counted("\n" + text if text else "")

    def record(
        self, text: str, reply: Reply, sentence: syntax.Sentence | None, behind: str = ""
    ) -> str:
        """An input and its result; `behind` is a comment on the input's last line."""
        if reply.status == "error" or reply.is_quit or sentence is None:
            # a script ends at `quit`, and this one may go on
            return self._refused(text, reply)
        shown = _without_marks(text) + (f"   {behind}" if behind else "")
        lines, cut = _result_lines(reply, sentence)
        facts = [f"({reply.tag})"] if reply.tag is not None else []
        facts += [reply.kind]
        facts += [cut] if cut else []
        if reply.digest and _is_compared(sentence):
            facts.append(f"digest {reply.digest}")
        body = "".join(_marked(line) + "\n" for line in lines)
        return self._sealed(f"\n{shown}\n{body}", facts)

    def _refused(self, text: str, reply: Reply) -> str:
        typed = "".join(f"#! {line}\n" for line in _clipped(_clean(text)).split("\n"))
        said = "\n".join(reply.messages)
        body = "".join(
            _marked(f"# {line}") + "\n" for line in _clipped(said).split("\n") if line.strip())
        return self._sealed(f"\n{typed}{body}", [LEFT if reply.is_quit else REFUSED])

    def _sealed(self, text: str, facts: Sequence[str]) -> str:
        body = _clean(text) + f"#= # {', '.join(facts)}, check "
        check = zlib.crc32(body.encode("utf-8"), self._sum)
        self._sum = 0
        return f"{body}{check:08x}\n"

    def _counted(self, text: str) -> str:
        clean = _clean(text)
        self._sum = zlib.crc32(clean.encode("utf-8"), self._sum)
        return clean


def _is_compared(sentence: syntax.Sentence) -> bool:
    """Whether the result is a matter of mathematics, not of the program's prose."""
    return not isinstance(sentence, syntax.Help | syntax.Remark | syntax.Quit)


def _result_lines(reply: Reply, sentence: syntax.Sentence) -> tuple[list[str], str]:
    """The lines of a result, and what was left out when it is long."""
    from spanwright.rendering.wrapping import wrapped

    if not _is_compared(sentence):
        return [], ""
    if not reply.terms:
        lines = reply.text.split("\n") if reply.text else []
        kept = _kept(lines)
        if len(kept) == len(lines):
            return lines, ""
        return kept, f"{len(kept):,} of {len(lines):,} lines"
    lines = wrapped(reply.terms, WIDTH)
    if len(lines) <= SHOWN_LINES and sum(map(len, lines)) <= SHOWN_CHARACTERS:
        return lines, ""
    terms = _kept(list(reply.terms))
    while terms and len(wrapped(terms, WIDTH)) > SHOWN_LINES:
        terms.pop()
    return wrapped(terms, WIDTH), f"{len(terms):,} of {len(reply.terms):,} terms"


def _kept(pieces: list[str]) -> list[str]:
    """The first pieces, as many as a log shows."""
    size = 0
    for place, piece in enumerate(pieces):
        size += len(piece) + 1
        if size > SHOWN_CHARACTERS or (place >= SHOWN_LINES * 8):
            return pieces[:place]
    return pieces


def _clipped(text: str) -> str:
    return text if len(text) <= SHOWN_MESSAGE else text[:SHOWN_MESSAGE] + " …"


def _clean(text: str) -> str:
    """Text with one kind of line end, that can be written as UTF-8."""
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    return text.encode("utf-8", "replace").decode("utf-8")


_MARK_INSIDE = re.compile(r"(?m)^([ \t]*)#([=!])")


def _without_marks(text: str) -> str:
    """An input in which no line of its own looks like a result."""
    return _MARK_INSIDE.sub(r"\1# \2", text)


def _marked(line: str) -> str:
    """A line of a result; one that looks like a seal is moved to the right."""
    line = line.replace("\r", " ").rstrip()
    marked = f"#= {line}".rstrip()
    return f"#=  {line}" if SEAL.match(marked) else marked


# --- Reading -------------------------------------------------------------------------------------


@dataclass(slots=True)
class _Open:
    """A record that is being read."""

    text: str
    sentence: syntax.Sentence | None
    line: int
    last_line: int
    is_refused: bool
    prose: tuple[str, ...]
    result: list[str]
    seal: Seal | None = None

    def closed(self) -> Record:
        return Record(
            self.text, self.sentence, self.line, self.last_line, tuple(self.result), self.seal,
            self.is_refused, self.prose)


def read_log(text: str, name: str = "<log>") -> Log:
    """A log, or a script with recorded results, as records; never raises on any text."""
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    lines = text.split("\n")
    first = FIRST.match(lines[0])
    found_format = int(first.group(1)) if first else None
    whole, altered = _checked(lines) if first else (text, [])
    source = Source(whole, name)
    torn = None
    if first and len(whole) < len(text):
        torn = whole.count("\n") + 1
    records, closing_prose, is_closed = _records(source, has_header=first is not None)
    return Log(
        source, found_format, _in_header(lines, _WRITER),
        tuple(s.strip() for s in _in_header(lines, _SETTINGS).split(";") if s.strip()),
        records, tuple(altered), torn, whole, is_closed, closing_prose)


def _in_header(lines: list[str], pattern: re.Pattern[str]) -> str:
    for line in lines[:6]:
        found = pattern.match(line)
        if found:
            return found.group(1)
    return ""


def _checked(lines: list[str]) -> tuple[str, list[Altered]]:
    """The text up to its last whole record, and the stretches whose checksum is wrong."""
    altered: list[Altered] = []
    start = end = 0
    for place, line in enumerate(lines):
        seal = SEAL.match(line)
        if seal is None:
            continue
        is_last = place == len(lines) - 1  # no line end behind it
        body = "\n".join([*lines[start:place], line[:-8]])
        if f"{zlib.crc32(body.encode('utf-8')):08x}" != seal.group(2):
            first = next((k for k in range(start, place) if lines[k].strip()), place)
            altered.append(Altered(first + 1, place + 1))
        start = end = place + 1
        if is_last:
            return "\n".join(lines), altered
    tail = lines[end:]
    if len(tail) > 1 and tail[-1] == "" and _was_seal(tail[-2]):
        # whole, but a character of its seal has changed: no torn record ends like this
        first = next((k for k in range(start, len(lines)) if lines[k].strip()), start)
        altered.append(Altered(first + 1, len(lines) - 1))
        return "\n".join(lines), altered
    is_prose = tail[-1] == "" and all(
        not line.strip() or (line.startswith("#") and line[1:2] not in ("=", "!"))
        for line in tail)
    kept = lines if is_prose else [*lines[:end], ""]
    return "\n".join(kept), altered


_SEAL_FRAME = "#= # check "


def _was_seal(line: str) -> bool:
    """Whether a line is a seal in which a character or two have been changed."""
    if len(line) < 19:
        return False
    frame = line[:5] + line[-14:-8]
    n_right = sum(a == b for a, b in zip(frame, _SEAL_FRAME)) + sum(
        c in "0123456789abcdef" for c in line[-8:])
    return n_right >= 17


def _records(
    source: Source, *, has_header: bool
) -> tuple[tuple[Record, ...], tuple[str, ...], bool]:
    parsed = parse(source)
    inside = [chunk.span for chunk in parsed.chunks]
    events: list[tuple[int, int, Comment | None, int]] = [
        (span.start, 0, None, k) for k, span in enumerate(inside)]
    place = 0
    for found in parsed.comments:
        while place < len(inside) and inside[place].end <= found.span.start:
            place += 1
        if place < len(inside) and inside[place].start < found.span.start:
            continue  # part of an input
        events.append((found.span.start, 1, found, -1))
    events.sort(key=lambda event: event[:2])

    records: list[_Open] = []
    current: _Open | None = None
    prose: list[str] = []
    is_closed = False
    in_header = has_header
    for start, _, comment, k in events:
        line = source.position(start)[0]
        if comment is None:
            chunk = parsed.chunks[k]
            last = source.position(max(chunk.span.end - 1, start))[0]
            current = _Open(
                source.slice(chunk.span), chunk.sentence, line, last, False, tuple(prose), [])
            records.append(current)
            prose, is_closed, in_header = [], False, False
        elif comment.is_result:
            seal = _seal_of(source.slice(comment.span))
            if seal is not None:
                if seal.kind == HEADER:
                    in_header, prose = False, []
                elif seal.kind == CLOSED:
                    is_closed = True
                elif current is not None:
                    current.seal, current.last_line = seal, line
                current = None
            elif current is not None:
                current.result.append(comment.text)
                current.last_line = line
        elif (typed := source.slice(comment.span)).startswith("#!"):
            shown = typed[2:].removeprefix(" ")
            if current is not None and current.is_refused and not current.result:
                current.text += f"\n{shown}"
                current.last_line = line
            else:
                current = _Open(shown, None, line, line, True, tuple(prose), [])
                records.append(current)
                prose, is_closed = [], False
        elif current is not None and current.last_line == line and not current.result:
            current.text += f"   {typed}"  # a remark behind a sentence
        elif not in_header:
            prose.append(typed[1:].strip())
    return tuple(record.closed() for record in records), tuple(prose), is_closed


def _seal_of(line: str) -> Seal | None:
    found = SEAL.match(line)
    if found is None:
        return None
    tag: int | None = None
    kind = digest = cut = ""
    for fact in _facts(found.group(1)):
        if match := _TAG.match(fact):
            tag = int(match.group(1))
        elif match := _DIGEST.match(fact):
            digest = match.group(1)
        elif _CUT.match(fact):
            cut = fact
        else:
            kind = fact
    return Seal(tag, kind, digest, cut, found.group(2))


def _facts(text: str) -> list[str]:
    # not at the comma of 1,205
    return [fact.strip() for fact in re.split(r",\s", text) if fact.strip()]
