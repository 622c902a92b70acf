"""The cooperative stop: a budget in force, asked by long loops between kernel calls.

The clock is handed in by whoever sets the budget: the kernel itself has none.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass

from spanwright.kernel.errors import OverBudget


@dataclass(frozen=True, slots=True)
class Budget:
    """Limits for one sentence: `is_spent` says why work must stop, `max_terms` bounds a result.

    A result that would take more than `max_bytes` is not begun.
    `report` is told what has been reached, as often as long work looks here.
    """

    is_spent: Callable[[], str | None] = lambda: None
    max_terms: int = 2_000_000
    report: Callable[[str], None] | None = None
    max_bytes: int = 4 * 10**9

    def check(self) -> None:
        """Raise OverBudget when the time is over or somebody cancelled."""
        reason = self.is_spent()
        if reason is not None:
            raise OverBudget(reason)

    def check_terms(self, n_terms: int, what: str) -> None:
        """Raise OverBudget when `n_terms` is more than the budget allows."""
        if n_terms > self.max_terms:
            raise OverBudget(
                f"{what} would have about {n_terms:,} terms, the limit is {self.max_terms:,}",
                code="too-many-terms",
            )
        if self.report is not None:
            kind = what.removeprefix("this ")
            article = "an" if kind[0] in "aeiou" else "a"
            self.report(f"{article} {kind} of about {n_terms:,} terms")
        self.check()

    def check_size(self, n_terms: int, bits: int, what: str) -> None:
        """Raise OverBudget when so many terms of numbers below 2^bits cannot be held.

        Numbers of a product are on average more than half as long as the longest.
        """
        size = n_terms * (bits // 16)
        if size > self.max_bytes:
            raise OverBudget(
                f"{what} would have about {n_terms:,} terms with numbers of up to "
                f"{bits * 30103 // 100000:,} digits, which need more than "
                f"{self.max_bytes / 10**9:.2g} GB of memory",
                code="too-large",
            )


_in_force: ContextVar[Budget] = ContextVar("spanwright_budget", default=Budget())


def current() -> Budget:
    """The budget in force."""
    return _in_force.get()


@contextmanager
def using(budget: Budget) -> Iterator[None]:
    """Put `budget` in force for a block."""
    token = _in_force.set(budget)
    try:
        yield
    finally:
        _in_force.reset(token)
