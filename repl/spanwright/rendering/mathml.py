"""Values as MathML, printed from the values themselves; nothing here passes through TeX."""

from __future__ import annotations

import re
from collections.abc import Sequence
from fractions import Fraction
from html import escape, unescape
from typing import Any

from spanwright.kernel.expansions import Expansion
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.product_form import PolynomialForm
from spanwright.rendering.scalars import GREEK, Style, scalar_text
from spanwright.rendering.text import element_value, number_text, text
from spanwright.values import (
    IndexSet,
    ListValue,
    Table,
    Truth,
    as_scalar,
    is_index,
    is_number,
    is_operator,
)

INVISIBLE_TIMES = "<mo>&#x2062;</mo>"
MINUS = "<mo>&#x2212;</mo>"
_OPEN, _CLOSE = '<mrow><mo stretchy="false">(</mo>', '<mo stretchy="false">)</mo></mrow>'

_GREEK_NAMES = (
    "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi omicron pi rho "
    "final sigma tau upsilon phi chi psi omega")
_GREEK_LETTERS = {
    name: chr(code)
    for name, code in zip(_GREEK_NAMES.split(), range(0x3B1, 0x3CA), strict=True)}

_FAMILY_LETTERS = {"S": "\U0001D516", "G": "\U0001D50A", "atom": "\U0001D49C"}
"""Fraktur S and G, script A, as papers write them."""

_OPERATOR_LETTERS = {"d": "\N{PARTIAL DIFFERENTIAL}"}
_SINGLE_LETTERS = {
    "T_pi": ("T", "π"), "tau_pi": ("τ", "π"), "symmetrizer": ("𝟏", "+"),
    "antisymmetrizer": ("𝟏", "−"),
}


def identifier(name: str) -> str:
    """A name with its index: alpha_2 becomes a Greek letter with a subscript."""
    head, _, index = name.partition("_")
    shown = _GREEK_LETTERS[head] if head in GREEK else head
    found = f"<mi>{escape(shown)}</mi>"
    return f"<msub>{found}<mn>{escape(index)}</mn></msub>" if index else found


class MathMLStyle(Style):
    """MathML; a power's base and a product's factors are always one element each."""

    def name(self, name: str) -> str:
        return identifier(name)

    def raised(self, base: str, exponent: Fraction | int) -> str:
        if exponent == 1:
            return base
        fraction = Fraction(exponent)
        shown = _integer(fraction.numerator)
        if fraction.denominator != 1:
            shown = f"<mrow>{shown}<mo>/</mo>{_integer(fraction.denominator)}</mrow>"
        return f"<msup>{base}{shown}</msup>"

    def quotient(self, numerator: str, denominators: Sequence[str]) -> str:
        above = _without_brackets(numerator)
        below = self.times.join(denominators)
        if len(denominators) == 1:
            below = _without_brackets(below)
        return f"<mfrac>{_row(above)}{_row(below)}</mfrac>"

    def integer(self, value: int) -> str:
        return f"<mn>{number_text(value)}</mn>"

    def polynomial(self, form: PolynomialForm) -> str:
        pieces: list[str] = []
        for coefficient, powers in form.terms():
            monomial = [self.raised(self.name(n), e) for n, e in powers]
            if abs(coefficient) != 1 or not monomial:
                monomial.insert(0, self.integer(abs(coefficient)))
            sign = MINUS if coefficient < 0 else "<mo>+</mo>"
            pieces.append(f"{sign}{self.times.join(monomial)}")
        joined = "".join(pieces)
        # a leading minus stays a plain character until `_signed`, as in the other styles
        if joined.startswith(MINUS):
            return "-" + joined.removeprefix(MINUS)
        return joined.removeprefix("<mo>+</mo>")


class FlatMathMLStyle(MathMLStyle):
    """MathML in one row, without fractions: it can be parted before every sign."""

    def raised(self, base: str, exponent: Fraction | int) -> str:
        if exponent != 1 and base.endswith(_FLAT_CLOSE):
            closed = super().raised(_FLAT_CLOSE, exponent)
            return base.removesuffix(_FLAT_CLOSE) + closed
        return super().raised(base, exponent)

    def quotient(self, numerator: str, denominators: Sequence[str]) -> str:
        below = self.times.join(denominators)
        if len(denominators) > 1:
            below = f"{_FLAT_OPEN}{below}{_FLAT_CLOSE}"
        return f"{numerator}<mo>/</mo>{below}"


