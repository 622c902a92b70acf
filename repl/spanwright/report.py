"""A log as a document: reads what was recorded back to values, runs nothing of it again."""

from __future__ import annotations

import re
import shlex
import time
from dataclasses import replace
from pathlib import Path
from typing import Any

from spanwright import drawing
from spanwright.context import Context, Failure
from spanwright.evaluator import Evaluator
from spanwright.kernel import budget
from spanwright.kernel.errors import KernelError
from spanwright.kernel.families.registry import NAMES as FAMILY_NAMES
from spanwright.log_format import Log, Record
from spanwright.rendering.article import article
from spanwright.rendering.document import Cell, Document, Entry, Grid
from spanwright.rendering.html import html_page
from spanwright.rendering.markdown import markdown
from spanwright.settings import LARGEST_N, WORDS, Settings
from spanwright.values import ListValue, Truth, is_element, is_index, is_operator
from spanwright_grammar import syntax
from spanwright_grammar.parsing import ParseFailure, parse, parse_expression, tokens
from spanwright_grammar.source import Source

FORMS = {".html": html_page, ".htm": html_page, ".tex": article, ".md": markdown}
"""How a report is set, by the ending of its file."""

SECONDS_A_VALUE = 5.0
TERMS_A_VALUE = 100_000
LONGEST_VALUE = 60_000
"""A recorded text beyond these is shown as text: reading it back would take too long."""


def document(
    log: Log, name: str, title: str = ""
) -> Document:
    """The document of a log."""
    reader = _Values()
    reader.settle(log.settings)
    entries = []
    for record in log.records:
        entry = _entry(record, reader)
        entries.append(entry)
        reader.follow(record, entry)
    n_results = sum(1 for entry in entries if entry.tag is not None)
    facts = []
    if log.writer:
        facts.append(("written by", log.writer))
    if log.format is not None:
        facts.append(("log format", str(log.format)))
    facts.append(("inputs", f"{len(entries):,}, {n_results:,} of them with a tagged result"))
    if log.altered:
        places = ", ".join(f"{a.first}-{a.last}" for a in log.altered)
        facts.append(("altered", f"lines {places} are not as they were written"))
    if log.torn is not None:
        facts.append(("torn", f"the last record, from line {log.torn}, is left out"))
    tags: dict[int, int] = {}
    for entry in entries:
        if entry.tag is not None:
            tags.setdefault(entry.tag, entry.line)
    return Document(
        title or Path(name).stem, Path(name).name, tuple(facts),
        f"spanwright replay {shlex.quote(Path(name).name)}", tuple(entries), log.closing_prose,
        log.source.text, tags)


def written(log: Log, name: str, ending: str, title: str = "") -> str:
    """The report of a log as the text of a file with this ending; raises KeyError for others."""
    return FORMS[ending](document(log, name, title))


def _entry(record: Record, reader: _Values) -> Entry:
    seal = record.seal
    if record.is_refused:
        if record.text.strip() == "quit":
            return Entry(record.line, record.prose)
        said = "\n".join(line.removeprefix("# ") for line in record.result)
        return Entry(record.line, record.prose, _code(record.text), "refused", text=said)
    if isinstance(record.sentence, syntax.Remark):
        return Entry(record.line, (*record.prose, record.sentence.text))
    text = record.result_text
    entry = Entry(
        record.line, record.prose, _code(record.text), "ok",
        seal.tag if seal else None, seal.kind if seal else "", text,
        cut=seal.cut if seal else "", digest=seal.digest if seal else "")
    if isinstance(record.sentence, syntax.Draw):
        return replace(entry, picture=reader.picture(record.sentence))
    if isinstance(record.sentence, syntax.Show | syntax.Recall | syntax.Write):
        return entry
    grid = _grid(record.result, reader)
    if grid is not None:
        return replace(entry, grid=grid)
    name, content = "", text
    if isinstance(record.sentence, syntax.LetValue):
        name, equals, content = text.partition("=")
        name = name.strip()
        if not equals or name != record.sentence.name:
            return entry
    value = reader.read(content)
    if value is None:
        return entry
    status = "fails" if isinstance(value, Truth) and not value.holds else "ok"
    return replace(
        entry, value=value, name=name, status=status, text=_on_one_line(text),
        notes=_notes(text) if isinstance(value, Truth) else ())


