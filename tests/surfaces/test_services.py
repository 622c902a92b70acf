"""The services that shell and language server share, asked with a cursor mark in the text."""

from __future__ import annotations

from pathlib import Path

import pytest

from spanwright import Session, services, settings
from spanwright.rendering import forms
from spanwright.replies import State
from spanwright_grammar.vocabulary import FORMS, by_kind

CURSOR = "▮"
STATE = State(3, None, ("a",), {"f": "a polynomial", "mu": "an index"}, 4)


def split(text: str) -> tuple[str, int]:
    """The text without its mark, and where the mark stood."""
    return text.replace(CURSOR, ""), text.index(CURSOR)


def inserts(text: str, state: State = STATE, folder: Path | None = None) -> list[str]:
    """What completion would insert at the mark."""
    return [found.insert for found in services.complete(*split(text), state, folder)]


def test_completion_knows_the_session_and_the_text_before() -> None:
    assert inserts("E_(1,▮") == ["0,0)", "mu"]
    assert inserts("fix n = 5; E_(1,▮")[0] == "0,0,0,0)"
    assert inserts("let nu = (1,0,2)\nx_1 n▮")[0] == "nu"
    assert inserts("eq_▮") == ["4", "3", "2", "1"]
    assert "a" in inserts("f at ▮")


def test_completion_lists_scripts_and_folders(tmp_path: Path) -> None:
    for name in ("lemmas.span", "notes.txt", ".hidden.span"):
        (tmp_path / name).write_text("1")
    (tmp_path / "lib").mkdir()
    (tmp_path / "lib" / "keys.span").write_text("1")
    assert inserts('use "▮', folder=tmp_path) == ['lemmas.span"', "lib/"]
    assert inserts('use "lib/▮', folder=tmp_path) == ['lib/keys.span"']
    assert inserts('use "none/▮', folder=tmp_path) == []


def test_signature_and_hover_know_the_session() -> None:
    found = services.signature(*split("inner(f, ▮"), STATE)
    assert found is not None and (found.label, found.part) == ("inner(f, g)", 2)
    shown = services.hover(*split("2 mu▮"), STATE)
    assert shown is not None and shown.text == "mu: an index"
    assert services.hover(*split("2 ▮zork"), STATE) is None


def test_diagnostics_know_the_session() -> None:
    found = services.diagnostics("f + g", STATE)
    assert [(item.code, item.span) for item in found] == [("unknown-name", (4, 5))]
    assert services.diagnostics("f + a q mu_1", STATE) == ()


@pytest.mark.parametrize(
    ("text", "codes"),
    [
        # Still being typed: nothing to complain of.
        ("x_1 +▮", []),
        ("E_(1,▮", []),
        ("zor▮", []),
        ('remark "half▮', []),
        ("for i in 1..2:▮", []),
        ("\\kap▮", []),
        ("fix▮", []),
        # Behind the cursor, or before it: said at once.
        ("zork +▮", ["unknown-name"]),
        ("E_(1,0) + (x_1▮", ["wrong-number-of-parts"]),
        ("x_1)▮ + 2", ["unmatched-bracket"]),
        ("E_(1,0)▮", ["wrong-number-of-parts"]),
        ("x_1 $ 2▮", ["invalid-character"]),
    ],
)
def test_what_is_still_being_typed_is_no_fault(text: str, codes: list[str]) -> None:
    whole, offset = split(text)
    found = services.diagnostics_while_typing(whole, offset, STATE)
    assert [item.code for item in found] == codes


@pytest.mark.parametrize(
    "text", ["E_(1,0)", "x_4", "T_3 x_1", "zork", "x_1 +", "fix nn = 3", "tau_3 x_1",
             "E_12", "E_1", "atom_2000", "eps_4", "fix show = shrt", "fix hecke = 2",
             "show x_1 as latx", "expnad x_1 in E", "cliam x_1 = x_1"]
)
def test_what_is_found_early_is_what_the_session_finds(text: str) -> None:
    (early,) = services.diagnostics(text, State(3, None, (), {}, 0))
    (late,) = Session(n=3).run(text).diagnostics
    assert (early.code, early.message, early.hints[:1]) == (
        late.code, late.message, late.hints[:1]
    )


@pytest.mark.parametrize("setting", [entry.name for entry in by_kind("setting")])
def test_what_is_proposed_for_a_setting_is_taken(setting: str) -> None:
    for value in inserts(f"fix {setting} = ▮"):
        if setting in ("q", "t") and value not in ("free", "q", "t"):
            continue  # expressions: any name that may begin one
        outcome = Session(n=3).run(f"fix {setting} = {value}")
        is_itself = setting == value
        assert is_itself or outcome.status == "ok", (setting, value, outcome.text)
    is_free = Session(n=3).run(f"fix {setting} = free").status == "ok"
    assert is_free == ("free" in inserts(f"fix {setting} = ▮"))


def test_the_words_of_settings_and_forms_are_those_that_are_taken() -> None:
    for name, words in settings.WORDS.items():
        (entry,) = (found for found in by_kind("setting") if found.name == name)
        assert all(word in entry.inputs for word in words)
        for word in words:
            assert Session(n=3).run(f"fix {name} = {word}").status == "ok"
    assert set(FORMS) == set(forms.NAMES)
