"""Words with tau_i: the basis tau_w of the double affine Hecke algebra with denominators in Y.

Every letter is a sum of tau_w f(Y), w in the extended affine symmetric group, f rational:
Y^nu tau_w = tau_w (w^-1 Y^nu), T_i = tau_i - (1-t)/(1 - Y_i^-1 Y_(i+1)),
tau_i^2 = (1-tz)(t-z)/(1-z)^2 with z = Y_i^-1 Y_(i+1), X_1 = tau_pi T_(n-1) ... T_1 Y_1^-1
(Cherednik, Double affine Hecke algebras and Macdonald's conjectures, 1995; Knop, Integrality of two
variable Kostka functions, 1997). The form is unique, so it decides identities.
"""

from __future__ import annotations

from spanwright.kernel import budget
from spanwright.kernel.coefficients import Scalar, total
from spanwright.kernel.errors import Mixed
from spanwright.kernel.indices import reduced_word
from spanwright.kernel.operators.words import Group, Letter, Operator, normalising
from spanwright.kernel.parameters import Exponents, ParameterRing

Window = tuple[int, ...]
"""w(1), ..., w(n) of an affine permutation, w(i + n) = w(i) + n."""

Form = dict[Window, Scalar]
"""sum of tau_w f_w(Y)."""


