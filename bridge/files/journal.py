"""What a swap was about to do, written down before it begins, so that a stop at any moment can be mended.

    .~savefit-TOKEN.journal   a swap under way: workbook, digest of what was read, digest of what goes in, owner
    .~savefit-TOKEN.kept      a swap that is done; what came out is kept because somebody still has it open

The journal is durable before the new file exists and goes last, so that there is never a leftover without one.
"""

from __future__ import annotations

import json
import os
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import asdict, dataclass, replace
from pathlib import Path

from bridge.files import names, owner
from bridge.files.fingerprint import Fingerprint

KEPT = "kept"
_LARGEST = 1 << 16
_LONGEST_S = 60.0  # no swap takes longer; its owner lost it, for instance when the folder was moved
_under_way: set[str] = set()
_guard = threading.Lock()


@dataclass(frozen=True, slots=True)
class Entry:
    """One journal. `base` and `new` are digests of the bytes read and of the bytes going in.

    `size` and `mtime_ns` are those of the file that was read.
    """

    folder: Path
    token: str
    workbook: str
    base: str
    new: str
    size: int
    mtime_ns: int
    owner: owner.Owner
    kept: bool = False

    @property
    def target(self) -> Path:
        """The workbook."""
        return self.folder / self.workbook

    @property
    def path(self) -> Path:
        """The journal itself."""
        return names.hidden(self.folder, self.token, KEPT if self.kept else names.JOURNAL)

    def place(self, kind: str) -> Path:
        """The file of this swap called `names.PART`, `names.NEW` or `names.OLD`."""
        return names.hidden(self.folder, self.token, kind)

    def other(self, place: Path) -> Path:
        """Of the two places, the one that `place` is not."""
        new = self.place(names.NEW)
        return self.place(names.OLD) if place == new else new

    def leftovers(self) -> tuple[Path, ...]:
        """Those of its files that exist and may hold what stood under the workbook's name."""
        return tuple(path for kind in (names.NEW, names.OLD) if (path := self.place(kind)).exists())

    def looks_untouched(self, place: Path) -> bool:
        """Whether the file there has the state, without its bytes, of the file that was read. Raises OSError."""
        found = place.stat()
        return (found.st_size, found.st_mtime_ns) == (self.size, self.mtime_ns)


@contextmanager
def begun(workbook: Path, base: Fingerprint, new: str) -> Iterator[Entry]:
    """A durable journal for one swap of a workbook (its real path) from `base` to the bytes with digest `new`.

    It stays when the swap leaves files behind. Raises OSError.
    """
    entry = Entry(workbook.parent, names.token(), workbook.name, base.digest, new, base.size, base.mtime_ns, owner.me())
    with _guard:
        _under_way.add(entry.token)
    try:
        _write(entry)
        yield entry
    finally:
        with suppress(OSError):
            entry.place(names.PART).unlink(missing_ok=True)
            if not entry.leftovers():
                end(entry)
        with _guard:
            _under_way.discard(entry.token)


def keep(entry: Entry) -> Entry:
    """Mark the swap as done, with what came out kept. Raises OSError."""
    kept = replace(entry, kept=True)
    os.replace(entry.path, kept.path)
    return kept


def end(entry: Entry) -> None:
    """The journal goes. Raises OSError."""
    for kept in (False, True):
        replace(entry, kept=kept).path.unlink(missing_ok=True)


def under_way(entry: Entry) -> bool:
    """Whether its owner is, or may be, in the middle of it. Raises OSError."""
    if entry.kept:
        return False
    if owner.is_me(entry.owner):
        with _guard:
            return entry.token in _under_way
    return owner.alive(entry.owner) is not False and time.time() - entry.path.stat().st_mtime < _LONGEST_S


def load(path: Path) -> Entry | None:
    """The journal at `path`; None when it was not written to the end. Raises OSError."""
    hidden = names.parse(path.name)
    with path.open("rb") as file:
        text = file.read(_LARGEST)
    try:
        content = json.loads(text)
        made_by = owner.Owner(**content["owner"])
        workbook, base, new = (str(content[name]) for name in ("workbook", "base", "new"))
        size, mtime_ns = (int(content[name]) for name in ("size", "mtime_ns"))
    except (ValueError, KeyError, TypeError):
        return None
    # Whoever may write into the folder may write a journal: a workbook elsewhere is none of its business.
    if hidden is None or not workbook or Path(workbook).name != workbook:
        return None
    return Entry(path.parent, hidden.token, workbook, base, new, size, mtime_ns, made_by, hidden.kind == KEPT)


def _write(entry: Entry) -> None:
    told = ("workbook", "base", "new", "size", "mtime_ns")
    content = {name: getattr(entry, name) for name in told} | {"owner": asdict(entry.owner)}
    handle = os.open(entry.path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o644)
    try:
        os.write(handle, json.dumps(content).encode())
        os.fsync(handle)
    finally:
        os.close(handle)
