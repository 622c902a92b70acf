"""What may be written at a place of a half-typed text: words, own names, subscripts, settings."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

from spanwright_grammar.bindings import Scope
from spanwright_grammar.lexing import (
    CLOSERS,
    KEYWORDS,
    OPENERS,
    TEX_SIGNS,
    TEX_WORDS,
    Lexeme,
    scan,
)
from spanwright_grammar.parsing import expected_after
from spanwright_grammar.vocabulary import (
    FORMS,
    SETTING_WORDS,
    Entry,
    by_kind,
    lookup,
    lookup_all,
)

# Settings that can be taken back.
RELEASED_BY_FREE = frozenset({"basis", "q", "t", "seconds", "memory"})

# Symbols with a position as subscript, and how far below n the last position lies.
_POSITIONS = {
    "x": 0, "X": 0, "Y": 0, "y": 0, "eps": 0, "e": 0, "h": 0, "p": 0,
    "T": 1, "s": 1, "d": 1, "pi": 1, "tau": 1,
}  # fmt: skip
_INDEXED = frozenset({"E", "P", "J", "m", "e", "h", "p", "s", "S", "G", "kappa", "atom"})
_INDEXED_BY_PERMUTATIONS = frozenset({"S", "G", "T", "d", "pi"})
_MAX_POSITIONS = 20
_MAX_TAGS = 9
_CLOSING = {"(": ")", "[": "]", "{": "}"}

FileLister = Callable[[str], Iterable[str]]
"""From the beginning of a path to the paths that go on from it; folders end in `/`."""


@dataclass(frozen=True, slots=True)
class Completion:
    """One proposal: how the menu shows it, what replaces the text from `start` to the cursor."""

    label: str
    insert: str
    kind: str
    meaning: str
    start: int


def complete(
    text: str, offset: int, scope: Scope, list_files: FileLister | None = None
) -> list[Completion]:
    """The proposals at an offset; `scope` is what is in force before the sentence there.

    >>> [found.insert for found in complete("fix n = 3; fix sh", 17, Scope())]
    ['show']
    """
    before = text[:offset]
    lexemes = scan(before)
    last = lexemes[-1] if lexemes else None
    if last is not None and last.type == "COMMENT":
        return []
    sentence = _current_sentence(lexemes)
    if last is not None and last.type == "OPEN_STRING":
        return _files(sentence, last, offset, list_files)
    if last is not None and sentence and last.type in ("USE", "READ") and last.end < offset:
        return _quoted_files(offset, list_files)
    tex_start = before.rfind("\\")
    if tex_start >= 0 and (before[tex_start + 1 :].isalpha() or tex_start == offset - 1):
        return list(_filtered(_tex(), before[tex_start:], tex_start))
    word, start = "", offset
    if last is not None and last.end == offset and sentence:
        is_word = last.type == "NAME" or last.type.lower() == last.text
        behind_underscore = len(sentence) > 1 and sentence[-2].type == "UNDERSCORE"
        if is_word or (last.type == "NUMBER" and behind_underscore):
            word, start = before[last.start : last.end], last.start
            sentence = sentence[:-1]
    here = _Place(before[:start], word, sentence, scope)
    return list(_filtered(here.proposals(), word, start))


# --- The sentence at the cursor ------------------------------------------------------------------

_GOES_ON = frozenset(
    {"PLUS", "MINUS", "STAR", "SLASH", "CARET", "EQUAL", "COMPARE", "COMMA", "IN", "AT", "AND",
     "OR", "NOT", "WHERE", "AS", "ARROW", "RANGE"}
)  # fmt: skip


def _current_sentence(lexemes: list[Lexeme]) -> list[Lexeme]:
    """The lexemes of the last sentence, that behind `for …:` included."""
    current: list[Lexeme] = []
    depth = 0
    for lexeme in lexemes:
        kind = lexeme.type
        if kind == "COMMENT":
            continue
        if kind == "NEWLINE":
            if depth == 0 and current and current[-1].type not in _GOES_ON:
                current = []
            continue
        if kind == "SEMICOLON" and depth == 0:
            current = []
            continue
        if kind in OPENERS:
            depth += 1
        elif kind in CLOSERS:
            depth = max(0, depth - 1)
        current.append(lexeme)
    return current


@dataclass(frozen=True, slots=True)
class OpenBracket:
    """The innermost bracket that is open at the cursor."""

    head: str  # the name before it, if it opens a subscript or a call
    is_subscript: bool
    opener: str
    parts: tuple[str, ...]  # the texts between its commas; the last reaches to the cursor

    @property
    def n_parts(self) -> int:
        """How many parts have been begun, the one at the cursor included."""
        return len(self.parts)


def open_bracket(text: str, sentence: list[Lexeme]) -> OpenBracket | None:
    """The innermost open bracket at the end of a sentence's lexemes."""
    stack: list[int] = []
    commas: list[list[int]] = []
    for place, lexeme in enumerate(sentence):
        if lexeme.type in OPENERS:
            stack.append(place)
            commas.append([])
        elif lexeme.type in CLOSERS and stack:
            stack.pop()
            commas.pop()
        elif lexeme.type == "COMMA" and stack:
            commas[-1].append(place)
    if not stack:
        return None
    place = stack[-1]
    before = sentence[place - 1] if place else None
    is_subscript = before is not None and before.type == "UNDERSCORE" and place >= 2
    head = ""
    if is_subscript:
        head = sentence[place - 2].text
    elif before is not None and before.type == "NAME" and before.end == sentence[place].start:
        head = before.text
    edges = [place, *commas[-1]]
    ends = [sentence[comma].start for comma in commas[-1]] + [len(text)]
    parts = tuple(
        text[sentence[edge].end : end].strip() for edge, end in zip(edges, ends, strict=True)
    )
    return OpenBracket(head, is_subscript, sentence[place].text, parts)


