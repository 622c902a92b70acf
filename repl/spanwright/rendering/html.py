"""A report as one HTML page: no network, no script, mathematics as MathML from the values."""

from __future__ import annotations

import base64
import re
from html import escape
from typing import Any

from spanwright.rendering.document import (
    FIRST_TERMS,
    SHOWN_TERMS,
    Cell,
    Document,
    Entry,
    Grid,
)
from spanwright.rendering.mathml import (
    identifier,
    in_brackets,
    parted_terms,
    row,
    term_rows,
    term_texts,
    words_of,
    wrapped_math,
)
from spanwright.rendering.tex import tex
from spanwright.rendering.text import text
from spanwright.values import Truth

LONGEST_TERM = 150
"""A term of more characters is parted, so that paper and telephones hold it."""

LONGEST_LABEL = 1_000
"""A longer text alternative is cut: nobody listens to it, and the whole text stands beside."""

# What is laid into the page as it is may only be a picture.
_PICTURE = re.compile(r"\A\s*<svg[\s>].*</svg>\s*\Z", re.DOTALL)
_NOT_IN_PICTURE = re.compile(
    r"<\s*(script|foreignobject|iframe|image|use|style|a)\b|\son\w+\s*=|javascript:|@import|url\s*\(",
    re.IGNORECASE)
_ADDRESS = re.compile(r"(?:href|src)\s*=", re.IGNORECASE)

_POLICY = "default-src 'none'; style-src 'unsafe-inline'; base-uri 'none'; form-action 'none'"

_STYLE = """\
:root { color-scheme: light dark; --ground: #fffdf8; --ink: #22262b; --soft: #5c646e;
  --rule: #d9d4c7; --band: #f5f1e6; --link: #7a3b10; --fail: #a32020; --mark: #2d5f57;
  --symbol: #4a3f8f; }
@media (prefers-color-scheme: dark) { :root { --ground: #17191c; --ink: #e6e3dc;
  --soft: #a2a8b0; --rule: #3a3e44; --band: #202328; --link: #e0a878; --fail: #f08a80;
  --mark: #8cc7bb; --symbol: #b9b0f0; } }
* { box-sizing: border-box; }
html { -webkit-text-size-adjust: 100%; }
body { margin: 0 auto; padding: 2rem 1.25rem 4rem; max-width: 50rem; background: var(--ground);
  color: var(--ink); font: 1.05rem/1.55 Charter, "Bitstream Charter", Georgia, serif; }
h1 { font-size: 1.7rem; line-height: 1.2; margin: 0 0 1rem; overflow-wrap: anywhere; }
dl { display: grid; grid-template-columns: max-content 1fr; gap: .15rem 1rem; margin: 0 0 1rem;
  font-size: .9rem; color: var(--soft); }
dt { font-style: italic; }
dd { margin: 0; overflow-wrap: anywhere; }
a { color: var(--link); }
pre, code, kbd { font-family: "DejaVu Sans Mono", Menlo, Consolas, monospace; font-size: .86rem; }
pre { margin: 0; white-space: pre-wrap; overflow-wrap: anywhere; }
header { border-bottom: 1px solid var(--rule); margin-bottom: 1.5rem; padding-bottom: .5rem; }
article { margin: 0 0 1.6rem; }
article:target { outline: 2px solid var(--rule); outline-offset: .5rem; }
.prose { margin: 0 0 .9rem; overflow-wrap: anywhere; }
.typed { padding: .4rem .75rem; border-left: 3px solid var(--rule); background: var(--band); }
.result { display: flex; align-items: baseline; gap: 1rem; margin: .6rem 0 0;
  padding-left: .9rem; }
.value { flex: 1; min-width: 0; }
.tag { flex: none; color: var(--soft); text-decoration: none; }
.tag:hover { text-decoration: underline; }
.term { display: inline-block; max-width: 100%; overflow-x: auto; overflow-y: hidden;
  padding: .22rem .12rem; vertical-align: middle; }
math { font-family: "Latin Modern Math", "STIX Two Math", "TeX Gyre Termes Math",
  "Cambria Math", "DejaVu Math TeX Gyre", math; font-size: 1.06rem; }
mfrac { padding: 0 .1em; }
.word-holds { color: var(--mark); }
.word-fails, .refused pre { color: var(--fail); }
.refused .typed { border-left-color: var(--fail); }
details { font-size: .92rem; }
summary { cursor: pointer; color: var(--soft); }
details.forms { margin: .3rem 0 0 .9rem; }
details.forms pre { padding: .4rem 0; border-top: 1px solid var(--rule); }
.more > summary { padding: .2rem 0; }
.scroll { overflow-x: auto; }
table { border-collapse: collapse; font-size: .95rem; }
th, td { text-align: left; vertical-align: baseline; padding: .25rem 1rem .25rem 0; }
thead th { border-bottom: 1px solid var(--ink); font-weight: 600; }
tbody tr + tr td { border-top: 1px solid var(--rule); }
caption { text-align: left; color: var(--soft); padding-bottom: .3rem; }
.note { color: var(--soft); font-size: .88rem; margin: .3rem 0 0; }
figure { margin: .6rem 0; overflow-x: auto; }
svg { max-width: 100%; height: auto; color: var(--ink); }
svg text, svg circle { fill: currentColor; }
svg [stroke="black"] { stroke: currentColor; }
.k-keyword { color: var(--mark); } .k-comment, .k-result { color: var(--soft); }
.k-family, .k-operator { color: var(--symbol); } .k-invalid { color: var(--fail); }
@media (max-width: 36rem) { body { padding: 1rem .8rem 3rem; font-size: 1rem; }
  dl { grid-template-columns: 1fr; gap: 0; } dd { margin-bottom: .35rem; }
  .result { padding-left: .2rem; gap: .5rem; } details.forms { margin-left: .2rem; } }
@media print { :root { --ground: #fff; --ink: #000; --soft: #444; --rule: #bbb; --band: #fff;
    --link: #000; --fail: #000; --mark: #000; --symbol: #000; color-scheme: light; }
  @page { margin: 20mm; }
  body { max-width: none; padding: 0; font-size: 10.5pt; }
  .typed { break-inside: avoid; } .typed, .result { break-after: auto; }
  details.more::details-content { content-visibility: visible; block-size: auto; }
  details.forms, .more > summary { display: none; }
  .term, .scroll, figure { overflow: visible; } a { text-decoration: none; } }
"""


