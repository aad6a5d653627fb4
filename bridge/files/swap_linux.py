"""Linux: exchange two names in one step (renameat2 with RENAME_EXCHANGE), under a read lease.

The lease (F_SETLEASE of fcntl(2)) is refused while anybody has the file open for writing, and makes those who
come later wait until it is given back, so that nobody can write into the file between our look and our swap
through a handle opened earlier. Where a file system has no exchange, `swap_link` does it.
"""

from __future__ import annotations

import ctypes
import errno
import fcntl
import os
import signal
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from pathlib import Path

from bridge.files import swap_link
from bridge.files.swap import Gone, Guard, Standing, Unguarded

_AT_FDCWD = -100
_RENAME_EXCHANGE = 2
_NOT_HERE = {errno.EINVAL, errno.ENOSYS, errno.EOPNOTSUPP}


@dataclass(frozen=True, slots=True)
class Lease:
    """A read lease on an open file."""

    handle: int
    standing: Standing = Standing.QUIET

    def disturbed(self) -> bool:
        """Whether somebody waits to open the file for writing."""
        return fcntl.fcntl(self.handle, fcntl.F_GETLEASE) != fcntl.F_RDLCK


@dataclass(frozen=True, slots=True)
class Busy:
    """No lease: somebody has the file open for writing."""

    standing: Standing = Standing.BUSY

    def disturbed(self) -> bool:
        """They are already there."""
        return False


class LinuxSystem:
    """Linux, any file system."""

    refuses_when_held = False

    @contextmanager
    def guard(self, path: Path) -> Iterator[Guard]:
        """A lease where it can be had. Raises Gone."""
        try:
            handle = os.open(path, os.O_RDONLY | os.O_CLOEXEC | os.O_NONBLOCK)
        except FileNotFoundError as error:
            raise Gone from error
        try:
            yield _leased(handle)
        finally:
            os.close(handle)  # gives a lease back

    def swap(self, new: Path, target: Path, aside: Path) -> Path:
        """See `System.swap`."""
        try:
            exchange(new, target)
        except FileNotFoundError as error:
            raise Gone from error
        except OSError as error:
            if error.errno not in _NOT_HERE:
                raise
            return swap_link.swap(new, target, aside)
        return new

    def dress(self, new: Path, like: Path) -> bool:
        """See `System.dress`."""
        return swap_link.dress(new, like)

    def sync_folder(self, folder: Path) -> None:
        """See `System.sync_folder`."""
        swap_link.sync_folder(folder)


def exchange(first: Path, second: Path) -> None:
    """The two names change places in one step. Raises OSError."""
    arguments = (_AT_FDCWD, os.fsencode(first), _AT_FDCWD, os.fsencode(second), _RENAME_EXCHANGE)
    if _library().renameat2(*arguments):
        number = ctypes.get_errno()
        raise OSError(number, os.strerror(number), str(first), None, str(second))


@cache
def _library() -> ctypes.CDLL:
    library = ctypes.CDLL(None, use_errno=True)
    if not hasattr(library, "renameat2"):
        raise OSError(errno.ENOSYS, "the C library has no renameat2")
    return library


def _leased(handle: int) -> Guard:
    try:
        # Whoever comes later makes the kernel signal us; the usual SIGIO would end the process, SIGURG is ignored.
        fcntl.fcntl(handle, fcntl.F_SETSIG, signal.SIGURG)
        fcntl.fcntl(handle, fcntl.F_SETLEASE, fcntl.F_RDLCK)
    except OSError as error:
        return Busy() if error.errno == errno.EAGAIN else Unguarded()
    return Lease(handle)
