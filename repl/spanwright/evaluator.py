"""Tree to value: looks names up, applies the kernel, and gives every fault its place.

Never prints, never opens files, never keeps state: a `Context` goes in, values come out.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import replace
from fractions import Fraction
from math import comb, prod
from typing import Any

from spanwright.algebra import ExactAlgebra
from spanwright.builtins import call_builtin
from spanwright.context import SIZE_LIMIT, Context, Failure, Function, failure
from spanwright.kernel import indices
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.decimals import decimal, from_decimal
from spanwright.kernel.errors import KernelError, OutsideDomain, Pole
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Family
from spanwright.kernel.families.registry import NAMES as FAMILY_NAMES
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial, check_product
from spanwright.kernel.reduction import rewritten_element
from spanwright.rendering.text import by_how_much, element_text, monomial_text, text
from spanwright.values import (
    FamilyMark,
    IndexSet,
    Infinity,
    ListValue,
    Truth,
    as_scalar,
    is_index,
    is_number,
    kind_name,
)
from spanwright_grammar import syntax
from spanwright_grammar.diagnostics import CODES, Diagnostic
from spanwright_grammar.source import Span
from spanwright_grammar.spelling import nearest
from spanwright_grammar.vocabulary import RESERVED, lookup_all, words_like

# kernel codes that have another name among the diagnostics
_CODES = {
    "outside-domain": "wrong-kind", "mixed": "cannot-combine", "unable": "no-rule-known",
    "too-many-terms": "too-large", "indeterminate": "pole", "no-root": "not-a-unit",
    "bad-index": "negative-part", "too-many-parts": "wrong-number-of-parts",
    "mixed-parameters": "cannot-combine", "needs-more-variables": "wrong-number-of-parts",
    "too-few-variables": "wrong-number-of-parts", "negative-power": "not-in-span",
    "not-a-polynomial": "not-in-span", "outside-the-algebra": "not-in-span",
    "too-large-part": "wrong-kind",
}

_WHAT_IS_RIGHT = {
    "division-by-zero": ("a divisor that is not 0",),
    "not-a-unit": ("a scalar or a monomial as divisor, f/(1 - t) or x_1^-1 f",),
    "not-symmetric": ("expand f in E",),
}

TRUTH_WORDS = {"true": True, "false": False, "holds": True, "fails": False}
"""Names of the truth values; `holds` and `fails` are how they are printed."""

LARGEST_Y = 1_000_000
"""More parameters y_i than this are taken for a slip of the finger."""

LARGEST_PART = 10**9
"""Indices with larger parts are refused."""

SMALL_POWER = 50
"""Powers up to this are computed without an estimate of their size."""

LARGEST_POWER_BITS = 4 * 10**8
"""About 50 megabytes, some seconds of printing."""

LARGEST_CALL_DEPTH = 200
"""Functions that call themselves more deeply than this are taken to do so without end."""

LARGEST_DEPTH = 3_000
"""Expressions inside functions inside expressions, in all; Python's own stack holds more."""

