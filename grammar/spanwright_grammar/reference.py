"""The language reference of the README, made from the vocabulary."""

from __future__ import annotations

from collections.abc import Iterable

from spanwright_grammar.vocabulary import KINDS, Entry, Kind, by_kind

_HEADINGS: dict[Kind, str] = {
    "family": "Families",
    "operator": "Operators",
    "function": "Functions",
    "set": "Index sets",
    "parameter": "Parameters",
    "setting": "Settings",
    "sentence": "Sentences",
    "word": "Words and signs inside sentences",
}


def reference_markdown() -> str:
    """One table for each kind of word, then the sources; ends in a line end."""
    sources: dict[str, int] = {}
    sections = [_section(kind, sources) for kind in KINDS]
    listed = [f"{number}. {source}." for source, number in sources.items()]
    return "\n\n".join([*sections, "### Sources\n\n" + "\n".join(listed)]) + "\n"


def _section(kind: Kind, sources: dict[str, int]) -> str:
    entries = by_kind(kind)
    has_inputs = any(entry.inputs for entry in entries)
    header = ["written", "meaning", *(["takes"] if has_inputs else []), "example", "source"]
    rows = [_row(header), _row(["---"] * len(header))]
    for entry in entries:
        cells = [_written(entry), _escaped(entry.meaning)]
        if has_inputs:
            cells.append(_escaped(entry.inputs))
        cells.append(_code([entry.example]))
        cells.append(_source(entry.source, sources))
        rows.append(_row(cells))
    return f"### {_HEADINGS[kind]}\n\n" + "\n".join(rows)


def _source(source: str, sources: dict[str, int]) -> str:
    if source in ("ours", "common practice"):
        return source
    return f"[{sources.setdefault(source, len(sources) + 1)}]"


def _written(entry: Entry) -> str:
    written = _code([entry.signature])
    spellings = [alias for alias in entry.aliases if len(alias) > 1 or not alias.isascii()]
    return f"{written} (also {_code(spellings)})" if spellings else written


def _code(texts: Iterable[str]) -> str:
    """The texts as code, a line at a time."""
    lines = [line.strip() for text in texts for line in text.split("\n")]
    return " ".join(f"`{_escaped(line)}`" for line in lines)


def _escaped(text: str) -> str:
    """The text with the bars that would end a cell escaped."""
    return text.replace("|", "\\|")


def _row(cells: list[str]) -> str:
    return "| " + " | ".join(cells) + " |"
