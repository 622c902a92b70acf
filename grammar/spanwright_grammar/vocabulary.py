"""The one table of the language's words: help, completion and the reference are made from it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

Kind = Literal["family", "operator", "function", "set", "parameter", "setting", "sentence", "word"]
KINDS: tuple[Kind, ...] = (
    "family", "operator", "function", "set", "parameter", "setting", "sentence", "word",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Entry:
    """One word: how it is written, what it means, a text that parses, and where it comes from.

    `inputs` says what it takes or, for a setting, which values it may have. A word can have several
    entries of different kinds, as `s` has: a reflection and a family.
    """

    name: str
    kind: Kind
    signature: str
    meaning: str
    example: str
    source: str
    aliases: tuple[str, ...] = ()
    inputs: str = ""


# The words that a setting may have; numbers are told by the setting's example.
SETTING_WORDS: dict[str, tuple[str, ...]] = {
    "convention": ("standard", "reversed"),
    "hecke": ("plain", "balanced"),
    "show": ("short", "factored", "expanded"),
    "certainty": ("exact", "random"),
    "counterexamples": ("all", "first"),
}
# The forms of `show … as` and `write … as`, and what each is for.
FORMS: dict[str, str] = {
    "text": "the language itself: pastes back",
    "latex": "for a paper",
    "json": "for programs",
    "html": "for a page",
    "sympy": "for sympy, which reads it back",
    "csv": "for a table, one row a term",
}

_PRACTICE = "common practice"
_OURS = "ours"
_SYMMETRIC = "I. G. Macdonald, Symmetric Functions and Hall Polynomials, 2nd edition, 1995"
_AFFINE = "I. G. Macdonald, Affine Hecke Algebras and Orthogonal Polynomials, 2003"
_CHEREDNIK = "I. Cherednik, Double Affine Hecke Algebras, 2005"
_FILLINGS = (
    "J. Haglund, M. Haiman, N. Loehr, A combinatorial formula for nonsymmetric Macdonald "
    "polynomials, 2008"
)
_RECURSION = "F. Knop, S. Sahi, A recursion and a combinatorial formula for Jack polynomials, 1997"
_SCHUBERT = "A. Lascoux, M.-P. Schützenberger, Polynômes de Schubert, 1982"
_GROTHENDIECK = (
    "A. Lascoux, M.-P. Schützenberger, Structure de Hopf de l'anneau de cohomologie et de l'anneau "
    "de Grothendieck d'une variété de drapeaux, 1982"
)
_NOTES = "I. G. Macdonald, Notes on Schubert Polynomials, 1991"
_KEYS = "V. Reiner, M. Shimozono, Key polynomials and a flagged Littlewood-Richardson rule, 1995"
_ATOMS = "S. Mason, An explicit construction of type A Demazure atoms, 2009"
_DEMAZURE = "M. Demazure, Désingularisation des variétés de Schubert généralisées, 1974"
_DIFFERENCES = (
    "I. N. Bernstein, I. M. Gelfand, S. I. Gelfand, Schubert cells and cohomology of the spaces "
    "G/P, 1973"
)
_LUSZTIG = "G. Lusztig, Affine Hecke algebras and their graded version, 1989"

VOCABULARY: tuple[Entry, ...] = (
    # Families.
    Entry(
        "x", "family", "x_i", "the i-th variable; products and negative powers are monomials",
        "x_1^2 x_3^-1", _PRACTICE, inputs="a position",
    ),
    Entry(
        "y", "family", "y_i", "the i-th variable of the second alphabet",
        "x_1 - y_1", _NOTES, inputs="a position",
    ),
    Entry(
        "E", "family", "E_mu, E_(mu|w)",
        "nonsymmetric Macdonald polynomial, with a permuted basement behind the bar",
        "E_(2,0,1)", _FILLINGS, inputs="a composition, negative parts allowed",
    ),
    Entry(
        "P", "family", "P_lambda", "symmetric Macdonald polynomial, monic",
        "P_(2,1,0)", _SYMMETRIC, inputs="a partition",
    ),
    Entry(
        "J", "family", "J_lambda", "integral form of the symmetric Macdonald polynomial",
        "J_(2,1,0)", _SYMMETRIC, inputs="a partition",
    ),
    Entry(
        "m", "family", "m_lambda", "monomial symmetric polynomial",
        "m_(2,1,0)", _SYMMETRIC, inputs="a partition",
    ),
    Entry(
        "e", "family", "e_k, e_lambda", "elementary symmetric polynomial",
        "e_2 E_(1,0,2)", _SYMMETRIC, inputs="a position or a partition",
    ),
    Entry(
        "h", "family", "h_k, h_lambda", "complete homogeneous symmetric polynomial",
        "h_2", _SYMMETRIC, inputs="a position or a partition",
    ),
    Entry(
        "p", "family", "p_k, p_lambda", "power sum",
        "p_2 - p_1^2", _SYMMETRIC, inputs="a position or a partition",
    ),
    Entry(
        "s", "family", "s_lambda",
        "Schur polynomial; with a position as its subscript, s is a reflection",
        "s_(2,1,0)", _SYMMETRIC, inputs="a partition",
    ),
    Entry(
        "S", "family", "S_w, S_w(x;y)", "Schubert polynomial; double when it has two alphabets",
        "S_(2,1,3)(x;y)", _SCHUBERT, inputs="a permutation",
    ),
    Entry(
        "G", "family", "G_w", "Grothendieck polynomial with parameter beta",
        "G_(1,3,2)", _GROTHENDIECK, inputs="a permutation",
    ),
    Entry(
        "kappa", "family", "kappa_mu", "key polynomial",
        "kappa_(0,2,1)", _KEYS, aliases=("κ", "\\kappa"), inputs="a composition",
    ),
    Entry(
        "atom", "family", "atom_mu", "Demazure atom",
        "atom_(0,2,1)", _ATOMS, inputs="a composition",
    ),
    # Operators.
    Entry(
        "X", "operator", "X_i", "multiplies by x_i; has an inverse",
        "T_1 X_1 T_1", _AFFINE, inputs="a position",
    ),
    Entry(
        "s", "operator", "s_i", "exchanges the variables x_i and x_(i+1); also acts on indices",
        "s_1 x_1^2", _PRACTICE, inputs="a position from 1 to n - 1",
    ),
    Entry(
        "d", "operator", "d_i, d_w", "divided difference",
        "d_1 x_1^3", _DIFFERENCES, aliases=("∂", "\\partial"),
        inputs="a position from 1 to n - 1, or a permutation",
    ),
    Entry(
        "pi", "operator", "pi_i, pi_w", "isobaric divided difference",
        "pi_1 x_1^3", _DEMAZURE, aliases=("π", "\\pi"),
        inputs="a position from 1 to n - 1, or a permutation",
    ),
    Entry(
        "T", "operator", "T_i, T_w", "Demazure-Lusztig operator; has an inverse",
        "T_1^-1 E_(0,1,2)", _LUSZTIG, inputs="a position from 1 to n - 1, or a permutation",
    ),
    Entry(
        "T_pi", "operator", "T_pi", "the operator that turns the variables round, q times the last",
        "T_pi x_1", _AFFINE, aliases=("T_π", "T_\\pi"),
    ),
    Entry(
        "Y", "operator", "Y_i", "Cherednik operator; has an inverse",
        "Y_1 E_(1,0,2)", _CHEREDNIK, inputs="a position",
    ),
    Entry(
        "tau", "operator", "tau_i", "intertwiner: takes E_mu to a multiple of E_(s_i mu)",
        "tau_1 E_(2,0,1)", _RECURSION, aliases=("τ", "\\tau"),
        inputs="a position from 1 to n - 1",
    ),
    Entry(
        "tau_pi", "operator", "tau_pi", "affine intertwiner: raises the degree by one",
        "tau_pi E_(2,0,1)", _RECURSION, aliases=("τ_π", "\\tau_\\pi"),
    ),
    Entry(
        "symmetrizer", "operator", "symmetrizer", "the sum of all T_w",
        "symmetrizer x_1^2", _AFFINE,
    ),
    Entry(
        "antisymmetrizer", "operator", "antisymmetrizer",
        "the sum of all T_w, each with its sign and its power of t",
        "antisymmetrizer x_1^2 x_2", _AFFINE,
    ),
    # Functions.
    Entry(
        "degree", "function", "degree(f)", "the highest total degree in x",
        "degree(x_1 E_(1,0,2))", _PRACTICE, inputs="a polynomial or an expansion",
    ),
    Entry(
        "support", "function", "support(f)", "the indices with a coefficient that is not zero",
        "support(x_1 E_(1,0,2))", _PRACTICE, inputs="an expansion",
    ),
    Entry(
        "leading", "function", "leading(f)", "the term that comes last in the family's order",
        "leading(E_(0,2,1))", _PRACTICE, inputs="an expansion",
    ),
    Entry(
        "monomial", "function", "monomial(mu)", "the monomial with the exponents mu",
        "monomial((1,0,2))", _PRACTICE, inputs="a composition",
    ),
    Entry(
        "sort", "function", "sort(mu)", "the parts in weakly decreasing order",
        "sort((0,2,1))", _PRACTICE, inputs="a composition",
    ),
    Entry(
        "reverse", "function", "reverse(mu)", "the parts from last to first",
        "reverse((0,2,1))", _PRACTICE, inputs="a composition",
    ),
    Entry(
        "conjugate", "function", "conjugate(lambda)",
        "the partition with rows and columns exchanged",
        "conjugate((3,1))", _SYMMETRIC, inputs="a partition",
    ),
    Entry(
        "code", "function", "code(w)", "how many smaller entries stand behind each entry",
        "code((3,1,2))", _NOTES, inputs="a permutation",
    ),
    Entry(
        "length", "function", "length(w)", "the number of inversions",
        "length((3,1,2))", _NOTES, inputs="a permutation",
    ),
    Entry(
        "inverse", "function", "inverse(w)", "the inverse permutation",
        "inverse((3,1,2))", _PRACTICE, inputs="a permutation",
    ),
    Entry(
        "inner", "function", "inner(f, g)", "the pairing for which the E_mu are orthogonal",
        "inner(E_(1,0), E_(0,1))", _AFFINE, inputs="two polynomials or expansions",
    ),
    Entry(
        "norm", "function", "norm(E_mu)", "the pairing of a basis element with itself",
        "norm(E_(2,0,1))", _AFFINE, inputs="a basis element of E or P",
    ),
    Entry(
        "eigenvalue", "function", "eigenvalue(A, f)", "the scalar c with A f = c f",
        "eigenvalue(Y_2, E_(1,0,2))", _PRACTICE, inputs="an operator and an expansion",
    ),
    Entry(
        "principal", "function", "principal(E_mu)", "the value at x = (1, t, t^2, …)",
        "principal(E_(2,0,1))", _SYMMETRIC, inputs="a basis element",
    ),
    Entry(
        "hooks", "function", "hooks(mu)", "the arm and leg lengths of every box",
        "hooks((2,1,0))", _SYMMETRIC, inputs="a composition",
    ),
    Entry(
        "kostka", "function", "kostka(lambda, mu), kostka(lambda, mu, q, t)",
        "the number of semistandard tableaux; with one scalar behind it the Kostka-Foulkes "
        "polynomial there, with two the q,t-Kostka polynomial",
        "kostka((2,1), (1,1,1), q, t)", _SYMMETRIC,
        inputs="two partitions of one size, and the values of the parameters",
    ),
    Entry(
        "double", "function", "double(f)", "f expanded in the double Schubert polynomials S_w(x;y)",
        "double(x_1^2)", _NOTES, inputs="a polynomial or an expansion",
    ),
    Entry(
        "jack", "function", "jack(lambda)", "Jack polynomial with parameter alpha",
        "jack((2,1,0))", "H. Jack, A class of symmetric polynomials with a parameter, 1970",
        inputs="a partition",
    ),
    Entry(
        "symmetric", "function", "symmetric(f)", "does every exchange of variables leave f alone?",
        "symmetric(x_1 + x_2)", _PRACTICE, inputs="a polynomial or an expansion",
    ),
    Entry(
        "positive", "function", "positive(f, B)",
        "are all coefficients of f in the basis B polynomials with coefficients in N?",
        "positive(J_(2,1,0), s)", _PRACTICE, inputs="a polynomial and a family",
    ),
    Entry(
        "stable", "function", "stable(f)",
        "does f stay the same when a variable x_(n+1) = 0 is added?",
        "stable(P_(2,1,0))", _SYMMETRIC, inputs="an expansion",
    ),
    Entry(
        "commutator", "function", "commutator(A, B)", "A B - B A",
        "commutator(Y_1, X_1)", _PRACTICE, inputs="two operators",
    ),
    Entry(
        "matrix", "function", "matrix(A, list)", "the matrix of an operator on the span of a list",
        "matrix(T_1, list(E_mu for mu in orbit((2,1,0))))", _PRACTICE,
        inputs="an operator and a list of basis elements",
    ),
    Entry(
        "numerator", "function", "numerator(c)", "the numerator in lowest terms",
        "numerator((1 - q^2)/(1 - q))", _PRACTICE, inputs="a scalar",
    ),
    Entry(
        "denominator", "function", "denominator(c)", "the denominator in lowest terms",
        "denominator(t/(1 - q t))", _PRACTICE, inputs="a scalar",
    ),
    Entry(
        "list", "function", "list(f for mu in M)", "the values in the order of the index set",
        "list(E_mu for mu in orbit((2,1,0)))", _PRACTICE, inputs="values, or one for each index",
    ),
    Entry(
        "count", "function", "count(M)", "the number of elements",
        "count(partitions(6))", _PRACTICE, inputs="an index set or a list",
    ),
    Entry(
        "max", "function", "max(a, b)", "the largest of several integers",
        "max(1, 3, 2)", _PRACTICE, inputs="integers, a list, or an index",
    ),
    Entry(
        "min", "function", "min(a, b)", "the smallest of several integers",
        "min(1, 3, 2)", _PRACTICE, inputs="integers, a list, or an index",
    ),
    Entry(
        "abs", "function", "abs(a)", "the absolute value of an integer",
        "abs(1 - 3)", _PRACTICE, inputs="an integer",
    ),
    # Index sets.
    Entry(
        "compositions", "set", "compositions(k)", "weak compositions of k into n parts",
        "for mu in compositions(2): claim |mu| = 2", _PRACTICE, inputs="an integer",
    ),
    Entry(
        "partitions", "set", "partitions(k)", "partitions of k into at most n parts",
        "count(partitions(4))", _PRACTICE, inputs="an integer",
    ),
    Entry(
        "permutations", "set", "permutations(n)", "permutations of 1, …, n in one-line form",
        "find w in permutations(3) where length(w) = 2", _PRACTICE, inputs="an integer",
    ),
    Entry(
        "subsets", "set", "subsets(M)", "all subsets of a set",
        "count(subsets(1..3))", _PRACTICE, inputs="a set of integers",
    ),
    Entry(
        "orbit", "set", "orbit(mu)", "all rearrangements of the parts of mu",
        "list(E_mu for mu in orbit((2,1,0)))", _PRACTICE, inputs="a composition",
    ),
    # Parameters.
    Entry("q", "parameter", "q", "the first parameter of the scalars", "1 - q^2 t", _SYMMETRIC),
    Entry(
        "t", "parameter", "t", "the second parameter of the scalars; t^(1/2) is a scalar too",
        "t^(1/2) - t^(-1/2)", _SYMMETRIC,
    ),
    Entry(
        "alpha", "parameter", "alpha", "the parameter of Jack polynomials",
        "jack((1,1)) at alpha = 2", _SYMMETRIC, aliases=("α", "\\alpha"),
    ),
    Entry(
        "beta", "parameter", "beta", "the parameter of Grothendieck polynomials",
        "G_(1,3,2) at beta = 0",
        "S. Fomin, A. N. Kirillov, Grothendieck polynomials and the Yang-Baxter equation, 1994",
        aliases=("β", "\\beta"),
    ),
    # Settings.
    Entry(
        "n", "setting", "fix n = k", "the number of variables",
        "fix n = 3", _PRACTICE, inputs="an integer from 1",
    ),
    Entry(
        "q", "setting", "fix q = c", "gives q a value everywhere",
        "fix q = 0", _PRACTICE, inputs="a scalar, or free",
    ),
    Entry(
        "t", "setting", "fix t = c", "gives t a value everywhere",
        "fix t = q^2", _PRACTICE, inputs="a scalar, or free",
    ),
    Entry(
        "basis", "setting", "fix basis = B", "the family in which results are expanded",
        "fix basis = E", _PRACTICE, inputs="a family, x, or free",
    ),
    Entry(
        "convention", "setting", "fix convention = word", "which published convention E_mu follows",
        "fix convention = reversed", _OURS,
        inputs="standard, or reversed: E_mu is the standard E_rev(mu)(x_n, …, x_1; 1/q, 1/t)",
    ),
    Entry(
        "hecke", "setting", "fix hecke = word", "the quadratic relation of the T_i",
        "fix hecke = balanced", _LUSZTIG,
        inputs="plain: (T_i - t)(T_i + 1) = 0; balanced: (T_i - t^(1/2))(T_i + t^(-1/2)) = 0",
    ),
    Entry(
        "show", "setting", "fix show = word", "how coefficients are printed",
        "fix show = factored", _OURS,
        inputs="short: numerators of at most 16 terms, and products of binomials, are factored; "
        "factored: all; expanded: none",
    ),
    Entry(
        "seconds", "setting", "fix seconds = k", "the time that a sentence may take",
        "fix seconds = 60", _OURS, inputs="a number of seconds, or free",
    ),
    Entry(
        "terms", "setting", "fix terms = k", "the number of terms that a result may have",
        "fix terms = 100000", _OURS, inputs="an integer",
    ),
    Entry(
        "memory", "setting", "fix memory = k GB", "the memory that a sentence may take",
        "fix memory = 2 GB", _OURS, inputs="a number with MB or GB, or free",
    ),
    Entry(
        "jobs", "setting", "fix jobs = k", "how many cases are worked on at once",
        "fix jobs = 2", _OURS, inputs="an integer from 1",
    ),
    Entry(
        "certainty", "setting", "fix certainty = word", "whether claims are decided exactly",
        "fix certainty = random", _OURS, inputs="exact, or random: at random points modulo a prime",
    ),
    Entry(
        "counterexamples", "setting", "fix counterexamples = word",
        "whether a `for` goes on behind the first counterexample",
        "fix counterexamples = first", _OURS, inputs="all: it goes on; first: it stops there",
    ),
    Entry(
        "seed", "setting", "fix seed = k", "where the random points start",
        "fix seed = 7", _OURS, inputs="an integer",
    ),
    # Sentences.
    Entry(
        "fix", "sentence", "fix n = 3", "sets the ambient ring or another setting",
        "fix n = 3", _PRACTICE,
    ),
    Entry(
        "let", "sentence", "let f = …, let c(a,b) = …, let F_mu = …, let a, b be parameters",
        "defines a value, a function, an indexed family, or parameters",
        "let c(a,b) = (1 - q^a t^b)/(1 - q^(a+1) t^b)", _PRACTICE,
    ),
    Entry(
        "expand", "sentence", "expand f in B",
        "expands in a basis, or in an algebra's canonical form",
        "expand x_1 x_2 in E", _PRACTICE,
    ),
    Entry(
        "claim", "sentence", "claim f = g", "decides an identity; when false, shows the difference",
        "claim T_1 X_1 T_1 = t X_2", _PRACTICE,
    ),
    Entry(
        "for", "sentence", "for i in M where …: …",
        "runs a sentence, or a block up to `end`, for each index",
        "for i in 1..2: claim T_i X_i T_i = t X_(i+1)", _PRACTICE,
    ),
    Entry(
        "end", "sentence", "end", "closes the block of a `for`",
        "for i in 1..2:\n  claim Y_i Y_3 = Y_3 Y_i\nend", _PRACTICE,
    ),
    Entry(
        "find", "sentence", "find mu in M where …", "lists the indices for which a condition holds",
        "find mu in compositions(4) where mu_1 = 2", _OURS,
    ),
    Entry(
        "tabulate", "sentence", "tabulate f for mu in M, … to \"file\"",
        "makes a table of expansions",
        "tabulate x_1 E_mu for mu in compositions(2)", _OURS,
    ),
    Entry(
        "derive", "sentence", "derive f, derive A in X, T", "shows the rule used, term by term",
        "derive x_2 E_(1,0,2)", _PRACTICE,
    ),
    Entry(
        "guess", "sentence", "guess c(k) for k in M", "proposes a closed form and checks it",
        "guess c(k) for k in 1..6", _PRACTICE,
    ),
    Entry(
        "draw", "sentence", "draw mu, draw mu to \"file\"", "draws a diagram",
        "draw (2,0,1)", _OURS,
    ),
    Entry(
        "show", "sentence", "show f as form", "shows the whole of a value in another form",
        "show E_(1,0) as latex", _OURS, inputs=f"the forms {', '.join(FORMS)}",
    ),
    Entry(
        "write", "sentence", "write f as form to \"file\"", "writes a value to a file",
        'write E_(1,0) as latex to "f.tex"', _OURS,
        inputs=f"the forms {', '.join(FORMS)}",
    ),
    Entry(
        "use", "sentence", "use \"file\"", "runs another script first, once",
        'use "lemmas.span"', _OURS,
    ),
    Entry(
        "recall", "sentence", "recall, recall 7, recall f", "what has been defined and found",
        "recall 7", _PRACTICE,
    ),
    Entry("forget", "sentence", "forget f, g", "takes definitions back", "forget f", _OURS),
    Entry(
        "remark", "sentence", "remark \"…\"", "a sentence of prose for the log and the report",
        'remark "The first part is the largest."', _PRACTICE,
    ),
    Entry("help", "sentence", "help, help word", "explains a word", "help E", _PRACTICE),
    Entry("quit", "sentence", "quit", "ends the session", "quit", _PRACTICE),
    # Words and signs inside sentences.
    Entry(
        "at", "word", "f at q = 0, t = 1/3", "specialises parameters or variables",
        "E_(1,0) at q = 0, t = 1/3", _PRACTICE,
    ),
    Entry(
        "as", "word", "f as q -> c", "takes the limit; c may be infinity",
        "E_(1,0) as q -> infinity", _PRACTICE, aliases=("->", "→", "\\to"),
    ),
    Entry(
        "infinity", "word", "infinity", "the target of a limit",
        "E_(1,0) as q -> infinity", _PRACTICE, aliases=("∞", "\\infty"),
    ),
    Entry(
        "where", "word", "… where condition", "keeps the indices for which a condition holds",
        "find w in permutations(4) where length(w) = 2", _PRACTICE,
    ),
    Entry(
        "in", "word", "i in M", "membership, binding, and the basis of an expansion",
        "2 in {1,3}", _PRACTICE, aliases=("∈", "\\in"),
    ),
    Entry("be", "word", "let a be a parameter", "declares", "let a, b be parameters", _PRACTICE),
    Entry(
        "parameter", "word", "let a be a parameter", "an element that the scalars may contain",
        "let a be a parameter", _PRACTICE, aliases=("parameters",),
    ),
    Entry(
        "to", "word", "… to \"file\"", "where something is written",
        'draw (2,0,1) to "diagram.svg"', _OURS,
    ),
    Entry("and", "word", "a and b", "both hold", "1 < 2 and 2 < 3", _PRACTICE),
    Entry("or", "word", "a or b", "at least one holds", "1 < 2 or 3 < 2", _PRACTICE),
    Entry("not", "word", "not a", "does not hold", "not 2 < 1", _PRACTICE),
    Entry(
        "sum", "word", "sum_(i in M) f",
        "the sum over an index set of all that stands to its right",
        "sum_(i in 1..n) x_i", _PRACTICE, aliases=("∑", "\\sum"),
    ),
    Entry(
        "prod", "word", "prod_(i in M) f",
        "the product over an index set of all that stands to its right",
        "prod_(i in 1..3) (1 - t^i)", _PRACTICE, aliases=("∏", "\\prod"),
    ),
    Entry(
        "eps", "word", "eps_i", "the index with 1 at position i and 0 elsewhere",
        "(1,0,2) + eps_1", _PRACTICE, aliases=("epsilon", "ε", "\\epsilon"),
    ),
    Entry("eq", "word", "eq_k", "the result with tag (k)", "eq_7 - eq_6", _PRACTICE),
    Entry(
        "read", "word", "read \"file\"", "the value that a file holds",
        'let f = read "f.json"', _OURS,
    ),
    Entry(
        "coefficient", "word", "[E_mu] f", "the coefficient of a basis element in f",
        "[E_(1,0,2)] x_2 E_(1,0,1)", _PRACTICE, aliases=("[",),
    ),
    Entry("size", "word", "|mu|", "the sum of the parts", "|(2,0,1)|", _PRACTICE, aliases=("|",)),
    Entry("part", "word", "mu_i", "the i-th part of an index", "mu_2", _PRACTICE),
    Entry(
        "range", "word", "a..b", "the integers from a to b, both included",
        "count(1..n)", _PRACTICE, aliases=("..",),
    ),
    Entry(
        "set", "word", "{a, b}", "the set of some integers or indices",
        "sum_(i in {1,3}) x_i", _PRACTICE, aliases=("{",),
    ),
)  # fmt: skip

# Words of help pages, which name nothing, and Jack's alpha, which is the usual name of an index.
_FREE = frozenset({"alpha", "coefficient", "size", "part", "range", "set"})
_NAMING_KINDS = frozenset(KINDS) - {"setting"}

RESERVED: frozenset[str] = frozenset(
    {
        word
        for entry in VOCABULARY
        if entry.kind in _NAMING_KINDS and entry.name not in _FREE
        for word in (entry.name, *entry.aliases)
        if word.isascii() and word.isalnum()
    }
    | {"n"}
)


@lru_cache(maxsize=1)
def _index() -> dict[str, tuple[Entry, ...]]:
    index: dict[str, tuple[Entry, ...]] = {}
    for entry in VOCABULARY:
        for word in (entry.name, *entry.aliases):
            index[word] = (*index.get(word, ()), entry)
    return index


def lookup(name: str) -> Entry | None:
    """The first entry of a word or of another spelling of it; nothing when there is none.

    >>> lookup("κ").signature
    'kappa_mu'
    """
    found = lookup_all(name)
    return found[0] if found else None


def lookup_all(name: str) -> tuple[Entry, ...]:
    """All entries of a word or of another spelling of it, in the order of the table."""
    return _index().get(name, ())


def by_kind(kind: str) -> tuple[Entry, ...]:
    """The entries of one kind, in the order of the table."""
    return tuple(entry for entry in VOCABULARY if entry.kind == kind)


def words_like(name: str) -> list[str]:
    """The words that a misspelt name can have meant, near or not.

    Words of one letter only for a name of one letter: they are like all short names. A sentence
    word only with the name's first letter and about its length: many names are like one by chance.
    """
    return [
        entry.name
        for entry in VOCABULARY
        if (
            entry.kind in ("family", "operator", "function", "set", "parameter")
            and (len(entry.name) > 1 or len(name) == 1)
        )
        or (
            entry.kind == "sentence"
            and len(entry.name) > 3
            and entry.name[0] == name[:1]
            and abs(len(entry.name) - len(name)) < 2
        )
    ]
