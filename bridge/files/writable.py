"""Whether a workbook may be replaced at all, asked before anything is written."""

from __future__ import annotations

import os
import stat
from pathlib import Path

from bridge.messages import FileRefused, say

_ANY_WRITE = stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH


def refuse_unwritable(path: Path, real: Path) -> None:
    """Raises FileRefused: more than one name, read-only, or a folder that does not let files be replaced.

    `path` is as given, for the message; `real` has links resolved. Raises FileNotFoundError when it is gone.
    """
    found = real.stat()
    if found.st_nlink > 1:
        raise FileRefused(say("file-hard-linked", name=path.name, count=found.st_nlink))
    # Replacing needs no right to write into the file itself, and root may write into any: the mark is respected.
    if not found.st_mode & _ANY_WRITE or not _allowed(real, os.W_OK):
        raise FileRefused(say("file-read-only", name=path.name))
    folder = real.parent
    if not _allowed(folder, os.W_OK | os.X_OK):
        raise FileRefused(say("folder-read-only", name=path.name, folder=folder))
    if _sticky_for_us(folder, found):
        raise FileRefused(say("folder-sticky", name=path.name, folder=folder))


def _allowed(path: Path, wish: int) -> bool:
    """Whether we may. What is not there is not a matter of rights. Raises FileNotFoundError."""
    allowed = os.access(path, wish)
    if not allowed:
        path.stat()
    return allowed


def _sticky_for_us(folder: Path, found: os.stat_result) -> bool:
    """Whether only owners may replace files in this folder (inode(7), sticky bit), and we are none."""
    if not hasattr(os, "geteuid"):
        return False
    held = folder.stat()
    return bool(held.st_mode & stat.S_ISVTX) and os.geteuid() not in (0, found.st_uid, held.st_uid)