def missing_closers(text: str) -> str:
    """The closing brackets that the last sentence of a text lacks.

    >>> missing_closers("x_1 E_(2, (1")
    '))'
    """
    stack: list[str] = []
    for lexeme in _current_sentence(scan(text)):
        if lexeme.type in OPENERS:
            stack.append(lexeme.text)
        elif lexeme.type in CLOSERS and stack:
            stack.pop()
    return "".join(_CLOSING[opener] for opener in reversed(stack))


# --- What fits there -----------------------------------------------------------------------------

_Proposal = tuple[str, str, str, str]  # label, insert, kind, meaning


@dataclass(frozen=True, slots=True)
class _Place:
    """A place in a text: all before it, the word begun there, its sentence's lexemes up to it, and
    what is in force."""

    before: str
    word: str
    sentence: list[Lexeme]
    scope: Scope

    def proposals(self) -> Iterator[_Proposal]:
        """All that may stand here, the likeliest first."""
        sentence = self.sentence
        types = [lexeme.type for lexeme in sentence]
        colons = [place for place, kind in enumerate(types) if kind == "COLON"]
        first = types[colons[-1] + 1 if colons else 0 :]
        verb = first[0] if first else ""
        previous = types[-1] if types else ""
        if verb == "HELP":
            yield from _topics()
        elif previous == "UNDERSCORE":
            yield from self._subscripts(sentence[-2].text if len(sentence) > 1 else "")
        elif verb == "FIX":
            yield from self._settings()
        elif verb == "EXPAND" and self._names_bases():
            yield from _families()
        elif verb == "DERIVE" and self._names_bases():
            yield from (
                (entry.name, entry.name, "operator", entry.meaning)
                for entry in by_kind("operator")
                if "_" not in entry.name
            )
        elif verb in ("SHOW", "WRITE") and previous == "AS":
            yield from ((form, form, "form", use) for form, use in FORMS.items())
        else:
            bracket = open_bracket(self.before, sentence)
            if bracket is not None and bracket.is_subscript and bracket.head not in ("sum", "prod"):
                yield from self._index_parts(bracket)
                yield from self._bound()
                yield from self._names_for_parts()
                if not self.word:
                    return
            yield from self._words(previous, verb)

    def _names_bases(self) -> bool:
        """Does the place lie behind the `in` of `expand f in …`, outside all brackets?"""
        depth = 0
        has_in = False
        for lexeme in self.sentence:
            if lexeme.type in OPENERS:
                depth += 1
            elif lexeme.type in CLOSERS:
                depth -= 1
            elif lexeme.type == "IN" and depth == 0:
                has_in = True
        return has_in and depth == 0 and self.sentence[-1].type in ("IN", "COMMA")

    def _settings(self) -> Iterator[_Proposal]:
        if len(self.sentence) == 1:
            for entry in by_kind("setting"):
                yield f"{entry.name} =", entry.name, "setting", entry.meaning
            return
        name = self.sentence[1].text
        setting = next((entry for entry in by_kind("setting") if entry.name == name), None)
        if len(self.sentence) > 3:
            yield from self._words(self.sentence[-1].type, "FIX")
        if setting is None or len(self.sentence) != 3:
            return
        if name == "basis":
            yield from _families()
        for word in SETTING_WORDS.get(name, ()):
            yield word, word, "value", setting.meaning
        if name not in SETTING_WORDS and name not in ("basis", "q", "t"):
            example = setting.example.partition("= ")[2]
            yield example, example, "value", f"for instance; {setting.inputs}"
        if name in RELEASED_BY_FREE:
            yield "free", "free", "value", f"takes `fix {name} = …` back"
        if name in ("q", "t"):
            yield from self._words("EQUAL", "FIX")

    def _bound(self) -> Iterator[_Proposal]:
        """The names that `i in …` binds in this sentence."""
        for name, word in zip(self.sentence, self.sentence[1:]):
            if name.type == "NAME" and word.type == "IN":
                yield name.text, name.text, "name", "runs over an index set"

    def _own_names(self) -> Iterator[_Proposal]:
        for name, kind in self.scope.names.items():
            if kind.startswith("a function of "):
                arguments = kind.removeprefix("a function of ")
                yield f"{name}({arguments})", name, "name", kind
            else:
                yield name, name, "name", kind

    def _subscripts(self, head: str) -> Iterator[_Proposal]:
        scope = self.scope
        if head == "eq":
            for tag in range(scope.last_tag, max(0, scope.last_tag - _MAX_TAGS), -1):
                yield f"eq_{tag}", str(tag), "tag", f"the result ({tag})"
            return
        if head in ("sum", "prod"):
            yield f"{head}_(i in 1..n)", "(", "word", "the index set stands in the brackets"
            return
        kind = scope.names.get(head, "")
        if head in _POSITIONS or kind == "an index":
            yield from self._positions(head)
        for entry in lookup_all(f"{head}_pi"):
            yield entry.name, "pi", "operator", entry.meaning
        names = (*self._bound(), *self._own_names())
        indices = [row for row in names if row[3] in ("an index", "runs over an index set")]
        fits_positions = head in _POSITIONS
        for name, insert, what, meaning in indices:
            if head in _INDEXED or head in _INDEXED_BY_PERMUTATIONS or (
                fits_positions and meaning != "an index"
            ):
                yield f"{head}_{name}", insert, what, meaning
        if kind.startswith("a function of "):
            arguments = kind.removeprefix("a function of ")
            yield f"{head}_({arguments})", "(", "name", kind
        elif head in _INDEXED or head in _INDEXED_BY_PERMUTATIONS:
            takes = next((e.inputs for e in lookup_all(head) if e.inputs), "an index")
            due = f", {scope.n} parts" if scope.n and head in _INDEXED else ""
            yield f"{head}_(…)", "(", "index", f"{takes}{due}"

    def _positions(self, head: str) -> Iterator[_Proposal]:
        n = self.scope.n
        if n is None:
            return
        last = n - _POSITIONS.get(head, 0)
        entry = lookup(head)
        for position in range(1, min(last, _MAX_POSITIONS) + 1):
            meaning = entry.meaning if entry else f"part {position} of {head}"
            yield f"{head}_{position}", str(position), "position", meaning

    def _names_for_parts(self) -> Iterator[_Proposal]:
        """Own names that may be a part of an index, or a whole one."""
        return (row for row in self._own_names() if row[3] in ("a scalar", "an index", "a value"))

    def _index_parts(self, bracket: OpenBracket) -> Iterator[_Proposal]:
        """The rest of an index that has been begun: `E_(2,` with n = 3 lacks two parts."""
        n = self.scope.n
        if n is None or self.word:
            return
        head = bracket.head
        is_permutation = head in _INDEXED_BY_PERMUTATIONS
        if head not in _INDEXED and not is_permutation:
            return
        if "|" in bracket.parts[-1]:
            return
        is_begun = bool(bracket.parts[-1])
        due = n - bracket.n_parts + (0 if is_begun else 1)
        if due < 0:
            return
        closer = _CLOSING[bracket.opener]
        counted = "1 part is" if due == 1 else f"{due} parts are"
        if due == 0:
            yield closer, closer, "index", f"all {n} parts are there"
            return
        if is_permutation:
            used = set(bracket.parts)
            rest = [str(k) for k in range(1, n + 1) if str(k) not in used]
            if len(rest) != due:
                return
        else:
            rest = ["0"] * due
        filled = ("," if is_begun else "") + ",".join(rest) + closer
        yield filled, filled, "index", f"{counted} still due, n = {n}"

    def _words(self, previous: str, verb: str) -> Iterator[_Proposal]:
        """Names and words that the grammar allows here."""
        expected = expected_after(self.before)
        if "a name" in expected and "a number" in expected:
            if previous == "IN":
                yield from _index_sets(self.scope.n)
            if previous == "AT" or (previous == "AS" and verb not in ("SHOW", "WRITE")):
                yield from self._parameters()
            yield from self._bound()
            yield from self._own_names()
            if "`fix`" in expected:
                is_in_block = ":" in self.before
                yield from (
                    row for row in _entries("sentence", " ") if row[0] != "end" or is_in_block
                )
            if verb == "RECALL" or verb == "FORGET" or self.scope.last_tag:
                yield from self._tags()
            yield from _entries("family", "_")
            yield from self._operators()
            yield from _entries("function", "(")
            if previous != "IN":
                yield from _entries("set", "(")
            yield from self._parameters()
            yield from _entries_of_words(("eps", "_"), ("infinity", ""))
            if "`sum_`" in expected:
                yield from _entries_of_words(("sum", "_("), ("prod", "_("))
        elif "a name" in expected and (previous in ("AT", "AS", "NEXT") or verb == "WRITE"):
            yield from self._parameters()
        for word in KEYWORDS:
            if f"`{word}`" in expected:
                entry = lookup(word)
                is_sentence = entry is not None and entry.kind == "sentence"
                if not (is_sentence and "`fix`" in expected):
                    yield word, word, "word", entry.meaning if entry else ""

    def _tags(self) -> Iterator[_Proposal]:
        last = self.scope.last_tag
        for tag in range(last, max(0, last - _MAX_TAGS), -1):
            yield f"eq_{tag}", f"eq_{tag}", "tag", f"the result ({tag})"

    def _operators(self) -> Iterator[_Proposal]:
        for entry in by_kind("operator"):
            bare = "_" in entry.name or len(entry.name) > 3
            insert = entry.name if bare else f"{entry.name}_"
            yield _label(entry), insert, "operator", entry.meaning

    def _parameters(self) -> Iterator[_Proposal]:
        for name in self.scope.parameters:
            yield name, name, "parameter", "a parameter of this session"
        yield from _entries("parameter", "")


