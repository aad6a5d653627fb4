"""Makes the three demo workbooks: `python -m demo_workbooks.make`, from the top folder; needs XlsxWriter.

The rows come from `truth.py`. Each workbook holds what people keep in theirs (charts, pictures, comments, a pivot
table, ...), so that one can see it come back untouched.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from demo_workbooks.make.boatyard import boatyard
from demo_workbooks.make.cold_store import cold_store
from demo_workbooks.make.flow_meter import flow_meter
from demo_workbooks.make.workshop import save

DEMOS: dict[str, Callable[[], dict[str, bytes]]] = {
    "boatyard.xlsx": boatyard,
    "cold store.xlsx": cold_store,
    "flow meter.xlsx": flow_meter,
}


def make(folder: Path) -> list[Path]:
    """Make all demo workbooks in `folder`; their paths."""
    for name, members in DEMOS.items():
        save(members(), folder / name)
    return [folder / name for name in DEMOS]