_FLAT_OPEN = '<mo stretchy="false" form="prefix">(</mo>'
_FLAT_CLOSE = '<mo stretchy="false" form="postfix">)</mo>'
_CLOSING = '<mo stretchy="false" form="postfix">'
_PLUS = "<mo>+</mo>"

MATHML = MathMLStyle(times=INVISIBLE_TIMES, brackets=(_OPEN, _CLOSE))
FLAT = FlatMathMLStyle(times=INVISIBLE_TIMES, brackets=(_FLAT_OPEN, _FLAT_CLOSE))


def _integer(value: int) -> str:
    shown = f"<mn>{number_text(abs(value))}</mn>"
    return f"<mrow>{MINUS}{shown}</mrow>" if value < 0 else shown


def _row(inner: str) -> str:
    return f"<mrow>{_signed(inner)}</mrow>"


def _without_brackets(inner: str) -> str:
    """An element in brackets without them, when they hold all of it."""
    if inner.startswith(_OPEN) and inner.endswith(_CLOSE) and inner.count(_OPEN) == 1:
        return inner[len(_OPEN):-len(_CLOSE)]
    return inner


def _signed(inner: str) -> str:
    """A leading minus as an operator, and those behind opening brackets."""
    if inner.startswith("-"):
        inner = f"{MINUS}{inner[1:]}"
    return inner.replace(f"{_OPEN}-", f"{_OPEN}{MINUS}")


def mathml(value: Any, show: str = "short") -> str:
    """A whole `math` element, set as a display, with the value's text as its alternative."""
    alternative = " ".join(text(value, show).split())
    return wrapped_math(row(value, show), alternative, is_display=True)


def wrapped_math(inner: str, alternative: str, *, is_display: bool = False) -> str:
    """A `math` element around rows, with a text alternative."""
    display = ' display="block"' if is_display else ""
    return (
        f'<math xmlns="http://www.w3.org/1998/Math/MathML"{display} '
        f'alttext="{escape(alternative, quote=True)}"><mrow>{inner}</mrow></math>')


def row(value: Any, show: str = "short") -> str:
    """A value as the inside of a row."""
    if is_number(value):
        value = as_scalar(value)
    terms = term_rows(value, show)
    if terms is not None:
        return "".join(terms) or "<mn>0</mn>"
    scalar = as_scalar(value)
    if scalar is not None and scalar.is_zero:
        return "<mn>0</mn>"
    if scalar is not None:
        return _signed(scalar_text(scalar, MATHML, show))
    if is_index(value):
        return index_row(value)
    if isinstance(value, ListValue):
        return _listed([row(item, show) for item in value.items])
    if isinstance(value, Truth):
        return _truth(value, show)
    if isinstance(value, bool):
        return _words("true" if value else "false")
    if isinstance(value, Table):
        return _table(value, show)
    if isinstance(value, IndexSet):
        return _words(value.description)
    return _words(text(value, show))


def term_rows(value: Any, show: str = "short") -> list[str] | None:
    """The terms of a sum, each with its sign, for breaking between them; None for other values."""
    if isinstance(value, LaurentPolynomial | Expansion):
        pieces = _element_pieces(value, show)
    elif is_operator(value):
        word = value.to_operator() if hasattr(value, "to_operator") else value
        pieces = _operator_pieces(word, show)
    else:
        return None
    rows = []
    for place, (negative, coefficient, element) in enumerate(pieces):
        body = INVISIBLE_TIMES.join(part for part in (coefficient, element) if part)
        # a sign at the head of a row of its own still stands between two terms
        sign = _BETWEEN["-" if negative else "+"] if place else MINUS if negative else ""
        rows.append(sign + body)
    return rows


_BETWEEN = {
    "+": '<mo form="infix">+</mo>', "-": '<mo form="infix">&#x2212;</mo>',
}


def in_brackets(inner: str) -> str:
    """A row in brackets."""
    return f"{_OPEN}{inner}{_CLOSE}"


_TAG = re.compile(r"<[^>]*>")
_MARK = re.compile(r"<(/?)([a-z]+)")


