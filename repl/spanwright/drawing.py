"""Diagrams of indices and the supports of expansions, as text and as SVG.

A composition's diagram has one column of boxes for each part, a partition's one row (French
and English papers differ; rows go down here). Each box holds its arm and leg, as in the norm
formulas of nonsymmetric Macdonald polynomials (Haglund, Haiman, Loehr, A combinatorial formula for
nonsymmetric Macdonald polynomials, 2008, section 3). A permutation is drawn as its Rothe diagram
(Macdonald, Notes on Schubert Polynomials, 1991): dots at (i, w(i)), boxes where a row
and a column run on before both meet a dot.
"""

from __future__ import annotations

from dataclasses import dataclass
from html import escape
from typing import Any

from spanwright.kernel import indices
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.text import element_text, index_text, monomial_text

LARGEST_SIDE = 60
"""Diagrams of more rows or columns are refused."""
LARGEST_SUPPORT = 400
CELL = 28
MARGIN = 10


class NotDrawable(Exception):
    """A value of which there is no picture; the message says what there is one of."""


@dataclass(frozen=True, slots=True)
class Box:
    """A box at a row and a column, counted from 0, with what stands in it."""

    row: int
    column: int
    label: str = ""


@dataclass(frozen=True, slots=True)
class Diagram:
    """Boxes and dots on a grid; `title` names the index, `heads` stand below the columns."""

    title: str
    boxes: tuple[Box, ...]
    dots: tuple[tuple[int, int], ...] = ()
    heads: tuple[str, ...] = ()

    @property
    def n_rows(self) -> int:
        """Rows of the grid."""
        rows = [b.row for b in self.boxes] + [d[0] for d in self.dots]
        return max(rows, default=-1) + 1

    @property
    def n_columns(self) -> int:
        """Columns of the grid."""
        columns = [b.column for b in self.boxes] + [d[1] for d in self.dots]
        return max([*columns, len(self.heads) - 1], default=-1) + 1


@dataclass(frozen=True, slots=True)
class Support:
    """The indices of an expansion by size, one row for each size, with signs of nothing else."""

    title: str
    rows: tuple[tuple[str, tuple[str, ...]], ...]


Picture = Diagram | Support


def picture(value: Any, head: str = "") -> Picture:
    """The picture of an index or of a polynomial; `head` is the family that the index stands at.

    Raises NotDrawable.
    """
    if isinstance(value, Expansion | LaurentPolynomial):
        return _support(value)
    if not (isinstance(value, tuple) and value and all(isinstance(p, int) for p in value)):
        raise NotDrawable("compositions, partitions, permutations, polynomials and expansions "
                          "can be drawn")
    if len(value) > LARGEST_SIDE or max(map(abs, value)) > LARGEST_SIDE:
        raise NotDrawable(f"a diagram has at most {LARGEST_SIDE} rows and columns")
    if min(value) < 0:
        raise NotDrawable("a diagram needs parts that are not negative")
    if indices.is_permutation(value) and head in ("", "S", "G"):
        return rothe_diagram(value)
    return composition_diagram(value)


def composition_diagram(mu: tuple[int, ...]) -> Diagram:
    """Columns of boxes, mu_i high, each box with its arm and leg; a partition's as rows."""
    if indices.is_partition(mu):
        conjugate = indices.conjugate(mu)
        boxes = tuple(
            Box(i, j, f"{mu[i] - j - 1},{conjugate[j] - i - 1}")
            for i in range(len(mu)) for j in range(mu[i]))
        return Diagram(f"{index_text(mu)}, arm and leg in each box", boxes)
    height = max(mu)
    boxes = tuple(
        Box(height - j, i, "{},{}".format(*arm_and_leg(mu, i, j)))
        for j in range(height, 0, -1) for i in range(len(mu)) if mu[i] >= j)
    return Diagram(
        f"{index_text(mu)}, arm and leg in each box", boxes, heads=tuple(map(str, mu)))


def arm_and_leg(mu: tuple[int, ...], i: int, j: int) -> tuple[int, int]:
    """Arm and leg of the box j of column i (from 0): boxes above it are its leg.

    The arm counts columns r < i with j <= mu_r <= mu_i and r > i with j - 1 <= mu_r < mu_i, where
    the bottom row 0 is part of every column (Haglund, Haiman, Loehr 2008, (8)-(9)).
    """
    before = sum(1 for r in range(i) if j <= mu[r] <= mu[i])
    behind = sum(1 for r in range(i + 1, len(mu)) if j - 1 <= mu[r] < mu[i])
    return before + behind, mu[i] - j


def rothe_diagram(w: tuple[int, ...]) -> Diagram:
    """Dots at (i, w(i)); boxes at (i, j) with w(i) > j and w^-1(j) > i: as many as inversions."""
    inverse = indices.inverse(w)
    boxes = tuple(
        Box(i, j) for i in range(len(w)) for j in range(len(w))
        if w[i] > j + 1 and inverse[j] > i + 1)
    dots = tuple((i, value - 1) for i, value in enumerate(w))
    return Diagram(f"{index_text(w)}, {len(boxes)} inversions", boxes, dots)


