"""What can be found wrong with a text without computing: unknown names, parts, positions."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import NamedTuple

from spanwright_grammar import syntax
from spanwright_grammar.bindings import (
    Exports,
    Ledger,
    Occurrence,
    Scope,
    defined_names,
    header_names,
    occurrences,
)
from spanwright_grammar.diagnostics import Diagnostic, error
from spanwright_grammar.parsing import Parsed, Piece
from spanwright_grammar.source import Span
from spanwright_grammar.spelling import nearest
from spanwright_grammar.vocabulary import (
    FORMS,
    RESERVED,
    SETTING_WORDS,
    VOCABULARY,
    lookup_all,
    words_like,
)

# Families whose index has exactly n parts; partitions and permutations may be written shorter.
INDEXED_BY_COMPOSITIONS = frozenset({"E", "kappa", "atom"})
# Symbols whose subscript is a position: how far below n the last one lies.
POSITIONS = {"x": 0, "X": 0, "Y": 0, "T": 1, "s": 1, "d": 1, "pi": 1, "tau": 1, "eps": 0}

_KNOWN_WITHOUT_ENTRY = frozenset({"n", "true", "false", "free"})
_FUNCTION = "a function of "


def check(
    parsed: Parsed, scope: Scope, *, exports: Exports | None = None, is_whole: bool = False
) -> tuple[Diagnostic, ...]:
    """All findings, the parser's included, in the order of the text; `scope` is that of its start.

    A whole script is also told which of its definitions it never uses.

    >>> from spanwright_grammar.parsing import parse
    >>> from spanwright_grammar.source import Source
    >>> check(parse(Source("x_1 E_(1,0)")), Scope(n=3))[0].message
    'E_(1,0) has 2 parts, the ring has n = 3'
    """
    text = parsed.source.text
    known = (
        (0, KnownPiece(piece, text, facts_of(piece, text), {})) for piece in parsed.pieces
    )
    found = [*parsed.diagnostics, *check_pieces(known, scope, exports, is_whole=is_whole)]
    return tuple(sorted(found, key=lambda item: item.span))


# --- What a piece says about names, known once and for all ---------------------------------------


@dataclass(frozen=True, slots=True)
class Facts:
    """What the findings in a piece depend on: names used and bound; the language's own left out."""

    uses: tuple[str, ...] = ()
    binds: tuple[str, ...] = ()
    defines: tuple[str, ...] = ()
    is_later: bool = False  # the body of a function, which is looked up when it is called

    @property
    def is_plain(self) -> bool:
        """Does nothing depend on names here?"""
        return not (self.uses or self.binds)



def facts_of(piece: Piece, text: str) -> Facts:
    """The facts of a piece; `text` is what its spans refer to."""
    sentence = piece.sentence
    defines = tuple(dict.fromkeys(defined_names(piece)))
    if sentence is None or _is_a_word_setting(sentence):
        return Facts(defines=defines)
    uses: dict[str, None] = {}
    binds: dict[str, None] = {}
    if isinstance(sentence, syntax.LetFunction | syntax.LetFamily):
        arguments = sentence.parameters if isinstance(
            sentence, syntax.LetFunction) else sentence.pattern
        binds.update(dict.fromkeys(arguments))
    for here in occurrences(sentence, text):
        match here.node:
            case syntax.Name(name=name) | syntax.Call(function=name):
                if name not in here.bound and not _is_of_the_language(name):
                    uses[name] = None
            case syntax.Subscripted(head=name):
                if name not in here.bound and not _is_of_the_language(name):
                    uses[name] = None
            case syntax.Binding(name=name):
                binds[name] = None
    is_later = isinstance(sentence, syntax.LetFunction | syntax.LetFamily)
    return Facts(tuple(uses), tuple(binds), defines, is_later)


def _is_of_the_language(name: str) -> bool:
    return name in _KNOWN_WITHOUT_ENTRY or bool(lookup_all(name))


def _is_a_word_setting(sentence: syntax.Sentence) -> bool:
    """Is the value of this `fix` a word or a size, not an expression?"""
    return isinstance(sentence, syntax.Fix) and sentence.setting not in ("n", "q", "t")


