"""Kills a session that keeps a log, at random moments under load, and looks for what is lost.

    python scripts/trials/kills.py --kills 1000

Every sentence that the session acknowledged must be in its log, every log must replay, and every
torn end must be recognised. Exit status 0 when all of it holds.
"""

from __future__ import annotations

import argparse
import os
import random
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path

TESTS = Path(__file__).resolve().parents[2] / "tests"



def victim(path: Path, out: int, is_slow: bool) -> None:
    """A session that goes on in a log for ever, and acknowledges each tag once it is recorded.

    `is_slow` stands for a disk that takes a record in small pieces, so that records are torn.
    """
    from recorded import Talk, reply_of
    from spanwright.journal import Journal
    from spanwright.replay import resume
    from spanwright.session import Session
    from spanwright_grammar.source import Source

    if is_slow:
        whole = os.write

        def in_pieces(handle: int, data: bytes | memoryview) -> int:
            time.sleep(0.0005)
            return whole(handle, bytes(data[:16]))

        os.write = in_pieces
    session = Session()
    kept = resume(path, Talk(session)).journal if path.exists() else Journal.create(path)
    number = session.last_tag
    before = "" if number else "fix n = 3; "
    os.write(out, b"ready\n")
    while True:
        number += 1
        text = f"{before}{number} x_1 E_(1,0,{number % 3})"
        before = ""
        for outcome in kept.recorded(text, session.run_all(Source(text)), reply_of):
            if outcome.tag is not None:
                os.write(out, b"said %d\n" % outcome.tag)


def main() -> int:
    """Kill, look, count."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--kills", type=int, default=1000)
    parser.add_argument("--folder", type=Path)
    parser.add_argument("--seed", type=int, default=1)
    options = parser.parse_args()
    chance = random.Random(options.seed)
    with tempfile.TemporaryDirectory() as made:
        folder = options.folder or Path(made)
        load = [subprocess.Popen([sys.executable, "-c", "while True: sum(range(9999))"])
                for _ in range(2)]
        try:
            return _trial(options.kills, folder, chance)
        finally:
            for process in load:
                process.kill()
                process.wait()


def _trial(n_kills: int, folder: Path, chance: random.Random) -> int:
    sys.path.insert(0, str(TESTS))
    from recorded import Talk, opening
    from spanwright.journal import read
    from spanwright.replay import Options, replay_file
    from spanwright.session import Session

    list(Talk(Session(n=3)).say("x_1 E_(1,0,1)"))  # loads all that a session needs
    n_said = n_lost = n_torn = n_wrong = 0
    path = folder / "log0.span"
    for kill in range(n_kills):
        if kill % 10 == 0:
            path = folder / f"log{kill}.span"  # a log grows over ten kills, each one resumed
        wait = 0.0 if kill % 7 == 0 else chance.uniform(0.0001, 0.12)
        said = _killed(path, wait, is_slow=kill % 2 == 1)
        if not path.exists():
            continue
        log = read(path)
        tags = [r.seal.tag for r in log.records if r.seal and r.seal.tag]
        n_said += len(said)
        n_lost += len(set(said) - set(tags))
        n_torn += log.torn is not None
        if log.altered or tags != list(range(1, len(tags) + 1)):
            n_wrong += 1
            print(f"kill {kill}: {path}: {log.altered} {tags[-5:]}")
        if kill % 10 == 9 or kill == n_kills - 1:
            found = replay_file(path, Options(), opening)
            if not found.agrees:
                n_wrong += 1
                print(f"kill {kill}: {path} does not replay: {found.of('differs', 'missing')[:2]}")
    print(f"{n_kills} kills, {n_said} sentences acknowledged, {n_lost} lost, "
          f"{n_torn} torn ends recognised, {n_wrong} logs wrong")
    return 1 if n_lost or n_wrong else 0


def _killed(path: Path, wait: float, is_slow: bool) -> list[int]:
    """Run a session, kill it after a while; the tags that it acknowledged.

    The session is forked from this process, which has everything loaded: a kill takes no start.
    """
    reader, writer = os.pipe()
    child = os.fork()
    if child == 0:
        os.close(reader)
        try:
            victim(path, writer, is_slow)
        except BaseException as error:
            os.write(writer, f"failed {error!r}\n".encode())
        finally:
            os._exit(1)
    os.close(writer)
    with os.fdopen(reader, "rb") as stream:
        first = stream.readline() if wait else b"ready\n"
        if first != b"ready\n":
            raise RuntimeError(f"the session did not begin: {first.decode()}")
        # without a wait the kill falls into making or bringing back the log
        time.sleep(wait or 0.002 * (path.stat().st_size % 7 if path.exists() else 1))
        os.kill(child, signal.SIGKILL)
        os.waitpid(child, 0)
        lines = stream.read().split(b"\n")
    failed = [line for line in lines if line.startswith(b"failed ")]
    if failed:
        raise RuntimeError(failed[0].decode())
    # the last line may be torn too: what was not said whole was not acknowledged
    return [int(line.split()[1]) for line in lines[:-1] if line.startswith(b"said ")]


if __name__ == "__main__":
    raise SystemExit(main())
