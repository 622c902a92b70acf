"""Offsets, lines and columns, and the printed form of a diagnostic."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from spanwright_grammar import CODES, Source, Span, error, format_diagnostic


def test_lines_end_in_three_ways() -> None:
    source = Source("ab\ncd\r\nef\rgh")
    assert [source.line_text(line) for line in range(1, source.n_lines + 1)] == [
        "ab", "cd", "ef", "gh",
    ]  # fmt: skip
    assert source.position(source.text.index("f")) == (3, 2)
    assert source.slice(Span(3, 5)) == "cd"


@settings(max_examples=effort(100))
@given(st.text(alphabet="ab\r\n", max_size=40), st.integers(0, 50))
def test_position_agrees_with_splitting_the_text(text: str, offset: int) -> None:
    offset = min(offset, len(text))
    # A second route: a line end inside \r\n is not one, so look only where no \r is cut off.
    if text[offset - 1 : offset + 1] != "\r\n":
        lines = text[:offset].replace("\r\n", "\n").replace("\r", "\n").split("\n")
        assert Source(text).position(offset) == (len(lines), len(lines[-1]) + 1)
    line, column = Source(text).position(offset)
    assert Source(text).offset(line, column) == offset


def test_offsets_outside_are_moved_inside() -> None:
    assert Source("abc").position(99) == (1, 4)
    assert Source("abc").position(-1) == (1, 1)
    assert Source("").line_text(1) == ""


def test_a_diagnostic_points_at_its_text() -> None:
    source = Source("fix n = 3\nx_2 E_(1,0)", "a.span")
    found = error(
        "wrong-number-of-parts",
        Span(14, 21),
        "E_(1,0) has 2 parts, the ring has n = 3",
        "E_(1,0,0)",
    )
    assert format_diagnostic(source, found) == (
        "line 2, column 5: E_(1,0) has 2 parts, the ring has n = 3\n"
        "  x_2 E_(1,0)\n"
        "      ^~~~~~~\n"
        "  try: E_(1,0,0)"
    )


def _columns(row: str) -> int:
    import unicodedata

    return sum(2 if unicodedata.east_asian_width(letter) in "WF" else 1 for letter in row)


@pytest.mark.parametrize(
    ("text", "offset", "shown"),
    [
        ("\tx @", 3, "      ^"),  # a tab takes four columns
        ("漢 @", 2, "   ^"),  # a wide letter takes two
        ("e\u0301 @", 3, "  ^"),  # a combining accent takes none
    ],
)
def test_the_caret_stands_below_wide_and_narrow_characters(
    text: str, offset: int, shown: str
) -> None:
    rows = format_diagnostic(Source(text), error("invalid-character", Span(offset, offset + 1), ""))
    assert rows.split("\n")[2] == "  " + shown


@settings(max_examples=effort(100))
@given(
    st.text(alphabet="x+ \t漢\u0301\x1b", min_size=1, max_size=400),
    st.integers(0, 400),
    st.integers(0, 300),
)
def test_long_lines_are_cut_around_the_caret(text: str, start: int, length: int) -> None:
    start = min(start, len(text))
    found = error("unexpected-text", Span(start, start + length), "m")
    rows = format_diagnostic(Source(text), found).split("\n")
    assert all(_columns(row) <= 100 for row in rows)
    assert rows[2].strip().startswith("^") and "\x1b" not in rows[1]


def test_the_cut_line_keeps_the_marked_text() -> None:
    text = "x_1 + " * 100 + "@ " + "x_1 + " * 100
    rows = format_diagnostic(Source(text), error("invalid-character", Span(600, 601), "m")).split(
        "\n"
    )
    assert rows[1][rows[2].index("^")] == "@"
    assert rows[1].startswith("  … ") and rows[1].endswith(" …")


def test_codes_read_as_english() -> None:
    for code, meaning in CODES.items():
        assert code == code.lower() and code.replace("-", "").isalpha()
        assert meaning[0].isupper() and meaning.endswith(".")
