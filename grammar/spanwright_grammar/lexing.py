"""Text to lexemes: folds the spellings of one symbol together, and tells what each bracket does.

Nothing here fails: what has no meaning becomes a lexeme of type `INVALID`. Offsets are those of the
text as typed, because folding replaces single characters by single characters.
"""

from __future__ import annotations

import re
import unicodedata
from typing import NamedTuple

GREEK_LETTERS: dict[str, str] = {
    "α": "alpha", "β": "beta", "γ": "gamma", "δ": "delta", "ε": "epsilon", "ζ": "zeta",
    "η": "eta", "θ": "theta", "ι": "iota", "κ": "kappa", "λ": "lambda", "μ": "mu",
    "ν": "nu", "ξ": "xi", "π": "pi", "ρ": "rho", "σ": "sigma", "ς": "sigma", "τ": "tau",
    "υ": "upsilon", "φ": "phi", "χ": "chi", "ψ": "psi", "ω": "omega",
    "Γ": "Gamma", "Δ": "Delta", "Θ": "Theta", "Λ": "Lambda", "Ξ": "Xi", "Π": "Pi",
    "Σ": "Sigma", "Φ": "Phi", "Ψ": "Psi", "Ω": "Omega",
}  # fmt: skip
SYMBOL_WORDS: dict[str, str] = {**GREEK_LETTERS, "∂": "d", "∞": "infinity"}

# The TeX names of the same symbols, and of the signs that have no letter.
TEX_WORDS: dict[str, str] = {
    **{word: word for word in GREEK_LETTERS.values()},
    "varepsilon": "epsilon", "varphi": "phi", "vartheta": "theta", "varrho": "rho",
    "partial": "d", "infty": "infinity", "sum": "sum", "prod": "prod",
}  # fmt: skip
TEX_SIGNS: dict[str, str] = {
    "cdot": "*", "to": "->", "rightarrow": "->", "le": "<=", "leq": "<=", "ge": ">=",
    "geq": ">=", "ne": "!=", "neq": "!=", "in": "in",
}  # fmt: skip

SIGNS: dict[str, str] = {
    "·": "*", "⋅": "*", "−": "-", "→": "->", "≠": "!=", "≤": "<=", "≥": ">=", "∈": "in",
    "∑": "sum", "∏": "prod",
}  # fmt: skip

SIGN_TYPES: dict[str, str] = {
    "+": "PLUS", "-": "MINUS", "*": "STAR", "/": "SLASH", "^": "CARET", "=": "EQUAL",
    "!=": "COMPARE", "<": "COMPARE", "<=": "COMPARE", ">": "COMPARE", ">=": "COMPARE",
    "|": "PIPE", "(": "LPAR", ")": "RPAR", "{": "LBRACE", "}": "RBRACE", "[": "LBRACKET",
    "]": "RBRACKET", ",": "COMMA", ";": "SEMICOLON", ":": "COLON", "_": "UNDERSCORE",
    "..": "RANGE", "->": "ARROW",
}  # fmt: skip

# Words that open a sentence and cannot stand inside an expression.
SENTENCE_WORDS = (
    "fix", "let", "expand", "claim", "for", "find", "tabulate", "derive", "draw", "show", "write",
    "use", "recall", "forget", "remark", "help", "quit", "guess", "end",
)  # fmt: skip
INNER_WORDS = (
    "be", "in", "where", "at", "as", "to", "and", "or", "not", "read", "parameter", "parameters",
)  # fmt: skip
KEYWORDS: dict[str, str] = {word: word.upper() for word in SENTENCE_WORDS + INNER_WORDS}

_GREEK = "".join(SYMBOL_WORDS)
_LEXEME = re.compile(
    rf"""(?P<SPACE>[ \t\f\v\ufeff]+)
    |(?P<NAME>[A-Za-z][A-Za-z0-9]*)
    |(?P<NUMBER>[0-9]+)
    |(?P<SIGN>\.\.|->|<=|>=|!=|[-+*/^=<>|(){{}}\[\],;:_·⋅−→≠≤≥∈∑∏])
    |(?P<NEWLINE>\r\n|\n|\r)
    |(?P<SYMBOL>[{_GREEK}][0-9]*)
    |(?P<TEX>\\[A-Za-z]+[0-9]*)
    |(?P<STRING>"(?:[^"\\\r\n]|\\[^\r\n])*")
    |(?P<OPEN_STRING>"[^\r\n]*)
    |(?P<COMMENT>\#[^\r\n]*)
    |(?P<INVALID>[\s\S])""",
    re.VERBOSE,
)