class Evaluator:
    """Evaluates expressions in one context, over an algebra (exact, or modulo a prime)."""

    def __init__(self, context: Context, algebra: Any = None) -> None:
        self.context = context
        self.algebra = algebra if algebra is not None else ExactAlgebra(context)
        self._local: dict[str, Any] = dict(context.local)
        self.remark = ""
        self._depth = 0
        self._call_depth = 0

    # entry

    def value(self, node: syntax.Node) -> Any:
        """The value of an expression; raises Failure with the place of the innermost fault."""
        self._depth += 1
        try:
            if self._depth > LARGEST_DEPTH:
                raise failure("nesting-too-deep", node.place,
                              "functions inside functions, more deeply than can be evaluated")
            return _RULES[type(node)](self, node)
        except KernelError as error:
            raise self.placed(error, node) from error
        except MemoryError as error:
            raise failure("over-budget", node.place, "the memory for this is not there") from error
        finally:
            self._depth -= 1

    def placed(self, error: KernelError, node: syntax.Node) -> Failure:
        """A kernel error at the place of a node, in the reader's words."""
        code = _CODES.get(error.code, error.code)
        code = code if code in CODES else "wrong-kind"
        message = error.fact
        hints = error.hints
        if isinstance(error, Pole):
            message = f"pole of order {error.order}: {message}" if error.order > 1 else \
                f"pole: {message}"
        if error.code == "too-many-terms" and not hints:
            hints = ("fix terms = …   to allow more terms",)
        if not hints and (code != "not-a-unit" or "polynomial" in message):
            hints = _WHAT_IS_RIGHT.get(code, ())
        message += by_how_much(error)
        shown = Failure(Diagnostic("error", code, node.place, message, tuple(hints)))
        shown.value = getattr(error, "difference", None)
        return shown

    @property
    def n(self) -> int | None:
        """The number of variables, None when it is not fixed."""
        return self.context.settings.n

    def require_n(self, node: syntax.Node) -> int:
        """The number of variables; raises Failure when it is not fixed."""
        if self.n is None:
            raise failure(
                "ring-not-fixed", node.place, "the number of variables is not fixed yet",
                "fix n = 3")
        return self.n

    # names

    def lookup(self, name: str) -> Any:
        """An own name or a loop variable; None when there is none."""
        if name in self._local:
            return self._local[name]
        return self.context.names.get(name)

    def name(self, node: syntax.Name) -> Any:
        """A bare name."""
        name = node.name
        found = self.lookup(name)
        if found is not None:
            if isinstance(found, Function):
                shape = (f"{name}_({','.join(found.parameters)})" if found.is_family
                         else f"{name}({','.join(found.parameters)})")
                raise failure("wrong-kind", node.place,
                              f"{name} is a function: it needs its arguments", shape)
            return found
        if name in ("q", "t") or name in self.context.parameters:
            return self.algebra.parameter(name)
        if name in ("alpha", "beta"):
            return self.algebra.parameter(name)
        if name == "n":
            return self.require_n(node)
        if name == "infinity":
            return Infinity()
        if name in TRUTH_WORDS:
            return Truth(TRUTH_WORDS[name])
        if name in FAMILY_NAMES:
            return FamilyMark(family(name))
        if name in ("symmetrizer", "antisymmetrizer"):
            return self.algebra.operator(name, None, self.require_n(node))
        if name in ("d", "T", "X", "Y", "pi", "tau", "x", "y", "eps"):
            raise failure("wrong-kind", node.place, f"{name} needs a subscript", f"{name}_1")
        entries = lookup_all(name)
        if entries:
            raise failure("wrong-kind", node.place,
                          f"{name} does not stand alone: {entries[0].meaning}",
                          entries[0].example)
        raise self.unknown(name, node.place)

    def unknown(self, name: str, span: Span) -> Failure:
        """An unknown name, with the nearest known one."""
        own = [*self._local, *self.context.names, *self.context.parameters]
        # one's own names first; of the language's words not those of one letter: all are near
        words = [word for word in words_like(name) if len(word) > 1]
        near = nearest(name, own) or nearest(name, words)
        definition = f"let {name} = …"
        hints = (near, definition) if near else (definition,)
        return failure("unknown-name", span, f"{name} is not defined", *hints)

    # numbers and indices

    def integer(self, node: syntax.Node, what: str = "a position") -> int:
        """An expression that must be an integer."""
        value = self.value(node)
        found = self.as_integer(value)
        if found is None:
            raise failure("not-an-integer", node.place,
                          f"{what} is an integer; this is {kind_name(value)}")
        return found

    def as_integer(self, value: Any) -> int | None:
        """The integer that a value is, else None."""
        if isinstance(value, int) and not isinstance(value, bool):
            return value
        if isinstance(value, Scalar):
            return value.as_integer()
        return None

    def index(self, node: syntax.Node, *, digits: bool) -> tuple[int, ...] | int:
        """A subscript: a tuple of integers, or a bare position.

        With `digits`, 201 is read as (2,0,1).
        """
        if isinstance(node, syntax.Number):
            if digits and len(node.digits) > 1:
                return tuple(int(d) for d in node.digits)
            return from_decimal(node.digits)
        value = self.value(node.inner) if isinstance(node, syntax.Group) else self.value(node)
        if is_index(value):
            return self.bounded(value, node)
        found = self.as_integer(value)
        if found is None:
            raise failure("wrong-kind", node.place,
                          f"a subscript is an integer or an index; this is {kind_name(value)}",
                          "x_1", "E_(1,0,2)")
        return self.bounded((found,), node) if isinstance(node, syntax.Group) else found

    def bounded(self, index: tuple[int, ...], node: syntax.Node) -> tuple[int, ...]:
        """An index whose parts are of a size that can be worked with."""
        if any(abs(part) > LARGEST_PART for part in index):
            raise failure("too-large", node.place,
                          f"the parts of an index go up to {LARGEST_PART:,} here")
        return index

    def position(
        self, node: syntax.Node, top: int, what: str, reason: str | None = None
    ) -> int:
        """A position 1..top; `reason` says why it ends there, when it is not n."""
        found = self.integer(node.inner if isinstance(node, syntax.Group) else node)
        if not 1 <= found <= top:
            raise self.out_of_range(node, found, top, what, reason)
        return found

    def out_of_range(
        self, node: syntax.Node, found: int, top: int, what: str, reason: str | None = None
    ) -> Failure:
        """A position outside 1..top."""
        if top < 1:
            return failure("position-out-of-range", node.place,
                           reason or f"{what} needs n of 2 or more")
        nearest_position = min(max(found, 1), top)
        return failure(
            "position-out-of-range", node.place,
            f"{what}_{brief(found)} does not exist: "
            + (reason or f"positions go from 1 to {top} (n = {self.n})"),
            f"{what}_{nearest_position}")

    # subscripts

    def subscripted(self, node: syntax.Subscripted) -> Any:
        """x_1, E_mu, T_1, mu_2, F_(1,0), eq_7."""
        head = node.head
        own = self.lookup(head)
        if own is not None:
            return self.own_subscripted(node, own)
        if head == "eq":
            return self.result(node)
        if head in ("x", "X", "Y", "y"):
            n = self.require_n(node)
            if head == "y":
                j = self.position(node.index, LARGEST_Y, head, f"i goes from 1 to {LARGEST_Y:,}")
            else:
                j = self.position(node.index, n, head)
            if head == "x":
                return self.algebra.generator(n, j)
            if head == "y":
                return self.algebra.parameter(f"y_{j}")
            return self.algebra.operator(head, j, n)
        if head == "eps":
            n = self.require_n(node)
            j = self.position(node.index, n, "eps")
            return tuple(int(k == j) for k in range(1, n + 1))
        if head == "s":
            at = self.index(node.index, digits=True)
            if _is_computed(node.index) and isinstance(at, tuple) and len(at) == 1:
                # s_(i+1) is the reflection, as in the braid relations; s_(2) is a Schur polynomial
                at = at[0]
            if isinstance(at, int):
                n = self.require_n(node)
                return self.algebra.operator("s", self.checked(node, at, n - 1), n)
            return self.element("s", node, at)
        if head in ("T", "d", "pi", "tau"):
            return self.operator(node)
        if head in FAMILY_NAMES:
            if isinstance(node.index, syntax.Basement):
                return self.with_basement(node)
            return self.element(head, node, self.index(node.index, digits=self.n != 1))
        if lookup_all(head):
            raise failure("wrong-kind", node.place, f"{head} takes no subscript",
                          lookup_all(head)[0].example)
        raise self.unknown(head, node.place)

    def checked(self, node: syntax.Subscripted, at: int, top: int) -> int:
        """A position already evaluated."""
        if not 1 <= at <= top:
            raise self.out_of_range(node.index, at, top, node.head)
        return at

    def own_subscripted(self, node: syntax.Subscripted, own: Any) -> Any:
        """A part of an index or list, or a member of a family of one's own."""
        if isinstance(own, Function):
            if not own.is_family:
                raise failure("wrong-kind", node.place, f"{own.name} is a function of arguments",
                              f"{own.name}({','.join(own.parameters)})")
            at = self.index(node.index, digits=not own.is_whole_index or self.n != 1)
            return self.member(own, node, at)
        items = own.items if isinstance(own, ListValue) else own
        if isinstance(items, tuple):
            n_parts = len(items)
            counted = "1 part" if n_parts == 1 else f"{n_parts} parts"
            at = self.position(node.index, n_parts, node.head, f"{node.head} has {counted}")
            return items[at - 1]
        raise failure("wrong-kind", node.place,
                      f"{node.head} is {kind_name(own)}: it has no parts")

    def member(self, own: Function, node: syntax.Node, at: tuple[int, ...] | int) -> Any:
        """A member of an indexed family."""
        if own.is_whole_index:
            return self.apply(own, (at,), node)
        parts = at if isinstance(at, tuple) else (at,)
        if len(parts) != len(own.parameters):
            raise failure(
                "wrong-number-of-parts", node.place,
                f"{own.name} has {len(own.parameters)} parts in its subscript, here are "
                f"{len(parts)}", f"{own.name}_({','.join(own.parameters)})")
        return self.apply(own, parts, node)

    def result(self, node: syntax.Subscripted) -> Any:
        """eq_7."""
        tag = self.integer(node.index, "a tag")
        found = self.context.results.get(tag)
        if found is None:
            last = max(self.context.results, default=0)
            hints = (f"eq_{last}",) if last else ()
            raise failure("unknown-name", node.place, f"no result has the tag {brief(tag)}",
                          *hints)
        return found

    def element(self, name: str, node: syntax.Node, at: tuple[int, ...] | int) -> Any:
        """A basis element of a family."""
        n = self.require_n(node)
        vanishing = rewritten_element(family(name), at if isinstance(at, tuple) else (at,), n)
        if vanishing is not None:
            return self.algebra.held(vanishing)
        target, index = self.checked_index(name, node, at, n)
        return self.algebra.element(target, index, n)

    def checked_index(
        self, name: str, node: syntax.Node, at: tuple[int, ...] | int, n: int
    ) -> tuple[Family, tuple[int, ...]]:
        """A family and a canonical index of it; raises Failure for a wrong one, with a hint."""
        target = family(name)
        index = at if isinstance(at, tuple) else (at,)
        if target.index_kind == "permutation" and not indices.is_permutation(index):
            raise failure(
                "not-a-permutation", node.place,
                f"{_shown(index)} is not a permutation of 1..{len(index)} in one-line notation",
                f"{name}_{_shown(_near_permutation(index))}")
        try:
            return target, target.check_index(index, n)
        except KernelError as error:
            found = self.placed(error, node)
            hint = _digits_hint(name, node, n) or \
                _index_hint(name, index, n, found.diagnostic.code)
            if hint and not found.diagnostic.hints:
                found = Failure(replace(found.diagnostic, hints=(hint,)))
            raise found from error

    def with_basement(self, node: syntax.Subscripted) -> Any:
        """E_(mu|w)."""
        n = self.require_n(node)
        assert isinstance(node.index, syntax.Basement)
        if node.head != "E":
            raise failure("wrong-kind", node.place, "only E has permuted basements",
                          "E_((1,0,2)|(2,1,3))")
        mu = self.index(node.index.index, digits=n != 1)
        w = self.permutation(node.index.permutation, n)
        index = mu if isinstance(mu, tuple) else (mu,)
        return self.algebra.with_basement(family("E").check_index(index, n), w, n)

    def permutation(self, node: syntax.Node, n: int) -> tuple[int, ...]:
        """A permutation of 1..n in one-line notation."""
        at = self.index(node, digits=True)
        w = at if isinstance(at, tuple) else (at,)
        if not indices.is_permutation(w):
            raise failure(
                "not-a-permutation", node.place,
                f"{_shown(w)} is not a permutation of 1..{len(w)} in one-line notation",
                _shown(_near_permutation(w)))
        if len(w) > n:
            raise failure("wrong-number-of-parts", node.place,
                          f"{_shown(w)} moves more than the n = {n} positions here",
                          f"fix n = {len(w)}")
        return indices.extended(w, n)

    def operator(self, node: syntax.Subscripted) -> Any:
        """T_1, T_(2,1,3), T_pi, d_1, pi_w, tau_2, tau_pi."""
        n = self.require_n(node)
        head, at_node = node.head, node.index
        if isinstance(at_node, syntax.Name) and at_node.name == "pi" and self.lookup("pi") is None:
            if head in ("T", "tau"):
                return self.algebra.operator(f"{head}_pi", None, n)
            raise failure("wrong-kind", node.place, f"there is no {head}_pi", f"{head}_1")
        at = self.index(at_node, digits=True)
        if isinstance(at, int):
            return self.algebra.operator(head, self.checked(node, at, n - 1), n)
        if len(at) == 1 and isinstance(at_node, syntax.Group):
            # T_(i+1) is a position, as x_(i+1) is; as a permutation (1) would be the identity
            return self.algebra.operator(head, self.checked(node, at[0], n - 1), n)
        if len(at) == 1 and n > 1:
            # F_(1) binds the index (1): neither reading may be taken in silence
            raise failure("wrong-kind", node.place,
                          f"{head} is subscripted by a position or by a permutation of more than "
                          f"one letter; this is the index {_shown(at)}", f"{head}_{at[0]}")
        if head == "tau":
            raise failure("wrong-kind", node.place,
                          "tau is subscripted by a position or by pi", "tau_1")
        w = self.permutation(at_node, n)
        return self.algebra.operator(head, w, n)

    # calls

    def call(self, node: syntax.Call) -> Any:
        """A function of one's own, or one of the language."""
        own = self.lookup(node.function)
        if own is not None:
            if isinstance(own, Function) and not own.is_family:
                if len(node.arguments) != len(own.parameters):
                    raise failure(
                        "wrong-number-of-arguments", node.place,
                        f"{own.name} takes {len(own.parameters)} arguments, here are "
                        f"{len(node.arguments)}", f"{own.name}({', '.join(own.parameters)})")
                return self.apply(own, tuple(self.value(a) for a in node.arguments), node)
            if isinstance(own, Function):
                raise failure("wrong-kind", node.place, f"{own.name} is an indexed family",
                              f"{own.name}_({','.join(own.parameters)})")
            raise failure(
                "not-a-function", node.place,
                f"{node.function} is {kind_name(own)}, not a function",
                f"{node.function} (…)   with a space, for a product")
        kinds = {entry.kind for entry in lookup_all(node.function)}
        if "parameter" in kinds or node.function in self.context.parameters:
            raise failure(
                "not-a-function", node.place, f"{node.function} is a scalar, not a function",
                f"{node.function} (…)   with a space, for a product")
        return call_builtin(self, node)

    def apply(self, function: Function, arguments: tuple[Any, ...], node: syntax.Node) -> Any:
        """Evaluate a function's body with its parameters bound."""
        self.algebra.check_budget()
        if self._call_depth >= LARGEST_CALL_DEPTH:
            raise failure("nesting-too-deep", node.place,
                          f"{function.name} calls itself without end")
        self._call_depth += 1
        saved = self._local
        self._local = {**function.local, **dict(zip(function.parameters, arguments, strict=True))}
        try:
            return self.value(function.body)
        except Failure as inner:
            # the fault lies in the definition's text; the caller's place is what can be shown
            found = inner.diagnostic
            prefix = f"in {function.name}: "
            is_said = found.code == "nesting-too-deep" or found.message.startswith(prefix)
            message = found.message if is_said else f"{prefix}{found.message}"
            raise Failure(Diagnostic(
                found.severity, found.code, node.place, message, found.hints),
                inner.value) from inner
        finally:
            self._local = saved
            self._call_depth -= 1

    # bindings

    def domain(self, node: syntax.Node) -> IndexSet:
        """An index set; lists and tuples serve too."""
        value = self.value(node)
        if isinstance(value, IndexSet):
            return value
        if isinstance(value, ListValue):
            items = value.items
            return IndexSet("a list", lambda: iter(items), lambda v: v in items,
                            lambda: len(items))
        raise failure("wrong-kind", node.place,
                      f"an index set is needed here; this is {kind_name(value)}",
                      "1..n", "compositions(2)")

    def bound(
        self, bindings: tuple[syntax.Binding, ...], condition: syntax.Node | None
    ) -> Iterator[dict[str, Any]]:
        """All bindings that satisfy the condition, first name slowest; locals are in force."""
        saved = self._local
        try:
            for b in bindings:
                if b.name in RESERVED:
                    raise failure("name-taken", b.place, f"{b.name} is a word of the language")
            yield from self._bound(bindings, 0, condition)
        finally:
            self._local = saved

    def _bound(
        self, bindings: tuple[syntax.Binding, ...], place: int, condition: syntax.Node | None
    ) -> Iterator[dict[str, Any]]:
        if place == len(bindings):
            if condition is None or self.truth(condition).holds:
                yield {b.name: self._local[b.name] for b in bindings}
            return
        binding = bindings[place]
        for item in self.domain(binding.domain):
            self.algebra.check_budget()
            self._local = {**self._local, binding.name: item}
            yield from self._bound(bindings, place + 1, condition)

    def truth(self, node: syntax.Node) -> Truth:
        """An expression that must be a truth value."""
        value = self.value(node)
        if isinstance(value, Truth):
            return value
        raise failure("wrong-kind", node.place,
                      f"a statement is needed here; this is {kind_name(value)}", "f = g")


