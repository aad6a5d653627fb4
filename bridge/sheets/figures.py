"""How many digits a figure deserves, on a sheet and in a sentence.

An uncertainty is stated to two significant digits and the estimate to the same decimal place
(JCGM 100:2008, GUM, 7.2.6); tables of figures that people copy get one digit more (common practice).
Cells hold the full double; only what is shown is rounded.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable

from bridge.page.cells import Cell, Format
from bridge.regression.results import ModelResult

PERCENT = "0.0%"
WHOLE = "#,##0"
PLAIN_WHOLE = "0"
RATIO = "0.000"
TWO_PLACES = "0.00"
P_VALUE = "[=0]0;[<0.0001]0.0E+00;0.0000"
DATE = "yyyy\\-mm\\-dd"

_GROUP_FROM = 10_000
_LARGEST_PLAIN = 1e9
_SMALLEST_PLAIN = 1e-5
_ROUNDING = 1e-9  # a spread this small beside the values is rounding, not scatter
_THOUSANDS = "\u00a0"  # a space that does not break: neither a decimal point nor a decimal comma to anybody


def decimals(reference: float, digits: int) -> int:
    """Decimal places that show a number of the size of `reference` to `digits` significant digits (0 at least).

    A reference of 0, NaN or infinity counts as 1.
    """
    return max(0, digits - 1 - _exponent(reference))


def number_format(reference: float, digits: int) -> str:
    """The number format that shows numbers of the size of `reference` to `digits` significant digits.

    Plain decimals, thousands grouped, from 0.00001 to a thousand million; powers of ten outside; a bare 0 for 0.
    """
    if reference == 0:
        return PLAIN_WHOLE
    if not _is_plain(reference):
        return _scientific(digits)
    return places_format(reference, decimals(reference, digits))


def places_format(reference: float, places: int) -> str:
    """The number format with `places` decimals, thousands grouped where `reference` has that size."""
    whole = WHOLE if abs(reference) >= 1000 else "0"
    return f"{whole}.{'0' * places}" if places > 0 else whole


def uncertain_format(value: float, uncertainty: float, digits: int = 2) -> str:
    """The number format for `value` that shows its `uncertainty` to `digits` digits and no decimal more.

    Without an uncertainty (0, NaN) six significant digits. At least two digits of the value are always shown.
    """
    if not (math.isfinite(uncertainty) and uncertainty > 0):
        return number_format(value, 6)
    wanted = _exponent(value) - _exponent(uncertainty) + digits
    return number_format(value, min(max(wanted, 2), 15 if _is_plain(value) else 8))


def column_format(values: Iterable[float], uncertainty: float = math.nan, digits: int = 3) -> str:
    """One number format for a column: decimals by `uncertainty` (else by the largest value), grouped by the largest.

    Powers of ten where the largest is outside the plain sizes, or where `digits` of the uncertainty would need more
    than eight decimals.
    """
    finite = [abs(value) for value in values if math.isfinite(value)]
    largest = max(finite, default=0.0)
    known = math.isfinite(uncertainty) and uncertainty > _ROUNDING * largest
    places = decimals(uncertainty, digits) if known else decimals(largest, max(digits, 4))
    if not _is_plain(largest) or places > 8:
        return _scientific(max(digits, 4))
    return places_format(largest, places)


def typed_format(values: Iterable[float], most: int = 6) -> str:
    """The number format for values as somebody typed them: as many decimals as any of them has, `most` at most."""
    finite = [value for value in values if math.isfinite(value)]
    largest = max((abs(value) for value in finite), default=0.0)
    if not _is_plain(largest):
        return _scientific(4)
    return places_format(largest, max((_typed_places(value, most) for value in finite), default=0))


def unit_sd(result: ModelResult) -> float:
    """How far single cases scatter in the response's own units: the cross-validated miss, else the residual SD.

    NaN where neither is known in those units.
    """
    miss = result.cross_validation.rmse
    if math.isfinite(miss) and miss > 0:
        return miss
    return result.fit.residual_sd if result.back is None else math.nan


def with_unit(number: str, unit: str) -> str:
    """A number format followed by a unit, as a literal text of the format."""
    kept = unit.replace('"', "").strip()
    return f'{number}" {kept}"' if kept else number


def figure_cell(value: float, look: Format) -> Cell:
    """A cell for a figure that may not exist: NaN leaves it empty, an infinite one is said in words."""
    if math.isnan(value):
        return Cell(None, look)
    if math.isinf(value):
        return Cell("unbounded", look)
    return Cell(value, look)


def rounded(value: float, digits: int) -> float:
    """`value` to `digits` significant digits."""
    return float(f"{value:.{max(digits - 1, 0)}e}")


# --- in sentences ------------------------------------------------------------------------------


def sentence_number(value: float, digits: int = 3) -> str:
    """`value` to `digits` significant digits as a sentence shows it: `0.0123`, `114`, `12 300`, `3.1E-7`.

    NaN gives `not available`.
    """
    if math.isnan(value):
        return "not available"
    if math.isinf(value):
        return "unbounded"
    if value == 0:
        return "0"
    kept = rounded(value, digits)
    if not _is_plain(kept):
        mantissa, exponent = f"{kept:.{max(digits - 1, 0)}E}".split("E")
        return f"{_minus(mantissa)}E{int(exponent)}"
    return _grouped(kept, decimals(kept, digits))


def placed_number(value: float, uncertainty: float, digits: int = 2) -> str:
    """`value` in a sentence, to the decimal place at which `uncertainty` has `digits` significant digits."""
    if not (math.isfinite(uncertainty) and uncertainty > _ROUNDING * abs(value)) or not math.isfinite(value):
        return plain_number(rounded(value, 6)) if math.isfinite(value) else sentence_number(value)
    places = digits - 1 - _exponent(uncertainty)
    kept = round(value, places)
    if kept != 0 and not _is_plain(kept):
        return sentence_number(value, min(max(2, _exponent(value) + 1 + places), 6))
    return _grouped(kept, max(0, places))


def plain_number(value: float) -> str:
    """A number as somebody typed it: at most eight significant digits, no zeros at the end."""
    if not math.isfinite(value):
        return sentence_number(value)
    kept = rounded(value, 8)
    if kept != 0 and not _is_plain(kept):
        return f"{kept:.7g}".replace("e+", "E").replace("e-", "E-")
    text = _grouped(kept, decimals(kept, 8))
    return text.rstrip("0").rstrip(".") if "." in text else text


def percent(fraction: float, digits: int = 2) -> str:
    """A fraction as a percentage to `digits` significant digits, at most two decimals: `9.4%`, `17%`, `0.03%`."""
    value = rounded(fraction * 100, digits)
    return f"{_grouped(value, min(2, decimals(value, digits)))}%"


def share(fraction: float) -> str:
    """A share of the whole as a percentage that is 100% only if it is all: `93%`, `99.6%`, `99.9992%`."""
    if not 0.99 < fraction < 1:
        return percent(fraction)
    places = min(8, decimals(100 * (1 - fraction), 1))
    return f"{math.floor(fraction * 100 * 10**places) / 10**places:.{places}f}%"


def p_words(p: float) -> str:
    """A p value as words show it: `p = 0.0003`, `p < 0.0001`, or `no p value` where there is none."""
    if math.isnan(p):
        return "no p value"
    if p < 1e-4:
        return "p < 0.0001"
    return f"p = {p:.{4 if p < 1e-3 else 3 if p < 0.1 else 2}f}"


# --- what a cell will show ---------------------------------------------------------------------


def shown(value: float, code: str) -> str:
    """The text a cell shows for `value` under one of the number formats made here (decimal point, comma groups)."""
    section = _section(value, code)
    bare = re.sub(r'"[^"]*"|\\.', "", section)
    literal = "".join(re.findall(r'"([^"]*)"', section))
    if bare == "General":
        return f"{value:.10g}" + literal
    if "y" in bare:
        return "2026-12-01"
    places = len(bare.split(".")[1].rstrip("%").split("E")[0]) if "." in bare else 0
    if "E" in bare:
        return f"{value:.{places}E}" + literal
    scale, mark = (100, "%") if bare.endswith("%") else (1, "")
    comma = "," if "," in bare else ""
    return f"{value * scale:{comma}.{places}f}{mark}" + literal


def _section(value: float, code: str) -> str:
    """The section of a format that `value` falls in: the first whose condition holds, else the last."""
    *conditional, plain = code.split(";")
    for section in conditional:
        found = re.match(r"\[([<=])([0-9.]+)\]", section)
        if found and (value < float(found[2]) if found[1] == "<" else value == float(found[2])):
            return section[found.end() :]
    return plain


def _exponent(value: float) -> int:
    if value == 0 or not math.isfinite(value):
        return 0
    return int(f"{abs(value):.14e}".split("e")[1])


def _is_plain(value: float) -> bool:
    return value == 0 or not math.isfinite(value) or _SMALLEST_PLAIN <= abs(value) < _LARGEST_PLAIN


def _typed_places(value: float, most: int) -> int:
    text = f"{value:.{most}f}"
    return len(text.rstrip("0").split(".")[1])


def _scientific(digits: int) -> str:
    return f"0.{'0' * (digits - 1)}E+00" if digits > 1 else "0E+00"


def _grouped(value: float, places: int) -> str:
    text = f"{abs(value):,.{places}f}" if abs(value) >= _GROUP_FROM else f"{abs(value):.{places}f}"
    sign = "\u2212" if value < 0 and float(text.replace(",", "")) != 0 else ""
    return sign + text.replace(",", _THOUSANDS)


def _minus(text: str) -> str:
    return text.replace("-", "\u2212")
