"""One bridge at a time per workbook, even when colleagues' bridges watch the same share.

A claim is a small hidden file next to the workbook that says who works on it, since when, and for how long that
holds. It saves double work; it does not carry safety, which the verified swap gives by itself.

A claim whose process has ended is taken over at once on the same machine. Any claim holds only until its file has
not been renewed for `EXPIRY` seconds, both times as the file's own server stamps them, so that the machines' clocks
need not agree.
"""

from __future__ import annotations

import errno
import json
import os
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import asdict
from datetime import datetime
from pathlib import Path

from bridge.files import names, owner

EXPIRY = 45.0
_UNREADABLE_EXPIRY = 5.0  # its owner was stopped between making the file and writing into it
_BEAT = 15.0
_PAUSE = 0.1
_LARGEST = 1 << 16
_NO_CLAIMS_HERE = {errno.EACCES, errno.EPERM, errno.EROFS, errno.ENOSPC, errno.EDQUOT, errno.ENAMETOOLONG}

_mine: set[Path] = set()
_guard = threading.Lock()


class Claimed(Exception):
    """Another bridge works on the workbook; `owner` is None when it cannot be told who."""

    def __init__(self, owner: owner.Owner | None) -> None:
        super().__init__("another bridge works on the workbook")
        self.owner = owner


@contextmanager
def claimed(workbook: Path, wait: float = 0.0) -> Iterator[None]:
    """Hold the claim on a workbook (its real path); again inside is fine. Waits up to `wait` seconds.

    Raises Claimed. In a folder where nothing can be written there is nothing to protect: no claim, no error.
    """
    path = claim_path(workbook)
    if not _enter(path):
        yield
        return
    renewal = None
    try:
        if _take(path, wait):
            renewal = _Renewal(path)
        yield
    finally:
        if renewal is not None:
            renewal.stop()
        with _guard:
            _mine.discard(path)


def claim_path(workbook: Path) -> Path:
    """Where a workbook's claim stands."""
    return names.hidden(workbook.parent, names.key(workbook.name), names.CLAIM)


def clear_dead(path: Path) -> bool:
    """Take a claim away if its owner is dead or its time is over; True when it went. Raises OSError."""
    try:
        seen = path.read_bytes()[:_LARGEST]
    except FileNotFoundError:
        return False
    return _dead(path, _owner(seen)) and _take_away(path, seen)


def time_there(folder: Path) -> float:
    """The time by the clock that stamps files in `folder`, in seconds. Raises OSError."""
    probe = names.hidden(folder, names.token(), names.PROBE)
    try:
        os.close(os.open(probe, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600))
        return probe.stat().st_mtime
    finally:
        probe.unlink(missing_ok=True)


def _enter(path: Path) -> bool:
    """False when this process holds the claim already."""
    with _guard:
        if path in _mine:
            return False
        _mine.add(path)
        return True


def _take(path: Path, wait: float) -> bool:
    """Create the claim; False where nothing can be created."""
    until, content = time.monotonic() + wait, _content()
    while True:
        try:
            handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o644)
        except FileExistsError:
            if clear_dead(path):
                continue
            if time.monotonic() >= until:
                raise Claimed(_owner_at(path)) from None
            time.sleep(_PAUSE)
        except OSError as error:
            if error.errno in _NO_CLAIMS_HERE or isinstance(error, FileNotFoundError):
                return False
            raise
        else:
            return _written(handle, content, path)


def _written(handle: int, content: bytes, path: Path) -> bool:
    """At once, so that a claim without content, which nobody can judge, hardly ever stands there."""
    try:
        os.write(handle, content)
    except OSError:  # no space: what is to be protected will fail, too
        path.unlink(missing_ok=True)
        return False
    finally:
        os.close(handle)
    return True


def _content() -> bytes:
    since = datetime.now().astimezone().isoformat(timespec="seconds")
    return json.dumps(asdict(owner.me()) | {"time": since, "expires_after_s": EXPIRY}).encode()


def _owner(content: bytes) -> owner.Owner | None:
    try:
        found = json.loads(content)
        return owner.Owner(**{name: found[name] for name in ("user", "host", "machine", "pid", "started")})
    except (ValueError, KeyError, TypeError):
        return None


def _owner_at(path: Path) -> owner.Owner | None:
    try:
        return _owner(path.read_bytes()[:_LARGEST])
    except OSError:
        return None


def _dead(path: Path, holder: owner.Owner | None) -> bool:
    lives = None if holder is None else owner.alive(holder)
    if lives is False:
        return True
    if holder is not None and owner.is_me(holder) and path not in _mine:
        return True  # left behind in a folder that was moved while we held it
    try:
        renewed = path.stat().st_mtime
        if lives and time.time() - renewed < EXPIRY:
            return False  # no need to ask the server for its time
        return time_there(path.parent) - renewed > (EXPIRY if holder else _UNREADABLE_EXPIRY)
    except OSError:
        return False


def _take_away(path: Path, seen: bytes) -> bool:
    """Remove the claim that read `seen`; a fresh one that came in its place is put back."""
    away = names.hidden(path.parent, names.token(), names.PROBE)
    try:
        os.rename(path, away)
    except FileNotFoundError:
        return True
    if away.read_bytes()[:_LARGEST] != seen:
        with suppress(OSError):
            os.link(away, path)
    away.unlink(missing_ok=True)
    return True


class _Renewal:
    """Renews a claim while long work goes on, and removes it at the end."""

    def __init__(self, path: Path) -> None:
        self._place = _Place(path)
        self._stopped = threading.Event()
        threading.Thread(target=self._renew, daemon=True, name="claim").start()

    def _renew(self) -> None:
        while not self._stopped.wait(_BEAT):
            # Written anew, not touched: only a write lets the server put its own time on the file.
            with suppress(OSError), open(self._place.opened(os.O_WRONLY), "wb") as file:
                file.write(_content())

    def stop(self) -> None:
        """No more renewals; the claim goes, unless somebody else's stands there by now."""
        self._stopped.set()
        with suppress(OSError):
            with open(self._place.opened(os.O_RDONLY), "rb") as file:
                holder = _owner(file.read(_LARGEST))
            if holder is not None and owner.is_me(holder):
                self._place.remove()
        self._place.close()


class _Place:
    """Where a claim stands: in its folder, even when that is moved meanwhile, where the system can hold on to it."""

    def __init__(self, path: Path) -> None:
        self._name: str | Path = path
        self._folder: int | None = None
        if os.open in os.supports_dir_fd and os.unlink in os.supports_dir_fd:
            with suppress(OSError):
                self._folder = os.open(path.parent, os.O_RDONLY | os.O_CLOEXEC)
                self._name = path.name

    def opened(self, flags: int) -> int:
        """The claim, open. Raises OSError."""
        return os.open(self._name, flags, dir_fd=self._folder)

    def remove(self) -> None:
        """The claim goes. Raises OSError."""
        os.unlink(self._name, dir_fd=self._folder)

    def close(self) -> None:
        """Let the folder go."""
        if self._folder is not None:
            os.close(self._folder)
