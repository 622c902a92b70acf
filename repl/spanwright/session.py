"""The only mutable state: a session runs sentences one after another and keeps what they leave.

A failing sentence leaves everything as it was. Outcomes carry live values; `Outcome.reply()` is
the same as plain data, which is all that shell, server and command line ever see.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from spanwright import means
from spanwright.context import Context, Failure, Function, failure
from spanwright.files import FileRefused, Folder
from spanwright.kernel import budget
from spanwright.reading import NoValue, value_from_json
from spanwright.rendering.digest import digest
from spanwright.rendering.json import data, kind_of
from spanwright.rendering.layout import note, term_lines
from spanwright.rendering.text import text
from spanwright.replies import Reply, State
from spanwright.sentences import Step, Surface, carry_out
from spanwright.settings import LARGEST_N, Bounds, Settings
from spanwright.values import Text, kind_name
from spanwright.views import View
from spanwright_grammar import syntax
from spanwright_grammar.diagnostics import Diagnostic, format_diagnostic
from spanwright_grammar.parsing import Chunk, parse
from spanwright_grammar.source import Source, Span

# nested brackets, functions and sums need a few Python frames each; the parser bounds them
RECURSION_LIMIT = 20_000


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one sentence.

    `status` is `ok`, `failed` (a claim that does not hold) or `error` (nothing was done).
    """

    sentence: int
    source: Source
    span: Span
    status: str
    raw: Any
    tag: int | None
    settings: Settings
    diagnostics: tuple[Diagnostic, ...]
    seconds: float
    remark: str = ""

    @property
    def value(self) -> View | None:
        """The value, with its terms, equality and renderings; None for an error."""
        return None if self.status == "error" else View(self.raw, self.settings.show)

    @property
    def line(self) -> int:
        """The line of the sentence, from 1."""
        return self.source.position(self.span.start)[0]

    @property
    def fault_line(self) -> int:
        """The line of the first diagnostic, or of the sentence when there is none."""
        at = self.diagnostics[0].span if self.diagnostics else self.span
        return self.source.position(at.start)[0]

    @property
    def text(self) -> str:
        """The value, or the messages, as text."""
        if self.status == "error":
            return "\n".join(self.messages())
        return text(self.raw, self.settings.show)

    def messages(self) -> tuple[str, ...]:
        """The diagnostics with their line and caret."""
        return tuple(format_diagnostic(self.source, d) for d in self.diagnostics)

    def __str__(self) -> str:
        return self.text

    def __repr__(self) -> str:
        tag = "" if self.tag is None else f", tag {self.tag}"
        return f"Outcome({self.status}{tag}: {self.text})"

    def _repr_latex_(self) -> str | None:
        value = self.value
        return None if value is None else value._repr_latex_()

    def record(self) -> dict[str, Any]:
        """The outcome as JSON Lines hold it; the line of an error is that of the fault."""
        line, column = self.source.position(self.span.start)
        head: dict[str, Any] = {
            "sentence": self.sentence, "line": line,
            "source": self.source.slice(self.span).strip(), "status": self.status}
        if self.status == "error":
            first = self.diagnostics[0]
            line, column = self.source.position(first.span.start)
            head.update(
                code=first.code, message=first.message, line=line, column=column,
                hint=first.hints[0] if first.hints else None)
        else:
            content = data(self.raw)
            head["kind"] = content.pop("kind")
            if self.tag is not None:
                head["tag"] = self.tag
            head["n"] = content.pop("n", self.settings.n)
            head.update(content)
        if self.settings.hecke != "plain":
            head["hecke"] = self.settings.hecke
        head["seconds"] = round(self.seconds, 4)
        return head

    def reply(self, *, is_recorded: bool = False, is_digested: bool = False) -> Reply:
        """The outcome as plain data; record and digest cost as much as the text: on request."""
        line, column = self.source.position(self.span.start)
        terms: tuple[str, ...] = ()
        kind, shown, remark = "error", "", ""
        if self.status != "error":
            kind = kind_of(self.raw)
            terms = term_lines(self.raw, self.settings.show)
            shown = " ".join(terms) or self.text
            remark = note(self.raw, self.settings.n, self.settings.convention) or self.remark
        return Reply(
            self.sentence, line, column, self.source.slice(self.span).strip(), self.status,
            kind, self.tag, self.settings.n, shown, terms, self.messages(),
            self.record() if is_recorded else {}, self.seconds,
            isinstance(self.raw, Text) and self.raw.kind == "quit", remark,
            digest(self.raw) if is_digested and self.status != "error" else "")


