"""Did you mean: the nearest of the words that could stand there."""

from __future__ import annotations

from collections.abc import Iterable
from difflib import SequenceMatcher

_NEAR = 0.72
_LONGEST = 80


def nearest(typed: str, known: Iterable[str]) -> str | None:
    """The word most like `typed` (case and spaces aside), or None where none is near."""
    wanted = _bare(typed)
    if not wanted or len(wanted) > _LONGEST:
        return None
    best, found = _NEAR, None
    for word in known:
        likeness = _likeness(wanted, _bare(word))
        if likeness > best:
            best, found = likeness, word
    return found


def did_you_mean(typed: str, known: Iterable[str]) -> str:
    """` Did you mean "hull"?`, or nothing."""
    word = nearest(typed, known)
    return f' Did you mean "{word}"?' if word is not None else ""


def _bare(text: str) -> str:
    return "".join(letter for letter in text.casefold() if letter.isalnum())


def _likeness(typed: str, word: str) -> float:
    if not word or len(word) > _LONGEST:
        return 0.0
    if typed == word:
        return 1.0
    if sorted(typed) == sorted(word) and len(word) > 3:  # letters swapped
        return 0.95
    if len(typed) > 2 and word.startswith(typed):
        return 0.9
    match = SequenceMatcher(None, typed, word, autojunk=False)
    return match.ratio() if match.real_quick_ratio() > _NEAR and match.quick_ratio() > _NEAR else 0.0
