"""`derive`: the rule that gives an expansion, row by row, vanishing rows with their reason."""

from __future__ import annotations

from typing import Any

from spanwright.context import failure
from spanwright.evaluator import Evaluator
from spanwright.kernel import indices
from spanwright.kernel.errors import KernelError
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families import nonsymmetric_macdonald as macdonald
from spanwright.kernel.families import nonsymmetric_products
from spanwright.kernel.families.registry import family
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering.scalars import scalar_text
from spanwright.rendering.text import element_text, text
from spanwright.values import Table, is_operator, single_element
from spanwright_grammar import syntax

MONK_REFERENCE = (
    "W. Baratta, Pieri-type formulas for nonsymmetric Macdonald polynomials (2009); "
    "T. Halverson, A. Ram, Monk rules for type GL_n Macdonald polynomials (2022)")


def derive(node: syntax.Derive, evaluator: Evaluator) -> Table:
    """The derivation of a product, an expansion or an operator's canonical form as a table."""
    expression = node.expression
    while isinstance(expression, syntax.Group):
        expression = expression.inner
    factors = expression.factors if isinstance(expression, syntax.Product) else ()
    if not factors or any(f.operator == "/" for f in factors):
        return _of_one(evaluator.value(expression), node, evaluator)
    *left_factors, last = factors
    right = evaluator.value(last.node)
    left: Any = None
    for factor in reversed(left_factors):
        value = evaluator.value(factor.node)
        left = value if left is None else evaluator.algebra.multiply(value, left)
    if is_operator(right):
        return _operator_steps(evaluator.value(expression), node, evaluator)
    element = single_element(right)
    if element is None:
        raise _no_rule(node)
    try:
        if is_operator(left):
            found = _operator_on(left, right, *element)
        else:
            found = _product(left, right, *element, evaluator.require_n(node))
    except KernelError as error:
        raise evaluator.placed(error, node.expression) from error
    if found is None:
        raise _no_rule(node)
    return found


def _no_rule(node: syntax.Derive) -> Exception:
    return failure(
        "no-rule-known", node.expression.place,
        "no closed rule is known here for this: derive takes a generator, e_r, h_r or a basis "
        "element times a basis element, a change of basis, or an operator word",
        "derive x_2 E_(1,0,2)", "derive kappa_(0,2,1) in atom")


def _of_one(value: Any, node: syntax.Derive, evaluator: Evaluator) -> Table:
    """An operator word, or one basis element written in others."""
    if is_operator(value):
        return _operator_steps(value, node, evaluator)
    element = single_element(value)
    if element is None:
        raise _no_rule(node)
    name, index = element
    target = node.targets[0] if node.targets else None
    try:
        if name == "kappa" and target in (None, "atom"):
            from spanwright.kernel.families.atoms import key_derivation

            return _laid_out(key_derivation(index), "atom", f"kappa_{text(index)}")
        if name == "S" and target == "kappa":
            from spanwright.kernel.families.keys import schubert_derivation

            n = max(evaluator.require_n(node), value.n)
            return _laid_out(schubert_derivation(index, n), "kappa", _shown("S", value))
        if name == "S" and target in (None, "S"):
            from spanwright.kernel.families.schubert import transition_derivation

            return _laid_out(transition_derivation(index), "S", _shown("S", value))
        if name == "P" and target in (None, "E"):
            return _macdonald_over_orbit(index, evaluator.require_n(node))
    except KernelError as error:
        raise evaluator.placed(error, node.expression) from error
    raise _no_rule(node)


def _shown(name: str, value: Expansion) -> str:
    (index,) = value.terms
    return element_text(name, value.family.show_index(index, value.n))


