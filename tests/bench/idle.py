"""What a watcher costs while nobody saves, and how it copes when many workbooks are saved at once.

`python -m tests.bench.idle [--workbooks 1000] [--seconds 60] [--burst 100]`. Reads /proc, so Linux only.
"""

from __future__ import annotations

import argparse
import os
import shutil
import subprocess
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from bridge.job import fit_workbook
from tests.bench.measuring import machine
from tests.bench.save_to_results import watcher
from tests.bench.workbooks import make_workbook

_TICK = os.sysconf("SC_CLK_TCK") if hasattr(os, "sysconf") else 100
FOLDERS = 25


def main() -> None:
    """Idle first, then the burst."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench.idle", description=__doc__.split("\n")[0])
    parser.add_argument("--workbooks", type=int, default=1000, help="workbooks in the folder (default: %(default)s)")
    parser.add_argument("--seconds", type=float, default=60.0, help="how long to look on (default: %(default)s)")
    parser.add_argument("--burst", type=int, default=100, help="workbooks saved at once; 0: leave out")
    parser.add_argument("--polling", action="store_true", help="with savefit watch --polling")
    options = parser.parse_args()
    if not Path("/proc/self/stat").exists():
        raise SystemExit("This benchmark reads /proc and runs on Linux only.")
    print(machine())
    with tempfile.TemporaryDirectory(prefix="bench-") as name:
        print(idle(Path(name) / "idle", options.workbooks, options.seconds, ["--polling"] if options.polling else []))
        if options.burst:
            print(burst(Path(name) / "burst", options.burst))


def idle(place: Path, count: int, seconds: float, watch_options: list[str]) -> str:
    """Processor share and memory of the watcher and its children over fitted workbooks, once it has come to rest."""
    _fill(place, count)
    with watcher(place, *watch_options) as process:
        _rest(process)
        before, start = _used(process.pid), time.monotonic()
        time.sleep(seconds)
        share = (_used(process.pid) - before) / (time.monotonic() - start)
        alone, children = _memory(process.pid), sum(_memory(pid) for pid in _children(process.pid))
    return (
        f"idle over {count:,} workbooks for {seconds:g} s: {100 * share:.2f}% of one core, "
        f"watcher {alone:.0f} MB, its children {children:.0f} MB"
    )


def _fill(place: Path, count: int) -> None:
    """Copies of one fitted workbook in some folders."""
    place.mkdir()
    first = place / "first.xlsx"
    make_workbook(first, 200, 8)
    fit_workbook(first)
    for at in range(1, count):
        folder = place / f"folder {at % FOLDERS}"
        folder.mkdir(exist_ok=True)
        shutil.copy(first, folder / f"workbook {at}.xlsx")


def _rest(process: subprocess.Popen[bytes], quiet: float = 5.0, patience: float = 600.0) -> None:
    """Wait until the watcher has used next to no processor time for `quiet` seconds."""
    end = time.monotonic() + patience
    while time.monotonic() < end:
        before = _used(process.pid)
        time.sleep(quiet)
        if process.poll() is not None:
            raise SystemExit("the watcher ended by itself")
        if _used(process.pid) - before < 0.02 * quiet:
            return
    raise SystemExit(f"the watcher did not come to rest within {patience:g} s")


def burst(place: Path, count: int) -> str:
    """All workbooks saved at once, two workers, against half the sum of their single times in a warm process."""
    place.mkdir()
    made = place.parent / "made"
    made.mkdir()
    for at in range(count):
        make_workbook(made / f"workbook {at}.xlsx", 200, 8, seed=at)
    alone = place.parent / "alone"
    shutil.copytree(made, alone)
    singles = []
    for path in sorted(alone.iterdir()):
        start = time.perf_counter()
        fit_workbook(path)
        singles.append(time.perf_counter() - start)
    with watcher(place, "--workers", "2"):
        time.sleep(2)
        start = time.perf_counter()
        saved = {path.name: path.stat().st_ino for path in made.iterdir()}
        for name in saved:
            os.replace(made / name, place / name)
        _until(lambda: all((place / name).stat().st_ino != number for name, number in saved.items()))
        took = time.perf_counter() - start
    half = sum(singles) / 2
    return (
        f"{count} workbooks saved at once, two workers: {took:.2f} s; half the sum of their single times {half:.2f} s; "
        f"ratio {took / half:.2f}"
    )


def _until(done: Callable[[], bool], patience: float = 600.0) -> None:
    end = time.monotonic() + patience
    while not done():
        if time.monotonic() > end:
            raise SystemExit(f"not all answered within {patience:g} s")
        time.sleep(0.02)


def _used(pid: int) -> float:
    """Seconds of processor time of a process, its ended children and its living ones."""
    fields = _stat(pid)
    return sum(map(int, fields[11:15])) / _TICK + sum(_used(child) for child in _children(pid))


def _stat(pid: int) -> list[str]:
    """The fields of /proc/PID/stat from the third on (the second may hold spaces)."""
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
    except (FileNotFoundError, ProcessLookupError):
        return ["0"] * 50


def _children(pid: int) -> list[int]:
    everyone = [int(name) for name in os.listdir("/proc") if name.isdigit()]
    return [other for other in everyone if int(_stat(other)[1]) == pid]


def _memory(pid: int) -> float:
    """Resident memory in megabytes."""
    return int(_stat(pid)[21]) * os.sysconf("SC_PAGE_SIZE") / 2**20


if __name__ == "__main__":
    main()
