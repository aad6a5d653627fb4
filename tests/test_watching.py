"""The real watcher on a demo workbook: an edit is noticed, numbers are right, a save without change left alone."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import openpyxl
import pytest
import python_calamine
import statsmodels.api as sm

from bridge import samples
from tests.books import table

PATIENCE = 60.0


def wait_for(seen: Callable[[], bool], what: str) -> None:
    """Wait until `seen`; a watcher that never gets there fails here."""
    end = time.monotonic() + PATIENCE
    while time.monotonic() < end:
        if seen():
            return
        time.sleep(0.1)
    raise AssertionError(f"not seen within {PATIENCE:g} s: {what}")


@pytest.fixture
def watched(tmp_path: Path) -> Iterator[Path]:
    folder = tmp_path / "quotes"
    folder.mkdir()
    log = (tmp_path / "watch.log").open("w")
    watcher = subprocess.Popen(
        [sys.executable, "-m", "bridge", "watch", str(folder)],
        stdout=log,
        stderr=subprocess.STDOUT,
        env=os.environ | {"XDG_STATE_HOME": str(tmp_path / "state"), "HOME": str(tmp_path)},
    )
    yield folder
    watcher.send_signal(signal.SIGTERM)
    assert watcher.wait(30) is not None
    log.close()


def stamp(path: Path) -> tuple[int, int]:
    found = path.stat()
    return found.st_ino, found.st_mtime_ns


def has_results(path: Path, sheet: str = "fit coefficients") -> bool:
    try:
        return sheet in openpyxl.load_workbook(path, read_only=True).sheetnames
    except (OSError, ValueError, KeyError):
        return False


def boatyard(folder: Path) -> Path:
    name, content = next((name, content) for name, content in samples.demo_files() if "boat" in name)
    path = folder / name
    path.write_bytes(content)
    return path


def straight_line_reference(path: Path) -> dict[str, float]:
    """Model A of the boatyard demo, fitted by statsmodels from the cells as another reader sees them."""
    page = openpyxl.load_workbook(path, data_only=True)
    asked = page["fit request"]
    data = page[asked.cell(next(r for r in range(1, 30) if asked.cell(r, 1).value == "data sheet"), 2).value]
    rows = list(data.iter_rows(values_only=True))
    top = next(at for at, row in enumerate(rows) if "hours" in [str(cell) for cell in row])
    names = [str(name) for name in rows[top]]
    index = {name: names.index(name) for name in names}
    used = [
        r
        for r in rows[top + 1 :]
        if all(r[index[name]] is not None for name in ("hours", "length (m)", "coats", "hull"))
    ]
    hulls = sorted({row[index["hull"]] for row in used})
    counts = {hull: sum(row[index["hull"]] == hull for row in used) for hull in hulls}
    base = max(hulls, key=lambda hull: counts[hull])
    x = np.column_stack(
        [np.ones(len(used)), [float(r[index["length (m)"]]) for r in used], [float(r[index["coats"]]) for r in used]]
        + [[float(r[index["hull"]] == hull) for r in used] for hull in hulls if hull != base]
    )
    fit = sm.OLS(np.array([float(r[index["hours"]]) for r in used]), x).fit()
    labels = ["intercept", "length (m)", "coats"] + [f"hull {hull}" for hull in hulls if hull != base]
    return dict(zip(labels, fit.params, strict=True))


def shows(path: Path, expected: dict[str, float]) -> bool:
    """Whether the sheets show these coefficients for model A, to 9 digits."""
    try:
        found = table(path, "fit coefficients", "term", "A")
    except (OSError, StopIteration, python_calamine.CalamineError):
        return False
    return {label: found.get(label, {}).get("coefficient") for label in expected} == pytest.approx(expected, rel=1e-9)


def test_a_save_is_answered_an_unchanged_save_is_not(watched: Path) -> None:
    path = boatyard(watched)
    wait_for(lambda: has_results(path), "the first results")
    expected = straight_line_reference(path)
    assert shows(path, expected)

    _double_first_hours(path)
    changed = straight_line_reference(path)
    assert changed != pytest.approx(expected, rel=1e-6)
    wait_for(lambda: shows(path, changed), "new results after an edit")

    time.sleep(1.5)
    quiet = path.read_bytes()
    os.utime(path)
    path.write_bytes(quiet)
    touched = stamp(path)
    time.sleep(4)
    assert stamp(path) == touched
    assert path.read_bytes() == quiet


def _double_first_hours(path: Path) -> None:
    book = openpyxl.load_workbook(path)
    for page in book.worksheets:
        for row in page.iter_rows():
            for cell in row:
                if cell.value == "hours" and isinstance(page.cell(cell.row + 1, cell.column).value, int | float):
                    below = page.cell(cell.row + 1, cell.column)
                    below.value = float(below.value) * 2
                    book.save(path)
                    return
    raise AssertionError("no hours column found")