def brief(number: int) -> str:
    """An integer in a message: the digits, or how many they are."""
    digits = decimal(number)
    return digits if len(digits) < 30 else f"({len(digits):,} digits)"


def _shown(index: tuple[int, ...]) -> str:
    return f"({','.join(map(str, index))})"


def _is_computed(node: syntax.Node) -> bool:
    """Whether a subscript is an integer to be computed, as in s_(i+1)."""
    return isinstance(node, syntax.Group) and isinstance(
        node.inner, syntax.Sum | syntax.Product)


def _near_permutation(index: tuple[int, ...]) -> tuple[int, ...]:
    """The permutation with the same order of entries."""
    order = sorted(range(len(index)), key=lambda k: (index[k], k))
    found = [0] * len(index)
    for rank, k in enumerate(order, 1):
        found[k] = rank
    return tuple(found)


def _digits_hint(name: str, node: syntax.Node, n: int) -> str | None:
    """E_(1,0,2) for E_{102}: only without brackets are digits read one by one."""
    inside = node.index if isinstance(node, syntax.Subscripted) else None
    if isinstance(inside, syntax.Group) and isinstance(inside.inner, syntax.Number) \
            and len(inside.inner.digits) == n > 1:
        return f"{name}_({','.join(inside.inner.digits)})"
    return None


