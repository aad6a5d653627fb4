"""How much room a text takes, so that nothing is cut and wrapped rows are as high as their text.

Nobody grows the rows of merged cells, so heights are set from the text. Advance widths are those of the metric
family of Arial (thousandths of the type size); East Asian characters are as wide as they are high.
A column unit is one digit of the default font, 7 pixels at 96 per inch, with 5 pixels of padding a column.
"""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable

UNIT_PIXELS = 7.0
PADDING_PIXELS = 5.0
_LINE_POINTS = 1.28  # of the type size
_ROOM = 1.04  # programs differ a little in how they set a line that may not wrap
_OTHER = 590

_WIDTHS: dict[str, int] = {}
for _width, _characters in (
    (191, "'"),
    (222, "ijl"),
    (260, "|"),
    (278, " !,./:;I[]\\ft\u00a0\u202f"),
    (333, "()-`r"),
    (334, "{}"),
    (355, '"'),
    (389, "*"),
    (469, "^"),
    (500, "Jcksvxyz"),
    (556, "#$0123456789?L_abdeghnopqu"),
    (584, "+<=>~\u2212"),
    (611, "FTZ"),
    (667, "&ABEKPSVXY"),
    (722, "CDHNRUw"),
    (778, "GOQ"),
    (833, "Mm"),
    (889, "%"),
    (944, "W"),
    (1015, "@"),
):
    _WIDTHS.update(dict.fromkeys(_characters, _width))


def pixels(text: str, size: float = 10.0, bold: bool = False) -> float:
    """Width of one line of text in pixels at 96 per inch; `size` in points."""
    total = sum(_WIDTHS.get(character) or _width_of(character) for character in text)
    return total / 1000 * size * 96 / 72 * (1.07 if bold else 1.0)


def units(text: str, size: float = 10.0, bold: bool = False) -> float:
    """The column width, in column units, that shows the text whole; the widest line counts."""
    widest = max((pixels(line, size, bold) for line in text.split("\n")), default=0.0)
    return math.ceil((widest * _ROOM + PADDING_PIXELS) / UNIT_PIXELS * 10 + 1) / 10


def lines(text: str, width: float, size: float = 10.0, bold: bool = False) -> int:
    """Lines that the text takes when wrapped in `width` column units (several columns: their sum)."""
    room = max(width * UNIT_PIXELS - PADDING_PIXELS, size)
    return sum(_wrapped(part, room, size, bold) for part in text.split("\n"))


def height(text: str, width: float, size: float = 10.0, bold: bool = False, least: float = 15.0) -> float:
    """Row height in points for the text wrapped in `width` column units; at most 409, the most a row can have."""
    points = lines(text, width, size, bold) * size * _LINE_POINTS + 2.5
    return min(409.0, max(least, round(points * 4) / 4))


def widest(texts: Iterable[str], size: float = 10.0, bold: bool = False) -> float:
    """The column width that shows every text whole."""
    return max((units(text, size, bold) for text in texts), default=0.0)


def _width_of(character: str) -> int:
    if unicodedata.combining(character) or unicodedata.category(character) in ("Mn", "Cf"):
        return 0
    if unicodedata.east_asian_width(character) in ("W", "F"):
        return 1000
    base = unicodedata.normalize("NFD", character)[0]
    if base in _WIDTHS:
        return _WIDTHS[base]
    return 760 if character.isupper() else _OTHER


def _wrapped(text: str, room: float, size: float, bold: bool) -> int:
    count, used = 1, 0.0
    for word in _words(text):
        wide = pixels(word, size, bold)
        if used and used + pixels(word.rstrip(), size, bold) > room:
            count, used = count + 1, 0.0
        while wide > room and len(word) > 1:  # a word longer than the line is broken anywhere
            count, wide = count + 1, wide - room
        used += wide
    return count


def _words(text: str) -> list[str]:
    parts: list[str] = []
    word = ""
    for character in text:
        word += character
        if character in " -/" or unicodedata.east_asian_width(character) in ("W", "F"):
            parts.append(word)
            word = ""
    return [*parts, word] if word else parts
