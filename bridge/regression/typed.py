"""The decimals people typed, read back from doubles: the shortest decimal that gives the double.

Up to 15 significant digits there is only one such decimal and any of its spellings gives the same double; beyond,
the shortest is what a spreadsheet's file holds (Steele & White 1990, "How to print floating-point numbers
accurately"). Done for whole columns with pairs of doubles (Dekker 1971); the few cells where a pair cannot decide go
through `repr`.
"""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Integers = NDArray[np.int64]

MOST_SHORT = 1e15  # below this, r / 10^k with whole r has at most 15 digits
EXACT_POWER = 22  # 10^22 is the largest power of ten that is a double


@dataclass(frozen=True, slots=True)
class Decimals:
    """A column as digits * 10^exponent, both (n,); `exponent` is one number where all cells share it.

    `short`: every cell has at most 15 significant digits, so none is the rounded outcome of a computation.
    """

    digits: Integers
    exponent: Integers | int
    short: bool


def decimals(x: Array, short_only: bool = False) -> Decimals | None:
    """The shortest decimals that give the doubles x, shape (n,), all finite.

    None with `short_only` where they are not whole multiples of one power of ten with at most 15 digits.
    """
    places = common_places(x)
    if places is not None:
        return Decimals(np.rint(x * 10.0**places).astype(np.int64), -places, True)
    if short_only:
        return None
    digits, exponent = _shortest(x)
    return Decimals(digits, exponent, bool((np.abs(digits) < 10**15).all()))


def common_places(x: Array) -> int | None:
    """The smallest k with every cell a whole multiple of 10^-k of at most 15 digits, or None."""
    biggest = float(np.abs(x).max(initial=0.0))
    probe = x[:: max(1, x.size // 64)]
    places = 0
    while places <= EXACT_POWER and biggest * 10.0**places <= MOST_SHORT:
        if _whole(probe, places) and _whole(x, places):
            return places
        places += 1
    return None


def _whole(x: Array, places: int) -> bool:
    power = 10.0**places
    return bool((np.rint(x * power) / power == x).all())


# --- cells of any length ------------------------------------------------------------------------


def _shortest(x: Array) -> tuple[Integers, Integers]:
    digits = np.zeros(x.shape, dtype=np.int64)
    exponent = np.zeros(x.shape, dtype=np.int64)
    size = np.abs(x)
    mantissa = np.frexp(size)[0]
    regular = (size > 1e-280) & (size < 1e280) & (mantissa != 0.5)  # around powers of two the gaps are uneven
    cells = np.flatnonzero(regular)
    found, power, sure = _by_pairs(size[cells])
    digits[cells], exponent[cells] = np.where(x[cells] < 0, -found, found), power
    unsure = np.concatenate([np.flatnonzero(~regular & (size > 0)), cells[~sure]])
    for i in unsure.tolist():
        digits[i], exponent[i] = _by_repr(float(x[i]))
    return _without_zeros(digits, exponent)


def _by_pairs(x: Array) -> tuple[Integers, Integers, NDArray[np.bool_]]:
    """Digits (17, the last ones 0 where fewer do), exponents, and where the pair of doubles was sharp enough."""
    power = 16 - np.floor(np.log10(x)).astype(np.int64)
    high, low = _times_power(x, power)
    power += (high < 1e16).astype(np.int64) - (high >= 1e17).astype(np.int64)
    high, low = _times_power(x, power)
    whole = np.rint(low)
    seventeen = high.astype(np.int64) + whole.astype(np.int64)
    rest = low - whole
    half_gap = 0.5 * np.spacing(x) * _powers(power)[0]
    found, sure = seventeen, np.abs(np.abs(rest) - 0.5) > 1e-6
    for unit in (10, 100):
        below = (seventeen % unit) + rest
        away = np.minimum(below, unit - below)
        fits = away < half_gap
        clear = (np.abs(away - half_gap) > 1e-6 * half_gap) & (np.abs(below - unit / 2) > 1e-6)
        rounded = seventeen - seventeen % unit + np.where(below > unit / 2, unit, 0)
        found, sure = np.where(fits, rounded, found), np.where(fits, clear, sure & clear)
    return found, -power, sure


def _times_power(x: Array, power: Integers) -> tuple[Array, Array]:
    """x * 10^power as a pair high + low, good to about 104 bits (Dekker's product)."""
    high_power, low_power = _powers(power)
    product = x * high_power
    x_high, x_low = _halves(x)
    p_high, p_low = _halves(high_power)
    error = ((x_high * p_high - product) + x_high * p_low + x_low * p_high) + x_low * p_low
    error += x * low_power
    high = product + error
    return high, error - (high - product)


def _halves(x: Array) -> tuple[Array, Array]:
    big = 134217729.0 * x
    high = big - (big - x)
    return high, x - high


def _powers(power: Integers) -> tuple[Array, Array]:
    lowest = int(power.min(initial=0))
    table = np.array([_power_pair(k) for k in range(lowest, int(power.max(initial=0)) + 1)])
    return table[power - lowest, 0], table[power - lowest, 1]


@lru_cache(maxsize=1024)
def _power_pair(power: int) -> tuple[float, float]:
    exact = Decimal(1).scaleb(power)
    high = float(exact)
    return high, float(exact - Decimal(high)) if power > EXACT_POWER or power < 0 else 0.0


def _by_repr(x: float) -> tuple[int, int]:
    sign, digits, exponent = Decimal(repr(x)).as_tuple()
    value = int("".join(map(str, digits)))
    return (-value if sign else value), int(exponent)


def _without_zeros(digits: Integers, exponent: Integers) -> tuple[Integers, Integers]:
    for zeros in (8, 4, 2, 1, 1):
        whole = (digits % 10**zeros == 0) & (digits != 0)
        digits = np.where(whole, digits // 10**zeros, digits)
        exponent = np.where(whole, exponent + zeros, exponent)
    return digits, exponent