_WITH_Z = "z = u_i/u_(i+1), u_i = q^(mu_i) t^(v_mu(i)), v_mu(i) the place of mu_i in mu sorted"
_RULES_ON_E = {
    ("T", 1): "T_i E_mu = t E_mu when mu_i = mu_(i+1), else c E_(s_i mu) - (1 - t)/(1 - z) E_mu, "
              "c = 1 when mu_i > mu_(i+1), else (1 - t z) (t - z)/(1 - z)^2; " + _WITH_Z,
    ("T", -1): "T_i^-1 = (T_i + 1 - t)/t, and T_i E_mu = t E_mu when mu_i = mu_(i+1), else "
               "c E_(s_i mu) - (1 - t)/(1 - z) E_mu, c = 1 when mu_i > mu_(i+1), else "
               "(1 - t z) (t - z)/(1 - z)^2; " + _WITH_Z,
    ("Y", 1): "Y_i E_mu = q^(-mu_i) t^(n - v_mu(i)) E_mu, v_mu(i) the place of mu_i in mu sorted",
    ("tau", 1): "tau_i E_mu = 0 when mu_i = mu_(i+1), else c E_(s_i mu), c = 1 when "
                "mu_i > mu_(i+1), else (1 - t z) (t - z)/(1 - z)^2; " + _WITH_Z,
    ("tau_pi", 1): "tau_pi E_mu = q^(-mu_n) E_(mu_n + 1, mu_1, ..., mu_(n-1))",
}
_BALANCED = "; balanced: T_i and tau_i over t^(1/2), Y_i over t^((n-1)/2)"
_ON_E_REFERENCE = (
    "I. Cherednik, Double Affine Hecke Algebras (2005); F. Knop, S. Sahi, A recursion and a "
    "combinatorial formula for Jack polynomials (1997)")


def _letter_on_macdonald(operator: Any, right: Expansion, index: tuple[int, ...]) -> Table | None:
    """T_i^(+-1), X_i^(+-1), Y_i, tau_i or tau_pi on E_mu: the rule, and what it gives here."""
    from spanwright.kernel.operators.actions import act
    from spanwright.rendering.operators import operator_text

    ((word, coefficient),) = operator.terms.items()
    (letter,) = word
    if letter.kind == "X" and coefficient == 1 and sum(map(abs, letter.subscript)) == 1:
        j = next(k for k, e in enumerate(letter.subscript, 1) if e)
        return _monk_table(index, j, letter.subscript[j - 1])
    rule = _RULES_ON_E.get((letter.kind, letter.power))
    if rule is None or (letter.kind == "T" and letter.simple_position() is None) or (
            letter.kind == "Y" and len([e for e in letter.subscript if e]) != 1):
        return None
    found = act(operator, right)
    order = family("E").order_key
    rows = tuple(
        (element_text("E", mu), text(c))
        for mu, c in sorted(found.terms.items(), key=lambda item: order(item[0])))
    suffix = _BALANCED if operator.normalisation == "balanced" else ""
    return Table(
        ("target", "coefficient"), rows or ((element_text("E", index), "0"),),
        f"{operator_text(operator)} {element_text('E', index)}",
        (f"rule: {rule}{suffix}", f"source: {_ON_E_REFERENCE}"))


def _operator_on(
    operator: Any, right: Expansion, name: str, index: tuple[int, ...]
) -> Table | None:
    """pi_i kappa_alpha, T_i E_mu and its kin."""
    if name == "E" and len(operator.terms) == 1 and all(len(w) == 1 for w in operator.terms):
        return _letter_on_macdonald(operator, right, index)
    if name == "kappa" and operator.kinds() == {"pi"} and len(operator.terms) == 1:
        ((word, c),) = operator.terms.items()
        position = word[0].simple_position() if len(word) == 1 else None
        if c == 1 and position is not None:
            from spanwright.kernel.families.keys import isobaric_derivation

            return _laid_out(
                isobaric_derivation(index, position), "kappa",
                f"pi_{position} kappa_{text(index)}")
    return None


def _product(
    left: Any, right: Expansion, name: str, index: tuple[int, ...], n: int
) -> Table | None:
    """A generator, an e_r, h_r, or a basis element times a basis element."""
    generator = _generator(left)
    factor = single_element(left)
    head = f"{_left_text(left)} {_shown(name, right)}"
    if name == "E":
        return _times_macdonald(left, generator, factor, index, n, head)
    if generator is not None and generator[1] == 1:
        found = _generator_rule(name, index, generator[0])
        return None if found is None else _laid_out(found, name, head)
    if factor is None:
        return None
    found = _element_rule(name, index, *factor, n)
    return None if found is None else _laid_out(found, name, head)


def _generator_rule(name: str, index: tuple[int, ...], j: int) -> Any:
    from spanwright.kernel.families import double_schubert, grothendieck, schubert

    rules = {
        "S": schubert.generator_derivation, "G": grothendieck.generator_derivation,
        "double Schubert": double_schubert.generator_derivation}
    return rules[name](index, j) if name in rules else None


