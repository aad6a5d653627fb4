"""From a saved workbook to its results, against a plain script that does the same, and against the reader alone.

`python -m tests.bench.save_to_results [CASE…] [--growth] [--start] [--watched]`; without any: the two small cases,
`--start` and `--watched`.
"""

from __future__ import annotations

import argparse
import os
import shutil
import signal
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from tests.bench.measuring import NOT_RUN, ROOT, Taken, exponent, in_turn, machine, ratio, seconds, table, tell
from tests.bench.workbooks import make_workbook

# rows, columns, contenders: the plain script needs too much memory at the spreadsheet's limit.
CASES = {
    "typical": (200, 8, ("savefit", "plain", "reader")),
    "large": (10_000, 12, ("savefit", "plain", "reader")),
    "very-large": (100_000, 20, ("savefit", "plain", "reader")),
    "limit": (1_000_000, 10, ("savefit", "reader")),
}
GROWTH_ROWS = (10_000, 30_000, 100_000, 300_000, 1_000_000)
GROWTH_COLUMNS = 10


def main() -> None:
    """Run what was asked for and print it."""
    options = _options()
    print(machine())
    with tempfile.TemporaryDirectory(prefix="bench-") as name:
        folder = Path(name)
        if options.cases:
            print("\n" + cases(folder, options.cases, options.repeats))
        if options.growth:
            print("\n" + growth(folder, options.repeats))
        if options.start:
            print("\n" + start(folder, options.repeats))
        if options.watched:
            print("\n" + watched(folder, options.repeats))


def _options() -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m tests.bench.save_to_results", description=__doc__.split("\n")[0])
    parser.add_argument("cases", nargs="*", metavar="CASE", help=f"of {', '.join(CASES)}")
    parser.add_argument("--growth", action="store_true", help="the growth table, 10,000 to 1,000,000 rows")
    parser.add_argument("--start", action="store_true", help="the one-shot command, cold")
    parser.add_argument("--watched", action="store_true", help="a warm watcher on the typical case")
    parser.add_argument("--repeats", type=int, default=3)
    options = parser.parse_args()
    unknown = set(options.cases) - set(CASES)
    if unknown:
        parser.error(f"no case {', '.join(sorted(unknown))}; there are {', '.join(CASES)}")
    if not (options.cases or options.growth or options.start or options.watched):
        options.cases, options.start, options.watched = ["typical", "large"], True, True
    return options


def cases(folder: Path, names: list[str], repeats: int) -> str:
    """Medians and ratios per case, then the seconds of each stage."""
    lines, stages = [], []
    for name in names:
        rows, columns, contenders = CASES[name]
        found = _measured(folder, name, rows, columns, contenders, repeats)
        ours, plain, reader = (found.get(who, NOT_RUN) for who in ("savefit", "plain", "reader"))
        lines.append(
            [
                f"{name} {rows:,} x {columns}",
                *(seconds(taken.seconds) for taken in (ours, plain, reader)),
                ratio(plain.seconds, ours.seconds),
                ratio(ours.seconds, reader.seconds),
                *(seconds(taken.peak_mb) for taken in (ours, plain)),
            ]
        )
        stages.append(f"{name}: " + ", ".join(f"{stage} {seconds(took)}" for stage, took in ours.stages.items()))
    header = ["case", "savefit s", "plain s", "reader s", "plain/savefit", "savefit/reader", "MB", "plain MB"]
    return table(header, lines) + "\n\nseconds by stage\n" + "\n".join(stages)


def _measured(
    folder: Path, name: str, rows: int, columns: int, contenders: tuple[str, ...], repeats: int
) -> dict[str, Taken]:
    workbook = folder / f"{name}.xlsx"
    tell(f"making {workbook.name}")
    make_workbook(workbook, rows, columns)
    try:
        return in_turn(contenders, workbook, repeats)
    finally:
        workbook.unlink()


