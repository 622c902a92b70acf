"""What evaluation passes around: the context of a sentence, definitions, and placed failures."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Protocol

from spanwright.kernel.parameters import ParameterRing
from spanwright.settings import Settings
from spanwright.values import IndexSet
from spanwright_grammar import syntax
from spanwright_grammar.diagnostics import Diagnostic
from spanwright_grammar.source import Span

MESSAGE_LENGTH = 500
"""What a message quotes may be as long as the input; longer messages are cut."""

SIZE_LIMIT = 1_000_000
"""Lists and sets are not written out beyond this many items."""


class Failure(Exception):
    """A sentence that cannot be carried out; the diagnostic says where, what, and what is right."""

    def __init__(self, diagnostic: Diagnostic, value: Any = None) -> None:
        message = diagnostic.message
        if len(message) > MESSAGE_LENGTH:
            diagnostic = replace(diagnostic, message=f"{message[: MESSAGE_LENGTH - 2]} …")
        hints = tuple(hint for hint in diagnostic.hints if len(hint) <= MESSAGE_LENGTH)
        if hints != diagnostic.hints:
            diagnostic = replace(diagnostic, hints=hints)
        super().__init__(diagnostic.message)
        self.diagnostic = diagnostic
        self.value = value


def failure(code: str, span: Span, message: str, *hints: str) -> Failure:
    """An error with its place."""
    return Failure(Diagnostic("error", code, span, message, tuple(hints)))


@dataclass(frozen=True, slots=True)
class Function:
    """What `let c(a,b) = …` and `let F_mu = …` define; `text` is the sentence as it was typed.

    `local` are the values of the case in which it was defined: nothing, outside a `for`.
    """

    name: str
    parameters: tuple[str, ...]
    body: syntax.Expression
    is_family: bool
    is_whole_index: bool
    text: str
    local: Mapping[str, Any] = field(default_factory=dict, compare=False)


@dataclass(frozen=True, slots=True)
class Context:
    """All that a sentence may look up; frozen, a new one for every change.

    `local` are the values of a case, before all names; functions of one's own do not see them.
    """

    settings: Settings = field(default_factory=Settings)
    names: Mapping[str, Any] = field(default_factory=dict)
    parameters: tuple[str, ...] = ()
    results: Mapping[int, Any] = field(default_factory=dict)
    local: Mapping[str, Any] = field(default_factory=dict)

    def with_name(self, name: str, value: Any) -> Context:
        """With one more definition."""
        local = self.local
        if name in local:
            local = {known: v for known, v in local.items() if known != name}
        return replace(self, names={**self.names, name: value}, local=local)

    @property
    def ring(self) -> ParameterRing:
        """The parameter ring of the session."""
        return ParameterRing.get(("q", "t")).extended(self.parameters)


class Evaluation(Protocol):
    """What the functions of the language see of the evaluator."""

    context: Context
    algebra: Any

    @property
    def n(self) -> int | None: ...

    def value(self, node: syntax.Node) -> Any: ...

    def require_n(self, node: syntax.Node) -> int: ...

    def integer(self, node: syntax.Node, what: str = ...) -> int: ...

    def as_integer(self, value: Any) -> int | None: ...

    def permutation(self, node: syntax.Node, n: int) -> tuple[int, ...]: ...

    def domain(self, node: syntax.Node) -> IndexSet: ...

    def unknown(self, name: str, span: Span) -> Failure: ...
