"""Opening a file for reading in the way that disturbs other programs least."""

from __future__ import annotations

import os
import sys
from contextlib import closing
from pathlib import Path


class Handle:
    """A file open for reading."""

    def __init__(self, path: Path) -> None:
        if sys.platform == "win32":
            from bridge.files.swap_windows import open_shared

            self._number = open_shared(path)
        else:
            # Without O_NONBLOCK a named pipe under a workbook's name would hold us up for ever.
            self._number = os.open(path, os.O_RDONLY | os.O_CLOEXEC | os.O_NONBLOCK)

    def state(self) -> os.stat_result:
        """The open file's state."""
        return os.fstat(self._number)

    def some(self, count: int) -> bytes:
        """The next bytes, at most `count`; empty at the end."""
        return os.read(self._number, count)

    def all(self, expected: int) -> bytes:
        """Everything from here on, up to one byte more than `expected` (then the file has grown)."""
        with open(self._number, "rb", closefd=False) as file:
            return file.read(expected + 1)

    def at(self, place: int, count: int) -> bytes:
        """Up to `count` bytes from `place` on."""
        os.lseek(self._number, place, os.SEEK_SET)
        pieces = bytearray()
        while len(pieces) < count and (piece := os.read(self._number, count - len(pieces))):
            pieces += piece
        return bytes(pieces)

    def close(self) -> None:
        """Let the file go."""
        os.close(self._number)


def opened(path: Path) -> closing[Handle]:
    """A `Handle` that is let go at the end of a `with`. Raises OSError."""
    return closing(Handle(path))
