"""Values as comma-separated rows under heads (RFC 4180), coefficients as plain ASCII."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence
from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.json import plain_scalar
from spanwright.rendering.text import number_text, text
from spanwright.values import IndexSet, ListValue, Table, Truth, as_scalar, is_index, is_operator

_FORMULA_SIGNS = ("=", "@", "\t")
"""Spreadsheets take a text that begins with one of these for a formula."""


def csv_text(value: Any, show: str = "short") -> str:
    """A sum by its terms, index parts and coefficient; a table or list by its rows."""
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    heads, rows = _rows(value, show)
    writer.writerow(heads)
    writer.writerows(rows)
    return stream.getvalue().rstrip("\n")


def _rows(value: Any, show: str) -> tuple[Sequence[str], Iterable[Sequence[str]]]:
    items: Any
    if isinstance(value, LaurentPolynomial | Expansion):
        if isinstance(value, Expansion):
            items = [(value.family.show_index(i, value.n), c) for i, c in value.items()]
        else:
            items = list(value.items())
        width = max((len(index) for index, _ in items), default=value.n)
        head = [f"index_{k}" for k in range(1, width + 1)]
        # permutations and partitions of one sum may have different lengths
        return [*head, "coefficient"], [
            [*map(str, index), *[""] * (width - len(index)), plain_scalar(c)]
            for index, c in items]
    if is_operator(value) and hasattr(value, "letters"):
        return [*value.letters, "coefficient"], [
            [*(_index(part) for part in key), plain_scalar(c)] for key, c in value.items()]
    if isinstance(value, Table):
        return [_safe(c) for c in value.columns], [
            [_cell(cell, show) for cell in row] for row in value.rows]
    if isinstance(value, ListValue | IndexSet):
        items = value.items if isinstance(value, ListValue) else tuple(value)
        if items and all(is_index(item) and len(item) == len(items[0]) for item in items):
            head = [f"index_{k}" for k in range(1, len(items[0]) + 1)]
            return head, [[str(part) for part in item] for item in items]
        return ["value"], [[_cell(item, show)] for item in items]
    if is_index(value):
        return [f"index_{k}" for k in range(1, len(value) + 1)], [[str(p) for p in value]]
    return ["value"], [[_cell(value, show)]]


def _cell(value: Any, show: str) -> str:
    scalar = as_scalar(value)
    if scalar is not None:
        return plain_scalar(scalar)
    if is_index(value):
        return _index(value)
    if isinstance(value, Truth):
        return "holds" if value.holds else "fails"
    return _safe(value if isinstance(value, str) else text(value, show))


def _index(value: Sequence[int]) -> str:
    return f"({','.join(number_text(part) for part in value)})"


def _safe(content: str) -> str:
    return f"'{content}" if content.startswith(_FORMULA_SIGNS) else content
