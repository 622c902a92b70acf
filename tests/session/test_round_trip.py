"""Everything printed can be pasted back: values of every kind, however they are shown or wrapped.

And a text of any kind ends in outcomes, never in an exception.
"""

from __future__ import annotations

import random
from fractions import Fraction
from typing import Any

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import NAMES, family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.kernel.parameters import ParameterRing
from spanwright.rendering.json import plain_scalar
from spanwright.rendering.layout import term_lines
from spanwright.rendering.text import text
from spanwright.rendering.wrapping import wrapped
from spanwright.session import Session
from spanwright.settings import WORDS
from spanwright.values import as_scalar
from spanwright.views import View
from spanwright_grammar.source import Source
from spanwright_grammar.vocabulary import VOCABULARY

PARAMETERS = ("q", "t", "a", "b2", "beta", "alpha", "y_1", "N")
RING = ParameterRing.get().extended(PARAMETERS)
N = 3


def session() -> Session:
    """A session in which every value that is drawn here can be written."""
    made = Session(n=N)
    assert made.run("let a, b2, N be parameters").status == "ok"
    return made


def read_back(printed: str) -> View:
    """The value of a printed text."""
    found = session().run(printed)
    assert found.status == "ok", found.text
    assert found.value is not None
    return found.value


@st.composite
def scalars(draw: Any) -> Scalar:
    """Quotients of products of sums, with powers of t^(1/2) and large numbers."""
    def total() -> Scalar:
        found = Scalar.zero(RING)
        for _ in range(draw(st.integers(1, 3))):
            number = draw(st.sampled_from([1, -1, 2, -3, 10**40 + 1]))
            powers = {name: draw(st.integers(0, 2)) for name in draw(
                st.lists(st.sampled_from(PARAMETERS), max_size=2, unique=True))}
            found = found + Scalar.monomial_of(RING, RING.exponents(powers), number)
        return found

    result = Scalar.number(RING, draw(st.integers(-20, 20)), draw(st.integers(1, 9)))
    for _ in range(draw(st.integers(0, 2))):
        result = result * total()
    for _ in range(draw(st.integers(0, 2))):
        below = total()
        if not below.is_zero:
            result = result / below
    powers = draw(st.dictionaries(st.sampled_from(["q", "t", "a"]), st.integers(-5, 5), max_size=2))
    result = result * Scalar.monomial_of(RING, RING.exponents(powers), 1)
    if draw(st.integers(0, 3)) == 0:
        result = result * Scalar.root_of_t() ** draw(st.sampled_from([-3, -1, 1, 5]))
    return result


EXPONENTS = st.tuples(*[st.integers(-3, 3)] * N)
SHOWS = st.sampled_from(WORDS["show"])


@given(scalars(), SHOWS)
@settings(max_examples=effort(80))
def test_scalars(value: Scalar, show: str) -> None:
    printed = text(value, show)
    assert "\n" not in printed
    assert read_back(printed) == value
    # a second printing is the same text
    assert text(read_back(printed).raw, show) == printed


@given(scalars(), st.randoms(use_true_random=False))
@settings(max_examples=effort(25))
def test_strings_of_scalars_mean_the_same_to_sympy(value: Scalar, source: random.Random) -> None:
    shown = plain_scalar(value)
    assert shown.isascii()
    # squares, so that t^(1/2) is rational
    point = {name: Fraction(source.randint(2, 30) ** 2, source.randint(2, 30) ** 2)
             for name in PARAMETERS}
    expression = sympy.sympify(shown)
    names = {symbol: point[symbol.name.rstrip("_")] for symbol in expression.free_symbols}
    by_sympy = expression.subs({s: sympy.Rational(v.numerator, v.denominator)
                                for s, v in names.items()})
    settled = session().run(
        f"({text(value)}) at " + ", ".join(
            f"{name} = {v}" for name, v in point.items() if name != "t"))
    assert settled.status == "ok", settled.text
    root = Fraction(sympy.sqrt(sympy.Rational(point["t"].numerator, point["t"].denominator)))
    # the remaining parameter t by its root: t^(k/2) becomes a power of a fraction
    ours = sympy.sympify(plain_scalar(settled.value.raw)).subs(  # type: ignore[union-attr]
        "t", sympy.Rational(root.numerator, root.denominator) ** 2)
    assert sympy.nsimplify(by_sympy - ours) == 0


DENOMINATORS = st.lists(st.sampled_from([
    "1", "1 - q t", "1 - q^2 t^2", "q - t^2", "1 + a", "3", "t^(1/2)", "1 + beta q + 7 q^2",
    "y_1 - 1", "q t"]), max_size=2)
NUMERATORS = st.sampled_from([
    "1", "-1", "2 q - 3 t", "-(1 - q t)^2", "a + b2", "10^30 q^9", "t^(3/2) - 1", "-t/2", "N"])


@st.composite
def coefficients(draw: Any) -> Scalar:
    """Scalars with a few common denominators, as sums of several terms have them."""
    below = " ".join(f"({factor})" for factor in draw(DENOMINATORS))
    found = session().run(f"({draw(NUMERATORS)})/({below or '1'})").value
    assert found is not None
    value = as_scalar(found.raw)
    assert value is not None
    return value.lift(RING.extended(has_root=True))


@st.composite
def polynomials(draw: Any) -> LaurentPolynomial:
    terms = draw(st.dictionaries(EXPONENTS, coefficients(), max_size=5))
    return LaurentPolynomial.of_scalars(N, RING.extended(has_root=True), terms)


