"""A bounded look into a workbook file: is it whole, and may it ask for a fit at all?

Only the list of members and the workbook part are read. When in doubt the answer is yes: a worker then looks
properly. What is looked for is the text a sheet's name or one of our hidden names would put there.
"""

from __future__ import annotations

from collections.abc import Iterable
from enum import Enum
from pathlib import Path

from bridge.files import whole
from bridge.files.handle import Handle, opened
from bridge.files.whole import Member

_TEXTS = (b"fit request", b"_savefit.")
_WORKBOOK_PART = b"workbook.xml"
_LARGEST_PART = 8 << 20
_MOST_PARTS = 3
_OTHER_SPELLING = (b"&#", b"\0")  # character references, 16-bit encodings


class Look(Enum):
    """What a look finds."""

    TORN = "not whole"
    QUIET = "asks for nothing"
    ASKS = "may ask for a fit"


def peek(path: Path) -> Look:
    """Look into the file. Raises OSError when it is gone or cannot be opened."""
    with opened(path) as handle:
        length = handle.state().st_size
        start = handle.at(0, 4096)
        if not start.startswith(b"PK"):
            return Look.ASKS if start.strip(b"\0") else Look.TORN  # no zip at all: a worker says what it is instead
        try:
            return Look.ASKS if _may_ask(handle, whole.members(handle.at, length)) else Look.QUIET
        except whole.BrokenZip:
            return Look.TORN


def _may_ask(handle: Handle, members: Iterable[Member]) -> bool:
    parts = [member for member in members if member.name.lower().endswith(_WORKBOOK_PART)]
    return not parts or len(parts) > _MOST_PARTS or any(_part_asks(handle, part) for part in parts)


def _part_asks(handle: Handle, part: Member) -> bool:
    if part.size > _LARGEST_PART or part.packed > _LARGEST_PART or part.method not in (whole.STORED, whole.DEFLATED):
        return True
    first, last = whole.body(handle.at, part)
    pieces, length = [], 0
    for piece in whole.unpacked(handle.at(first, last - first), part.method):
        pieces.append(bytes(piece))
        length += len(piece)
        if length > _LARGEST_PART:
            return True
    text = b"".join(pieces).lower()
    return any(mark in text for mark in (*_TEXTS, *_OTHER_SPELLING))