# --- The pass over a text ------------------------------------------------------------------------


class KnownPiece(NamedTuple):
    """A piece with its facts; `text` is what its spans refer to.

    `memory` keeps the last findings of the piece and what they depended on.
    """

    piece: Piece
    text: str
    facts: Facts
    memory: dict[str, object]


@dataclass(slots=True)
class _Defined:
    """A definition, and whether a later sentence has used it so far."""

    known: KnownPiece
    offset: int
    name: str
    is_used: bool = False


def check_pieces(
    pieces: Iterable[tuple[int, KnownPiece]],
    scope: Scope,
    exports: Exports | None,
    *,
    is_whole: bool,
) -> Iterator[Diagnostic]:
    """The findings in the pieces of a text, in their order, those of the parser left out.

    Each piece comes with the offset that its spans count from. Findings are remembered with the
    pieces: a text of which little has changed costs little.
    """
    ledger = Ledger(scope, exports)
    blocks: list[tuple[str, ...]] = []
    enclosing: frozenset[str] = frozenset()
    open_definitions: dict[str, _Defined] = {}
    unused: list[_Defined] = []
    used_in_functions: set[str] = set()
    names_key = _key_of_names(ledger)  # tells apart sets of known names
    for offset, known in pieces:
        piece, _, facts, _ = known
        if piece.role == "end":
            if blocks:
                blocks.pop()
                enclosing = frozenset(name for names in blocks for name in names)
            continue
        if piece.sentence is not None:
            yield from _recalled(known, offset, ledger, enclosing, names_key)
        for name in facts.uses:
            if facts.is_later and name not in facts.defines:
                used_in_functions.add(name)
            if name in open_definitions and name not in enclosing and not (
                facts.is_later and name in facts.defines
            ):
                open_definitions[name].is_used = True
        for name in facts.defines:
            if not ledger.knows(name):
                names_key ^= hash(name)
        ledger.take_piece(piece)
        if isinstance(piece.sentence, syntax.Forget | syntax.Use):
            names_key = _key_of_names(ledger)
        if is_whole:
            for name in facts.defines:
                earlier = open_definitions.get(name)
                if earlier is not None and not earlier.is_used:
                    unused.append(earlier)
                open_definitions[name] = _Defined(known, offset, name)
        if piece.role == "opens":
            header = piece.sentence
            blocks.append(
                tuple(b.name for b in header.bindings) if isinstance(header, syntax.For) else ()
            )
            enclosing = frozenset(name for names in blocks for name in names)
    unused.extend(item for item in open_definitions.values() if not item.is_used)
    for item in unused:
        if item.name not in used_in_functions and item.known.piece.sentence is not None:
            yield _unused(item)


def _key_of_names(ledger: Ledger) -> int:
    key = 0
    for name in {*ledger.names, *ledger.parameters}:
        key ^= hash(name)
    return key


def _recalled(
    known: KnownPiece, offset: int, ledger: Ledger, enclosing: frozenset[str], names_key: int
) -> Iterable[Diagnostic]:
    """The findings in one piece, from memory when nothing that they depend on has changed."""
    facts = known.facts
    key: object
    if facts.is_plain:
        key = (ledger.n, enclosing)
    else:
        what = tuple(
            "" if name in enclosing else ledger.names.get(name) or name in ledger.parameters
            for name in facts.uses
        )
        has_unknown = not ledger.may_hold_more and False in what
        hidden = tuple(name for name in facts.binds if ledger.knows(name))
        key = (
            ledger.n, enclosing, what, hidden, has_unknown, names_key if has_unknown else 0,
        )
    memory = known.memory
    if memory.get("the key") != key:
        memory["the key"] = key
        memory["the findings"] = tuple(_check_sentence(known, ledger, enclosing))
    found = memory["the findings"]
    assert isinstance(found, tuple)
    return [_moved(item, offset) for item in found] if found else ()


def _moved(found: Diagnostic, offset: int) -> Diagnostic:
    start, end = found.span
    return replace(found, span=Span(start + offset, end + offset)) if offset else found