def _notes(text: str) -> tuple[str, ...]:
    """What stands behind `#` with a truth: how sure it is; the difference is set as a formula."""
    found = [line.partition("#")[2].strip() for line in text.split("\n")]
    return tuple(line for line in found if line and not line.startswith("left - right ="))


def _on_one_line(text: str) -> str:
    return " ".join(text.split())


def _code(text: str) -> tuple[tuple[str, str], ...]:
    """An input in coloured pieces."""
    pieces: list[tuple[str, str]] = []
    place = 0
    for token in tokens(text):
        if token.start > place:
            pieces.append(("", text[place:token.start]))
        pieces.append((token.kind, text[token.start:token.end]))
        place = token.end
    if place < len(text):
        pieces.append(("", text[place:]))
    return tuple(pieces)


# --- Tables --------------------------------------------------------------------------------------

_RULE = re.compile(r"-+(?:  -+)*$")


def _grid(lines: tuple[str, ...], reader: _Values) -> Grid | None:
    """A recorded table back in cells, by the rule below its heads; None for other results."""
    at = next((k for k, line in enumerate(lines) if _RULE.fullmatch(line) and k), None)
    if at is None:
        return None
    spans = [(m.start(), m.end()) for m in re.finditer("-+", lines[at])]
    ends = [b for a, b in spans[1:]]
    starts = [a for a, _ in spans]

    def cells(line: str) -> tuple[str, ...]:
        cuts = [*starts, len(line) + 1]
        return tuple(line[a:b].strip() for a, b in zip(cuts, cuts[1:], strict=False))

    rows: list[tuple[Cell, ...]] = []
    notes: list[str] = []
    width = spans[-1][1]
    for line in lines[at + 1:]:
        is_row = len(line) <= width and all(
            a < 2 or line[a - 2:a].strip() == "" for a in starts[1:])
        if is_row and not notes:
            rows.append(tuple(reader.cell(c) for c in cells(line)))
        else:
            notes.append(line.removeprefix("# "))
    if not ends and not rows:
        return None
    return Grid(cells(lines[at - 1]), tuple(rows), "\n".join(lines[:at - 1]), tuple(notes))


# --- Values --------------------------------------------------------------------------------------

_NODES = (
    syntax.Sum, syntax.Term, syntax.Product, syntax.Factor, syntax.Power, syntax.Group,
    syntax.Subscripted, syntax.Tuple, syntax.Name, syntax.Number, syntax.Alphabets,
)
_TRUTHS = {"holds": True, "fails": False}


