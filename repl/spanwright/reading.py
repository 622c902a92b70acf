"""Values back from JSON, exactly: what `write f as json` wrote, `read` gives again.

The text is a stranger's: nothing in it is evaluated but sums, products and powers of numbers and
parameters, and every index is checked by its family.
"""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterable
from fractions import Fraction
from importlib import import_module
from typing import Any

from spanwright.context import Context, Failure
from spanwright.evaluator import Evaluator
from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.decimals import from_decimal
from spanwright.kernel.errors import KernelError
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Family
from spanwright.kernel.families.registry import NAMES as FAMILY_NAMES
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing
from spanwright.rendering.scalars import SYMPY_TAKEN
from spanwright.settings import Settings
from spanwright.values import (
    BASE_RING,
    ListValue,
    Table,
    Truth,
    is_operator,
    simplest_number,
)
from spanwright_grammar import syntax
from spanwright_grammar.parsing import ParseFailure, parse_expression

MAX_NESTING = 100
LARGEST_POWER = 100_000
LARGEST_N = 60
LARGEST_PART = 10**9

# families that have no symbol of their own among the registered ones
_FURTHER_FAMILIES = {
    "double Schubert": "double_schubert",
    "E (reversed)": "reversed_macdonald",
}


class NoValue(Exception):
    """A text that is no value written by `write … as json`; the message says why."""


def value_from_json(text: str, parameters: Iterable[str] = ()) -> Any:
    """The value of a JSON text; `parameters` are those the session has declared.

    Raises NoValue with what is wrong and where in the data it is.
    """
    try:
        data = json.loads(
            text, parse_float=_no_float, parse_constant=_no_float, parse_int=from_decimal)
    except (json.JSONDecodeError, RecursionError) as error:
        where = f"line {error.lineno}, column {error.colno}: {error.msg.lower()}" if isinstance(
            error, json.JSONDecodeError) else "brackets nested too deeply"
        raise NoValue(f"this is no JSON: {where}") from error
    return value_from_data(data, parameters)


def _no_float(digits: str) -> Any:
    raise NoValue(f"{digits[:40]} is no exact number: write fractions as text, \"1/2\"")


def value_from_data(data: Any, parameters: Iterable[str] = ()) -> Any:
    """The value of what `rendering.json.data` gives; raises NoValue."""
    try:
        return _Reader(frozenset(parameters)).value(data, "the value", 0)
    except KernelError as error:
        raise NoValue(error.fact) from error


