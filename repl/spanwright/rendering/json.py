"""Values as plain data for JSON: stable keys, coefficients as ASCII that sympy reads."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import PLAIN, scalar_text
from spanwright.rendering.text import number_text, text
from spanwright.tally import Tally, tally_data
from spanwright.values import (
    Definition,
    FamilyMark,
    IndexSet,
    ListValue,
    Setting,
    Table,
    Truth,
    is_number,
    is_operator,
)

Data = dict[str, Any]


def plain_scalar(value: Scalar | int | Fraction) -> str:
    """A scalar as ASCII with explicit products, `*` and `**`."""
    return scalar_text(value, PLAIN) if isinstance(value, Scalar) else number_text(value)


def kind_of(value: Any) -> str:
    """The kind that `data` gives, without rendering the value."""
    if is_number(value) or isinstance(value, Scalar):
        return "scalar"
    if isinstance(value, LaurentPolynomial | Expansion):
        return "expansion"
    if isinstance(value, Truth):
        return "truth"
    if isinstance(value, tuple):
        return "index"
    if isinstance(value, ListValue | IndexSet):
        return "list"
    if is_operator(value):
        return "operator"
    named = {Tally: "tally", Table: "table", Definition: "definition", Setting: "setting"}
    return named.get(type(value), "text")


def data(value: Any) -> Data:
    """The value's kind and content, as JSON holds them."""
    if is_number(value) or isinstance(value, Scalar):
        return {"kind": "scalar", "value": plain_scalar(value)}
    if isinstance(value, LaurentPolynomial):
        return {"kind": "expansion", "n": value.n, "basis": "x", "terms": [
            {"index": list(e), "coefficient": plain_scalar(c)} for e, c in value.items()]}
    if isinstance(value, Expansion):
        return {"kind": "expansion", "n": value.n, "basis": value.family.name, "terms": [
            {"index": list(value.family.show_index(i, value.n)), "coefficient": plain_scalar(c)}
            for i, c in value.items()]}
    if isinstance(value, Truth):
        found: Data = {"kind": "truth", "holds": value.holds, "certainty": value.certainty}
        if value.evidence:
            found["evidence"] = value.evidence
        if not value.holds and value.difference is not None:
            found["difference"] = data(value.difference)
        return found
    if isinstance(value, tuple):
        return {"kind": "index", "value": list(value)}
    if isinstance(value, ListValue):
        return {"kind": "list", "items": [data(v) for v in value.items]}
    if isinstance(value, IndexSet):
        return {"kind": "list", "items": [data(v) for v in value]}
    if isinstance(value, Tally):
        return tally_data(value)
    if isinstance(value, Table):
        return {"kind": "table", "columns": list(value.columns), "rows": [
            [v if isinstance(v, str) else data(v) for v in row] for row in value.rows],
            **({"notes": list(value.notes)} if value.notes else {})}
    if isinstance(value, Definition):
        return {"kind": "definition", "name": value.name, "text": value.text}
    if isinstance(value, Setting):
        return {"kind": "setting", "name": value.name, "text": value.text}
    if isinstance(value, FamilyMark):
        return {"kind": "text", "text": value.family.name}
    if is_operator(value):
        from spanwright.rendering.operators import operator_data

        return operator_data(value)
    return {"kind": "text", "text": text(value)}
