"""Colours: the styles of all that the shell shows, and the lexer that colours the line."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

from prompt_toolkit.document import Document
from prompt_toolkit.formatted_text import StyleAndTextTuples
from prompt_toolkit.lexers import Lexer
from prompt_toolkit.styles import Style

STYLE = Style.from_dict({
    "ring": "ansicyan",
    "mark": "ansicyan bold",
    "tag": "ansicyan",
    "message": "ansired",
    "caution": "ansiyellow",
    "hint": "ansigreen",
    "aside": "ansibrightblack",
    "bar": "ansibrightblack",
    "bar.word": "bold",
    "number": "",
    "name": "",
    "keyword": "bold",
    "family": "ansiblue",
    "operator": "ansimagenta",
    "function": "ansicyan",
    "parameter": "ansigreen",
    "string": "ansiyellow",
    "comment": "ansibrightblack",
    "result": "ansibrightblack",
    "punctuation": "",
    "invalid": "ansired underline",
    "completion-menu": "noreverse bg:default fg:default",
    "completion-menu.completion": "bg:default fg:default",
    "completion-menu.completion.current": "reverse",
    "completion-menu.meta.completion": "bg:default fg:ansibrightblack",
    "completion-menu.meta.completion.current": "bg:default fg:default bold",
    "scrollbar.background": "bg:ansibrightblack",
    "scrollbar.button": "bg:ansicyan",
    "search-toolbar": "noreverse",
    "search-toolbar.prompt": "ansicyan",
})  # fmt: skip

COLOURED_AT_MOST = 20_000
"""Longer texts are shown without colours: finding them would take longer than printing."""


@lru_cache(maxsize=64)
def coloured_lines(text: str) -> tuple[StyleAndTextTuples, ...]:
    """The lines of a text in styled pieces; long texts in one style."""
    if not text or len(text) > COLOURED_AT_MOST:
        return tuple([("", line)] for line in text.split("\n"))
    from spanwright import services

    lines: list[StyleAndTextTuples] = [[]]
    place = 0
    for kind, start, end in services.tokens(text):
        _append(lines, "", text[place:start])
        piece = text[start:end]
        # A string is open while it is typed; that is no fault yet.
        is_string = kind == "invalid" and piece.startswith('"')
        _append(lines, f"class:{'string' if is_string else kind}", piece)
        place = end
    _append(lines, "", text[place:])
    return tuple(lines)


def _append(lines: list[StyleAndTextTuples], style: str, text: str) -> None:
    first, *others = text.split("\n")
    if first:
        lines[-1].append((style, first))
    for line in others:
        lines.append([(style, line)] if line else [])


class LineLexer(Lexer):
    """Colours the entry by the language's own lexemes."""

    def lex_document(self, document: Document) -> Callable[[int], StyleAndTextTuples]:
        """The styled pieces of each line."""
        # The renderer splits at line feeds alone, and so do these lines.
        lines = coloured_lines(document.text)
        return lambda number: lines[number] if number < len(lines) else []
