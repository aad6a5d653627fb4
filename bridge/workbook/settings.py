"""The setting block: its rows, what a blank means, and what may be typed."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from bridge.regression.spec import BackOn, Errors, FitBy, Search
from bridge.workbook import spelling
from bridge.workbook.entries import Misread, number, number_as_typed
from bridge.workbook.request import Scalar

WHERE, AND_WHERE, IS, VALUE = "use rows where", "and where", "is", "value"
COMPARISONS = ("equals", "is not", "at least", "at most", "above", "below", "between")
_COMPARISON_WORDS = {
    "": "equals",
    "is": "equals",
    "equal": "equals",
    "equal to": "equals",
    "=": "equals",
    "not": "is not",
    "not equal": "is not",
    "not equal to": "is not",
    "<>": "is not",
    "!=": "is not",
    ">=": "at least",
    "≥": "at least",
    "<=": "at most",
    "≤": "at most",
    ">": "above",
    "more than": "above",
    "greater than": "above",
    "<": "below",
    "less than": "below",
} | {word: word for word in COMPARISONS}


@dataclass(frozen=True, slots=True)
class Setting:
    """A row of the block: its label, what a blank means, the words offered, and how an entry is read.

    `read` gives the value, or a Misread.
    """

    label: str
    blank_means: str
    choices: tuple[str, ...]
    read: Callable[[Scalar], Any]


def _text(typed: Scalar) -> str:
    return " ".join(number_as_typed(typed).replace("\u00a0", " ").split())


def _word_of(label: str, meanings: Mapping[str, object]) -> Callable[[Scalar], Any]:
    def read(typed: Scalar) -> object:
        text = _text(typed).casefold()
        bare = re.sub(r"\s*\([^)]*\)$", "", text)
        for word, meaning in meanings.items():
            if word.casefold() in (text, bare):
                return meaning
        choices = list(dict.fromkeys(meanings))
        hint = spelling.did_you_mean(text, choices)
        shown = ", ".join(choice for choice in choices if choice in _offered(meanings))
        return Misread("setting-unknown", {"setting": label, "typed": _text(typed), "choices": shown, "hint": hint})

    return read


def _offered(meanings: Mapping[str, object]) -> tuple[str, ...]:
    """The first word of each meaning is the one to show."""
    first: dict[int, str] = {}
    for word, meaning in meanings.items():
        first.setdefault(hash(meaning), word)
    return tuple(first.values())


def _level(typed: Scalar) -> float | Misread:
    """An interval level as a fraction: 0.95, 95, 95%, 90 %, 0,95."""
    misread = Misread("level-out-of-range", {"typed": _text(typed)})
    if isinstance(typed, bool):
        return misread
    text = re.sub(r"\s*(%|percent|per cent)$", "", _text(typed), flags=re.I)
    value = number(text) if isinstance(typed, str) else float(typed)
    if value is None:
        return misread
    is_percent = text != _text(typed) or value >= 1
    fraction = value / 100 if is_percent else value
    return round(fraction, 12) if 0.5 <= fraction < 1 else misread


def _whole(label: str, least: int) -> Callable[[Scalar], Any]:
    def read(typed: Scalar) -> int | Misread:
        value = None if isinstance(typed, bool) else number(typed) if isinstance(typed, str) else float(typed)
        if value is None or value != value // 1 or not least <= value < 1e6:
            return Misread("setting-not-whole", {"setting": label, "typed": _text(typed), "least": least})
        return int(value)

    return read


def _any(typed: Scalar) -> Scalar:
    return typed


def comparison(typed: Scalar) -> str | Misread:
    """The comparison of a row filter; nothing typed means equals."""
    text = _text(typed).casefold()
    meant = _COMPARISON_WORDS.get(text) or _COMPARISON_WORDS.get(text.removeprefix("is "))
    if meant is not None:
        return meant
    hint = spelling.did_you_mean(text, COMPARISONS)
    choices = ", ".join(COMPARISONS)
    return Misread("setting-unknown", {"setting": IS, "typed": _text(typed), "choices": choices, "hint": hint})


_YES = {"yes": True, "no": False, "y": True, "n": False, "true": True, "false": False, "1": True, "0": False}
_ERRORS = {
    "ordinary": Errors.ORDINARY,
    "uneven spread": Errors.UNEVEN_SPREAD,
    "grouped": Errors.GROUPED,
    "serial": Errors.SERIAL,
    "HC3": Errors.UNEVEN_SPREAD,
    "group": Errors.GROUPED,
}
_FIT_BY = {"least squares": FitBy.LEAST_SQUARES, "resistant": FitBy.RESISTANT, "huber": FitBy.RESISTANT}
_SEARCH = {
    "none": Search.NONE,
    "adjusted R2": Search.ADJUSTED_R2,
    "Cp": Search.CP,
    "BIC": Search.BIC,
    "cross-validation": Search.CROSS_VALIDATION,
    "adjusted R²": Search.ADJUSTED_R2,
    "no": Search.NONE,
    "cross validation": Search.CROSS_VALIDATION,
    "crossvalidation": Search.CROSS_VALIDATION,
}
_BACK_ON = {"original": BackOn.ORIGINAL, "fitted": BackOn.FITTED}

ROWS: tuple[Setting, ...] = (
    Setting("interval level", "95%", ("90%", "95%", "99%"), _level),
    Setting("standard errors", "ordinary", _offered(_ERRORS), _word_of("standard errors", _ERRORS)),
    Setting("lags", "by the number of rows", (), _whole("lags", 0)),
    Setting("intercept", "yes", ("yes", "no"), _word_of("intercept", _YES)),
    Setting(WHERE, "all rows", (), _any),
    Setting(IS, "equals", COMPARISONS, comparison),
    Setting(VALUE, "", (), _any),
    Setting(AND_WHERE, "no further rule", (), _any),
    Setting(IS, "equals", COMPARISONS, comparison),
    Setting(VALUE, "", (), _any),
    Setting("fit by", "least squares", _offered(_FIT_BY), _word_of("fit by", _FIT_BY)),
    Setting("search", "none", _offered(_SEARCH), _word_of("search", _SEARCH)),
    Setting("folds", "10", (), _whole("folds", 2)),
    Setting("estimate back on", "original", _offered(_BACK_ON), _word_of("estimate back on", _BACK_ON)),
)


def known(label: str) -> Setting | None:
    """The setting with this label, case and spaces aside."""
    wanted = _text(label).casefold()
    return next((row for row in ROWS if row.label.casefold() == wanted), None)


def keys(labels: Sequence[str]) -> list[str | None]:
    """A key of its own for each row of the block: the second filter's `is` and `value` become `and is`, `and value`.

    None for a row that is no setting.
    """
    found: list[str | None] = []
    prefix = ""
    for label in labels:
        setting = known(label)
        if setting is None:
            found.append(None)
            continue
        if setting.label in (WHERE, AND_WHERE):
            prefix = "and " if setting.label == AND_WHERE else ""
        found.append(f"{prefix}{setting.label}" if setting.label in (IS, VALUE) else setting.label)
    return found


def two_values(typed: Scalar) -> tuple[str, str] | None:
    """The two ends of a `between`: `5 and 12`, `5 to 12`, `5; 12`."""
    parts = re.split(r"\s+(?:and|to)\s+|\s*;\s*|\s+-\s+|\s*\.\.\s*|\s*[–—]\s*", _text(typed), flags=re.I)
    return (parts[0], parts[1]) if len(parts) == 2 and all(parts) else None
