"""A watcher running in this process, and patience."""

from __future__ import annotations

import io
import threading
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from bridge.watch.options import WatchOptions
from bridge.watch.screen import Screen
from bridge.watch.watcher import Watcher

PATIENCE_S = 30.0


def eventually(seen: Callable[[], object], what: str = "", patience: float = PATIENCE_S) -> None:
    """Wait until `seen`; fails when it never is."""
    until = time.monotonic() + patience
    while time.monotonic() < until:
        if seen():
            return
        time.sleep(0.01)
    raise AssertionError(f"not within {patience:g} s: {what or seen}")


class Running:
    """A watcher in a thread, what it said, and its log."""

    def __init__(self, folders: list[Path], job: str, log: Path, **options: object) -> None:
        chosen = {"settle": 0.05, "scan_every": 0.3, "absent_grace": 0.5, "closed_after": 0.2, "log_folder": log}
        self.out = io.StringIO()
        self.log = log / "watch.log"
        self.watcher = Watcher(folders, WatchOptions(**{**chosen, **options}), job, Screen(self.out))
        self.thread = threading.Thread(target=self.watcher.run)
        self.thread.start()

    @property
    def said(self) -> str:
        return self.out.getvalue()

    def logged(self, words: str) -> int:
        """How many lines of the log hold these words."""
        return sum(words in line for line in self.log.read_text().splitlines()) if self.log.exists() else 0

    def stop(self) -> None:
        self.watcher.stop()
        self.thread.join(20)
        assert not self.thread.is_alive()


@pytest.fixture
def watching(tmp_path):
    """Start watchers: `watching(folder, ..., job="repeat", **options)`."""
    started: list[Running] = []

    def start(*folders: Path, job: str = "repeat", **options: object) -> Running:
        log = tmp_path / f"log{len(started)}"
        running = Running(list(folders), f"tests.watch.jobs:{job}", log, **options)
        started.append(running)
        eventually(lambda: running.said.count("Watching") + running.said.count("cannot be looked") >= len(folders))
        return running

    yield start
    for running in started:
        running.stop()


@pytest.fixture
def folder(tmp_path):
    made = tmp_path / "quotes"
    made.mkdir()
    return made
