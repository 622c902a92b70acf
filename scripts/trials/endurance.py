"""Runs thousands of sentences in one session, and many that want too much memory.

Neither may leave anything behind: memory and the number of processes stay what they were, and
late sentences are as quick as early ones.
"""

from __future__ import annotations

import argparse
import sys
import time
from dataclasses import dataclass

import psutil
from interrupts import Fault, group

from spanwright.process import ProcessConversation

GREEDY = "((q + t + u + 1)^90 + 1) ((q - t + u + 2)^90 + 1)"
SENTENCES = (
    "x_1 E_(0,1,0)", "claim x_1 x_2 = x_2 x_1", "let f = x_1^2 + q x_2", "f^2 - f", "1 + 1",
    "x_1 +", "E_(1,0) + 1",
)
"""Two of them are wrong, as some of everybody's are."""


@dataclass(frozen=True)
class Reading:
    """The session at one moment: memory in bytes, processes, files, milliseconds a sentence."""

    memory: int
    n_processes: int
    n_files: int
    milliseconds: float


def reading(conversation: ProcessConversation, milliseconds: float) -> Reading:
    """What the evaluator takes now, once those that ended are gone."""
    until = time.monotonic() + 10
    while len(processes := group(conversation.process_id)) != 3:
        if time.monotonic() > until:
            raise Fault(f"{len(processes)} processes where there should be 3")
        time.sleep(0.01)
    session = psutil.Process(max(processes, key=lambda pid: psutil.Process(pid).create_time()))
    return Reading(
        session.memory_info().rss, len(processes), session.num_fds(), milliseconds)


def run_many(n_sentences: int, n_readings: int = 10) -> list[Reading]:
    """Readings after every tenth part."""
    conversation = ProcessConversation()
    try:
        list(conversation.say("fix n = 3"))
        readings = []
        for part in range(n_readings):
            started = time.perf_counter()
            n_here = n_sentences // n_readings
            for k in range(n_here):
                replies = list(conversation.say(SENTENCES[k % len(SENTENCES)]))
                if replies[-1].tag:
                    list(conversation.say(f"forget eq_{replies[-1].tag}"))
            elapsed = time.perf_counter() - started
            readings.append(reading(conversation, elapsed / n_here * 1000))
            print(f"{(part + 1) * n_here:6} sentences: {readings[-1].memory / 2**20:6.1f} MB, "
                  f"{readings[-1].n_processes} processes, {readings[-1].n_files} files, "
                  f"{readings[-1].milliseconds:.2f} ms a sentence", flush=True)
        return readings
    finally:
        conversation.close()


def run_out_of_memory(n_times: int) -> tuple[int, list[float]]:
    """How many messages were clean, and how long each took, under 512 MiB."""
    conversation = ProcessConversation()
    n_clean, times = 0, []
    try:
        for sentence in ("let u be a parameter", "fix terms = 100000000", "fix memory = 537 MB",
                         "let kept = 5"):
            list(conversation.say(sentence))
        before = reading(conversation, 0)
        for _ in range(n_times):
            started = time.perf_counter()
            (reply,) = conversation.say(GREEDY)
            times.append(time.perf_counter() - started)
            n_clean += (
                "needs more than 537 MB of memory; reached: " in reply.messages[0]
                and "try: fix memory = 1074 MB" in reply.messages[0])
        (reply,) = conversation.say("kept")
        if reply.text != "5":
            raise Fault("a name was lost")
        after = reading(conversation, 0)
        print(f"{n_clean} of {n_times} clean messages, {max(times):.2f} s at most; memory "
              f"{before.memory / 2**20:.1f} MB before and {after.memory / 2**20:.1f} MB after")
        if after.memory > 1.1 * before.memory:
            raise Fault("the memory was not given back")
        return n_clean, times
    finally:
        conversation.close()


def main() -> int:
    """0 when all stayed as it was, 1 else."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    parser.add_argument("--sentences", type=int, default=5000)
    parser.add_argument("--memory-hits", type=int, default=20)
    options = parser.parse_args()
    try:
        n_clean, _ = run_out_of_memory(options.memory_hits)
        readings = run_many(options.sentences)
    except Fault as fault:
        print(f"FAULT: {fault}")
        return 1
    first, last = readings[0], readings[-1]
    is_flat = (
        last.memory < 1.1 * first.memory and last.n_processes == first.n_processes
        and last.n_files == first.n_files)
    print("flat" if is_flat else "NOT flat")
    return 0 if is_flat and n_clean == options.memory_hits else 1


if __name__ == "__main__":
    sys.exit(main())