def _index_hint(name: str, index: tuple[int, ...], n: int, code: str) -> str | None:
    """An index of the same family that would be right."""
    if code == "wrong-number-of-parts":
        if any(index[n:]):
            return f"fix n = {len(index)}"
        right = indices.padded(index, n) if len(index) < n else index[:n]
        return f"{name}_{_shown(right)}"
    if code == "not-a-partition":
        return f"{name}_{_shown(indices.decreasing(index))}"
    if code == "negative-part":
        return f"{name}_{_shown(tuple(max(part, 0) for part in index))}"
    return None


# rules, one for each kind of node


def _number(e: Evaluator, node: syntax.Number) -> Any:
    return from_decimal(node.digits)


def _string(e: Evaluator, node: syntax.String) -> Any:
    return node.value


def _tuple(e: Evaluator, node: syntax.Tuple) -> Any:
    return e.bounded(
        tuple(e.integer(item, "a part of an index") for item in node.items), node)


def _group(e: Evaluator, node: syntax.Group) -> Any:
    return e.value(node.inner)


def _set(e: Evaluator, node: syntax.SetDisplay) -> Any:
    found: dict[Any, None] = {}
    for place in node.items:
        value = e.value(place)
        item = value if is_index(value) else e.as_integer(value)
        if item is None:
            raise failure("wrong-kind", place.place,
                          f"a set holds integers or indices; this is {kind_name(value)}")
        found[item] = None
    items = tuple(found)
    shown = ", ".join(_shown(i) if isinstance(i, tuple) else decimal(i) for i in items)
    return IndexSet(f"{{{shown}}}", lambda: iter(items), lambda v: v in found, lambda: len(items))


