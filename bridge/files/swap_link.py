"""Swapping without an exchange call: the file gets a second name, then the new one is renamed over the first.

For shares and file systems that have no exchange (SMB answers EINVAL). Between the second name and the rename a
save can come in by name and be replaced unseen: the check just before the rename makes that a matter of
microseconds, not of nothing. Also what a POSIX system without a module of its own gets.
"""

from __future__ import annotations

import errno
import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from bridge.files.swap import Gone, Guard, Unguarded

_NO_LINKS = {errno.EPERM, errno.EOPNOTSUPP, errno.ENOTSUP, errno.ENOSYS, errno.EINVAL, errno.EMLINK, errno.EACCES}


def swap(new: Path, target: Path, aside: Path) -> Path:
    """Put `new` at `target`; what stood there is then at `aside`. Raises Gone, OSError."""
    try:
        _second_name(target, aside)
        try:
            if not _same_file(target, aside):
                raise Gone  # replaced in between: that is somebody's save
            os.replace(new, target)
        except BaseException:
            aside.unlink(missing_ok=True)
            raise
    except FileNotFoundError as error:
        raise Gone from error
    return aside


def _second_name(target: Path, aside: Path) -> None:
    """A hard link, or a copy where links are not known."""
    try:
        os.link(target, aside)
    except OSError as error:
        if error.errno not in _NO_LINKS:
            raise
        shutil.copy2(target, aside)
        with aside.open("rb") as copy:
            os.fsync(copy.fileno())


def _same_file(target: Path, aside: Path) -> bool:
    first, second = target.stat(), aside.stat()
    return (first.st_size, first.st_mtime_ns) == (second.st_size, second.st_mtime_ns)


def dress(new: Path, like: Path) -> bool:
    """Mode, times and attributes; the owner where that is allowed. Returns False when the owner was not kept."""
    kept = True
    wanted, have = like.stat(), new.stat()
    if hasattr(os, "chown") and (wanted.st_uid, wanted.st_gid) != (have.st_uid, have.st_gid):
        try:
            os.chown(new, wanted.st_uid, wanted.st_gid)
        except PermissionError:
            kept = False
            _keep_group(new, wanted.st_gid)
    shutil.copystat(like, new)  # after chown, which takes some mode bits away
    return kept


def _keep_group(new: Path, group: int) -> None:
    try:
        os.chown(new, -1, group)
    except PermissionError:
        return


def sync_folder(folder: Path) -> None:
    """Make the folder's names durable; file systems that refuse are left alone."""
    try:
        handle = os.open(folder, os.O_RDONLY)
    except OSError:
        return
    try:
        os.fsync(handle)
    except OSError:
        return
    finally:
        os.close(handle)


class LinkSystem:
    """A POSIX system of which nothing more is known."""

    refuses_when_held = False

    @contextmanager
    def guard(self, path: Path) -> Iterator[Guard]:
        """No guard."""
        yield Unguarded()

    def swap(self, new: Path, target: Path, aside: Path) -> Path:
        """See `System.swap`."""
        return swap(new, target, aside)

    def dress(self, new: Path, like: Path) -> bool:
        """See `System.dress`."""
        return dress(new, like)

    def sync_folder(self, folder: Path) -> None:
        """See `System.sync_folder`."""
        sync_folder(folder)
