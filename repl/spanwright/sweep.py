"""Many cases: `for`, `find` and `tabulate` over index sets, by whatever engine is at hand.

Results are consumed in the stated order, so that one worker, many, or a cluster come to the same
bytes. What has been consumed is counted and let go; memory does not grow with the cases.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from typing import Any

from spanwright import means
from spanwright.cases import (
    DONE,
    FAILED,
    HELD,
    SKIPPED,
    STATIC,
    UNDECIDED,
    CarryOut,
    Case,
    CaseRunner,
    Plan,
    Result,
    check_size,
    enumerate_cases,
    number_of_cases,
    plan,
    reproduction,
)
from spanwright.context import Context, Failure, failure
from spanwright.files import FileRefused
from spanwright.finished import LOST, FinishedCases, Unreadable, case_key, sentence_key
from spanwright.kernel import budget
from spanwright.pool import Engine, EngineLost, OneProcess, Pool, can_fork
from spanwright.rendering.text import text
from spanwright.tables import SUFFIXES, TableRefused, writer
from spanwright.tally import Counterexample, Tally, Undecided
from spanwright.transport import packed_context, packed_value, unpacked_value
from spanwright.values import ListValue, Table, Text
from spanwright_grammar import syntax
from spanwright_grammar.diagnostics import Diagnostic
from spanwright_grammar.parsing import ParseFailure
from spanwright_grammar.printing import print_tree
from spanwright_grammar.source import Span
from spanwright_grammar.spelling import nearest

PROGRESS_EVERY = 0.25
LARGEST_N_REASONS = 5
"""So many reasons for undecided cases are told apart; further ones count with the last."""

Consumer = Callable[[Case, Result], None]


class _Ended(Exception):
    """The consumer needs no more."""


@dataclass(slots=True)
class _Run:
    """One sentence under way."""

    steps: Plan
    context: Context
    surface: Any
    carry_out: CarryOut
    form: str
    means: means.Means = field(default_factory=means.current)

    def over_all(self, consume: Consumer, *, is_isolated: bool) -> None:
        """Run every case and hand the results over in the stated order.

        Raises Failure when the run cannot be finished; the message says how far it came.
        """
        progress = _Progress(self.means.progress, lambda: number_of_cases(
            self.steps, self.context))
        finished = self._finished()
        common = ""
        if finished is not None:
            common = sentence_key(
                f"{self.form}: {print_tree(self.steps.node)}",
                packed_context(self.context, self.steps.node))
        order = _InOrder(consume)
        engine = self._engine(is_isolated)
        n = self.context.settings.n

        def waiting() -> Iterator[Case]:
            for case in enumerate_cases(self.steps, self.context):
                if finished is not None:
                    key = case_key(common, case.packed(n))
                    known = finished.result(key)
                    if known is not None or not finished.is_wanted(key):
                        order.put(case, {"status": SKIPPED} if known is None else known)
                        continue
                yield case

        try:
            for case, result in engine.results(waiting(), self._check):
                if finished is not None:
                    finished.add(case_key(common, case.packed(n)), case.text(), result)
                progress.count(result)
                order.put(case, result)
        except _Ended:
            pass
        except EngineLost as lost:
            kept = self.means.kept
            hint = () if kept is None else (f"--resume {kept}",)
            raise failure("workers-lost", self.steps.node.place,
                          f"{lost}; reached: {progress.line()}", *hint) from lost
        except Failure as stopped:
            if stopped.diagnostic.code != "over-budget":
                raise
            reached = f"{stopped.diagnostic.message}; reached: {progress.line()}"
            raise Failure(replace(stopped.diagnostic, message=reached)) from stopped
        finally:
            engine.close()
            if finished is not None:
                finished.close()

    def _check(self) -> None:
        reason = budget.current().is_spent()
        if reason is not None:
            raise failure("over-budget", self.steps.node.place, reason,
                          "fix seconds = …   to allow more time")

    def _finished(self) -> FinishedCases | None:
        if self.means.kept is None:
            return None
        try:
            return FinishedCases(self.means.kept, only_failed=self.means.only_failed)
        except Unreadable as error:
            raise failure("unreadable-file", self.steps.node.place, str(error)) from error

    def _engine(self, is_isolated: bool) -> Engine:
        jobs = self.context.settings.jobs if self.means.jobs is None else self.means.jobs
        runner = CaseRunner(self.steps, self.context, self.surface, self.carry_out, self.form)
        seconds = self.means.case_seconds
        if self.means.cluster is not None and jobs > 0:
            from spanwright.gateway import Cluster

            return Cluster(self.means.cluster, runner, self._job, case_seconds=seconds)
        # a worker started afresh costs a second: too much for the protection of one alone
        if jobs == 0 or (jobs == 1 and not (is_isolated and can_fork())):
            return OneProcess(runner, seconds)
        return Pool(runner, jobs, case_seconds=seconds, job=self._job)

    def _job(self) -> dict[str, Any]:
        """What an evaluator elsewhere must be told."""
        place = self.steps.node.place
        return {
            "context": packed_context(self.context, self.steps.node),
            "sentence": self.surface.source.slice(place), "base": place.start,
            "form": self.form, "terms": self.context.settings.terms}


class _InOrder:
    """Holds results back until those before them have come."""

    def __init__(self, consume: Consumer) -> None:
        self._consume = consume
        self._waiting: dict[int, tuple[Case, Result]] = {}
        self._next = 0

    def put(self, case: Case, result: Result) -> None:
        """One more result, in any order."""
        self._waiting[case.number] = case, result
        while self._next in self._waiting:
            ready = self._waiting.pop(self._next)
            self._next += 1
            if ready[1]["status"] != SKIPPED:
                self._consume(*ready)


class _Progress:
    """Counts what is finished, and tells it a few times a second."""

    def __init__(self, tell: Callable[[str], None] | None, total: Callable[[], int | None]) -> None:
        self._tell = tell
        self._total = total() if tell is not None else None
        self._started = self._told = time.monotonic()
        self._counts = {HELD: 0, FAILED: 0, UNDECIDED: 0, DONE: 0, SKIPPED: 0}

    def count(self, result: Result) -> None:
        """One more case is finished."""
        self._counts[result["status"]] += 1
        now = time.monotonic()
        if self._tell is not None and now - self._told > PROGRESS_EVERY:
            self._told = now
            self._tell(self.line())

    def line(self) -> str:
        """`1,200 of 5,000 cases, 210 a second, 18 s left; 1,199 held, 1 failed`."""
        n_cases = sum(self._counts.values())
        rate = n_cases / max(time.monotonic() - self._started, 1e-9)
        parts = [f"{n_cases:,} cases"]
        if self._total is not None:
            parts = [f"{n_cases:,} of {self._total:,} cases"]
        parts.append(f"{rate:,.0f} a second" if rate >= 10 else f"{rate:.2g} a second")
        if self._total is not None and n_cases:
            parts.append(f"{_duration((self._total - n_cases) / rate)} left")
        kinds = [f"{self._counts[word]:,} {word}" for word in (HELD, FAILED, UNDECIDED)
                 if self._counts[word]]
        return ", ".join(parts) + (f"; {', '.join(kinds)}" if kinds else "")


def _duration(seconds: float) -> str:
    if seconds < 100:
        return f"{seconds:.0f} s"
    minutes = seconds / 60
    return f"{minutes:.0f} min" if minutes < 100 else f"{minutes / 60:.0f} h"


# for


class _Counting:
    """Consumes the results of a `for` into a tally."""

    def __init__(self, steps: Plan, *, stops_at_first: bool) -> None:
        self._steps = steps
        self._stops = stops_at_first
        self._counts = {HELD: 0, FAILED: 0, UNDECIDED: 0, DONE: 0}
        self._first: Counterexample | None = None
        self._reasons: dict[str, Undecided] = {}
        self._lines: list[str] = []
        self._evidence = ""
        self._is_whole = True

    def consume(self, case: Case, result: Result) -> None:
        """The next result in the stated order."""
        status = result["status"]
        if status == UNDECIDED and not any(self._counts.values()):
            raise_static(result)
        self._counts[status] += 1
        lines = result.get("lines", ())
        if lines:
            self._lines += [f"{line}   # {case.text()}" if "\n" not in line and line[:1] != "#"
                            else f"{line}\n# {case.text()}" for line in lines]
            check_size(len(self._lines), self._steps.node)
        if status in (HELD, DONE) and "evidence" in result:
            self._evidence = _weaker(self._evidence, result["evidence"])
        elif status == FAILED and self._first is None:
            self._first = Counterexample(
                _named(case, result), reproduction(self._steps, case),
                result.get("difference", ""), result.get("evidence", ""))
            if self._stops:
                self._is_whole = False
                raise _Ended
        elif status == UNDECIDED:
            self._add_reason(case, result)

    def _add_reason(self, case: Case, result: Result) -> None:
        reason = result["reason"]
        known = self._reasons.get(reason)
        if known is None and len(self._reasons) >= LARGEST_N_REASONS:
            reason, known = next(reversed(self._reasons.items()))
        if known is None:
            known = Undecided(
                reason, 0, _named(case, result), reproduction(self._steps, case))
        self._reasons[reason] = replace(known, n_cases=known.n_cases + 1)

    def tally(self) -> Tally:
        """What has been counted."""
        return Tally(
            self._counts[HELD], self._counts[FAILED], self._counts[UNDECIDED],
            self._counts[DONE], self._first, tuple(self._reasons.values()), tuple(self._lines),
            "random" if self._evidence else "exact", self._evidence, self._is_whole)


EACH = " for each case"


def _weaker(one: str, other: str) -> str:
    """Of two sentences that end in `error below 10^-16`, the one that promises less."""
    found = [text.removesuffix(EACH) for text in (one, other) if text]
    digits = {text: text.rpartition("10^-")[2] for text in found}
    return min(found, key=lambda text: int(digits[text]) if digits[text].isdigit() else 0) + EACH


def _named(case: Case, result: Result) -> str:
    inner = result.get("inner")
    return f"{case.text()}, {inner}" if inner else case.text()


def raise_static(result: Result) -> None:
    """A fault of the sentence itself, met in its first case, ends the run."""
    if result.get("code") in STATIC and "at" in result:
        raise Failure(Diagnostic(
            "error", result["code"], Span(*result["at"]), result["reason"],
            tuple(result["hints"])))


def run_for(
    node: syntax.For, context: Context, surface: Any, carry_out: CarryOut
) -> Tally:
    """`for … : …`: every case in a context of its own, and the tally of all."""
    steps = plan(node)
    run = _Run(steps, context, surface, carry_out, "text")
    stops = run.means.stops_at_first or context.settings.counterexamples == "first"
    counting = _Counting(steps, stops_at_first=stops)
    run.over_all(counting.consume, is_isolated=True)
    return counting.tally()


# find


def run_find(
    node: syntax.Find, context: Context, surface: Any, carry_out: CarryOut
) -> ListValue:
    """`find … where …`: the choices for which the condition holds, in the stated order."""
    found: list[Any] = []

    def consume(case: Case, result: Result) -> None:
        _refuse_undecided(case, result, node)
        values = tuple(case.bound.values())
        found.append(values[0] if len(values) == 1 else ListValue(values))
        check_size(len(found), node)

    run = _Run(plan(node), context, surface, carry_out, "text")
    run.over_all(consume, is_isolated=False)
    return ListValue(tuple(found))


def _refuse_undecided(case: Case, result: Result, node: syntax.Node) -> None:
    if result["status"] != UNDECIDED:
        return
    at = Span(*result["at"]) if "at" in result else node.place
    code = "undecided" if result["code"] == LOST else result["code"]
    raise Failure(Diagnostic(
        "error", code, at, f"{result['reason']}, for {case.text()}",
        tuple(result.get("hints", ()))))


# tabulate


def run_tabulate(
    node: syntax.Tabulate, context: Context, surface: Any, carry_out: CarryOut
) -> Table | Text:
    """`tabulate … for …`: a table, or the place of the file that it was streamed to."""
    steps = plan(node)
    columns = (*(b.name for b in node.bindings), print_tree(node.expression))
    if node.path is not None:
        return _into_file(node, steps, columns, context, surface, carry_out)
    rows: list[tuple[Any, ...]] = []
    notes: list[str] = []
    run = _Run(steps, context, surface, carry_out, "value")

    def consume(case: Case, result: Result) -> None:
        rows.append((*case.bound.values(), _cell(result, case, node, notes, lambda data:
                                                 unpacked_value(data, context))))
        check_size(len(rows), node)

    run.over_all(consume, is_isolated=False)
    return Table(columns, tuple(rows), notes=tuple(notes))


def _cell(
    result: Result, case: Case, node: syntax.Node, notes: list[str], read: Callable[[Any], Any]
) -> Any:
    if result["status"] != UNDECIDED:
        try:
            return read(result["cell"])
        except ParseFailure as error:
            # a case's value comes back as text, wherever it was found
            raise failure(
                "too-large", node.place,
                f"the value for {case.text()} is too long for a table that is shown",
                "tabulate … to \"table.csv\"") from error
    if result.get("code") in STATIC:
        _refuse_undecided(case, result, node)
    if len(notes) < LARGEST_N_REASONS:
        notes.append(f"# {case.text()}: {result['reason']}")
    return ""


def _into_file(
    node: syntax.Tabulate, steps: Plan, columns: tuple[str, ...], context: Context,
    surface: Any, carry_out: CarryOut,
) -> Text:
    assert node.path is not None
    folder = means.current().folder
    suffix = "." + node.path.rpartition(".")[2].lower() if "." in node.path else ""
    if suffix not in SUFFIXES:
        near = nearest(suffix, SUFFIXES) or ".csv"
        raise failure(
            "unknown-form", node.place,
            f"a table's file ends in one of {', '.join(SUFFIXES)}",
            f'to "{node.path.removesuffix(suffix)}{near}"')
    if folder is None:
        raise failure("unwritable-file", node.place, "files cannot be written here")
    form = SUFFIXES[suffix]
    notes: list[str] = []
    n = context.settings.n
    try:
        place = folder.place_to_write(node.path)
        with writer(place, suffix, columns) as table:
            def consume(case: Case, result: Result) -> None:
                cell = _cell(result, case, node, notes, lambda data: data)
                table.add([packed_value(v, n) for v in case.bound.values()],
                          [text(v) for v in case.bound.values()], cell)

            _Run(steps, context, surface, carry_out, form).over_all(consume, is_isolated=True)
    except (FileRefused, TableRefused) as error:
        raise failure(
            getattr(error, "code", "unwritable-file"), node.place, str(error)) from error
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise failure("unwritable-file", node.place, f"{node.path}: {reason}") from error
    counted = "1 row" if table.n_rows == 1 else f"{table.n_rows:,} rows"
    return Text("\n".join([f"# {counted} written to {place.name}", *notes]))