def _label(entry: Entry) -> str:
    return entry.signature.split(", ")[0] if entry.kind in ("family", "operator") else (
        entry.signature if len(entry.signature) <= 24 else entry.name
    )


def _entries(kind: str, suffix: str) -> Iterator[_Proposal]:
    for entry in by_kind(kind):
        insert = entry.name if suffix == " " else entry.name + suffix
        label = entry.name if kind == "sentence" else _label(entry)
        yield label, insert, kind, entry.meaning


def _entries_of_words(*words: tuple[str, str]) -> Iterator[_Proposal]:
    for word, suffix in words:
        entry = lookup(word)
        if entry is not None:
            yield _label(entry), word + suffix, "word", entry.meaning


def _families() -> Iterator[_Proposal]:
    for entry in by_kind("family"):
        if entry.name != "y":
            meaning = "monomials" if entry.name == "x" else entry.meaning
            yield entry.name, entry.name, "family", meaning


def _index_sets(n: int | None) -> Iterator[_Proposal]:
    upper = f"1..n, n = {n}" if n is not None else "1..n"
    yield "1..n", "1..n", "set", f"the integers {upper}"
    yield from _entries("set", "(")


def _topics() -> Iterator[_Proposal]:
    seen: set[str] = set()
    for kind in ("sentence", "family", "operator", "function", "set", "setting", "word"):
        for entry in by_kind(kind):
            if entry.name not in seen:
                seen.add(entry.name)
                yield entry.name, entry.name, kind, entry.meaning
    for topic in ("sentences", "families", "operators", "functions", "settings"):
        yield topic, topic, "topic", f"a list of all {topic}"