def _support(value: Expansion | LaurentPolynomial) -> Support:
    by_size: dict[int, list[str]] = {}
    for index in value.support():
        if isinstance(value, Expansion):
            shown = element_text(value.family.name, value.family.show_index(index, value.n))
        else:
            shown = monomial_text(index) or "1"
        by_size.setdefault(sum(index), []).append(shown)
    n_terms = sum(map(len, by_size.values()))
    if n_terms > LARGEST_SUPPORT:
        raise NotDrawable(f"{n_terms:,} terms are more than the {LARGEST_SUPPORT} of a picture")
    if not n_terms:
        raise NotDrawable("0 has no terms to draw")
    rows = tuple((f"size {size}", tuple(by_size[size])) for size in sorted(by_size))
    return Support("1 term" if n_terms == 1 else f"{n_terms} terms", rows)


# text


def as_text(drawn: Picture) -> str:
    """The picture for a terminal, in comments, so that it can be pasted."""
    lines = _support_lines(drawn) if isinstance(drawn, Support) else _diagram_lines(drawn)
    return "\n".join(f"# {line}".rstrip() for line in [drawn.title, *lines])


def _support_lines(drawn: Support) -> list[str]:
    width = max(len(head) for head, _ in drawn.rows)
    return [f"{head.ljust(width)}  {'  '.join(items)}" for head, items in drawn.rows]


def _diagram_lines(drawn: Diagram) -> list[str]:
    boxes = {(b.row, b.column): b for b in drawn.boxes}
    width = max([3, *(len(b.label) + 2 for b in drawn.boxes)])
    lines: list[str] = []
    n_rows, n_columns = drawn.n_rows, drawn.n_columns
    for row in range(n_rows + 1):
        rule = ""
        for column in range(n_columns + 1):
            beside = [(row - 1, column - 1), (row - 1, column), (row, column - 1), (row, column)]
            rule += "+" if any(at in boxes for at in beside) else " "
            if column < n_columns:
                is_edge = (row - 1, column) in boxes or (row, column) in boxes
                rule += ("-" if is_edge else " ") * width
        lines.append(rule.rstrip())
        if row == n_rows:
            break
        middle = ""
        for column in range(n_columns + 1):
            middle += "|" if (row, column) in boxes or (row, column - 1) in boxes else " "
            if column < n_columns:
                label = boxes[row, column].label if (row, column) in boxes else ""
                if (row, column) in drawn.dots:
                    label = "o"
                middle += label.center(width)
        lines.append(middle.rstrip())
    if drawn.heads:
        lines.append(" " + " ".join(head.center(width) for head in drawn.heads))
    return [line for line in lines if line.strip()] or ["no boxes"]


# SVG


def as_svg(drawn: Picture) -> str:
    """The picture as a document of Scalable Vector Graphics 1.1."""
    body, width, height = (
        _support_svg(drawn) if isinstance(drawn, Support) else _diagram_svg(drawn))
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width}" height="{height}" '
        f'viewBox="0 0 {width} {height}">\n<title>{escape(drawn.title)}</title>\n'
        + "\n".join(body) + "\n</svg>\n")


def _words(x: float, y: float, content: str, anchor: str = "middle") -> str:
    return (f'<text x="{x:g}" y="{y:g}" font-family="serif" font-size="11" '
            f'text-anchor="{anchor}">{escape(content)}</text>')


def _diagram_svg(drawn: Diagram) -> tuple[list[str], int, int]:
    body = []
    for box in drawn.boxes:
        x, y = MARGIN + box.column * CELL, MARGIN + box.row * CELL
        body.append(f'<rect x="{x}" y="{y}" width="{CELL}" height="{CELL}" '
                    'fill="none" stroke="black"/>')
        if box.label:
            body.append(_words(x + CELL / 2, y + CELL / 2 + 4, box.label))
    for row, column in drawn.dots:
        x, y = MARGIN + column * CELL + CELL // 2, MARGIN + row * CELL + CELL // 2
        right, bottom = MARGIN + drawn.n_columns * CELL, MARGIN + drawn.n_rows * CELL
        body.append(f'<circle cx="{x}" cy="{y}" r="4"/>')
        body.append(f'<path d="M {right} {y} H {x} V {bottom}" fill="none" stroke="gray"/>')
    height = 2 * MARGIN + drawn.n_rows * CELL
    for column, head in enumerate(drawn.heads):
        body.append(_words(MARGIN + (column + 0.5) * CELL, height + 8, head))
    return body, 2 * MARGIN + drawn.n_columns * CELL, height + (CELL if drawn.heads else 0)


def _support_svg(drawn: Support) -> tuple[list[str], int, int]:
    step = 7 * max(len(item) for _, items in drawn.rows for item in items) + 2 * MARGIN
    left = 70
    body = []
    for row, (head, items) in enumerate(drawn.rows):
        y = MARGIN + (row + 0.6) * CELL
        body.append(_words(MARGIN, y, head, "start"))
        body += [_words(left + column * step, y, item, "start")
                 for column, item in enumerate(items)]
    width = left + step * max(len(items) for _, items in drawn.rows) + MARGIN
    return body, width, 2 * MARGIN + len(drawn.rows) * CELL
