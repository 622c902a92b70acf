"""Picks the route: sums, products and conversions of scalars, polynomials and expansions.

Every function takes and gives kernel values: Scalar, LaurentPolynomial, Expansion. Sums and
products that stay inside one family stay expansions in it; what fits nowhere becomes a polynomial.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import NotAUnit, OutsideDomain, Pole
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Coefficients, Family, Index, linear
from spanwright.kernel.indices import is_partition, trimmed
from spanwright.kernel.laurent import LaurentPolynomial, total_polynomial
from spanwright.kernel.parameters import ParameterRing

Element = Scalar | LaurentPolynomial | Expansion

# Measured on products E_mu E_nu (`scripts/bench`): N monomials are re-expanded in about 25 N^2
# microseconds, and the closed rule takes 10 N 2^(n-1) for each step x_j.
STEPS_A_TERM = 2.5
# The monomials of E_mu E_nu are counted when there can be no more than these, else estimated.
COUNTED_MONOMIALS = 300
# In other families, one step of the closed rule against one of the triangular route.
CLOSED_RULE_COST = 0.35


def to_polynomial(value: Element, n: int) -> LaurentPolynomial:
    """The value as a Laurent polynomial in n variables (more when the value needs more)."""
    if isinstance(value, LaurentPolynomial):
        return value
    if isinstance(value, Scalar):
        return LaurentPolynomial.constant(n, value)
    return value.to_monomials()


def expand(value: Element, target: Family, n: int) -> Expansion:
    """The value in the basis of a family; raises OutsideDomain when outside its span."""
    if isinstance(value, Expansion):
        if value.family is target:
            return value
        direct = _converted(value, target)
        if direct is not None:
            return direct
    polynomial = to_polynomial(value, n)
    if target.name.startswith("E") and isinstance(value, LaurentPolynomial | Scalar):
        return _polynomial_in_E(polynomial, target)
    return Expansion(target, polynomial.n, target.from_monomials(polynomial))


def _converted(value: Expansion, target: Family) -> Expansion | None:
    """By direct rules, when there is one for every term."""
    rows: dict[Index, Coefficients] = {}
    for index in value.terms:
        row = target.convert_from(value.family, index, value.n)
        if row is None:
            return None
        rows[index] = row
    return _sized(target, value.n, linear(value.terms, rows.__getitem__))


def _sized(target: Family, n: int, terms: Coefficients) -> Expansion:
    """The expansion in as many variables as its elements need."""
    if target.grows:
        n = max([n, *(target.n_variables(index) for index in terms)])
    return Expansion(target, n, terms)


def _polynomial_in_E(polynomial: LaurentPolynomial, target: Family) -> Expansion:
    one = Expansion(target, polynomial.n, {(0,) * polynomial.n: Scalar.one(ParameterRing.get())})
    if polynomial.terms and _prefers_closed_rule(polynomial, one):
        return _by_closed_rule(polynomial, one)
    return Expansion(target, polynomial.n, target.from_monomials(polynomial))


def add(values: Sequence[Element], n: int) -> Element:
    """The sum of one value or more, in the most special form that holds them all."""
    if all(isinstance(v, Scalar) for v in values):
        return total([v for v in values if isinstance(v, Scalar)])
    families = {v.family.name: v.family for v in values if isinstance(v, Expansion)}
    if not families:
        return total_polynomial(to_polynomial(v, n) for v in values)
    common = _common_family(list(families.values()), values, n)
    if common is None:
        return total_polynomial(to_polynomial(v, n) for v in values)
    expansions = [expand(v, common, n) for v in values]
    collected: dict[Index, list[Scalar]] = {}
    for e in expansions:
        for index, c in e.terms.items():
            collected.setdefault(index, []).append(c)
    size = max(e.n for e in expansions)
    return Expansion(common, size, {i: total(cs) for i, cs in collected.items()})


def _common_family(
    families: Sequence[Family], values: Sequence[Element], n: int
) -> Family | None:
    """The one family in which all values lie, when the sum should stay there."""
    if len(families) > 1:
        # of two families, the one into which the other has a direct rule
        for candidate in families:
            if all(
                v.family is candidate or _converted(v, candidate) is not None
                for v in values if isinstance(v, Expansion)
            ):
                families = [candidate]
                break
        else:
            return None
    candidate = families[0]
    for v in values:
        if not isinstance(v, Expansion) and not (isinstance(v, Scalar) and v.is_zero):
            try:
                expand(v, candidate, n)
            except OutsideDomain:
                return None
    return candidate


def negate(value: Element) -> Element:
    """-value."""
    return -value


def multiply(a: Element, b: Element, n: int) -> Element:
    """The product, in the family of the expansion that takes part (the right one of two)."""
    if isinstance(a, Scalar):
        if isinstance(b, Scalar):
            return a * b
        return b.scaled(a)
    if isinstance(b, Scalar):
        return a.scaled(b)
    if isinstance(a, LaurentPolynomial) and isinstance(b, LaurentPolynomial):
        return a * b
    if isinstance(b, LaurentPolynomial):
        a, b = b, a
    if isinstance(a, Expansion):
        assert isinstance(b, Expansion)
        ruled = _by_element_rule(a, b)
        if ruled is not None:
            return ruled
        if len(b) < len(a) and a.family is b.family:
            a, b = b, a
        factor = a.to_monomials()
    else:
        factor = a
    assert isinstance(b, Expansion)
    return multiply_polynomial(factor, b)


def _by_element_rule(a: Expansion, b: Expansion) -> Expansion | None:
    """By closed rules for products of two basis elements, when they serve every pair."""
    for left, right in ((a, b), (b, a)):
        collected: dict[Index, list[Scalar]] = {}
        for i, c in left.terms.items():
            for j, d in right.terms.items():
                product = right.family.times_element(j, right.n, left.family, i)
                if product is None:
                    break
                for index, value in product.items():
                    collected.setdefault(index, []).append(value * c * d)
            else:
                continue
            break
        else:
            return _sized(
                right.family, max(left.n, right.n),
                {i: total(cs) for i, cs in collected.items()})
    return None


def multiply_polynomial(factor: LaurentPolynomial, b: Expansion) -> Element:
    """A polynomial times an expansion: by the closed rule, or multiplied out and re-expanded."""
    if not factor.terms or not b.terms:
        return Expansion(b.family, b.n, {})
    scalar = factor.as_scalar()
    if scalar is not None:
        return b.scaled(scalar)
    if factor.n < b.n:
        factor = extended_polynomial(factor, b.n)
    if _prefers_closed_rule(factor, b):
        return _by_closed_rule(factor, b)
    product = factor * extended_polynomial(b.to_monomials(), factor.n)
    try:
        return Expansion(b.family, product.n, b.family.from_monomials(product))
    except OutsideDomain:
        return product


def composed(f: LaurentPolynomial, images: dict[int, LaurentPolynomial]) -> LaurentPolynomial:
    """f with some x_j (j from 1) replaced by polynomials; negative powers need monomials."""
    powers: dict[tuple[int, int], LaurentPolynomial] = {}
    summands = []
    for exponents, c in f.items():
        budget.current().check()
        kept = tuple(0 if j in images else e for j, e in enumerate(exponents, 1))
        product = LaurentPolynomial.monomial(f.n, kept, c)
        for j, image in images.items():
            e = exponents[j - 1]
            if e:
                if (j, e) not in powers:
                    powers[j, e] = image**e
                product = product * powers[j, e]
        summands.append(product)
    return total_polynomial(summands) if summands else f


def extended_polynomial(f: LaurentPolynomial, n: int) -> LaurentPolynomial:
    """The same polynomial in n variables, n at least its own."""
    if f.n >= n:
        return f
    rest = (0,) * (n - f.n)
    return LaurentPolynomial(n, f.ring, {e + rest: c for e, c in f.terms.items()}, f.scale)


def _has_generator_rule(b: Expansion) -> bool:
    index = next(iter(b.terms))
    return b.family.times_generator(index, b.n, 1, 1) is not None


def _prefers_closed_rule(factor: LaurentPolynomial, b: Expansion) -> bool:
    """Compare estimated costs of the two routes."""
    is_macdonald = b.family.sign == "E"
    if not is_macdonald and any(e < 0 for exponents in factor.terms for e in exponents):
        return False
    if not _has_generator_rule(b):
        return False
    n = b.n
    prefixes = {
        exponents[: k + 1]
        for exponents in factor.terms for k in range(n)}
    n_steps = sum(abs(p[-1]) for p in prefixes)
    n_subsets: int = 2 ** (n - 1)
    degree = max(sum(map(abs, e)) for e in factor.terms)
    if len(factor) == 1 and degree == 1:
        return True
    top = max(sum(map(abs, i)) for i in b.terms) + degree
    size = _n_monomials(top, n)
    if is_macdonald:
        n_terms = size * 0.6
        if len(factor) > 2 and size <= COUNTED_MONOMIALS:
            n_terms = _n_product_terms(factor, b.to_monomials())
        return n_steps * n_subsets <= STEPS_A_TERM * n_terms
    middle: int = min(size, len(b) * 2 ** ((n - 1) * max(degree // 2, 1) // 2 + 1))
    closed = n_steps * middle * n_subsets * CLOSED_RULE_COST
    triangular: float = (size * 0.6) ** 2 / 2
    return closed <= triangular


def _n_product_terms(a: LaurentPolynomial, b: LaurentPolynomial) -> int:
    """How many exponents a product has, cancellation aside."""
    return len({tuple(map(int.__add__, e, f)) for e in a.terms for f in b.terms})


def _n_monomials(degree: int, n: int) -> int:
    count = 1
    for k in range(n - 1):
        count = count * (degree + k + 1) // (k + 1)
    return count


def _by_closed_rule(factor: LaurentPolynomial, b: Expansion) -> Expansion:
    """Apply x_1, ..., x_n one after another, monomials with a common beginning together."""
    rows = [(e, factor.coefficient(e)) for e in sorted(factor.terms)]
    return _apply_rows(rows, b, 0)


def _apply_rows(
    rows: list[tuple[Index, Scalar]], b: Expansion, position: int
) -> Expansion:
    """sum c x^e b over the rows, whose exponents before `position` are used up.

    Horner's scheme in x_(position+1), upwards for positive powers and downwards for negative.
    """
    n = len(rows[0][0])
    if position == n:
        return b.scaled(total([c for _, c in rows]))
    by_power: dict[int, list[tuple[Index, Scalar]]] = {}
    for e, c in rows:
        by_power.setdefault(e[position], []).append((e, c))
    summands: list[Expansion] = []
    for sign in (1, -1):
        current: Expansion | None = None
        powers = sorted((p for p in by_power if p * sign >= (sign < 0)), reverse=sign > 0)
        for place, power in enumerate(powers):
            part = _apply_rows(by_power[power], b, position + 1)
            current = part if current is None else _plus(current, part)
            following = powers[place + 1] if place + 1 < len(powers) else 0
            for _ in range(abs(power - following)):
                current = apply_generator(current, position + 1, sign)
        if current is not None:
            summands.append(current)
    result = summands[0]
    for s in summands[1:]:
        result = _plus(result, s)
    return result


def _plus(a: Expansion, b: Expansion) -> Expansion:
    collected: dict[Index, list[Scalar]] = {i: [c] for i, c in a.terms.items()}
    for i, c in b.terms.items():
        collected.setdefault(i, []).append(c)
    return Expansion(a.family, max(a.n, b.n), {i: total(cs) for i, cs in collected.items()})


def apply_generator(b: Expansion, j: int, power: int) -> Expansion:
    """x_j^power times an expansion by the closed rule of its family, power 1 or -1."""

    def rule(index: Index) -> Coefficients:
        found = b.family.times_generator(index, b.n, j, power)
        if found is None:
            raise NotAUnit(f"no closed rule for x_{j}^{power} in the family {b.family.name}")
        return found

    terms = linear(b.terms, rule)
    budget.current().check_terms(len(terms), "this product")
    return _sized(b.family, b.n, terms)


def power(value: Element, exponent: int, n: int) -> Element:
    """An integer power; a negative one needs a unit."""
    if isinstance(value, Scalar):
        return value**exponent
    if isinstance(value, LaurentPolynomial):
        return value**exponent
    if exponent < 0:
        return to_polynomial(value, n) ** exponent
    if exponent == 0:
        return LaurentPolynomial.constant(n, Scalar.one(ParameterRing.get()))
    result: Element = value
    for _ in range(exponent - 1):
        result = multiply(value, result, n)
    return result


def difference(a: Element, b: Element, n: int) -> Element:
    """a - b, zero exactly when they are equal."""
    return add([a, negate(b)], n)


def is_zero(value: Element) -> bool:
    """Whether the value is 0."""
    return value.is_zero


def substitute(value: Element, images: dict[str, Scalar]) -> Element:
    """Parameters replaced by scalars; an expansion whose coefficients have poles becomes a
    polynomial, where the poles may cancel; raises Pole when they do not.

    E-elements change with q and t, so an expansion in E whose parameters are specialised is
    a polynomial unless the caller keeps the basis symbolic; here it goes to monomials.
    """
    if isinstance(value, Scalar):
        return value.substitute(images)
    if isinstance(value, LaurentPolynomial):
        return value.substitute_parameters(images)
    if not depends_on_parameters(value.family, images):
        return value.map_coefficients(lambda c: c.substitute(images))
    return value.to_monomials().substitute_parameters(images)


_FAMILY_PARAMETERS = {
    "E": {"q", "t"}, "E (reversed)": {"q", "t"}, "P": {"q", "t"}, "J": {"q", "t"},
    "G": {"beta"}}


def rewritten_element(target: Family, index: Index, n: int) -> Expansion | None:
    """A symmetric element whose index is not canonical for n: 0, or rewritten; None else.

    s and m with more parts than variables and e_k with k > n vanish, h_k and p_k are sums.
    """
    rewrite = getattr(target, "canonical", None)
    if rewrite is None or not is_partition(index):
        return None
    try:
        target.check_index(index, n)
    except OutsideDomain as error:
        if error.code not in ("too-many-parts", "too-large-part"):
            return None
        return Expansion(target, n, rewrite(trimmed(index), n))
    return None


def place_of_pole(
    value: Element, images: dict[str, Scalar], n: int
) -> tuple[str, int] | None:
    """The first coefficient with a pole, as `E_(0,2)` or `x_1 x_2`, and the order of the pole."""
    if isinstance(value, Expansion) and depends_on_parameters(value.family, images):
        value = value.to_monomials()
    if isinstance(value, Scalar):
        return None
    items: Any = value.items()
    for index, c in items:
        try:
            c.substitute(images)
        except Pole as pole:
            shown = ",".join(map(str, index))
            name = value.family.name if isinstance(value, Expansion) else None
            return (f"{name}_({shown})" if name else f"x^({shown})", pole.order)
    return None


def depends_on_parameters(target: Family, images: dict[str, Scalar]) -> bool:
    """Whether the elements of a family contain one of the parameters."""
    if target.name == "double Schubert":
        return any(name.startswith("y_") for name in images)
    return bool(_FAMILY_PARAMETERS.get(target.name, set()) & set(images))
