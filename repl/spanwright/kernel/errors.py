"""The kernel's errors: what went wrong, as data; whoever called adds the place and the prose.

Outside the domain (division by zero, a pole, an index that is none), mixed (two rings that do not
meet), unable (no route is known here), over budget (too large, too long, stopped).
"""

from __future__ import annotations


class KernelError(Exception):
    """Base of all errors that the kernel raises on purpose: a code, a short fact, more facts."""

    code = "outside-domain"

    def __init__(self, fact: str, *, code: str | None = None, hints: tuple[str, ...] = ()) -> None:
        super().__init__(fact)
        self.fact = fact
        self.hints = hints
        if code is not None:
            self.code = code


class OutsideDomain(KernelError):
    """The operation is not defined on these arguments."""


class DivisionByZero(OutsideDomain):
    """Division by the zero scalar."""

    code = "division-by-zero"


class NotAUnit(OutsideDomain):
    """Division by, or a negative power of, something that has no inverse in its ring."""

    code = "not-a-unit"


class Pole(OutsideDomain):
    """A specialisation or limit that does not exist; `order` is the order of the pole."""

    code = "pole"

    def __init__(self, fact: str, *, order: int = 1, hints: tuple[str, ...] = ()) -> None:
        super().__init__(fact, hints=hints)
        self.order = order


class Mixed(KernelError):
    """Two things that live in different rings, families or algebras and do not combine."""

    code = "mixed"


class Unable(KernelError):
    """A correct question to which no route is known here."""

    code = "unable"


class OverBudget(KernelError):
    """A limit was reached: time, terms, memory, or the reader's patience."""

    code = "over-budget"
