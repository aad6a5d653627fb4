"""What the benchmarks share: children that measure themselves, medians, tables, the machine's class."""

from __future__ import annotations

import json
import math
import os
import platform
import shutil
import statistics
import subprocess
import sys
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


@dataclass(frozen=True, slots=True)
class Taken:
    """What one contender took, medians over the repeats; `seconds` is NaN where it was not run."""

    seconds: float
    start_up: float
    peak_mb: float
    stages: dict[str, float]


NOT_RUN = Taken(math.nan, math.nan, math.nan, {})


def child(contender: str, workbook: Path) -> dict[str, object]:
    """One run on a copy of the workbook, so that every run starts from the same file."""
    with tempfile.TemporaryDirectory(prefix="bench-") as folder:
        copy = Path(shutil.copy(workbook, folder))
        command = [sys.executable, "-m", "tests.bench.one_run", contender, str(copy)]
        said = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    if said.returncode:
        raise SystemExit(f"{contender} failed on {workbook.name}:\n{said.stderr[-2000:]}")
    return json.loads(said.stdout.splitlines()[-1])


def in_turn(contenders: Sequence[str], workbook: Path, repeats: int) -> dict[str, Taken]:
    """Every contender once, then again, ...; the medians."""
    runs: dict[str, list[dict]] = {name: [] for name in contenders}
    for at in range(repeats):
        for name in contenders:
            tell(f"{workbook.stem}: {name}, run {at + 1} of {repeats}")
            runs[name].append(child(name, workbook))
    tell("")
    return {name: _median(found) for name, found in runs.items()}


def _median(runs: Sequence[dict]) -> Taken:
    def of(key: str) -> float:
        return statistics.median(run[key] for run in runs)

    names = runs[0]["stages"]
    stages = {name: statistics.median(run["stages"].get(name, 0.0) for run in runs) for name in names}
    return Taken(of("seconds"), of("start_up"), of("peak_mb"), stages)


def exponent(sizes: Sequence[int], seconds: Sequence[float]) -> float:
    """The b of seconds = a * size^b, by least squares on the logarithms."""
    x, y = [math.log(size) for size in sizes], [math.log(value) for value in seconds]
    return statistics.linear_regression(x, y).slope


def tell(text: str) -> None:
    """A line of progress on a terminal, overwritten by the next."""
    if sys.stderr.isatty():
        print(f"\r{text}\x1b[K", end="" if text else "\r", file=sys.stderr, flush=True)


def table(header: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """A table in columns, the first left, the others right."""
    lines = [list(header), *[list(row) for row in rows]]
    widths = [max(len(line[at]) for line in lines) for at in range(len(header))]
    return "\n".join(
        "  ".join(
            [line[0].ljust(widths[0]), *(cell.rjust(wide) for cell, wide in zip(line[1:], widths[1:], strict=True))]
        )
        for line in lines
    )


def seconds(value: float) -> str:
    """Seconds with three figures; a dash where nothing was run."""
    return "-" if math.isnan(value) else f"{value:.3g}" if value < 100 else f"{value:.0f}"


def ratio(upper: float, lower: float) -> str:
    """How many times as long."""
    return "-" if math.isnan(upper) or math.isnan(lower) else f"{upper / lower:.3g}"


def machine() -> str:
    """The machine's class: system, processor kind, cores, memory, Python; no names."""
    cores = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count()
    memory = ""
    if hasattr(os, "sysconf") and "SC_PHYS_PAGES" in os.sysconf_names:
        memory = f", {os.sysconf('SC_PHYS_PAGES') * os.sysconf('SC_PAGE_SIZE') / 2**30:.0f} GB"
    python = f"Python {platform.python_version()}"
    return f"{platform.system()} {platform.machine()}, {cores} cores{memory}, {python}"
