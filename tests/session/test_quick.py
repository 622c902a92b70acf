"""Sentences that go without a checkpoint are small, and whatever may be large is not among them."""

from __future__ import annotations

import pytest

from spanwright.quick import is_quick
from spanwright.session import Session
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source


def quick(text: str) -> bool:
    """Whether the last sentence of a text is quick, the ones before it carried out."""
    *before, last = parse(Source(text)).sentences
    session = Session(n=3)
    if before:
        session.run(text[: last.place.start])
    return is_quick(last, session.context)


@pytest.mark.parametrize("text", [
    "1 + 1", "x_2 E_(1,0,2)", "E_201", "let f = q^2 x_1", "claim T_1 X_1 T_1 = t X_2", "fix n = 3",
    "remark \"tide\"", "T_pi", "let mu = (1,0,2); x_1 E_mu", "[E_101] E_101", "(1 - q^2)/(1 - t)",
    "derive x_1 E_100", "let k = 2; x_k", "expand x_1 in E", "Y_2 E_(1,0,2)",
])
def test_small_sentences_are_quick(text: str) -> None:
    assert quick(text)


@pytest.mark.parametrize("text", [
    "(x_1 + x_2)^40", "E_(0,3,3)", "x_1 E_(9,0,0)", "2^1000", "2^q", "sum_(i in 1..9) x_1",
    "for i in 1..2: claim i = i", "find i in 1..2 where i = 1", "tabulate i for i in 1..2",
    "let f = x_1; f f", "let c(k) = k; c(1)", "list(1..9)", "E_(1+1,0,0)", "permutations(9)",
    "use \"a.span\"", "write x_1 as text to \"a.txt\"", "9999999999999", "x_1 x_1 x_2 x_2 x_3 x_3",
    "E_111 E_111", "let g = (1 + q + t)^9; g", "fix n = 6; x_1", "fix q = t^9999", "x_1^7",
    "E_201 at q = 0", "E_201 as q -> infinity",
])
def test_what_may_be_slow_is_not(text: str) -> None:
    assert not quick(text)
