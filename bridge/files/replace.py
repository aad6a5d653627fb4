"""Replacing a workbook by its new version so that no save that comes in meanwhile is lost.

The new file is swapped with the old one, not put over it; what came out is compared with what was read. If it is
something else, somebody saved in between, and it goes straight back. A program that had opened the file before the
swap may still write into what came out: a lease rules that out; where none can be had, what came out is kept and
looked at again until nobody can write into it any more.
"""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from bridge.files import journal, names, recovery
from bridge.files.fingerprint import Seen, digest_of, file_digest, fingerprint
from bridge.files.journal import Entry
from bridge.files.openness import LIBREOFFICE, Holder
from bridge.files.prepare import Prepared, prepare
from bridge.files.swap import Gone, Held, Standing, System

_LOOK_AGAIN_S = 0.003
_AWAIT_CLOSING_S = 2.0


def replace(seen: Seen, new: bytes, holder: Holder | None, system: System) -> Prepared | None:
    """Put `new` in the workbook's place; None when the workbook is no longer what was read.

    Raises Held, OSError; then the workbook is as it was.
    """
    if holder is None:
        _await_closing(seen.real, system)
    with journal.begun(seen.real, seen.fingerprint, digest_of(new)) as entry:
        try:
            prepared = prepare(entry, new, seen.real, system)
            done = _swap_and_verify(seen, entry, holder, system)
            if not done:
                _clear(entry, system)
        except (Gone, FileNotFoundError):
            _clear(entry, system)
            return None
        except BaseException:
            _clear(entry, system)
            raise
    return _as_it_stands(prepared, seen.real) if done else None


def _swap_and_verify(seen: Seen, entry: Entry, holder: Holder | None, system: System) -> bool:
    """True when the new version stands and nothing was lost."""
    with system.guard(entry.target) as guard:
        if not _still(seen):
            return False
        out = system.swap(entry.place(names.NEW), entry.target, entry.place(names.OLD))
        if file_digest(out) != entry.base or guard.disturbed():
            return _given_back(entry, out, system)
        system.sync_folder(entry.folder)
        if guard.standing is Standing.QUIET:
            time.sleep(_LOOK_AGAIN_S)
            if guard.disturbed():
                return _given_back(entry, out, system)
            out.unlink()
            return True
    return _keep_looking(entry, out, _how_long(guard.standing, holder), system)


def _given_back(entry: Entry, out: Path, system: System) -> bool:
    """Somebody's save came out: back with it. False, for nothing was written; what fails here is settled later."""
    with suppress(Gone, Held):
        recovery.put_back(entry, out, entry.new, system)
    return False


def _keep_looking(entry: Entry, out: Path, keeping: _Keeping, system: System) -> bool:
    """Look at what came out until nobody can write into it, or long enough; True when it stayed as it was read."""
    for _ in _moments(keeping.seconds):
        if not entry.looks_untouched(out):
            return _given_back(entry, out, system)
        with system.guard(out) as guard:
            if guard.standing is Standing.QUIET and file_digest(out) == entry.base and not guard.disturbed():
                out.unlink()
                return True
    if file_digest(out) != entry.base:
        return _given_back(entry, out, system)
    if keeping.then_delete:
        out.unlink()
    else:
        journal.keep(entry)  # from now on recovery looks at it, again and again
    return True


@dataclass(frozen=True, slots=True)
class _Keeping:
    """How many seconds to look at what came out, and whether it may go then although somebody has it open."""

    seconds: float
    then_delete: bool


def _how_long(standing: Standing, holder: Holder | None) -> _Keeping:
    if standing is Standing.UNKNOWN:
        return _Keeping(0.25, then_delete=True)
    # LibreOffice keeps a handle for as long as its window is open, but saves by name: measured, not assumed.
    if holder is not None and holder.program == LIBREOFFICE:
        return _Keeping(1.0, then_delete=True)
    return _Keeping(2.0, then_delete=False)


def _still(seen: Seen) -> bool:
    """Whether the path as it was given still leads to the file that was read, in the state in which it was read."""
    found = seen.path.stat()
    if seen.fingerprint.stands(found):
        return True
    # Some file systems number files anew now and then: then the bytes decide.
    alike = (found.st_size, found.st_mtime_ns) == (seen.fingerprint.size, seen.fingerprint.mtime_ns)
    return alike and file_digest(seen.path) == seen.fingerprint.digest


def _await_closing(workbook: Path, system: System) -> None:
    """Somebody who has it open and leaves no mark is mostly just saving: wait a moment."""
    for _ in _moments(_AWAIT_CLOSING_S):
        with system.guard(workbook) as guard:
            if guard.standing is not Standing.BUSY:
                return


def _moments(seconds: float) -> Iterator[None]:
    """At once, then at growing pauses, until `seconds` have passed."""
    until, pause = time.monotonic() + seconds, _LOOK_AGAIN_S
    yield
    while (left := until - time.monotonic()) > 0:
        time.sleep(min(pause, left))
        pause = min(pause * 1.5, 0.1)
        yield


def _clear(entry: Entry, system: System) -> None:
    """Settle what a swap that did not come about has left; what cannot be settled now is left to recovery."""
    with suppress(OSError, Gone, Held):
        for left in recovery.settle(entry, system):
            if left.mended is recovery.Mended.KEPT:
                journal.keep(entry)
                return


def _as_it_stands(prepared: Prepared, workbook: Path) -> Prepared:
    """With the fingerprint as the workbook now has it (some systems give the new file the old one's number)."""
    with suppress(OSError):
        found, was = workbook.stat(), prepared.fingerprint
        if (found.st_size, found.st_mtime_ns) == (was.size, was.mtime_ns):
            return Prepared(workbook, fingerprint(found, was.digest), prepared.owner_kept)
    return Prepared(workbook, prepared.fingerprint, prepared.owner_kept)
