"""Which program has a workbook open, as far as the marks it leaves tell.

    .~lock.NAME#   LibreOffice: one line `,user,host,time,profile;`; goes and comes again at every save,
                   stays behind after a crash
    ~$NAME         Excel and others: 165 bytes, user name in an 8-bit code page, then in UTF-16

Such a mark without anybody holding the file open is stale; a lease tells, where the system has leases.
"""

from __future__ import annotations

import socket
from dataclasses import dataclass
from pathlib import Path

from bridge.files.swap import Gone, Standing, System

LIBREOFFICE = "LibreOffice"
OTHER_PROGRAM = "a spreadsheet program"
_LONGEST = 4096
_SAME_OPENING_S = 3.0


@dataclass(frozen=True, slots=True)
class Holder:
    """Who has the workbook open. `locks` when the program does not let the file be replaced under it."""

    program: str
    user: str
    locks: bool


def holder(workbook: Path, system: System) -> Holder | None:
    """Who has a workbook (its real path) open, by its marks; None when nobody, or by a stale mark only."""
    office = _mark(workbook.with_name(f".~lock.{workbook.name}#"))
    locker = _mark(workbook.with_name(f"~${workbook.name}"))
    if office is None and locker is None:
        return None
    if _nobody_has_it(workbook, system) and (office is None or _is_local(office.content)):
        return None
    # Some versions of LibreOffice leave both marks, at the same moment.
    if office is not None and (locker is None or abs(office.since - locker.since) <= _SAME_OPENING_S):
        return Holder(LIBREOFFICE, _office_user(office.content), locks=False)
    return Holder(OTHER_PROGRAM, _locker_user(locker.content) if locker else "", locks=True)


def is_open(workbook: Path, system: System) -> bool:
    """Whether a program has the workbook open."""
    return holder(workbook, system) is not None


@dataclass(frozen=True, slots=True)
class _Mark:
    content: bytes
    since: float


def _mark(path: Path) -> _Mark | None:
    try:
        with path.open("rb") as file:
            return _Mark(file.read(_LONGEST), path.stat().st_mtime)
    except FileNotFoundError:
        return None
    except OSError:  # it is there, and its program does not let us read it
        return _Mark(b"", 0.0)


def _nobody_has_it(workbook: Path, system: System) -> bool:
    try:
        with system.guard(workbook) as guard:
            return guard.standing is Standing.QUIET
    except (Gone, OSError):
        return False


def _is_local(content: bytes) -> bool:
    fields = content.decode("utf-8", "replace").split(",")
    return len(fields) > 2 and fields[2] == socket.gethostname()


def _office_user(content: bytes) -> str:
    fields = content.decode("utf-8", "replace").split(",")
    return next((field for field in fields[:2] if field.strip()), "")


def _locker_user(content: bytes) -> str:
    if len(content) < 57:
        return ""
    length = min(int.from_bytes(content[55:57], "little"), 52)
    return content[57 : 57 + 2 * length].decode("utf-16-le", "replace").strip("\0 ")