def _range(e: Evaluator, node: syntax.Range) -> Any:
    low = e.integer(node.low, "an end of a range")
    high = e.integer(node.high, "an end of a range")
    span = range(low, high + 1)
    # len() of a range has an upper limit
    return IndexSet(f"{decimal(low)}..{decimal(high)}", lambda: iter(span),
                    lambda v: isinstance(v, int) and v in span, lambda: max(0, high - low + 1))


def _alphabets(e: Evaluator, node: syntax.Alphabets) -> Any:
    first, second = node.first, node.second
    is_plain = (
        isinstance(first, syntax.Name) and isinstance(second, syntax.Name)
        and (first.name, second.name) == ("x", "y"))
    element = node.element
    if not (isinstance(element, syntax.Subscripted) and element.head == "S" and is_plain):
        raise failure("wrong-kind", node.place, "two alphabets stand behind S_w alone, as (x;y)",
                      "S_(2,1,3)(x;y)")
    n = e.require_n(node)
    at = e.index(element.index, digits=True)
    w = at if isinstance(at, tuple) else (at,)
    if not indices.is_permutation(w):
        raise failure("not-a-permutation", element.place,
                      f"{_shown(w)} is not a permutation in one-line notation",
                      f"S_{_shown(_near_permutation(w))}(x;y)")
    return e.algebra.double_schubert(w, n)


def _sum(e: Evaluator, node: syntax.Sum) -> Any:
    values = []
    for term in node.terms:
        value = e.value(term.node)
        values.append(e.algebra.negate(value) if term.sign < 0 else value)
    result = e.algebra.add(values) if len(values) > 1 else values[0]
    return e.bounded(result, node) if is_index(result) else result


def _product(e: Evaluator, node: syntax.Product) -> Any:
    # from the right: an operator acts on everything to its right
    result: Any = None
    values = [(e.value(factor.node), factor) for factor in reversed(node.factors)]
    if len(values) > 2 and all(
        isinstance(value, LaurentPolynomial) and factor.operator != "/" for value, factor in values
    ):
        # the first products of many may be work enough, and all for nothing
        check_product([value for value, _ in values])
    for value, factor in values:
        try:
            if factor.operator == "/":
                value = e.algebra.inverse(value)
            result = value if result is None else e.algebra.multiply(value, result)
        except KernelError as error:
            raise e.placed(error, factor.node) from error
    return e.bounded(result, node) if is_index(result) else result


