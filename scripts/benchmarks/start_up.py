"""How long a fresh interpreter takes before the first line can be read."""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
from collections.abc import Callable

import pexpect

from benchmarking import Case


def _fresh(program: str) -> Callable[[], object]:
    return lambda: subprocess.run([sys.executable, "-c", program], check=True)


def _on_a_terminal(arguments: list[str], *dialogue: tuple[str, str]) -> Callable[[], object]:
    """Start, and for each (mark, keys) wait for the mark and press the keys."""
    folder = tempfile.mkdtemp()
    environment = {
        **os.environ, "TERM": "xterm-256color", "PROMPT_TOOLKIT_NO_CPR": "1",
        "LANG": "C.UTF-8", "XDG_DATA_HOME": folder, "XDG_STATE_HOME": folder}
    environment.pop("PYTHONDONTWRITEBYTECODE", None)

    def run() -> None:
        child = pexpect.spawn(
            sys.executable, arguments, env=environment, encoding="utf-8", dimensions=(30, 100))
        child.delaybeforesend = None
        try:
            for mark, keys in dialogue:
                child.expect(mark)
                child.send(keys)
        finally:
            child.close(force=True)

    return run


BARE_PROMPT = "from prompt_toolkit import PromptSession; PromptSession('∋ ').prompt()"


def cases(is_quick: bool) -> list[Case]:
    """Bare Python against each package that a front end may load."""
    packages = ["lark", "flint", "prompt_toolkit"] + ([] if is_quick else ["sympy"])
    return [
        Case(
            name="start-up",
            what="a fresh interpreter that imports one package and ends",
            contenders=[
                ("bare Python", _fresh("pass")),
                *((f"import {package}", _fresh(f"import {package}")) for package in packages),
            ],
        ),
        Case(
            name="first-prompt",
            what="from the start to the first prompt on a terminal, and to the first answer",
            contenders=[
                ("prompt_toolkit alone", _on_a_terminal(["-c", BARE_PROMPT], ("∋", ""))),
                ("the shell", _on_a_terminal(["-m", "spanwright"], ("∋", ""))),
                ("the shell, a key shown", _on_a_terminal(
                    ["-m", "spanwright"], ("∋", "k"), ("k", ""))),
                ("the shell, an answer shown", _on_a_terminal(
                    ["-m", "spanwright"], ("∋", "fix n = 3\r"), ("x_1..x_3", ""))),
            ],
        ),
    ]
