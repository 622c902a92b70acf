"""Replies set on the screen: tags flush right, long results broken at signs and cut with a count.

Everything is lines of styled pieces; nothing here writes.
"""

from __future__ import annotations

import textwrap
import unicodedata
from bisect import bisect_right
from itertools import accumulate, islice, zip_longest
from typing import NamedTuple

from spanwright.rendering.wrapping import CONTINUED, broken
from spanwright.replies import Progress, Reply, State

Piece = tuple[str, str]
"""A style and a text."""
Line = list[Piece]

INDENT = 2
LEAST_ROWS = 8
ROWS_LEFT_FREE = 6
LONGEST_SENTENCE = 50
MARK = "∋"
PLAIN_MARK = ":"

# Values that may be cut, because `show eq_… as text` or `show f as text` shows the whole.
_CUT_KINDS = frozenset({"expansion", "scalar", "list", "operator", "index", "definition"})
_PROSE_KINDS = frozenset({"help", "remark"})
_SHOWN_PARAMETERS = 4


class Screen(NamedTuple):
    """The room there is."""

    columns: int = 80
    rows: int = 24


# --- The prompt ----------------------------------------------------------------------------------


def ring_text(state: State) -> str:
    """The ambient ring as it stands in the prompt.

    >>> ring_text(State(3, "E", ("a",), {}, 0))
    'Q(q,t,a)[x_1..x_3], in E'
    """
    own = state.parameters
    if len(own) > _SHOWN_PARAMETERS:
        own = (*own[:_SHOWN_PARAMETERS], "…")
    n = state.n
    if n is None:
        variables = "x_1..x_n"
    elif n <= 2:
        variables = ",".join(f"x_{j}" for j in range(1, n + 1))
    else:
        variables = f"x_1..x_{n}"
    ring = f"Q({','.join(('q', 't', *own))})[{variables}]"
    if n is None:
        ring += ", n free"
    if state.basis is not None:
        ring += f", in {state.basis}"
    return ring


def greeting(version: str) -> Line:
    """The one line that the shell opens with."""
    return [
        ("bold", f"Spanwright {version}   "),
        ("class:aside", "fix n = 3 sets the ring · Tab proposes · help explains · Ctrl-D leaves"),
    ]


def progress_text(progress: Progress) -> str:
    """What stands below the entry while a sentence runs."""
    # what is being done: the latest report, else the sentence itself
    doing = progress.reached or " ".join(progress.sentence.split())[:LONGEST_SENTENCE]
    reached = f" · {doing}" if doing else ""
    return f"{' ' * INDENT}{elapsed(progress.seconds)}{reached} · Ctrl-C stops this sentence"


def elapsed(seconds: float) -> str:
    """A time in words: 4 s, 2 min 5 s."""
    minutes, rest = divmod(int(seconds), 60)
    return f"{minutes} min {rest} s" if minutes else f"{rest} s"


# --- Replies -------------------------------------------------------------------------------------


def reply_lines(reply: Reply, screen: Screen) -> list[Line]:
    """One reply, ready for a screen of this size."""
    if reply.status == "error":
        return [
            line
            for message in reply.messages
            for line in _message_lines(message, screen.columns)
        ]
    if not reply.text:
        return []
    if reply.kind in _CUT_KINDS or reply.status == "failed" or reply.kind == "truth":
        lines = _value_lines(reply, screen)
    elif reply.kind in _PROSE_KINDS:
        lines = [[("", row)] for row in prose(reply.text, screen.columns - INDENT)]
    else:
        lines = [[("", row)] for row in reply.text.split("\n")]
    lines = [[("", " " * INDENT), *line] if line else line for line in lines]
    if reply.tag is not None:
        _set_tag(lines, f"({reply.tag})", screen.columns)
    asides = [reply.note] if reply.note else []
    if reply.seconds >= 1:
        asides.append(elapsed(reply.seconds))
    if asides:
        lines.append([("class:aside", f"{' ' * INDENT}{' · '.join(asides)}")])
    return lines


def _message_lines(message: str, columns: int) -> list[Line]:
    """A diagnostic: what is wrong, the line with its caret, what would be right."""
    rows = message.split("\n")
    lines: list[Line] = [[("class:message", row)] for row in prose(rows[0], columns)]
    for row, following in zip_longest(rows[1:], rows[2:], fillvalue=""):
        if following.lstrip().startswith("^"):
            lines += _with_caret(row, following, columns)
        elif row.startswith("  try: "):
            lines.append([("", "  try: "), ("class:hint", row.removeprefix("  try: "))])
        elif not row.lstrip().startswith("^"):
            lines.append([("", row)])
    return lines


