"""Putting a new file in a workbook's place so that what stood there can still be looked at: the interface.

    System      what one operating system offers; one module each, chosen in `this_system`
      guard     keeps other programs from writing while we look and swap, where the system can do that
      swap      puts `new` at `target`; what stood there comes out under another name
      dress     gives a new file the old one's mode, owner and attributes
    Gone        the name is absent just now (another program is in the middle of saving)
    Held        another program holds the file in a way that forbids replacing it

Every other failure is an OSError. Nothing here decides whether a swap was right: `writeback` does.
"""

from __future__ import annotations

import sys
from contextlib import AbstractContextManager
from enum import Enum
from functools import cache
from pathlib import Path
from typing import Protocol


class Gone(Exception):
    """The workbook's name is absent at this moment."""


class Held(Exception):
    """Another program holds the workbook so that it cannot be replaced."""


class Standing(Enum):
    """Who may write into the file while it is guarded."""

    QUIET = "nobody"  # nobody has it open for writing, and nobody gets to until the guard ends
    BUSY = "somebody"  # somebody has it open for writing
    UNKNOWN = "unknown"  # the system cannot tell


class Guard(Protocol):
    """A file being guarded."""

    @property
    def standing(self) -> Standing:
        """What was found when the guard began."""
        ...

    def disturbed(self) -> bool:
        """Whether somebody has come meanwhile and waits to write."""
        ...


class System(Protocol):
    """What one operating system offers for replacing a file safely.

    `refuses_when_held`: a swap of a file that a spreadsheet program has open fails by itself, so that the marks
    such programs leave, which survive a crash, need not be believed.
    """

    refuses_when_held: bool

    def guard(self, path: Path) -> AbstractContextManager[Guard]:
        """Guard the file that now has this name. Raises Gone."""
        ...

    def swap(self, new: Path, target: Path, aside: Path) -> Path:
        """Put `new` at `target`; returns the name under which what stood there is now found (`new` or `aside`).

        Raises Gone, Held, OSError; in each case `target` and `new` are as they were.
        """
        ...

    def dress(self, new: Path, like: Path) -> bool:
        """Copy mode, owner and attributes of `like`; False when the owner could not be kept."""
        ...

    def sync_folder(self, folder: Path) -> None:
        """Make names durable, where the system knows that."""
        ...


class Unguarded:
    """The guard of systems that have none."""

    standing = Standing.UNKNOWN

    def disturbed(self) -> bool:
        """Nobody can be seen."""
        return False


@cache
def this_system() -> System:
    """The operating system we run on."""
    if sys.platform == "win32":
        from bridge.files.swap_windows import WindowsSystem

        return WindowsSystem()
    if sys.platform == "darwin":
        from bridge.files.swap_macos import MacSystem

        return MacSystem()
    if sys.platform == "linux":
        from bridge.files.swap_linux import LinuxSystem

        return LinuxSystem()
    from bridge.files.swap_link import LinkSystem

    return LinkSystem()