def words_of(inner: str) -> str:
    """The characters of a row, in their order, for a text alternative."""
    shown = inner.replace("<msup>", "").replace("<mn>", " ").replace(INVISIBLE_TIMES, " ")
    return " ".join(unescape(_TAG.sub("", shown)).replace("\N{MINUS SIGN}", "-").split())


def parted_terms(value: Any, texts: Sequence[str]) -> list[list[str]]:
    """The terms of a sum without fractions, each in parts that begin with a sign."""
    items: list[tuple[Any, str]]
    if isinstance(value, LaurentPolynomial | Expansion):
        items = [(c, element) for (_, _, element), c in zip(
            _element_pieces(value, "short"), (c for _, c in _items(value)), strict=True)]
    else:
        word = value.to_operator() if hasattr(value, "to_operator") else value
        items = [(c, element) for (_, _, element), c in zip(
            _operator_pieces(word, "short"), word.terms.values(), strict=True)]
    found = []
    for place, ((c, element), shown) in enumerate(zip(items, texts, strict=True)):
        flat = scalar_text(c, FLAT, as_factor=bool(element))
        negative = shown.startswith("-")
        sign = _BETWEEN["-" if negative else "+"] if place else MINUS if negative else ""
        body = (flat.removeprefix("-") if negative else flat).replace(
            f"{_FLAT_OPEN}-", f"{_FLAT_OPEN}{MINUS}")
        if element:
            body = element if body == "<mn>1</mn>" else f"{body}{INVISIBLE_TIMES}{element}"
        found.append(_parts(sign + body))
    return found


def _items(value: Any) -> Any:
    return value.items()


def _parts(flat: str) -> list[str]:
    """A row parted before the signs that stand in it, not in something inside it."""
    parts: list[str] = []
    depth = start = 0
    whole = _short_brackets(flat)
    for mark in _MARK.finditer(flat):
        if mark.group(1):
            depth -= 1
            continue
        place = mark.start()
        is_sign = depth == 0 and flat.startswith((MINUS, _PLUS), place)
        depth += 1
        if not is_sign or place - start <= _SHORTEST_PART or flat.endswith(_FLAT_OPEN, 0, place):
            continue
        if not any(first < place < last for first, last in whole):
            parts.append(flat[start:place])
            start = place
    parts.append(flat[start:])
    return [
        part.replace(MINUS, _BETWEEN["-"], 1) if part.startswith(MINUS) and k else
        part.replace("<mo>+</mo>", _BETWEEN["+"], 1) if part.startswith("<mo>+</mo>") else part
        for k, part in enumerate(parts)]


def _short_brackets(flat: str) -> list[tuple[int, int]]:
    """Where brackets with a few signs stand: they are not parted."""
    found, open_ones = [], []
    for mark in re.finditer(f"{re.escape(_FLAT_OPEN)}|{re.escape(_CLOSING)}", flat):
        if mark.group() == _FLAT_OPEN:
            open_ones.append(mark.end())
        elif open_ones:
            first = open_ones.pop()
            inner = flat[first:mark.start()]
            if inner.count(_PLUS) + inner.count(MINUS) <= _FEW_SIGNS:
                found.append((first, mark.start()))
    return found


_FEW_SIGNS = 2

_SHORTEST_PART = 400
"""Characters of markup, some ten signs on the page: smaller parts would only make it longer."""


def term_texts(value: Any, show: str = "short") -> list[str]:
    """The same terms in the language, for the text alternatives."""
    from spanwright.rendering.layout import term_lines

    return list(term_lines(value, show))


def _element_pieces(
    value: LaurentPolynomial | Expansion, show: str
) -> list[tuple[bool, str, str]]:
    pieces = []
    items: Any = value.items()
    for index, c in items:
        if isinstance(value, Expansion):
            name = value.family.symbol or value.family.name
            element = element_row(name, value.family.show_index(index, value.n))
        else:
            element = INVISIBLE_TIMES.join(
                _power("x", str(j), e) for j, e in enumerate(index, 1) if e)
        negative, coefficient = _coefficient(c, show, bool(element))
        pieces.append((negative, coefficient, element))
    return pieces


