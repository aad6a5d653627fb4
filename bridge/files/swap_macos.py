"""macOS: exchange two names in one step (renamex_np with RENAME_SWAP), where the volume can.

From rename(2) and copyfile(3) of the system's manual; not yet run on that system. There is nothing like a lease,
so that what came out is kept for a while and looked at again (`writeback`).
"""

from __future__ import annotations

import ctypes
import errno
import os
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

from bridge.files import swap_link
from bridge.files.swap import Gone, Guard, Unguarded

_RENAME_SWAP = 0x2
_COPY_METADATA = 0x7  # COPYFILE_ACL | COPYFILE_STAT | COPYFILE_XATTR
_NOT_HERE = {errno.ENOTSUP, errno.EINVAL, errno.ENOSYS, 102}  # 102 is macOS's EOPNOTSUPP


class MacKernel:
    """The two calls of the C library; each returns 0 or the error number."""

    def __init__(self) -> None:
        self._library = ctypes.CDLL(None, use_errno=True)

    def rename_swap(self, first: Path, second: Path) -> int:
        """`renamex_np(first, second, RENAME_SWAP)`."""
        failed = self._library.renamex_np(os.fsencode(first), os.fsencode(second), _RENAME_SWAP)
        return ctypes.get_errno() if failed else 0

    def copy_metadata(self, source: Path, to: Path) -> int:
        """`copyfile(source, to, NULL, COPYFILE_METADATA)`: mode, times, access lists, extended attributes."""
        failed = self._library.copyfile(os.fsencode(source), os.fsencode(to), None, _COPY_METADATA)
        return ctypes.get_errno() if failed else 0


class MacSystem:
    """macOS, any volume."""

    refuses_when_held = False

    def __init__(self, kernel: MacKernel | None = None) -> None:
        self._kernel = kernel or MacKernel()

    @contextmanager
    def guard(self, path: Path) -> Iterator[Guard]:
        """No guard on this system."""
        yield Unguarded()

    def swap(self, new: Path, target: Path, aside: Path) -> Path:
        """See `System.swap`."""
        code = self._kernel.rename_swap(new, target)
        if code == errno.ENOENT:
            raise Gone
        if code in _NOT_HERE:
            return swap_link.swap(new, target, aside)
        _raise(code, target)
        return new

    def dress(self, new: Path, like: Path) -> bool:
        """See `System.dress`."""
        kept = swap_link.dress(new, like)
        _raise(self._kernel.copy_metadata(like, new), new)
        return kept

    def sync_folder(self, folder: Path) -> None:
        """See `System.sync_folder`."""
        swap_link.sync_folder(folder)


def _raise(code: int, path: Path, strerror: Callable[[int], str] = os.strerror) -> None:
    if code:
        raise OSError(code, strerror(code), str(path))
