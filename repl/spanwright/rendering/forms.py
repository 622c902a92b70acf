"""The named forms of `show … as` and `write … as`."""

from __future__ import annotations

import json as standard_json
from collections.abc import Callable
from typing import Any

from spanwright.rendering.csv import csv_text
from spanwright.rendering.json import data
from spanwright.rendering.mathml import mathml
from spanwright.rendering.sympy import sympy_text
from spanwright.rendering.tex import tex
from spanwright.rendering.text import text


def _json(value: Any, show: str) -> str:
    return standard_json.dumps(data(value), ensure_ascii=False)


_FORMS: dict[str, Callable[[Any, str], str]] = {
    "text": text, "latex": tex, "json": _json, "html": mathml, "sympy": sympy_text,
    "csv": csv_text,
}

NAMES: tuple[str, ...] = tuple(_FORMS)


def rendered(value: Any, form: str, show: str = "short") -> str | None:
    """The value in a named form; None when there is no such form."""
    rule = _FORMS.get(form)
    return None if rule is None else rule(value, show)


