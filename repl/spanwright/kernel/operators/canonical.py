"""Canonical forms of operators: the smallest algebra that holds a word, straightening, identities.

Bases: X^mu T_w Y^nu of the double affine Hecke algebra and its parts, X^mu d_w, X^mu pi_w,
X^mu s_w. The letter tau_i has a denominator in Y, so it acts but has no form of this kind;
identities with tau_i are decided in `intertwiners`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from fractions import Fraction
from typing import Any

from spanwright.kernel import indices
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import Mixed, NotAUnit, OutsideDomain
from spanwright.kernel.laurent import support_order
from spanwright.kernel.operators.actions import Value, act
from spanwright.kernel.operators.double_affine import DoubleAffineHeckeAlgebra
from spanwright.kernel.operators.elements import Algebra, Element
from spanwright.kernel.operators.hecke import HeckeAlgebra
from spanwright.kernel.operators.intertwiners import is_zero_operator
from spanwright.kernel.operators.nil_hecke import NilHeckeAlgebra
from spanwright.kernel.operators.smash import SmashProduct
from spanwright.kernel.operators.words import Letter, Operator, Word, half_power
from spanwright.kernel.operators.zero_hecke import ZeroHeckeAlgebra
from spanwright.kernel.parameters import ParameterRing

ALGEBRAS: dict[tuple[str, ...], str] = {
    (): "scalars",
    ("X",): "Laurent polynomials",
    ("Y",): "Laurent polynomials",
    ("T",): "finite Hecke algebra",
    ("X", "T"): "affine Hecke algebra",
    ("T", "Y"): "affine Hecke algebra",
    ("X", "T", "Y"): "double affine Hecke algebra",
    ("d",): "nilCoxeter algebra",
    ("X", "d"): "nilHecke algebra",
    ("pi",): "0-Hecke algebra",
    ("X", "pi"): "affine 0-Hecke algebra",
    ("s",): "group algebra",
    ("X", "s"): "smash product with the group algebra",
}
"""The algebras by the letters of their canonical form, in the order of a basis element."""

_HECKE_KINDS = frozenset({"X", "T", "Y", "T_pi", "tau_pi", "symmetrizer", "antisymmetrizer"})
_FINITE_KINDS = frozenset({"s", "d", "pi"})
_COMBINE = (
    "X, T, Y and T_pi combine with each other, and X, s, d, pi and T combine with each other")

Component = tuple[int, ...]
Terms = Mapping[tuple[Component, ...], Scalar]


class CanonicalOperator:
    """sum of scalar * basis element of one algebra, immutable; no zero coefficients.

    A basis element is a tuple with one component for each of `letters`: exponents for X and Y,
    a permutation in one-line notation for T, d, pi, s.
    """

    __slots__ = ("letters", "n", "normalisation", "terms")

    def __init__(
        self, letters: tuple[str, ...], n: int, terms: Terms, normalisation: str = "plain"
    ) -> None:
        """Raises Mixed when the letters belong to no algebra here."""
        if letters not in ALGEBRAS:
            raise Mixed(f"no algebra here has the letters {', '.join(letters)}")
        self.letters = letters
        self.n = n
        self.normalisation = normalisation
        self.terms: dict[tuple[Component, ...], Scalar] = {
            key: c for key, c in terms.items() if not c.is_zero}

    @property
    def algebra(self) -> str:
        """The name of the algebra."""
        return ALGEBRAS[self.letters]

    @property
    def is_zero(self) -> bool:
        """Whether the operator is 0."""
        return not self.terms

    def __bool__(self) -> bool:
        return bool(self.terms)

    def __len__(self) -> int:
        return len(self.terms)

    def as_scalar(self) -> Scalar | None:
        """The scalar, or None when the operator is none."""
        if not self.terms:
            return Scalar.zero(ParameterRing.get())
        (key, *others) = self.terms
        return self.terms[key] if not others and self._is_trivial(key) else None

    def _is_trivial(self, key: tuple[Component, ...]) -> bool:
        return all(
            _is_identity(letter, part) for letter, part in zip(self.letters, key, strict=True))

    def support(self) -> list[tuple[Component, ...]]:
        """The basis elements that occur, in the order in which they are shown."""
        return sorted(self.terms, key=self._order_key)

    def _order_key(self, key: tuple[Component, ...]) -> tuple[Any, ...]:
        order: list[Any] = []
        for letter, part in zip(self.letters, key, strict=True):
            if letter in ("X", "Y"):
                order.append(support_order(part))
            else:  # long permutations first
                order.append((-indices.length(part), part))
        return tuple(order)

    def items(self) -> Iterator[tuple[tuple[Component, ...], Scalar]]:
        """Basis elements and coefficients, in the order in which they are shown."""
        for key in self.support():
            yield key, self.terms[key]

    def coefficient(self, key: tuple[Component, ...]) -> Scalar:
        """The coefficient of one basis element."""
        found = self.terms.get(key)
        return Scalar.zero(ParameterRing.get()) if found is None else found

    def __eq__(self, other: object) -> bool:
        """Whether the two are the same operator, whatever algebras they are written in."""
        if not isinstance(other, CanonicalOperator):
            return NotImplemented
        if self.letters == other.letters and self.normalisation == other.normalisation:
            return self.n == other.n and self.terms == other.terms
        try:
            return straighten(self.to_operator() - other.to_operator()).is_zero
        except Mixed:
            return False

    def __hash__(self) -> int:
        return hash((self.n, self.normalisation))

    def __repr__(self) -> str:
        return f"CanonicalOperator<{self.algebra}, {self.letters}, n={self.n}, {self.terms}>"

    def to_operator(self) -> Operator:
        """The same operator as a sum of words."""
        terms: dict[Word, Scalar] = {}
        for key, c in self.items():
            terms[tuple(
                Letter(letter, part) for letter, part in zip(self.letters, key, strict=True)
                if not _is_identity(letter, part))] = c
        return Operator(self.n, terms, self.normalisation)

    def apply(self, value: Value) -> Value:
        """The operator applied to a polynomial or an expansion, as `actions.act` does it."""
        return act(self.to_operator(), value)

    # arithmetic

    def _with(self, terms: Terms) -> CanonicalOperator:
        return CanonicalOperator(self.letters, self.n, terms, self.normalisation)

    def __neg__(self) -> CanonicalOperator:
        return self._with({key: -c for key, c in self.terms.items()})

    def __add__(self, other: CanonicalOperator) -> CanonicalOperator:
        if not isinstance(other, CanonicalOperator):
            return NotImplemented
        if (self.letters, self.n, self.normalisation) != (
            other.letters, other.n, other.normalisation
        ):
            return straighten(self.to_operator() + other.to_operator())
        terms = dict(self.terms)
        for key, c in other.terms.items():
            known = terms.get(key)
            terms[key] = c if known is None else total((known, c))
        return self._with(terms)

    def __sub__(self, other: CanonicalOperator) -> CanonicalOperator:
        if not isinstance(other, CanonicalOperator):
            return NotImplemented
        return self + (-other)

    def __mul__(self, other: object) -> CanonicalOperator:
        if isinstance(other, Scalar | int | Fraction):
            return self.scaled(other)
        if not isinstance(other, CanonicalOperator):
            return NotImplemented
        return straighten(self.to_operator() * other.to_operator())

    def __rmul__(self, other: object) -> CanonicalOperator:
        return self.scaled(other) if isinstance(other, Scalar | int | Fraction) else NotImplemented

    def scaled(self, factor: Scalar | int | Fraction) -> CanonicalOperator:
        """The product with a scalar."""
        return self._with({key: c * factor for key, c in self.terms.items()})

    def map_coefficients(self, image: Callable[[Scalar], Scalar]) -> CanonicalOperator:
        """Every coefficient sent through a map of scalars."""
        return self._with({key: image(c) for key, c in self.terms.items()})


def _is_identity(letter: str, part: Component) -> bool:
    if letter in ("X", "Y"):
        return not any(part)
    return part == indices.identity(len(part))


def algebra_letters(kinds: Iterable[str]) -> tuple[str, ...]:
    """The letters of the smallest algebra here that holds words in such letters.

    Raises Mixed, with what can be combined, when there is none.
    """
    found = frozenset(kinds)
    if "tau" in found:
        raise Mixed(
            "tau_i has a denominator in Y: it acts on polynomials and on E_mu, but it has no "
            "canonical form in the algebras with coefficients in Q(q,t)",
            hints=("T_i, X_i, Y_i and T_pi have one",))
    finite = found & _FINITE_KINDS
    if not finite:
        parts = []
        for letter, carriers in (
            ("X", {"X", "tau_pi"}),
            ("T", {"T", "T_pi", "tau_pi", "symmetrizer", "antisymmetrizer"}),
            ("Y", {"Y", "T_pi", "tau_pi"}),
        ):
            if found & carriers:
                parts.append(letter)
        if parts == ["X", "Y"]:
            parts = ["X", "T", "Y"]
        return tuple(parts)
    strangers = found & {"Y", "T_pi", "tau_pi"}
    if strangers:
        raise Mixed(
            f"{', '.join(sorted(finite))} and {', '.join(sorted(strangers))} together lie in no "
            f"algebra here: {_COMBINE}")
    hecke = found & _HECKE_KINDS - {"X"}
    if len(finite) == 1 and not hecke:
        letter, = finite
        return ("X", letter) if "X" in found else (letter,)
    return ("X", "d")


def straighten(
    operator: Operator, letters: Iterable[str] | None = None
) -> CanonicalOperator:
    """The canonical form, in the smallest algebra that holds the word or in the one asked for.

    `letters` may come in any order. Raises Mixed when no algebra holds the letters of the word,
    OutsideDomain when the operator is not in the algebra asked for.
    """
    kinds = operator.kinds()
    if letters is None:
        target = algebra_letters(kinds)
    else:
        target = _requested(letters)
    algebra, held, basis = _machine(operator, kinds, target)
    element = algebra.applied(operator, algebra.one((0,) * operator.n if "Y" in held else ()))
    return _settled(element, held, basis, target, operator)


def _requested(letters: Iterable[str]) -> tuple[str, ...]:
    wanted = set(letters)
    for known in ALGEBRAS:
        if set(known) == wanted:
            return known
    known_letters = "; ".join(", ".join(known) for known in ALGEBRAS if known)
    raise Mixed(
        f"no canonical form here has the letters {', '.join(sorted(wanted))}",
        hints=(f"there are: {known_letters}",))


def _machine(
    operator: Operator, kinds: frozenset[str], target: tuple[str, ...]
) -> tuple[Algebra, tuple[str, ...], str]:
    """The algebra that does the work, the letters of its basis, and the letter of its D_w."""
    ring = operator.ring()
    if operator.normalisation == "balanced" and kinds & {"T", "Y", "T_pi", "tau_pi", "tau"}:
        ring = ring.extended(has_root=True)
    n = operator.n
    basis = next((letter for letter in target if letter in _FINITE_KINDS), "T")
    if basis == "T":
        if kinds & _FINITE_KINDS:
            algebra_letters(kinds)
            raise Mixed(
                f"{', '.join(sorted(kinds & _FINITE_KINDS))} is not in the "
                f"{ALGEBRAS[target]} with the letters {', '.join(target) or 'none'}: {_COMBINE}")
        if algebra_letters(kinds)[-1:] == ("Y",) or "Y" in target:
            return DoubleAffineHeckeAlgebra(ring, n), ("X", "T", "Y"), "T"
        return HeckeAlgebra(ring, n), ("X", "T"), "T"
    makers: dict[str, Callable[[ParameterRing, int], Algebra]] = {
        "d": NilHeckeAlgebra, "pi": ZeroHeckeAlgebra, "s": SmashProduct}
    algebra = makers[basis](ring, n)
    strangers = kinds - algebra.kinds
    if strangers:
        algebra_letters(kinds)
        raise Mixed(
            f"{', '.join(sorted(strangers))} is not in the {ALGEBRAS['X', basis]} "
            f"with the letters X, {basis}: {_COMBINE}")
    return algebra, ("X", basis), basis


def _settled(
    element: Element, held: tuple[str, ...], basis: str, target: tuple[str, ...],
    operator: Operator,
) -> CanonicalOperator:
    """The element in the letters of `target`; raises OutsideDomain when it needs more letters."""
    n, is_balanced = operator.n, operator.normalisation == "balanced"
    terms: dict[tuple[Component, ...], Scalar] = {}
    for mu, (w, nu), c in element.items():
        parts = {"X": mu, basis: w, "Y": nu}
        for letter in held:
            if letter not in target and not _is_identity(letter, parts[letter]):
                raise OutsideDomain(
                    f"the operator is not in the {ALGEBRAS[target]} with the letters "
                    f"{', '.join(target) or 'none'}: its canonical form needs {letter}",
                    code="outside-the-algebra")
        if is_balanced and basis == "T":
            h = indices.length(w) + (n - 1) * sum(nu)
            if h:
                c = c * half_power(h)
        terms[tuple(parts[letter] for letter in target)] = c
    return CanonicalOperator(target, n, terms, operator.normalisation)


# identities and products


def commutator(a: Operator, b: Operator) -> CanonicalOperator:
    """a b - b a in canonical form."""
    return straighten(a * b - b * a)


def is_same_operator(a: Operator, b: Operator) -> bool:
    """Whether two operators are equal, words with tau_i included."""
    difference = a - b
    if difference.is_zero:
        return True
    if "tau" in difference.kinds():
        return is_zero_operator(difference)
    return straighten(difference).is_zero


def inverse(operator: Operator) -> Operator:
    """The inverse of a scalar times invertible letters, in the word or in its canonical form.

    Also of an element of a finite algebra (T_w, d_w, pi_w or s_w alone, scalars) whose powers
    become dependent early: (T_1 + 1 - t)^-1. Raises NotAUnit else.
    """
    try:
        return operator.inverse()
    except NotAUnit as reason:
        kinds = operator.kinds()
        if "tau" in kinds or not operator.terms:
            raise
        form = straighten(operator)
        if form.is_zero:
            raise NotAUnit("the operator is 0 and has no inverse") from None
        if len(form) == 1:
            return form.to_operator().inverse()
        if len(operator.terms) == 1 and all(isinstance(f, Letter) for f in next(
                iter(operator.terms))):
            raise reason  # a single word: the letter that has no inverse says why
        found = _inverse_by_powers(form)
        if found is None:
            raise NotAUnit("this operator has no inverse that is known here") from None
        return found


def power(operator: Operator, exponent: int) -> Operator:
    """operator^exponent, negative exponents by `inverse`."""
    if exponent < 0:
        return inverse(operator) ** -exponent
    return operator**exponent


# A minimal polynomial longer than this is not looked for.
LONGEST_MINIMAL_POLYNOMIAL = 8


def _inverse_by_powers(form: CanonicalOperator) -> Operator | None:
    """The inverse from the first linear relation 1, a, a^2, ...; None when there is none."""
    if len(form.letters) != 1 or form.letters[0] in ("X", "Y"):
        return None
    a = form
    identity = straighten(Operator.identity(form.n, form.normalisation), form.letters)
    powers = [identity]
    # rows in echelon form: pivot -> (vector, its combination of powers)
    rows: list[tuple[tuple[Component, ...], CanonicalOperator, list[Scalar]]] = []
    one = Scalar.one(ParameterRing.get())
    zero = Scalar.zero(ParameterRing.get())
    for k in range(LONGEST_MINIMAL_POLYNOMIAL + 1):
        vector, combination = powers[k], [zero] * k + [one]
        for pivot, row, row_combination in rows:
            c = vector.coefficient(pivot)
            if c:
                vector = vector - row.scaled(c)
                combination = [
                    x - c * y for x, y in zip(
                        combination, row_combination + [zero] * len(combination))]
        if vector.is_zero:
            # sum of combination[j] a^j = 0, combination[k] = 1
            constant = combination[0]
            if constant.is_zero:
                raise NotAUnit("this operator is a zero divisor and has no inverse")
            result = powers[0].scaled(combination[1])
            for j in range(2, k + 1):
                result = result + powers[j - 1].scaled(combination[j])
            return result.scaled(-constant.inverse()).to_operator()
        pivot = vector.support()[0]
        inverted = vector.coefficient(pivot).inverse()
        rows.append((pivot, vector.scaled(inverted), [x * inverted for x in combination]))
        powers.append(straighten(powers[-1].to_operator() * a.to_operator(), form.letters))
    return None
