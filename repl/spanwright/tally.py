"""What many cases came to: how many held, failed or stayed undecided, and the first that failed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True, slots=True)
class Counterexample:
    """The first case, in the stated order, for which a claim fails.

    `line` is a text of the language that meets the same case alone; `difference` is left side
    minus right side as text, empty when there is none.
    """

    case: str
    line: str
    difference: str = ""
    evidence: str = ""


@dataclass(frozen=True, slots=True)
class Undecided:
    """Cases left undecided for one reason: how many, the first of them, the line that meets it."""

    reason: str
    n_cases: int
    case: str
    line: str


@dataclass(frozen=True, slots=True)
class Tally:
    """The outcome of `for … : …`.

    `lines` are the values that the sentences of the cases show, each with its case; `n_done`
    counts the cases without a claim. `certainty` is `random` when a case was decided at random
    points alone, and `evidence` then bounds the error. `is_whole` is false when the run ended at
    its first counterexample.
    """

    n_held: int = 0
    n_failed: int = 0
    n_undecided: int = 0
    n_done: int = 0
    counterexample: Counterexample | None = None
    undecided: tuple[Undecided, ...] = ()
    lines: tuple[str, ...] = ()
    certainty: str = "exact"
    evidence: str = ""
    is_whole: bool = True

    @property
    def n_cases(self) -> int:
        """How many cases there were."""
        return self.n_held + self.n_failed + self.n_undecided + self.n_done

    @property
    def holds(self) -> bool:
        """Whether no case failed and none stayed undecided."""
        return not (self.n_failed or self.n_undecided)


def counts_text(tally: Tally) -> str:
    """`35 cases: 34 held, 1 failed`."""
    parts = [
        f"{number:,} {word}"
        for number, word in (
            (tally.n_held, "held"), (tally.n_failed, "failed"),
            (tally.n_undecided, "undecided"), (tally.n_done, "done"))
        if number]
    named = "1 case" if tally.n_cases == 1 else f"{tally.n_cases:,} cases"
    return f"{named}: {', '.join(parts)}" if parts else "no cases"


def tally_text(tally: Tally) -> str:
    """The tally as text that can be pasted: all but the lines to run again stands in comments."""
    rows = list(tally.lines)
    n_decided = tally.n_cases - tally.n_done
    if tally.n_failed:
        rows.append("fails")
    elif n_decided and not tally.n_undecided:
        rows.append("holds")
    if n_decided or not tally.lines:
        rows.append(f"# {counts_text(tally)}")
    if not tally.is_whole:
        rows.append("# ended at the first counterexample")
    if tally.certainty == "random":
        rows.append(f"# with high probability: {tally.evidence}")
    found = tally.counterexample
    if found is not None:
        rows.append(f"# smallest counterexample: {found.case}")
        if found.difference:
            rows.append(f"# left - right = {found.difference}")
        if found.evidence:
            rows.append(f"# {found.evidence}")
        rows.append(found.line)
    for group in tally.undecided:
        many = "" if group.n_cases == 1 else f" and {group.n_cases - 1:,} more"
        rows.append(f"# undecided: {group.case}{many}: {group.reason}")
        rows.append(group.line)
    return "\n".join(rows)


def tally_data(tally: Tally) -> dict[str, Any]:
    """The tally as JSON holds it."""
    found: dict[str, Any] = {
        "kind": "tally", "holds": tally.holds, "cases": tally.n_cases, "held": tally.n_held,
        "failed": tally.n_failed, "undecided": tally.n_undecided, "done": tally.n_done,
        "certainty": tally.certainty}
    if tally.evidence:
        found["evidence"] = tally.evidence
    if not tally.is_whole:
        found["ended"] = "first counterexample"
    if tally.counterexample is not None:
        first = tally.counterexample
        found["counterexample"] = {
            "case": first.case, "line": first.line,
            **({"difference": first.difference} if first.difference else {}),
            **({"evidence": first.evidence} if first.evidence else {})}
    if tally.undecided:
        found["reasons"] = [
            {"reason": u.reason, "cases": u.n_cases, "case": u.case, "line": u.line}
            for u in tally.undecided]
    if tally.lines:
        found["lines"] = list(tally.lines)
    return found
