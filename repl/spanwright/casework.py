"""A worker that is started afresh: reads a job, then carries out chunks of cases.

`python -m spanwright.casework`; a line of standard input is a job, or a chunk as pool.py describes
them. A further job begins anew, with its own context and limits, and finds the memories warm.
"""

from __future__ import annotations

import gc
import json
import os
import signal
import sys
from typing import Any, NoReturn

from spanwright.cases import CaseRunner, plan
from spanwright.confinement import end_with_parent, limit_memory, mapped_memory
from spanwright.kernel import budget
from spanwright.pool import carry_out_chunk, ends_with_parent
from spanwright.sentences import Surface, carry_out
from spanwright.session import RECURSION_LIMIT
from spanwright.transport import unpacked_context
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source

LARGEST_SHARE = 8
"""Memories that take more than this part of what a job may have are given up."""


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


def _mapped() -> int:
    try:
        return mapped_memory()
    except (OSError, ValueError):
        return 0  # this system does not say, and has no such bound either


def main() -> None:
    """Serve until standard input is closed, or a further job needs a new process."""
    sys.setrecursionlimit(max(sys.getrecursionlimit(), RECURSION_LIMIT))
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    # the kernel library says on standard output, too, why it gives up
    answers = os.dup(1)
    os.dup2(2, 1)
    # the grammar's tables are read at the first use
    parse(Source("1"))
    # what is there for good need not be looked through again and again
    gc.collect()
    gc.freeze()
    at_start = _mapped()
    is_over = ends_with_parent()
    runner: CaseRunner | None = None
    seconds: float | None = None
    limits = budget.Budget()
    for line in sys.stdin.buffer:
        content = json.loads(line)
        if "sentence" in content:
            end_with_parent(content["parent"])
            taken = max(0, _mapped() - at_start)
            if taken > content["memory"] // LARGEST_SHARE:
                return
            limit_memory(content["memory"] - taken)
            runner, seconds = runner_of(content), content["seconds"]
            limits = budget.Budget(max_terms=content["terms"])
            continue
        assert runner is not None
        with budget.using(limits):
            carry_out_chunk(content, answers, runner, seconds, is_over)


if __name__ == "__main__":
    main()