def _element_rule(
    name: str, index: tuple[int, ...], left: str, left_index: tuple[int, ...], n: int
) -> Any:
    """The laid-out rule for a product of two basis elements, or None."""
    from spanwright.kernel.families import (
        double_schubert,
        grothendieck,
        macdonald,
        schubert,
        schur,
    )

    if name == "S" and left in ("e", "h") and len(left_index) == 1:
        return schubert.pieri_derivation(index, n, left_index[0], left)
    if name == left == "S":
        row = schubert.as_pieri(left_index)
        if indices.length(left_index) == 1:
            return schubert.monk_derivation(index, schubert.n_variables(left_index))
        if row is not None:
            kind, r, k = row
            return schubert.pieri_derivation(index, r, k, kind)
        return schubert.product_derivation(left_index, index)
    if name == left and name in ("G", "double Schubert") and indices.length(left_index) == 1:
        module = grothendieck if name == "G" else double_schubert
        return module.monk_derivation(index, schubert.n_variables(left_index))
    if name == "s" and left in ("s", "e", "h"):
        shape = left_index
        if left != "s":
            if len(left_index) != 1:
                return None
            shape = left_index if left == "h" else (1,) * left_index[0]
        return schur.derive_product(shape, index, n)
    if name == "P" and left == "e" and len(left_index) == 1:
        return macdonald.derive_e(index, left_index[0], n)
    if name == left == "P" and len(left_index) == 1:
        return macdonald.derive_row(index, left_index[0], n)
    return None


def _generator(value: Any) -> tuple[int, int] | None:
    """Position and power of x_j or x_j^-1, else None."""
    if isinstance(value, LaurentPolynomial) and len(value) == 1:
        (exponents,) = value.terms
        if sum(map(abs, exponents)) == 1 and value.coefficient(exponents) == 1:
            j = next(k for k, e in enumerate(exponents, 1) if e)
            return j, exponents[j - 1]
    return None


def _left_text(value: Any) -> str:
    shown = text(value)
    return f"({shown})" if " + " in shown or " - " in shown else shown


def _laid_out(found: Any, name: str, head: str) -> Table:
    """A rule's rows: what each comes from, its target, its coefficient or why it vanishes."""
    rows = []
    for row in found.rows:
        target = element_text(name, family_of(name).show_index(row.target, len(row.target)))
        coefficient = "0" if row.obstacle else text(row.coefficient)
        rows.append((_origin(row), target, coefficient, row.obstacle or _factors(row)))
    columns = ("from", "target", "coefficient", "factors, or why it vanishes")
    used = [k for k in range(len(columns)) if any(row[k] for row in rows)]
    return Table(
        tuple(columns[k] for k in used), tuple(tuple(row[k] for k in used) for row in rows),
        f"{head}: {found.rule}", (f"rule: {found.statement}", f"source: {found.reference}"))


def family_of(name: str) -> Any:
    """A family by its symbol, double Schubert polynomials included."""
    if name == "double Schubert":
        from spanwright.kernel.families.double_schubert import FAMILIES

        return FAMILIES[name]
    return family(name)


def _origin(row: Any) -> str:
    steps = getattr(row, "steps", None)
    if steps:
        return " ".join(
            f"t_({s[0]},{s[1]})" if len(s) == 2 else f"position {s[0]}" for s in steps)
    letters = getattr(row, "rows", None)
    if letters is not None:  # a tableau, its rows from the top down
        return " / ".join("".join(map(str, letter_row)) or "." for letter_row in letters)
    return ""


def _factors(row: Any) -> str:
    """The factors that are not 1, with a dot between them."""
    shown = [scalar_text(value, as_factor=True)
             for _, value in getattr(row, "factors", ()) if value != 1]
    if len(shown) > 1:
        shown = [f"({s})" if s[0] == "-" else s for s in shown]
    return " · ".join(shown)


def _macdonald_over_orbit(index: tuple[int, ...], n: int) -> Table:
    """P_lambda as a sum of E_mu over the orbit."""
    from spanwright.kernel.families.macdonald import in_nonsymmetric

    terms = in_nonsymmetric(index, n)
    order = family("E").order_key
    rows = tuple(
        (element_text("E", mu), text(terms[mu])) for mu in sorted(terms, key=order))
    return Table(
        ("target", "coefficient"), rows, f"P_{text(index)} over the orbit of its index",
        ("rule: P_lambda = sum of E_mu prod_(i < j, mu_i > mu_j) (t - z)/(1 - z), "
         "z = u_i/u_j, u_i = q^(mu_i) t^(v_mu(i))",
         "source: I. G. Macdonald, Affine Hecke Algebras and Orthogonal Polynomials (2003)"))


