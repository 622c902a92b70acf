"""Straightening one relation at a time: the steps from an operator to its canonical form.

The steps are for reading; `canonical.straighten` computes the same form by faster means.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from spanwright.kernel import budget, indices
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import OverBudget
from spanwright.kernel.operators.canonical import straighten
from spanwright.kernel.operators.words import Group, Letter, Operator, Word, simple
from spanwright.kernel.parameters import ParameterRing

# A derivation longer than this is not for reading.
MOST_STEPS = 300

BERNSTEIN = "Bernstein relation"
QUADRATIC = "quadratic relation"
PRODUCT = "product of T_u and T_v"
LENGTHS_ADD = "T_u T_v = T_(u v), as the lengths add"
REDUCED_WORD = "reduced word"
DEFINITION = "definition"
TURN = "T_pi X_i = X_(i+1) T_pi, T_pi X_n = q^-1 X_1 T_pi"
LEIBNIZ = "Leibniz rule D_i f = (s_i f) D_i + correction"
PERMUTATION = "w f = (w f) w"
NIL = "d_i d_i = 0 and braid relations"
ZERO = "pi_i pi_i = pi_i and braid relations"

SOURCES = {
    BERNSTEIN: "Lusztig, Affine Hecke algebras and their graded version (1989)",
    TURN: "Cherednik, Double affine Hecke algebras and Macdonald's conjectures (1995)",
}
"""Where the relations that bear a name are published."""


@dataclass(frozen=True)
class Step:
    """One use of a relation left = right inside the sum `before`, which becomes `after`."""

    relation: str
    left: Operator
    right: Operator
    before: Operator
    after: Operator


@dataclass(frozen=True)
class _Rewriting:
    """The factors `left`, at start..stop of a word, replaced by an operator."""

    relation: str
    left: Word
    start: int
    stop: int
    right: Operator


def derive(operator: Operator, letters: Iterable[str] | None = None) -> list[Step]:
    """The steps to the canonical form in the letters asked for, none when it is one already.

    Raises what `straighten` raises, and OverBudget when there are more than MOST_STEPS.
    """
    goal = straighten(operator, letters)
    current = operator.multiplied_out()
    rewriter = _Rewriter(operator, goal.letters)
    steps: list[Step] = []
    known: dict[Word, _Rewriting | None] = {}
    while True:
        budget.current().check()
        for word in current.terms:
            if word not in known:
                known[word] = rewriter.rewriting(word)
        chosen = next((r for w in current.terms if (r := known[w]) is not None), None)
        if chosen is None:
            return steps
        if len(steps) == MOST_STEPS:
            raise OverBudget(f"the derivation has more than {MOST_STEPS} steps")
        # the same relation at once wherever it is the next one
        collected: dict[Word, list[Scalar]] = {}
        for word, c in current.terms.items():
            found = known[word]
            if found is None or (found.left, found.relation) != (chosen.left, chosen.relation):
                collected.setdefault(word, []).append(c)
                continue
            image = (
                rewriter.operator(word[: found.start]) * chosen.right
                * rewriter.operator(word[found.stop :])).multiplied_out()
            for w, d in image.terms.items():
                collected.setdefault(w, []).append(c * d)
        after = Operator(
            operator.n, {w: total(cs) for w, cs in collected.items()}, operator.normalisation)
        steps.append(Step(
            chosen.relation, rewriter.operator(chosen.left), chosen.right, current, after))
        current = after


class _Rewriter:
    """Finds the next relation to use in a word."""

    def __init__(self, operator: Operator, letters: tuple[str, ...]) -> None:
        self.n = operator.n
        self.normalisation = operator.normalisation
        self.letters = letters
        self.basis = next((x for x in letters if x in ("d", "pi", "s")), "T")

    def operator(self, word: Word) -> Operator:
        """A word as an operator."""
        return Operator(
            self.n, {word: Scalar.one(ParameterRing.get())}, self.normalisation)

    def _letters(self, letters: list[Letter], value: Scalar | int = 1) -> Operator:
        result = Operator.identity(self.n, self.normalisation).scaled(value)
        for letter in letters:
            result = result * self.operator((letter,))
        return result

    def _straightened(
        self, word: Word, start: int, stop: int, relation: str, extra: str = ""
    ) -> _Rewriting | None:
        part = self.operator(word[start:stop])
        letters = None
        if extra:
            letters = ("X", extra)
        right = straighten(part, letters).to_operator()
        return None if right == part else _Rewriting(
            relation, word[start:stop], start, stop, right)

    def rewriting(self, word: Word) -> _Rewriting | None:
        """The next rewriting, None for a word in canonical form."""
        if self.basis != "T":
            return self._finite(word)
        return self._pass_x(word) or self._open_t_pi(word) or self._pass_y(word) or (
            self._multiply_t(word))

    def _letter(self, word: Word, k: int) -> Letter:
        letter = word[k]
        assert not isinstance(letter, Group)
        return letter

    # X, T, Y, T_pi

    def _pass_x(self, word: Word) -> _Rewriting | None:
        """Move the first X that does not stand in front one letter to the left."""
        for k in range(len(word)):
            letter = self._letter(word, k)
            if letter.kind in ("symmetrizer", "antisymmetrizer"):
                return self._straightened(word, k, k + 1, DEFINITION)
            if letter.kind == "tau_pi":
                return _Rewriting(DEFINITION, word[k : k + 1], k, k + 1, self._tau_pi(letter.power))
        for k in range(1, len(word)):
            if self._letter(word, k).kind != "X":
                continue
            left = self._letter(word, k - 1)
            if left.kind == "T":
                return self._simple(word, k - 1) or self._straightened(
                    word, k - 1, k + 1, BERNSTEIN)
            if left.kind == "T_pi":
                return self._turn(word, k)
            return self._open_y(word, k - 1)
        return None

    def _tau_pi(self, power: int) -> Operator:
        sign = 1 if power > 0 else -1
        x = Letter("X", tuple(sign * int(j == 0) for j in range(self.n)))
        pair = [x, Letter("T_pi", (), sign)]
        return self._letters((pair if sign > 0 else pair[::-1]) * abs(power))

    def _simple(self, word: Word, k: int) -> _Rewriting | None:
        """T_w^power at k made ready to pass: a single T_i, to the power 1."""
        letter = self._letter(word, k)
        if letter.simple_position() is not None:
            if letter.power == 1:
                return None
            return self._straightened(word, k, k + 1, QUADRATIC)
        sign = 1 if letter.power > 0 else -1
        reduced = indices.reduced_word(letter.subscript)
        if sign < 0:
            reduced = reduced[::-1]
        parts = [Letter("T", simple(self.n, i), sign) for i in reduced] * abs(letter.power)
        return _Rewriting(REDUCED_WORD, word[k : k + 1], k, k + 1, self._letters(parts))

    def _turn(self, word: Word, k: int) -> _Rewriting:
        """T_pi^power X^mu = q^e X^nu T_pi^power."""
        turn, x = self._letter(word, k - 1), self._letter(word, k)
        mu, e = x.subscript, 0
        for _ in range(abs(turn.power)):
            if turn.power > 0:
                e -= mu[-1]
                mu = (mu[-1], *mu[:-1])
            else:
                e += mu[0]
                mu = (*mu[1:], mu[0])
        value = Scalar.parameter(ParameterRing.get(), "q") ** e
        return _Rewriting(
            TURN, word[k - 1 : k + 1], k - 1, k + 1, self._letters([Letter("X", mu), turn], value))

    def _open_y(self, word: Word, k: int) -> _Rewriting:
        """The last Y_i^±1 of a Y^nu before an X, as a word in T_i and T_pi."""
        nu = self._letter(word, k).subscript
        i = max(j for j, e in enumerate(nu, 1) if e)
        sign = 1 if nu[i - 1] > 0 else -1
        rest = tuple(e - sign * int(j == i) for j, e in enumerate(nu, 1))
        # Y_i = t^(i-1) T_(i-1)^-1 ... T_1^-1 T_pi T_(n-1) ... T_i
        parts = [
            *(Letter("T", simple(self.n, j), -1) for j in range(i - 1, 0, -1)),
            Letter("T_pi"),
            *(Letter("T", simple(self.n, j)) for j in range(self.n - 1, i - 1, -1))]
        if sign < 0:
            parts = [p.inverse(self.n) for p in reversed(parts)]
        value: Scalar | int = 1
        if self.normalisation == "plain":
            value = Scalar.parameter(ParameterRing.get(), "t") ** (sign * (i - 1))
        before = [Letter("Y", rest)] if any(rest) else []
        return _Rewriting(
            DEFINITION, word[k : k + 1], k, k + 1, self._letters(before + parts, value))

    def _open_t_pi(self, word: Word) -> _Rewriting | None:
        """T_pi = Y_1 T_1^-1 ... T_(n-1)^-1, once no X stands to the right."""
        for k in range(len(word)):
            letter = self._letter(word, k)
            if letter.kind != "T_pi":
                continue
            first = tuple(int(j == 0) for j in range(self.n))
            parts = [Letter("Y", first), *(
                Letter("T", simple(self.n, j), -1) for j in range(1, self.n))]
            sign = 1 if letter.power > 0 else -1
            if sign < 0:
                parts = [p.inverse(self.n) for p in reversed(parts)]
            rest = letter.power - sign
            after = [Letter("T_pi", (), rest)] if rest else []
            return _Rewriting(DEFINITION, word[k : k + 1], k, k + 1, self._letters(parts + after))
        return None

    def _pass_y(self, word: Word) -> _Rewriting | None:
        for k in range(len(word) - 1):
            if self._letter(word, k).kind == "Y" and self._letter(word, k + 1).kind == "T":
                return self._simple(word, k + 1) or self._straightened(word, k, k + 2, BERNSTEIN)
        return None

    def _multiply_t(self, word: Word) -> _Rewriting | None:
        for k in range(len(word)):
            letter = self._letter(word, k)
            if letter.kind == "T" and letter.power != 1:
                return self._simple(word, k)
        for k in range(len(word) - 1):
            left, right = self._letter(word, k), self._letter(word, k + 1)
            if left.kind == right.kind == "T":
                u, v = left.subscript, right.subscript
                adds = indices.length(indices.product(u, v)) == (
                    indices.length(u) + indices.length(v))
                return self._straightened(word, k, k + 2, LENGTHS_ADD if adds else PRODUCT)
        return None

    # X and one of d, pi, s

    def _finite(self, word: Word) -> _Rewriting | None:
        basis = self.basis
        for k in range(len(word)):
            letter = self._letter(word, k)
            if letter.kind not in ("X", basis):
                return self._straightened(word, k, k + 1, DEFINITION, basis)
        for k in range(len(word) - 1):
            left, right = self._letter(word, k), self._letter(word, k + 1)
            if left.kind == basis and right.kind == "X":
                return self._straightened(
                    word, k, k + 2, PERMUTATION if basis == "s" else LEIBNIZ, basis)
        relation = {"d": NIL, "pi": ZERO}.get(basis, PERMUTATION)
        for k in range(len(word)):
            if self._letter(word, k).power != 1:
                return self._straightened(word, k, k + 1, relation, basis)
        for k in range(len(word) - 1):
            if self._letter(word, k).kind == self._letter(word, k + 1).kind == basis:
                return self._straightened(word, k, k + 2, relation, basis)
        return None