def _coefficient(c: Any, show: str, has_element: bool) -> tuple[bool, str]:
    shown = scalar_text(c, MATHML, show, as_factor=has_element)
    negative = shown.startswith("-")
    shown = shown[1:] if negative else shown
    return negative, "" if shown == "<mn>1</mn>" and has_element else _signed(shown)


def element_row(name: str, index: tuple[int, ...]) -> str:
    """A basis element with its index."""
    if name == "double Schubert":
        letters = "<mo>(</mo><mi>x</mi><mo>;</mo><mi>y</mi><mo>)</mo>"
        return element_row("S", index) + f"<mrow>{letters}</mrow>"
    letter = _FAMILY_LETTERS.get(name) or _GREEK_LETTERS.get(name, name)
    return f"<msub><mi>{escape(letter)}</mi>{index_row(index)}</msub>"


def index_row(index: Sequence[int]) -> str:
    """(2,0,1)."""
    parts = '<mo separator="true">,</mo>'.join(_integer(part) for part in index)
    return f"{_OPEN}{parts}{_CLOSE}"


def _power(letter: str, subscript: str, exponent: int) -> str:
    base = f"<mi>{letter}</mi><mn>{subscript}</mn>"
    if exponent == 1:
        return f"<msub>{base}</msub>"
    return f"<msubsup>{base}{_integer(exponent)}</msubsup>"


def _operator_pieces(value: Any, show: str) -> list[tuple[bool, str, str]]:
    pieces = []
    for word, c in value.terms.items():
        shown = INVISIBLE_TIMES.join(_factor(factor, show) for factor in word)
        negative, coefficient = _coefficient(c, show, bool(shown))
        pieces.append((negative, coefficient, shown))
    return pieces


def _factor(factor: Any, show: str) -> str:
    """A letter, or a sum in brackets to a power."""
    from spanwright.kernel.indices import reduced_word
    from spanwright.kernel.operators.words import Group

    if isinstance(factor, Group):
        inner = "".join(term_rows(factor.operator, show) or ["<mn>0</mn>"])
        return MATHML.raised(f"{_OPEN}{inner}{_CLOSE}", factor.power)
    kind = factor.kind
    letter = _OPERATOR_LETTERS.get(kind) or _GREEK_LETTERS.get(kind, kind)
    if kind in ("X", "Y"):
        return INVISIBLE_TIMES.join(
            _power(letter, str(j), e) for j, e in enumerate(factor.subscript, 1) if e)
    if kind in _SINGLE_LETTERS:
        head, below = _SINGLE_LETTERS[kind]
        base = f"<msub><mi>{head}</mi><mo>{below}</mo></msub>"
        return MATHML.raised(base, factor.power)
    if kind == "tau":
        return _power(letter, str(factor.subscript[0]), factor.power)
    position = factor.simple_position()
    if position is not None:
        return _power(letter, str(position), factor.power)
    if kind == "s":
        return INVISIBLE_TIMES.join(
            _power(letter, str(i), 1) for i in reduced_word(factor.subscript))
    base = f"<msub><mi>{letter}</mi>{index_row(factor.subscript)}</msub>"
    return MATHML.raised(base, factor.power)


def _listed(rows: list[str]) -> str:
    inner = '<mo separator="true">,</mo>'.join(f"<mrow>{item}</mrow>" for item in rows)
    return f"{_OPEN}{inner}{_CLOSE}"


def _truth(value: Truth, show: str) -> str:
    if value.holds:
        return _words("holds")
    if value.difference is None or element_value(value.difference) is None:
        return _words("fails")
    return (_words("fails: left") + MINUS + _words("right") + "<mo>=</mo>"
            + row(value.difference, show))


def _table(value: Table, show: str) -> str:
    heads = "".join(f"<mtd>{_words(head)}</mtd>" for head in value.columns)
    rows = "".join(
        "<mtr>" + "".join(
            f"<mtd>{_words(v) if isinstance(v, str) else row(v, show)}</mtd>" for v in cells)
        + "</mtr>" for cells in value.rows)
    return f'<mtable columnalign="left"><mtr>{heads}</mtr>{rows}</mtable>'


def _words(content: str) -> str:
    return f"<mtext>{escape(content)}</mtext>" if content else "<mrow></mrow>"
