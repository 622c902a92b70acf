"""Proposes a closed form for scalars that depend on one integer k, from a few of their values.

The form is c r^k times a Laurent monomial whose exponents are at most quadratic in k, times
binomials 1 - q^(a k + b) t^(c k + d) to integer powers. Every value is a product of irreducible
factors; those that are cyclotomic are read as binomials at one point v of the lattice of
exponents each, and a binomial of the form is a line through such points, one for each k.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from spanwright.context import Context, Failure, failure
from spanwright.evaluator import Evaluator
from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import KernelError
from spanwright.kernel.factors import Factor, factorise
from spanwright.kernel.parameters import ParameterRing
from spanwright.rendering.text import text
from spanwright.transport import names_in
from spanwright.values import Text, as_scalar, kind_name
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse_expression
from spanwright_grammar.printing import print_tree

Vector = tuple[int, ...]
Content = dict[Vector, int]
"""Binomials 1 - m by the exponents of m, with multiplicities."""

FEWEST = 5
"""A form has many unknowns; with fewer values anything fits."""
LARGEST_N_STEPS = 20_000
"""The search for lines gives up after so many."""
LARGEST_N_LINES = 40


@dataclass(frozen=True, slots=True)
class Line:
    """The binomial 1 - x^(slope k + offset), to a power."""

    slope: Vector
    offset: Vector
    power: int

    def at(self, k: int) -> Vector:
        """The exponents for one k."""
        return tuple(s * k + o for s, o in zip(self.slope, self.offset, strict=True))


@dataclass(frozen=True, slots=True)
class Form:
    """base * ratio^k * monomial * binomials; exponents are (quadratic, linear, constant) in k."""

    ring: ParameterRing
    base: Fraction
    ratio: Fraction
    exponents: tuple[tuple[Fraction, Fraction, Fraction], ...]
    lines: tuple[Line, ...]

    def text(self, k: str) -> str:
        """The form in the language, k by the name given."""
        # the ring's slots hold the names backwards; q is written first
        n = len(self.ring.names)
        slots = [(name, n - 1 - place) for place, name in enumerate(self.ring.names)]
        top: list[str] = []
        bottom: list[str] = []
        if self.base != 1 or (self.ratio == 1 and not self.lines and not any(
                any(e) for e in self.exponents)):
            top.append(_number(self.base))
        if self.ratio != 1:
            top.append(f"({_number(self.ratio).strip('()')})^{k}")
        for name, slot in slots:
            if any(self.exponents[slot]):
                top.append(_tidied(f"{name}^({_polynomial(self.exponents[slot], k)})"))
        for line in self.lines:
            parts = []
            for name, slot in slots:
                linear = Fraction(0), Fraction(line.slope[slot]), Fraction(line.offset[slot])
                if any(linear):
                    parts.append(f"{name}^({_polynomial(linear, k)})")
            power = "" if abs(line.power) == 1 else f"^{abs(line.power)}"
            binomial = f"(1 - {' '.join(_tidied(p) for p in parts)}){power}"
            (top if line.power > 0 else bottom).append(binomial)
        over = " ".join(top) or "1"
        if not bottom:
            return over
        return f"{over}/{bottom[0]}" if len(bottom) == 1 else f"{over}/({' '.join(bottom)})"


def _number(value: Fraction) -> str:
    shown = text(value if value.denominator > 1 else int(value))
    return f"({shown})" if value < 0 or value.denominator > 1 else shown


def _tidied(power: str) -> str:
    """q^(1) is q, q^(k) is q^k."""
    base, _, exponent = power[:-1].partition("^(")
    if exponent == "1":
        return base
    return f"{base}^{exponent}" if exponent.isalnum() else power


def _polynomial(e: tuple[Fraction, Fraction, Fraction], k: str) -> str:
    """An integer-valued polynomial in k, over one denominator."""
    denominator = max(c.denominator for c in e)
    parts: list[str] = []
    for c, monomial in zip(e, (f"{k}^2", k, ""), strict=True):
        whole = int(c * denominator)
        if not whole:
            continue
        size = abs(whole)
        body = monomial if size == 1 and monomial else f"{size} {monomial}".strip()
        sign = "-" if whole < 0 else "+"
        parts.append(f"{sign} {body}" if parts else f"-{body}" if whole < 0 else body)
    shown = " ".join(parts) or "0"
    return shown if denominator == 1 else f"({shown})/{denominator}"


class NoForm(Exception):
    """There is no such form, for a reason that is told to the reader."""


# values to contents


def content_of(value: Scalar) -> Content:
    """The binomials of a scalar; raises NoForm for a factor that is none."""
    factors: dict[Factor, int] = dict(value.factors)
    if not value.numerator_rest.is_one():
        _, _, more = factorise(value.ring, value.numerator_rest)
        for factor, e in more.items():
            factors[factor] = factors.get(factor, 0) + e
    by_direction: dict[Vector, dict[int, int]] = {}
    for factor, e in factors.items():
        if not factor.order:
            raise NoForm(f"has the factor {text(_as_scalar(value.ring, factor))}, "
                         "which is no product of binomials")
        by_direction.setdefault(factor.direction, {})[factor.order] = e
    found: Content = {}
    for direction, orders in by_direction.items():
        # Phi_d(m) is the product of (1 - m^g)^(mu(d/g)): from the largest order downwards
        left = dict(orders)
        while left:
            order = max(left)
            e = left.pop(order)
            if not e:
                continue
            found[tuple(order * d for d in direction)] = e
            for divisor in range(1, order):
                if order % divisor == 0:
                    left[divisor] = left.get(divisor, 0) - e
    return found


def _as_scalar(ring: ParameterRing, factor: Factor) -> Scalar:
    return Scalar.of_polynomial(ring, factor.polynomial)


# lines


def lines_through(contents: dict[int, Content]) -> list[Line]:
    """Lines whose points are exactly the contents, for every k; raises NoForm."""
    n_steps = 0

    def search(left: dict[int, Content], found: list[Line]) -> list[Line] | None:
        nonlocal n_steps
        if not any(left.values()):
            return found
        if len(found) >= LARGEST_N_LINES:
            return None
        for line in _candidates(left):
            n_steps += 1
            if n_steps > LARGEST_N_STEPS:
                return None
            budget.current().check()
            complete = search(_without(left, line), [*found, line])
            if complete is not None:
                return complete
        return None

    result = search(contents, [])
    if result is None:
        raise NoForm("")
    return _gathered(result)


def _candidates(left: dict[int, Content]) -> Iterator[Line]:
    """Lines through one point that must be met, those that meet most points first."""
    ks = sorted(left)
    size = len(ks)
    # the most telling k: few points, and every one of them must lie on a line
    k = min((k for k in ks if left[k]), key=lambda k: (len(left[k]), -k))
    v = max(left[k], key=lambda v: (sum(map(abs, v)), v))
    sign = 1 if left[k][v] > 0 else -1
    scored: dict[tuple[Vector, Vector], int] = {}
    for other in ks:
        if other == k:
            continue
        for w, e in left[other].items():
            if e * sign < 0:
                continue
            for image in (w, tuple(-p for p in w)):
                steps = [divmod(b - a, other - k) for a, b in zip(v, image, strict=True)]
                if any(rest for _, rest in steps):
                    continue
                slope = tuple(s for s, _ in steps)
                offset = tuple(a - s * k for a, s in zip(v, slope, strict=True))
                scored.setdefault((slope, offset), 0)
    for slope, offset in scored:
        line = Line(slope, offset, sign)
        scored[slope, offset] = sum(
            1 for other in ks if left[other].get(_normal(line.at(other)), 0) * sign > 0)
    constant = (tuple(0 for _ in v), v)
    scored.setdefault(constant, sum(1 for other in ks if left[other].get(v, 0) * sign > 0))
    ranked = sorted(scored, key=lambda line: (
        -scored[line], sum(map(abs, line[0])) + sum(map(abs, line[1])), line))
    for slope, offset in ranked:
        # a line that misses more than one k in three would have to be cancelled too often
        if scored[slope, offset] * 3 >= size * 2 or scored[slope, offset] >= size - 1:
            line = Line(slope, offset, sign)
            if all(any(line.at(other)) for other in ks):
                yield line


def _normal(v: Vector) -> Vector:
    """1 - m and 1 - 1/m differ by a unit: the exponents with the sign that factors have."""
    last = next((e for e in reversed(v) if e), 0)
    return tuple(-e for e in v) if last < 0 else v


def _without(left: dict[int, Content], line: Line) -> dict[int, Content]:
    found = {}
    for k, content in left.items():
        rest = dict(content)
        v = _normal(line.at(k))
        e = rest.pop(v, 0) - line.power
        if e:
            rest[v] = e
        found[k] = rest
    return found


def _gathered(lines: list[Line]) -> list[Line]:
    powers: dict[tuple[Vector, Vector], int] = {}
    for line in lines:
        key = (line.slope, line.offset)
        powers[key] = powers.get(key, 0) + line.power
    return [Line(*key, power) for key, power in sorted(powers.items(), reverse=True) if power]


# the form


def form_through(values: dict[int, Scalar]) -> Form:
    """A form that takes these values; raises NoForm."""
    ring = ParameterRing.get()
    for value in values.values():
        ring = ring.union(value.ring)
    contents = {}
    for k, value in values.items():
        try:
            contents[k] = content_of(value.lift(ring))
        except NoForm as error:
            raise NoForm(f"the value at {k} {error}") from error
    lines = lines_through(contents)
    rests: dict[int, Scalar] = {}
    for k, value in values.items():
        for line in lines:
            value = value * Scalar.one_minus(ring, line.at(k)) ** -line.power
        rests[k] = value.lift(ring)
    ks = sorted(rests)
    exponents = []
    for slot in range(len(ring.names)):
        exponents.append(_quadratic({k: rests[k].monomial[slot] for k in ks}))
    numbers = {k: Fraction(int(rests[k].content.p), int(rests[k].content.q)) for k in ks}
    first, second = ks[0], ks[1]
    ratio = numbers[second] / numbers[first]
    if second != first + 1:
        ratio = Fraction(1)
    base = numbers[first] / ratio**first
    if any(base * ratio**k != number for k, number in numbers.items()):
        raise NoForm("the numerical factors are no geometric progression")
    return Form(ring, base, ratio, tuple(exponents), tuple(lines))


def _quadratic(values: dict[int, int]) -> tuple[Fraction, Fraction, Fraction]:
    """The polynomial of degree at most 2 with these values."""
    a, b, c = sorted(values)[:3]
    first = Fraction(values[b] - values[a], b - a)
    second = Fraction(values[c] - values[b], c - b)
    quadratic = (second - first) / (c - a)
    linear = first - quadratic * (a + b)
    constant = values[a] - linear * a - quadratic * a * a
    if any(quadratic * k * k + linear * k + constant != v for k, v in values.items()):
        raise NoForm("the exponents of the monomials grow faster than quadratically")
    return quadratic, linear, constant


# the sentence


def run_guess(node: syntax.Guess, context: Context) -> Text:
    """`guess c(k) for k in 1..8`: a `let` that has been verified on values held back, or none."""
    if len(node.bindings) != 1:
        raise failure("wrong-kind", node.place, "a guess runs over one index",
                      "guess c(k) for k in 1..8")
    name = node.bindings[0].name
    values = _values(node, context)
    ks = sorted(values)
    zeros = [k for k in ks if values[k].is_zero]
    shown = print_tree(node.expression)
    if len(zeros) == len(ks):
        return Text(f"let {_new_name(node, context)}({name}) = 0")
    if zeros:
        return Text(f"# none found: {shown} is 0 at {name} = {zeros[0]}")
    n_held = max(2, len(ks) // 3)
    known, held = ks[:-n_held], ks[-n_held:]
    try:
        form = form_through({k: values[k] for k in known})
    except NoForm as error:
        why = f": {error}" if str(error) else ""
        return Text(f"# none found: {shown} is no product of monomials and binomials{why}")
    body = form.text(name)
    wrong = _first_difference(body, name, values, context)
    if wrong is not None:
        return Text(
            f"# none found: {body} fits {name} = {_listed(known)}, but not {name} = {wrong}")
    return Text("\n".join((
        f"let {_new_name(node, context)}({name}) = {body}",
        f"# found from {name} = {_listed(known)}, verified at {name} = {_listed(held)}")))


def _listed(ks: Sequence[int]) -> str:
    return ", ".join(map(str, ks))


def _values(node: syntax.Guess, context: Context) -> dict[int, Scalar]:
    evaluator = Evaluator(context)
    name = node.bindings[0].name
    values: dict[int, Scalar] = {}
    for bound in evaluator.bound(node.bindings, None):
        k = bound[name]
        if not isinstance(k, int):
            raise failure("wrong-kind", node.bindings[0].place,
                          f"a guess runs over integers; this is {kind_name(k)}", "k in 1..8")
        value = evaluator.value(node.expression)
        scalar = as_scalar(value)
        if scalar is None:
            raise failure("wrong-kind", node.expression.place,
                          f"a guess is about scalars; this is {kind_name(value)}",
                          "guess [E_(k,0)] f for k in 1..8")
        values[k] = evaluator.algebra.specialised_coefficients(scalar)
    if len(values) < FEWEST:
        raise failure("wrong-kind", node.place,
                      f"a guess needs {FEWEST} values, here are {len(values)}",
                      f"guess {print_tree(node.expression)} for {name} in 1..8")
    if any(value.ring.has_root for value in values.values()):
        raise failure("wrong-kind", node.place, "values with t^(1/2) are not guessed at")
    return values


def _first_difference(
    body: str, name: str, values: dict[int, Scalar], context: Context
) -> int | None:
    """The first k at which the form as printed has another value."""
    tree = parse_expression(body)
    for k, value in values.items():
        evaluator = Evaluator(context.with_name(name, k))
        try:
            found = as_scalar(evaluator.value(tree))
        except (Failure, KernelError):
            return k
        if found is None or found != value:
            return k
    return None


def _new_name(node: syntax.Guess, context: Context) -> str:
    """A name that is not in use."""
    expression = node.expression
    stem = expression.function if isinstance(expression, syntax.Call) else "closed"
    taken = {*context.names, *names_in(node)}
    number = 1
    while f"{stem}{number}" in taken:
        number += 1
    return f"{stem}{number}"
