"""One watched folder: looks through it, hears hints, decides when a save counts, and hands it on.

Each folder has a thread of its own, so that a share that hangs keeps none of the others waiting.
"""

from __future__ import annotations

import os
import threading
import time
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from bridge.files import beside, names, openness, recovery
from bridge.files.fingerprint import Fingerprint, file_digest
from bridge.files.peek import Look, peek
from bridge.files.swap import System, this_system
from bridge.watch import mounts
from bridge.watch.books import Book, Books, Phase
from bridge.watch.events import Events
from bridge.watch.news import Cleared, Deleted, Due, FolderAway, FolderBack, News, Quiet, Stirring, Torn
from bridge.watch.options import WatchOptions
from bridge.watch.scan import Scan, Sighting, State, is_workbook_name, scan, state_of

_POLLING_SETTLE_S = 1.0
_HELD_PAUSE_S = 0.5
_SHARE_OF_ONE_CORE = 200  # a scan that took a second is repeated after 200 at the earliest
_AFTER_TROUBLE_S = 1.0


@dataclass(frozen=True, slots=True)
class Verdict:
    """What became of a workbook that was handed on. `held` when its results wait until it is closed."""

    real: str
    handled: Fingerprint | None
    held: bool = False
    again_after: float | None = None


class Lookout:
    """Watches one folder from a thread of its own; tells `report` what it finds."""

    def __init__(self, number: int, folder: Path, options: WatchOptions, report: Callable[[News], None]) -> None:
        self._number, self._folder, self._options, self._report = number, folder, options, report
        self._polling = options.polling or mounts.needs_polling(folder)
        settle = max(options.settle, _POLLING_SETTLE_S) if self._polling else options.settle
        self._books = Books(settle, options.absent_grace)
        self._events = Events(self._hint)
        self._system: System = this_system()
        self._copies: set[str] = set()
        self._folders: tuple[str, ...] = ()
        self._away: bool | None = None
        self._next_scan = 0.0
        self._lock, self._wake, self._stopping = threading.Lock(), threading.Event(), False
        self._hints: set[str] = set()
        self._verdicts: deque[Verdict] = deque()
        self._thread = threading.Thread(target=self._run, name=f"lookout {number}", daemon=True)

    @property
    def folder(self) -> Path:
        """The folder, as given."""
        return self._folder

    def start(self) -> None:
        """Begin to watch."""
        self._thread.start()

    def stop(self) -> None:
        """Stop watching; returns when the thread has ended, or hangs on a share that hangs."""
        self._stopping = True
        self._wake.set()
        self._thread.join(5)

    def clear_up(self) -> None:
        """Settle what workers that were ended have left. After `stop`."""
        if not self._thread.is_alive():
            for folder in self._folders:
                recovery.recover(Path(folder), self._system)

    def decided(self, verdict: Verdict) -> None:
        """Tell what became of a workbook."""
        with self._lock:
            self._verdicts.append(verdict)
        self._wake.set()

    def look_soon(self) -> None:
        """Look through the folder as soon as possible."""
        self._next_scan = 0.0
        self._wake.set()

    def _hint(self, path: str) -> None:
        with self._lock:
            self._hints.add(path)
        self._wake.set()

    def _run(self) -> None:
        while not self._stopping:
            try:
                self._turn()
            except OSError:  # a folder that vanished in the middle: the next scan says so
                time.sleep(_AFTER_TROUBLE_S)
        self._events.stop()

    def _turn(self) -> None:
        with self._lock:
            hints, self._hints = self._hints, set()
            verdicts, self._verdicts = self._verdicts, deque()
        for verdict in verdicts:
            self._take(verdict)
        for hint in hints:
            self._look_at(hint)
        if time.monotonic() >= self._next_scan:
            self._scan()
        for book in self._books.due(time.monotonic()):
            self._consider(book)
        self._wake.wait(self._pause())
        self._wake.clear()

    def _pause(self) -> float:
        look = self._books.next_look()
        until = self._next_scan if look is None or self._away else min(look, self._next_scan)
        return max(0.0, until - time.monotonic())

    def _scan(self) -> None:
        start = time.monotonic()
        try:
            found = scan(self._folder)
        except OSError as error:
            self._go_away(error)
        else:
            self._take_in(found)
        now = time.monotonic()
        self._next_scan = now + max(self._options.scan_every, _SHARE_OF_ONE_CORE * (now - start))

    def _go_away(self, error: OSError) -> None:
        self._events.stop()
        if self._away is not True:
            self._away = True
            self._report(FolderAway(str(self._folder), error.strerror or str(error)))

    def _take_in(self, found: Scan) -> None:
        for folder in found.ours:
            for settled in recovery.recover(Path(folder), self._system):
                if settled.mended is not recovery.Mended.KEPT:
                    self._report(Cleared(settled))
        self._folders = tuple(found.folders)
        self._copies = self._copies_beside(found)
        now = time.monotonic()
        for real, sighting in found.books.items():
            if real not in self._copies:
                self._see(real, sighting, now)
        for real in [real for real in self._books.by_real if real not in found.books or real in self._copies]:
            if os.path.dirname(real) not in found.unreadable and self._books.absent(real, now):
                self._report(Deleted(real))
        self._follow(found)
        if self._away is not False:
            self._away = False
            self._report(FolderBack(str(self._folder), self._polling, len(found.books)))

    def _follow(self, found: Scan) -> None:
        if self._polling:
            return
        top = os.path.realpath(self._folder)
        below = top.rstrip(os.sep) + os.sep
        folders = {*found.folders, *(os.path.dirname(real) for real in found.books)}
        outside = sorted(folder for folder in folders if folder != top and not folder.startswith(below))
        if not self._events.follow(top, outside):
            self._polling = True
            self._books.settle = max(self._books.settle, _POLLING_SETTLE_S)

    def _copies_beside(self, found: Scan) -> set[str]:
        """Real paths of the bridge's own copies; those that are no longer needed are taken away."""
        copies = set()
        for folder, ours in found.ours.items():
            for name in ours:
                hidden = names.parse(name)
                if hidden is not None and hidden.kind == names.COPY:
                    copies |= self._copy_beside(Path(folder), name)
        return copies

    def _copy_beside(self, folder: Path, record: str) -> set[str]:
        copy = beside.load(folder / record)
        if copy is None or not copy.untouched(folder):
            return set()
        book = self._books.by_real.get(str(folder / copy.workbook))
        if book is not None and book.phase is Phase.HANDLED:
            beside.remove_copy(folder / copy.workbook, self._system)
        return {str(folder / copy.name)}

    def _look_at(self, hint: str) -> None:
        """A hint: look at the one file, if it is there."""
        if not is_workbook_name(os.path.basename(hint)):
            return
        real = os.path.realpath(hint)
        try:
            state = state_of(os.stat(real))
        except OSError:
            return
        known = self._books.by_real.get(real)
        if real not in self._copies and os.path.isfile(real):
            self._see(real, Sighting(known.path if known else hint, state), time.monotonic())

    def _see(self, real: str, sighting: Sighting, now: float) -> None:
        stirred = self._books.seen(real, sighting, now)
        if stirred is not None and stirred.asks:
            self._report(Stirring())

    def _consider(self, book: Book) -> None:
        """A book has been quiet, or is held: is there something to do?"""
        now = time.monotonic()
        try:
            state = state_of(os.stat(book.real))
            if self._books.seen(book.real, Sighting(book.path, state), now) is not None:
                return  # changed this very moment
            if book.phase is Phase.HELD:
                self._consider_held(book, now)
                return
            look = peek(Path(book.real))
            if look is Look.TORN:
                self._look_again(book, now)
            elif look is Look.QUIET:
                book.phase, book.asks, book.handled = Phase.HANDLED, False, None
                self._report(Quiet(book.real, book.path))
            elif book.handled is not None and file_digest(Path(book.real)) == book.handled.digest:
                book.phase = Phase.HANDLED
            elif beside.is_copy(Path(book.real)):
                self._books.by_real.pop(book.real)
                self._copies.add(book.real)
            else:
                self._books.ask(book)
                self._report(Due(self._number, book.real, book.path))
        except FileNotFoundError:  # the next scan or hint knows more
            book.look_at = now + _AFTER_TROUBLE_S
        except OSError:
            self._look_again(book, now)

    def _look_again(self, book: Book, now: float) -> None:
        if not self._books.torn(book, now):
            self._report(Torn(book.real, book.path))

    def _consider_held(self, book: Book, now: float) -> None:
        book.look_at = now + _HELD_PAUSE_S
        if openness.is_open(Path(book.real), self._system):
            book.closed_since = None
        elif book.closed_since is None:
            book.closed_since = now
        elif now - book.closed_since >= self._options.closed_after:
            self._books.ask(book)
            self._report(Due(self._number, book.real, book.path))

    def _take(self, verdict: Verdict) -> None:
        now, state = time.monotonic(), self._state_now(verdict.real)
        self._books.answered(verdict.real, verdict.handled, state, now)
        if verdict.again_after is not None:
            self._books.again(verdict.real, now, verdict.again_after)
        elif verdict.held:
            self._books.hold(verdict.real, now)

    def _state_now(self, real: str) -> State | None:
        try:
            return state_of(os.stat(real))
        except OSError:
            return None