def _times_macdonald(
    left: Any, generator: tuple[int, int] | None, factor: tuple[str, tuple[int, ...]] | None,
    index: tuple[int, ...], n: int, head: str,
) -> Table | None:
    """x_j, x_j^-1, e_1, e_r or P_lambda times E_mu."""
    if generator is not None:
        return _monk_table(index, *generator)
    if isinstance(left, LaurentPolynomial) and left == _first_elementary(n):
        factor = ("e", (1,))
    if factor is None or factor[0] not in ("e", "P"):
        return None
    if factor == ("e", (1,)):
        return _rows_table(
            macdonald.monk_rows(index, None),
            f"{head}: one row for each nonempty subset of positions")
    found = nonsymmetric_products.times_E(family(factor[0]), factor[1], index)
    if found is None:
        return None
    order = family("E").order_key
    rows = tuple(
        (element_text("E", mu), text(found[mu])) for mu in sorted(found, key=order))
    return Table(
        ("target", "coefficient"), rows, head,
        ("rule: the symmetric factor in e_1, ..., e_n, each e_r as a sum of products of r "
         "generators, each generator by the closed rule for x_j E_mu (derive x_1 E_mu shows it)",
         f"source: {MONK_REFERENCE}"))


def _first_elementary(n: int) -> LaurentPolynomial:
    ring = macdonald.RING
    return LaurentPolynomial.of_integers(
        n, ring, {tuple(int(k == j) for k in range(n)): 1 for j in range(n)})


def _monk_table(mu: tuple[int, ...], j: int, power: int) -> Table:
    """One row for each subset of positions through j, in the order of size."""
    n = len(mu)
    if power == 1:
        rows = macdonald.monk_rows(mu, j)
    else:
        rows = [_mirrored(row, n)
                for row in macdonald.monk_rows(macdonald.inverted(mu), n + 1 - j)]
    sign = "" if power == 1 else "^-1"
    return _rows_table(
        rows, f"x_{j}{sign} E_{text(mu)}: one row for each subset of positions through {j}")


def _mirrored(row: macdonald.MonkRow, n: int) -> macdonald.MonkRow:
    """A row for x_(n+1-j) E_mu* as the row for x_j^-1 E_mu, by E_mu*(x) = E_mu(1/x)."""
    return macdonald.MonkRow(
        tuple(n + 1 - a for a in reversed(row.subset)), macdonald.inverted(row.target),
        row.factors,
        None if row.obstacle is None else (n + 1 - row.obstacle[0], n + 1 - row.obstacle[1]))


def _rows_table(rows: list[macdonald.MonkRow], caption: str) -> Table:
    lines = []
    for row in rows:
        subset = "{" + ",".join(map(str, row.subset)) + "}"
        target = element_text("E", row.target)
        if row.obstacle is not None:
            a, i = row.obstacle
            lines.append((subset, target, "0",
                          f"vanishes: the part carried from {a} meets its equal at {i}"))
            continue
        lines.append((subset, target, text(row.coefficient), _factors(row)))
    return Table(
        ("subset", "target", "coefficient", "factors, or why it vanishes"), tuple(lines), caption,
        (f"source: {MONK_REFERENCE}",))


def _operator_steps(value: Any, node: syntax.Derive, evaluator: Evaluator) -> Table:
    from spanwright.kernel.operators.derivation import SOURCES
    from spanwright.kernel.operators.derivation import derive as derive_steps
    from spanwright.rendering.operators import operator_text

    try:
        word = value.to_operator() if hasattr(value, "to_operator") else value
        steps = derive_steps(word, node.targets or None)
    except KernelError as error:
        raise evaluator.placed(error, node.expression) from error
    rows = tuple(
        (step.relation, operator_text(step.before), operator_text(step.after)) for step in steps)
    used = {step.relation for step in steps}
    sources = "; ".join(source for relation, source in SOURCES.items() if relation in used)
    return Table(
        ("relation", "before", "after"), rows, "straightening, step by step",
        (f"source: {sources}",) if sources else ())
