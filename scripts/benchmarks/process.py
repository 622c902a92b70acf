"""What it costs to keep a session in a process of its own, a checkpoint before each sentence."""

from __future__ import annotations

import atexit
import subprocess
import sys
import time
from collections.abc import Callable

from benchmarking import Case, Contender
from spanwright.conversation import Conversation, LocalConversation
from spanwright.process import ProcessConversation
from spanwright.session import Session


def _said(conversation: Conversation, text: str) -> Callable[[], object]:
    return lambda: [reply.text for reply in conversation.say(text)]


def _paused(conversation: Conversation, text: str) -> Callable[[], None]:
    """The same, and as long as a quick reader takes: checkpoints are renewed meanwhile."""
    def run() -> None:
        list(conversation.say(text))
        time.sleep(0.05)

    return run


def _conversation(*sentences: str) -> ProcessConversation:
    conversation = ProcessConversation()
    atexit.register(conversation.close)
    for sentence in sentences:
        list(conversation.say(sentence))
    return conversation


def _command(program: str) -> Callable[[], object]:
    return lambda: subprocess.run(
        [sys.executable, "-c", program], check=True, stdout=subprocess.DEVNULL)


HERE = """
from spanwright.files import Folder
from spanwright.session import Session
print(Session().run("1 + 1").text)
"""
THERE = """
from spanwright.conversation import local
conversation = local()
print(*(reply.text for reply in conversation.say("1 + 1")))
conversation.close()
"""


def cases(is_quick: bool) -> list[Case]:
    """A sentence here and there, with a small session and a large one; and a whole start."""
    small = _conversation("fix n = 3")
    held = "10^5" if is_quick else "10^6"
    large = _conversation("fix n = 3", *(f"let l{k} = list(1..{held})" for k in range(3)))
    here = LocalConversation(Session(n=3))
    claim = "claim x_1 x_2 = x_2 x_1"
    # a hundred in a row, so that the forks between them have their share
    many, n_many = "; ".join([claim] * 100), 100
    long = f"claim {' + '.join(['E_(0,1,2) - E_(0,1,2)'] * 600)} = 0"
    return [
        Case(
            name="checkpoint",
            what="a small claim, told to a session here and to one in an evaluator process",
            contenders=[
                Contender("in this process", _said(here, claim)),
                Contender("across", _said(small, claim)),
                Contender("across, large session", _said(large, claim)),
            ],
        ),
        Case(
            name="checkpoint-many",
            what="a hundred small claims in one text",
            contenders=[
                Contender("in this process", _said(here, many)),
                Contender("across", _said(small, many)),
                Contender("across, large session", _said(large, many)),
            ],
            n_units=n_many, unit="sentence",
        ),
        Case(
            name="checkpoint-renewed",
            what="a small claim behind a sentence of 0.1 s and more: a fresh checkpoint",
            contenders=[
                Contender("in this process", _said(here, claim), _said(here, long)),
                Contender("across, at once", _said(small, claim), _said(small, long)),
                Contender("across, after a pause", _said(small, claim), _paused(small, long)),
                Contender(
                    "across, large session, after a pause", _said(large, claim),
                    _paused(large, long)),
            ],
        ),
        Case(
            name="checkpoint-start",
            what="a fresh interpreter that says 1 + 1 and ends",
            contenders=[
                Contender("session in it", _command(HERE)),
                Contender("evaluator process", _command(THERE)),
            ],
        ),
    ]
