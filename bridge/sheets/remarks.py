"""What is odd about single rows, in words.

Thresholds: a studentised residual beyond 3 (common practice); leverage above 3 p / n, or 0.999 and more (common
practice); Cook's distance beyond 4 / (n - p) (common practice) and the 10% point of F(p, n - p), strong beyond its 50%
point (Cook 1977, as practised in textbooks); a Huber weight below one half (common practice).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import fdtri

from bridge.regression.results import ModelResult
from bridge.sheets import figures

LARGE_RESIDUAL = 3.0
FAR_SHARE = 3.0
ALONE = 0.999
SMALL_WEIGHT = 0.5


@dataclass(frozen=True, slots=True)
class Marks:
    """Which of the rows used are odd and how, each (n,) of booleans."""

    large: NDArray[np.bool_]
    far: NDArray[np.bool_]
    alone: NDArray[np.bool_]
    pulls: NDArray[np.bool_]
    strongly: NDArray[np.bool_]
    counts_less: NDArray[np.bool_]

    @property
    def any(self) -> NDArray[np.bool_]:
        """Rows with any mark."""
        return self.large | self.far | self.alone | self.pulls | self.counts_less


def marks(result: ModelResult) -> Marks:
    """The odd rows of one fit."""
    influence, n, p = result.influence, result.fit.n, len(result.design.columns)
    weak, strong = _cook_points(n, p)
    cook = np.nan_to_num(influence.cooks_distance, nan=0.0)
    weights = result.fit.robust_weights
    alone = influence.leverage >= ALONE
    return Marks(
        large=np.abs(np.nan_to_num(influence.external, nan=0.0)) > LARGE_RESIDUAL,
        far=(influence.leverage > FAR_SHARE * p / n) & ~alone,
        alone=alone,
        pulls=cook > weak,
        strongly=cook > strong,
        counts_less=np.zeros(n, dtype=bool) if weights is None else weights < SMALL_WEIGHT,
    )


def remarks(result: ModelResult) -> list[str]:
    """A remark for each row used; empty where nothing is odd."""
    found = marks(result)
    texts = [""] * result.fit.n
    for at in np.flatnonzero(found.any):
        texts[at] = remark(result, found, int(at))
    return texts


def remark(result: ModelResult, found: Marks, at: int) -> str:
    """What is odd about the row at position `at` among the rows used."""
    influence, said = result.influence, []
    if found.large[at]:
        said.append(f"{size(float(influence.external[at]))} the fit")
    if found.pulls[at]:
        how = "pulls the fit strongly" if found.strongly[at] else "pulls the fit"
        said.append(f"{how} (Cook's distance {figures.sentence_number(float(influence.cooks_distance[at]), 2)})")
    if found.alone[at]:
        said.append("the fit goes through this row whatever it holds: no other row speaks for the same combination")
    elif found.far[at]:
        said.append(f"far from the other rows (leverage {figures.sentence_number(float(influence.leverage[at]), 2)})")
    if found.counts_less[at] and result.fit.robust_weights is not None:
        weight = figures.sentence_number(float(result.fit.robust_weights[at]), 2)
        said.append(f"counts for less in the resistant fit (weight {weight})")
    return "; ".join(said)


def size(studentised: float) -> str:
    """`3.4 standard deviations above`, as words that a place name follows."""
    side = "above" if studentised > 0 else "below"
    return f"{figures.sentence_number(abs(studentised), 2)} standard deviations {side}"


def _cook_points(n: int, p: int) -> tuple[float, float]:
    if n <= p:
        return float("inf"), float("inf")
    strong = float(fdtri(p, n - p, 0.5))
    return min(max(float(fdtri(p, n - p, 0.1)), 4 / (n - p)), strong), strong
