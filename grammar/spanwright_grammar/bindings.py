"""Which names, and how many variables, are in force at a place; where names are bound and used."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal, NamedTuple

from spanwright_grammar import syntax
from spanwright_grammar.lexing import Lexeme, scan
from spanwright_grammar.parsing import Parsed, Piece
from spanwright_grammar.source import Span

_NOTHING_BOUND: Mapping[str, int] = MappingProxyType({})
_LONGEST_WORD = 80  # how far the end of a word is looked for; longer ones are cut


@dataclass(frozen=True, slots=True)
class Scope:
    """What a text may look up: the number of variables, the own names, the tags so far.

    `names` maps a name to what it is ("a polynomial", "a function of a, b"). `may_hold_more` says
    that another file has been read, whose names are not known here.
    """

    n: int | None = None
    names: Mapping[str, str] = field(default_factory=dict)
    parameters: tuple[str, ...] = ()
    last_tag: int = 0
    may_hold_more: bool = False


Exports = Callable[[str], Scope | None]
"""From the path of a `use` to what that file leaves behind; nothing when it cannot be read."""

_TAGGED = (syntax.ExpressionSentence, syntax.Expand, syntax.Find)


class Ledger:
    """A scope that sentences change one after another, as far as can be known without running."""

    def __init__(self, scope: Scope, exports: Exports | None = None) -> None:
        self.n = scope.n
        self.names = dict(scope.names)
        self.parameters = dict.fromkeys(scope.parameters)
        self.last_tag = scope.last_tag
        self.may_hold_more = scope.may_hold_more
        self._exports = exports

    def scope(self) -> Scope:
        """The scope now."""
        return Scope(
            self.n, dict(self.names), tuple(self.parameters), self.last_tag, self.may_hold_more
        )

    def knows(self, name: str) -> bool:
        """Is this an own name or a declared parameter?"""
        return name in self.names or name in self.parameters

    def take_piece(self, piece: Piece) -> None:
        """Go past a piece; what a broken `let` would define counts as defined."""
        if piece.sentence is not None:
            self.take(piece.sentence)
        for name in piece.names:
            self.names.setdefault(name, "a value")

    def take(self, sentence: syntax.Sentence) -> None:
        """Go past a sentence."""
        match sentence:
            case syntax.Fix(setting="n", value=value):
                digits = value.digits if isinstance(value, syntax.Number) else ""
                self.n = int(digits) if 0 < len(digits) < 5 else None
            case syntax.LetValue(name=name):
                self.names[name] = "a value"
            case syntax.LetFunction(name=name, parameters=arguments):
                self.names[name] = f"a function of {', '.join(arguments)}"
            case syntax.LetFamily(name=name, pattern=arguments):
                self.names[name] = f"a function of {', '.join(arguments)}"
            case syntax.LetParameters(names=names):
                self.parameters.update(dict.fromkeys(names))
            case syntax.Forget(subjects=subjects):
                for item in subjects:
                    if isinstance(item, syntax.Name):
                        self.names.pop(item.name, None)
                        self.parameters.pop(item.name, None)
            case syntax.Use(path=path):
                self._use(path)
            case syntax.For(body=body):
                for inner in body:
                    self.take(inner)
            case _ if isinstance(sentence, _TAGGED):
                self.last_tag += 1

    def _use(self, path: str) -> None:
        found = self._exports(path) if self._exports else None
        if found is None:
            self.may_hold_more = True
            return
        self.n = self.n if found.n is None else found.n
        self.names.update(found.names)
        self.parameters.update(dict.fromkeys(found.parameters))
        self.last_tag += found.last_tag
        self.may_hold_more = self.may_hold_more or found.may_hold_more


def after(scope: Scope, sentence: syntax.Sentence) -> Scope:
    """The scope behind a sentence, as far as can be known without running it."""
    ledger = Ledger(scope)
    ledger.take(sentence)
    return ledger.scope()


def scope_at(parsed: Parsed, offset: int, scope: Scope) -> Scope:
    """The scope before the sentence that holds the offset; `scope` is that of the text's start."""
    ledger = Ledger(scope)
    for piece in parsed.pieces:
        if piece.span.end >= offset:
            break
        ledger.take_piece(piece)
    return ledger.scope()


def definition(parsed: Parsed, name: str, offset: int) -> Span | None:
    """Where a name is defined: the last `let` before the offset, else the first behind it."""
    places = [place for defined, place in definitions(parsed) if defined == name]
    before = [place for place in places if place.start <= offset]
    return before[-1] if before else places[0] if places else None


