"""Operator words: closed rules on E_mu against monomials, and straightening to canonical form."""

from __future__ import annotations

from random import Random

from benchmarking import Case
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import orbit
from spanwright.kernel.operators.actions import act, act_on_polynomial
from spanwright.kernel.operators.canonical import straighten
from spanwright.kernel.operators.words import Operator


def _letter(n: int, kind: str, subscript: int | None = None) -> Operator:
    return Operator.letter(n, kind, subscript)


def _random_word(random: Random, n: int, length: int) -> Operator:
    word = Operator.identity(n)
    for _ in range(length):
        kind = random.choice("XYT")
        position = random.randint(1, n - 1 if kind == "T" else n)
        word = word * _letter(n, kind, position) ** random.choice((1, -1))
    return word


def _action(name: str, what: str, operator: Operator, indices: list[tuple[int, ...]]) -> Case:
    basis = family("E")
    n = operator.n
    elements = [Expansion.element(basis, n, mu) for mu in indices]
    polynomials = [element.to_monomials() for element in elements]

    def closed() -> object:
        return [act(operator, element) for element in elements]

    def by_monomials() -> object:
        return [
            Expansion(basis, n, basis.from_monomials(act_on_polynomial(operator, f)))
            for f in polynomials]

    closed_images, images = closed(), by_monomials()
    assert closed_images == images
    return Case(
        name=name,
        what=what,
        contenders=[("closed rules", closed), ("expanded, then re-expanded", by_monomials)],
        answer=lambda images: images,
        n_units=len(elements),
        unit="element",
    )


def cases(is_quick: bool) -> list[Case]:
    """The figures that the issue on operators asks for."""
    n = 4
    whole_orbit = list(orbit((3, 2, 1, 0)))
    if is_quick:
        whole_orbit = whole_orbit[::6]
    word = _letter(n, "T", 1) * _letter(n, "X", 2) * _letter(n, "Y", 1) ** -1
    random = Random(20)
    words = [_random_word(random, 3, 12) for _ in range(5 if is_quick else 40)]
    forms = [straighten(w) for w in words]
    total = straighten(_letter(3, "Y", 1)) + straighten(_letter(3, "Y", 2))
    sum_of_y = total.to_operator() + _letter(3, "T", 1) * _letter(3, "X", 1)
    power = sum_of_y**5

    def letter_by_letter() -> object:
        found = []
        for w in words:
            (factors,) = w.terms
            product = straighten(Operator.identity(3), ("X", "T", "Y"))
            for factor in reversed(factors):
                product = straighten(
                    Operator(3, {(factor,): w.terms[factors]}) * product.to_operator(),
                    ("X", "T", "Y"))
            found.append(product)
        return found

    return [
        _action(
            "operator-word-on-E", "T_1 X_2 Y_1^-1 on the E_mu of the orbit of (3,2,1,0)", word,
            whole_orbit),
        _action(
            "hecke-word-on-E", "T_1 T_2 T_3 Y_2 on the E_mu of the orbit of (3,2,1,0)",
            _letter(n, "T", 1) * _letter(n, "T", 2) * _letter(n, "T", 3) * _letter(n, "Y", 2),
            whole_orbit),
        Case(
            name="straightening",
            what=f"{len(words)} random words of 12 letters X, Y, T for n = 3",
            contenders=[
                ("canonical form", lambda: [straighten(w, ("X", "T", "Y")) for w in words]),
                ("as a product of canonical forms", letter_by_letter),
            ],
            answer=lambda forms: forms,
            n_units=sum(map(len, forms)),
        ),
        Case(
            name="power-of-a-sum",
            what="(Y_1 + Y_2 + T_1 X_1)^5 for n = 3",
            contenders=[
                ("as a product of sums", lambda: straighten(power)),
                ("as a sum of words", lambda: straighten(power.multiplied_out())),
            ],
            answer=lambda form: form,
            n_units=len(straighten(power)),
        ),
    ]
