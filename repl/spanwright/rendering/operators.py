"""Operators as text (parses back), TeX and plain data: words, and canonical forms."""

from __future__ import annotations

from typing import Any

from spanwright.kernel.operators.canonical import CanonicalOperator
from spanwright.kernel.operators.words import Group, Letter, Operator
from spanwright.rendering.scalars import PLAIN, TEX, TEXT, Style, scalar_text

_TEX_HEADS = {"d": r"\partial", "pi": r"\pi", "tau": r"\tau"}
_TEX_NAMES = {
    "T_pi": r"T_\pi", "tau_pi": r"\tau_\pi", "symmetrizer": r"\mathbf{1}_+",
    "antisymmetrizer": r"\mathbf{1}_-",
}


def operator_text(value: Operator | CanonicalOperator, show: str = "short") -> str:
    """A sum of words in the language itself."""
    word = value.to_operator() if isinstance(value, CanonicalOperator) else value
    return _joined(operator_pieces(word, TEXT, show))


def operator_tex(value: Operator | CanonicalOperator, show: str = "short") -> str:
    """A sum of words in TeX."""
    word = value.to_operator() if isinstance(value, CanonicalOperator) else value
    return _joined(operator_pieces(word, TEX, show))


def operator_pieces(
    value: Operator, style: Style, show: str
) -> list[tuple[bool, str, str]]:
    """The terms: whether negative, the coefficient, the word."""
    pieces = []
    for word, c in value.terms.items():
        shown = " ".join(_factor(f, style, show) for f in word)
        coefficient = scalar_text(c, style, show, as_factor=bool(shown))
        negative = coefficient.startswith("-")
        coefficient = coefficient[1:] if negative else coefficient
        pieces.append((negative, "" if coefficient == "1" and shown else coefficient, shown))
    return pieces


def _joined(pieces: list[tuple[bool, str, str]]) -> str:
    if not pieces:
        return "0"
    rows = []
    for place, (negative, coefficient, word) in enumerate(pieces):
        body = " ".join(part for part in (coefficient, word) if part)
        sign = ("-" if negative else "") if place == 0 else ("- " if negative else "+ ")
        rows.append(sign + body)
    return " ".join(rows)


def _factor(factor: Letter | Group, style: Style, show: str) -> str:
    if isinstance(factor, Group):
        inner = _joined(operator_pieces(factor.operator, style, show))
        return style.raised(f"({inner})", factor.power)
    kind = factor.kind
    if kind in ("X", "Y"):
        return " ".join(
            style.raised(_subscripted(kind, str(i), style), e)
            for i, e in enumerate(factor.subscript, 1) if e)
    if kind in ("T", "s", "d", "pi"):
        position = factor.simple_position()
        if position is not None:
            base = _subscripted(kind, str(position), style)
        elif kind == "s":
            # s_(…) with an index is a Schur polynomial, so a permutation is a product of s_i
            return _reflections(factor, style)
        else:
            base = _subscripted(kind, f"({','.join(map(str, factor.subscript))})", style)
        return style.raised(base, factor.power)
    if kind == "tau":
        return style.raised(_subscripted(kind, str(factor.subscript[0]), style), factor.power)
    base = _TEX_NAMES[kind] if style is TEX else kind
    return style.raised(base, factor.power)


def _reflections(factor: Letter, style: Style) -> str:
    from spanwright.kernel.indices import reduced_word

    return " ".join(_subscripted("s", str(i), style) for i in reduced_word(factor.subscript))


def _subscripted(kind: str, index: str, style: Style) -> str:
    if style is TEX:
        return f"{_TEX_HEADS.get(kind, kind)}_{{{index}}}"
    return f"{kind}_{index}"


def operator_data(value: Operator | CanonicalOperator) -> dict[str, Any]:
    """The operator as JSON holds it: canonical forms by component, words as text."""
    if isinstance(value, CanonicalOperator):
        return {
            "kind": "operator", "algebra": value.algebra, "n": value.n,
            "hecke": value.normalisation, "terms": [
                {**{letter: list(part) for letter, part in zip(value.letters, key, strict=True)},
                 "coefficient": scalar_text(c, PLAIN)}
                for key, c in value.items()]}
    return {"kind": "operator", "n": value.n, "hecke": value.normalisation,
            "word": operator_text(value)}
