"""Results in a copy beside the workbook, for as long as a program keeps the workbook itself from being replaced.

`NAME - fit.xlsx` can be opened by anybody at once. A small hidden file remembers which copy is the bridge's and in
which states it wrote it; a copy in any other state is its user's and is never touched again.
"""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

from bridge.files import journal, names, openness, recovery
from bridge.files.fingerprint import Fingerprint, Seen, digest_of, file_digest, fingerprint
from bridge.files.prepare import prepare
from bridge.files.replace import replace
from bridge.files.snapshot import Snapshot
from bridge.files.swap import Gone, System, this_system

_MARK = " - fit"
_MOST_COPIES = 99
_LARGEST = 1 << 16


@dataclass(frozen=True, slots=True)
class Copy:
    """The bridge's copy beside a workbook: its name, and the states (latest last) the bridge left it in."""

    workbook: str
    name: str
    states: tuple[Fingerprint, ...]

    def untouched(self, folder: Path) -> bool:
        """Whether the copy is as the bridge left it, without a look at its bytes."""
        with suppress(OSError):
            found = (folder / self.name).stat()
            return any((found.st_size, found.st_mtime_ns) == (state.size, state.mtime_ns) for state in self.states)
        return False


def put_beside(snapshot: Snapshot, new: bytes, system: System) -> Path:
    """Write `new` as the copy beside the workbook; its path. Raises Held, OSError."""
    folder, known = snapshot.real.parent, load(_record(snapshot.real))
    if known is not None and (copy := _ours(folder, known)) is not None:
        if copy.fingerprint.digest == digest_of(new):
            return copy.real
        done = replace(copy, new, openness.holder(copy.real, system), system)
        if done is not None:
            _remember(snapshot.real, Copy(known.workbook, known.name, (copy.fingerprint, done.fingerprint)))
            return copy.real
    return _new_copy(snapshot, new, system)


def remove_copy(workbook: Path, system: System | None = None) -> None:
    """Take the bridge's copy beside a workbook (its real path) away; one that somebody changed, or reads, stays."""
    record, system = _record(workbook), system or this_system()
    with suppress(OSError, Gone):
        known = load(record)
        if known is None:
            return
        copy = _ours(workbook.parent, known)
        if copy is None or _removed(copy, system):
            record.unlink(missing_ok=True)


def _removed(copy: Seen, system: System) -> bool:
    return not openness.is_open(copy.real, system) and recovery.discard(copy.real, copy.fingerprint.digest, system)


def is_copy(path: Path) -> bool:
    """Whether a workbook is a copy beside another, as the bridge left it."""
    with suppress(OSError):
        for record in path.parent.glob(f"{names.PREFIX}*.{names.COPY}") if _MARK in path.stem else ():
            known = load(record)
            if known is not None and known.name == path.name and known.untouched(path.parent):
                return True
    return False


def load(record: Path) -> Copy | None:
    """What a hidden record says; None when there is none, or nothing readable. Raises OSError other than absence."""
    try:
        with record.open("rb") as file:
            content = json.loads(file.read(_LARGEST))
        states = tuple(Fingerprint(**state) for state in content["states"])
        workbook, name = str(content["workbook"]), str(content["copy"])
    except FileNotFoundError:
        return None
    except (ValueError, KeyError, TypeError):
        return None
    return Copy(workbook, name, states) if Path(name).name == name and Path(workbook).name == workbook else None


def _ours(folder: Path, known: Copy) -> Seen | None:
    """The copy, if it is still in a state the bridge left it in."""
    path = folder / known.name
    if not known.untouched(folder):
        return None
    found, digest = path.stat(), file_digest(path)
    if all(state.digest != digest for state in known.states):
        return None
    return Seen(path, path, fingerprint(found, digest))


def _new_copy(snapshot: Snapshot, new: bytes, system: System) -> Path:
    workbook = snapshot.real
    with journal.begun(workbook, snapshot.fingerprint, digest_of(new)) as entry:
        ready = prepare(entry, new, workbook, system)
        try:
            for free in _free_names(workbook):
                _remember(workbook, Copy(workbook.name, free.name, (ready.fingerprint,)))
                with suppress(FileExistsError):
                    recovery.give_name(ready.path, free)
                    return free
        except OSError:
            _record(workbook).unlink(missing_ok=True)
            raise
        finally:
            ready.path.unlink(missing_ok=True)
    raise FileExistsError(str(workbook))


def _free_names(workbook: Path) -> Iterator[Path]:
    for number in range(1, _MOST_COPIES + 1):
        count = f" {number}" if number > 1 else ""
        path = workbook.with_name(f"{workbook.stem}{_MARK}{count}{workbook.suffix}")
        if not path.exists():
            yield path


def _record(workbook: Path) -> Path:
    return names.hidden(workbook.parent, names.key(workbook.name), names.COPY)


def _remember(workbook: Path, copy: Copy) -> None:
    """Write the record; a whole one or none. Raises OSError."""
    content = {
        "workbook": copy.workbook,
        "copy": copy.name,
        "states": [state.as_dict() for state in copy.states],
    }
    part = names.hidden(workbook.parent, names.token(), names.PROBE)
    part.write_text(json.dumps(content), encoding="utf-8")
    os.replace(part, _record(workbook))
