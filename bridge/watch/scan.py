"""One look through a folder and everything below it: which workbooks are there, in which state."""

from __future__ import annotations

import os
import stat
from dataclasses import dataclass, field
from pathlib import Path

from bridge.files import names

_WORKBOOKS = (".xlsx", ".xlsm")
# Lock files, owner files, hidden files, and files that programs write before they rename them.
_NOT_WORKBOOKS = (".", "~$")


@dataclass(frozen=True, slots=True)
class State:
    """A file's state without its bytes; times in nanoseconds."""

    inode: int
    size: int
    mtime_ns: int
    ctime_ns: int


@dataclass(frozen=True, slots=True)
class Sighting:
    """A workbook: its path as people see it, and its state. Its real path is the key it stands under."""

    path: str
    state: State


@dataclass(slots=True)
class Scan:
    """What was found below one folder. Keys of `books` are real paths.

    `folders` maps real folder -> (device, inode); `ours` real folder -> our hidden names in it;
    `unreadable` real folders that could not be looked into.
    """

    books: dict[str, Sighting] = field(default_factory=dict)
    folders: dict[str, tuple[int, int]] = field(default_factory=dict)
    ours: dict[str, list[str]] = field(default_factory=dict)
    unreadable: set[str] = field(default_factory=set)


def is_workbook_name(name: str) -> bool:
    """Whether a name can be a workbook of people's: not a lock, temporary or hidden file of some program."""
    return name.lower().endswith(_WORKBOOKS) and not name.startswith(_NOT_WORKBOOKS) and ".sb-" not in name


def state_of(found: os.stat_result) -> State:
    """The part of a file's state that a save changes."""
    return State(found.st_ino, found.st_size, found.st_mtime_ns, found.st_ctime_ns)


def scan(root: Path) -> Scan:
    """Look through `root`, links followed, hidden folders left out. Raises OSError when `root` itself is away."""
    made = Scan()
    waiting = [(str(root), os.path.realpath(root))]
    top = waiting[0][1]
    seen: set[tuple[int, int]] = set()
    while waiting:
        shown, real = waiting.pop()
        try:
            found = os.stat(real)
            if (found.st_dev, found.st_ino) not in seen:
                seen.add((found.st_dev, found.st_ino))
                made.folders[real] = (found.st_dev, found.st_ino)
                waiting += _look_into(shown, real, made)
        except OSError:
            if real == top:
                raise
            made.unreadable.add(real)
    return made


def _look_into(shown: str, real: str, made: Scan) -> list[tuple[str, str]]:
    """Note what one folder holds; the folders in it as (path shown, real path)."""
    below = []
    with os.scandir(real) as entries:
        for entry in entries:
            name = entry.name
            if name.startswith(names.PREFIX):
                made.ours.setdefault(real, []).append(name)
            elif is_workbook_name(name):
                _note_book(entry, shown, made)
            elif not name.startswith(".") and _is_folder(entry):
                way = os.path.realpath(entry.path) if entry.is_symlink() else entry.path
                below.append((os.path.join(shown, name), way))
    return below


def _note_book(entry: os.DirEntry[str], shown: str, made: Scan) -> None:
    try:
        found = entry.stat()
        if stat.S_ISREG(found.st_mode):
            real = os.path.realpath(entry.path) if entry.is_symlink() else entry.path
            made.books.setdefault(real, Sighting(os.path.join(shown, entry.name), state_of(found)))
    except OSError:  # gone again, or a link to nowhere
        return


def _is_folder(entry: os.DirEntry[str]) -> bool:
    try:
        return entry.is_dir()
    except OSError:
        return False
