"""Simulated coverage of the 95% intervals for the mean and for a single case.

`python -m tests.regression.coverage [--repeats 4000]` prints, model by model, in what share of the repeats the truth
lay within. `test_coverage.py` runs a few repeats of each. The design stays, the response is drawn anew, each model
from random numbers of its own.

Each model is drawn from what its intervals claim to serve. Some lines are there as cautions and claim less:
- HC3, grouped and serial errors are right for many rows, groups, lags; the lines with few show by how much they fall
  short there (serial errors most: Andrews 1991, Econometrica 59, table 3);
- the case interval under uneven spread has about the right share over all cases together, not at a given predictor.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from bridge.regression.core import fit_model
from bridge.regression.estimates import estimate
from bridge.regression.spec import CategoryTerm, Errors, FitBy, Levels, ModelSpec, NumberTerm, Observations, Shape

REPEATS = 4_000
DRAWS = 25  # single cases at each new case, each repeat

Noise = Callable[[np.random.Generator, Observations], np.ndarray]


@dataclass(frozen=True)
class Scenario:
    """A model with its design and new cases; `noise` for the rows, `case_noise` for the cases, on the fitted scale.

    `mean`, `case`: whether the interval claims 95%. `cases` have the columns of the design.
    """

    name: str
    spec: ModelSpec
    design: Observations
    cases: Observations
    noise: Noise
    case_noise: Noise
    mean: bool = True
    case: bool = True


@dataclass(frozen=True)
class Covered:
    """Shares within the interval, and their standard errors over the repeats."""

    mean: float
    mean_error: float
    case: float
    case_error: float


def level(rows: Observations) -> np.ndarray:
    """The truth on the fitted scale."""
    found = 2.0 + 0.3 * rows.numbers("a")
    return found + (0.5 * rows.levels("kind").codes if "kind" in rows.columns else 0.0)


def run(scenario: Scenario, repeats: int, seed: int = 1) -> Covered:
    """Draw, fit and look, so many times."""
    rng = np.random.default_rng(seed)
    shape = scenario.spec.response_shape
    weights = None if scenario.spec.weight is None else scenario.cases.numbers("w")
    truth = level(scenario.cases)
    in_mean, in_case = np.empty(repeats), np.empty(repeats)
    for at in range(repeats):
        eta = level(scenario.design) + scenario.noise(rng, scenario.design)
        y = np.exp(eta) if shape is Shape.LOG else eta
        result = fit_model(scenario.spec, Observations({**scenario.design.columns, "y": y}, scenario.design.n))
        found = estimate(result, scenario.cases, weights)
        drawn = truth + np.array([scenario.case_noise(rng, scenario.cases) for _ in range(DRAWS)])
        mean = truth
        if shape is Shape.LOG:  # of a lognormal response
            mean, drawn = np.exp(truth + 0.3**2 / 2), np.exp(drawn)
        in_mean[at] = np.mean((found.mean_low <= mean) & (mean <= found.mean_high))
        in_case[at] = np.mean((found.case_low <= drawn) & (drawn <= found.case_high))
    errors = [float(share.std(ddof=1) / np.sqrt(repeats)) for share in (in_mean, in_case)]
    return Covered(float(in_mean.mean()), errors[0], float(in_case.mean()), errors[1])


# --- what is drawn -------------------------------------------------------------------------------------------


def even(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    return 0.3 * rng.standard_normal(rows.n)


def by_weight(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    return 0.5 * rng.standard_normal(rows.n) / np.sqrt(rows.numbers("w"))


def by_size(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    return 0.1 * rows.numbers("a") * rng.standard_normal(rows.n)


def by_group(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    groups = rows.numbers("group").astype(int)
    return 0.4 * rng.standard_normal(groups.max() + 1)[groups] + 0.3 * rng.standard_normal(rows.n)


def series(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    """Each error holds half of the one before: a moving average."""
    drawn = 0.3 * rng.standard_normal(rows.n + 1)
    return drawn[1:] + 0.5 * drawn[:-1]


def single(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    """A case of that series on its own."""
    return 0.3 * np.sqrt(1.25) * rng.standard_normal(rows.n)


def with_wild_ones(rng: np.random.Generator, rows: Observations) -> np.ndarray:
    drawn = 0.3 * rng.standard_normal(rows.n)
    return np.where(rng.random(rows.n) < 0.05, 10 * drawn, drawn)


def _design(n: int, seed: int = 7) -> Observations:
    rng = np.random.default_rng(seed)
    columns: dict[str, np.ndarray | Levels] = {
        "a": np.round(rng.gamma(3.0, 1.0, n) + 0.5, 2),
        "kind": Levels(np.concatenate([np.arange(3), rng.integers(0, 3, n - 3)]), ("p", "q", "r")),
        "w": np.round(rng.uniform(0.2, 4, n), 2),
        "time": np.arange(float(n)),
        "group": np.arange(n) // 5.0,
    }
    return Observations(columns, n)


def _grouped_design(groups: int) -> Observations:
    """The predictor is the same within a group: where ordinary standard errors mislead most."""
    rows = _design(groups * 5)
    return Observations({**rows.columns, "a": np.repeat(rows.numbers("a")[:groups], 5)}, rows.n)


def _cases() -> Observations:
    a = np.array([1.0, 2.5, 4.0, 7.0])
    kind = Levels(np.array([0, 1, 2, 0]), ("p", "q", "r"))
    return Observations({"a": a, "kind": kind, "w": np.array([0.3, 1.0, 2.0, 4.0]), "group": np.arange(4.0)}, 4)


LINE = ModelSpec("y", terms=(NumberTerm("a"),))
WITH_KIND = ModelSpec("y", terms=(NumberTerm("a"), CategoryTerm("kind")))


def scenarios() -> list[Scenario]:
    """In the order of the table: exact methods on few rows, approximate ones on few and on many."""
    cases, line_cases = _cases(), _without_kind(_cases())
    few, many = _without_kind(_design(200)), _without_kind(_design(1_000))
    some_groups, many_groups = (_without_kind(_grouped_design(count)) for count in (40, 250))
    short, long = _without_kind(_design(120)), _without_kind(_design(3_000))
    uneven = replace(LINE, errors=Errors.UNEVEN_SPREAD)
    grouped = replace(LINE, errors=Errors.GROUPED, group="group")
    serial = replace(LINE, errors=Errors.SERIAL, order="time")
    logged = replace(WITH_KIND, response_shape=Shape.LOG)
    return [
        Scenario("ordinary, 30 rows", WITH_KIND, _design(30), cases, even, even),
        Scenario("weighted, 30 rows", replace(WITH_KIND, weight="w"), _design(30), cases, by_weight, by_weight),
        Scenario("log response, 60 rows", logged, _design(60), cases, even, even),
        Scenario("uneven spread (HC3), 200 rows", uneven, few, line_cases, by_size, by_size, mean=False, case=False),
        Scenario("uneven spread (HC3), 1,000 rows", uneven, many, line_cases, by_size, by_size, case=False),
        Scenario("  cases like the rows", uneven, many, many, by_size, by_size, case=False),
        Scenario("grouped, 40 groups of 5", grouped, some_groups, line_cases, by_group, by_group, mean=False),
        Scenario("grouped, 250 groups of 5", grouped, many_groups, line_cases, by_group, by_group),
        Scenario("serial, 120 rows, 4 lags by rule", serial, short, line_cases, series, single, mean=False),
        Scenario("serial, 3,000 rows, 40 lags", replace(serial, lags=40), long, line_cases, series, single),
        Scenario(
            "resistant, 5% wild, 120 rows",
            replace(LINE, fit_by=FitBy.RESISTANT),
            short,
            line_cases,
            with_wild_ones,
            even,
            case=False,
        ),
    ]


def _without_kind(rows: Observations) -> Observations:
    return Observations({name: column for name, column in rows.columns.items() if name != "kind"}, rows.n)


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--repeats", type=int, default=REPEATS)
    asked = parser.parse_args()
    start = time.perf_counter()
    print(
        f"{'model':38s} {'mean interval':>18s} {'case interval':>18s}   (share within, 2 Monte-Carlo standard errors)"
    )
    for at, scenario in enumerate(scenarios()):
        found = run(scenario, asked.repeats, seed=at)
        mean = f"{found.mean:.1%} ± {2 * found.mean_error:.1%}{'' if scenario.mean else ' *'}"
        case = f"{found.case:.1%} ± {2 * found.case_error:.1%}{'' if scenario.case else ' *'}"
        print(f"{scenario.name:38s} {mean:>18s} {case:>18s}", flush=True)
    print(f"* not claimed to be 95%. {asked.repeats} repeats each, {time.perf_counter() - start:.0f} s in all.")


if __name__ == "__main__":
    main()
