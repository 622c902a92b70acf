"""Kills a worker every two seconds while a claim is tested, then the driver; nothing may be lost.

    python scripts/trials/workers.py

The run that is resumed must print what an undisturbed serial run prints, byte for byte, and have
finished every case once.
"""

from __future__ import annotations

import argparse
import random
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from pathlib import Path

import psutil

SCRIPT = """fix n = 4
for k in 0..6: for mu in compositions(k): claim E_mu E_(0,1,0,0) x_1 = x_1 E_(0,1,0,0) E_mu
for k in 0..6, mu in compositions(k): claim E_mu E_(1,0,0,0) x_2 = x_2 E_(1,0,0,0) E_mu
"""
N_CASES = 210
"""Compositions of at most 6 with 4 parts, binomial(10, 4); the first sentence has 7 cases."""


def command(script: Path, *options: str) -> list[str]:
    """A run of the script."""
    return [sys.executable, "-m", "spanwright", "run", str(script), *options]


def workers(driver: int) -> list[psutil.Process]:
    """The processes below a driver that work on cases: what the session has forked."""
    try:
        below = psutil.Process(driver).children(recursive=True)
        parents = {process.pid: process.ppid() for process in below}
    except psutil.NoSuchProcess:
        return []
    # first process, keeper, session, worker

    def depth(pid: int) -> int:
        return 1 + depth(parents[pid]) if pid in parents else 0

    return [process for process in below if depth(process.pid) == 4]


def disturbed(
    arguments: Sequence[str], every: float, chance: random.Random, *, ends_after: int | None,
    kept: Path,
) -> tuple[str | None, int]:
    """Run with a worker killed every so many seconds; the output, None when the driver was killed.

    The driver is killed once `ends_after` cases are finished.
    """
    driver = subprocess.Popen(arguments, stdout=subprocess.PIPE, text=True)
    n_killed, last = 0, time.monotonic()
    while driver.poll() is None:
        time.sleep(0.02)
        if time.monotonic() - last > every:
            last = time.monotonic()
            found = workers(driver.pid)
            if found:
                found[chance.randrange(len(found))].send_signal(signal.SIGKILL)
                n_killed += 1
        if ends_after is not None and kept.exists() and (
            kept.read_bytes().count(b"\n") >= ends_after
        ):
            driver.kill()
            driver.wait()
            return None, n_killed
    output, _ = driver.communicate()
    return output, n_killed


def main() -> int:
    """0 when nothing was lost, 1 else."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    parser.add_argument("--every", type=float, default=2.0, metavar="SECONDS")
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--seed", type=int, default=1)
    options = parser.parse_args()
    chance = random.Random(options.seed)
    with tempfile.TemporaryDirectory() as folder:
        script, kept = Path(folder, "claims.span"), Path(folder, "cases.jsonl")
        script.write_text(SCRIPT)
        serial = subprocess.run(
            command(script, "--jobs", "1"), capture_output=True, text=True, check=True).stdout
        arguments = command(script, "--jobs", str(options.jobs), "--resume", str(kept))
        n_killed = 0
        for ends_after in (N_CASES // 3, 2 * N_CASES // 3, None):
            output, n_more = disturbed(
                arguments, options.every, chance, ends_after=ends_after, kept=kept)
            n_killed += n_more
            n_finished = kept.read_bytes().count(b"\n")
            print(f"{n_killed} workers killed, {n_finished} cases finished"
                  + (", the driver killed" if output is None else ""), flush=True)
        is_same = output == serial
        n_lines = len(set(kept.read_text().splitlines()))
    print(serial, end="")
    print("the same bytes" if is_same else f"OTHER BYTES:\n{output}")
    is_whole = n_finished == n_lines
    print(f"{n_finished} records, {'each once' if is_whole else 'some more than once'}")
    return 0 if is_same and is_whole and n_killed else 1


if __name__ == "__main__":
    sys.exit(main())
