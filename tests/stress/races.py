"""Savers against write-back: `python -m tests.stress.races [--rounds N] [--folder DIR ...] [--style NAME ...]`.

Each round: a save, a random pause, another save, while a bridge in a process of its own reads, computes for up to a
millisecond and writes back. Then the file must settle on a result made from the last save. A round in which it
settles on a result made from an older save has lost a save.
"""

from __future__ import annotations

import argparse
import os
import random
import subprocess
import sys
import tempfile
import time
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from bridge.files import names
from bridge.files.snapshot import read
from bridge.files.writeback import write_back
from bridge.messages import FileRefused
from tests.stress.savers import SAVERS, Saver, dawdle
from tests.stress.zips import contents, look, saved, with_result

PATIENCE_S = 15.0
PASSING = ("file-missing", "file-being-saved", "file-not-whole")
TMPFS, DISK = Path("/dev/shm"), Path("/var/tmp")


@dataclass
class Count:
    """What a run found."""

    rounds: int = 0
    lost: int = 0
    stuck: int = 0
    leftovers: int = 0
    written: int = 0
    redone: int = 0
    refused: int = 0

    @property
    def bad(self) -> int:
        return self.lost + self.stuck + self.leftovers + self.refused


def bridge(path: Path, seed: int) -> None:
    """Fit whatever stands there, until the parent says stop; prints how often it wrote and had to begin again."""
    chance = random.Random(seed)
    written = changed = refused = 0
    stop = path.with_name("stop")
    while not stop.exists():
        try:
            snapshot = read(path)
            _, made_from = contents(snapshot.data)
            if made_from is not None:
                time.sleep(0.0005)
                continue
            dawdle(chance, 1)
            outcome = write_back(snapshot, with_result(snapshot.data))
        except FileRefused as refusal:
            if refusal.problem.key not in PASSING:
                print(f"{refusal.problem.key}: {refusal.problem.text}", file=sys.stderr)
                refused += 1
            continue
        written += outcome.kind == "written"
        changed += outcome.kind == "changed"
    print(written, changed, refused)


def settled(path: Path, number: int) -> str:
    """How a round ends: fine, lost or stuck."""
    until = time.monotonic() + PATIENCE_S
    while time.monotonic() < until:
        if look(path) == (number, number):
            return "fine"
        time.sleep(0.0005)
    last = look(path)
    return "lost" if last is None or last[0] != number else "stuck"


def run(folder: Path, saver: Saver, rounds: int, seed: int = 1) -> Count:
    """The savers' side, and the count."""
    chance, count = random.Random(seed), Count()
    path = folder / "book.xlsx"
    path.write_bytes(saved(0))
    command = [sys.executable, "-m", "tests.stress.races", "--bridge", str(path), "--seed", str(seed)]
    child = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    for number in range(1, 2 * rounds, 2):
        saver(path, saved(number), chance)
        dawdle(chance, 5)
        saver(path, saved(number + 1), chance)
        end = settled(path, number + 1)
        count.rounds += 1
        count.lost += end == "lost"
        count.stuck += end == "stuck"
    path.with_name("stop").touch()
    said, _ = child.communicate(timeout=60)
    count.written, count.redone, count.refused = map(int, said.split())
    count.leftovers = sum(name.startswith(names.PREFIX) for name in os.listdir(folder))
    return count


def main() -> int:
    """Run and print; 1 when anything was lost."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--rounds", type=int, default=10_000)
    options.add_argument("--folder", type=Path, action="append")
    options.add_argument("--style", action="append", choices=list(SAVERS))
    options.add_argument("--seed", type=int, default=1)
    options.add_argument("--bridge", type=Path)
    wanted = options.parse_args()
    if wanted.bridge:
        with suppress(KeyboardInterrupt):
            bridge(wanted.bridge, wanted.seed)
        return 0
    bad = 0
    for parent in wanted.folder or [folder for folder in (TMPFS, DISK) if folder.is_dir()]:
        for style in wanted.style or SAVERS:
            start = time.monotonic()
            with tempfile.TemporaryDirectory(dir=parent, prefix="races-") as folder:
                count = run(Path(folder), SAVERS[style], wanted.rounds, wanted.seed)
            bad += count.bad
            print(
                f"{parent!s:10} {style:22} rounds {count.rounds:6}  LOST {count.lost}  stuck {count.stuck}  "
                f"leftovers {count.leftovers}  refused {count.refused}  written {count.written}  "
                f"begun again {count.redone}  {time.monotonic() - start:.0f} s",
                flush=True,
            )
    return int(bad > 0)


if __name__ == "__main__":
    sys.exit(main())
