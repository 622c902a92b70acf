"""Published values for key polynomials and Demazure atoms, each with its source beside it."""

from __future__ import annotations

import pytest

from spanwright.kernel.families import atoms, keys, schubert
from spanwright.kernel.families.registry import family
from spanwright.kernel.indices import padded, reduced_size
from written import expansion, polynomial

KAPPA, ATOM = family("kappa"), family("atom")


def combination(text: str, n: int):
    return {padded(alpha, n): c for alpha, c in expansion(text).items()}


# kappa_(1,0,2): hand computation. The others recomputed in the design notes by Kohnert diagrams
# and Demazure crystals; no published source claimed.
TABLE = [
    ((2, 1, 0), "x1^2x2", "x1^2x2"),
    ((1, 2, 0), "x1^2x2+x1x2^2", "x1x2^2"),
    ((2, 0, 1), "x1^2x2+x1^2x3", "x1^2x3"),
    ((0, 2, 1), "x1^2x2+x1^2x3+x1x2^2+x1x2x3+x2^2x3", "x1x2x3+x2^2x3"),
    ((1, 0, 2), "x1^2x2+x1^2x3+x1x2^2+x1x2x3+x1x3^2", "x1x2x3+x1x3^2"),
    ((0, 1, 2), "x1^2x2+x1^2x3+x1x2^2+2x1x2x3+x1x3^2+x2^2x3+x2x3^2", "x2x3^2"),
    ((0, 2, 0), "x1^2+x1x2+x2^2", "x1x2+x2^2"),
    ((0, 0, 2), "x1^2+x2^2+x3^2+x1x2+x1x3+x2x3", "x1x3+x2x3+x3^2"),
]


@pytest.mark.parametrize(("alpha", "kappa", "atom"), TABLE)
def test_table(alpha, kappa: str, atom: str) -> None:
    assert KAPPA.to_monomials(alpha, 3) == polynomial(kappa, 3)
    assert ATOM.to_monomials(alpha, 3) == polynomial(atom, 3)


# Lascoux and Schuetzenberger, Keys and standard bases (1990); Reiner and Shimozono, Key
# polynomials and a flagged Littlewood-Richardson rule (1995): the theorem. Values recomputed.
@pytest.mark.parametrize(("w", "text"), [
    ("1432", "kappa_(0,2,1)"),
    ("2143", "kappa_(1,0,1)+kappa_(2)"),
    ("13254", "kappa_(0,1,0,1)+kappa_(0,2)"),
    ("21543", "kappa_(1,0,2,1)+kappa_(2,0,2)+kappa_(3,0,0,1)"),
    ("31524", "kappa_(2,0,2)+kappa_(3,0,1)"),
    ("214365", "kappa_(1,0,1,0,1)+kappa_(2,0,0,0,1)+kappa_(1,0,2)+kappa_(3)"),
])
def test_schubert_in_keys(w: str, text: str) -> None:
    found = keys.from_schubert(reduced_size(tuple(map(int, w))), 5)
    assert schubert.scalars(found) == combination(text, 5)


# Recomputed in the design notes; no published source claimed. The second is the smallest product
# for n = 3 that is not key-positive.
@pytest.mark.parametrize(("alpha", "beta", "text"), [
    ((0, 1, 0), (0, 1, 0), "kappa_(0,2)+kappa_(1,1)"),
    ((0, 1, 0), (1, 0, 1), "kappa_(1,1,1)+kappa_(2,0,1)+kappa_(1,2)-kappa_(2,1)"),
    ((0, 1, 0), (0, 0, 1), "kappa_(0,1,1)+kappa_(0,2)"),
    ((1, 0, 2), (0, 1, 0), "kappa_(1,1,2)+kappa_(2,0,2)+kappa_(3,0,1)+kappa_(1,3)-kappa_(3,1)"),
])
def test_products_of_keys(alpha, beta, text: str) -> None:
    assert schubert.scalars(keys.multiply(alpha, beta)) == combination(text, 3)


def test_a_key_in_atoms() -> None:
    # Lascoux and Schuetzenberger (1990): sum over the Bruhat interval; three of six by hand
    assert set(atoms.from_key((1, 2, 0))) == {(2, 1, 0), (1, 2, 0)}
    assert set(atoms.from_key((1, 0, 2))) == {(2, 1, 0), (1, 2, 0), (2, 0, 1), (1, 0, 2)}
