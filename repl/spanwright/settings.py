"""The settings of a session: one frozen record, and what each may be given."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from spanwright_grammar.vocabulary import SETTING_WORDS

if TYPE_CHECKING:
    from spanwright.kernel.coefficients import Scalar


@dataclass(frozen=True, slots=True)
class Settings:
    """What `fix` sets; None where nothing is fixed."""

    n: int | None = None
    q: Scalar | None = None
    t: Scalar | None = None
    basis: str | None = None
    convention: str = "standard"
    hecke: str = "plain"
    show: str = "short"
    seconds: int | None = None
    terms: int = 2_000_000
    memory: int | None = None
    jobs: int = 1
    certainty: str = "exact"
    counterexamples: str = "all"
    seed: int = 1

    def changed(self, **changes: Any) -> Settings:
        """With some settings changed."""
        return replace(self, **changes)

    def images(self) -> dict[str, Scalar]:
        """The values that parameters are fixed at; one that contains the other is resolved."""
        fixed = {name: value for name, value in (("q", self.q), ("t", self.t))
                 if value is not None}
        return {name: value.substitute({k: v for k, v in fixed.items() if k != name})
                for name, value in fixed.items()}


@dataclass(frozen=True, slots=True)
class Bounds:
    """What the settings of a session never exceed, whatever its sentences fix; memory in bytes.

    A replay has them, so that no log of a stranger, nor a script that it uses, lifts its limits.
    """

    seconds: int | None = None
    terms: int | None = None
    memory: int | None = None
    jobs: int | None = None

    def applied(self, settings: Settings) -> Settings:
        """The settings, lowered to the bounds; one that is free is set at its bound."""
        lowered = {}
        for name in self.__dataclass_fields__:
            bound, value = getattr(self, name), getattr(settings, name)
            if bound is not None and (value is None or value > bound):
                lowered[name] = bound
        return settings.changed(**lowered) if lowered else settings


WORDS = SETTING_WORDS
"""Settings whose value is one of some words."""

LARGEST_N = 60
"""More variables than this are taken for a slip of the finger."""
