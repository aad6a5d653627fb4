"""Many workbooks for a long time: `python -m tests.stress.soak [--minutes M] [--workbooks N] [--folders N]`.

Three savers, each a process with a way of saving and workbooks of its own, edit at random; two bridges watch all
folders. In the end every workbook must hold its last save with a matching result that was put in exactly once, nothing
of ours may be left, and the watchers' memory must not have grown.
"""

from __future__ import annotations

import argparse
import collections
import os
import random
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from bridge.files import names
from bridge.watch import memory
from tests.stress.savers import SAVERS
from tests.stress.zips import saved
from tests.watch import jobs

SETTLING_PATIENCE_S = 180.0
GROWTH_ALLOWED_KB = 4096
START = """
import sys
from pathlib import Path
from bridge.watch import WatchOptions, watch
sys.exit(watch([Path(sys.argv[1])], WatchOptions(log_folder=Path(sys.argv[2])), "tests.watch.jobs:repeat_counting"))
"""


def workbooks(top: Path, count: int, folders: int) -> list[Path]:
    return [top / f"folder {number % folders}" / f"book {number}.xlsx" for number in range(count)]


def save_at_random(top: Path, number: int, savers: int, count: int, folders: int, until: float) -> None:
    """One saver: its share of the workbooks, until the clock says so."""
    chance = random.Random(number)
    mine = workbooks(top, count, folders)[number::savers]
    styles = list(SAVERS.values())
    version = number * 1_000_000_000
    while time.time() < until:
        path = chance.choice(mine)
        for _ in range(chance.choice((1, 1, 1, 2, 3))):  # now and then a burst
            version += 1
            if not path.exists():
                continue  # our own save of a moment ago is being put back
            chance.choice(styles)(path, saved(version, 4000), chance)
        time.sleep(chance.random() * 0.4)
    print(version - number * 1_000_000_000)


def start_bridge(top: Path, home: Path, number: int, writes: Path) -> subprocess.Popen[bytes]:
    with (home / f"out {number}").open("wb") as out:
        return subprocess.Popen(
            [sys.executable, "-c", START, str(top), str(home / f"log {number}")],
            stdout=out,
            stderr=out,
            env=os.environ | {"SAVEFIT_TEST_WRITES": str(writes)},
        )


def start_saver(top: Path, number: int, wanted: argparse.Namespace, until: float) -> subprocess.Popen[str]:
    command = [sys.executable, "-m", "tests.stress.soak", "--saver", str(number), "--top", str(top)]
    command += ["--workbooks", str(wanted.workbooks), "--folders", str(wanted.folders), "--until", str(until)]
    return subprocess.Popen(command, stdout=subprocess.PIPE, text=True)


def settled(paths: list[Path]) -> list[Path]:
    """Wait until all match; those that do not in the end."""
    until = time.monotonic() + SETTLING_PATIENCE_S
    waiting = paths
    while waiting and time.monotonic() < until:
        waiting = [path for path in waiting if not jobs.matches(path)]
        time.sleep(0.5)
    return waiting


def judge(top: Path, paths: list[Path], writes: Path) -> dict[str, int]:
    """What is wrong in the end."""
    made = collections.Counter(writes.read_text().splitlines())
    finals = [
        f"{path.parent.name}/{path.name} {jobs.result_of(path.read_bytes())}" for path in paths if jobs.matches(path)
    ]
    expected = {str(path.relative_to(top)) for path in paths}
    present = {str(path.relative_to(top)) for path in top.rglob("*") if path.is_file()}
    return {
        "without matching results": len(paths) - len(finals),
        "final saves answered more than once": sum(made[line] > 1 for line in finals),
        "final saves answered by nobody": sum(made[line] == 0 for line in finals),
        "any save answered more than once": sum(count > 1 for count in made.values()),
        "strays": len(present - expected),
        "missing": len(expected - present),
    }


def run(top: Path, home: Path, wanted: argparse.Namespace) -> int:
    """The whole soak; the number of things that are wrong."""
    paths, writes = workbooks(top, wanted.workbooks, wanted.folders), home / "writes"
    writes.touch()
    for path in paths:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(saved(1, 4000))
    bridges = [start_bridge(top, home, number, writes) for number in range(wanted.bridges)]
    settled(paths)
    until = time.time() + wanted.minutes * 60
    savers = [start_saver(top, number, wanted, until) for number in range(wanted.savers)]
    early = late = [0]
    while time.time() < until:
        time.sleep(min(5, wanted.minutes * 6))
        late = [memory.resident(bridge.pid) >> 10 for bridge in bridges]
        if early == [0] and time.time() > until - wanted.minutes * 60 * 0.75:
            early = late
    saves = sum(int(saver.communicate(timeout=60)[0]) for saver in savers)
    settled(paths)
    time.sleep(5)  # a second answer to the same save would come now
    alive = sum(bridge.poll() is None for bridge in bridges)
    for bridge in bridges:
        bridge.send_signal(signal.SIGTERM)
    codes = [bridge.wait(30) for bridge in bridges]
    found = judge(top, paths, writes)
    growth = max((after - before for before, after in zip(early, late, strict=False)), default=0)
    answered = len(writes.read_text().splitlines())
    print(
        f"{wanted.workbooks} workbooks, {wanted.folders} folders, {wanted.minutes:g} minutes: "
        f"{saves} saves, {answered} fits"
    )
    for name, count in found.items():
        print(f"  {name}: {count}")
    print(f"  watchers alive {alive} of {wanted.bridges}, exit codes {codes}, resident kB early {early} late {late}")
    left = [name for name in os.listdir(top) if name.startswith(names.PREFIX)]
    wrong = sum(found.values()) + (wanted.bridges - alive) + sum(codes) + len(left)
    return wrong + (growth > GROWTH_ALLOWED_KB)


def main() -> int:
    """Run and print; 1 when anything was wrong."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--minutes", type=float, default=10.0)
    options.add_argument("--workbooks", type=int, default=200)
    options.add_argument("--folders", type=int, default=20)
    options.add_argument("--savers", type=int, default=3)
    options.add_argument("--bridges", type=int, default=2)
    options.add_argument("--saver", type=int)
    options.add_argument("--top", type=Path)
    options.add_argument("--until", type=float)
    wanted = options.parse_args()
    if wanted.saver is not None:
        save_at_random(wanted.top, wanted.saver, wanted.savers, wanted.workbooks, wanted.folders, wanted.until)
        return 0
    with tempfile.TemporaryDirectory(prefix="soak-") as home, tempfile.TemporaryDirectory(prefix="soak-") as top:
        return int(run(Path(top).resolve(), Path(home), wanted) > 0)


if __name__ == "__main__":
    sys.exit(main())
