"""A report as a LaTeX article: amsmath and hyperref only, ASCII only, long sums broken by us.

What a user wrote never reaches TeX as a command: every character with a meaning there is replaced.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Callable, Sequence
from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.document import Cell, Document, Entry, Grid
from spanwright.rendering.scalars import TEX, Style, TexStyle, scalar_text
from spanwright.rendering.tex import tex, tex_pieces
from spanwright.values import Truth, is_index, is_operator

LINE = 98
"""Width of a displayed line of 160 mm with room for its tag, in the unit of `width_of`."""

WHOLE_BRACKET = 24
"""A bracket up to this width is never parted."""

_MARGIN = 8

TABLE_LINE = 84

_PREAMBLE = r"""\documentclass[11pt]{article}
\usepackage[a4paper,margin=25mm]{geometry}
\usepackage{amsmath,amssymb}
\usepackage[hidelinks]{hyperref}
\allowdisplaybreaks
\setlength{\parindent}{0pt}\setlength{\parskip}{6pt plus 2pt}
\setlength{\emergencystretch}{3em}
\newcommand{\typed}[1]{\par\smallskip{\ttfamily\small\raggedright #1\par}\nobreak}
\newcommand{\said}[1]{\par{\ttfamily\footnotesize\raggedright #1\par}}
\newcommand{\quotemark}{{\ttfamily\char34}}
"""

_SPECIAL = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "$": r"\$", "&": r"\&", "#": r"\#",
    "%": r"\%", "_": r"\_", "^": r"\textasciicircum{}", "~": r"\textasciitilde{}",
    "<": r"\textless{}", ">": r"\textgreater{}", '"': r"\quotemark{}", "|": r"\textbar{}",
    "`": r"\textasciigrave{}", "'": r"\textquotesingle{}",
    "\u2013": "--", "\u2014": "---", "\u2018": "`", "\u2019": "'", "\u201c": "``",
    "\u201d": "''", "\u2026": r"\dots{}", "\u00a0": "~", "\u00df": r"\ss{}", "\u00e6": r"\ae{}",
    "\u00c6": r"\AE{}", "\u0153": r"\oe{}", "\u0152": r"\OE{}", "\u00f8": r"\o{}",
    "\u00d8": r"\O{}", "\u0142": r"\l{}", "\u0141": r"\L{}", "\u00a7": r"\S{}",
    "\u00b7": r"$\cdot$", "\u22c5": r"$\cdot$", "\u2212": "$-$", "\u2192": r"$\to$",
    "\u2260": r"$\neq$", "\u2264": r"$\leq$", "\u2265": r"$\geq$", "\u2208": r"$\in$",
    "\u2211": r"$\sum$", "\u220f": r"$\prod$", "\u2202": r"$\partial$", "\u221e": r"$\infty$",
}
_ACCENTS = {
    "\u0300": "`", "\u0301": "'", "\u0302": "^", "\u0303": "~", "\u0308": '"', "\u030c": "v",
    "\u030a": "r", "\u0327": "c", "\u0306": "u", "\u0307": ".", "\u030b": "H", "\u0304": "=",
    "\u0328": "k",
}
_GREEK_NAMES = (
    r"\alpha \beta \gamma \delta \varepsilon \zeta \eta \theta \iota \kappa \lambda \mu \nu "
    r"\xi \pi \rho \sigma \tau \upsilon \varphi \chi \psi \omega \Gamma \Delta \Theta \Lambda "
    r"\Xi \Pi \Sigma \Phi \Psi \Omega")
_GREEK = dict(zip("αβγδεζηθικλμνξπρστυφχψωΓΔΘΛΞΠΣΦΨΩ", _GREEK_NAMES.split(), strict=True))

_NEXT_LINE = r"\\{}"
"""A line end that takes no `[…]` or `*` behind it for its own argument."""


def article(document: Document) -> str:
    """The whole article."""
    parts = [
        _PREAMBLE, r"\begin{document}",
        rf"{{\LARGE\raggedright {prose(document.title)}\par}}",
        r"\begin{flushleft}\small"]
    parts += [rf"\textit{{{prose(name)}}}: {prose(value)}\\" for name, value in document.facts]
    parts += [rf"\textit{{run it again}}: {{\ttfamily {prose(document.replay)}}}",
              r"\end{flushleft}", ""]
    parts += [_entry(entry, document) for entry in document.entries]
    parts += [_paragraph(p, document) for p in document.closing_prose]
    parts.append(r"\end{document}")
    return "\n".join(parts) + "\n"


def prose(text: str) -> str:
    """Prose in ASCII that TeX prints as it is; unknown characters by their number."""
    return "".join(_character(c) for c in unicodedata.normalize("NFC", text))


def _character(c: str) -> str:
    found = _SPECIAL.get(c)
    if found is not None:
        return found
    if " " <= c <= "~":
        return c
    if c in "\n\t\r":
        return " "
    if c in _GREEK:
        return f"${_GREEK[c]}$"
    parted = unicodedata.normalize("NFD", c)
    base, marks = parted[0], parted[1:]
    if base.isascii() and base.isalpha() and len(marks) == 1 and marks in _ACCENTS:
        dotless = {"i": r"\i", "j": r"\j"}.get(base, base)
        return f"\\{_ACCENTS[marks]}{{{dotless}}}"
    return f"[U+{ord(c):04X}]"


_REFERENCE = re.compile(r"\b(?:eq_(?P<a>\d{1,12}))\b|\((?P<b>\d{1,12})\)")


def _with_links(
    text: str, document: Document, shown: Callable[[str], str], *, is_code: bool = False
) -> str:
    """A text with references to equations as links, the rest passed through `shown`."""
    out: list[str] = []
    place = 0
    for found in _REFERENCE.finditer(text):
        if is_code and found.group("a") is None:
            continue
        tag = int(found.group("a") or found.group("b"))
        if tag in document.tags:
            out.append(shown(text[place:found.start()]))
            out.append(rf"\hyperref[eq:{tag}]{{{shown(found.group())}}}")
            place = found.end()
    return "".join(out) + shown(text[place:])


def _paragraph(text: str, document: Document) -> str:
    return _with_links(text, document, prose) + "\n"


def _entry(entry: Entry, document: Document) -> str:
    parts = [_paragraph(p, document) for p in entry.prose]
    if entry.code:
        lines = entry.typed.split("\n")
        typed = _NEXT_LINE.join(
            _with_links(line, document, typewriter, is_code=True) or r"\strut" for line in lines)
        parts.append(rf"\typed{{{typed}}}")
    parts.append(_result(entry, document))
    return "\n".join(part for part in parts if part)


def typewriter(line: str) -> str:
    """A line of typewriter with its blanks kept."""
    return "".join(
        r"\ " if c == " " and (k == 0 or line[k - 1] == " ") else _character(c)
        for k, c in enumerate(line))


def _said(text: str, cut: str = "") -> str:
    lines = [typewriter(line) or r"\strut" for line in text.split("\n")]
    if cut:
        lines.append(prose(f"… {cut} are in the log"))
    return rf"\said{{{_NEXT_LINE.join(lines)}}}" + "\n"


def _anchor(entry: Entry, document: Document) -> str:
    is_first = entry.tag is not None and document.tags.get(entry.tag) == entry.line
    return rf"\label{{eq:{entry.tag}}}" if is_first else ""


def _result(entry: Entry, document: Document) -> str:
    if entry.status == "refused" or (entry.value is None and entry.grid is None):
        if not entry.text:
            return ""
        if entry.tag is None:
            return _said(entry.text, entry.cut)
        # the tag stands on a line of its own where the result is no formula
        return _said(entry.text, entry.cut) + "\n".join([
            r"\begin{equation*}", rf"\tag{{{entry.tag}}}{_anchor(entry, document)}",
            r"\end{equation*}"])
    if entry.grid is not None:
        return _table(entry.grid)
    value = entry.value
    if isinstance(value, Truth):
        said = "\n" + _said("\n".join(entry.notes)) if entry.notes else ""
        word = r"\emph{holds}" if value.holds else r"\emph{fails}"
        tag = rf"\tag{{{entry.tag}}}{_anchor(entry, document)}" if entry.tag is not None else ""
        if value.difference is None:
            inner = rf"\text{{{word}}}{tag}"
            return f"\\begin{{equation*}}\n{inner}\n\\end{{equation*}}{said}"
        head = rf"\text{{{word}:}}\quad \text{{left}} - \text{{right}} = "
        shown = displayed(_headed(head, pieces(value.difference, LINE, width_of(head))), tag)
        return shown + said
    tag = rf"\tag{{{entry.tag}}}{_anchor(entry, document)}" if entry.tag is not None else ""
    head = f"{tex_name(entry.name)} = " if entry.name else ""
    lines = _headed(head, pieces(value, LINE, width_of(head)))
    if entry.cut:
        lines.append(rf"\quad \text{{{prose('… ' + entry.cut + ' are in the log')}}}")
    return displayed(lines, tag)


def _headed(head: str, lines: list[str]) -> list[str]:
    return [f"{head}{lines[0]}", *lines[1:]]


def tex_name(name: str) -> str:
    """A name of the user, letters and digits, in math mode."""
    return TEX.name("".join(c for c in name if c.isascii() and c.isalnum()))


def displayed(lines: Sequence[str], tag: str) -> str:
    """Lines of one formula, broken where they are, its tag on the last."""
    rows = []
    for place, line in enumerate(lines):
        is_last = place == len(lines) - 1
        rows.append(f"& {line}" + (f" {tag}" if is_last else r" \notag\\"))
    kind = "align" if tag else "align*"
    body = "\n".join(rows) if tag else "\n".join(rows).replace(r" \notag\\", r" \\")
    return f"\\begin{{{kind}}}\n{body}\n\\end{{{kind}}}"


# --- Breaking long sums --------------------------------------------------------------------------


class LinearTexStyle(TexStyle):
    """TeX without fractions, so that a line can be broken anywhere between terms."""

    def quotient(self, numerator: str, denominators: Sequence[str]) -> str:
        return Style.quotient(self, numerator, denominators)


LINEAR = LinearTexStyle()


def pieces(value: Any, width: int, used: int = 0) -> list[str]:
    """A value in lines of TeX, each about `width` characters wide at most.

    `used` are the characters that the first line holds already.
    """
    terms = _terms(value, width, used)
    if terms is None:
        return [tex(value)]
    lines: list[str] = []
    current = ""
    for place, (sign, parts) in enumerate(terms):
        for k, part in enumerate(parts):
            lead = (sign if place == 0 else f"{sign} ") if k == 0 else ""
            size = width_of(lead + part) + 1
            if current and used + size > width - (4 if lines else 0):
                lines.append(current)
                current, used = "", 0
            # a sign that opens a line stands between two terms all the same
            is_between = (lead + part)[:2] in ("+ ", "- ") and not current
            current += f" {lead}{part}" if current else f"{'{}' * is_between}{lead}{part}"
            used += size
    return _indented([*lines, current]) if current or lines else ["0"]


def _indented(lines: Sequence[str]) -> list[str]:
    return [line if k == 0 or line.startswith(r"\quad") else rf"\quad {line}"
            for k, line in enumerate(lines)]


def _terms(
    value: Any, width: int, used: int
) -> list[tuple[str, list[str]]] | None:
    """The terms: sign, and what may be parted, in one piece when it fits a line."""
    rows: list[tuple[bool, str, str]]
    scalars: list[Any]
    if isinstance(value, LaurentPolynomial | Expansion):
        rows = tex_pieces(value)
        items: Any = value.items()
        scalars = [c for _, c in items]
    elif is_operator(value):
        from spanwright.rendering.operators import operator_pieces

        word = value.to_operator() if hasattr(value, "to_operator") else value
        rows = operator_pieces(word, TEX, "short")
        scalars = list(word.terms.values())
    elif hasattr(value, "form"):
        shown = tex(value)
        if width_of(shown) <= width - used - _MARGIN:
            return [("", [shown])]
        return [("", _parted(scalar_text(value, LINEAR)))]
    else:
        return None
    found: list[tuple[str, list[str]]] = []
    for (negative, coefficient, element), c in zip(rows, scalars, strict=True):
        whole = " ".join(part for part in (coefficient, element) if part)
        parts = [whole]
        if width_of(whole) > width - _MARGIN:
            linear = scalar_text(c, LINEAR, as_factor=bool(element))
            parts = _parted(linear.removeprefix("-") if negative else linear)
            parts[-1] = f"{parts[-1]} {element}".rstrip()
        found.append(("-" if negative else "+" if found else "", parts))
    return found


def _parted(linear: str) -> list[str]:
    """A formula without fractions, parted before signs and between factors."""
    parts: list[str] = []
    depth, start, until = 0, 0, 0
    for place, c in enumerate(linear):
        if place < until:
            continue
        if c == "(" and depth == 0:
            last = _closing(linear, place, "()")
            if width_of(linear[place:last]) <= WHOLE_BRACKET:
                until = last + 1  # a short bracket stays in one piece
        elif c == "{":
            depth += 1
        elif c == "}":
            depth -= 1
        elif c == " " and depth == 0:
            after = linear[place + 1:place + 3]
            between = linear[place - 1:place] == ")" and after[:1] == "("
            if after in ("+ ", "- ") or between:
                parts.append(linear[start:place])
                start = place + 1
    parts.append(linear[start:])
    return parts


_COMMAND = re.compile(r"\\(?:mathfrak|mathcal|mathbf|mathit|text|quad|left|right|emph)(?![A-Za-z])")


def width_of(formula: str) -> int:
    """About how many characters wide a formula is; a fraction is as wide as its wider part."""
    return _width(_COMMAND.sub("", formula), 0, len(_COMMAND.sub("", formula)))


def _width(text: str, start: int, end: int) -> int:
    total, place = 0.0, start
    while place < end:
        c = text[place]
        if text.startswith(r"\frac{", place):
            middle = _closing(text, place + 5)
            last = _closing(text, middle + 1)
            total += max(_width(text, place + 6, middle), _width(text, middle + 2, last)) + 1
            place = last + 1
        elif c in "_^" and place + 1 < end and text[place + 1] == "{":
            last = _closing(text, place + 1)
            total += 0.75 * _width(text, place + 2, last)
            place = last + 1
        elif c == "\\":
            found = re.compile(r"\\(?:[A-Za-z]+|.)").match(text, place)
            total += 1
            place = found.end() if found else place + 1
        else:
            total += {" ": 0.2, "{": 0, "}": 0, "+": 2.2, "-": 2.2}.get(c, 1.0)
            place += 1
    return round(total + 0.49)


def _closing(text: str, place: int, signs: str = "{}") -> int:
    """The place of the brace that closes the one at a place."""
    depth = 0
    for k in range(place, len(text)):
        depth += {signs[0]: 1, signs[1]: -1}.get(text[k], 0)
        if depth == 0:
            return k
    return len(text) - 1


# --- Tables --------------------------------------------------------------------------------------


def _table(grid: Grid) -> str:
    """A tabular when it fits the page, else a row after the other with its heads."""
    cells = [[_cell(cell) for cell in row] for row in grid.rows]
    heads = [typewriter(head) for head in grid.columns]
    widths = [max([len(grid.columns[k]), *(_cell_width(row[k]) for row in grid.rows)])
              for k in range(len(heads))]
    out = [prose(grid.caption)] if grid.caption else []
    if sum(widths) + 2 * len(widths) <= TABLE_LINE and len(grid.rows) <= 30:
        rows = ["{}" + " & ".join(row) + r" \\" for row in cells]
        head = " & ".join(rf"\texttt{{{h}}}" for h in heads) + r" \\ \hline"
        out.append("\n".join([
            r"\begin{center}\renewcommand{\arraystretch}{1.5}",
            rf"\begin{{tabular}}{{{'l' * len(heads)}}}", head, *rows, r"\end{tabular}",
            r"\end{center}"]))
    else:
        for cells_of_row in grid.rows:
            out.append(_stretched(grid.columns, cells_of_row))
    out += [rf"{{\footnotesize {prose(note)}\par}}" for note in grid.notes]
    return "\n\n".join(out) + "\n"


def _stretched(columns: Sequence[str], row: Sequence[Cell]) -> str:
    """A row as lines: short cells one after the other, a long value displayed."""
    short, long = [], []
    for head, cell in zip(columns, row, strict=True):
        if cell.value is not None and _cell_width(cell) > LINE // 2:
            long.append((head, cell))
        else:
            short.append(rf"\texttt{{{typewriter(head)}}}: {_cell(cell)}")
    parts = [rf"{{\raggedright {'; '.join(short)}\par}}"] if short else []
    for head, cell in long:
        parts.append(rf"\texttt{{{typewriter(head)}}}:")
        parts.append(displayed(pieces(cell.value, LINE), ""))
    return "\n".join(parts)


def _cell(cell: Cell) -> str:
    if cell.value is None and not cell.factors:
        return prose(cell.text)
    return f"${_cell_tex(cell)}$"


def _cell_tex(cell: Cell) -> str:
    if cell.factors:
        shown = [tex(factor) for factor in cell.factors]
        return r" \cdot ".join(f"({f})" if f.startswith("-") else f for f in shown)
    if is_index(cell.value):
        return f"({','.join(map(str, cell.value))})"
    return tex(cell.value)


def _cell_width(cell: Cell) -> int:
    if cell.value is None and not cell.factors:
        return len(cell.text)
    return width_of(_cell_tex(cell))
