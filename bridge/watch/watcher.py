"""The watcher's main loop: what the lookouts find due goes to the workers, what the workers answer goes back.

    lookout (one per folder) --Due--> queue --> worker process --Answer--> verdict --> lookout

The newest save wins: a job reads the workbook when it begins, and one that a newer save has overtaken is ended.
"""

from __future__ import annotations

import queue
import signal
import sys
import threading
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

from bridge.files import journal, names
from bridge.files.fingerprint import Fingerprint
from bridge.files.writeback import WhileOpen
from bridge.messages import say
from bridge.watch import news
from bridge.watch.logs import open_log
from bridge.watch.lookout import Lookout, Verdict
from bridge.watch.options import WatchOptions
from bridge.watch.pool import Pool, Why, Worker
from bridge.watch.screen import Line, Screen

_CLAIMED_PAUSE_S, _CHANGED_PAUSE_S, _TORN_PAUSE_S = 1.0, 0.5, 1.0
_REDRAW_S = 0.2
# Windows hears Ctrl+C only between two waits.
_LONGEST_PAUSE_S = 1.0 if sys.platform == "win32" else None
_FITTED = ("fitted", "laid out", "beside")
_HELD = ("waiting", "beside")
_PASSING = {"claimed": _CLAIMED_PAUSE_S, "changed": _CHANGED_PAUSE_S, "not whole": _TORN_PAUSE_S}
_SHOWN = {"no request": "no request", "claimed": "elsewhere", "not whole": "being saved", "changed": "being saved"}


@dataclass(slots=True)
class Entry:
    """One workbook that asked for a fit. `note` is to be told to its next job; `overtaken` by a newer save."""

    lookout: int
    path: str
    state: str = "waiting its turn"
    last_fit: datetime | None = None
    message: str = ""
    told: float = 0.0
    note: str = ""
    overtaken: bool = False