def _exponent(e: Evaluator, node: syntax.Expression) -> Any:
    """An exponent; braces are brackets here, as in TeX: x_1^{-1}."""
    if isinstance(node, syntax.SetDisplay) and len(node.items) == 1:
        return e.value(node.items[0])
    if isinstance(node, syntax.SetDisplay) and node.items:
        return _tuple(e, syntax.Tuple(node.items, node.place))
    return e.value(node)


def _multi_power(e: Evaluator, letter: str, node: syntax.Power) -> Any:
    """x^mu, X^mu, Y^mu."""
    n = e.require_n(node)
    exponent = _exponent(e, node.exponent)
    is_bracketed = isinstance(node.exponent, syntax.Group | syntax.SetDisplay)
    if is_bracketed and e.as_integer(exponent) is not None:
        exponent = (exponent,)
    if not is_index(exponent):
        raise failure("wrong-kind", node.place, f"{letter}^mu needs an index as exponent",
                      f"{letter}^(2,0,1)", f"{letter}_1^2")
    if len(exponent) != n:
        raise failure("wrong-number-of-parts", node.exponent.place,
                      f"{letter}^{_shown(exponent)} has {len(exponent)} exponents, the ring has "
                      f"n = {n}", f"{letter}^{_shown(indices.padded(exponent, n)[:n])}")
    if letter == "x":
        return e.algebra.monomial(n, exponent)
    # the letters commute
    result = e.algebra.power(e.algebra.operator(letter, 1, n), 0)
    for j, power in enumerate(exponent, 1):
        if power:
            raised = e.algebra.power(e.algebra.operator(letter, j, n), power)
            result = e.algebra.multiply(result, raised)
    return result


def _power(e: Evaluator, node: syntax.Power) -> Any:
    if isinstance(node.base, syntax.Name) and node.base.name in ("x", "X", "Y"):
        return _multi_power(e, node.base.name, node)
    base = e.value(node.base)
    exponent = _exponent(e, node.exponent)
    if isinstance(exponent, Fraction):
        bare = node.base
        while isinstance(bare, syntax.Group):
            bare = bare.inner
        is_t = isinstance(bare, syntax.Name) and bare.name == "t" and e.lookup("t") is None
        if is_t and exponent.denominator == 2:
            return e.algebra.power(e.algebra.root_of_t(), exponent.numerator)
        raise failure("not-an-integer", node.exponent.place,
                      "of all fractional powers only t^(1/2) and its powers exist here",
                      "t^(1/2)")
    whole = e.as_integer(exponent)
    if whole is None:
        raise failure("not-an-integer", node.exponent.place,
                      f"an exponent is an integer; this is {kind_name(exponent)}")
    if isinstance(base, Scalar):
        _check_power(base, abs(whole), node)
    return e.algebra.power(base, whole)


def _check_power(base: Scalar, exponent: int, node: syntax.Node) -> None:
    """Refuse a power of a scalar that no memory would hold when it is multiplied out."""
    if exponent <= SMALL_POWER:
        return
    form = base.form("short")
    for polynomial, multiplicity in (*form.numerator, *form.denominator):
        n_factors = exponent * multiplicity
        rows = list(polynomial.terms())
        degrees: dict[str, Fraction] = {}
        for _, powers in rows:
            for name, power in powers:
                degrees[name] = max(degrees.get(name, Fraction(0)), Fraction(power))
        box = prod(int(degree * n_factors) + 1 for degree in degrees.values())
        n_terms = min(box, comb(n_factors + len(rows) - 1, len(rows) - 1))
        height = max(abs(c).bit_length() for c, _ in rows) + len(rows).bit_length() - 1
        if n_terms * n_factors * max(height, 1) > LARGEST_POWER_BITS:
            raise failure("too-large", node.place,
                          f"multiplied out this power would have about {n_terms:,} terms of up "
                          f"to {n_factors * height * 3 // 10:,} digits")


def _size(e: Evaluator, node: syntax.Size) -> Any:
    value = e.value(node.inner)
    if isinstance(value, tuple):
        return sum(value)
    if isinstance(value, ListValue):
        return len(value.items)
    if isinstance(value, IndexSet):
        return value.size()
    if is_number(value):
        return abs(value)
    raise failure("wrong-kind", node.place, f"|…| needs an index; this is {kind_name(value)}")


def _coefficient(e: Evaluator, node: syntax.Coefficient) -> Any:
    operand = e.value(node.operand)
    inside = node.element
    if isinstance(inside, syntax.Subscripted) and inside.head in FAMILY_NAMES \
            and e.lookup(inside.head) is None and not isinstance(inside.index, syntax.Basement):
        n = e.require_n(inside)
        at = e.index(inside.index, digits=n != 1)
        if not (inside.head == "s" and isinstance(at, int)):
            return e.algebra.coefficient(*e.checked_index(inside.head, inside, at, n), operand)
    element = e.value(inside)
    try:
        return e.algebra.monomial_coefficient(element, operand)
    except OutsideDomain as error:
        raise failure("wrong-kind", inside.place, error.fact, "[E_(1,0,2)] f", "[x_1^2] f") \
            from error