class _Reader:
    """Turns data to values; `where` names the place in the data for messages."""

    def __init__(self, parameters: frozenset[str]) -> None:
        self._parameters = parameters
        self._scalars = _Scalars(parameters)

    def value(self, data: Any, where: str, depth: int) -> Any:
        if depth > MAX_NESTING:
            raise NoValue("lists inside lists, too deeply")
        if not isinstance(data, dict):
            raise NoValue(f"{where} is no object with a kind")
        kind = data.get("kind")
        rule = _KINDS.get(kind) if isinstance(kind, str) else None
        if rule is None:
            known = ", ".join(_KINDS)
            raise NoValue(f"{where} is of kind {_shown(kind)}; a value is one of {known}")
        return rule(self, data, where, depth)

    def scalar(self, data: dict[str, Any], where: str, depth: int) -> Any:
        found = self._scalars.read(_text(data, "value", where))
        fraction = found.as_fraction() if found.is_number else None
        return found if fraction is None else simplest_number(Fraction(fraction))

    def index(self, data: dict[str, Any], where: str, depth: int) -> tuple[int, ...]:
        return _integers(data.get("value"), where)

    def listed(self, data: dict[str, Any], where: str, depth: int) -> ListValue:
        return ListValue(tuple(
            self.value(item, f"item {k} of {where}", depth + 1)
            for k, item in enumerate(_array(data, "items", where), 1)))

    def truth(self, data: dict[str, Any], where: str, depth: int) -> Truth:
        holds, certainty = data.get("holds"), data.get("certainty", "exact")
        if not isinstance(holds, bool) or certainty not in ("exact", "random"):
            raise NoValue(f"{where} says neither that it holds nor that it fails")
        difference = data.get("difference")
        evidence = data.get("evidence", "")
        return Truth(
            holds,
            None if difference is None else self.value(difference, f"difference of {where}",
                                                       depth + 1),
            evidence if isinstance(evidence, str) else "", certainty)

    def table(self, data: dict[str, Any], where: str, depth: int) -> Table:
        columns = _array(data, "columns", where)
        rows = _array(data, "rows", where)
        if not all(isinstance(c, str) for c in columns):
            raise NoValue(f"a column of {where} has no name")
        made = []
        for k, row in enumerate(rows, 1):
            if not isinstance(row, list) or len(row) != len(columns):
                raise NoValue(f"row {k} of {where} has not {len(columns)} cells")
            made.append(tuple(
                cell if isinstance(cell, str)
                else self.value(cell, f"row {k} of {where}", depth + 1) for cell in row))
        notes = data.get("notes", [])
        if not (isinstance(notes, list) and all(isinstance(note, str) for note in notes)):
            raise NoValue(f"the notes of {where} are no list of texts")
        return Table(tuple(columns), tuple(made), notes=tuple(notes))

    def expansion(
        self, data: dict[str, Any], where: str, depth: int
    ) -> LaurentPolynomial | Expansion:
        n = _n(data, where)
        basis = _text(data, "basis", where)
        terms: dict[tuple[int, ...], list[Scalar]] = {}
        own = None if basis == "x" else _family(basis)
        for k, term in enumerate(_array(data, "terms", where), 1):
            budget.current().check()
            place = f"term {k} of {where}"
            if not isinstance(term, dict):
                raise NoValue(f"{place} is no object")
            index = _integers(term.get("index"), place)
            if own is not None:
                index = own.check_index(index, n)
            elif len(index) != n:
                raise NoValue(f"the index of {place} has {len(index)} parts, n is {n}")
            c = self._scalars.read(_text(term, "coefficient", place))
            terms.setdefault(index, []).append(c)
        summed = {index: total(values) for index, values in terms.items()}
        if own is not None:
            return Expansion(own, n, summed)
        return LaurentPolynomial.of_scalars(n, BASE_RING, summed)

    def operator(self, data: dict[str, Any], where: str, depth: int) -> Any:
        from spanwright.kernel.operators.canonical import ALGEBRAS, CanonicalOperator
        from spanwright.kernel.operators.words import NORMALISATIONS

        n = _n(data, where)
        hecke = _text(data, "hecke", where)
        if hecke not in NORMALISATIONS:
            raise NoValue(f"{where} has the Hecke relations {_shown(hecke)}")
        if "word" in data:
            return _word(_text(data, "word", where), n, hecke, self._parameters, where)
        algebra = _text(data, "algebra", where)
        terms: dict[tuple[tuple[int, ...], ...], list[Scalar]] = {}
        letters: tuple[str, ...] | None = None
        for k, term in enumerate(_array(data, "terms", where), 1):
            place = f"term {k} of {where}"
            if not isinstance(term, dict):
                raise NoValue(f"{place} is no object")
            own = tuple(name for name in term if name != "coefficient")
            if ALGEBRAS.get(own) != algebra or letters not in (None, own):
                raise NoValue(f"{place} has letters that do not belong to the {_shown(algebra)}")
            letters = own
            key = tuple(
                _component(letter, _integers(term[letter], place), n, place) for letter in own)
            c = self._scalars.read(_text(term, "coefficient", place))
            terms.setdefault(key, []).append(c)
        if letters is None:
            letters = next((key for key, name in ALGEBRAS.items() if name == algebra), None)
            if letters is None:
                raise NoValue(f"there is no algebra {_shown(algebra)}")
        summed = {key: total(values) for key, values in terms.items()}
        return CanonicalOperator(letters, n, summed, hecke)


_KINDS: dict[str, Callable[[_Reader, dict[str, Any], str, int], Any]] = {
    "scalar": _Reader.scalar, "expansion": _Reader.expansion, "index": _Reader.index,
    "list": _Reader.listed, "truth": _Reader.truth, "table": _Reader.table,
    "operator": _Reader.operator,
}


