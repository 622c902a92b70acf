"""What stands at a place of a text: a signature on one line, or all that is known of a word."""

from __future__ import annotations

from dataclasses import dataclass

from spanwright_grammar.bindings import Scope, definition
from spanwright_grammar.lexing import CLOSERS, OPENERS, Lexeme, scan
from spanwright_grammar.parsing import Parsed
from spanwright_grammar.source import Span
from spanwright_grammar.vocabulary import Entry, lookup_all


@dataclass(frozen=True, slots=True)
class Signature:
    """How a word is written, what it means, and which of its parts is being written (from 1)."""

    label: str
    meaning: str
    part: int = 0


@dataclass(frozen=True, slots=True)
class Hover:
    """All that is known of the word at a place, as lines of text."""

    span: Span
    text: str


def signature(text: str, offset: int, scope: Scope) -> Signature | None:
    """The word at the cursor, else that whose bracket is open there, else the sentence's own.

    >>> signature("x_1 degree(", 11, Scope()).label
    'degree(f)'
    """
    lexemes = _sentence_around(scan(text), offset)
    at = _word_at(lexemes, offset)
    if at is not None:
        found = _signature_of(lexemes, at, scope)
        if found is not None:
            return found
    closed = _head_of_closed(lexemes, offset)
    if closed is not None:
        return _signature_of(lexemes, closed, scope)
    for place, part in _open_brackets(lexemes, offset):
        head = _head(lexemes, place)
        if head is not None:
            found = _signature_of(lexemes, head, scope)
            if found is not None:
                return Signature(found.label, found.meaning, part)
    if lexemes and lexemes[0].start < offset and lexemes[0].type != "NAME":
        return _signature_of(lexemes, 0, scope)
    return None


def hover(parsed: Parsed, offset: int, scope: Scope) -> Hover | None:
    """The entry of the vocabulary, or the definition, of the word at an offset."""
    text = parsed.source.text
    lexemes = _sentence_around(scan(text), offset)
    at = _word_at(lexemes, offset)
    if at is None:
        at = _head_of_closed(lexemes, offset)
    if at is None:
        at = _head_of_subscript(lexemes, offset)
    if at is None:
        return None
    word = lexemes[at]
    span = Span(word.start, word.end)
    own = scope.names.get(word.text)
    defined = definition(parsed, word.text, offset)
    if defined is not None:
        line = " ".join(parsed.source.slice(defined).split())
        return Hover(span, f"{line}\n{own}" if own else line)
    if own is not None:
        return Hover(span, f"{word.text}: {own}")
    if word.text in scope.parameters:
        return Hover(span, f"{word.text}: a parameter of this session")
    entries = _entries(lexemes, at)
    if not entries:
        return None
    return Hover(span, "\n\n".join(_entry_text(entry) for entry in entries))


def _entry_text(entry: Entry) -> str:
    lines = [f"{entry.signature}: {entry.meaning}"]
    if entry.inputs:
        lines.append(f"takes {entry.inputs}")
    lines.append("example: " + entry.example.replace("\n", "; "))
    if entry.source not in ("ours", "common practice"):
        lines.append(f"source: {entry.source}")
    return "\n".join(lines)


def _sentence_around(lexemes: list[Lexeme], offset: int) -> list[Lexeme]:
    """The lexemes between the `;` and line ends around an offset, open brackets bridged."""
    current: list[Lexeme] = []
    depth = 0
    for lexeme in lexemes:
        if lexeme.type in ("NEWLINE", "SEMICOLON", "COLON") and depth == 0:
            if lexeme.start >= offset:
                break
            current = []
            continue
        if lexeme.type in ("COMMENT", "NEWLINE"):
            if lexeme.type == "COMMENT" and lexeme.start < offset <= lexeme.end:
                return []
            continue
        if lexeme.type in OPENERS:
            depth += 1
        elif lexeme.type in CLOSERS:
            depth = max(0, depth - 1)
        current.append(lexeme)
    return current


