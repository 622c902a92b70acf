"""The completion menu: proposals of the services, shown with their meanings, only when asked."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from prompt_toolkit.completion import CompleteEvent, Completer, Completion
from prompt_toolkit.document import Document

from spanwright.replies import State

MEANING_WIDTH = 60


class MenuCompleter(Completer):
    """Asks the services; text that is typed or pasted never opens the menu, a key does."""

    def __init__(self, state: Callable[[], State]) -> None:
        self._state = state

    def get_completions(
        self, document: Document, complete_event: CompleteEvent
    ) -> Iterable[Completion]:
        """The proposals at the cursor."""
        if not complete_event.completion_requested:
            return
        from spanwright import services

        offset = document.cursor_position
        for found in services.complete(document.text, offset, self._state()):
            meaning = found.meaning
            if len(meaning) > MEANING_WIDTH:
                meaning = f"{meaning[: MEANING_WIDTH - 2].rstrip()} …"
            yield Completion(
                found.insert,
                start_position=found.start - offset,
                display=found.label,
                display_meta=meaning,
            )
