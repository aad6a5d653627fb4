"""Events of the operating system as hints that a file may have changed.

Events may be late, doubled or missing: whoever gets a hint looks for himself, and looks through the folders now and
then without one. Their kind is not believed, except that somebody's mere reading is no hint.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable
from contextlib import suppress
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from bridge.watch.scan import is_workbook_name

if TYPE_CHECKING:
    from watchdog.observers.api import BaseObserver

Hint = Callable[[str], None]
_READING = ("opened", "closed_no_write")


class Events:
    """The event source of one watched folder and of what its links lead to. Started by `follow`."""

    def __init__(self, hint: Hint) -> None:
        self._hint = hint
        self._observer: BaseObserver | None = None
        self._followed: dict[_Place, tuple[int, int] | None] = {}
        self._watches: dict[_Place, Any] = {}

    def follow(self, top: str, outside: Iterable[str]) -> bool:
        """Follow `top` and everything below, and the folders `outside` it, each by itself.

        A folder that was replaced by another since is followed anew. False when the system grants no more events.
        """
        wanted = {_Place(top, True): _identity(top)} | {_Place(path, False): _identity(path) for path in outside}
        if wanted == self._followed and (self._observer is None or self._alive()):
            return True
        self.stop()
        if all(identity is None for identity in wanted.values()):
            return True
        try:
            self._start([place for place, identity in wanted.items() if identity is not None])
        except (OSError, RuntimeError):  # no more watches or instances left for this user
            self.stop()
            return False
        self._followed = wanted
        return True

    def stop(self) -> None:
        """No more events."""
        observer, self._observer, self._followed = self._observer, None, {}
        if observer is not None:
            with suppress(OSError, RuntimeError):
                observer.stop()
                observer.join(5)

    def _alive(self) -> bool:
        return self._observer is not None and all(emitter.is_alive() for emitter in self._observer.emitters)

    def _start(self, places: Iterable[_Place]) -> None:
        from watchdog.observers import Observer

        self._observer = Observer()
        handler = _Handler(self._hint)
        for place in places:
            self._observer.schedule(handler, place.path, recursive=place.deep)  # type: ignore[arg-type]
        self._observer.start()


@dataclass(frozen=True, slots=True)
class _Place:
    path: str
    deep: bool


class _Handler:
    """What watchdog calls for each event."""

    def __init__(self, hint: Hint) -> None:
        self._hint = hint

    def dispatch(self, event: Any) -> None:
        """Pass the names on."""
        if event.event_type in _READING:
            return
        for path in (event.src_path, event.dest_path):
            shown = os.fsdecode(path) if path else ""
            if is_workbook_name(os.path.basename(shown)):
                self._hint(shown)


def _identity(path: str) -> tuple[int, int] | None:
    try:
        found = os.stat(path)
    except OSError:
        return None
    return found.st_dev, found.st_ino
