"""Scalars as one line, in the language's own signs, in TeX, or as plain ASCII for machines."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.decimals import decimal
from spanwright.kernel.parameters import ParameterRing
from spanwright.kernel.product_form import PolynomialForm, powers_of_word

# Each style remembers the texts of this many terms, then starts afresh.
REMEMBERED_TERMS = 100_000

# names that sympy.sympify reads as something else than a symbol
SYMPY_TAKEN = frozenset((
    "beta", "gamma", "zeta", "lambda", "pi", "E", "I", "N", "O", "Q", "S", "C", "Chi", "Si",
    "Ci", "Ei", "Lambda", "elliptic_e", "rf", "ff", "re", "im", "sign", "det", "trace", "diag",
    "test", "plot", "var", "Symbol", "symbols", "oo", "nan", "zoo",
))

GREEK = frozenset((
    "alpha", "beta", "gamma", "delta", "epsilon", "zeta", "eta", "theta", "iota", "kappa",
    "lambda", "mu", "nu", "xi", "pi", "rho", "sigma", "tau", "upsilon", "phi", "chi", "psi",
    "omega",
))


@dataclass(frozen=True, eq=False)
class Style:
    """The signs of one way of writing, one object for each; the base is the language's own."""

    times: str = " "
    power: str = "^"
    brackets: tuple[str, str] = ("(", ")")

    def name(self, name: str) -> str:
        """A parameter."""
        return name

    def raised(self, base: str, exponent: Fraction | int) -> str:
        """A power of an atom."""
        if exponent == 1:
            return base
        shown = str(exponent) if exponent.denominator == 1 else f"({exponent})"
        return f"{base}{self.power}{shown}"

    def quotient(self, numerator: str, denominators: Sequence[str]) -> str:
        """A fraction; the denominators are factors."""
        below = denominators[0] if len(denominators) == 1 else \
            f"({self.times.join(denominators)})"
        return f"{numerator}/{below}"

    def integer(self, value: int) -> str:
        """An integer of any size (Python's own limit is 4300 digits)."""
        return decimal(value)

    def polynomial(self, form: PolynomialForm) -> str:
        """A polynomial in the parameters, constant term first."""
        signs, terms = form.words()
        known = _terms(self, form.ring)
        words = [""] * (2 * len(terms))
        words[0::2], words[1::2] = signs, map(known.__getitem__, terms)
        text = " ".join(words)
        return text[2:] if text[0] == "+" else "-" + text[2:]


class _Terms(dict[str, str]):
    """Terms as flint writes them to terms of one style; the large polynomials of a result share
    most of them."""

    def __init__(self, style: Style, ring: ParameterRing) -> None:
        self._style = style
        self._ring = ring

    def __missing__(self, term: str) -> str:
        style = self._style
        if term[0] <= "9":  # a digit; names begin with letters
            number, star, monomial = term.partition("*")
            shown = number + style.times + self[monomial] if star else number
        else:
            shown = style.times.join([
                style.raised(style.name(n), e) for n, e in powers_of_word(self._ring, term)])
        if len(self) >= REMEMBERED_TERMS:
            self.clear()
        self[term] = shown
        return shown


@lru_cache(maxsize=16)
def _terms(style: Style, ring: ParameterRing) -> _Terms:
    return _Terms(style, ring)


class PlainStyle(Style):
    """ASCII that `sympy.sympify` reads: `*` and `**`, every product explicit."""

    def name(self, name: str) -> str:
        return name + "_" if name in SYMPY_TAKEN else name


class TexStyle(Style):
    """TeX."""

    def name(self, name: str) -> str:
        head, _, index = name.partition("_")
        head = f"\\{head}" if head in GREEK else head if len(head) == 1 else f"\\mathit{{{head}}}"
        return f"{head}_{{{index}}}" if index else head

    def raised(self, base: str, exponent: Fraction | int) -> str:
        return base if exponent == 1 else f"{base}^{{{exponent}}}"

    def quotient(self, numerator: str, denominators: Sequence[str]) -> str:
        below = self.times.join(denominators)
        if len(denominators) == 1 and below.startswith("(") and below.endswith(")"):
            below = below[1:-1]
        if numerator.startswith("(") and numerator.endswith(")") and numerator.count("(") == 1:
            numerator = numerator[1:-1]
        return f"\\frac{{{numerator}}}{{{below}}}"


TEXT = Style()
PLAIN = PlainStyle(times="*", power="**")
TEX = TexStyle()


@lru_cache(maxsize=2_000)
def _factor_texts(
    style: Style, factors: tuple[tuple[PolynomialForm, int], ...]
) -> tuple[str, ...]:
    """Factors in brackets with their exponents: many coefficients share a denominator."""
    left, right = style.brackets
    return tuple(style.raised(f"{left}{style.polynomial(p)}{right}", e) for p, e in factors)


def scalar_text(
    value: Scalar, style: Style = TEXT, show: str = "short", *, as_factor: bool = False
) -> str:
    """A scalar on one line; `as_factor` puts brackets around a bare sum."""
    if value.is_zero:
        return "0"
    form = value.form(show)
    negative = form.numerator_content < 0
    content = abs(form.numerator_content)
    top = [style.raised(style.name(n), e) for n, e in form.powers if e > 0]
    bottom = [style.raised(style.name(n), -e) for n, e in form.powers if e < 0]
    if form.denominator_content != 1:
        bottom.insert(0, style.integer(form.denominator_content))
    is_bare_sum = (
        content == 1 and not top and not bottom and len(form.numerator) == 1
        and form.numerator[0][1] == 1 and not form.denominator)
    if is_bare_sum and not as_factor and not negative:
        return style.polynomial(form.numerator[0][0])
    left, right = style.brackets
    top += [style.raised(f"{left}{style.polynomial(p)}{right}", e) for p, e in form.numerator]
    bottom += _factor_texts(style, form.denominator)
    if content != 1 or not top:
        top.insert(0, style.integer(content))
    text = style.times.join(top)
    if bottom:
        text = style.quotient(text, bottom)
    return f"-{text}" if negative else text
