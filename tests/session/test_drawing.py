"""Pictures: boxes counted by other formulas, arms and legs against norms, SVG that is XML."""

from __future__ import annotations

import xml.etree.ElementTree as tree
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from many_cases import outcome_of
from spanwright.drawing import arm_and_leg, as_svg, as_text, picture
from spanwright.kernel import indices
from spanwright.session import Session

_permutations = st.integers(2, 7).flatmap(lambda n: st.permutations(range(1, n + 1)).map(tuple))


@given(_permutations)
def test_a_permutation_has_a_box_for_each_inversion(w: tuple[int, ...]) -> None:
    drawn = picture(w)
    boxes = [(b.row, b.column) for b in drawn.boxes]
    assert len(set(boxes)) == len(boxes) == indices.length(w)
    # the rows of the diagram are the code
    assert tuple(sum(1 for r, _ in boxes if r == i) for i in range(len(w))) == indices.code(w)
    assert as_text(drawn).count("o") >= len(w)


@given(st.lists(st.integers(0, 5), min_size=1, max_size=5).map(tuple))
def test_a_composition_has_as_many_boxes_as_its_size(mu: tuple[int, ...]) -> None:
    drawn = picture(mu, "E")
    assert len(drawn.boxes) == sum(mu)
    assert all(line.startswith("#") for line in as_text(drawn).splitlines())
    tree.fromstring(as_svg(drawn))


@pytest.mark.parametrize("mu", [(0, 1, 0), (2, 0, 1), (1, 0, 2), (0, 2, 2), (3, 1, 0)])
def test_arms_and_legs_give_the_norm(mu: tuple[int, ...]) -> None:
    """<E_mu,E_mu>/<1,1> by boxes (Haglund, Haiman, Loehr 2008), against the norm by recursion."""
    n = len(mu)
    factors = []
    for i, height in enumerate(mu):
        for j in range(1, height + 1):
            a, leg = arm_and_leg(mu, i, j)
            factors.append(f"(1 - q^{leg + 1} t^{a})/(1 - q^{leg + 1} t^{a + 1})")
    for i, part in enumerate(indices.decreasing(mu), 1):
        for j in range(1, part + 1):
            factors.append(f"(1 - q^{j} t^{n + 1 - i})/(1 - q^{j} t^{n - i})")
    shown = ",".join(map(str, mu))
    session = Session(n=n)
    assert session.run(f"claim norm(E_({shown})) = {' '.join(factors)}").status == "ok"


def test_the_sentence_draws_in_text_and_in_svg(tmp_path: Path) -> None:
    shown = outcome_of("draw (2,0,1)").text
    assert "| 2,1 |     | 0,0 |" in shown and shown.startswith("# (2,0,1)")
    outcome = outcome_of('draw x_1 E_(1,0,2) to "support.svg"', folder=tmp_path)
    assert outcome.status == "ok"
    root = tree.parse(tmp_path / "support.svg").getroot()
    words = [element.text for element in root.iter("{http://www.w3.org/2000/svg}text")]
    assert "E_(3,0,1)" in words


@pytest.mark.parametrize("text", ["draw q", "draw (100,0)", "draw (-1,0)", "draw 0 x_1"])
def test_what_cannot_be_drawn_is_an_error(text: str) -> None:
    assert outcome_of(text).status == "error"