def _word_at(lexemes: list[Lexeme], offset: int) -> int | None:
    """The place of the word that holds the offset, or ends there; a subscript leads to its head."""
    for place, lexeme in enumerate(lexemes):
        if not lexeme.start <= offset <= lexeme.end:
            continue
        is_subscript = place > 1 and lexemes[place - 1].type == "UNDERSCORE"
        if lexeme.type == "NAME" or lexeme.type.lower() == lexeme.text:
            is_one_symbol = is_subscript and lookup_all(f"{lexemes[place - 2].text}_{lexeme.text}")
            return place - 2 if is_one_symbol else place
        if lexeme.type == "UNDERSCORE" and place and offset == lexeme.end:
            return place - 1
        if lexeme.type == "NUMBER" and is_subscript:
            return place - 2
    return None


def _open_brackets(lexemes: list[Lexeme], offset: int) -> list[tuple[int, int]]:
    """The brackets open at an offset, innermost first, with the number of the part there."""
    stack: list[tuple[int, int]] = []
    for place, lexeme in enumerate(lexemes):
        if lexeme.start >= offset:
            break
        if lexeme.type in OPENERS:
            stack.append((place, 1))
        elif lexeme.type in CLOSERS and stack:
            stack.pop()
        elif lexeme.type == "COMMA" and stack:
            stack[-1] = (stack[-1][0], stack[-1][1] + 1)
    return stack[::-1]


def _head_of_closed(lexemes: list[Lexeme], offset: int) -> int | None:
    """The name whose subscript or arguments end at an offset."""
    opened: list[int] = []
    for place, lexeme in enumerate(lexemes):
        if lexeme.type in OPENERS:
            opened.append(place)
        elif lexeme.type in CLOSERS and opened:
            opener = opened.pop()
            if lexeme.end == offset:
                return _head(lexemes, opener)
    return None


def _head_of_subscript(lexemes: list[Lexeme], offset: int) -> int | None:
    """The name in whose subscript an offset lies."""
    for opener, _ in _open_brackets(lexemes, offset):
        if opener >= 2 and lexemes[opener - 1].type == "UNDERSCORE":
            return opener - 2
    return None


def _head(lexemes: list[Lexeme], opener: int) -> int | None:
    """The name whose subscript or arguments a bracket holds."""
    if opener == 0:
        return None
    before = lexemes[opener - 1]
    if before.type == "UNDERSCORE" and opener >= 2:
        return opener - 2
    if before.type == "NAME" and before.end == lexemes[opener].start:
        return opener - 1
    return None


def _entries(lexemes: list[Lexeme], at: int) -> tuple[Entry, ...]:
    """The entries of a word, those that fit its place first, and only they when there are such."""
    word = lexemes[at]
    following = lexemes[at + 1 : at + 3]
    found = lookup_all(word.text)
    if word.type == "NAME" and at == 1 and lexemes[0].type == "FIX":
        settings = tuple(entry for entry in found if entry.kind == "setting")
        if settings:
            return settings
    elif len(found) > 1:
        found = tuple(entry for entry in found if entry.kind != "setting") or found
    if len(following) == 2 and following[0].type == "UNDERSCORE":
        longer = lookup_all(f"{word.text}_{following[1].text}")
        if longer:
            return longer
        # s_1 is the reflection and s_(2,1) the Schur polynomial.
        kind = "family" if following[1].type in OPENERS else "operator"
        fitting = tuple(entry for entry in found if entry.kind == kind)
        return fitting or found
    return found


def _signature_of(lexemes: list[Lexeme], at: int, scope: Scope) -> Signature | None:
    word = lexemes[at]
    entries = _entries(lexemes, at)
    if entries:
        entry = entries[0]
        meaning = entry.meaning
        if entry.inputs:
            meaning = f"{meaning}; takes {entry.inputs}"
        return Signature(entry.signature, meaning)
    kind = scope.names.get(word.text)
    if kind is not None:
        if kind.startswith("a function of "):
            arguments = kind.removeprefix("a function of ")
            return Signature(f"{word.text}({arguments})", "a function of this session")
        return Signature(word.text, kind)
    if word.text in scope.parameters:
        return Signature(word.text, "a parameter of this session")
    return None
