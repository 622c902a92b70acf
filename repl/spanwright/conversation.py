"""The seam between what shows and what computes: text in, plain replies out.

Shell and command line know a session only as a `Conversation`; whether it runs in this process or
in another is none of their business. Importing this module loads neither kernel nor grammar.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any, Protocol

from spanwright.files import Folder
from spanwright.replies import Progress, Reply, State

if TYPE_CHECKING:
    from spanwright.session import Session


class Conversation(Protocol):
    """A session as those who show it see it."""

    def say(
        self, text: str, name: str = "<shell>",
        on_progress: Callable[[Progress], None] | None = None, *,
        is_recorded: bool = False, stops_at_first: bool = False,
    ) -> Iterator[Reply]:
        """Run all sentences of a text; the replies as they come, `on_progress` while they do not.

        An interrupt while a reply is awaited ends the sentence at hand and the text, not the
        session: the last reply is an error `stopped`. With `is_recorded` every reply has its
        record; with `stops_at_first` nothing behind the first sentence that fails is run.
        """
        ...

    def state(self) -> State:
        """What the session holds now."""
        ...

    def close(self) -> None:
        """End it."""
        ...


class LocalConversation:
    """A session in this very process: for systems without fork, and for tests."""

    def __init__(self, session: Session, *, is_digested: bool = False) -> None:
        self._session = session
        self._is_digested = is_digested

    def say(
        self, text: str, name: str = "<shell>",
        on_progress: Callable[[Progress], None] | None = None, *,
        is_recorded: bool = False, stops_at_first: bool = False,
    ) -> Iterator[Reply]:
        """Run all sentences of a text; an interrupt waits for the kernel call at hand."""
        from spanwright_grammar.source import Source

        outcomes = self._session.run_all(Source(text, name))
        while True:
            try:
                outcome = next(outcomes, None)
                if outcome is None:
                    return
                is_wanted = is_recorded or outcome.status == "error"
                reply = outcome.reply(
                    is_recorded=is_wanted, is_digested=self._is_digested)
            except KeyboardInterrupt:
                yield self._stopped(text)
                return
            yield reply
            if stops_at_first and reply.status != "ok":
                return

    def _stopped(self, text: str) -> Reply:
        number = self._session.n_sentences
        record = {"sentence": number, "line": 1, "source": text, "status": "error",
                  "code": "stopped", "message": "stopped", "column": 1, "hint": None,
                  "seconds": 0.0}
        return Reply(number, 1, 1, text, "error", "error", None, None, "", (), ("stopped",),
                     record, 0.0)

    def state(self) -> State:
        """What the session holds now."""
        return self._session.state()

    def close(self) -> None:
        """Nothing to end."""


def local(
    folder: Folder | None = None, *, means: dict[str, Any] | None = None,
    is_digested: bool = False, bounds: dict[str, Any] | None = None,
) -> Conversation:
    """A conversation on this machine, in an evaluator process where the system has fork.

    `means` says how many cases are run at once and by whom: the fields of `Means`, plain. With
    `is_digested` replies carry the digest that logs record. `bounds` are what no sentence may
    lift: the fields of `Bounds`, plain.
    """
    place = folder or Folder(Path.cwd())
    if hasattr(os, "fork"):
        from spanwright.process import ProcessConversation

        return ProcessConversation(
            place, means=means, is_digested=is_digested, bounds=bounds)
    from spanwright.session import Session
    from spanwright.settings import Bounds

    session = Session(folder=place, bounds=Bounds(**(bounds or {})))
    return LocalConversation(session, is_digested=is_digested)
