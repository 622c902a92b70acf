"""Reads one entry from the terminal: the line, the menu, what is wrong with it, the bar below."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from prompt_toolkit.application import Application
from prompt_toolkit.application.current import get_app
from prompt_toolkit.buffer import Buffer
from prompt_toolkit.filters import Condition, is_done
from prompt_toolkit.formatted_text import StyleAndTextTuples
from prompt_toolkit.history import History
from prompt_toolkit.layout import (
    ConditionalContainer,
    Dimension,
    Float,
    FloatContainer,
    HSplit,
    Layout,
    Window,
)
from prompt_toolkit.layout.controls import BufferControl, FormattedTextControl
from prompt_toolkit.layout.menus import CompletionsMenu
from prompt_toolkit.layout.processors import (
    HighlightIncrementalSearchProcessor,
    HighlightMatchingBracketProcessor,
    HighlightSelectionProcessor,
)
from prompt_toolkit.widgets import SearchToolbar

from spanwright.replies import State
from spanwright.shell.colouring import STYLE, LineLexer
from spanwright.shell.completing import MenuCompleter
from spanwright.shell.display import MARK, PLAIN_MARK, cells, fitting, prose, ring_text
from spanwright.shell.keys import key_bindings

MENU_ROWS = 8
SEARCH_BACKWARD = "earlier entry with: "
SEARCH_FORWARD = "later entry with: "
EMPTY_BAR = (
    "Tab what fits here · F1 explains · F2 house style · Ctrl-R earlier entries · "
    "Alt-Enter new line"
)
CHECKED_AT_MOST = 20_000
"""Characters; a longer entry is checked when it is run."""


class Prompt:
    """The line editor; one for the life of a shell."""

    def __init__(self, history: History) -> None:
        self.state = State(None, None, (), {}, 0)
        self._explains = False
        self._is_ready = False  # have the language's tables been loaded?
        self._seen: dict[str, Any] = {}
        self.buffer = Buffer(
            name="entry",
            completer=MenuCompleter(lambda: self.state),
            complete_while_typing=False,
            enable_history_search=True,
            history=history,
            multiline=True,
            accept_handler=self._accept,
        )
        self.application = self._application()

    def ask(self, state: State) -> str:
        """One entry; raises EOFError when the user leaves."""
        self.state = state
        self._seen.clear()
        self.buffer.reset()
        return self.application.run()

    def _accept(self, buffer: Buffer) -> bool:
        self._explains = False
        self.application.exit(result=buffer.text)
        return True  # the entry stays on the screen

    # the screen

    def _application(self) -> Application[str]:
        search = SearchToolbar(
            forward_search_prompt=SEARCH_FORWARD,
            backward_search_prompt=SEARCH_BACKWARD,
            ignore_case=True,
        )
        entry = Window(
            BufferControl(
                self.buffer,
                lexer=LineLexer(),
                search_buffer_control=search.control,
                preview_search=True,
                include_default_input_processors=False,
                input_processors=[
                    HighlightIncrementalSearchProcessor(),
                    HighlightSelectionProcessor(),
                    HighlightMatchingBracketProcessor(chars="[](){}"),
                ],
            ),
            height=self._entry_height,
            dont_extend_height=True,
            wrap_lines=True,
            get_line_prefix=self._line_prefix,
        )
        has_finding = Condition(lambda: bool(self._finding()))
        finding = _while_typing(
            Window(
                FormattedTextControl(self._finding), dont_extend_height=True, wrap_lines=True
            ),
            has_finding,
        )
        bar = _while_typing(
            Window(
                FormattedTextControl(self._bar),
                dont_extend_height=True,
                wrap_lines=Condition(lambda: self._explains),
                height=lambda: Dimension(min=1, max=12 if self._explains else 1),
            )
        )
        body = FloatContainer(
            HSplit([entry, finding, _while_typing(Window())]),
            floats=[
                Float(
                    xcursor=True,
                    ycursor=True,
                    content=CompletionsMenu(max_height=MENU_ROWS, scroll_offset=1),
                )
            ],
        )
        application: Application[str] = Application(
            layout=Layout(HSplit([body, search, bar]), focused_element=entry),
            style=STYLE,
            include_default_pygments_style=False,
            key_bindings=key_bindings(self.buffer, self._toggle_explanation),
        )
        application.after_render += self._load_language
        return application

    def _load_language(self, application: Application[str]) -> None:
        """Load what colours and checks the line, once the first prompt stands on the screen."""
        if self._is_ready or application.loop is None:
            return
        self._is_ready = True
        application.loop.call_soon(_warm_up)

    def _entry_height(self) -> Dimension:
        """Room for the menu while it is open."""
        if self.buffer.complete_state and not get_app().is_done:
            return Dimension(min=self.buffer.document.line_count + MENU_ROWS)
        return Dimension()

    def _mark(self) -> str:
        encoding = get_app().output.encoding()
        return MARK if encoding.lower().replace("-", "") == "utf8" else PLAIN_MARK

    def _line_prefix(self, line: int, wrapped: int) -> StyleAndTextTuples:
        ring, mark = ring_text(self.state), self._mark()
        if line == 0 and wrapped == 0:
            return [("class:ring", f"{ring} "), ("class:mark", mark), ("", " ")]
        return [("", " " * (cells(ring) + 3))]

    # what is known about the entry

    def _known(self, what: str, find: Callable[[str, int], Any]) -> Any:
        """A service's answer for the entry as it stands, asked once for each change."""
        if not self._is_ready:
            return None
        # The width counts too: what is found is laid out for it.
        width = get_app().output.get_size().columns
        key = (self.buffer.text, self.buffer.cursor_position, width)
        seen = self._seen.get(what)
        if seen is None or seen[0] != key:
            seen = self._seen[what] = (key, find(key[0], key[1]))
        return seen[1]

    def _finding(self) -> StyleAndTextTuples:
        """The first thing that is wrong, under its place where that fits."""
        if self.buffer.complete_state or not self.buffer.text.strip():
            return []
        found: StyleAndTextTuples | None = self._known("finding", self._find_finding)
        return found or []

    def _find_finding(self, text: str, offset: int) -> StyleAndTextTuples:
        if len(text) > CHECKED_AT_MOST:
            return []
        from spanwright import services

        found = services.diagnostics_while_typing(text, offset, self.state)
        if not found:
            return []
        first = found[0]
        style = "class:message" if first.severity == "error" else "class:caution"
        hint: StyleAndTextTuples = [
            ("class:hint", f"   try: {first.hints[0]}")] if first.hints else []
        prefix = cells(ring_text(self.state)) + 3
        before, marked = text[: first.span.start], text[first.span.start : first.span.end]
        columns = get_app().output.get_size().columns
        # The caret can stand under the place only on a last line that is not wrapped.
        place = prefix + cells(before.rpartition("\n")[2])
        last_line = text.rpartition("\n")[2]
        is_below = "\n" not in text[first.span.start :] and prefix + cells(last_line) < columns
        if is_below:
            caret = "^" + "~" * (max(1, cells(marked)) - 1)
            if place + len(caret) + 1 + len(first.message) <= columns:
                return [("", " " * place), (style, f"{caret} {first.message}"), *hint]
            return [("", " " * place), (style, f"{caret}\n{first.message}"), *hint]
        line = before.count("\n") + 1
        column = len(before.rpartition("\n")[2]) + 1
        return [(style, f"line {line}, column {column}: {first.message}"), *hint]

    def _bar(self) -> StyleAndTextTuples:
        """The signature of the word at the cursor, or all about it after F1."""
        if not self.buffer.text.strip():
            return [("class:bar", EMPTY_BAR)]
        if self._explains:
            text: str | None = self._known("hover", self._find_hover)
            return [("class:bar", text or "no word of the language stands at the cursor")]
        found: StyleAndTextTuples | None = self._known("signature", self._find_signature)
        return found or []

    def _find_hover(self, text: str, offset: int) -> str | None:
        from spanwright import services

        found = services.hover(text, offset, self.state)
        if found is None:
            return None
        return "\n".join(prose(found.text, get_app().output.get_size().columns))

    def _find_signature(self, text: str, offset: int) -> StyleAndTextTuples:
        from spanwright import services

        found = services.signature(text, offset, self.state)
        if found is None:
            return []
        part = f"   part {found.part}" if found.part > 1 else ""
        room = get_app().output.get_size().columns - 1 - cells(part)
        label = fitting(found.label, room)
        meaning = fitting(f": {found.meaning}", room - cells(label))
        return [("class:bar.word", label), ("class:bar", meaning), ("class:bar.word", part)]

    def _toggle_explanation(self) -> None:
        self._explains = not self._explains


def _while_typing(content: Window, condition: Condition | None = None) -> ConditionalContainer:
    """A part of the screen that goes when the entry is finished."""
    shown = ~is_done if condition is None else ~is_done & condition
    return ConditionalContainer(content, filter=shown)


def _warm_up() -> None:
    """Read the grammar's tables before the first key needs them."""
    from spanwright import services

    services.is_incomplete("x_1 +")