def html_page(document: Document) -> str:
    """The whole page; everything that a user wrote is escaped."""
    title = _escaped(document.title)
    facts = "".join(
        f"<dt>{_escaped(name)}</dt><dd>{_escaped(value)}</dd>\n" for name, value in document.facts)
    entries = "\n".join(_entry(entry, document) for entry in document.entries)
    closing = "".join(_paragraph(p, document) for p in document.closing_prose)
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{_POLICY}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        '<meta name="generator" content="Spanwright">\n'
        f"<title>{title}</title>\n<style>\n{_STYLE}</style>\n</head>\n<body>\n"
        f"<header>\n<h1>{title}</h1>\n<dl>\n{facts}"
        f"<dt>run it again</dt><dd><code>{_escaped(document.replay)}</code>{_log_link(document)}"
        "</dd>\n</dl>\n</header>\n"
        f"<main>\n{entries}\n{closing}</main>\n</body>\n</html>\n")


def _escaped(prose: str) -> str:
    """Prose as HTML shows it; characters that no page may hold become replacement characters."""
    return escape(_NO_CHARACTER.sub("\N{REPLACEMENT CHARACTER}", prose), quote=True)


_NO_CHARACTER = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\ud800-\udfff\ufdd0-\ufdef"
                           + "".join(chr(plane << 16 | low)
                                     for plane in range(17) for low in (0xFFFE, 0xFFFF)) + "]")


def _log_link(document: Document) -> str:
    if not document.source:
        return ""
    content = base64.b64encode(document.source.encode("utf-8")).decode("ascii")
    name = _escaped(document.file_name)
    return (f' <a download="{name}" href="data:text/plain;charset=utf-8;base64,{content}">'
            f"save {name}</a>")


