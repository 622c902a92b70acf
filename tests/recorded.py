"""Logs made and run again in this process: what the tests of journal, replay and report share."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

from spanwright.conversation import LocalConversation
from spanwright.files import Folder
from spanwright.headers import settings_as_sentences
from spanwright.journal import Journal
from spanwright.log_format import Composer, Log, read_log
from spanwright.rendering.digest import digest
from spanwright.replay import Options, Replayed, replay
from spanwright.replies import Reply
from spanwright.session import Outcome, Session
from spanwright.settings import Bounds, Settings
from spanwright_grammar.source import Source

DEMO = """\
# Notes of the tide office of Vesterholm, an invented place.
fix n = 3
remark "The harbour's first rule."
let f = x_1 E_(1,0,2)
f
claim x_1 E_(0,0,1) = x_2 E_(0,0,1)
x_2 eq_1   # behind a sentence
let c(a,b) = (1 - q^a t^b)/(1 - q^(a+1) t^b)
c(1,2); T_1 X_1 Y_2
tabulate x_1 E_mu for mu in compositions(1)
derive x_2 E_(1,0,2)
find mu in compositions(2) where mu_1 = 2
x_1 + )
let μ = (2,0,1)
E_μ
S_(3,1,2)(x;y)
"tide \\\\ <b>"
(x_1 +
   # a remark inside
   x_2) E_(1,0,0)
recall
help E
show f as latex
"""


class Talk(LocalConversation):
    """A conversation in this process whose replies have digests."""

    def say(self, text: str, *arguments: Any, **options: Any) -> Iterator[Reply]:
        for outcome in self._session.run_all(Source(text)):
            yield reply_of(outcome)


def reply_of(outcome: Outcome) -> Reply:
    """The reply of an outcome, with its digest."""
    reply = outcome.reply()
    if reply.digest or outcome.status == "error":
        return reply
    return replace(reply, digest=digest(outcome.raw))


def opening(folder: Folder, bounds: Bounds) -> Talk:
    """A fresh conversation below a folder."""
    return Talk(Session(folder=folder, bounds=bounds))


def log_text(inputs: str | Iterable[str], folder: Path | None = None) -> str:
    """The log of a session that was given these inputs, without a file."""
    session = Session() if folder is None else Session(folder=Folder(folder))
    composer = Composer()
    parts = [composer.header("the tests", settings_as_sentences(Settings()))]
    journal = _Kept(composer, parts)
    for text in [inputs] if isinstance(inputs, str) else inputs:
        for _ in journal.recorded(text, session.run_all(Source(text)), reply_of):
            continue
    return "".join(parts)


class _Kept(Journal):
    """A journal whose records go into a list."""

    def __init__(self, composer: Composer, parts: list[str]) -> None:
        super().__init__(Path("kept"), -1, 0, composer)
        self._parts = parts

    def _append(self, content: str) -> None:
        self._parts.append(content)


def again(text: str, **options: Any) -> Replayed:
    """A log's text run again."""
    log: Log = read_log(text, "demo.span")
    chosen = Options(**options)
    return replay(log, "demo.span", chosen, Talk(Session(bounds=chosen.bounds)))


def write_log(path: Path, inputs: str | Iterable[str]) -> None:
    """A log in a file, closed."""
    session = Session(folder=Folder(path.parent))
    journal = Journal.create(path, settings_as_sentences(Settings()))
    for text in [inputs] if isinstance(inputs, str) else inputs:
        for _ in journal.recorded(text, session.run_all(Source(text)), reply_of):
            continue
    journal.close()
