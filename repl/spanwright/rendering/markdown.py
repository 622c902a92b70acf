"""A report as Markdown with TeX mathematics; what a user wrote stays text."""

from __future__ import annotations

import re

from spanwright.rendering.article import pieces, tex_name
from spanwright.rendering.document import Cell, Document, Entry, Grid
from spanwright.rendering.tex import tex
from spanwright.values import Truth

LINE = 90

_MEANT = re.compile(r"([\\`*_{}\[\]()#+\-.!|~$>])")
_REFERENCE = re.compile(r"\beq_(\d{1,12})\b|\((\d{1,12})\)")


def markdown(document: Document) -> str:
    """The whole report."""
    parts = [f"# {prose(document.title)}"]
    facts = [f"- *{prose(name)}*: {prose(value)}" for name, value in document.facts]
    parts.append("\n".join([*facts, f"- *run it again*: {fenced_inline(document.replay)}"]))
    for entry in document.entries:
        parts += _entry(entry, document)
    parts += [_paragraph(p, document) for p in document.closing_prose]
    return "\n\n".join(part for part in parts if part) + "\n"


def prose(text: str) -> str:
    """Prose that Markdown and HTML show as it is, on one line."""
    flat = " ".join(text.split())
    shown = _MEANT.sub(r"\\\1", flat.replace("&", "&amp;").replace("<", "&lt;"))
    return re.sub(r"^(\d+)([.)])", r"\1\\\2", shown)


def _paragraph(text: str, document: Document) -> str:
    out, place = [], 0
    for found in _REFERENCE.finditer(text):
        tag = int(found.group(1) or found.group(2))
        if tag in document.tags:
            out.append(_spaced(text[place:found.start()]))
            out.append(f"[{prose(found.group())}](#eq-{tag})")
            place = found.end()
    return ("".join(out) + _spaced(text[place:])).strip()


def _spaced(text: str) -> str:
    """Prose that keeps the blank it begins or ends with."""
    lead = " " if text[:1].isspace() else ""
    trail = " " if text[-1:].isspace() and text.strip() else ""
    return f"{lead}{prose(text)}{trail}"


def fenced(text: str, language: str = "") -> str:
    """A block of code behind a fence that the text does not contain."""
    longest = max((len(run) for run in re.findall("`+", text)), default=0)
    fence = "`" * max(3, longest + 1)
    return f"{fence}{language}\n{text}\n{fence}"


def fenced_inline(text: str) -> str:
    """Code in a line of prose."""
    flat = " ".join(text.split())
    fence = "`" * (max((len(run) for run in re.findall("`+", flat)), default=0) + 1)
    blank = " " if "`" in flat else ""
    return f"{fence}{blank}{flat}{blank}{fence}"


def _entry(entry: Entry, document: Document) -> list[str]:
    parts = [_paragraph(p, document) for p in entry.prose]
    if entry.tag is not None and document.tags.get(entry.tag) == entry.line:
        parts.append(f'<a id="eq-{entry.tag}"></a>')
    if entry.code:
        parts.append(fenced(entry.typed, "spanwright"))
    if entry.grid is not None:
        parts.append(_table(entry.grid))
    elif entry.value is not None:
        parts.append(_formula(entry))
        parts += [prose(line) for line in entry.notes]
    elif entry.text:
        parts.append(fenced(entry.text))
        if entry.tag is not None:
            parts.append(f"$$\\tag{{{entry.tag}}}$$")
    if entry.cut:
        parts.append(prose(f"… {entry.cut} are in the log"))
    return parts


def _formula(entry: Entry) -> str:
    value = entry.value
    tag = f" \\tag{{{entry.tag}}}" if entry.tag is not None else ""
    head = f"{tex_name(entry.name)} = " if entry.name else ""
    if isinstance(value, Truth):
        word = "holds" if value.holds else "fails"
        if value.difference is None:
            return f"$$\\text{{{word}}}{tag}$$"
        head = rf"\text{{{word}: left}} - \text{{right}} = "
        value = value.difference
    lines = pieces(value, LINE)
    if len(lines) == 1:
        return f"$$\n{head}{lines[0]}{tag}\n$$"
    body = " \\\\\n".join(f"& {line}" for line in [f"{head}{lines[0]}", *lines[1:]])
    return f"$$\n\\begin{{aligned}}\n{body}\n\\end{{aligned}}{tag}\n$$"


def _table(grid: Grid) -> str:
    heads = [prose(head) or " " for head in grid.columns]
    rows = [[_cell(cell) for cell in row] for row in grid.rows]
    lines = [_row(heads), _row(["---"] * len(heads)), *(_row(row) for row in rows)]
    caption = [prose(grid.caption)] if grid.caption else []
    return "\n\n".join([*caption, "\n".join(lines), *(prose(note) for note in grid.notes)])


def _row(cells: list[str]) -> str:
    return f"| {' | '.join(cells)} |"


def _cell(cell: Cell) -> str:
    if cell.factors:
        shown = [tex(factor) for factor in cell.factors]
        product = r" \cdot ".join(f"({f})" if f.startswith("-") else f for f in shown)
        return f"${product}$"
    if cell.value is None:
        return prose(cell.text) or " "
    return f"${tex(cell.value)}$".replace("|", r"\vert ")