def _with_caret(row: str, carets: str, columns: int) -> list[Line]:
    """A line of source and its caret, both cut so that neither wraps and the caret is seen."""
    start = len(carets) - len(carets.lstrip())
    if cells(row) > columns:
        hidden = max(0, min(start - columns // 2, len(row) - columns + 4))
        if hidden:
            row, carets = f"  … {row[hidden + 4 :]}", carets[hidden:]
        row, carets = fitting(row, columns), carets[:columns]
    return [[("", row)], [("class:message", carets)]]


def _value_lines(reply: Reply, screen: Screen) -> list[Line]:
    tag_width = len(f"({reply.tag})") + 2 if reply.tag is not None else 0
    width = max(20, screen.columns - INDENT - tag_width)
    is_cut = bool(_name_of(reply)) or reply.status == "failed"
    limit = max(LEAST_ROWS, screen.rows - ROWS_LEFT_FREE) if is_cut else None
    rows = list(islice(broken(reply.text, width), limit))
    texts = [row for row, _ in rows]
    shown = rows[-1][1]
    if reply.status == "failed":
        lines: list[Line] = [[("class:message", texts[0])], *_coloured(texts[1:])]
    else:
        lines = _coloured(texts)
    if shown < len(reply.text):
        lines.append([("class:aside", _hidden(reply, shown))])
    return lines


def _name_of(reply: Reply) -> str:
    """How a result is called later: by its tag, or by the name that it was given."""
    if reply.tag is not None:
        return f"eq_{reply.tag}"
    name, is_value, _ = reply.text.partition(" = ")
    return name if reply.kind == "definition" and is_value and name.isidentifier() else ""


def _coloured(rows: list[str]) -> list[Line]:
    from spanwright.shell.colouring import coloured_lines

    return [[(piece[0], piece[1]) for piece in line] for line in coloured_lines("\n".join(rows))]


def _hidden(reply: Reply, shown: int) -> str:
    """What has been cut off, and how to see it."""
    name = _name_of(reply)
    all_of_it = f"; all of it: show {name} as text" if name else ""
    if not reply.terms:
        return f"… {len(reply.text) - shown:,} more characters{all_of_it}"
    ends = list(accumulate((len(term) + 1 for term in reply.terms), initial=-1))[1:]
    n_shown = bisect_right(ends, shown)
    n_hidden = len(reply.terms) - n_shown
    if n_shown == 0:
        return f"… the first of {len(reply.terms):,} terms goes on{all_of_it}"
    more = "1 more term" if n_hidden == 1 else f"{n_hidden:,} more terms"
    return f"… {more} of {len(reply.terms):,}{all_of_it}"


def _set_tag(lines: list[Line], tag: str, columns: int) -> None:
    """The tag flush right on the last line that has room for it, as equation numbers stand."""
    used = sum(cells(text) for _, text in lines[-1]) if lines else columns
    if used + 2 + len(tag) <= columns:
        lines[-1] = [*lines[-1], ("", " " * (columns - used - len(tag))), ("class:tag", tag)]
    else:
        lines.append([("", " " * (columns - len(tag))), ("class:tag", tag)])


def prose(text: str, width: int) -> list[str]:
    """Text in lines that fit; a line that goes on keeps its indentation, and two columns more."""
    rows: list[str] = []
    for line in text.split("\n"):
        lead = line[: len(line) - len(line.lstrip())] + CONTINUED
        rows += textwrap.wrap(
            line, max(30, width), subsequent_indent=lead, break_long_words=False,
            break_on_hyphens=False, drop_whitespace=True,
        ) or [""]  # fmt: skip
    return rows


# --- Widths ---------------------------------------------------------------------------------------


def cells(text: str) -> int:
    """The columns that a terminal gives to a text."""
    if text.isascii():
        return len(text)
    return sum(
        0
        if unicodedata.combining(character)
        else 2 if unicodedata.east_asian_width(character) in "WF" else 1
        for character in text
    )


def fitting(text: str, columns: int) -> str:
    """The text, cut with an ellipsis when it is wider than that."""
    if cells(text) <= columns:
        return text
    kept, used = "", 0
    for character in text:
        used += cells(character)
        if used > columns - 2:
            break
        kept += character
    return f"{kept.rstrip()} …"
