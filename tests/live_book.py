"""One workbook with a model of every kind, for tests of the live sheets. All data invented."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np

from bridge.job import Report
from tests.books import fitted_book

KINDS = ("oak", "steel", "glass fibre")
MODELS: Mapping[str, Mapping[object, object]] = {
    "number": {"y": "response", "size (m)": "predictor", "age": "predictor"},
    "loglog": {"y": "log response", "size (m)": "log predictor", "kind": "category"},
    "fitted": {"y": "log response", "size (m)": "predictor", "estimate back on": "fitted"},
    "root": {"y": "root response", "size (m)": "root predictor", "age": "predictor"},
    "powers": {"y": "response", "size (m)": "cubed predictor", "age": "reciprocal predictor"},
    "bend": {"y": "response", "size (m)": "predictor bend at 12,5", "interval level": "90%"},
    "category": {"y": "response", "kind": "category base steel", "age": "predictor"},
    "crossed": {
        "y": "log response",
        "size (m)": "log predictor",
        "kind": "category",
        "age": "predictor",
        ("size (m)", "kind"): "yes",
        ("size (m)", "age"): "yes",
    },
    "weighted": {"y": "response", "size (m)": "predictor", "w": "weight"},
    "uneven": {"y": "response", "size (m)": "predictor", "standard errors": "uneven spread"},
    "origin": {"y": "response", "size (m)": "predictor", "intercept": "no"},
    "resistant": {"y": "response", "size (m)": "predictor", "age": "predictor", "fit by": "resistant"},
}


def columns(n: int = 60) -> dict[str, list[object]]:
    """The data, the same every time."""
    rng = np.random.default_rng(7)
    size, age = np.round(rng.uniform(5, 30, n), 1), np.round(rng.uniform(1, 40, n), 0)
    kind = rng.integers(0, 3, n)
    y = np.round(np.exp(0.4 + 1.1 * np.log(size) + 0.01 * age + 0.2 * kind + rng.normal(0, 0.2, n)), 2)
    return {
        "job": [f"J{at:03}" for at in range(n)],
        "y": y.tolist(),
        "size (m)": size.tolist(),
        "age": age.tolist(),
        "kind": [KINDS[at] for at in kind],
        "w": np.round(10 / size, 2).tolist(),
    }


def make(path: Path) -> Report:
    """The workbook, fitted."""
    return fitted_book(path, columns(), MODELS)