@dataclass
class Session:
    """A ring, its settings, names and results, and how they change.

    >>> Session(n=2).run("x_2 E_(1,0)").text
    'E_(1,1)'
    """

    n: int | None = None
    folder: Folder = field(default_factory=lambda: Folder(Path.cwd()))
    context: Context = field(default_factory=Context)
    n_sentences: int = 0
    last_tag: int = 0
    has_quit: bool = False
    bounds: Bounds = Bounds()
    _used: set[Path] = field(default_factory=set)
    _using: list[Path] = field(default_factory=list)

    def __post_init__(self) -> None:
        sys.setrecursionlimit(max(sys.getrecursionlimit(), RECURSION_LIMIT))
        if self.n is not None:
            if not (isinstance(self.n, int) and 1 <= self.n <= LARGEST_N):
                raise ValueError(f"n lies between 1 and {LARGEST_N}; this is {self.n!r}")
            self.context = replace(self.context, settings=Settings(n=self.n))
        self.context = self._bounded(self.context)

    def __repr__(self) -> str:
        settings = self.context.settings
        own, results = len(self.context.names), len(self.context.results)
        return f"Session(n={settings.n}; {own} names, {results} results)"

    def run(self, text: str, name: str = "<input>") -> Outcome:
        """Run all sentences of a text, up to the first that is wrong; the last outcome.

        Raises ValueError when the text holds no sentence.
        """
        last: Outcome | None = None
        for outcome in self.run_all(Source(text, name)):
            last = outcome
            if outcome.status == "error":
                break
        if last is None:
            raise ValueError("the text holds no sentence")
        return last

    def run_all(self, source: Source) -> Iterator[Outcome]:
        """Run a text's sentences one after another, wrong ones too, until `quit`."""
        for chunk in parse(source).chunks:
            yield self._run_chunk(source, chunk)
            if self.has_quit:
                return

    def guarded(self, sentence: syntax.Sentence, action: Callable[[], Step]) -> Step:
        """Carry a sentence out; the evaluator process does so at a checkpoint."""
        return action()

    def state(self) -> State:
        """The plain summary that prompts and completers need."""
        context = self.context
        names = {
            name: (f"a function of {', '.join(value.parameters)}"
                   if isinstance(value, Function) else kind_name(value))
            for name, value in context.names.items()}
        return State(context.settings.n, context.settings.basis, context.parameters, names,
                     self.last_tag)

    def names(self) -> tuple[str, ...]:
        """The session's own names, for completion."""
        return (*self.context.names, *self.context.parameters)

    def _run_chunk(self, source: Source, chunk: Chunk) -> Outcome:
        self.n_sentences += 1
        wrong: Diagnostic | None = None
        started = time.perf_counter()
        if chunk.sentence is None:
            return self._outcome(source, chunk.span, "error", None, None, chunk.diagnostics, 0.0)
        before = self.context, self.last_tag, self.has_quit
        try:
            step = self._carry_out(chunk.sentence, source)
            tag = self._keep(step)
        except Failure as found:
            seconds = time.perf_counter() - started
            return self._outcome(
                source, chunk.span, "error", None, None, (found.diagnostic,), seconds)
        except (RecursionError, MemoryError):
            wrong = failure("too-large", chunk.span,
                            "this sentence needs more memory than there is").diagnostic
        except Exception as error:
            # a fault of the program must not end the session; its name is what a report needs
            wrong = failure(
                "internal-error", chunk.span,
                "the program failed here, and the fault is not yours; please report "
                f"{type(error).__name__}: {str(error)[:200]}").diagnostic
        if wrong is not None:
            self.context, self.last_tag, self.has_quit = before
            seconds = time.perf_counter() - started
            return self._outcome(source, chunk.span, "error", None, None, (wrong,), seconds)
        seconds = time.perf_counter() - started
        status = "failed" if step.has_failed else "ok"
        return replace(
            self._outcome(source, chunk.span, status, step.value, tag, (), seconds),
            remark=step.remark)

    def _carry_out(self, sentence: syntax.Sentence, source: Source) -> Step:
        limits = self.context.settings
        deadline = None if limits.seconds is None else time.monotonic() + limits.seconds

        def reason() -> str | None:
            if deadline is not None and time.monotonic() > deadline:
                return f"stopped after {limits.seconds} seconds: fix seconds = … to allow more"
            return None

        surface = Surface(source, self._use, self._read, self._write)
        by = replace(means.current(), folder=self.folder)
        with budget.using(budget.Budget(reason, limits.terms)), means.using(by):
            return self.guarded(
                sentence, lambda: carry_out(sentence, self.context, surface))

    def _bounded(self, context: Context) -> Context:
        """A context whose settings keep to the bounds of this session."""
        found = self.bounds.applied(context.settings)
        return context if found is context.settings else replace(context, settings=found)

    def _keep(self, step: Step) -> int | None:
        self.context = self._bounded(step.context)
        if isinstance(step.value, Text) and step.value.kind == "quit":
            self.has_quit = True
        if not step.is_tagged:
            return None
        self.last_tag += 1
        self.context = replace(
            self.context, results={**self.context.results, self.last_tag: step.value})
        return self.last_tag

    def _outcome(
        self, source: Source, span: Span, status: str, value: Any, tag: int | None,
        diagnostics: tuple[Diagnostic, ...], seconds: float,
    ) -> Outcome:
        return Outcome(
            self.n_sentences, source, span, status, value, tag, self.context.settings,
            diagnostics, seconds)

    # files

    def _use(self, path: str, node: syntax.Node) -> Context:
        """Run another script in this session, once; all of it or, after an error, nothing."""
        try:
            place, content = self.folder.read(path)
        except FileRefused as error:
            raise failure(error.code, node.place, str(error)) from error
        if place in self._using:
            raise failure("circular-use", node.place, f"{path} uses itself")
        if place in self._used:
            return self.context
        context, last_tag, used = self.context, self.last_tag, set(self._used)
        n_sentences = self.n_sentences
        self._using.append(place)
        is_whole = False
        try:
            for outcome in self.run_all(Source(content, path)):
                if outcome.status != "ok":
                    what = (outcome.diagnostics[0].message if outcome.diagnostics
                            else "a claim does not hold")
                    codes = {found.code for found in outcome.diagnostics}
                    raise failure(
                        "circular-use" if "circular-use" in codes else "unreadable-file",
                        node.place, f"{path}, line {outcome.fault_line}: {what}")
            is_whole = True
            self._used.add(place)
            return self.context
        finally:
            self._using.pop()
            self.has_quit = False
            self.n_sentences = n_sentences
            if not is_whole:
                self.context, self.last_tag, self._used = context, last_tag, used

    def _read(self, path: str, node: syntax.Node) -> Any:
        try:
            _, text = self.folder.read(path)
            return value_from_json(text, self.context.parameters)
        except FileRefused as error:
            raise failure(error.code, node.place, str(error)) from error
        except NoValue as error:
            raise failure("unreadable-file", node.place, f"{path}: {error}") from error

    def _write(self, path: str, content: str, node: syntax.Node) -> str:
        try:
            return str(self.folder.write(path, content).name)
        except FileRefused as error:
            raise failure(error.code, node.place, str(error)) from error