def definitions(parsed: Parsed) -> Iterator[tuple[str, Span]]:
    """Every defined name with the span of the sentence that defines it."""
    for piece in parsed.pieces:
        for name in defined_names(piece):
            yield name, piece.span


def defined_names(piece: Piece) -> tuple[str, ...]:
    """The names that a piece defines, or was about to."""
    match piece.sentence:
        case syntax.LetValue(name=name) | syntax.LetFunction(name=name):
            return (name,)
        case syntax.LetFamily(name=name):
            return (name,)
        case syntax.LetParameters(names=names):
            return names
    return piece.names


# --- Nodes with what is bound around them --------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Occurrence:
    """A node and the names that loops and arguments bind around it, with where they do so."""

    node: syntax.Node
    bound: Mapping[str, int]


def occurrences(
    sentence: syntax.Sentence, text: str, bound: Mapping[str, int] = _NOTHING_BOUND
) -> Iterator[Occurrence]:
    """All nodes of a sentence, outer ones first, each with the names that are bound there.

    `text` is what the sentence's spans refer to.
    """
    stack = [Occurrence(sentence, bound)]
    while stack:
        here = stack.pop()
        yield here
        stack.extend(reversed(list(_below(here, text))))


def _below(here: Occurrence, text: str) -> Iterator[Occurrence]:
    node, bound = here.node, here.bound
    match node:
        case syntax.LetFunction() | syntax.LetFamily():
            _, *arguments = header_names(node, text)
            places = {lexeme.text: lexeme.start for lexeme in arguments}
            yield Occurrence(node.value, {**bound, **places})
        case (
            syntax.BigOperator()
            | syntax.Comprehension()
            | syntax.For()
            | syntax.Find()
            | syntax.Tabulate()
            | syntax.Guess()
        ):
            for binding in node.bindings:
                yield Occurrence(binding, bound)
                bound = {**bound, binding.name: binding.place.start}
            for child in syntax.children(node):
                if not isinstance(child, syntax.Binding):
                    yield Occurrence(child, bound)
        case _:
            for child in syntax.children(node):
                yield Occurrence(child, bound)


def header_names(
    node: syntax.LetValue | syntax.LetFunction | syntax.LetFamily | syntax.LetParameters, text: str
) -> list[Lexeme]:
    """The names that stand before the `=` of a definition, or before its `be`."""
    start, end = node.place
    if not isinstance(node, syntax.LetParameters):
        end = node.value.place.start
    found = []
    for lexeme in scan(text[start:end]):
        if lexeme.type == "BE":
            break
        if lexeme.type == "NAME":
            found.append(
                lexeme._replace(start=lexeme.start + start, end=lexeme.end + start)
            )
    return found


# --- Mentions ------------------------------------------------------------------------------------


class Mention(NamedTuple):
    """One place at which a name stands: where it begins, what it does there, who binds it.

    `owner` is where the name is bound: by a loop, a sum, or as an argument; nothing when the name
    means a definition.
    """

    name: str
    start: int
    role: Literal["definition", "binding", "use"]
    owner: int | None


def mentions(sentence: syntax.Sentence, text: str) -> Iterator[Mention]:
    """Every name that a sentence binds, defines or uses, words of the language included."""
    if isinstance(
        sentence,
        syntax.LetValue | syntax.LetFunction | syntax.LetFamily | syntax.LetParameters,
    ):
        names = header_names(sentence, text)
        n_defined = len(names) if isinstance(sentence, syntax.LetParameters) else 1
        for place, lexeme in enumerate(names):
            if place < n_defined:
                yield Mention(lexeme.text, lexeme.start, "definition", None)
            else:
                yield Mention(lexeme.text, lexeme.start, "binding", lexeme.start)
    for here in occurrences(sentence, text):
        node = here.node
        match node:
            case syntax.Name(name=name) | syntax.Call(function=name):
                yield Mention(name, node.place.start, "use", here.bound.get(name))
            case syntax.Subscripted(head=name):
                yield Mention(name, node.place.start, "use", here.bound.get(name))
            case syntax.Binding(name=name):
                yield Mention(name, node.place.start, "binding", node.place.start)


def word_span(text: str, start: int) -> Span:
    """The span of the word that begins at an offset, however it is spelt."""
    found = scan(text[start : start + _LONGEST_WORD])
    return Span(start, start + found[0].end if found else start)
