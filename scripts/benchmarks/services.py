"""Language services on a script of 2,000 lines: ours, sentence by sentence, against reading anew.

Run as a program it prints what an editor's user waits for, at the 95th percentile.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from random import Random

sys.path.append(str(Path(__file__).resolve().parent.parent))

from benchmarking import Case, duration
from spanwright_grammar.bindings import Scope
from spanwright_grammar.checks import check
from spanwright_grammar.completion import complete
from spanwright_grammar.document import Document
from spanwright_grammar.formatting import formatted
from spanwright_grammar.highlighting import highlights
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source

LINES = (
    "let f{k} = x_1 E_(1,0,2) + (1 - q^2 t) E_201",
    "# step {k}: the first part moves",
    "f{before} x_2 E_(2,0,1)",
    "claim T_1 X_1 T_1 = t X_2",
    "let c{k}(a,b) = (1 - q^a t^b)/(1 - q^(a+1) t^b)",
    "for mu in compositions(2), j in 1..n: claim |mu| = 2",
    "expand x_1 E_(0,0,1) in E",
    "",
)
TYPED = ("a", "b", "_1", " ", "x", "(", ")", "+", "μ", "\n")


def script(n_lines: int) -> str:
    """A plausible script: definitions, claims, loops, comments."""
    lines = ["fix n = 3"]
    for k in range(n_lines - 1):
        lines.append(LINES[k % len(LINES)].format(k=k, before=max(k - 2, 0)))
    return "\n".join(lines) + "\n"


class Typing:
    """A hand that puts a letter in at random places, one a call, and takes it out at the next."""

    def __init__(self, text: str) -> None:
        self.document = Document(text)
        self.document.diagnostics()
        self.random = Random(1)
        self.undo: tuple[int, int] | None = None

    def edit(self) -> None:
        """One keystroke."""
        if self.undo is not None:
            start, length = self.undo
            self.document, self.undo = self.document.edited(start, start + length, ""), None
            return
        place = self.random.randrange(len(self.document.text))
        letter = self.random.choice(TYPED)
        self.document = self.document.edited(place, place, letter)
        self.undo = place, len(letter)

    def keystroke(self) -> int:
        """One keystroke and the findings behind it."""
        self.edit()
        return len(self.document.diagnostics())

    def keystroke_anew(self) -> int:
        """The same, with everything read anew."""
        self.edit()
        return len(check(parse(Source(self.document.text)), Scope(), is_whole=True))

    def completion(self) -> int:
        """The proposals at a random place."""
        offset = self.random.randrange(len(self.document.text))
        text, start = self.document.around(offset)
        return len(complete(text, offset - start, self.document.scope_at(offset)))


def cases(is_quick: bool) -> list[Case]:
    """Findings, completion and house style."""
    n_lines = 200 if is_quick else 2_000
    text = script(n_lines)
    ours, anew = Typing(text), Typing(text)
    parsed = parse(Source(text))
    return [
        Case(
            name="keystroke",
            what=f"a letter typed into {n_lines} lines, and all findings",
            contenders=[("ours", ours.keystroke), ("all read anew", anew.keystroke_anew)],
        ),
        Case(
            name="completion",
            what=f"proposals at a random place of {n_lines} lines",
            contenders=[("ours", ours.completion)],
        ),
        Case(
            name="house-style",
            what="a whole script brought into house style, read beforehand or not",
            contenders=[
                ("read beforehand", lambda: formatted(parsed)),
                ("read too", lambda: formatted(parse(Source(text)))),
            ],
            n_units=n_lines,
            unit="line",
        ),
    ]


def at_95th_percentile(step: Callable[[], object], n_steps: int) -> float:
    """The time of a step that one step in twenty exceeds; the process's own, others left out."""
    times = []
    for _ in range(n_steps):
        start = time.process_time()
        step()
        times.append(time.process_time() - start)
    return sorted(times)[n_steps * 95 // 100]


def hello() -> float:
    """From spawning the server to its answer to `initialize`."""
    body = b'{"jsonrpc":"2.0","id":1,"method":"initialize","params":{"capabilities":{}}}'
    start = time.perf_counter()
    process = subprocess.Popen(
        [sys.executable, "-c", "from spanwright.editor_commands import serve; serve()"],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL,
    )  # fmt: skip
    assert process.stdin is not None and process.stdout is not None
    process.stdin.write(b"Content-Length: %d\r\n\r\n" % len(body) + body)
    process.stdin.flush()
    process.stdout.readline()
    taken = time.perf_counter() - start
    process.stdin.close()
    process.wait()
    return taken


def resident() -> int:
    """The memory of this process in bytes, as far as the system tells."""
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE")


def main() -> None:
    """Print the figures."""
    text = script(2_000)
    typing = Typing(text)
    print("2,000 lines, at the 95th percentile")
    print(f"  findings after a keystroke  {duration(at_95th_percentile(typing.keystroke, 1000))}")
    print(f"  completion                  {duration(at_95th_percentile(typing.completion, 1000))}")
    start = time.perf_counter()
    formatted(parse(Source(text)))
    print(f"  full format, reading too    {duration(time.perf_counter() - start)}")
    start = time.perf_counter()
    list(highlights(typing.document))
    print(f"  all colours                 {duration(time.perf_counter() - start)}")
    print(f"  server's hello, best of 5   {duration(min(hello() for _ in range(5)))}")
    before = resident()
    for _ in range(10_000):
        typing.keystroke()
    grown = 100 * (resident() - before) / before
    print(f"  memory after 10,000 edits   {grown:+.1f} %")


if __name__ == "__main__":
    main()
