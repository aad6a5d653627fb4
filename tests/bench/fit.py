"""The numeric core alone, with all diagnostics and cross-validation, against numpy's least squares and nothing else.

`python -m tests.bench.fit [--rows N…] [--columns P…] [--repeats 3]`. Both with the threads that they take by themselves
and, with `--one-thread`, both with one.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections.abc import Callable
from contextlib import nullcontext
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from bridge.regression.core import fit_model
from bridge.regression.results import ModelResult
from bridge.regression.spec import ModelSpec, NumberTerm, Observations
from tests.bench.measuring import exponent, machine, ratio, seconds, table, tell


def main() -> None:
    """Time both in turn for every size, and print the table."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench.fit", description=__doc__.split("\n")[0])
    parser.add_argument("--rows", type=int, nargs="+", default=[1_000, 10_000, 100_000, 1_000_000], metavar="N")
    parser.add_argument("--columns", type=int, nargs="+", default=[10, 30], metavar="P")
    parser.add_argument("--repeats", type=int, default=3)
    parser.add_argument("--one-thread", action="store_true")
    options = parser.parse_args()
    print(machine())
    with threadpool_limits(1) if options.one_thread else nullcontext():
        for p in options.columns:
            print("\n" + compare(options.rows, p, options.repeats))


def compare(sizes: list[int], p: int, repeats: int) -> str:
    """One line per number of rows, for `p` coefficients."""
    found = {n: _in_turn(_contenders(n, p), repeats) for n in sizes}
    lines = [
        [f"{n:,} x {p}", *map(seconds, took.values()), ratio(took["lstsq"], took["core"])] for n, took in found.items()
    ]
    tell("")
    text = table(["rows x coefficients", "lstsq s", "core s", "core, 2 folds s", "lstsq/core"], lines)
    if len(sizes) > 1:
        text += f"\ncore's seconds grow as rows^{exponent(sizes, [took['core'] for took in found.values()]):.3f}"
    return text


def _contenders(n: int, p: int) -> dict[str, Callable[[], object]]:
    """The library's solve; the core with ten folds, and with two, to see what the other eight cost."""
    x, y = _data(n, p)
    spec, rows = _asked(x, y)
    return {
        "lstsq": lambda: np.linalg.lstsq(x, y, rcond=None),
        "core": lambda: _checked(fit_model(spec, rows), x, y),
        "two folds": lambda: _checked(fit_model(replace(spec, folds=2), rows), x, y),
    }


def _data(n: int, p: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """A design with an intercept and p - 1 columns of two decimals, and a response."""
    random = np.random.default_rng(7)
    x = np.column_stack([np.ones(n), np.round(random.normal(20, 5, (n, p - 1)), 2)])
    y = np.round(x @ np.linspace(1, 2, p) + random.normal(0, 3, n), 2)
    return x, y


def _asked(x: NDArray[np.float64], y: NDArray[np.float64]) -> tuple[ModelSpec, Observations]:
    columns = {f"x{at}": np.ascontiguousarray(x[:, at]) for at in range(1, x.shape[1])}
    spec = ModelSpec("y", terms=tuple(NumberTerm(name) for name in columns))
    return spec, Observations(columns | {"y": y}, len(y))


def _checked(result: ModelResult, x: NDArray[np.float64], y: NDArray[np.float64]) -> None:
    """A contender that is fast and wrong does not count."""
    mean_leverage = float(np.mean(result.influence.leverage))
    if not np.isclose(mean_leverage * len(y), x.shape[1]) or not np.isfinite(result.cross_validation.rmse):
        raise SystemExit("the core's figures are wrong")


def _in_turn(contenders: dict[str, Callable[[], object]], repeats: int) -> dict[str, float]:
    taken: dict[str, list[float]] = {name: [] for name in contenders}
    for at in range(repeats):
        for name, run in contenders.items():
            tell(f"{name}, run {at + 1} of {repeats}")
            start = time.perf_counter()
            run()
            taken[name].append(time.perf_counter() - start)
    return {name: statistics.median(times) for name, times in taken.items()}


if __name__ == "__main__":
    main()
