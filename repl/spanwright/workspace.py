"""The scripts that an editor has open, with the files they use: what a language server asks.

Places are offsets, files are paths. Nothing is computed here beyond reading the language.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import NamedTuple

from spanwright import services
from spanwright.files import FileRefused, read_text
from spanwright_grammar import completion, formatting, highlighting, navigation, outline
from spanwright_grammar import hover as hovering
from spanwright_grammar.bindings import Ledger, Scope
from spanwright_grammar.completion import Completion
from spanwright_grammar.diagnostics import Diagnostic
from spanwright_grammar.document import Document
from spanwright_grammar.formatting import Edit
from spanwright_grammar.highlighting import KINDS, Highlight
from spanwright_grammar.hover import Hover, Signature
from spanwright_grammar.navigation import Place, RenameRefused
from spanwright_grammar.outline import Fold, Link, Symbol
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source, Span

__all__ = [
    "KINDS", "Completion", "Diagnostic", "Document", "Edit", "Fold", "Highlight", "Hover", "Link",
    "Place", "RenameRefused", "Signature", "Source", "Span", "Symbol", "Workspace",
]  # fmt: skip

MAX_FILES = 400
"""So many scripts below the folders of a workspace are searched for uses of a name."""


class _Stored(NamedTuple):
    """A file as it was when it was last read."""

    stamp: tuple[int, int]
    document: Document


class Workspace:
    """Open scripts, as edited; other files as they lie on the disk."""

    def __init__(self) -> None:
        self.folders: list[Path] = []
        self._open: dict[Path, Document] = {}
        self._stored: dict[Path, _Stored] = {}
        self._exports: dict[tuple[Path, Path], tuple[int, Scope]] = {}

    # texts

    def put(self, path: Path, text: str) -> Document:
        """Take a text for what the file at a path says."""
        self._open[path] = Document(text, str(path))
        return self._open[path]

    def edit(self, path: Path, start: int, end: int, text: str) -> Document:
        """Replace a stretch of an open text."""
        self._open[path] = self._open[path].edited(start, end, text)
        return self._open[path]

    def close(self, path: Path) -> None:
        """The file says again what lies on the disk."""
        self._open.pop(path, None)

    def opened(self) -> Mapping[Path, Document]:
        """All open texts."""
        return self._open

    def document(self, path: Path) -> Document | None:
        """The text of a file, open or not; nothing when it cannot be read."""
        if path in self._open:
            return self._open[path]
        try:
            status = path.stat()
            stamp = (status.st_mtime_ns, status.st_size)
            known = self._stored.get(path)
            if known is None or known.stamp != stamp:
                known = _Stored(stamp, Document(read_text(path, str(path)), str(path)))
                self._stored[path] = known
        except (OSError, ValueError, FileRefused):
            self._stored.pop(path, None)
            return None
        return known.document

    # what files know of each other

    def scope_behind(self, path: Path, root: Path, using: tuple[Path, ...] = ()) -> Scope | None:
        """What a used file leaves behind; the paths in it count from the folder `root`."""
        document = self.document(path)
        if document is None or path in using:
            return None
        inner = (*using, path)
        # a file that uses others may change when they do, so only its own text is not enough
        key = (path, root)
        known = self._exports.get(key)
        stamp = hash((id(document), *(id(self.document(p)) for p in self.used(path, root))))
        if known is not None and known[0] == stamp:
            return known[1]
        ledger = Ledger(Scope(), lambda used: self.scope_behind(root / used, root, inner))
        for placed in document.pieces():
            ledger.take_piece(placed.piece)
        scope = ledger.scope()
        self._exports[key] = (stamp, scope)
        return scope

    def _scope_used(self, path: Path, used: str) -> Scope | None:
        root = path.parent
        return self.scope_behind(resolved(root / used), root, (path,))

    def used(self, path: Path, root: Path | None = None) -> list[Path]:
        """The files that a file uses, directly and through others."""
        folder = root or path.parent
        found: dict[Path, None] = {}
        waiting = [path]
        while waiting:
            document = self.document(waiting.pop())
            for link in outline.links(document) if document else ():
                place = resolved(folder / link.path)
                if place not in found and place != path:
                    found[place] = None
                    waiting.append(place)
        return list(found)

    def reachable(self, path: Path) -> dict[str, Document]:
        """The file and those it uses; by path."""
        found = {str(place): self.document(place) for place in (path, *self.used(path))}
        return {name: document for name, document in found.items() if document is not None}

    def connected(self, path: Path) -> dict[str, Document]:
        """The file, those it uses, and those that use it; by path."""
        found: dict[str, Document] = {}
        waiting = [path]
        users = list(self._users())
        while waiting:
            place = waiting.pop()
            document = self.document(place)
            if document is None or str(place) in found:
                continue
            found[str(place)] = document
            waiting.extend(self.used(place))
            waiting.extend(user for user, used in users if place in used)
        return found

    def _users(self) -> Iterator[tuple[Path, list[Path]]]:
        """The files of the workspace that use others."""
        for path in self.scripts():
            document = self.document(path)
            if document is not None and "use" in document.text:
                used = self.used(path)
                if used:
                    yield path, used

    def scripts(self) -> list[Path]:
        """The open scripts and those below the workspace's folders."""
        found = dict.fromkeys(self._open)
        for folder in self.folders:
            for path in _scripts_below(folder):
                if len(found) >= MAX_FILES:
                    break
                found[path] = None
        return list(found)

    # services

    def diagnostics(self, path: Path) -> tuple[Diagnostic, ...]:
        """All findings in an open script."""
        document = self._open[path]
        return document.diagnostics(Scope(), lambda used: self._scope_used(path, used))

    def _scope(self, path: Path, offset: int) -> Scope:
        return self._open[path].scope_at(
            offset, Scope(), lambda used: self._scope_used(path, used)
        )

    def complete(self, path: Path, offset: int) -> list[Completion]:
        """The proposals at an offset."""
        document = self._open[path]
        text, start = document.around(offset)
        is_closed = document.text[offset : offset + 1] == '"'  # editors type the second quote
        found = completion.complete(
            text, offset - start, self._scope(path, offset),
            lambda beginning: services.script_paths(path.parent, beginning),
        )  # fmt: skip
        return [
            Completion(
                item.label, item.insert.removesuffix('"') if is_closed else item.insert,
                item.kind, item.meaning, item.start + start,
            )
            for item in found
        ]  # fmt: skip

    def signature(self, path: Path, offset: int) -> Signature | None:
        """How the word at an offset is written."""
        text, start = self._open[path].around(offset)
        return hovering.signature(text, offset - start, self._scope(path, offset))

    def hover(self, path: Path, offset: int) -> Hover | None:
        """What is known of the word at an offset: its definition, or its entry."""
        document = self._open[path]
        own = navigation.mention_at(document, offset)
        if own is not None:
            mention, span = own
            if mention.owner is not None:
                return Hover(span, f"{mention.name}: a bound name")
            for place in navigation.definitions(self.reachable(path), str(path), offset):
                return Hover(span, self._definition_text(Path(place.document), place.span.start))
        text, start = document.around(offset)
        found = hovering.hover(
            parse(Source(text)), offset - start, self._scope(path, offset)
        )
        if found is None:
            return None
        return Hover(Span(found.span.start + start, found.span.end + start), found.text)

    def _definition_text(self, path: Path, offset: int) -> str:
        document = self.document(path)
        assert document is not None
        line = document.source.position(offset)[0]
        for placed in document.pieces():
            if placed.span.start <= offset < placed.span.end:
                sentence = " ".join(document.text[slice(*placed.span)].split())
                return f"{sentence}\ndefined in {path.name}, line {line}"
        return ""

    def element_at(self, path: Path, offset: int) -> tuple[str, Span, int] | None:
        """The basis element written out at an offset, its span, and the n in force."""
        document = self._open[path]
        n = self._scope(path, offset).n
        found = navigation.element_at(document, offset)
        return None if found is None or n is None else (*found, n)

    def definitions(self, path: Path, offset: int) -> list[Place]:
        """Where the name at an offset is defined, or the file that a `use` names."""
        for link in outline.links(self._open[path]):
            if link.span.start <= offset <= link.span.end:
                place = resolved(path.parent / link.path)
                return [Place(str(place), Span(0, 0))] if self.document(place) else []
        return navigation.definitions(self.reachable(path), str(path), offset)

    def references(self, path: Path, offset: int, *, with_definitions: bool) -> list[Place]:
        """All mentions of the name at an offset."""
        return navigation.references(
            self.connected(path), str(path), offset, with_definitions=with_definitions
        )

    def renameable(self, path: Path, offset: int) -> Span:
        """The span of the name at an offset; raises RenameRefused."""
        return navigation.renameable(self.connected(path), str(path), offset)

    def rename(self, path: Path, offset: int, new: str) -> dict[str, list[Edit]]:
        """The edits that give a name another spelling in all files; raises RenameRefused."""
        return navigation.rename(self.connected(path), str(path), offset, new)

    def symbols(self, path: Path) -> list[Symbol]:
        """The definitions of an open script."""
        return outline.symbols(self._open[path])

    def all_symbols(self, query: str) -> Iterator[tuple[Path, Symbol]]:
        """The definitions in the workspace whose name holds the query's letters in order."""
        for path in self.scripts():
            document = self.document(path)
            waiting = outline.symbols(document)[::-1] if document else []
            while waiting:
                symbol = waiting.pop()
                waiting.extend(reversed(symbol.children))
                if symbol.kind != "block" and _holds_in_order(symbol.name, query):
                    yield path, symbol

    def format_edits(self, path: Path, part: Span | None = None) -> list[Edit]:
        """The edits that bring an open script, or a part, into house style."""
        document = self._open[path]
        return formatting.format_edits(document.text, document.flat_pieces(), part)

    def on_type_edits(self, path: Path, offset: int, typed: str) -> list[Edit]:
        """The edits behind a line end, or an `end`, that has just been typed at an offset."""
        document = self._open[path]
        text, pieces = document.text, document.flat_pieces()
        if typed != "\n":
            start = text.rfind("\n", 0, offset) + 1
            if text[start:offset].strip() != "end":
                return []
            return formatting.format_edits(text, pieces, Span(start, offset))
        start = text.rfind("\n", 0, offset) + 1
        edits = formatting.format_edits(text, pieces, Span(max(start - 1, 0), max(start - 1, 0)))
        edits = [edit for edit in edits if edit.span.end < start]
        blanks = start
        while blanks < len(text) and text[blanks] in " \t":
            blanks += 1
        wanted = formatting.indentation(text, pieces, start)
        if text[start:blanks] != wanted and text[blanks : blanks + 1] in ("", "\n", "\r"):
            edits.append(Edit(Span(start, blanks), wanted))
        return edits

    def highlights(self, path: Path, part: Span | None = None) -> list[Highlight]:
        """What each word of an open script is, for colouring."""
        return list(highlighting.highlights(self._open[path], part))

    def folds(self, path: Path) -> list[Fold]:
        """What can be folded in an open script."""
        return outline.folds(self._open[path])

    def selections(self, path: Path, offset: int) -> list[Span]:
        """What a selection grows to, innermost first."""
        return outline.selections(self._open[path], offset)

    def links(self, path: Path) -> list[tuple[Span, Path]]:
        """The files that an open script uses, where it names them."""
        return [
            (link.span, resolved(path.parent / link.path))
            for link in outline.links(self._open[path])
        ]


def resolved(path: Path) -> Path:
    """The path without `..` and links; as it is when the system refuses."""
    try:
        return path.resolve()
    except (OSError, RuntimeError, ValueError):
        return path


def _scripts_below(folder: Path) -> Iterator[Path]:
    """Scripts below a folder, hidden folders left out, in order; at most `MAX_FILES`."""
    waiting = [folder]
    n_found = n_seen = 0
    while waiting and n_found < MAX_FILES and n_seen < 20 * MAX_FILES:
        here = waiting.pop()
        try:
            items = sorted(here.iterdir())
        except OSError:
            continue
        for item in items:
            n_seen += 1
            if item.name.startswith("."):
                continue
            if item.suffix == services.SUFFIX:
                n_found += 1
                yield resolved(item)
            elif item.is_dir() and not item.is_symlink():
                waiting.append(item)


def _holds_in_order(name: str, query: str) -> bool:
    letters = iter(name.lower())
    return all(letter in letters for letter in query.lower())
