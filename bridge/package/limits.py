"""How much a workbook may unpack to before it is taken for an attack on memory."""

from __future__ import annotations

from dataclasses import dataclass

MIB = 1 << 20


@dataclass(frozen=True, slots=True)
class Limits:
    """Bounds while unpacking; sizes in bytes.

    `file` the file itself, `members` how many members it may hold, `member` and `total` their unpacked sizes,
    `ratio` how many times its packed size a member above `small` may unpack to.
    `part` and `nodes` bound a part that is read as a tree: its text, and its elements and attributes together.
    """

    file: int = 1024 * MIB
    members: int = 20_000
    member: int = 2048 * MIB
    total: int = 4096 * MIB
    ratio: int = 250
    small: int = 16 * MIB
    part: int = 24 * MIB
    nodes: int = 1_000_000
