"""The whole of a workbook, read once: bytes, and a fingerprint by which it is known again.

read(path)     a Snapshot; FileRefused when the file cannot be used
NotWhole       a FileRefused that may pass: the file is being saved, or its name is absent, just now
"""

from __future__ import annotations

import os
import stat
import sys
from dataclasses import dataclass
from pathlib import Path

from bridge.files import recovery, whole
from bridge.files.fingerprint import Fingerprint, Seen, digest_of, fingerprint
from bridge.files.handle import opened
from bridge.messages import FileRefused, say

LIMIT_BYTES = 1 << 30
_TRIES = 3


# What may be different in a moment.
PASSING = frozenset({"file-missing", "file-being-saved", "file-not-whole"})


class NotWhole(FileRefused):
    """The file is not whole at this moment (its problem's key is one of `PASSING`); looking again later may help."""


@dataclass(frozen=True, slots=True)
class Snapshot:
    """A workbook's bytes at one moment. `path` as it was given, `real` with links resolved."""

    path: Path
    real: Path
    data: bytes
    fingerprint: Fingerprint

    @property
    def seen(self) -> Seen:
        """The same without the bytes."""
        return Seen(self.path, self.real, self.fingerprint)


def read(path: Path | str, limit_bytes: int = LIMIT_BYTES) -> Snapshot:
    """Read the whole file while nothing changes it; every member of its zip agrees with its checksum.

    What is no zip at all is passed on for others to name. Leftovers of a bridge that was stopped are settled first.
    Raises FileRefused: no such file, no plain file, unreadable, larger than `limit_bytes`. Raises NotWhole.
    """
    path = Path(path)
    real = _resolved(path)
    recovery.recover(real.parent)
    for _ in range(_TRIES):
        before, data, after = _read_once(path, real, limit_bytes)
        found = fingerprint(before, digest_of(data))
        if found.stands(after) and len(data) == found.size:
            break
    else:
        raise NotWhole(say("file-being-saved", name=path.name))
    _check_whole(path, data)
    return Snapshot(path, real, data, found)


def reason(error: Exception) -> str:
    """What the system said, for a message."""
    return (error.strerror if isinstance(error, OSError) else None) or str(error)


def _resolved(path: Path) -> Path:
    try:
        return path.resolve(strict=True)
    except FileNotFoundError:
        raise NotWhole(say("file-missing", name=path.name)) from None
    except (OSError, RuntimeError) as error:  # RuntimeError: links in a circle
        raise FileRefused(say("file-unreadable", name=path.name, reason=reason(error))) from error


def _read_once(path: Path, real: Path, limit_bytes: int) -> tuple[os.stat_result, bytes, os.stat_result]:
    """Its state before, its bytes, and the state under its name afterwards."""
    try:
        if not stat.S_ISREG(real.stat().st_mode):
            raise FileRefused(say("file-not-plain", name=path.name))
        with opened(real) as handle:
            before = handle.state()
            if before.st_size > limit_bytes:
                raise FileRefused(
                    say("file-too-large", name=path.name, size=before.st_size >> 20, limit=limit_bytes >> 20)
                )
            data = handle.all(before.st_size)
        return before, data, path.stat()
    except FileNotFoundError:
        raise NotWhole(say("file-missing", name=path.name)) from None
    except PermissionError as error:
        if sys.platform == "win32":  # mostly a program in the middle of saving
            raise NotWhole(say("file-being-saved", name=path.name)) from error
        raise FileRefused(say("file-unreadable", name=path.name, reason=reason(error))) from error
    except OSError as error:
        raise FileRefused(say("file-unreadable", name=path.name, reason=reason(error))) from error


def _check_whole(path: Path, data: bytes) -> None:
    # Only what may be the torn beginning of a zip is called torn: empty, all zeros, or beginning like one.
    if not (data.startswith(b"PK") or not data[:4096].strip(b"\0")):
        return
    try:
        whole.check(data)
    except whole.BrokenZip as error:
        raise NotWhole(say("file-not-whole", name=path.name, detail=str(error))) from error
    except whole.TooMuch:
        limit = whole.UNPACKED_LIMIT >> 30
        raise FileRefused(say("file-unpacks-too-large", name=path.name, limit=limit)) from None