class _Values:
    """Reads recorded results back: canonical text only, in the ring that the log has reached."""

    def __init__(self) -> None:
        self._settings = Settings()
        self._parameters: tuple[str, ...] = ()
        self._known: dict[tuple[str, Settings], Any] = {}
        self._names: dict[str, Any] = {}
        self._results: dict[int, Any] = {}

    def settle(self, settings: tuple[str, ...]) -> None:
        """Take over the settings of a header."""
        for text in settings:
            for sentence in parse(Source(text)).sentences:
                self._fix(sentence)

    def follow(self, record: Record, entry: Entry) -> None:
        """Take over what a sentence changes of the ring, and what it names."""
        node = record.sentence
        self._fix(node)
        if entry.value is not None and entry.name and not entry.cut:
            self._names[entry.name] = entry.value
        if entry.value is not None and entry.tag is not None and not entry.cut:
            self._results[entry.tag] = entry.value
        if isinstance(node, syntax.LetParameters):
            self._parameters = tuple(dict.fromkeys((*self._parameters, *node.names)))
            self._known.clear()

    def _fix(self, node: syntax.Node | None) -> None:
        if not isinstance(node, syntax.Fix):
            return
        value = node.value
        if node.setting == "n" and isinstance(value, syntax.Number) and len(value.digits) < 4:
            n = int(value.digits)
            if 1 <= n <= LARGEST_N:
                self._settings = self._settings.changed(n=n)
        elif (
            node.setting in ("convention", "hecke") and isinstance(value, syntax.Name)
            and value.name in WORDS[node.setting]
        ):
            self._settings = self._settings.changed(**{node.setting: value.name})

    def read(self, text: str) -> Any:
        """The value of a recorded text, None when it is none that can be set as mathematics."""
        lines = [line.strip() for line in text.split("\n")]
        bare = " ".join(line.split(" #")[0] for line in lines if not line.startswith("#")).strip()
        if bare in _TRUTHS:
            return Truth(_TRUTHS[bare], self._difference(lines))
        if not bare or len(bare) > LONGEST_VALUE:
            return None
        key = (bare, self._settings)
        if key not in self._known:
            self._known[key] = self._value(bare)
        return self._known[key]

    def cell(self, text: str) -> Cell:
        """A place in a table; a product written with `·` keeps its factors."""
        pieces = text.split(" · ")
        if len(pieces) == 1:
            return Cell(text, self.read(text))
        factors = tuple(self.read(piece) for piece in pieces)
        return Cell(text, factors=() if None in factors else factors)

    def _difference(self, lines: list[str]) -> Any:
        head = "# left - right ="
        found = next((line for line in lines if line.startswith(head)), "")
        return self.read(found[len(head):]) if found else None

    def _value(self, text: str) -> Any:
        try:
            tree = parse_expression(text)
        except ParseFailure:
            return None
        if isinstance(tree, syntax.Call) and tree.function == "list":
            items = [self._of_tree(item) for item in tree.arguments]
            return None if None in items else ListValue(tuple(items))
        return self._of_tree(tree)

    def _of_tree(self, tree: syntax.Expression) -> Any:
        if not is_canonical(tree):
            return None
        value = self._evaluated(tree)
        is_shown = is_element(value) or is_operator(value) or is_index(value)
        return value if is_shown else None

    def picture(self, node: syntax.Draw) -> str:
        """The picture that a sentence drew, as SVG, drawn anew from recorded values; else nothing.

        Only what needs no computing is drawn.
        """
        subject = node.expression
        head = ""
        if isinstance(subject, syntax.Subscripted) and subject.head in FAMILY_NAMES:
            head, subject = subject.head, subject.index
        if not is_canonical(subject):
            return ""
        value = self._evaluated(subject)
        try:
            return "" if value is None else drawing.as_svg(drawing.picture(value, head))
        except drawing.NotDrawable:
            return ""

    def _evaluated(self, tree: syntax.Expression) -> Any:
        """The value of a canonical text, None when it has none or takes too long."""
        context = Context(
            settings=self._settings, parameters=self._parameters, names=self._names,
            results=self._results)
        until = time.monotonic() + SECONDS_A_VALUE
        limit = budget.Budget(
            lambda: "too long" if time.monotonic() > until else None, TERMS_A_VALUE)
        try:
            with budget.using(limit):
                return Evaluator(context).value(tree)
        except (Failure, KernelError, RecursionError):
            return None


def is_canonical(tree: syntax.Expression) -> bool:
    """Whether a text needs no computing: no product of two basis elements, no power of a sum.

    A log is a stranger's text; what it records as a result may not start a computation.
    """
    for node in syntax.walk(tree):
        if not isinstance(node, _NODES):
            return False
        if isinstance(node, syntax.Product):
            if sum(_holds_element(factor.node) for factor in node.factors) > 1:
                return False
        elif isinstance(node, syntax.Power) and (
            _holds_element(node.base) or not _is_small(node.exponent)
        ):
            return False
    return True


def _is_small(node: syntax.Expression) -> bool:
    """Whether an exponent is a number of at most four digits."""
    return all(
        not isinstance(part, syntax.Number) or len(part.digits) <= 4 for part in syntax.walk(node))


def _holds_element(node: syntax.Expression) -> bool:
    return any(
        isinstance(part, syntax.Subscripted) and part.head in FAMILY_NAMES
        and not _is_letter(part) for part in syntax.walk(node))


def _is_letter(node: syntax.Subscripted) -> bool:
    """Whether `s_1` and its like are reflections, not basis elements."""
    return node.head == "s" and isinstance(node.index, syntax.Number)