def _unused(item: _Defined) -> Diagnostic:
    memory = item.known.memory
    span = memory.get(item.name)
    if span is None:
        sentence = item.known.piece.sentence
        span = item.known.piece.span
        if isinstance(
            sentence,
            syntax.LetValue | syntax.LetFunction | syntax.LetFamily | syntax.LetParameters,
        ):
            for lexeme in header_names(sentence, item.known.text):
                if lexeme.text == item.name:
                    span = Span(lexeme.start, lexeme.end)
                    break
        memory[item.name] = span
    assert isinstance(span, Span)
    message = f"{item.name} is defined and not used in this file"
    return _moved(Diagnostic("information", "unused-name", span, message), item.offset)


# --- One sentence --------------------------------------------------------------------------------


def _check_sentence(
    known: KnownPiece, ledger: Ledger, enclosing: frozenset[str]
) -> Iterator[Diagnostic]:
    sentence = known.piece.sentence
    assert sentence is not None
    text = known.text
    for name in known.facts.defines:
        if name in RESERVED or name in _KNOWN_WITHOUT_ENTRY:
            yield error(
                "name-taken",
                sentence.place,
                f"{name} is a word of the language and cannot be given a new meaning",
                f"let {name}1 = …",
            )
    if isinstance(sentence, syntax.Fix) and _is_a_word_setting(sentence):
        yield from _check_setting(sentence)
        return
    if isinstance(sentence, syntax.Expand):
        yield from _check_targets(sentence, text)
    if isinstance(sentence, syntax.Show | syntax.Write):
        yield from _check_form(sentence)
    bound = dict.fromkeys(enclosing, -1)
    # The body of a function is looked up when it is called: by then the name may be there.
    is_later = known.facts.is_later
    if is_later:
        bound.update(dict.fromkeys(known.facts.defines, -1))
    for here in occurrences(sentence, text, bound):
        for finding in _check_node(here, ledger, text):
            is_unknown = finding.code == "unknown-name"
            yield replace(finding, severity="warning") if is_unknown and is_later else finding


def _check_setting(sentence: syntax.Fix) -> Iterator[Diagnostic]:
    settings = [entry.name for entry in VOCABULARY if entry.kind == "setting"]
    if sentence.setting not in settings:
        near = nearest(sentence.setting, settings)
        yield error(
            "unknown-setting",
            sentence.place,
            f"there is no setting {sentence.setting}",
            f"fix {near} = …" if near else "fix n = 3",
        )
        return
    words = SETTING_WORDS.get(sentence.setting)
    found = sentence.value.name if isinstance(sentence.value, syntax.Name) else ""
    if words and found not in words:
        yield error(
            "setting-out-of-range",
            sentence.value.place,
            f"{sentence.setting} is one of {', '.join(words)}",
            f"fix {sentence.setting} = {nearest(found, words) or words[0]}",
        )


def _check_form(sentence: syntax.Show | syntax.Write) -> Iterator[Diagnostic]:
    """`show f as form`: a form that does not exist."""
    if sentence.form not in FORMS:
        yield error(
            "unknown-form",
            sentence.place,
            f"there is no form {sentence.form}: one of {', '.join(FORMS)}",
            f"show f as {nearest(sentence.form, FORMS) or 'latex'}",
        )


def _check_targets(sentence: syntax.Expand, text: str) -> Iterator[Diagnostic]:
    """`expand f in Q`: a name that is neither family nor operator."""
    letters = sorted(
        {e.name.partition("_")[0] for e in VOCABULARY if e.kind in ("family", "operator")}
    )
    for target in sentence.targets:
        if target not in letters:
            start = text.rfind(target, sentence.expression.place.end, sentence.place.end)
            span = Span(start, start + len(target)) if start >= 0 else sentence.place
            near = nearest(target, letters)
            yield error(
                "unknown-name", span, f"{target} is no basis", *([near] if near else ["E"])
            )


