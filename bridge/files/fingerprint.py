"""By what a file is known again: which file, in which state, with which bytes."""

from __future__ import annotations

import hashlib
import os
from dataclasses import asdict, dataclass
from pathlib import Path

from bridge.files.handle import opened

_DIGEST_BYTES = 20


@dataclass(frozen=True, slots=True)
class Fingerprint:
    """Which file, in which state. `mtime_ns` in nanoseconds; `digest` is BLAKE2b over the bytes, in hex."""

    inode: int
    size: int
    mtime_ns: int
    digest: str

    def stands(self, found: os.stat_result) -> bool:
        """Whether a file's state, looked at without its bytes, is still this one."""
        return (found.st_ino, found.st_size, found.st_mtime_ns) == (self.inode, self.size, self.mtime_ns)

    def as_dict(self) -> dict[str, int | str]:
        """For a message between processes."""
        return asdict(self)


@dataclass(frozen=True, slots=True)
class Seen:
    """A file that was looked at: its path as given, its real path, and what was found."""

    path: Path
    real: Path
    fingerprint: Fingerprint


def fingerprint(found: os.stat_result, digest: str) -> Fingerprint:
    """The fingerprint of a file with this state and these bytes."""
    return Fingerprint(found.st_ino, found.st_size, found.st_mtime_ns, digest)


def digest_of(data: bytes | memoryview) -> str:
    """The digest of bytes."""
    return hashlib.blake2b(data, digest_size=_DIGEST_BYTES).hexdigest()


def file_digest(path: Path) -> str:
    """The digest of a file, read piece by piece. Raises OSError."""
    made = hashlib.blake2b(digest_size=_DIGEST_BYTES)
    with opened(path) as handle:
        while piece := handle.some(1 << 20):
            made.update(piece)
    return made.hexdigest()
