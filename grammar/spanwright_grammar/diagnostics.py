"""What can be wrong with a text: the record, the codes, and the printed form with a caret."""

from __future__ import annotations

import unicodedata
from dataclasses import dataclass
from typing import Literal

from spanwright_grammar.source import Source, Span

Severity = Literal["error", "warning", "information"]

CODES: dict[str, str] = {
    # Found by the parser.
    "unexpected-text": "Something stands where the language allows something else.",
    "unexpected-end": "The sentence ends before it is complete.",
    "missing-bracket": "An opened bracket is never closed.",
    "unmatched-bracket": "A closing bracket closes nothing, or the wrong bracket.",
    "unclosed-string": "A string has no closing quotation mark on its line.",
    "unclosed-block": "A block has no `end`.",
    "end-without-block": "An `end` closes no block.",
    "nesting-too-deep": "Brackets or prefixes are nested more deeply than the limit.",
    "input-too-long": "A sentence is longer than the limit.",
    "number-too-long": "A number has more digits than the limit.",
    "invalid-character": "A character has no meaning in the language.",
    "unknown-symbol": "A backslash is followed by a word that names no symbol of the language.",
    "decimal-number": "A number has a decimal point; numbers are exact.",
    "chained-comparison": "Comparisons stand side by side without `and`.",
    "chained-power": "Powers stand on each other without parentheses.",
    "reserved-word": "A word of the language stands where a name is due.",
    # Found when a sentence is checked or run.
    "no-rule-known": "The sentence has a meaning, but no rule is known here that carries it out.",
    "unknown-name": "A name is not defined.",
    "unknown-setting": "A `fix` names no setting.",
    "unknown-form": "A `show` or `write` names no form.",
    "unknown-topic": "There is no help under this word.",
    "name-taken": "A definition would hide a word of the language.",
    "not-a-function": "Something that is not a function is applied to arguments.",
    "wrong-number-of-arguments": "A function is given too many or too few arguments.",
    "wrong-kind": "A value is of another kind than the operation needs.",
    "wrong-number-of-parts": "An index has another number of parts than the ring has variables.",
    "position-out-of-range": "A position lies outside 1..n.",
    "ring-not-fixed": "The number of variables is not fixed yet.",
    "setting-out-of-range": "A setting is given a value that it cannot take.",
    "division-by-zero": "Something is divided by zero.",
    "not-a-unit": "The inverse of something that has none is asked for.",
    "not-an-integer": "An integer is needed.",
    "not-a-permutation": "A list of numbers is no permutation in one-line form.",
    "not-a-partition": "The parts of an index do not weakly decrease.",
    "negative-part": "An index has a negative part where the family allows none.",
    "not-symmetric": "A polynomial is not symmetric where a symmetric one is needed.",
    "not-in-span": "Something does not lie in the span of the basis that is asked for.",
    "cannot-combine": "No algebra here holds both operators.",
    "not-an-eigenvector": "An element is no eigenvector of the operator.",
    "pole": "A value does not exist at the point that is asked for.",
    "unbound-parameter": "A scalar contains a parameter that is not declared.",
    "too-large": "A result would be too large to compute.",
    "over-budget": "A sentence reached its limit of time, terms or memory.",
    "stopped": "A sentence was stopped on request.",
    "workers-lost": "The processes that worked on the cases of a sentence went away.",
    "claim-failed": "A claimed identity does not hold.",
    "undecided": "Whether an identity holds could not be decided.",
    "unreadable-file": "A file cannot be read.",
    "unwritable-file": "A file cannot be written.",
    "outside-folder": "A path leads outside the folder of the script.",
    "circular-use": "A script uses itself, directly or through others.",
    "unused-name": "A name is defined and never used.",
    "hidden-name": "A bound name hides a definition.",
    "internal-error": "The program failed; the fault is not the user's.",
}

MAX_COLUMNS = 100
MAX_MESSAGE = 800
"""A longer message is cut in the middle."""
MAX_HINT = 400
"""A longer hint is left out: half of what would be right is wrong."""
TAB_WIDTH = 4


@dataclass(frozen=True, slots=True)
class Diagnostic:
    """One finding: how grave, which kind (a key of `CODES`), where, and what would be right."""

    severity: Severity
    code: str
    span: Span
    message: str
    hints: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        # names and indices of any length may stand in a message
        if len(self.message) > MAX_MESSAGE:
            cut = f"{self.message[: MAX_MESSAGE // 2]} … {self.message[-MAX_MESSAGE // 4 :]}"
            object.__setattr__(self, "message", cut)
        if any(len(hint) > MAX_HINT for hint in self.hints):
            kept = tuple(hint for hint in self.hints if len(hint) <= MAX_HINT)
            object.__setattr__(self, "hints", kept)


def error(code: str, span: Span, message: str, *hints: str) -> Diagnostic:
    """A diagnostic of severity `error`."""
    return Diagnostic("error", code, span, message, hints)


def _cell_width(character: str) -> int:
    """The columns that a terminal gives to a character."""
    if character == "\t":
        return TAB_WIDTH
    if unicodedata.combining(character) or unicodedata.category(character) == "Cf":
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1


def _shown(character: str) -> str:
    """A character as it is safe to print: no control sequences, tabs as spaces."""
    if character == "\t":
        return " " * TAB_WIDTH
    return character if character.isprintable() or _cell_width(character) == 0 else "\ufffd"


def format_diagnostic(source: Source, diagnostic: Diagnostic) -> str:
    """The finding with its line and a caret below; at most `MAX_COLUMNS` columns of the line.

    >>> found = error("wrong-number-of-parts", Span(4, 11), "E_(1,0) has 2 parts", "E_(1,0,0)")
    >>> print(format_diagnostic(Source("x_2 E_(1,0)"), found))
    line 1, column 5: E_(1,0) has 2 parts
      x_2 E_(1,0)
          ^~~~~~~
      try: E_(1,0,0)
    """
    line, column = source.position(diagnostic.span.start)
    text = source.line_text(line)
    start = min(column - 1, len(text))
    length = max(1, min(diagnostic.span.end - diagnostic.span.start, len(text) - start))
    room = MAX_COLUMNS - 2 - 2 * len("… ")
    left, right = 0, len(text)
    if sum(map(_cell_width, text[: room + 1])) > room or len(text) > room:
        # Two thirds of the window lie before the caret, unless the line starts or ends inside it.
        left, used = start, 0
        while left > 0 and used + _cell_width(text[left - 1]) <= room * 2 // 3:
            left -= 1
            used += _cell_width(text[left])
        right = start
        while right < len(text) and used + _cell_width(text[right]) <= room:
            used += _cell_width(text[right])
            right += 1
        while left > 0 and used + _cell_width(text[left - 1]) <= room:
            left -= 1
            used += _cell_width(text[left])
    before = "… " if left > 0 else ""
    after = " …" if right < len(text) else ""
    shown = "".join(map(_shown, text[left:right]))
    indent = len(before) + sum(map(_cell_width, text[left:start]))
    marked = sum(map(_cell_width, text[start : min(start + length, right)]))
    rows = [
        f"line {line}, column {column}: {diagnostic.message}",
        f"  {before}{shown}{after}".rstrip(),
        f"  {' ' * indent}^{'~' * (marked - 1)}",
    ]
    rows.extend(f"  try: {hint}" for hint in diagnostic.hints)
    return "\n".join(rows)