_WORD_NODES = (
    syntax.Sum, syntax.Term, syntax.Product, syntax.Factor, syntax.Power, syntax.Group,
    syntax.Subscripted, syntax.Tuple, syntax.Name, syntax.Number,
)


def _word(text: str, n: int, hecke: str, parameters: frozenset[str], where: str) -> Any:
    """An operator as it was written, evaluated where nothing of the session is known."""
    try:
        tree = parse_expression(text)
    except ParseFailure as error:
        raise NoValue(f"the word of {where} is no operator: {error}") from error
    if not all(isinstance(node, _WORD_NODES) for node in syntax.walk(tree)):
        raise NoValue(f"the word of {where} holds more than letters and scalars")
    context = Context(
        settings=Settings(n=n, hecke=hecke), parameters=tuple(sorted(parameters - {"q", "t"})))
    try:
        found = Evaluator(context).value(tree)
    except Failure as error:
        raise NoValue(f"the word of {where}: {error.diagnostic.message}") from error
    if not is_operator(found):
        raise NoValue(f"the word of {where} is no operator")
    return found


def _family(name: str) -> Family:
    if name in FAMILY_NAMES:
        return family(name)
    module = _FURTHER_FAMILIES.get(name)
    if module is None:
        raise NoValue(f"there is no basis {_shown(name)}: one of x, {', '.join(FAMILY_NAMES)}")
    found: Family = import_module(f"spanwright.kernel.families.{module}").FAMILIES[name]
    return found


def _component(letter: str, part: tuple[int, ...], n: int, where: str) -> tuple[int, ...]:
    if len(part) != n:
        raise NoValue(f"{letter} of {where} has {len(part)} parts, n is {n}")
    if letter not in ("X", "Y") and sorted(part) != list(range(1, n + 1)):
        raise NoValue(f"{letter} of {where} is no permutation of 1..{n}")
    return part


def _n(data: dict[str, Any], where: str) -> int:
    n = data.get("n")
    if isinstance(n, bool) or not isinstance(n, int) or not 1 <= n <= LARGEST_N:
        raise NoValue(f"n of {where} lies between 1 and {LARGEST_N}; this is {_shown(n)}")
    return n


def _text(data: dict[str, Any], key: str, where: str) -> str:
    found = data.get(key)
    if not isinstance(found, str):
        raise NoValue(f"{where} has no text {key!r}")
    return found


def _array(data: dict[str, Any], key: str, where: str) -> list[Any]:
    found = data.get(key)
    if not isinstance(found, list):
        raise NoValue(f"{where} has no list {key!r}")
    return found


def _integers(found: Any, where: str) -> tuple[int, ...]:
    if not isinstance(found, list) or not all(
        isinstance(part, int) and not isinstance(part, bool) and abs(part) <= LARGEST_PART
        for part in found
    ):
        raise NoValue(f"the index of {where} is no list of integers")
    return tuple(found)


def _shown(found: Any) -> str:
    text = str(found) if not isinstance(found, dict | list) else type(found).__name__
    return repr(text[:60])


# --- Scalars -------------------------------------------------------------------------------------

_PIECE = re.compile(r"\s*(?:(?P<number>\d+)|(?P<name>[A-Za-z][A-Za-z0-9]*(?:_\d+)?_?)"
                    r"|(?P<sign>\*\*|[-+*/()]))")


