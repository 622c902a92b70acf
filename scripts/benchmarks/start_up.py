"""How long a fresh interpreter takes before the first line can be read."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable

from benchmarking import Case


def _fresh(program: str) -> Callable[[], object]:
    return lambda: subprocess.run([sys.executable, "-c", program], check=True)


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
        )
    ]