def growth(folder: Path, repeats: int) -> str:
    """Seconds and memory by rows, and the exponent that fits them."""
    contenders = ("savefit", "reader")
    found = [
        _measured(folder, f"{rows}", rows, GROWTH_COLUMNS, contenders, repeats if rows < 300_000 else 1)
        for rows in GROWTH_ROWS
    ]
    lines = [
        [
            f"{rows:,}",
            seconds(both["savefit"].seconds),
            seconds(both["reader"].seconds),
            ratio(both["savefit"].seconds, both["reader"].seconds),
            seconds(both["savefit"].peak_mb),
            f"{1e6 * both['savefit'].seconds / rows:.3g}",
        ]
        for rows, both in zip(GROWTH_ROWS, found, strict=True)
    ]
    header = [f"rows x {GROWTH_COLUMNS}", "savefit s", "reader s", "savefit/reader", "MB", "µs a row"]
    fitted = exponent(GROWTH_ROWS, [both["savefit"].seconds for both in found])
    return f"{table(header, lines)}\nseconds grow as rows^{fitted:.3f}"


def start(folder: Path, repeats: int) -> str:
    """The command, cold, beside a process that only imports numpy, scipy and pandas."""
    workbook = folder / "typical.xlsx"
    make_workbook(workbook, 200, 8)
    command, imports = [], []
    for _ in range(repeats):
        copy = Path(shutil.copy(workbook, folder / "cold.xlsx"))
        command.append(_wall([sys.executable, "-m", "bridge", "fit", str(copy)]))
        imports.append(_wall([sys.executable, "-c", "import numpy, scipy.linalg, scipy.stats, pandas"]))
    ours, bare = statistics.median(command), statistics.median(imports)
    return (
        f"one-shot command, 200 x 8: {ours:.2f} s; importing numpy, scipy, pandas {bare:.2f} s; ratio {ours / bare:.2f}"
    )


def _wall(command: list[str]) -> float:
    begin = time.perf_counter()
    subprocess.run(command, cwd=ROOT, check=True, capture_output=True)
    return time.perf_counter() - begin


@contextmanager
def watcher(folder: Path, *options: str) -> Iterator[subprocess.Popen[bytes]]:
    """`savefit watch` on a folder, with a state and log folder of its own, ended afterwards."""
    with tempfile.TemporaryDirectory(prefix="bench-home-") as home:
        own = {"HOME": home, "XDG_STATE_HOME": f"{home}/state", "XDG_CACHE_HOME": f"{home}/cache"}
        command = [sys.executable, "-m", "bridge", "watch", str(folder), *options]
        process = subprocess.Popen(
            command, cwd=ROOT, env=os.environ | own, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
        )
        try:
            yield process
        finally:
            process.send_signal(signal.SIGTERM)
            process.wait(30)


def watched(folder: Path, repeats: int) -> str:
    """From the end of a save to results in place, the watcher warm."""
    place = folder / "watched"
    place.mkdir()
    versions = [folder / f"version {at}.xlsx" for at in range(repeats + 1)]
    for at, version in enumerate(versions):
        make_workbook(version, 200, 8, seed=at + 1)
    with watcher(place):
        time.sleep(2)
        waits = [_until_answered(version, place / "typical.xlsx") for version in versions]
    later = statistics.median(waits[1:])
    return f"watched, 200 x 8: from save to results {later:.2f} s (the first save, cold: {waits[0]:.2f} s)"


def _until_answered(version: Path, path: Path, patience: float = 120.0) -> float:
    """Save `version` at `path` as programs do (beside it, then renamed), and wait for another file to stand there."""
    beside = path.with_name(".saving.tmp")
    shutil.copyfile(version, beside)
    saved = beside.stat().st_ino
    os.replace(beside, path)
    begin = time.perf_counter()
    while time.perf_counter() - begin < patience:
        if path.stat().st_ino != saved:
            return time.perf_counter() - begin
        time.sleep(0.005)
    raise SystemExit(f"no results within {patience:g} s")


if __name__ == "__main__":
    main()
