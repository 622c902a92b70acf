"""What the keys do beyond plain editing."""

from __future__ import annotations

from collections.abc import Callable

from prompt_toolkit.application.current import get_app
from prompt_toolkit.buffer import Buffer
from prompt_toolkit.completion import CompleteEvent, get_common_complete_suffix
from prompt_toolkit.document import Document
from prompt_toolkit.filters import Condition, has_focus
from prompt_toolkit.key_binding import KeyBindings, KeyPressEvent

STEP = 2
"""Columns by which an open bracket or block moves the next line in."""
SET_RIGHT_AT_MOST = 100_000
"""Characters; a longer entry stays as it is."""


def key_bindings(buffer: Buffer, toggle_explanation: Callable[[], None]) -> KeyBindings:
    """The shell's own keys, for an entry in the buffer."""
    keys = KeyBindings()
    in_entry = has_focus(buffer)
    is_empty = Condition(lambda: not buffer.text)
    menu_is_chosen = Condition(
        lambda: buffer.complete_state is not None
        and buffer.complete_state.current_completion is not None
    )

    @keys.add("enter", filter=in_entry & menu_is_chosen)
    def _(event: KeyPressEvent) -> None:
        # The chosen proposal stands in the line already: the menu closes, nothing is run.
        buffer.complete_state = None

    @keys.add("enter", filter=in_entry & ~menu_is_chosen)
    def _(event: KeyPressEvent) -> None:
        if asks_for_more(buffer.text):
            add_line(buffer)
        else:
            buffer.validate_and_handle()

    @keys.add("escape", "enter", filter=in_entry)
    def _(event: KeyPressEvent) -> None:
        add_line(buffer)

    @keys.add("tab", filter=in_entry)
    def _(event: KeyPressEvent) -> None:
        if buffer.complete_state:
            buffer.complete_next()
        else:
            complete(buffer)

    @keys.add("s-tab", filter=in_entry)
    def _(event: KeyPressEvent) -> None:
        if buffer.complete_state:
            buffer.complete_previous()

    @keys.add("c-c", filter=in_entry)
    def _(event: KeyPressEvent) -> None:
        buffer.save_to_undo_stack()
        buffer.text = ""
        buffer.complete_state = None

    @keys.add("c-d", filter=in_entry & is_empty)
    def _(event: KeyPressEvent) -> None:
        get_app().exit(exception=EOFError)

    @keys.add("f1")
    def _(event: KeyPressEvent) -> None:
        toggle_explanation()

    @keys.add("f2", filter=in_entry)
    def _(event: KeyPressEvent) -> None:
        set_right(buffer)

    @keys.add("<bracketed-paste>", filter=in_entry)
    def _(event: KeyPressEvent) -> None:
        pasted = event.data.replace("\r\n", "\n").replace("\r", "\n")
        is_alone = not buffer.text.strip()
        buffer.insert_text(pasted)
        # a block on its own; what is pasted into a sentence stays as it is
        if is_alone and "\n" in pasted.strip("\n"):
            set_right(buffer)

    return keys


def set_right(buffer: Buffer) -> None:
    """Bring the entry into house style, as one step that can be undone; the cursor stays with what
    it stood behind."""
    if len(buffer.text) > SET_RIGHT_AT_MOST:
        return
    from spanwright import services

    before, offset = buffer.text, buffer.cursor_position
    after = services.house_style(before)
    if after == before:
        return
    # only spaces and line ends come and go: the cursor stands behind as many other signs as before
    n_signs = len("".join(before[:offset].split()))
    place = 0
    while n_signs and place < len(after):
        n_signs -= not after[place].isspace()
        place += 1
    buffer.save_to_undo_stack()
    buffer.complete_state = None
    buffer.document = Document(after, len(after) if offset == len(before) else place)


def complete(buffer: Buffer) -> None:
    """Write what all proposals have in common; open the menu when there are several.

    The text is written at once, not by a task: keys that follow come after it.
    """
    asked = CompleteEvent(completion_requested=True)
    document = buffer.document
    found = list(buffer.completer.get_completions(document, asked))
    if len(found) == 1:
        buffer.apply_completion(found[0])
    elif found:
        common = get_common_complete_suffix(document, found)
        if common:
            buffer.insert_text(common)
        buffer.start_completion()


def asks_for_more(text: str) -> bool:
    """Does the entry go on in another line? An empty last line always ends it."""
    if not text.strip():
        return False
    if "\n" in text and not text.rpartition("\n")[2].strip():
        return False
    from spanwright import services

    return services.is_incomplete(text)


def add_line(buffer: Buffer) -> None:
    """Break the line at the cursor; the new one stands under the old, or further in."""
    line = buffer.document.current_line_before_cursor
    indent = len(line) - len(line.lstrip(" "))
    content = line.strip()
    n_open = sum(content.count(sign) for sign in "([{") - sum(
        content.count(sign) for sign in ")]}"
    )
    if n_open > 0 or content.endswith(":"):
        indent += STEP
    elif n_open < 0:
        indent = max(0, indent - STEP)
    buffer.insert_text("\n" + " " * indent)
