"""Sentences in, text out: the one way in which the session's tests ask and compare."""

from __future__ import annotations

from pathlib import Path

from spanwright.files import Folder
from spanwright.session import Outcome, Session
from spanwright_grammar.source import Source


def outcomes(text: str, *, n: int | None = None, folder: Path | None = None) -> list[Outcome]:
    """The outcomes of all sentences of a text in a fresh session."""
    session = Session(n=n) if folder is None else Session(n=n, folder=Folder(folder))
    return list(session.run_all(Source(text)))


def last(text: str, *, n: int | None = None, folder: Path | None = None) -> Outcome:
    """The outcome of the last sentence."""
    return outcomes(text, n=n, folder=folder)[-1]


def check(
    text: str, expected: str, *, n: int | None = None, folder: Path | None = None
) -> Outcome:
    """The last sentence's text is as expected, and no sentence before it is wrong."""
    *before, found = outcomes(text, n=n, folder=folder)
    assert [o.text for o in before if o.status == "error"] == []
    assert found.text == expected
    return found