def _entry(entry: Entry, document: Document) -> str:
    pieces = [_paragraph(p, document) for p in entry.prose]
    if entry.code:
        pieces.append(f'<pre class="typed"><code>{_code(entry, document)}</code></pre>')
    pieces.append(_result(entry))
    anchor = f"eq-{entry.tag}" if entry.tag is not None else f"line-{entry.line}"
    # a tag that occurs twice in a damaged log must not make two anchors of one name
    if entry.tag is not None and document.tags.get(entry.tag) != entry.line:
        anchor = f"line-{entry.line}"
    kind = ' class="refused"' if entry.status == "refused" else ""
    return f'<article id="{anchor}"{kind}>\n' + "\n".join(p for p in pieces if p) + "\n</article>"


_REFERENCE = re.compile(r"\beq_(\d{1,12})\b|\((\d{1,12})\)")


def _paragraph(prose: str, document: Document) -> str:
    """A remark; eq_7 and (7) link to the equation when there is one."""
    return f'<p class="prose">{_linked(_escaped(prose), document)}</p>'


def _linked(escaped: str, document: Document) -> str:
    def link(found: re.Match[str]) -> str:
        tag = int(found.group(1) or found.group(2))
        if tag not in document.tags:
            return found.group()
        return f'<a href="#eq-{tag}">{found.group()}</a>'

    return _REFERENCE.sub(link, escaped)


_CODE_REFERENCE = re.compile(r"\beq_(\d{1,12})\b")


def _code(entry: Entry, document: Document) -> str:
    """The input with its colours; references to equations are links."""
    out: list[str] = []
    place = 0
    typed = entry.typed
    links = {
        m.start(): m for m in _CODE_REFERENCE.finditer(typed) if int(m.group(1)) in document.tags}
    until = 0
    for kind, piece in entry.code:
        start, place = place, place + len(piece)
        if start < until:
            continue  # inside a link that is written already
        found = links.get(start)
        if found is not None and kind not in ("comment", "string"):
            out.append(f'<a href="#eq-{int(found.group(1))}">{found.group()}</a>')
            until = found.end()
            if place > until:
                out.append(_escaped(typed[until:place]))
            continue
        shown = _escaped(piece)
        out.append(shown if kind == "" else f'<span class="k-{kind}">{shown}</span>')
    return "".join(out)


def _result(entry: Entry) -> str:
    if entry.status == "refused":
        return f'<div class="result"><pre class="value">{_escaped(entry.text)}</pre></div>' \
            if entry.text else ""
    if entry.picture and is_picture(entry.picture):
        label = _escaped(entry.text[:LONGEST_LABEL] or "a picture")
        return f'<figure role="img" aria-label="{label}">{entry.picture.strip()}</figure>'
    if entry.grid is not None:
        return _table(entry.grid)
    if entry.value is None:
        if not entry.text:
            return ""
        return _with_tag(entry, f'<pre class="value">{_escaped(entry.text)}{_cut(entry)}</pre>')
    notes = "".join(f'<p class="note">{_escaped(line)}</p>' for line in entry.notes)
    return _with_tag(
        entry, f'<div class="value">{_formula(entry)}{notes}</div>') + _forms(entry)


def _with_tag(entry: Entry, inner: str) -> str:
    tag = "" if entry.tag is None else \
        f'<a class="tag" href="#eq-{entry.tag}">({entry.tag})</a>'
    return f'<div class="result">{inner}{tag}</div>'


def _cut(entry: Entry) -> str:
    return f"\n… {_escaped(entry.cut)} are in the log" if entry.cut else ""


def _formula(entry: Entry) -> str:
    """The value term by term, so that a narrow screen breaks between terms."""
    label = _escaped(entry.text[:LONGEST_LABEL])
    named = f"equation ({entry.tag}): " if entry.tag is not None else ""
    inner = _inner(entry)
    return f'<div class="formula" role="group" aria-label="{named}{label}">{inner}</div>'


