"""Published data sets with their published results, as printed; each file names its source.

`fits.published` holds what was printed (`from_memory` where the print was not at hand), `fits.exact` the same figures
recomputed in exact rational arithmetic on the printed data, at 20 digits or more. `digits`: how many to compare.
"""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from bridge.regression.spec import Levels, ModelSpec, NumberTerm, Observations, Shape

FOLDER = Path(__file__).parent
STRD = (
    "norris",
    "longley",
    "pontius",
    "noint1",
    "noint2",
    "filip",
    "wampler1",
    "wampler2",
    "wampler3",
    "wampler4",
    "wampler5",
)
LITERATURE = (
    "alaska",
    "load_cell",
    "anscombe",
    "stack_loss",
    "engel",
    "hald",
    "forbes",
    "stopping",
    "steam",
    "credit_card",
    "grunfeld",
)


@dataclass(frozen=True)
class PublishedFit:
    """One model of a data set. `published` and `exact` map figures (see the files) to printed decimals."""

    set_name: str
    model: str
    spec: ModelSpec
    observations: Observations
    digits: int
    from_memory: bool
    published: dict[str, Any]
    exact: dict[str, Any]


@dataclass(frozen=True)
class ReferenceSet:
    """A data set: `columns` holds the cells as printed."""

    name: str
    source: str
    columns: dict[str, list[str]]
    fits: tuple[PublishedFit, ...]


def load(file: str) -> ReferenceSet:
    """The set kept in `<file>.toml`."""
    found = tomllib.loads((FOLDER / f"{file}.toml").read_text("utf-8"))
    header, *rows = (line.split() for line in found["rows"].strip().splitlines())
    columns = {name: [row[at] for row in rows] for at, name in enumerate(header)}
    fits = tuple(_fit(found["name"], columns, fit) for fit in found["fits"])
    return ReferenceSet(found["name"], found["source"], columns, fits)


def _fit(name: str, columns: dict[str, list[str]], fit: dict[str, Any]) -> PublishedFit:
    column, wanted = fit.get("where", (None, None))
    rows = [at for at in range(len(columns[fit["response"]])) if column is None or columns[column][at] == wanted]
    values = {key: _values([cells[at] for at in rows]) for key, cells in columns.items()}
    weight = None
    if "weight_of" in fit:
        weight = "weight"
        values[weight] = values[fit["weight_of"]] ** float(fit["weight_power"])
    shape = Shape(fit.get("shape", "as is"))
    spec = ModelSpec(
        response=fit["response"],
        response_shape=Shape(fit.get("response_shape", "as is")),
        terms=tuple(NumberTerm(term, shape=shape, degree=fit["degree"]) for term in fit["predictors"]),
        intercept=fit["intercept"],
        weight=weight,
    )
    observations = Observations(values, len(rows))
    return PublishedFit(
        name, fit["model"], spec, observations, fit["digits"], fit["from_memory"], fit["published"], fit["exact"]
    )


def _values(cells: list[str]) -> Any:
    try:
        return np.array([float(cell) for cell in cells])
    except ValueError:
        names = tuple(sorted(set(cells)))
        return Levels(np.array([names.index(cell) for cell in cells]), names)
