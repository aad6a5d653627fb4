"""The new file, written out in full and made durable under a hidden name before it takes anybody's place."""

from __future__ import annotations

import errno
import os
import time
from dataclasses import dataclass
from pathlib import Path

from bridge.files import names
from bridge.files.fingerprint import Fingerprint, fingerprint
from bridge.files.journal import Entry
from bridge.files.swap import System

_NO_RESERVING_HERE = {errno.EINVAL, errno.EOPNOTSUPP, errno.ENOSYS}
_SECOND = 1_000_000_000


@dataclass(frozen=True, slots=True)
class Prepared:
    """The file that stands ready. `owner_kept` is False when it belongs to us instead of the old one's owner."""

    path: Path
    fingerprint: Fingerprint
    owner_kept: bool


def prepare(entry: Entry, data: bytes, like: Path, system: System) -> Prepared:
    """Write `data` (whose digest is `entry.new`), with mode, owner and attributes of `like` and a later time.

    Raises OSError; then nothing is left.
    """
    part = entry.place(names.PART)
    handle = os.open(part, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0), 0o600)
    with open(handle, "wb", buffering=0) as file:
        _reserve(handle, len(data))
        view = memoryview(data)
        while view:
            view = view[file.write(view) or 0 :]
        old = like.stat()
        owner_kept = system.dress(part, like)
        os.utime(part, ns=(time.time_ns(), later_second(old.st_mtime_ns)))
        os.fsync(handle)
    ready = entry.place(names.NEW)
    os.rename(part, ready)
    return Prepared(ready, fingerprint(ready.stat(), entry.new), owner_kept)


def later_second(old_ns: int) -> int:
    """Now, or the beginning of the second after `old_ns` if it is still that second, in nanoseconds.

    LibreOffice compares whole seconds to find out whether a file was changed by others.
    """
    now = time.time_ns()
    return now if now // _SECOND > old_ns // _SECOND else (old_ns // _SECOND + 1) * _SECOND


def _reserve(handle: int, size: int) -> None:
    """Ask for the space at once, so that a full disk says so before anything is written."""
    if size and hasattr(os, "posix_fallocate"):
        try:
            os.posix_fallocate(handle, 0, size)
        except OSError as error:
            if error.errno not in _NO_RESERVING_HERE:
                raise
