"""The dictionary of limits: what the families become at special parameters, as claims that run.

`help limits` prints it; a test runs every claim.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class LimitEntry:
    """One line of the dictionary: family, special values, what it becomes, a claim, a source."""

    family: str
    values: str
    becomes: str
    claim: str
    source: str


_MACDONALD = "I. G. Macdonald, Symmetric Functions and Hall Polynomials (1995), VI"
_ION = "B. Ion, Nonsymmetric Macdonald polynomials and Demazure characters (2003)"
_MASON = "S. Mason, An explicit construction of type A Demazure atoms (2009)"
_FILLINGS = (
    "J. Haglund, M. Haiman, N. Loehr, A combinatorial formula for nonsymmetric Macdonald "
    "polynomials (2008)")
_STANLEY = "R. Stanley, Some combinatorial properties of Jack symmetric functions (1989)"
_FOMIN = "S. Fomin, A. N. Kirillov, Grothendieck polynomials and the Yang-Baxter equation (1994)"
_NOTES = "I. G. Macdonald, Notes on Schubert Polynomials (1991)"

LIMITS: tuple[LimitEntry, ...] = (
    LimitEntry(
        "P", "q = t", "Schur s",
        "claim (P_mu at q = t) = s_mu for mu in partitions(4)", _MACDONALD),
    LimitEntry(
        "P", "t = 1", "monomial m",
        "claim (P_mu at t = 1) = m_mu for mu in partitions(4)", _MACDONALD),
    LimitEntry(
        "P", "q = 1", "elementary e, conjugate index",
        "claim (P_mu at q = 1) = e_(conjugate(mu)) for mu in partitions(4)", _MACDONALD),
    LimitEntry(
        "P", "q = 0", "Hall-Littlewood: pi_w0 of a product, up to a factor",
        "claim (P_(2,1,0) at q = 0) = pi_(3,2,1) (x_1^2 x_2 (1 - t x_2 x_1^-1) "
        "(1 - t x_3 x_1^-1) (1 - t x_3 x_2^-1))", _MACDONALD),
    LimitEntry(
        "P", "t = 0", "q-Whittaker: E at the increasing index",
        "claim (P_mu at t = 0) = (E_(reverse(mu)) at t = 0) for mu in partitions(4)", _ION),
    LimitEntry(
        "J", "q = t", "product of hooks times Schur s",
        "claim (J_(2,1,0) at q = t) = (1 - t)^2 (1 - t^3) s_(2,1)", _MACDONALD),
    LimitEntry(
        "E", "q = t = 0", "key kappa",
        "claim (E_mu at q = 0, t = 0) = kappa_mu for mu in compositions(3)", _ION),
    LimitEntry(
        "E", "q, t -> infinity", "atom, index and variables reversed",
        "claim (E_mu as q -> infinity as t -> infinity) = (3,2,1) atom_(reverse(mu)) "
        "for mu in compositions(3)", _MASON),
    LimitEntry(
        "E", "t = 1", "monomial x^mu",
        "claim (E_mu at t = 1) = x^mu for mu in compositions(3)", _FILLINGS),
    LimitEntry(
        "E", "q = 0, decreasing index", "monomial x^mu",
        "claim (E_mu at q = 0) = x^mu for mu in partitions(4)", _FILLINGS),
    LimitEntry(
        "E", "q -> infinity, increasing index", "monomial x^mu",
        "claim (E_(reverse(mu)) as q -> infinity) = x^(reverse(mu)) for mu in partitions(4)",
        _FILLINGS),
    LimitEntry(
        "E", "q = 1, increasing index", "elementary e, independent of t",
        "claim (E_(reverse(mu)) at q = 1) = e_(conjugate(mu)) for mu in partitions(4)",
        _FILLINGS),
    LimitEntry(
        "E", "q = t^alpha, t -> 1", "nonsymmetric Jack; P becomes jack",
        "claim (P_(2,1,0) at q = t^2 as t -> 1) = (jack((2,1)) at alpha = 2)", _STANLEY),
    LimitEntry(
        "jack", "alpha = 1", "Schur s",
        "claim (jack(mu) at alpha = 1) = s_mu for mu in partitions(4)", _STANLEY),
    LimitEntry(
        "jack", "alpha -> infinity", "monomial m",
        "claim (jack(mu) as alpha -> infinity) = m_mu for mu in partitions(4)", _STANLEY),
    LimitEntry(
        "jack", "alpha = 0", "elementary e, conjugate index",
        "claim (jack(mu) at alpha = 0) = e_(conjugate(mu)) for mu in partitions(4)", _STANLEY),
    LimitEntry(
        "G", "beta = 0", "Schubert S",
        "claim (G_w at beta = 0) = S_w for w in permutations(3)", _FOMIN),
    LimitEntry(
        "S(x;y)", "y = 0", "Schubert S",
        "claim (S_w(x;y) at y_1 = 0, y_2 = 0) = S_w for w in permutations(3)", _NOTES),
)
