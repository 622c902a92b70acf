"""Offsets and the protocol's positions, in all three encodings, on texts full of wide letters."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from lsprotocol import types

from spanwright.server.positions import Positions, single_lines
from spanwright_grammar.source import Source

ENCODINGS = ("utf-8", "utf-16", "utf-32")
CODECS = {"utf-8": ("utf-8", 1), "utf-16": ("utf-16-le", 2), "utf-32": ("utf-32-le", 4)}
TEXTS = st.text(
    st.sampled_from("aμ∑é\u0301\U0001d465\U0001f984\n\r\t \u2028") | st.characters(), max_size=40
)


@pytest.mark.parametrize("encoding", ENCODINGS)
@given(text=TEXTS)
def test_every_offset_survives_the_way_out_and_back(encoding: str, text: str) -> None:
    positions = Positions(Source(text), encoding)
    for offset in range(len(text) + 1):
        if text[max(offset - 1, 0) : offset + 1] == "\r\n":
            continue  # inside a line end there is no position
        assert positions.offset(positions.position(offset)) == offset


@pytest.mark.parametrize("encoding", ENCODINGS)
@given(text=TEXTS.filter(lambda text: not any("\ud800" <= c <= "\udfff" for c in text)))
def test_positions_count_units_of_the_encoding(encoding: str, text: str) -> None:
    positions = Positions(Source(text), encoding)
    codec, width = CODECS[encoding]
    for offset in range(len(text) + 1):
        before = text[:offset].replace("\r\n", "\n").replace("\r", "\n")
        if text[max(offset - 1, 0) : offset + 1] == "\r\n":
            continue
        last = before.rpartition("\n")[2]
        expected = types.Position(before.count("\n"), len(last.encode(codec)) // width)
        assert positions.position(offset) == expected


@pytest.mark.parametrize(
    ("encoding", "character", "expected"),
    [
        ("utf-8", 2, 0), ("utf-8", 4, 1), ("utf-8", 6, 2), ("utf-8", 99, 2),
        ("utf-16", 1, 0), ("utf-16", 2, 1), ("utf-16", 3, 2), ("utf-32", 1, 1),
    ],
)  # fmt: skip
def test_a_position_inside_a_letter_is_moved_before_it(
    encoding: str, character: int, expected: int
) -> None:
    positions = Positions(Source("\U0001d465μ\nx"), encoding)
    assert positions.offset(types.Position(0, character)) == expected


def test_positions_outside_the_text_are_moved_into_it() -> None:
    positions = Positions(Source("ab\ncd"), "utf-16")
    assert positions.offset(types.Position(7, 0)) == 5
    assert positions.offset(types.Position(0, 9)) == 2
    assert positions.span(types.Range(types.Position(1, 1), types.Position(0, 1))) == (1, 4)


def test_a_stretch_is_cut_at_line_ends() -> None:
    source = Source('x "a\r\nb\n\nc" y')
    assert single_lines(source, 2, 11) == [(2, 4), (6, 7), (9, 11)]
    assert single_lines(source, 0, 3) == [(0, 3)]