def _check_node(here: Occurrence, ledger: Ledger, text: str) -> Iterator[Diagnostic]:
    node = here.node
    match node:
        case syntax.Call(function=name, arguments=arguments):
            yield from _check_name(node, name, here.bound, ledger)
            if name not in here.bound:
                yield from _check_arguments(node, name, arguments, ledger)
        case syntax.Name(name=name):
            yield from _check_name(node, name, here.bound, ledger)
        case syntax.Subscripted(head=head, index=index):
            yield from _check_name(node, head, here.bound, ledger)
            if ledger.n is not None and head not in here.bound:
                yield from _check_parts(node, head, index, ledger.n, text)
                yield from _check_position(head, index, ledger.n)
        case syntax.Binding(name=name):
            if name not in here.bound and ledger.knows(name):
                place = Span(node.place.start, min(node.place.end, node.place.start + len(name)))
                yield Diagnostic(
                    "warning",
                    "hidden-name",
                    place,
                    f"inside, {name} is the bound name and no longer {_kind(name, ledger)} "
                    "defined above",
                )


def _kind(name: str, ledger: Ledger) -> str:
    kind = ledger.names.get(name, "a parameter")
    return "the function" if kind.startswith(_FUNCTION) else kind.replace("a ", "the ", 1)


def _check_name(
    node: syntax.Node, name: str, bound: Mapping[str, int], ledger: Ledger
) -> Iterator[Diagnostic]:
    if (
        ledger.may_hold_more
        or name in bound
        or ledger.knows(name)
        or _is_of_the_language(name)
    ):
        return
    known = (
        *bound,
        *ledger.names,
        *ledger.parameters,
        *words_like(name),
    )
    near = nearest(name, known)
    if near and len(name) == 1 and near.lower() != name.lower():
        near = None  # a letter is like any name of two
    yield error(
        "unknown-name", node.place, f"{name} is not defined", near if near else f"let {name} = …"
    )


def _check_arguments(
    node: syntax.Node, name: str, arguments: tuple[syntax.Expression, ...], ledger: Ledger
) -> Iterator[Diagnostic]:
    kind = ledger.names.get(name, "")
    if not kind.startswith(_FUNCTION):
        return
    wanted = kind.removeprefix(_FUNCTION).split(", ")
    if len(arguments) != len(wanted) and not (
        len(wanted) == 1 or any(isinstance(item, syntax.Comprehension) for item in arguments)
    ):
        counted = "1 argument" if len(wanted) == 1 else f"{len(wanted)} arguments"
        yield error(
            "wrong-number-of-arguments",
            node.place,
            f"{name} takes {counted}, this gives {len(arguments)}",
            f"{name}({','.join(wanted)})",
        )


def _check_parts(
    node: syntax.Node, head: str, index: syntax.Expression, n: int, text: str
) -> Iterator[Diagnostic]:
    if head not in INDEXED_BY_COMPOSITIONS:
        return
    if isinstance(index, syntax.Basement):
        index = index.index
    match index:
        case syntax.Tuple(items=items):
            parts = [text[item.place.start : item.place.end] for item in items]
        case syntax.Group(inner=syntax.Number(digits=digits)):
            parts = [digits]
        case syntax.Number(digits=digits) if n > 1:
            parts = list(digits)
        case _:
            return
    if len(parts) != n:
        right = ",".join([*parts, *["0"] * (n - len(parts))][:n])
        counted = "1 part" if len(parts) == 1 else f"{len(parts)} parts"
        shown = text[node.place.start : node.place.end]
        if isinstance(index, syntax.Number):  # digits run together
            shown = f"{head}_({','.join(parts)})"
        yield error(
            "wrong-number-of-parts",
            node.place,
            f"{shown} has {counted}, the ring has n = {n}",
            f"{head}_({right})",
        )


def _check_position(head: str, index: syntax.Expression, n: int) -> Iterator[Diagnostic]:
    if head not in POSITIONS or not isinstance(index, syntax.Number) or len(index.digits) > 9:
        return
    last = n - POSITIONS[head]
    position = int(index.digits)
    if last < 1:
        yield error(
            "position-out-of-range",
            index.place,
            f"{head}_{position} does not exist: {head} has no position when n = {n}",
        )
    elif not 1 <= position <= last:
        yield error(
            "position-out-of-range",
            index.place,
            f"{head}_{position} does not exist: positions go from 1 to {last} (n = {n})",
            f"{head}_{min(max(position, 1), last)}",
        )
