"""Presses Ctrl-C at random moments of long sentences; nothing may be lost, and it must be quick.

Each trial defines a name, starts a long sentence, sends SIGINT to this process at a seeded random
moment, and measures until the conversation can be spoken to again. Then every name defined so far
must be there with its value, and the evaluator must be down to its two processes.
"""

from __future__ import annotations

import argparse
import os
import random
import signal
import sys
import tempfile
import threading
import time
from dataclasses import dataclass
from pathlib import Path

import psutil

from spanwright.process import ProcessConversation

WIDE = "(q + t + u + v + 1)^32 + u"
LONG_SENTENCES = {
    "one kernel multiplication": f"({WIDE}) ((q + t - u + v + 1)^32 + 1)",
    "one kernel power": "(q + t + u + v + 1)^70 + 1",
    "one factorisation": "1/wide",
    "many products": "(x_1 + x_2 + q x_3 + 1)^100",
    "one large text": "list(1..10^6)",
    "a claim over many cases": "claim sum_(k in 1..10^6) k^7 = 0",
    "a used script": 'use "long.span"',
    "a text of many sentences": "\n".join(["x_1 E_(0,1,2) + 1"] * 20_000),
}
PREPARATIONS = (
    "fix n = 3", "let u be a parameter", "let v be a parameter", "fix terms = 100000000",
    "let wide = ((q+t+u+v+1)^14 + q^2 u) ((q+t-u+v+1)^14 + t v) ((q-t+u+v+1)^10 + v)",
)
LONGEST_WAIT = 1.5
"""Interrupts come within so many seconds of the beginning."""


@dataclass(frozen=True)
class Trial:
    """What came of one interrupt; `was_over` when the sentence had ended before it."""

    name: str
    moment: float
    seconds: float
    was_over: bool


class Fault(Exception):
    """Something was lost."""


def group(leader: int) -> list[int]:
    """The living processes of a process group."""
    found = []
    for process in psutil.process_iter(["status"]):
        try:
            is_dead = process.info["status"] == psutil.STATUS_ZOMBIE
            if os.getpgid(process.pid) == leader and not is_dead:
                found.append(process.pid)
        except (ProcessLookupError, psutil.NoSuchProcess):
            continue
    return found


def _said(conversation: ProcessConversation, text: str) -> str:
    replies = list(conversation.say(text))
    if len(replies) != 1 or replies[0].status == "error":
        raise Fault(f"{text[:60]}: {[message for r in replies for message in r.messages]}")
    return replies[0].text


def interrupted(conversation: ProcessConversation, name: str, moment: float) -> Trial:
    """Start a long sentence, interrupt it, and measure how long that takes."""
    sent: list[float] = []

    def interrupt() -> None:
        sent.append(time.monotonic())
        signal.pthread_kill(threading.main_thread().ident or 0, signal.SIGINT)

    timer = threading.Timer(moment, interrupt)
    statuses = []
    try:
        timer.start()
        for reply in conversation.say(LONG_SENTENCES[name]):
            statuses.append(reply.record.get("code", reply.status))
        over = time.monotonic()
        # one that comes after the end falls to whoever waits for the next line, as in a shell
        timer.join()
    except KeyboardInterrupt:
        over = time.monotonic()
    return Trial(name, moment, max(0.0, over - sent[0]), "stopped" not in statuses)


def run(n_moments: int, seed: int) -> list[Trial]:
    """All trials in one session; raises Fault when something is lost."""
    chance = random.Random(seed)
    trials = []
    with tempfile.TemporaryDirectory() as folder:
        long_script = "let early = 1\n" + "x_1 E_(0,1,2)\n" * 20 + f"let late = {WIDE}\n1/wide\n"
        Path(folder, "long.span").write_text(long_script * 50, encoding="utf-8")
        conversation = ProcessConversation(Path(folder))
        for sentence in PREPARATIONS:
            _said(conversation, sentence)
        names = list(LONG_SENTENCES)
        try:
            for k in range(n_moments):
                _said(conversation, f"let kept{k} = x_1 + {k} q")
                name = names[k % len(names)]
                # half of the moments lie where a sentence begins and ends
                longest = chance.choice((0.02, LONGEST_WAIT))
                trials.append(interrupted(conversation, name, chance.uniform(0, longest)))
                _check(conversation, k)
        finally:
            conversation.close()
        _wait_for(lambda: not group(conversation.process_id), "a process is left behind")
    return trials


def _check(conversation: ProcessConversation, last: int) -> None:
    shown = [_said(conversation, f"show kept{k} as text") for k in (0, last // 2, last)]
    wanted = ["x_1" if k == 0 else f"x_1 + {'' if k == 1 else f'{k} '}q"
              for k in (0, last // 2, last)]
    if shown != wanted:
        raise Fault(f"the names hold {shown}, not {wanted}")
    missing = {f"kept{k}" for k in range(last + 1)} - set(conversation.state().names)
    if missing:
        raise Fault(f"lost: {', '.join(sorted(missing))}")
    if {"early", "late"} & set(conversation.state().names):
        raise Fault("half of a used script is there")
    _wait_for(lambda: len(group(conversation.process_id)) == 3, "processes are left behind")


def _wait_for(is_so: object, otherwise: str) -> None:
    assert callable(is_so)
    until = time.monotonic() + 10
    while not is_so():
        if time.monotonic() > until:
            raise Fault(otherwise)
        time.sleep(0.01)


def main() -> int:
    """0 when nothing was lost and every prompt was back in time, 1 else."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    parser.add_argument("--moments", type=int, default=50)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--within", type=float, default=0.5, metavar="SECONDS")
    options = parser.parse_args()
    try:
        trials = run(options.moments, options.seed)
    except Fault as fault:
        print(f"FAULT: {fault}")
        return 1
    for trial in trials:
        note = "   (had ended)" if trial.was_over else ""
        print(f"{trial.name:28} after {trial.moment:6.3f} s: {trial.seconds * 1000:6.1f} ms{note}")
    times = sorted(trial.seconds for trial in trials)
    print(f"{len(trials)} interrupts, {sum(not t.was_over for t in trials)} of them of a running "
          f"sentence: median {times[len(times) // 2] * 1000:.1f} ms, "
          f"longest {times[-1] * 1000:.1f} ms; no name lost, no process left")
    return 0 if times[-1] <= options.within else 1


if __name__ == "__main__":
    sys.exit(main())