MAX_LINE_LENGTH = 10**6  # a longer line is one invalid lexeme, found without a look inside
_LONG_LINE = re.compile(rf"[^\r\n]{{{MAX_LINE_LENGTH + 1},}}")

OPENERS = {"LPAR": "RPAR", "LBRACE": "RBRACE", "LBRACKET": "RBRACKET"}
CLOSERS = {"RPAR": "LPAR", "RBRACE": "LBRACE", "RBRACKET": "LBRACKET"}


_VERBATIM = frozenset({"STRING", "OPEN_STRING", "COMMENT"})  # never folded


class Lexeme(NamedTuple):
    """A stretch of text: its type, its canonical spelling, and where it stands."""

    type: str
    text: str
    start: int
    end: int


class _Fold(dict[int, str]):
    """Characters whose compatibility form (NFKC) is one character of the language, on demand."""

    def __missing__(self, code: int) -> str:
        character = chr(code)
        folded = character
        # Superscripts and subscripts are "compatible" with plain digits, and mean something else.
        if code > 127 and not unicodedata.decomposition(character).startswith(("<su", "<fr")):
            normal = unicodedata.normalize("NFKC", character)
            if len(normal) == 1 and (normal.isascii() or normal in SYMBOL_WORDS):
                folded = normal
            elif character.isspace() and character not in "\x85\u2028\u2029":
                folded = " "
        self[code] = folded
        return folded


_FOLD = _Fold()


def fold(text: str) -> str:
    """The text with compatible letters made plain, of the same length: 𝑥 is x, µ (micro) is μ."""
    return text if text.isascii() else text.translate(_FOLD)


def scan(text: str) -> list[Lexeme]:
    """All lexemes of a text in order, spaces left out."""
    lexemes: list[Lexeme] = []
    start = 0
    if len(text) > MAX_LINE_LENGTH:
        for line in _LONG_LINE.finditer(text):
            _scan_part(text[start : line.start()], start, lexemes)
            lexemes.append(Lexeme("INVALID", "", line.start(), line.end()))
            start = line.end()
    _scan_part(text[start:], start, lexemes)
    return lexemes


def _scan_part(text: str, offset: int, lexemes: list[Lexeme]) -> None:
    """Append the lexemes of a part of a text that begins at the offset."""
    append = lexemes.append
    folded = fold(text)
    make = Lexeme._make
    for found in _LEXEME.finditer(folded):
        kind = found.lastgroup
        if kind == "SPACE":
            continue
        start, end = found.span()
        word = found.group()
        shown = text[start:end] if kind in _VERBATIM else word
        start += offset
        end += offset
        if kind == "NAME":
            append(make((KEYWORDS.get(word, "NAME"), word, start, end)))
        elif kind == "SIGN":
            if word in SIGNS:
                word = SIGNS[word]
                sign_type = SIGN_TYPES.get(word) or ("IN" if word == "in" else "NAME")
                append(make((sign_type, word, start, end)))
            else:
                append(make((SIGN_TYPES[word], word, start, end)))
        elif kind == "SYMBOL":
            append(make(("NAME", SYMBOL_WORDS[word[0]] + word[1:], start, end)))
        elif kind == "TEX":
            append(_tex_lexeme(word, start, end))
        else:
            append(make((kind or "INVALID", shown, start, end)))


def _tex_lexeme(word: str, start: int, end: int) -> Lexeme:
    name = word[1:].rstrip("0123456789")
    digits = word[1 + len(name) :]
    if name in TEX_WORDS:
        return Lexeme("NAME", TEX_WORDS[name] + digits, start, end)
    if name in TEX_SIGNS and not digits:
        sign = TEX_SIGNS[name]
        return Lexeme(SIGN_TYPES.get(sign, "IN"), sign, start, end)
    return Lexeme("INVALID", word, start, end)


_CLEARS_SUBSTITUTION = frozenset({"IN", "FOR", "WHERE", "AND", "OR", "NOT", "COLON"})
_ENDS_OPERAND = frozenset({"NAME", "NUMBER", "STRING", "RPAR", "RBRACE", "PIPE_CLOSE"})


class _Frame:
    """What `assign_roles` knows about one open bracket, or about the sentence itself."""

    __slots__ = ("comma", "has_at", "opener", "pipes_left", "role", "sizes")

    def __init__(self, opener: int, role: str) -> None:
        self.opener = opener
        self.role = role  # "subscript" or anything else
        self.has_at = False
        self.comma = -1  # a comma behind `at` that may go on to another substitution
        self.sizes = 0  # opened and not yet closed `|`
        self.pipes_left = 0