class _Scalars:
    """Reads `(1 - q*t)/(1 - t)**2`: numbers, parameters, brackets, `+ - * / **`."""

    def __init__(self, parameters: frozenset[str]) -> None:
        self._parameters = parameters | {"q", "t"}
        self._pieces: list[tuple[str, str]] = []
        self._place = 0
        self._depth = 0
        self._known: dict[str, Scalar] = {}

    def read(self, text: str) -> Scalar:
        """The scalar of a text; raises NoValue."""
        found = self._known.get(text)
        if found is None:
            self._pieces, self._place, self._depth = _split(text), 0, 0
            found = self._sum()
            if self._place < len(self._pieces):
                raise NoValue(f"{_shown(self._pieces[self._place][1])} is out of place in "
                              f"{_shown(text)}")
            self._known[text] = found
        return found

    def _next(self) -> str:
        place = self._place
        return self._pieces[place][1] if place < len(self._pieces) else ""

    def _take(self) -> tuple[str, str]:
        if self._place >= len(self._pieces):
            raise NoValue("a coefficient ends too early")
        self._place += 1
        return self._pieces[self._place - 1]

    def _sum(self) -> Scalar:
        self._depth += 1
        if self._depth > MAX_NESTING:
            raise NoValue("brackets in a coefficient, nested too deeply")
        terms: list[Scalar] = []
        sign = self._take()[1] if self._next() in ("+", "-") else "+"
        while True:
            term = self._product()
            terms.append(-term if sign == "-" else term)
            if self._next() not in ("+", "-"):
                break
            sign = self._take()[1]
        self._depth -= 1
        return terms[0] if len(terms) == 1 else total(terms)

    def _product(self) -> Scalar:
        found = self._power()
        while self._next() in ("*", "/"):
            sign = self._take()[1]
            other = self._power()
            if sign == "/" and other.is_zero:
                raise NoValue("a coefficient divides by 0")
            found = found * other if sign == "*" else found / other
        return found

    def _power(self) -> Scalar:
        base, is_t = self._atom()
        if self._next() != "**":
            return base
        self._take()
        exponent = self._exponent()
        if abs(exponent) > LARGEST_POWER:
            raise NoValue(f"the exponent {exponent} in a coefficient is too large")
        if exponent.denominator == 2 and is_t:
            return Scalar.root_of_t() ** exponent.numerator
        if exponent.denominator != 1:
            raise NoValue("of fractional powers there are only those of t^(1/2)")
        if base.is_zero and exponent < 0:
            raise NoValue("a coefficient divides by 0")
        return base ** exponent.numerator

    def _exponent(self) -> Fraction:
        if self._next() != "(":
            return self._signed_number()
        self._take()
        found = self._signed_number()
        if self._next() == "/":
            self._take()
            below = self._signed_number()
            if below == 0:
                raise NoValue("an exponent divides by 0")
            found /= below
        self._close()
        return found

    def _signed_number(self) -> Fraction:
        sign = -1 if self._next() == "-" and self._take() else 1
        kind, text = self._take()
        if kind != "number":
            raise NoValue(f"{_shown(text)} is no exponent")
        return Fraction(sign * from_decimal(text))

    def _atom(self) -> tuple[Scalar, bool]:
        kind, text = self._take()
        if kind == "number":
            return Scalar.number(BASE_RING, from_decimal(text)), False
        if kind == "name":
            return self._parameter(text), text == "t"
        if text != "(":
            raise NoValue(f"{_shown(text)} is out of place in a coefficient")
        found = self._sum()
        self._close()
        return found, False

    def _close(self) -> None:
        if self._take()[1] != ")":
            raise NoValue("a bracket in a coefficient is not closed")

    def _parameter(self, text: str) -> Scalar:
        name = text[:-1] if text.endswith("_") and text[:-1] in SYMPY_TAKEN else text
        if name not in self._parameters and name not in _BUILT_IN and not name.startswith("y_"):
            raise NoValue(f"{name} is no parameter of this session: let {name} be a parameter")
        ring = BASE_RING if name in ("q", "t") else ParameterRing.get().extended((name,))
        return Scalar.parameter(ring, name)


_BUILT_IN = frozenset({"beta", "alpha"})
"""Parameters that families bring with them."""


def _split(text: str) -> list[tuple[str, str]]:
    pieces = []
    place = 0
    end = len(text.rstrip())
    while place < end:
        found = _PIECE.match(text, place)
        if found is None:
            raise NoValue(f"{_shown(text[place:place + 20])} is no coefficient")
        pieces.append((found.lastgroup or "", found.group(found.lastgroup or 0)))
        place = found.end()
    return pieces