@given(polynomials(), SHOWS, st.integers(20, 120))
@settings(max_examples=effort(40))
def test_polynomials_wrapped_or_not(value: LaurentPolynomial, show: str, width: int) -> None:
    assert read_back(text(value, show)) == value
    if not value.is_zero:
        assert read_back("\n".join(wrapped(term_lines(value, show), width))) == value


INDICES: dict[str, st.SearchStrategy[tuple[int, ...]]] = {
    "E": EXPONENTS,
    **dict.fromkeys(("kappa", "atom"), st.tuples(*[st.integers(0, 3)] * N)),
    **dict.fromkeys(("S", "G"), st.permutations([1, 2, 3]).map(tuple)),
    # parts of e are bounded by n
    **dict.fromkeys(("P", "J", "m", "e", "h", "p", "s"),
                    st.lists(st.integers(0, 3), min_size=1, max_size=N).map(
                        lambda parts: tuple(sorted(parts, reverse=True)))),
}


def test_every_family_is_tried() -> None:
    assert set(INDICES) == set(NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_expansions_of_every_family(name: str) -> None:
    target = family(name)

    @given(st.dictionaries(INDICES[name], coefficients(), min_size=1, max_size=4), SHOWS,
           st.integers(20, 120))
    @settings(max_examples=effort(8))
    def law(terms: dict[tuple[int, ...], Scalar], show: str, width: int) -> None:
        value = Expansion(target, N, {
            target.check_index(index, N): c for index, c in terms.items()})
        found = read_back(text(value, show)).raw
        if value.is_zero:
            assert found == 0
            return
        assert found == value
        assert read_back("\n".join(wrapped(term_lines(value, show), width))).raw == value

    law()


@given(st.lists(st.integers(-10**9, 10**9), min_size=2, max_size=8).map(tuple))
@settings(max_examples=effort(20))
def test_indices(value: tuple[int, ...]) -> None:
    assert read_back(text(value)) == value


@given(st.integers(min_value=-10**400, max_value=10**400), st.integers(1, 10**300))
@settings(max_examples=effort(20))
def test_numbers(top: int, bottom: int) -> None:
    assert read_back(text(top)) == top
    assert read_back(text(Fraction(top, bottom))) == Fraction(top, bottom)


WRITTEN = [
    "list(1, q, (1,2), x_1, E_102)", "list()", "list(list(1), list())", "1 < 2", "2 < 1",
    "x_1 = x_2", "q = q", "list(true, false, x_1 = x_2)", "{1,2}", "{(0,1), (1,0)}", "{}", "1..5",
    "compositions(2)", "partitions(3)", "permutations(3)", "subsets(1..3)", "orbit((2,1,0))",
    '"a text"', r'"with \"quotes\" and \\ in it"', "E", "T_1 X_1", "X_1 T_(2,3,1) + q Y_2^-1",
    "d_1 X_2", "pi_(3,2,1)", "s_1 s_2", "1/t T_1^-1", "E_((1,0,2)|(2,1,3))", "S_(3,1,2)(x;y)",
]


@pytest.mark.parametrize("written", WRITTEN)
def test_other_values(written: str) -> None:
    made = session()
    first = made.run(written)
    assert first.status == "ok", first.text
    assert first.value is not None
    again = made.run(first.text)
    assert again.status == "ok", (first.text, again.text)
    # behind the comment sign of a failing statement stands the difference, which is no value
    assert again.text == first.text.partition("\n#")[0]
    if not isinstance(first.raw, type(made.run("1..2").raw)):
        assert again.value == first.value


# texts of any kind

PIECES = sorted({
    *(word for entry in VOCABULARY for word in (entry.name, *entry.aliases)),
    *"()[]{}|_^*/+-=<>,;:.#\"'\\ \n\t0123456789",
    "for", "at", "as", "be", "in", "q", "t", "x_1", "x_4", "E_102", "E_(1,0,2)", "mu", "(1,0)",
    "10^9", "..", "->", "<=", "!=", "·", "μ", "∂", "𝔖", "\0",
})

EXAMPLES = [entry.example for entry in VOCABULARY if entry.name not in ("write", "use", "draw")]


def outcomes(written: str) -> None:
    made = Session(n=N)
    made.run("fix seconds = 2; fix terms = 2000; let f = x_1; let mu = (1,0,2)")
    for found in made.run_all(Source(written)):
        assert found.status in ("ok", "failed", "error")
        codes = [d.code for d in found.diagnostics]
        assert "internal-error" not in codes, (written, found.text)
        assert (found.status == "error") == bool(codes)
        reply = found.reply(is_recorded=True)
        assert reply.record["status"] == found.status


def mutated(source: random.Random) -> str:
    written = source.choice(EXAMPLES)
    for _ in range(source.randint(1, 4)):
        at = source.randint(0, len(written))
        to = min(len(written), at + source.randint(0, 3))
        piece = source.choice(PIECES) if source.random() < 0.8 else source.choice(EXAMPLES)
        written = written[:at] + piece + written[to:]
    return written


def garbage(source: random.Random) -> str:
    return source.choice(["", " "]).join(
        source.choice(PIECES) for _ in range(source.randint(1, 14)))


@pytest.mark.parametrize("part", range(10))
def test_mutated_sentences_and_garbage_end_in_outcomes(part: int) -> None:
    source = random.Random(part)
    for _ in range(effort(200)):
        outcomes(mutated(source) if source.random() < 0.7 else garbage(source))


@given(st.text(max_size=40))
@settings(max_examples=effort(60))
def test_any_text_ends_in_outcomes(written: str) -> None:
    outcomes(written)