def _tex() -> Iterator[_Proposal]:
    for word, plain in TEX_WORDS.items():
        entry = lookup(plain)
        meaning = entry.meaning if entry else f"the same as {plain}"
        yield f"\\{word}", f"\\{word}", "symbol", meaning
    for word, sign in TEX_SIGNS.items():
        shown = "a product" if sign == "*" else sign
        yield f"\\{word}", f"\\{word}", "symbol", f"the same as {shown}"


def _quoted_files(offset: int, list_files: FileLister | None) -> list[Completion]:
    """File names behind `use` and `read`, with the quotation marks that they need."""
    if list_files is None:
        return []
    return [
        Completion(name, f'"{name}', "folder", "a folder", offset)
        if name.endswith("/")
        else Completion(name, f'"{name}"', "file", "a script", offset)
        for name in list_files("")
    ]


def _files(
    sentence: list[Lexeme], string: Lexeme, offset: int, list_files: FileLister | None
) -> list[Completion]:
    """File names behind `use "` and `read "`."""
    before = sentence[-2].type if len(sentence) > 1 else ""
    if list_files is None or before not in ("USE", "READ") or "\\" in string.text:
        return []
    path = string.text[1:]
    start = offset - len(path)
    found = []
    for name in list_files(path):
        is_folder = name.endswith("/")
        insert = name if is_folder else f'{name}"'
        kind = "folder" if is_folder else "file"
        found.append(Completion(name, insert, kind, "a folder" if is_folder else "a script", start))
    return found


def _filtered(
    proposals: Iterable[_Proposal], word: str, start: int
) -> Iterator[Completion]:
    """The proposals that go on from a word, each text once; capitals count unless nothing fits."""
    rows: dict[str, _Proposal] = {}
    for row in proposals:
        rows.setdefault(row[1], row)
    fitting = [row for row in rows.values() if row[1].startswith(word)]
    if not fitting and len(word) > 1:
        folded = word.lower()
        fitting = [row for row in rows.values() if row[1].lower().startswith(folded)]
    for label, insert, kind, meaning in fitting:
        if insert != word:
            yield Completion(label, insert, kind, meaning, start)