class Watcher:
    """Watches folders until it is told to stop."""

    def __init__(self, folders: Sequence[Path], options: WatchOptions, job: str, screen: Screen | None = None) -> None:
        WhileOpen(options.while_open)  # ValueError before anything begins
        self._options = options
        self._inbox: queue.SimpleQueue[news.News] = queue.SimpleQueue()
        self._screen = screen or Screen()
        self._log = open_log(options.log_folder)
        self._pool = Pool(job, options, self._inbox.put)
        self._lookouts = [Lookout(at, Path(folder), options, self._inbox.put) for at, folder in enumerate(folders)]
        self._entries: dict[str, Entry] = {}
        self._queue: dict[str, None] = {}  # an ordered set of real paths
        self._drawn_at, self._changed = 0.0, True
        self._stopping = False

    def run(self) -> int:
        """Watch until `stop`, Ctrl+C or SIGTERM; returns the exit code."""
        self._heed_signals()
        self._log.info("watching begins: %s", ", ".join(str(lookout.folder) for lookout in self._lookouts))
        for lookout in self._lookouts:
            lookout.start()
        try:
            while not self._stopping:
                self._turn()
        finally:
            self._close()
        return 0

    def stop(self) -> None:
        """Stop soon; may be called from anywhere."""
        self._inbox.put(news.Stop())

    def _heed_signals(self) -> None:
        if threading.current_thread() is threading.main_thread():
            for number in (signal.SIGINT, signal.SIGTERM):
                signal.signal(number, lambda _number, _frame: self.stop())

    def _close(self) -> None:
        """Finish or roll back what is under way."""
        for lookout in self._lookouts:
            lookout.stop()
        self._pool.stop()
        for lookout in self._lookouts:
            lookout.clear_up()
        self._draw()
        self._screen.close()
        self._log.info("watching ends")

    def _turn(self) -> None:
        try:
            self._hear(self._inbox.get(timeout=self._pause()))
            while True:
                self._hear(self._inbox.get_nowait())
        except queue.Empty:
            pass
        self._pool.look_after()
        self._hand_out()
        if time.monotonic() - self._drawn_at >= _REDRAW_S and self._changed:
            self._draw()

    def _pause(self) -> float | None:
        pauses = [self._pool.next_look, _REDRAW_S if self._changed and self._screen.live else None, _LONGEST_PAUSE_S]
        return min((pause for pause in pauses if pause is not None), default=None)

    def _hear(self, told: news.News) -> None:
        match told:
            case news.Due():
                self._due(told)
            case news.Answer():
                self._answered(told)
            case news.WorkerEnded():
                self._worker_ended(told.worker)
            case news.Stirring():
                self._pool.warm()
            case news.Quiet():
                self._forget(told.real)
            case news.Deleted():
                self._forget(told.real)
            case news.Torn():
                self._torn(told)
            case news.FolderAway() | news.FolderBack() | news.Cleared():
                self._tell(told)
            case news.Stop():
                self._stopping = True

    def _due(self, due: news.Due) -> None:
        entry = self._entries.setdefault(due.real, Entry(due.lookout, due.path))
        entry.lookout, entry.path = due.lookout, due.path
        worker = self._pool.having(due.real)
        if worker is None:
            self._queue[due.real] = None
            self._set(entry, "waiting its turn")
        elif not entry.overtaken:
            entry.overtaken = True
            self._maybe_end(due.real, worker)

    def _maybe_end(self, real: str, worker: Worker) -> None:
        """A newer save than the one in hand: end long work on the old one, unless it is just being put in."""
        if time.monotonic() - worker.since > self._options.let_finish and not _being_put_in(Path(real)):
            self._pool.end(worker, Why.OVERTAKEN)

    def _hand_out(self) -> None:
        for real in list(self._queue):
            entry = self._entries[real]
            if self._pool.give(real, entry.path, entry.note) is None:
                return
            del self._queue[real]
            entry.overtaken = False
            self._set(entry, "fitting")

    def _answered(self, answer: news.Answer) -> None:
        real = self._pool.done(answer.worker)
        entry = self._entries.get(real) if real is not None else None
        if real is None or entry is None:
            return
        report = answer.report
        outcome, message = str(report.get("outcome", "")), str(report.get("message") or "")
        entry.note = ""
        if outcome == "too large":
            entry.note = message = self._too_large()
        self._log_answer(entry, outcome, report)
        if outcome in _FITTED:
            entry.last_fit = datetime.now()
        self._set(entry, _SHOWN.get(outcome, outcome), message)
        found = _fingerprint(report.get("fingerprint"))
        if entry.overtaken and found is None and outcome not in _PASSING:
            self._queue[real] = None
        else:
            self._decide(entry, Verdict(real, found, outcome in _HELD, _PASSING.get(outcome)))
        if outcome not in _PASSING and outcome != "unchanged":
            self._screen.ended(_line(entry))
        if outcome == "no request":
            self._forget(real)

    def _worker_ended(self, number: int) -> None:
        worker = self._pool.ended(number)
        if worker is None or worker.real is None:
            return
        entry = self._entries.get(worker.real)
        if entry is None:
            return
        self._lookouts[entry.lookout].look_soon()  # clears what it left
        if worker.told is Why.TOO_LONG:
            entry.note = say("job-too-long", limit=_minutes(self._options.time_limit)).text
        elif worker.told is Why.TOO_LARGE:
            entry.note = self._too_large()
        elif worker.told is None:
            entry.note = say("job-broke", kind=f"process ended with {worker.process.returncode}").text
        self._log.warning("%s: worker ended (%s)", entry.path, worker.told or worker.process.returncode)
        if worker.told is Why.OVERTAKEN or (entry.overtaken and worker.told is not Why.STOPPING):
            self._queue[worker.real] = None
            self._set(entry, "waiting its turn")
        elif worker.told is not Why.STOPPING:
            self._set(entry, "ended", entry.note)
            self._screen.ended(_line(entry))
            self._decide(entry, Verdict(worker.real, None))

    def _decide(self, entry: Entry, verdict: Verdict) -> None:
        self._lookouts[entry.lookout].decided(verdict)

    def _too_large(self) -> str:
        return say("job-too-large", limit=f"{self._options.memory_limit / 1024:.3g} GB").text

    def _torn(self, torn: news.Torn) -> None:
        entry = self._entries.get(torn.real)
        text = say("file-not-whole", name=Path(torn.path).name, detail="for a minute now").text
        self._log.warning("%s: not whole", torn.path)
        if entry is not None:
            self._set(entry, "refused", text)
            self._screen.ended(_line(entry))
        else:
            self._screen.say(text)

    def _tell(self, told: news.FolderAway | news.FolderBack | news.Cleared) -> None:
        if isinstance(told, news.FolderAway):
            text = say("folder-away", folder=told.folder, reason=told.reason).text
        elif isinstance(told, news.FolderBack):
            key = "folder-polled" if told.polling else "folder-watched"
            text = say(key, folder=told.folder, count=told.workbooks).text
        else:
            text = say(f"leftover-{told.recovered.mended.replace(' ', '-')}", path=told.recovered.workbook).text
        self._log.info("%s", text)
        self._screen.say(text)
        self._changed = True

    def _forget(self, real: str) -> None:
        self._queue.pop(real, None)
        if self._pool.having(real) is None and self._entries.pop(real, None) is not None:
            self._changed = True

    def _set(self, entry: Entry, state: str, message: str = "") -> None:
        entry.state, entry.message, entry.told = state, message, time.monotonic()
        self._changed = True

    def _log_answer(self, entry: Entry, outcome: str, report: Mapping[str, object]) -> None:
        """Outcome and times. The message stays out of it: it may quote cells."""
        seconds = report.get("seconds")
        took = f" in {seconds:.2f} s" if isinstance(seconds, float) else ""
        where = f" {report.get('kind')} at {report.get('where')}" if outcome == "failed" else ""
        said = "".join(f" ({report[name]})" for name in ("key", "note") if report.get(name))
        self._log.info("%s: %s%s%s%s", entry.path, outcome, took, where, said)

    def _draw(self) -> None:
        busy = sum(entry.state == "fitting" for entry in self._entries.values())
        foot = f"watching; {len(self._entries)} workbooks with a request, {busy} being fitted. Ctrl+C stops."
        self._screen.draw([_line(entry) for entry in self._entries.values()], foot)
        self._drawn_at, self._changed = time.monotonic(), False


def _line(entry: Entry) -> Line:
    return Line(entry.path, entry.state, entry.last_fit, entry.message, entry.told)


def _fingerprint(found: object) -> Fingerprint | None:
    try:
        return Fingerprint(**found) if isinstance(found, dict) else None
    except TypeError:
        return None


def _minutes(seconds: float) -> str:
    return f"{seconds / 60:.3g} minutes" if seconds >= 60 else f"{seconds:.3g} seconds"


def _being_put_in(workbook: Path) -> bool:
    """Whether a swap of this workbook is under way."""
    for path in workbook.parent.glob(f"{names.PREFIX}*.{names.JOURNAL}"):
        try:
            entry = journal.load(path)
        except OSError:
            continue
        if entry is not None and entry.workbook == workbook.name:
            return True
    return False
