"""The worker processes: started when there is work, kept warm, ended when they take too long or too much."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from enum import StrEnum
from itertools import count
from pathlib import Path

from bridge.watch import memory
from bridge.watch.news import Answer, News, WorkerEnded
from bridge.watch.options import WatchOptions

_GRACE_S = 5.0
_WINDOWS_APART = 0x08000200  # CREATE_NO_WINDOW | CREATE_NEW_PROCESS_GROUP
_MOST_TURNS = 500  # then a fresh process takes over, whatever libraries may have kept


class Why(StrEnum):
    """Why a worker was told to end."""

    TOO_LONG = "too long"
    TOO_LARGE = "too large"
    OVERTAKEN = "overtaken"
    STOPPING = "stopping"


@dataclass(slots=True)
class Worker:
    """One process and the workbook it has in hand."""

    number: int
    process: subprocess.Popen[str]
    real: str | None = None
    since: float = 0.0
    turns: int = 0
    told: Why | None = None
    told_at: float = 0.0

    @property
    def free(self) -> bool:
        """Whether it can take a workbook."""
        return self.real is None and self.told is None


@dataclass(slots=True)
class Pool:
    """Up to `options.workers` processes that run `job`; what they say comes back through `report`."""

    job: str
    options: WatchOptions
    report: Callable[[News], None]
    workers: dict[int, Worker] = field(default_factory=dict)
    _numbers: Iterator[int] = field(default_factory=count)
    _idle_since: float = field(default_factory=time.monotonic)

    def warm(self) -> None:
        """Have at least one process ready."""
        if not any(worker.told is None for worker in self.workers.values()):
            self._start()

    def give(self, real: str, path: str, note: str) -> Worker | None:
        """Hand a workbook to a free worker; None when all are busy."""
        worker = next((worker for worker in self.workers.values() if worker.free), None)
        if worker is None:
            if sum(worker.told is None for worker in self.workers.values()) >= max(1, self.options.workers):
                return None
            worker = self._start()
        request = {"path": path, "while_open": self.options.while_open, "note": note}
        worker.real, worker.since, worker.turns = real, time.monotonic(), worker.turns + 1
        try:
            assert worker.process.stdin is not None
            worker.process.stdin.write(json.dumps(request) + "\n")
            worker.process.stdin.flush()
        except OSError:  # it has just died: its end is reported by itself
            pass
        return worker

    def done(self, number: int) -> str | None:
        """A worker has answered; the real path of its workbook."""
        worker = self.workers.get(number)
        if worker is None:
            return None
        real, worker.real, self._idle_since = worker.real, None, time.monotonic()
        if worker.turns >= _MOST_TURNS:
            self._release(worker)
        return real

    def ended(self, number: int) -> Worker | None:
        """A process is no more; what it had in hand."""
        worker = self.workers.pop(number, None)
        if worker is not None:
            worker.process.wait()
            self._idle_since = time.monotonic()
        return worker

    def having(self, real: str) -> Worker | None:
        """The worker that has a workbook in hand."""
        return next((worker for worker in self.workers.values() if worker.real == real), None)

    def end(self, worker: Worker, why: Why) -> None:
        """Tell a worker to roll back and end."""
        if worker.told is None:
            worker.told, worker.told_at = why, time.monotonic()
            worker.process.terminate()

    def look_after(self) -> None:
        """End those over their limits, put an end to those that do not end, let idle ones go."""
        now = time.monotonic()
        for worker in list(self.workers.values()):
            if worker.told is not None:
                if now - worker.told_at > _GRACE_S:
                    worker.process.kill()
            elif worker.real is not None:
                self._check_limits(worker, now)
            elif now - self._idle_since > self.options.idle_release:
                self._release(worker)

    def _check_limits(self, worker: Worker, now: float) -> None:
        if now - worker.since > self.options.time_limit:
            self.end(worker, Why.TOO_LONG)
        elif memory.resident(worker.process.pid) > self.options.memory_limit << 20:
            self.end(worker, Why.TOO_LARGE)

    @property
    def next_look(self) -> float | None:
        """Seconds until `look_after` should be called again; None when there is no process."""
        if any(worker.told is not None or worker.real is not None for worker in self.workers.values()):
            return min(1.0, self.options.time_limit / 4)
        return max(0.1, self._idle_since + self.options.idle_release - time.monotonic()) if self.workers else None

    def stop(self) -> None:
        """End them all: what is under way is finished if it is just being put in, or rolled back."""
        for worker in self.workers.values():
            self.end(worker, Why.STOPPING)
        for worker in self.workers.values():
            try:
                worker.process.wait(_GRACE_S)
            except subprocess.TimeoutExpired:
                worker.process.kill()
                worker.process.wait()

    def _release(self, worker: Worker) -> None:
        """Let an idle process go: its input ends."""
        worker.told, worker.told_at = Why.STOPPING, time.monotonic()
        if worker.process.stdin is not None:
            worker.process.stdin.close()

    def _start(self) -> Worker:
        number = next(self._numbers)
        # -P and a path of our own: workers are started in people's folders, which may hold a numpy.py.
        # A group of its own: Ctrl+C in the terminal reaches the watcher only.
        command = [sys.executable, "-P", "-m", "bridge.watch.worker", self.job, str(self.options.memory_limit)]
        process = subprocess.Popen(
            command,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            encoding="utf-8",
            env=os.environ | _way_home(),
            start_new_session=sys.platform != "win32",
            creationflags=_WINDOWS_APART if sys.platform == "win32" else 0,
        )
        worker = self.workers[number] = Worker(number, process)
        threading.Thread(target=self._listen, args=(worker,), name=f"worker {number}", daemon=True).start()
        return worker

    def _listen(self, worker: Worker) -> None:
        assert worker.process.stdout is not None
        for line in worker.process.stdout:
            try:
                self.report(Answer(worker.number, json.loads(line)))
            except ValueError:
                break
        self.report(WorkerEnded(worker.number))


def _way_home() -> dict[str, str]:
    """How a worker finds this package when it is not installed where Python looks by itself."""
    home = Path(__file__).resolve().parents[2]
    return {} if home.name in ("site-packages", "dist-packages") else {"PYTHONPATH": str(home)}
