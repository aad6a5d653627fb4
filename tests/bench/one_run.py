"""One contender on one workbook, in a process of its own: prints what it took as one line of JSON.

`python -m tests.bench.one_run savefit|plain|reader FILE`. `seconds` leave the imports aside, `start_up` is those.
"""

from __future__ import annotations

import json
import resource
import sys
import time
from collections.abc import Callable, Mapping
from pathlib import Path

Stages = Mapping[str, float]


def _savefit() -> Callable[[Path], Stages]:
    from bridge.job import fit_workbook

    def run(path: Path) -> Stages:
        report = fit_workbook(path)
        fitted = [model.name for model in report.models if model.result is not None]
        if fitted != ["A", "B", "C"]:
            raise SystemExit(f"not fitted as asked: {report.outcome} {report.message} {report.all_problems}")
        return report.stages

    return run


def _plain() -> Callable[[Path], Stages]:
    from tests.bench.plain_script import run

    return lambda path: run(path) or {}


def _reader() -> Callable[[Path], Stages]:
    """The reader library alone: the data sheet's cells as Python values."""
    import python_calamine

    from tests.bench.workbooks import SHEET

    def run(path: Path) -> Stages:
        python_calamine.load_workbook(str(path)).get_sheet_by_name(SHEET).to_python()
        return {}

    return run


CONTENDERS = {"savefit": _savefit, "plain": _plain, "reader": _reader}


def main(name: str, path: Path) -> None:
    """Import, run once, print."""
    start = time.perf_counter()
    run = CONTENDERS[name]()
    ready = time.perf_counter()
    stages = run(path)
    done = time.perf_counter()
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    megabytes = peak / (1024**2 if sys.platform == "darwin" else 1024)
    print(
        json.dumps({"seconds": done - ready, "start_up": ready - start, "peak_mb": megabytes, "stages": dict(stages)})
    )


if __name__ == "__main__":
    main(sys.argv[1], Path(sys.argv[2]))
