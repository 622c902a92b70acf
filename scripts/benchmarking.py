"""What scripts/bench is made of: cases, timing in turn, the table and the JSON.

A file in scripts/benchmarks defines `cases(is_quick) -> list[Case]`; see start_up.py there.
"""

from __future__ import annotations

import argparse
import gc
import importlib.metadata
import importlib.util
import json
import platform
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import ModuleType

# A contender is called again until this long has been spent on it, the clock's grain is small
# against a batch, and each had its turn several times; the best turn counts.
SECONDS_EACH = {False: 2.0, True: 0.4}
SECONDS_A_BATCH = 0.005
TURNS = {False: range(3, 25), True: range(1, 6)}
JSON_FORMAT = 1


@dataclass(frozen=True)
class Contender:
    """One way to do the work: `prepare` runs before each call and is not timed.

    With `prepare` (say, to empty a memory) every timed batch is one call. `times` scales the
    figure, for a floor such as "one such step, 12 times".
    """

    label: str
    run: Callable[[], object]
    prepare: Callable[[], object] | None = None
    times: float = 1.0


@dataclass(frozen=True)
class Case:
    """One question: ratios are against the first contender.

    `answer` turns what `run` returned into something comparable; when given, all contenders
    must agree on it, or the case fails. `n_units` (terms, rows) adds a column of time a unit.
    """

    name: str
    what: str
    contenders: Sequence[Contender | tuple[str, Callable[[], object]]]
    answer: Callable[[object], object] | None = None
    n_units: int | None = None
    unit: str = "term"


@dataclass
class Timing:
    """The best time of one contender, and how it was found."""

    label: str
    seconds: float = float("inf")
    n_turns: int = 0
    n_calls: int = 1
    spent: float = field(default=0.0, repr=False)


class Disagreement(Exception):
    """Two contenders of a case gave different answers."""


def measure(case: Case, *, is_quick: bool) -> list[Timing]:
    """Time the contenders in turn, so that a busy moment hits all alike.

    Raises Disagreement when the case compares answers and they differ.
    """
    contenders = [c if isinstance(c, Contender) else Contender(*c) for c in case.contenders]
    timings = [Timing(contender.label) for contender in contenders]
    _compare(case, contenders)
    for contender, timing in zip(contenders, timings, strict=True):
        if contender.prepare is None:
            timing.n_calls = _calls_a_batch(contender)
    turns = TURNS[is_quick]
    for turn in range(turns.stop - 1):
        for contender, timing in zip(contenders, timings, strict=True):
            if turn < turns.start or timing.spent < SECONDS_EACH[is_quick]:
                _take_turn(contender, timing)
    return timings


def _compare(case: Case, contenders: list[Contender]) -> None:
    if case.answer is None:
        return
    first = None
    for contender in contenders:
        if contender.prepare is not None:
            contender.prepare()
        answer = case.answer(contender.run())
        if contender is contenders[0]:
            first = answer
        elif answer != first:
            raise Disagreement(
                f"{contenders[0].label} and {contender.label} give different answers"
            )


def _calls_a_batch(contender: Contender) -> int:
    n_calls = 1
    while _seconds(contender, n_calls) < SECONDS_A_BATCH:
        n_calls *= 2
    return n_calls


def _take_turn(contender: Contender, timing: Timing) -> None:
    if contender.prepare is not None:
        contender.prepare()
    seconds = _seconds(contender, timing.n_calls)
    timing.spent += seconds
    timing.n_turns += 1
    timing.seconds = min(timing.seconds, seconds / timing.n_calls * contender.times)


def _seconds(contender: Contender, n_calls: int) -> float:
    run = contender.run
    was_enabled = gc.isenabled()
    gc.disable()
    try:
        start = time.perf_counter()
        for _ in range(n_calls):
            run()
        return time.perf_counter() - start
    finally:
        if was_enabled:
            gc.enable()


def duration(seconds: float) -> str:
    """Three digits and the unit that fits."""
    for unit, size in (("s", 1.0), ("ms", 1e-3), ("µs", 1e-6)):
        if seconds >= size:
            return (
                f"{seconds / size:.3g} {unit}"
                if seconds < 100 * size
                else (f"{seconds / size:.0f} {unit}")
            )
    return f"{seconds / 1e-9:.0f} ns"