def _big_operator(e: Evaluator, node: syntax.BigOperator) -> Any:
    values = []
    for _ in e.bound(node.bindings, node.condition):
        values.append(e.value(node.body))
        if len(values) > SIZE_LIMIT:
            raise failure("too-large", node.place, f"more than {SIZE_LIMIT:,} terms")
    if node.kind == "sum":
        return e.algebra.add(values) if values else 0
    result: Any = 1
    for value in reversed(values):
        result = e.algebra.multiply(value, result)
    return result


def _specialise(e: Evaluator, node: syntax.Specialise) -> Any:
    operand = e.value(node.operand)
    parameters: dict[str, Any] = {}
    variables: dict[int, Any] = {}
    for substitution in node.substitutions:
        target = substitution.target
        if isinstance(target, syntax.Name) and target.name == "x":
            n = e.require_n(target)
            values = _point(e, substitution.value, n)
            variables.update(enumerate(values, 1))
            continue
        value = e.value(substitution.value)
        if isinstance(value, Infinity):
            raise failure("wrong-kind", substitution.value.place,
                          "infinity is the target of a limit, no value", "f as q -> infinity")
        if isinstance(target, syntax.Name) and (
            target.name in ("q", "t", "alpha", "beta") or target.name in e.context.parameters
        ):
            parameters[target.name] = value
        elif isinstance(target, syntax.Subscripted) and target.head == "x":
            variables[e.position(target.index, e.require_n(target), "x")] = value
        elif isinstance(target, syntax.Subscripted) and target.head == "y":
            parameters[f"y_{e.integer(target.index)}"] = value
        elif isinstance(target, syntax.Name) and e.lookup(target.name) is None \
                and not lookup_all(target.name):
            raise failure("unknown-name", target.place, f"{target.name} is not a parameter",
                          f"let {target.name} be a parameter")
        else:
            raise failure("wrong-kind", target.place,
                          "parameters and variables can be given values, nothing else",
                          "f at q = 0", "f at x_1 = 1")
    try:
        return _noted(
            e, operand, e.algebra.specialise(operand, parameters, variables), parameters)
    except (Pole, OutsideDomain) as error:
        if not (isinstance(error, Pole) or error.code == "indeterminate"):
            raise
        point = [*parameters.items(), *((f"x_{j}", v) for j, v in sorted(variables.items()))]
        raise _pole(error, operand, parameters, _where(point), node) from error


def _noted(e: Evaluator, before: Any, after: Any, names: Iterable[str]) -> Any:
    """The value after; a remark is left when an expansion had to become a polynomial."""
    changed = " and ".join(names)
    if changed and isinstance(before, Expansion) and isinstance(after, LaurentPolynomial):
        name = before.family.name
        e.remark = f"in monomials: {'S(x;y)' if name == 'double Schubert' else name} depends " \
            f"on {changed}"
    return after


def _point(e: Evaluator, node: syntax.Node, n: int) -> list[Any]:
    if isinstance(node, syntax.Tuple):
        values = [e.value(item) for item in node.items]
    else:
        value = e.value(node)
        values = list(value) if is_index(value) else \
            list(value.items) if isinstance(value, ListValue) else [value]
    if len(values) != n:
        raise failure("wrong-number-of-parts", node.place,
                      f"x takes {n} values here, one for each variable",
                      f"x = ({','.join(['1'] * n)})")
    return values


def _where(point: Iterable[tuple[str, Any]], sign: str = "=") -> str:
    return ", ".join(f"{name} {sign} {text(value)}" for name, value in point)


def _pole(
    error: KernelError, value: Any, images: dict[str, Any], where: str, node: syntax.Node,
    *hints: str,
) -> Failure:
    """A pole under specialisation: its order, the point, and the coefficient that has it."""
    found = worst_coefficient(value, images)
    order, element = found or (getattr(error, "order", 1), "")
    place = f" in the coefficient of {element}" if element else ""
    if not isinstance(error, Pole):
        return failure("pole", node.place, f"at {where}{place}: {error.fact}", *error.hints)
    named = "a pole" if order == 1 else f"a pole of order {order}"
    if not hints and len(images) == 1:
        ((name, at),) = images.items()
        hints = (f"{_vanishing(name, at, order)} f at {where}",)
    return failure("pole", node.place, f"{named} at {where}{place}", *(error.hints or hints))


def _vanishing(name: str, value: Any, order: int) -> str:
    """The power of a linear factor that takes a pole away, as text."""
    shown = text(value)
    if shown == "0":
        base = name
    else:
        base = f"({name} - {shown if shown.isalnum() else f'({shown})'})"
    return base if order == 1 else f"{base}^{order}"


def worst_coefficient(value: Any, images: dict[str, Any]) -> tuple[int, str] | None:
    """The highest order of a pole among the coefficients, and the element that it stands at."""
    scalars = {name: as_scalar(v) for name, v in images.items()}
    known = {name: v for name, v in scalars.items() if v is not None}
    if not isinstance(value, Expansion | LaurentPolynomial):
        return None
    forms: list[Expansion | LaurentPolynomial] = [value]
    if isinstance(value, Expansion):
        forms.append(value.to_monomials())
    for form in forms:
        worst: tuple[int, str] | None = None
        for index, c in form.items():
            try:
                c.substitute(known)
            except Pole as pole:
                if worst is None or pole.order > worst[0]:
                    worst = pole.order, element_name(form, index)
            except KernelError:
                worst = worst or (1, element_name(form, index))
        if worst is not None:
            return worst
    return None