def assign_roles(lexemes: list[Lexeme]) -> list[Lexeme]:
    """One sentence's lexemes with the types that depend on what stands around them.

    - `(` directly behind a name opens a call: `CALL`.
    - `(` behind a subscripted name opens a pair of alphabets when a `;` stands in it: `ALPHABETS`.
    - `,` between two substitutions of one `at` is `NEXT`.
    - `|` opens a size, closes it, or stands before a basement: `PIPE_OPEN`, `PIPE_CLOSE`, `BAR`.
    - `sum` and `prod` before `_` are `BIG`; the word behind `fix` is always a name; `a` in
      `be a parameter` is `ARTICLE`; everything behind `help` is one `TOPIC`.

    The brackets must match.
    """
    if lexemes and lexemes[0].type == "HELP" and len(lexemes) > 1:
        return [lexemes[0], Lexeme("TOPIC", "", lexemes[1].start, lexemes[-1].end)]
    result = list(lexemes)
    frames = [_Frame(-1, "")]
    pipes = _pipes_per_frame(lexemes)
    if pipes:
        frames[0].pipes_left = pipes.get(-1, 0)
    ends_subscript = False  # does the lexeme before this one end a subscript?
    previous = Lexeme("", "", -1, -1)
    for position, lexeme in enumerate(lexemes):
        kind = lexeme.type
        frame = frames[-1]
        ended_subscript, ends_subscript = ends_subscript, False
        if kind == "NAME" or kind == "NUMBER":
            if previous.type == "UNDERSCORE":
                ends_subscript = True
            elif (
                kind == "NAME"
                and lexeme.text in ("sum", "prod")
                and position + 1 < len(lexemes)
                and lexemes[position + 1].type == "UNDERSCORE"
            ):
                result[position] = lexeme._replace(type="BIG")
            elif (
                kind == "NAME"
                and previous.type == "BE"
                and lexeme.text in ("a", "an")
                and position + 1 < len(lexemes)
                and lexemes[position + 1].type.startswith("PARAMETER")
            ):
                result[position] = lexeme._replace(type="ARTICLE")
        elif kind in OPENERS:
            role = ""
            if previous.type == "UNDERSCORE":
                role = "subscript"
            elif kind == "LPAR" and ended_subscript:
                role = "behind subscript"
            elif kind == "LPAR" and previous.type == "NAME" and previous.end == lexeme.start:
                result[position] = lexeme._replace(type="CALL")
            frames.append(_Frame(position, role))
            if pipes:
                frames[-1].pipes_left = pipes.get(position, 0)
        elif kind in CLOSERS:
            if len(frames) > 1:
                ends_subscript = frames.pop().role == "subscript"
        elif kind == "COMMA":
            frame.comma = position if frame.has_at else -1
        elif kind == "EQUAL":
            if frame.comma >= 0:
                result[frame.comma] = result[frame.comma]._replace(type="NEXT")
                frame.comma = -1
        elif kind == "AT":
            frame.has_at = True
            frame.comma = -1
        elif kind == "SEMICOLON":
            if frame.role == "behind subscript":
                result[frame.opener] = result[frame.opener]._replace(type="ALPHABETS")
        elif kind == "PIPE":
            frame.pipes_left -= 1
            follows_operand = position > 0 and result[position - 1].type in _ENDS_OPERAND
            role = "PIPE_OPEN"
            if follows_operand and frame.sizes:
                role = "PIPE_CLOSE"
            elif follows_operand and frame.role == "subscript":
                after = lexemes[position + 1].start if position + 1 < len(lexemes) else lexeme.end
                hugs_right = previous.end < lexeme.start and after == lexeme.end
                if not (hugs_right and frame.pipes_left):
                    role = "BAR"
            frame.sizes += {"PIPE_OPEN": 1, "PIPE_CLOSE": -1, "BAR": 0}[role]
            result[position] = lexeme._replace(type=role)
        elif kind in _CLEARS_SUBSTITUTION:
            frame.comma = -1
        if previous.type == "FIX" and position == 1:
            word = lexeme.text
            if word.isalnum() and word[:1].isalpha():
                result[position] = lexeme._replace(type="NAME")
        previous = lexeme
    return result


def _pipes_per_frame(lexemes: list[Lexeme]) -> dict[int, int]:
    """How many `|` stand directly in each bracket, by the bracket's position; -1 is outside."""
    if not any(lexeme.type == "PIPE" for lexeme in lexemes):
        return {}
    counts: dict[int, int] = {}
    stack = [-1]
    for position, lexeme in enumerate(lexemes):
        if lexeme.type in OPENERS:
            stack.append(position)
        elif lexeme.type in CLOSERS and len(stack) > 1:
            stack.pop()
        elif lexeme.type == "PIPE":
            counts[stack[-1]] = counts.get(stack[-1], 0) + 1
    return counts
