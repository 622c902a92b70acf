"""The server's evaluator process: runs a script's sentences and can go back to any of them.

A request is one line of JSON on standard input, an answer one on standard output:

    {"id": 1, "keep": 2, "text": "…", "name": "a.span"}     run the text behind the first two units
    {"id": 2, "element": "E_(1,0,2)", "n": 3}               what a basis element is like

A session's context is frozen, so what stood behind each unit is kept at no cost. An interrupt
stops the sentence at hand; the process ends when its input does.
"""

from __future__ import annotations

import json
import os
import queue
import signal
import sys
import threading
from collections.abc import Iterator
from dataclasses import fields
from pathlib import Path
from typing import Any

from spanwright.confinement import default_memory, end_with_parent, limit_memory
from spanwright.files import Folder
from spanwright.session import Outcome, Session
from spanwright_grammar.source import Source

SHORT, LONG = 80, 2_000
"""Characters of a result in a hint, and behind it."""
_REQUEST_LIMIT = 64


class RewindableSession:
    """A session and what it was behind each unit of a script."""

    def __init__(self, folder: Path) -> None:
        self._session = Session(folder=Folder(folder))
        self._marks = [self._mark()]

    def run(self, keep: int, text: str, name: str) -> Iterator[dict[str, Any]]:
        """Run a text behind the first `keep` units; an answer for each unit.

        After an interrupt the unit at hand has not been run, and the last answer says so.
        """
        del self._marks[keep + 1 :]
        self._restore(self._marks[-1])
        outcomes = self._session.run_all(Source(text, name))
        while True:
            try:
                outcome = next(outcomes, None)
                if outcome is None:
                    return
                answer = _answer(outcome)
            except KeyboardInterrupt:
                self._restore(self._marks[-1])
                yield {"status": "stopped"}
                return
            self._marks.append(self._mark())
            yield answer

    def _mark(self) -> dict[str, Any]:
        """All that the session holds; containers that change in place are copied."""
        values = {entry.name: getattr(self._session, entry.name) for entry in fields(Session)}
        return {
            name: value.copy() if isinstance(value, set | list | dict) else value
            for name, value in values.items()
        }

    def _restore(self, mark: dict[str, Any]) -> None:
        for name, value in mark.items():
            kept = value.copy() if isinstance(value, set | list | dict) else value
            setattr(self._session, name, kept)


def _answer(outcome: Outcome) -> dict[str, Any]:
    """An outcome as the server shows it."""
    reply = outcome.reply()
    text = reply.text
    return {
        "status": outcome.status,
        "kind": reply.kind,
        "tag": outcome.tag,
        "start": outcome.span.start,
        "end": outcome.span.end,
        "short": _shortened(text, reply.terms),
        "text": text if len(text) <= LONG else text[: LONG - 1] + "…",
        "seconds": outcome.seconds,
        "findings": [
            {
                "severity": found.severity,
                "code": found.code,
                "start": found.span.start,
                "end": found.span.end,
                "message": found.message,
                "hints": list(found.hints),
            }
            for found in outcome.diagnostics
        ],
    }


def _shortened(text: str, terms: tuple[str, ...]) -> str:
    """A result on one short line: whole terms as far as they fit, then how many are missing."""
    line = " ".join(text.split("\n")[0].split())
    if len(line) <= SHORT and "\n" not in text:
        return line
    remark = next((row[2:] for row in text.split("\n")[1:2] if row.startswith("# ")), "")
    if remark and len(line) + len(remark) + 3 <= SHORT:
        return f"{line} ({remark})"
    if len(terms) > 1:
        shown, n_shown = "", 0
        for term in terms:
            longer = f"{shown} {term}".strip()
            if len(longer) > SHORT - 20:
                break
            shown, n_shown = longer, n_shown + 1
        if shown:
            n_more = len(terms) - n_shown
            return f"{shown} + … ({n_more} more {'term' if n_more == 1 else 'terms'})"
    return line[: SHORT - 2] + " …"


def element(n: int, text: str) -> list[tuple[str, str]]:
    """What a basis element is like: degree, eigenvalues, first terms; as label and text."""
    found = []
    wanted = [("degree", f"degree({text})")]
    wanted += [(f"eigenvalue of Y_{i}", f"eigenvalue(Y_{i}, {text})") for i in range(1, n + 1)]
    wanted.append(("in monomials", f"expand {text} in x"))
    for label, sentence in wanted:
        outcome = Session(n=n).run(sentence)
        if outcome.status == "ok":
            reply = outcome.reply()
            found.append((label, _shortened(reply.text, reply.terms)))
    return found


def _requests(found: queue.Queue[dict[str, Any]]) -> None:
    """Read requests; at the end of the input nobody is left to answer."""
    for line in sys.stdin.buffer:
        found.put(json.loads(line))
    os._exit(0)


def _send(answer: dict[str, Any]) -> None:
    sys.stdout.buffer.write(json.dumps(answer).encode() + b"\n")
    sys.stdout.buffer.flush()


def main() -> None:
    """Serve one script: `python -m spanwright.server.evaluator FOLDER`."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    end_with_parent(os.getppid())
    # a slip of the finger is not to take the machine down
    limit_memory(default_memory())
    waiting: queue.Queue[dict[str, Any]] = queue.Queue(_REQUEST_LIMIT)
    session = RewindableSession(Path(sys.argv[1]))
    threading.Thread(target=_requests, args=(waiting,), daemon=True).start()
    while True:
        request = waiting.get()
        number = request["id"]
        try:
            # only while a sentence runs is an interrupt a request to stop it
            signal.signal(signal.SIGINT, signal.default_int_handler)
            if "element" in request:
                _send({"id": number, "element": element(request["n"], request["element"])})
            else:
                for answer in session.run(request["keep"], request["text"], request["name"]):
                    _send({"id": number, **answer})
        except KeyboardInterrupt:
            _send({"id": number, "status": "stopped"})
        finally:
            signal.signal(signal.SIGINT, signal.SIG_IGN)
        _send({"id": number, "done": True})


if __name__ == "__main__":
    main()