def table(case: Case, timings: list[Timing]) -> str:
    """The case as aligned columns: what, time, ratio, time a unit."""
    rows = [["", "best", f"against {timings[0].label}"]]
    if case.n_units:
        rows[0].append(f"a {case.unit}")
    for timing in timings:
        row = [timing.label, duration(timing.seconds)]
        row.append(f"{timing.seconds / timings[0].seconds:.3g} times")
        if case.n_units:
            row.append(duration(timing.seconds / case.n_units))
        rows.append(row)
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    lines = [
        "  ".join(
            [row[0].ljust(widths[0])]
            + [cell.rjust(width) for cell, width in zip(row[1:], widths[1:], strict=True)]
        ).rstrip()
        for row in rows
    ]
    units = f" ({case.n_units:,} {case.unit}s)" if case.n_units else ""
    return "\n".join([f"{case.name}: {case.what}{units}", *(f"  {line}" for line in lines)])


def record(case: Case, timings: list[Timing]) -> dict[str, object]:
    """The case as plain data for JSON."""
    return {
        "name": case.name,
        "what": case.what,
        "units": case.n_units,
        "unit": case.unit if case.n_units else None,
        "contenders": [
            {
                "label": timing.label,
                "seconds": timing.seconds,
                "ratio": timing.seconds / timings[0].seconds,
                "turns": timing.n_turns,
                "calls_a_turn": timing.n_calls,
            }
            for timing in timings
        ],
    }


def surroundings() -> dict[str, object]:
    """What the figures depend on."""
    packages = ("spanwright", "lark", "prompt_toolkit", "python-flint", "sympy")
    return {
        "python": platform.python_version(),
        "machine": platform.machine(),
        "system": platform.system(),
        "packages": {name: importlib.metadata.version(name) for name in packages},
    }


def _load(path: Path) -> ModuleType:
    specification = importlib.util.spec_from_file_location(f"benchmark_{path.stem}", path)
    assert specification is not None and specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    specification.loader.exec_module(module)
    return module


def collect(folder: Path, *, is_quick: bool) -> list[Case]:
    """Every case of every file of the folder, by file name."""
    return [case for path in sorted(folder.glob("*.py")) for case in _load(path).cases(is_quick)]


def main(folder: str, arguments: list[str]) -> int:
    """The command line of scripts/bench: 0 done, 1 contenders disagree, 2 usage."""
    parser = argparse.ArgumentParser(prog="scripts/bench", description=__doc__.splitlines()[0])
    parser.add_argument("--only", metavar="NAME", action="append", help="this case (repeatable)")
    parser.add_argument("--quick", action="store_true", help="small sizes, few repetitions")
    parser.add_argument("--json", metavar="FILE", type=Path, help="write the figures there too")
    parser.add_argument("--list", action="store_true", help="name the cases and stop")
    options = parser.parse_args(arguments)

    cases = collect(Path(folder), is_quick=options.quick)
    names = [case.name for case in cases]
    unknown = sorted(set(options.only or ()) - set(names))
    if unknown:
        parser.error(f"no case {', '.join(unknown)}; there are: {', '.join(names)}")
    chosen = [case for case in cases if not options.only or case.name in options.only]
    if options.list:
        print("\n".join(f"{case.name}: {case.what}" for case in chosen))
        return 0

    records: list[dict[str, object]] = []
    n_failed = 0
    for case in chosen:
        try:
            timings = measure(case, is_quick=options.quick)
        except Disagreement as fault:
            print(f"{case.name}: {fault}", file=sys.stderr)
            n_failed += 1
            continue
        print(table(case, timings), flush=True)
        print()
        records.append(record(case, timings))
    if options.json:
        report = {
            "format": JSON_FORMAT,
            "quick": options.quick,
            "surroundings": surroundings(),
            "cases": records,
        }
        options.json.write_text(json.dumps(report, indent=2) + "\n", encoding="utf-8")
    return 1 if n_failed else 0
