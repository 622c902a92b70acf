"""A worker that is started afresh: reads its job, then carries out chunks of cases.

`python -m spanwright.casework`; the first line of standard input is the job, each further line a
chunk, as pool.py describes them.
"""

from __future__ import annotations

import json
import os
import signal
import sys
from typing import Any, NoReturn

from spanwright.cases import CaseRunner, plan
from spanwright.confinement import end_with_parent, limit_memory
from spanwright.kernel import budget
from spanwright.pool import serve
from spanwright.sentences import Surface, carry_out
from spanwright.session import RECURSION_LIMIT
from spanwright.transport import unpacked_context
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source


def runner_of(job: dict[str, Any]) -> CaseRunner:
    """The runner that a job describes; places in the sentence stay what they are at home."""
    source = Source(" " * job["base"] + job["sentence"], "a sentence sent here")
    node = parse(source).sentences[0]
    assert isinstance(node, syntax.For | syntax.Find | syntax.Tabulate)
    surface = Surface(source, _nowhere, _nowhere, _nowhere)
    return CaseRunner(
        plan(node), unpacked_context(job["context"]), surface, carry_out, job["form"])


def _nowhere(*arguments: Any) -> NoReturn:
    raise AssertionError("a case's runner has its own refusals")


def main() -> None:
    """Serve one driver until it closes standard input."""
    sys.setrecursionlimit(max(sys.getrecursionlimit(), RECURSION_LIMIT))
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    head = bytearray()
    while not head.endswith(b"\n"):
        # byte by byte: what follows the first line belongs to `serve`
        byte = os.read(0, 1)
        if not byte:
            return
        head += byte
    job = json.loads(head)
    end_with_parent(job["parent"])
    limit_memory(job["memory"])
    with budget.using(budget.Budget(max_terms=job["terms"])):
        serve(0, 1, runner_of(job), job["seconds"])


if __name__ == "__main__":
    main()
