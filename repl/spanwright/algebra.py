"""The operations of the language on values: sums, products, powers, equality, specialisation.

`ExactAlgebra` computes over Q(q, t, ...). The evaluator knows values only through it, so that
the same tree can be evaluated over a finite field for a first, cheap answer.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import Any, Protocol

from spanwright.kernel import budget, indices, reduction
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import (
    DivisionByZero,
    Mixed,
    NotAUnit,
    OutsideDomain,
    OverBudget,
    Pole,
    Unable,
)
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.base import Family
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing
from spanwright.rendering.scalars import scalar_text
from spanwright.settings import Settings
from spanwright.values import (
    IndexSet,
    ListValue,
    Truth,
    as_scalar,
    is_element,
    is_index,
    is_number,
    is_operator,
    kind_name,
    simplest_number,
)

LARGEST_BITS = 4_000_000
"""Integers of more bits are refused before they are computed."""


class Unsupported(Exception):
    """The operation has no counterpart in this algebra: decide exactly instead."""


class Surroundings(Protocol):
    """What an algebra reads of the session."""

    @property
    def settings(self) -> Settings: ...

    @property
    def ring(self) -> ParameterRing: ...


class ExactAlgebra:
    """Exact arithmetic of values."""

    def __init__(self, context: Surroundings) -> None:
        self._settings = context.settings
        self._ring = context.ring

    # constants and elements

    def _contained_in(self, whole: IndexSet) -> Callable[[Any], bool]:
        def is_contained(member: Any) -> bool:
            self.check_budget()
            return whole.contains(member)

        return is_contained

    def check_budget(self) -> None:
        """Raise OverBudget when the sentence must stop."""
        budget.current().check()

    def parameter(self, name: str) -> Scalar:
        """A parameter."""
        return Scalar.parameter(self._ring.extended([name]), name)

    def root_of_t(self) -> Scalar:
        """t^(1/2)."""
        return Scalar.root_of_t()

    def generator(self, n: int, j: int) -> LaurentPolynomial:
        """x_j."""
        return LaurentPolynomial.generator(n, ParameterRing.get(), j)

    def monomial(self, n: int, exponents: tuple[int, ...]) -> LaurentPolynomial:
        """x^exponents."""
        return LaurentPolynomial.monomial(n, exponents, Scalar.one(ParameterRing.get()))

    def element(self, target: Family, index: tuple[int, ...], n: int) -> Expansion:
        """A basis element; raises OutsideDomain for a wrong index."""
        target = self.family(target.name)
        canonical = target.check_index(index, n)
        size = max(n, target.n_variables(canonical)) if target.grows else n
        return Expansion(target, size, {canonical: Scalar.one(ParameterRing.get())})

    def family(self, name: str) -> Family:
        """The family that a symbol means in the convention in force."""
        if name == "E" and self._settings.convention == "reversed":
            from spanwright.kernel.families.reversed_macdonald import FAMILIES

            return FAMILIES["E (reversed)"]
        if name == "double Schubert":
            from spanwright.kernel.families.double_schubert import FAMILIES as DOUBLE

            return DOUBLE[name]
        return family(name)

    def held(self, value: Expansion) -> Any:
        """An exact value as one of this algebra."""
        return value

    def reduced(self, value: Any) -> Any:
        """The canonical form of a result: operator words are straightened where an algebra can."""
        if is_operator(value):
            from spanwright.kernel.operators.canonical import straighten

            word = _as_word(value)
            # tau_i acts, but has a denominator in Y: no algebra here holds it
            return value if "tau" in word.kinds() else straighten(word)
        return value

    def double_schubert(self, w: tuple[int, ...], n: int) -> Expansion:
        """S_w(x;y)."""
        return self.element(self.family("double Schubert"), w, n)

    def with_basement(
        self, mu: tuple[int, ...], w: tuple[int, ...], n: int
    ) -> Any:
        """E_(mu|w)."""
        from spanwright.kernel.families.basements import with_basement

        if self._settings.convention != "standard":
            raise Unable("permuted basements are those of the standard convention",
                         hints=("fix convention = standard",))
        return with_basement(mu, w)

    def operator(self, kind: str, subscript: int | tuple[int, ...] | None, n: int) -> Any:
        """An operator letter."""
        from spanwright.kernel.operators.words import Operator

        return Operator.letter(n, kind, subscript, self._settings.hecke)

    # arithmetic

    def negate(self, value: Any) -> Any:
        """-value."""
        if is_number(value):
            return -value
        if is_index(value):
            return tuple(-part for part in value)
        if is_element(value) or is_operator(value):
            return -value
        raise Mixed(f"{kind_name(value)} has no negative")

    def add(self, values: Sequence[Any]) -> Any:
        """The sum of two values or more."""
        if all(is_number(v) for v in values):
            return simplest_number(sum((Fraction(v) for v in values), Fraction(0)))
        if any(is_operator(v) for v in values):
            return self._operator_sum(values)
        if any(isinstance(v, tuple) for v in values):
            return _index_sum(values)
        return reduction.add([self.aligned(self._element(v)) for v in values], self._n())

    def multiply(self, a: Any, b: Any) -> Any:
        """The product; an operator on the left acts."""
        if is_number(a) and is_number(b):
            self._check_bits(_bits(a) + _bits(b))
            return simplest_number(Fraction(a) * b)
        if is_operator(a):
            return self._act(a, b)
        if is_operator(b):
            scalar = as_scalar(a)
            if scalar is not None:
                return _scaled_operator(b, scalar)
            if isinstance(a, LaurentPolynomial | Expansion):
                return self._as_multiplier(a, b)
            if is_index(a) and indices.is_permutation(a) and len(a) <= b.n:
                return self.operator("s", indices.extended(a, b.n), b.n) * _as_word(b)
            raise Mixed(f"{kind_name(a)} does not multiply an operator")
        if isinstance(a, tuple) or isinstance(b, tuple):
            return self._index_product(a, b)
        left, right = self._element(a), self._element(b)
        return reduction.multiply(self.aligned(left), self.aligned(right), self._n())

    def inverse(self, value: Any) -> Any:
        """1/value, for a scalar or a monomial."""
        if is_number(value):
            if value == 0:
                raise DivisionByZero("division by zero")
            return simplest_number(1 / Fraction(value))
        if isinstance(value, Scalar | LaurentPolynomial):
            return value.inverse()
        if isinstance(value, Expansion):
            polynomial = value.to_monomials()
            try:
                return polynomial.inverse()
            except NotAUnit:
                raise NotAUnit(
                    "a sum of basis elements has no inverse here: divide by a scalar") from None
        if is_operator(value):
            from spanwright.kernel.operators.canonical import inverse

            return inverse(_as_word(value))
        raise Mixed(f"{kind_name(value)} has no inverse")

    def power(self, base: Any, exponent: int) -> Any:
        """An integer power."""
        if is_number(base):
            if base == 0 and exponent < 0:
                raise DivisionByZero("division by zero")
            if base not in (0, 1, -1):
                self._check_bits(_bits(base) * abs(exponent))
                return simplest_number(Fraction(base) ** exponent)
            return base if exponent % 2 or (base == 0 and exponent) else 1
        if is_operator(base):
            if abs(exponent) > 100_000:
                raise OverBudget("this power of an operator is too large", code="too-large")
            from spanwright.kernel.operators.canonical import power

            return power(_as_word(base), exponent)
        if is_index(base):
            if not indices.is_permutation(base):
                raise Mixed("an index has no powers; a permutation has")
            w = base if exponent >= 0 else indices.inverse(base)
            result = indices.identity(len(base))
            for _ in range(abs(exponent) % _order(w)):
                result = indices.product(result, w)
            return result
        return reduction.power(self.aligned(self._element(base)), exponent, self._n())

    def equal(self, a: Any, b: Any) -> Truth:
        """Whether two values are equal; when they are not, their difference."""
        if isinstance(a, Truth) and isinstance(b, Truth):
            return Truth(a.holds == b.holds)
        if is_index(a) or is_index(b):
            return Truth(is_index(a) and is_index(b) and a == b)
        if isinstance(a, ListValue) and isinstance(b, ListValue):
            return Truth(len(a.items) == len(b.items) and all(
                self.equal(u, v).holds for u, v in zip(a.items, b.items, strict=True)))
        if isinstance(a, IndexSet) and isinstance(b, IndexSet):
            return Truth(a.size() == b.size() and all(map(self._contained_in(b), a)))
        if isinstance(a, str) and isinstance(b, str):
            return Truth(a == b)
        if is_operator(a) or is_operator(b):
            return self._equal_operators(a, b)
        if is_number(a) and is_number(b):
            return Truth(a == b, None if a == b else simplest_number(Fraction(a) - b))
        if not (is_element(a) and is_element(b)):
            raise Mixed(f"{kind_name(a)} and {kind_name(b)} cannot be compared")
        difference = reduction.difference(
            self.aligned(self._element(a)), self.aligned(self._element(b)), self._n())
        difference = self.specialised_coefficients(difference)
        if reduction.is_zero(difference):
            return Truth(True)
        return Truth(False, difference)

    # parts

    def coefficient(self, target: Family, index: tuple[int, ...], value: Any) -> Scalar:
        """The coefficient of a basis element in a value."""
        expansion = reduction.expand(
            self.aligned(self._element(value)), self.family(target.name), self._n())
        return expansion.coefficient(index)

    def monomial_coefficient(self, element: Any, value: Any) -> Any:
        """The coefficient of a monomial in x, or of a basis element held as a value."""
        if isinstance(element, Expansion):
            if len(element) != 1:
                raise OutsideDomain("one basis element stands between the brackets")
            (index, c), = element.terms.items()
            return self.coefficient(element.family, index, value) * c.inverse()
        if is_number(element) and element == 1:
            element = self.monomial(self._n(), (0,) * self._n())
        if not isinstance(element, LaurentPolynomial) or len(element) != 1:
            raise OutsideDomain("a basis element or a monomial stands between the brackets")
        (exponents,) = element.terms
        scale = element.coefficient(exponents)
        polynomial = reduction.to_polynomial(self.aligned(self._element(value)), self._n())
        return polynomial.coefficient(exponents) * scale.inverse()

    # specialisation

    def specialise(
        self, value: Any, parameters: dict[str, Any], variables: dict[int, Any]
    ) -> Any:
        """Parameters, then variables, replaced by scalars."""
        if isinstance(value, ListValue):
            return ListValue(tuple(
                self.specialise(v, parameters, variables) for v in value.items))
        if is_number(value):
            return value
        if is_operator(value):
            if variables:
                raise Mixed("variables of an operator cannot be given values")
            images = self._scalars(parameters)
            return value.map_coefficients(lambda c: c.substitute(images))
        element = self._element(value)
        if parameters:
            element = self._substituted(element, self._scalars(parameters))
        if variables:
            return self._evaluated(reduction.to_polynomial(element, self._n()), variables)
        return element

    def _evaluated(self, polynomial: LaurentPolynomial, variables: dict[int, Any]) -> Any:
        """Variables replaced: by scalars, or by polynomials, all at once."""
        present = {j: v for j, v in variables.items() if j <= polynomial.n}
        scalars = {j: as_scalar(v) for j, v in present.items()}
        if all(c is not None for c in scalars.values()):
            evaluated = polynomial.evaluate({j: c for j, c in scalars.items() if c is not None})
            value = evaluated.as_scalar() if len(present) == polynomial.n else None
            return evaluated if value is None else value
        images = {
            j: reduction.to_polynomial(self.aligned(self._element(v)), polynomial.n)
            for j, v in present.items()}
        return reduction.composed(polynomial, images)

    def _substituted(self, element: Any, images: dict[str, Scalar]) -> Any:
        """Parameters replaced; a pole is named by its coefficient."""
        try:
            return reduction.substitute(element, images)
        except Pole as pole:
            where = reduction.place_of_pole(element, images, self._n())
            if where is None:
                raise
            at = ", ".join(f"{name} = {scalar_text(c)}" for name, c in images.items())
            raise Pole(f"at {at} in the coefficient of {where[0]}", order=where[1]) from pole

    def limit(self, value: Any, name: str, target: Any) -> Any:
        """The limit of a value as a parameter goes to a scalar or to infinity."""
        from spanwright.values import Infinity

        if isinstance(target, Infinity):
            helper = Scalar.parameter(self._ring.extended([name]), name).inverse()
            turned = self.specialise(value, {name: helper}, {})
            return self.specialise(turned, {name: 0}, {})
        return self.specialise(value, {name: target}, {})

    def specialised_coefficients(self, value: Any) -> Any:
        """Coefficients with `fix q = …` and `fix t = …` applied; basis elements keep their name."""
        images = self._settings.images()
        if not images:
            return value
        if isinstance(value, Scalar):
            return value.substitute(images)
        if isinstance(value, LaurentPolynomial):
            return value.substitute_parameters(images)
        if isinstance(value, Expansion) or is_operator(value):
            return value.map_coefficients(lambda c: c.substitute(images))
        if isinstance(value, ListValue):
            return ListValue(tuple(self.specialised_coefficients(v) for v in value.items))
        return value

    # helpers

    def _n(self) -> int:
        return self._settings.n or 1

    def _element(self, value: Any) -> Scalar | LaurentPolynomial | Expansion:
        if isinstance(value, LaurentPolynomial | Expansion):
            return value
        scalar = as_scalar(value)
        if scalar is None:
            raise Mixed(f"{kind_name(value)} is no element of the ring")
        return scalar

    def aligned(
        self, value: Scalar | LaurentPolynomial | Expansion
    ) -> Scalar | LaurentPolynomial | Expansion:
        """A value of the ring in force; older ones with fewer variables are carried over."""
        n = self._n()
        if isinstance(value, Scalar) or value.n == n:
            return value
        if isinstance(value, LaurentPolynomial) and value.n < n:
            return reduction.extended_polynomial(value, n)
        if isinstance(value, Expansion) and value.family.grows:
            return value
        if isinstance(value, LaurentPolynomial):
            return value
        raise Mixed(
            f"this sum of {value.family.name}-elements was found for n = {value.n}, the ring now "
            f"has n = {n}", hints=(f"fix n = {value.n}",))

    def _scalar(self, value: Any) -> Scalar:
        scalar = as_scalar(value)
        if scalar is None and isinstance(value, LaurentPolynomial):
            scalar = value.as_scalar()
        if scalar is None:
            raise Mixed(f"a scalar is needed here; this is {kind_name(value)}")
        return scalar

    def _scalars(self, values: dict[str, Any]) -> dict[str, Scalar]:
        return {name: self._scalar(v) for name, v in values.items()}

    def _check_bits(self, bits: int) -> None:
        if bits > LARGEST_BITS:
            raise OverBudget(
                f"this number would have about {bits * 30103 // 100000:,} digits",
                code="too-large")

    # operators

    def _operator_sum(self, values: Sequence[Any]) -> Any:
        n = next(v.n for v in values if is_operator(v))
        result: Any = None
        for v in values:
            lifted = _as_word(v if is_operator(v) else self._as_operator(v, n))
            result = lifted if result is None else result + lifted
        return result

    def _as_operator(self, value: Any, n: int) -> Any:
        from spanwright.kernel.operators.words import Operator

        scalar = as_scalar(value)
        if scalar is None:
            raise Mixed(
                f"an operator and {kind_name(value)} do not add: X_j is multiplication by x_j",
                hints=("X_1",))
        return Operator.scalar(n, scalar, self._settings.hecke)

    def _as_multiplier(self, value: LaurentPolynomial | Expansion, operator: Any) -> Any:
        reflection = _single_reflection(operator)
        if reflection is not None:
            raise Mixed(
                f"s_{reflection} is the reflection and has nothing to act on here; the Schur "
                f"polynomial is s_({reflection})", hints=(f"s_({reflection})",))
        raise Mixed(
            "an operator at the end of a product has nothing to act on; as an operator, "
            "multiplication by x_j is X_j", hints=("X_1 T_1",))

    def _act(self, operator: Any, value: Any) -> Any:
        """An operator times what stands to its right."""
        if is_operator(value):
            return _as_word(operator) * _as_word(value)
        if isinstance(value, tuple):
            return self._operator_on_index(operator, value)
        scalar = as_scalar(value)
        if scalar is not None:
            return _scaled_operator(operator, scalar)
        if isinstance(value, LaurentPolynomial | Expansion):
            from spanwright.kernel.operators.actions import act

            aligned = self.aligned(value)
            assert not isinstance(aligned, Scalar)
            return act(_as_word(operator), aligned)
        raise Mixed(f"an operator does not act on {kind_name(value)}")

    def _operator_on_index(self, operator: Any, index: tuple[int, ...]) -> tuple[int, ...]:
        """s_i mu, and products of reflections."""
        operator = _as_word(operator)
        if operator.kinds() <= {"s"} and len(operator.terms) == 1:
            ((word, c),) = operator.terms.items()
            if c == 1 and operator.n == len(index):
                for letter in reversed(word):
                    index = indices.act(letter.subscript, index)
                return index
        raise Mixed("of all operators only the reflections s_i, and permutations, act on indices",
                    hints=("s_1 mu",))

    def _equal_operators(self, a: Any, b: Any) -> Truth:
        from spanwright.kernel.operators.canonical import is_same_operator, straighten

        n = a.n if is_operator(a) else b.n
        left = _as_word(a if is_operator(a) else self._as_operator(a, n))
        right = _as_word(b if is_operator(b) else self._as_operator(b, n))
        if is_same_operator(left, right):
            return Truth(True)
        try:
            difference = self.specialised_coefficients(straighten(left - right))
        except Mixed:
            return Truth(False, left - right)
        return Truth(True) if difference.is_zero else Truth(False, difference)

    # indices

    def _index_product(self, a: Any, b: Any) -> Any:
        if is_number(a) and is_index(b):
            a, b = b, a
        if is_index(a) and is_number(b) and isinstance(b, int):
            return tuple(part * b for part in a)
        if is_index(a) and is_index(b):
            if not indices.is_permutation(a) or len(a) > len(b):
                raise Mixed("in a product of two indices the left one is a permutation")
            return indices.act(indices.extended(a, len(b)), b)
        if is_index(a) and isinstance(b, LaurentPolynomial | Expansion):
            if not indices.is_permutation(a) or len(a) > self._n():
                raise Mixed("a permutation of the variables stands before a polynomial")
            w = indices.extended(a, self._n())
            polynomial = reduction.to_polynomial(self.aligned(b), self._n())
            return polynomial.moved(lambda e: indices.act(w, e))
        raise Mixed(f"{kind_name(a)} and {kind_name(b)} have no product")


def _as_word(operator: Any) -> Any:
    """An operator in canonical form as the sum of words that it is."""
    return operator.to_operator() if hasattr(operator, "to_operator") else operator


def _single_reflection(operator: Any) -> int | None:
    """The i of an operator that is the letter s_i, else None."""
    if len(operator.terms) == 1:
        ((word, c),) = operator.terms.items()
        if c == 1 and len(word) == 1 and getattr(word[0], "kind", "") == "s":
            position: int | None = word[0].simple_position()
            return position
    return None


def _scaled_operator(operator: Any, scalar: Scalar) -> Any:
    return operator.scaled(scalar)


def _index_sum(values: Sequence[Any]) -> tuple[int, ...]:
    if not all(is_index(v) for v in values):
        other = next(v for v in values if not is_index(v))
        raise Mixed(f"an index and {kind_name(other)} do not add")
    sizes = {len(v) for v in values}
    if len(sizes) > 1:
        raise Mixed(f"indices with {min(sizes)} and {max(sizes)} parts do not add")
    return tuple(sum(parts) for parts in zip(*values, strict=True))


def _order(w: tuple[int, ...]) -> int:
    count, current = 1, w
    while current != indices.identity(len(w)):
        current = indices.product(current, w)
        count += 1
    return count


def _bits(value: int | Fraction) -> int:
    fraction = Fraction(value)
    return max(fraction.numerator.bit_length(), fraction.denominator.bit_length())
