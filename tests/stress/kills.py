"""The bridge is killed at random moments while a user saves: `python -m tests.stress.kills [--kills N] [--folder DIR]`.

Each time: a bridge in a process of its own reads, computes and writes back; somebody saves in one of four ways; the
bridge gets a kill -9 at a random moment. Then recovery runs as at a start. The newest save must be there, alone or
with a result made from it; the file must be whole; nothing of ours may be left.
"""

from __future__ import annotations

import argparse
import collections
import os
import random
import signal
import sys
import tempfile
import threading
import time
from contextlib import suppress
from pathlib import Path

from bridge.files import names
from bridge.files.recovery import Mended, recover
from bridge.files.snapshot import read
from bridge.files.writeback import write_back
from bridge.messages import FileRefused
from tests.stress.savers import SAVERS, dawdle
from tests.stress.zips import contents, look, saved, with_result

SIZE = 400_000
LONGEST_LIFE_S = 0.08
RECOVERY_PATIENCE_S = 15.0  # a half-written claim or journal is believed dead after some seconds


def bridge(path: Path, chance: random.Random) -> None:
    """Write back whatever comes, until killed."""
    while True:
        with suppress(FileRefused):
            snapshot = read(path)
            if contents(snapshot.data)[1] is None:
                dawdle(chance, 2)
                write_back(snapshot, with_result(snapshot.data))


def forked_bridge(path: Path, seed: int) -> int:
    """Its process number."""
    child = os.fork()
    if child == 0:
        try:
            bridge(path, random.Random(seed))
        finally:
            os._exit(1)
    return child


def strays(folder: Path) -> list[str]:
    return [name for name in os.listdir(folder) if name.startswith(names.PREFIX)]


def recovered(folder: Path, found: collections.Counter[str]) -> list[str]:
    """Run recovery until nothing is left; what is left after patience."""
    until = time.monotonic() + RECOVERY_PATIENCE_S
    while True:
        found.update(str(one.mended) for one in recover(folder) if one.mended is not Mended.KEPT)
        left = strays(folder)
        if not left or time.monotonic() > until:
            return left
        found["second look"] += 1
        time.sleep(0.5)


def one_kill(folder: Path, number: int, chance: random.Random, found: collections.Counter[str]) -> int:
    """Saves, a kill, recovery; the number of the last save."""
    path = folder / "book.xlsx"
    path.write_bytes(saved(number, SIZE))
    child = forked_bridge(path, number)
    killer = threading.Timer(chance.random() * LONGEST_LIFE_S, os.kill, (child, signal.SIGKILL))
    killer.start()
    style, save = chance.choice(list(SAVERS.items()))
    for _ in range(chance.randint(1, 3)):
        time.sleep(chance.random() * 0.02)
        number += 1
        save(path, saved(number, SIZE), chance)
    killer.join()
    os.waitpid(child, 0)
    found["leftovers before"] += bool(strays(folder))
    left = recovered(folder, found)
    seen = look(path)
    found["whole"] += seen is not None
    found["newest"] += seen in ((number, None), (number, number))
    found["with its result"] += seen == (number, number)
    found["leftovers after"] += len(left)
    if seen not in ((number, None), (number, number)) or left:
        print(f"style {style}: expected {number}, found {seen}, left {left}", file=sys.stderr)
    return number


def run(folder: Path, kills: int, seed: int = 1) -> collections.Counter[str]:
    """So many kills."""
    chance, found = random.Random(seed), collections.Counter[str]()
    number = 1
    for _ in range(kills):
        number = one_kill(folder, number, chance, found) + 1
    return found


def main() -> int:
    """Run and print; 1 when anything was lost or left."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--kills", type=int, default=500)
    options.add_argument("--folder", type=Path, action="append")
    options.add_argument("--seed", type=int, default=1)
    wanted = options.parse_args()
    bad = False
    for parent in wanted.folder or [Path("/var/tmp")]:
        start = time.monotonic()
        with tempfile.TemporaryDirectory(dir=parent, prefix="kills-") as folder:
            found = run(Path(folder), wanted.kills, wanted.seed)
        bad |= found["newest"] != wanted.kills or found["whole"] != wanted.kills or found["leftovers after"] > 0
        print(
            f"{parent!s:10} kills {wanted.kills}  newest save present {found['newest']}  whole {found['whole']}  "
            f"leftovers after recovery {found['leftovers after']}  (with result {found['with its result']}; leftovers "
            f"before {found['leftovers before']}; cleared {found['cleared']}, put back {found['put back']}, "
            f"second looks {found['second look']})  {time.monotonic() - start:.0f} s",
            flush=True,
        )
    return int(bad)


if __name__ == "__main__":
    sys.exit(main())
