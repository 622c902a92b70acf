"""The seam between what shows and what computes: text in, plain replies out.

The shell and the command line know a session only as a `Conversation`; whether it runs in this
process or in another is none of their business.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

from spanwright.session import Reply, Session


@dataclass(frozen=True, slots=True)
class State:
    """What a prompt and a completer must know of a session.

    `names` maps the session's own names to what they are ("a polynomial", "a function of a, b").
    """

    n: int | None
    basis: str | None
    parameters: tuple[str, ...]
    names: dict[str, str]
    last_tag: int


class Conversation(Protocol):
    """A session as those who show it see it."""

    def say(self, text: str, name: str = "<shell>") -> Iterator[Reply]:
        """Run all sentences of a text; the replies one after another, as they come."""
        ...

    def state(self) -> State:
        """What the session holds now."""
        ...

    def close(self) -> None:
        """End it."""
        ...


class LocalConversation:
    """A session in this very process."""

    def __init__(self, session: Session | None = None) -> None:
        self._session = session or Session()

    def say(self, text: str, name: str = "<shell>") -> Iterator[Reply]:
        """Run all sentences of a text."""
        from spanwright_grammar.source import Source

        for outcome in self._session.run_all(Source(text, name)):
            yield outcome.reply()

    def state(self) -> State:
        """What the session holds now."""
        return state_of(self._session)

    def close(self) -> None:
        """Nothing to end."""


def state_of(session: Session) -> State:
    """The plain summary of a session."""
    from spanwright.context import Function
    from spanwright.values import kind_name

    context = session.context
    names = {
        name: (f"a function of {', '.join(value.parameters)}" if isinstance(value, Function)
               else kind_name(value))
        for name, value in context.names.items()}
    return State(context.settings.n, context.settings.basis, context.parameters, names,
                 session.last_tag)


def local(folder: Path | None = None) -> Conversation:
    """A conversation with a fresh session in this process."""
    from spanwright.files import Folder

    return LocalConversation(Session(folder=Folder(folder or Path.cwd())))
