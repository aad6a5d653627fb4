"""Windows: ReplaceFileW, always with a backup name, so that what stood there is never lost.

From the documented contract of ReplaceFileW and MoveFileExW (Microsoft's "winbase.h" reference); not yet run on
that system. The call is made of several steps and may stop between them:

    1175  could not remove the replaced file: everything keeps its name
    1176  could not move the replacement in: with a backup name, everything keeps its name
    1177  the replaced file already has the backup name, the replacement still its own: nothing has the name now

A workbook that another program holds, a virus scanner or a synchroniser included, answers 5, 32 or 33; the last
two mostly let go within moments, so it is tried for a while before the file counts as held.
"""

from __future__ import annotations

import ctypes
import errno
import os
import shutil
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

from bridge.files.swap import Gone, Guard, Held, Unguarded

FILE_NOT_FOUND, PATH_NOT_FOUND, ACCESS_DENIED = 2, 3, 5
SHARING_VIOLATION, LOCK_VIOLATION = 32, 33
UNABLE_TO_REMOVE_REPLACED, UNABLE_TO_MOVE_REPLACEMENT, UNABLE_TO_MOVE_REPLACEMENT_2 = 1175, 1176, 1177
_PASSING = {
    ACCESS_DENIED,
    SHARING_VIOLATION,
    LOCK_VIOLATION,
    UNABLE_TO_REMOVE_REPLACED,
    UNABLE_TO_MOVE_REPLACEMENT,
    UNABLE_TO_MOVE_REPLACEMENT_2,
}
_MEANT = {112: errno.ENOSPC, 206: errno.ENAMETOOLONG, 17: errno.EXDEV, 19: errno.EROFS}
_MOVE_WRITE_THROUGH = 0x8
PATIENCE = 3.0
_PAUSES = (0.05, 0.1, 0.2, 0.3, 0.5)


class WindowsKernel:
    """The two calls; each returns 0 or the system's error code."""

    def replace_file(self, replaced: Path, replacement: Path, backup: Path) -> int:
        """`ReplaceFileW(replaced, replacement, backup, 0)`."""
        done = _kernel32().ReplaceFileW(str(replaced), str(replacement), str(backup), 0, None, None)
        return 0 if done else _last_error()

    def move_file(self, source: Path, to: Path) -> int:
        """`MoveFileExW` that never replaces anything."""
        return 0 if _kernel32().MoveFileExW(str(source), str(to), _MOVE_WRITE_THROUGH) else _last_error()


class WindowsSystem:
    """Windows, any volume. `sleep` and `clock` are for tests."""

    refuses_when_held = True

    def __init__(
        self,
        kernel: WindowsKernel | None = None,
        sleep: Callable[[float], None] = time.sleep,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._kernel = kernel or WindowsKernel()
        self._sleep, self._clock = sleep, clock

    @contextmanager
    def guard(self, path: Path) -> Iterator[Guard]:
        """No guard; a program that may not be disturbed makes the swap itself fail."""
        yield Unguarded()

    def swap(self, new: Path, target: Path, aside: Path) -> Path:
        """See `System.swap`. Tries for up to `PATIENCE` seconds while others hold the file."""
        until, pauses = self._clock() + PATIENCE, iter(_PAUSES)
        while True:
            code = self._kernel.replace_file(target, new, aside)
            if code == 0:
                return aside
            self._undo_half(target, aside)
            if code in (FILE_NOT_FOUND, PATH_NOT_FOUND) or aside.exists():
                raise Gone  # a backup that could not go back: a save has the name now, recovery looks at the backup
            if code not in _PASSING:
                raise _os_error(code, target)
            if self._clock() >= until:
                raise Held
            self._sleep(next(pauses, _PAUSES[-1]))

    def _undo_half(self, target: Path, aside: Path) -> None:
        """After a stop half-way the old file has only the backup name: give it its own back, unless that is taken."""
        for pause in (*_PAUSES, None):
            if not aside.exists() or target.exists():
                return
            if self._kernel.move_file(aside, target) == 0 or pause is None:
                return
            self._sleep(pause)

    def dress(self, new: Path, like: Path) -> bool:
        """The read-only mark; the call itself carries access lists, attributes and streams over."""
        shutil.copymode(like, new)
        return True

    def sync_folder(self, folder: Path) -> None:
        """Nothing to do: the calls write names through."""


def _os_error(code: int, path: Path) -> OSError:
    return OSError(_MEANT.get(code, errno.EIO), f"the system answered {code}", str(path))


def _kernel32() -> ctypes.CDLL:
    return ctypes.WinDLL("kernel32", use_last_error=True)  # type: ignore[attr-defined,no-any-return,unused-ignore]


def _last_error() -> int:
    return int(ctypes.get_last_error())  # type: ignore[attr-defined,unused-ignore]


def open_shared(path: Path) -> int:
    """A handle for reading that lets others read, write, rename and delete meanwhile. Raises OSError.

    The usual open keeps a spreadsheet program from renaming the file, and its save would fail by our fault.
    """
    import msvcrt

    generic_read, share_all, open_existing, normal = 0x80000000, 0x7, 3, 0x80
    create = _kernel32().CreateFileW
    create.restype = ctypes.c_void_p
    handle = create(str(path), generic_read, share_all, None, open_existing, normal, None)
    if handle is None or handle == ctypes.c_void_p(-1).value:
        raise ctypes.WinError(_last_error())  # type: ignore[attr-defined,unused-ignore]
    flags = os.O_RDONLY | getattr(os, "O_BINARY", 0)
    return int(msvcrt.open_osfhandle(handle, flags))  # type: ignore[attr-defined,unused-ignore]
