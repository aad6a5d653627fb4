"""The stated truth behind each demo and the rows drawn from it. Everything is invented.

Numbers come from a seeded generator of the standard library and are rounded as a person would note them,
so that the same rows come out everywhere.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date, timedelta
from random import Random
from statistics import NormalDist

_NORMAL = NormalDist()


def _noise(random: Random, sd: float) -> float:
    return sd * _NORMAL.inv_cdf(min(max(random.random(), 1e-12), 1 - 1e-12))


# --- boatyard: ln hours, straight in ln length with a slope per hull material, and in coats ---------------------

HULLS = ("oak", "steel", "glass fibre")


@dataclass(frozen=True)
class BoatyardTruth:
    """ln hours = start[hull] + slope[hull] ln(length in m) + coat * coats + noise; the crew's size does nothing."""

    start: Mapping[str, float]
    slope: Mapping[str, float]
    coat: float
    crew: float
    sd: float


BOATYARD = BoatyardTruth(
    start={"oak": 0.55, "steel": 1.35, "glass fibre": 0.25},
    slope={"oak": 1.30, "steel": 1.05, "glass fibre": 1.30},
    coat=0.07,
    crew=0.0,
    sd=0.16,
)


@dataclass(frozen=True)
class Refit:
    """One past job. None: not noted."""

    job: str
    hours: float | None
    length: float
    hull: str
    coats: int | None
    crew: int
    month: date


def refits(rows: int = 128) -> list[Refit]:
    """The boatyard's past jobs, oldest first; two hours and one number of coats were not noted."""
    random = Random(20230101)
    made = []
    for at in range(rows):
        hull = random.choices(HULLS, weights=(38, 30, 32))[0]
        length = round(math.exp(random.uniform(math.log(7.5), math.log(38))), 1)
        coats = random.choices((1, 2, 3, 4), weights=(20, 40, 25, 15))[0]
        crew = min(6, max(1, round(1 + length / 11 + _noise(random, 0.9))))
        mean = BOATYARD.start[hull] + BOATYARD.slope[hull] * math.log(length) + BOATYARD.coat * coats
        hours = round(2 * math.exp(mean + _noise(random, BOATYARD.sd))) / 2
        months = at * 45 // rows
        month = date(2022 + (months + 12) // 12, months % 12 + 1, 1)
        made.append(
            Refit(
                job=f"R-{1001 + at}",
                hours=None if at in (16, 77) else hours,
                length=length,
                hull=hull,
                coats=None if at == 101 else coats,
                crew=crew,
                month=month,
            )
        )
    return made


# --- cold store: daily energy with a bend in the outdoor temperature, and errors that carry over to the next day --


@dataclass(frozen=True)
class ColdStoreTruth:
    """kWh = start + below * T + (above - below) * max(T - bend, 0) + per_tonne * throughput + error.

    error(today) = carry * error(yesterday) + noise of standard deviation `sd`.
    """

    start: float
    below: float
    above: float
    bend: float
    per_tonne: float
    carry: float
    sd: float


COLD_STORE = ColdStoreTruth(start=420.0, below=2.0, above=17.0, bend=12.0, per_tonne=4.2, carry=0.5, sd=17.0)


@dataclass(frozen=True)
class StoreDay:
    """One day of the cold store. None: the scale's book was not kept."""

    day: date
    energy: float
    temperature: float
    throughput: float | None


def store_days(days: int = 198) -> list[StoreDay]:
    """Days from 2 January 2025 on."""
    random = Random(20250104)
    made, error, weather = [], 0.0, 0.0
    for at in range(days):
        day = date(2025, 1, 2) + timedelta(days=at)
        weather = 0.75 * weather + _noise(random, 2.1)
        temperature = round(12.5 - 9.5 * math.cos(2 * math.pi * (at - 20) / 365) + weather, 1)
        busy = 46.0 if day.weekday() < 5 else 17.0
        throughput = round(max(4.0, busy + _noise(random, 8.0)), 1)
        error = COLD_STORE.carry * error + _noise(random, COLD_STORE.sd)
        warm = max(temperature - COLD_STORE.bend, 0.0)
        mean = COLD_STORE.start + COLD_STORE.below * temperature + (COLD_STORE.above - COLD_STORE.below) * warm
        energy = float(round(mean + COLD_STORE.per_tonne * throughput + error))
        made.append(StoreDay(day, energy, temperature, None if at in (61, 133) else throughput))
    return made


# --- flow meter: a straight line whose spread grows with the flow ------------------------------------------------


@dataclass(frozen=True)
class FlowMeterTruth:
    """reading = start + slope * reference flow + noise of standard deviation sd * flow^0.75 (all in m3/h)."""

    start: float
    slope: float
    sd: float
    power: float = 0.75


FLOW_METER = FlowMeterTruth(start=0.040, slope=1.012, sd=0.015)
SET_FLOWS = (0.5, 1.0, 2.0, 3.0, 5.0, 8.0, 12.0, 16.0, 20.0, 25.0, 30.0)
REPEATS = 12


@dataclass(frozen=True)
class Run:
    """One run of the bench."""

    number: int
    day: date
    flow: float
    reading: float
    water: float


def runs() -> list[Run]:
    """Each set flow `REPEATS` times, in a shuffled order, eleven runs a day."""
    random = Random(20250601)
    flows = [flow for flow in SET_FLOWS for _ in range(REPEATS)]
    random.shuffle(flows)
    made = []
    for at, flow in enumerate(flows):
        noise = _noise(random, FLOW_METER.sd * flow**FLOW_METER.power)
        reading = round(FLOW_METER.start + FLOW_METER.slope * flow + noise, 3)
        day = date(2025, 6, 2) + timedelta(days=at // 11 + 2 * (at // 55))
        made.append(Run(at + 1, day, flow, reading, round(20.0 + _noise(random, 0.6), 1)))
    return made