def _inner(entry: Entry) -> str:
    value = entry.value
    head = ""
    if entry.name:
        head = _term(f"{identifier(entry.name)}<mo>=</mo>", f"{entry.name} =")
    if isinstance(value, Truth):
        word = "holds" if value.holds else "fails"
        shown = f'<span class="word-{word}">{word}</span>'
        if value.difference is None:
            return shown
        left = _term("<mtext>left</mtext><mo>&#x2212;</mo><mtext>right</mtext><mo>=</mo>",
                     "left - right =")
        return f"{shown}<br>{left} {_terms(value.difference, '')}"
    return f"{head} {_terms(value, entry.cut)}" if head else _terms(value, entry.cut)


def _terms(value: Any, cut: str) -> str:
    rows = term_rows(value)
    rest = f' <span class="note">… {_escaped(cut)} are in the log</span>' if cut else ""
    if not rows:
        return _term(row(value), text(value)) + rest
    alternatives = term_texts(value)
    shown = [
        _term(r, a) if len(a) <= LONGEST_TERM else _parted(parts, a)
        for r, a, parts in zip(rows, alternatives, parted_terms(value, alternatives), strict=True)]
    if len(shown) <= SHOWN_TERMS:
        return " ".join(shown) + rest
    n_more = len(shown) - FIRST_TERMS
    return (
        " ".join(shown[:FIRST_TERMS])
        + f' <details class="more"><summary>{n_more:,} more terms</summary>'
        + " ".join(shown[FIRST_TERMS:]) + rest + "</details>")


def _term(inner: str, alternative: str) -> str:
    cut = alternative if len(alternative) <= LONGEST_LABEL else alternative[:LONGEST_LABEL] + " …"
    math = wrapped_math(f'<mstyle displaystyle="true">{inner}</mstyle>', cut)
    return f'<span class="term">{math}</span>'


def _parted(parts: list[str], alternative: str) -> str:
    """A term wider than a page, in parts between which a line may end."""
    label = _escaped(alternative[:LONGEST_LABEL])
    pieces = " ".join(_term(part, words_of(part)) for part in parts)
    return f'<span role="group" aria-label="{label}">{pieces}</span>'


def _forms(entry: Entry) -> str:
    """The same value as text and as TeX, to copy."""
    if isinstance(entry.value, Truth):
        return ""
    digest = f" · digest {_escaped(entry.digest)}" if entry.digest else ""
    return (
        f'<details class="forms"><summary>text and TeX{digest}</summary>'
        f"<pre>{_escaped(entry.text)}</pre><pre>{_escaped(tex(entry.value))}</pre></details>")


def _table(grid: Grid) -> str:
    heads = "".join(f'<th scope="col">{_escaped(head)}</th>' for head in grid.columns)
    rows = "\n".join(
        "<tr>" + "".join(f"<td>{_cell(cell)}</td>" for cell in cells) + "</tr>"
        for cells in grid.rows)
    caption = f"<caption>{_escaped(grid.caption)}</caption>" if grid.caption else ""
    notes = "".join(f'<p class="note">{_escaped(note)}</p>' for note in grid.notes)
    return (f'<div class="scroll"><table>{caption}<thead><tr>{heads}</tr></thead>'
            f"<tbody>\n{rows}\n</tbody></table></div>{notes}")


def _cell(cell: Cell) -> str:
    if cell.factors:
        rows = [row(factor) for factor in cell.factors]
        bracketed = [in_brackets(r) if "-" in text(f)[:1] else r
                     for r, f in zip(rows, cell.factors, strict=True)]
        return _term('<mo>&#x22c5;</mo>'.join(f"<mrow>{r}</mrow>" for r in bracketed), cell.text)
    if cell.value is None:
        return _escaped(cell.text)
    return _terms(cell.value, "")


def is_picture(markup: str) -> bool:
    """Whether a text is an SVG picture that can do nothing and fetches nothing."""
    return (
        _PICTURE.match(markup) is not None
        and _NOT_IN_PICTURE.search(markup) is None
        and _ADDRESS.search(markup) is None)
