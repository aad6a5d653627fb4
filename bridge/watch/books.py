"""What is known about each workbook of one folder, and when a save of it counts: pure bookkeeping, no file access.

    settling    its state changed; not yet quiet for long enough
    asked       handed on to be fitted; the answer is awaited
    held        made, but a program has it open: due again when it is closed
    handled     nothing to do until its state changes

Times are seconds of a clock that only runs forward.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from enum import Enum

from bridge.files.fingerprint import Fingerprint
from bridge.watch.scan import Sighting, State

_TORN_PAUSE_S, _TORN_LONGEST_PAUSE_S = 0.2, 2.0
TORN_PATIENCE_S = 60.0


class Phase(Enum):
    """Where a workbook stands."""

    SETTLING = "settling"
    ASKED = "asked"
    HELD = "held"
    HANDLED = "handled"


@dataclass(slots=True)
class Book:
    """One workbook. `handled` is the version last dealt with; `asks` whether it asked for a fit when last looked at."""

    path: str
    real: str
    state: State
    changed_at: float
    phase: Phase = Phase.SETTLING
    handled: Fingerprint | None = None
    asks: bool = False
    asked_state: State | None = None
    look_at: float = 0.0
    torn_since: float | None = None
    absent_since: float | None = None
    closed_since: float | None = None


@dataclass(slots=True)
class Books:
    """The workbooks of one folder, by real path. `settle` and `absent_grace` in seconds."""

    settle: float
    absent_grace: float
    by_real: dict[str, Book] = field(default_factory=dict)
    _missing: set[str] = field(default_factory=set)

    def seen(self, real: str, sighting: Sighting, now: float) -> Book | None:
        """Take in what was seen; the book when its state is new, None when nothing changed."""
        book = self.by_real.get(real)
        if book is None:
            book = Book(sighting.path, real, sighting.state, now, look_at=now + self.settle)
            book.handled = self._handled_elsewhere(sighting.state)
            self.by_real[real] = book
            return book
        book.absent_since = None
        self._missing.discard(real)
        if book.state == sighting.state:
            return None
        book.state, book.path = sighting.state, sighting.path
        self._stir(book, now)
        return book

    def _stir(self, book: Book, now: float) -> None:
        book.phase, book.changed_at, book.look_at = Phase.SETTLING, now, now + self.settle
        book.torn_since = book.closed_since = None

    def _handled_elsewhere(self, state: State) -> Fingerprint | None:
        """What was handled of a workbook that had this state under a name that is gone: it was renamed."""
        for other in (self.by_real[real] for real in self._missing):
            if other.handled is not None and _same_file(other.state, state):
                return other.handled
        return None

    def absent(self, real: str, now: float) -> bool:
        """A workbook was not found; True when it has been missing for so long that it counts as deleted."""
        book = self.by_real[real]
        if book.absent_since is None:
            book.absent_since = now
            self._missing.add(real)
        if now - book.absent_since < self.absent_grace:
            return False
        del self.by_real[real]
        self._missing.discard(real)
        return True

    def due(self, now: float) -> Iterator[Book]:
        """Those quiet for long enough, and those held that should be looked at again."""
        for book in list(self.by_real.values()):
            if book.phase in (Phase.SETTLING, Phase.HELD) and book.look_at <= now and book.absent_since is None:
                yield book

    def next_look(self) -> float | None:
        """When something will be due next."""
        waiting = (Phase.SETTLING, Phase.HELD)
        times = [b.look_at for b in self.by_real.values() if b.phase in waiting and b.absent_since is None]
        return min(times, default=None)

    def torn(self, book: Book, now: float) -> bool:
        """It is not whole: look again after a growing pause; False when it has not become whole for too long."""
        if book.torn_since is None:
            book.torn_since = now
        waited = now - book.torn_since
        if waited >= TORN_PATIENCE_S:
            book.phase = Phase.HANDLED
            return False
        book.look_at = now + min(max(waited, _TORN_PAUSE_S), _TORN_LONGEST_PAUSE_S)
        return True

    def ask(self, book: Book) -> None:
        """It is handed on to be fitted."""
        book.phase, book.asks, book.torn_since, book.asked_state = Phase.ASKED, True, None, book.state

    def answered(self, real: str, found: Fingerprint | None, state: State | None, now: float) -> Book | None:
        """An answer came: `found` is the version it dealt with, `state` how the file is now.

        Anything newer than that version is due in its turn. Without `found`, what was handed on counts as dealt with.
        """
        book = self.by_real.get(real)
        if book is None:
            return None
        if state is None:  # not there just now: when it is back, even as it was, it is looked at
            self._stir(book, now)
            return book
        if book.phase is Phase.SETTLING:  # changed since: the quiet time decides, and knows the version by its bytes
            book.handled = found or book.handled
            return book
        book.state, book.handled = state, found or book.handled
        if found is None:
            fresh = state != book.asked_state
        else:
            fresh = (state.inode, state.size, state.mtime_ns) != (found.inode, found.size, found.mtime_ns)
        if fresh:
            self._stir(book, now)
        else:
            book.phase = Phase.HANDLED
        return book

    def again(self, real: str, now: float, pause: float) -> None:
        """It is due again after a pause, whatever its state."""
        book = self.by_real.get(real)
        if book is not None:
            book.phase, book.look_at, book.handled = Phase.SETTLING, now + pause, None

    def hold(self, real: str, now: float) -> None:
        """Its results wait until the program that has it open closes it."""
        book = self.by_real.get(real)
        if book is not None and book.phase is not Phase.SETTLING:
            book.phase, book.closed_since, book.look_at = Phase.HELD, None, now


def _same_file(first: State, second: State) -> bool:
    return (first.inode, first.size, first.mtime_ns) == (second.inode, second.size, second.mtime_ns)
