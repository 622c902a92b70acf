"""Runs sentences over many cases in a session, by the means that a test names."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from spanwright import means
from spanwright.files import Folder
from spanwright.session import Outcome, Session
from spanwright.tally import Tally


def outcome_of(text: str, *, n: int | None = 3, folder: Path | None = None, **by: Any) -> Outcome:
    """The last outcome of a text in a fresh session."""
    session = Session(n=n) if folder is None else Session(n=n, folder=Folder(folder))
    with means.using(means.Means(folder=session.folder, **by)):
        return session.run(text)


def tally_of(text: str, **by: Any) -> Tally:
    """The tally of a `for`."""
    outcome = outcome_of(text, **by)
    assert isinstance(outcome.raw, Tally), outcome.text
    return outcome.raw