class _Localisation:
    """Left multiplication by letters in the basis tau_w, with the Y_i as parameters."""

    def __init__(self, n: int, ring: ParameterRing) -> None:
        self.n = n
        self.ring = ring.extended([f"Y_{i}" for i in range(1, n + 1)])

    def weight(self, window: Window, nu: Exponents) -> Exponents:
        """Y^nu tau_w = tau_w m: the exponents of m, from Y_(j+n) = q Y_j."""
        powers = dict.fromkeys(self.ring.names, 0)
        for i, e in enumerate(nu, 1):
            if e:
                turns, j = divmod(self._preimage(window, i) - 1, self.n)
                powers[f"Y_{j + 1}"] += e
                powers["q"] += e * turns
        return self.ring.exponents(powers)

    def _preimage(self, window: Window, i: int) -> int:
        for j, value in enumerate(window, 1):
            if (value - i) % self.n == 0:
                return j - (value - i)
        raise AssertionError("a window meets every residue")

    def tau(self, i: int, form: Form) -> Form:
        """tau_i times a form."""
        found: Form = {}
        for window, f in form.items():
            turned = tuple(
                v + 1 if (v - i) % self.n == 0 else v - 1 if (v - i - 1) % self.n == 0 else v
                for v in window)
            if self._preimage(window, i) > self._preimage(window, i + 1):
                f = f * self._square(self._ratio(turned, i))
            found[turned] = f
        return found

    def _ratio(self, window: Window, i: int) -> Exponents:
        nu = [0] * self.n
        nu[i - 1], nu[i] = -1, 1
        return self.weight(window, tuple(nu))

    def _square(self, z: Exponents) -> Scalar:
        t = self.ring.exponents({"t": 1})
        ring = self.ring
        return (
            Scalar.one_minus(ring, tuple(map(int.__add__, z, t)))
            * Scalar.one_minus(ring, tuple(map(int.__sub__, z, t))) * Scalar.parameter(ring, "t")
            * Scalar.one_minus(ring, z) ** -2)

    def t(self, i: int, form: Form) -> Form:
        """T_i = tau_i - (1-t)/(1-z)."""
        one_minus_t = Scalar.one_minus(self.ring, self.ring.exponents({"t": 1}))
        own = {
            window: -(f * one_minus_t / Scalar.one_minus(self.ring, self._ratio(window, i)))
            for window, f in form.items()}
        return added((self.tau(i, form), own))

    def t_inverse(self, i: int, form: Form) -> Form:
        """T_i^-1 = (T_i + 1 - t)/t."""
        t = Scalar.parameter(self.ring, "t")
        one_minus_t = Scalar.one_minus(self.ring, self.ring.exponents({"t": 1}))
        return scaled(added((self.t(i, form), scaled(form, one_minus_t))), t.inverse())

    def y(self, nu: Exponents, form: Form) -> Form:
        """Y^nu times a form."""
        return {
            window: f * Scalar.monomial_of(self.ring, self.weight(window, nu))
            for window, f in form.items()}

    def tau_pi(self, sign: int, form: Form) -> Form:
        """tau_pi^±1 times a form."""
        return {tuple(v + sign for v in window): f for window, f in form.items()}

    def t_pi(self, sign: int, form: Form) -> Form:
        """T_pi = Y_1 T_1^-1 ... T_(n-1)^-1."""
        first = tuple(sign * int(k == 0) for k in range(self.n))
        if sign > 0:
            for i in range(self.n - 1, 0, -1):
                form = self.t_inverse(i, form)
            return self.y(first, form)
        form = self.y(first, form)
        for i in range(1, self.n):
            form = self.t(i, form)
        return form

    def x(self, j: int, sign: int, form: Form) -> Form:
        """X_1 = tau_pi T_pi^-1, X_(i+1) = t^-1 T_i X_i T_i, and inverses."""
        if j > 1:
            step = self.t if sign > 0 else self.t_inverse
            t = Scalar.parameter(self.ring, "t")
            form = step(j - 1, self.x(j - 1, sign, step(j - 1, form)))
            return scaled(form, t ** -sign)
        if sign > 0:
            return self.tau_pi(1, self.t_pi(-1, form))
        return self.t_pi(1, self.tau_pi(-1, form))

    def letter(self, letter: Letter, form: Form) -> Form:
        """letter * form, in the plain normalisation."""
        sign = 1 if letter.power > 0 else -1
        if letter.kind == "Y":
            return self.y(letter.subscript, form)
        if letter.kind == "X":
            for j, e in enumerate(letter.subscript, 1):
                for _ in range(abs(e)):
                    form = self.x(j, 1 if e > 0 else -1, form)
            return form
        for _ in range(abs(letter.power)):
            budget.current().check_terms(len(form), "this form")
            match letter.kind:
                case "tau":
                    form = self.tau(letter.subscript[0], form)
                case "tau_pi":
                    form = self.tau_pi(sign, form)
                case "T_pi":
                    form = self.t_pi(sign, form)
                case "T":
                    word = reduced_word(letter.subscript)
                    for i in reversed(word) if sign > 0 else word:
                        form = self.t(i, form) if sign > 0 else self.t_inverse(i, form)
                case "symmetrizer" | "antisymmetrizer":
                    factor = Scalar.one(self.ring) if letter.kind == "symmetrizer" else (
                        -Scalar.parameter(self.ring, "t").inverse())
                    for k in range(1, self.n):
                        partial = [form]
                        for i in range(k, 0, -1):
                            partial.append(scaled(self.t(i, partial[-1]), factor))
                        form = added(partial)
                case _:
                    raise Mixed(
                        f"{letter.kind} and tau together lie in no algebra here",
                        hints=("tau combines with X, T, Y, T_pi and tau_pi",))
        return form

    def applied(self, operator: Operator, form: Form) -> Form:
        """operator * form."""
        found = []
        for word, c in operator.terms.items():
            current = form
            for factor in reversed(word):
                if isinstance(factor, Group):
                    for _ in range(factor.power):
                        current = self.applied(factor.operator, current)
                    continue
                current = self.letter(factor, current)
            if operator.normalisation == "balanced":
                c = c * normalising(word, self.n)
            found.append(scaled(current, c))
        return added(found)


def scaled(form: Form, factor: Scalar) -> Form:
    """The product with a scalar."""
    return {window: f * factor for window, f in form.items()}


def added(forms: list[Form] | tuple[Form, ...]) -> Form:
    """The sum, without zeros."""
    collected: dict[Window, list[Scalar]] = {}
    for form in forms:
        for window, f in form.items():
            collected.setdefault(window, []).append(f)
    sums = {window: total(fs) for window, fs in collected.items()}
    return {window: f for window, f in sums.items() if not f.is_zero}


def is_zero_operator(operator: Operator) -> bool:
    """Whether a sum of words in X, T, Y, T_pi, tau_i, tau_pi is 0; raises Mixed for others."""
    localisation = _Localisation(operator.n, operator.ring())
    one: Form = {tuple(range(1, operator.n + 1)): Scalar.one(localisation.ring)}
    return not localisation.applied(operator, one)
