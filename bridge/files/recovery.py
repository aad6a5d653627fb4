"""Mending what a stop in the middle of a swap left behind.

A stop between the swap and its check can leave the user's newest save under our hidden name, and our result, made
from an older one, under the workbook's. Therefore a leftover is judged by its bytes, never by its name:

    the bytes that were read     the version replaced, as meant           -> it goes
    the bytes going in           ours, not put in or taken out again      -> it goes
    anything else                somebody's save                          -> it goes back to the workbook's name,
                                                                             unless a later save stands there

`recover` does this for the leftovers of bridges that are gone, `settle` for a swap of one's own.
"""

from __future__ import annotations

import os
import time
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path

from bridge.files import claim, journal, names, whole
from bridge.files.fingerprint import file_digest
from bridge.files.handle import opened
from bridge.files.journal import Entry
from bridge.files.swap import Gone, Standing, System, this_system

_MOST_SWAPS = 100
_HALF_WRITTEN_AGE_S = 2.0
_NAMELESS_AGE_S = 10.0
_UNFINISHED_AGE_S = 60.0


class Mended(StrEnum):
    """What was done with a leftover."""

    CLEARED = "cleared"
    PUT_BACK = "put back"  # a user's save has its name again
    SET_ASIDE = "set aside"  # a save that was never finished: kept under a name people see
    KEPT = "kept"  # somebody still has it open: looked at again later


@dataclass(frozen=True, slots=True)
class Recovered:
    """One leftover and what became of it. `workbook` is the workbook's real path."""

    workbook: Path
    mended: Mended


def recover(folder: Path, system: System | None = None) -> tuple[Recovered, ...]:
    """Settle what bridges that are gone left in `folder`, and clear away dead claims. Never raises OSError."""
    with suppress(OSError):
        found = [name for name in os.listdir(folder) if name.startswith(names.PREFIX)]
        return tuple(_recover(folder, found, system or this_system())) if found else ()
    return ()


def _recover(folder: Path, found: list[str], system: System) -> Iterator[Recovered]:
    for name in found:
        hidden = names.parse(name)
        kind = hidden.kind if hidden else ""
        with suppress(OSError):
            if kind in (names.JOURNAL, journal.KEPT):
                yield from _recover_entry(folder / name, system)
            elif kind == names.CLAIM:
                claim.clear_dead(folder / name)
            elif kind == names.PROBE and _age(folder / name) > _UNFINISHED_AGE_S:
                (folder / name).unlink(missing_ok=True)


def _recover_entry(path: Path, system: System) -> Iterator[Recovered]:
    entry = journal.load(path)
    if entry is None:
        # Cut off while it was written: then there was nothing else yet. A moment's age, for one being written now.
        if _age(path) > _HALF_WRITTEN_AGE_S:
            path.unlink(missing_ok=True)
        return
    if not journal.under_way(entry):
        with suppress(claim.Claimed), claim.claimed(entry.target):
            yield from settle(entry, system)


def settle(entry: Entry, system: System) -> Iterator[Recovered]:
    """Judge each leftover of a swap that is not under way any more; the journal goes when none is left."""
    entry.place(names.PART).unlink(missing_ok=True)
    for place in entry.leftovers():
        with suppress(FileNotFoundError, Gone):
            mended = _settle_leftover(entry, place, system)
            yield Recovered(entry.target, mended)
    if not entry.leftovers():
        journal.end(entry)


def _settle_leftover(entry: Entry, place: Path, system: System) -> Mended:
    if entry.kept and entry.looks_untouched(place) and _busy(place, system):
        return Mended.KEPT
    digest = file_digest(place)
    if digest == entry.base and place == entry.place(names.OLD) and not entry.target.exists():
        give_name(place, entry.target)  # a system that swaps in steps was stopped between them
        return Mended.PUT_BACK
    if digest in (entry.base, entry.new):
        return Mended.CLEARED if discard(place, digest, system) else Mended.KEPT
    if not _whole(place):
        return _settle_unfinished(entry, place, system)
    if not entry.target.exists():
        return _settle_nameless(entry, place)
    standing = file_digest(entry.target)  # before its time: a save that comes in between then counts as later
    if standing == entry.new or _later(place, entry.target):
        return Mended.PUT_BACK if put_back(entry, place, standing, system) else Mended.KEPT
    return Mended.CLEARED if discard(place, digest, system) else Mended.KEPT


def _settle_nameless(entry: Entry, place: Path) -> Mended:
    """The workbook's name is free: perhaps only between two steps of somebody's save, so not at once."""
    if _age(entry.path) < _NAMELESS_AGE_S:
        return Mended.KEPT
    give_name(place, entry.target)
    return Mended.PUT_BACK


def put_back(entry: Entry, place: Path, expected: str, system: System) -> bool:
    """Swap the save at `place` back to the workbook's name; bytes with the digest `expected` should come out.

    If others do, a newer save had come in, and goes back in its turn. True when what came out in the end could be
    cleared away. Raises Gone, Held, OSError.
    """
    going_in = file_digest(place)
    for _ in range(_MOST_SWAPS):
        out = system.swap(place, entry.target, entry.other(place))
        came_out = file_digest(out)
        if came_out == expected:
            return discard(out, expected, system)
        expected, going_in, place = going_in, came_out, out
    return False


def discard(place: Path, digest: str, system: System) -> bool:
    """Delete a file of ours that has these bytes, unless somebody has it open for writing or waits to."""
    with system.guard(place) as guard:
        if guard.standing is Standing.BUSY or file_digest(place) != digest or guard.disturbed():
            return False
        place.unlink()
        return True


def _settle_unfinished(entry: Entry, place: Path, system: System) -> Mended:
    """A save that is not whole: wait for whoever writes it; when nobody comes back to it, show it to people."""
    if _age(place) < _UNFINISHED_AGE_S or _busy(place, system):
        return Mended.KEPT
    stem, suffix = entry.target.stem, entry.target.suffix
    for number in range(1, 1000):
        count = f" {number}" if number > 1 else ""
        shown = entry.target.with_name(f"{stem} - unfinished save{count}{suffix}")
        with suppress(FileExistsError):
            give_name(place, shown)
            return Mended.SET_ASIDE
    return Mended.KEPT


def _busy(place: Path, system: System) -> bool:
    with system.guard(place) as guard:
        return guard.standing is Standing.BUSY


def give_name(place: Path, name: Path) -> None:
    """Rename to a free name, never one that is taken. Raises FileExistsError, OSError."""
    try:
        os.link(place, name)
    except FileExistsError:
        raise
    except OSError:  # no links here
        if name.exists():
            raise FileExistsError(str(name)) from None
        os.rename(place, name)
    else:
        place.unlink()


def _whole(path: Path) -> bool:
    with opened(path) as handle:
        data = handle.all(handle.state().st_size)
    try:
        whole.check(data)
    except whole.BrokenZip:
        return False
    except whole.TooMuch:
        return True
    return True


def _later(place: Path, target: Path) -> bool:
    return place.stat().st_mtime_ns > target.stat().st_mtime_ns


def _age(path: Path) -> float:
    """Seconds since the last change; a clock that runs behind counts as long ago."""
    seconds = time.time() - path.stat().st_mtime
    return seconds if seconds > -1.0 else float("inf")