def element_name(value: Expansion | LaurentPolynomial, index: tuple[int, ...]) -> str:
    """E_(0,2), x_1 x_3^2, or 1."""
    if isinstance(value, Expansion):
        return element_text(value.family.name, value.family.show_index(index, value.n))
    return monomial_text(index) or "1"


def _limit(e: Evaluator, node: syntax.Limit) -> Any:
    operand = e.value(node.operand)
    variable = node.variable
    known = isinstance(variable, syntax.Name) and (
        variable.name in ("q", "t", "alpha", "beta") or variable.name in e.context.parameters)
    if not known:
        raise failure("wrong-kind", variable.place, "a limit runs over a parameter",
                      "f as q -> 0")
    assert isinstance(variable, syntax.Name)
    name, target = variable.name, e.value(node.target)
    try:
        return _noted(e, operand, e.algebra.limit(operand, name, target), (name,))
    except Pole as error:
        images = {name: target}
        where = _where(images.items())
        if not isinstance(target, Infinity):
            worst = worst_coefficient(operand, images)
            order = worst[0] if worst else error.order
            hint = f"{_vanishing(name, target, order)} f as {name} -> {text(target)}"
            raise _pole(error, operand, images, where, node, hint) from error
        # at infinity the order of the pole is that at 0 of the inverse
        inverted = e.algebra.inverse(e.algebra.parameter(name))
        turned = e.algebra.specialise(operand, {name: inverted}, {})
        found = worst_coefficient(turned, {name: 0})
        order = found[0] if found else error.order
        hint = f"{name}^-{order} f as {name} -> infinity"
        raise _pole(error, turned, {name: 0}, where, node, hint) from error


def _comparison(e: Evaluator, node: syntax.Comparison) -> Any:
    left, right = e.value(node.left), e.value(node.right)
    operator = node.operator
    if operator == "in":
        if isinstance(right, IndexSet):
            whole = e.as_integer(left)
            return Truth(bool(right.contains(left if whole is None else whole)))
        if isinstance(right, ListValue):
            return Truth(any(e.algebra.equal(left, item).holds for item in right.items))
        raise failure("wrong-kind", node.right.place,
                      f"`in` needs an index set; this is {kind_name(right)}")
    if operator in ("=", "!="):
        try:
            found: Truth = e.algebra.equal(left, right)
        except KernelError as error:
            raise e.placed(error, node) from error
        return found if operator == "=" else Truth(not found.holds)
    a, b = _comparable(e, left), _comparable(e, right)
    if a is None or b is None:
        wrong, value = (node.left, left) if a is None else (node.right, right)
        what = "a scalar with parameters" if isinstance(value, Scalar) else kind_name(value)
        raise failure("wrong-kind", wrong.place, f"{operator} compares numbers; this is {what}",
                      "|mu| < 3")
    holds = {"<": a < b, "<=": a <= b, ">": a > b, ">=": a >= b}[operator]
    return Truth(holds)


def _comparable(e: Evaluator, value: Any) -> Fraction | None:
    if is_number(value):
        return Fraction(value)
    return value.as_fraction() if isinstance(value, Scalar) else None


def _negation(e: Evaluator, node: syntax.Negation) -> Any:
    return Truth(not e.truth(node.operand).holds)


def _conjunction(e: Evaluator, node: syntax.Conjunction) -> Any:
    for operand in node.operands:
        found = e.truth(operand)
        if not found.holds:
            return found
    return Truth(True)


def _disjunction(e: Evaluator, node: syntax.Disjunction) -> Any:
    return Truth(any(e.truth(operand).holds for operand in node.operands))


def _read(e: Evaluator, node: syntax.ReadFile) -> Any:
    raise failure("wrong-kind", node.place, "`read` stands only behind `let f =`",
                  'let f = read "f.json"')


def _basement(e: Evaluator, node: syntax.Basement) -> Any:
    raise failure("wrong-kind", node.place, "only E has permuted basements",
                  "E_((1,0,2)|(2,1,3))")


def _comprehension(e: Evaluator, node: syntax.Comprehension) -> Any:
    items = []
    for _ in e.bound(node.bindings, node.condition):
        items.append(e.value(node.body))
        if len(items) > SIZE_LIMIT:
            raise failure("too-large", node.place, f"a list of more than {SIZE_LIMIT:,} items")
    return ListValue(tuple(items))


_RULES: dict[type, Callable[[Evaluator, Any], Any]] = {
    syntax.Number: _number, syntax.String: _string, syntax.Name: Evaluator.name,
    syntax.Subscripted: Evaluator.subscripted, syntax.Tuple: _tuple, syntax.Group: _group,
    syntax.SetDisplay: _set, syntax.Range: _range, syntax.Call: Evaluator.call,
    syntax.Alphabets: _alphabets, syntax.Sum: _sum, syntax.Product: _product,
    syntax.Power: _power, syntax.Size: _size, syntax.Coefficient: _coefficient,
    syntax.BigOperator: _big_operator, syntax.Specialise: _specialise, syntax.Limit: _limit,
    syntax.Comparison: _comparison, syntax.Negation: _negation,
    syntax.Conjunction: _conjunction, syntax.Disjunction: _disjunction,
    syntax.ReadFile: _read, syntax.Comprehension: _comprehension, syntax.Basement: _basement,
}
