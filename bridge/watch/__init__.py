"""Folders, events, scans, the queue and the worker processes. No workbooks, no statistics."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from bridge.watch.options import WatchOptions

__all__ = ["WatchOptions", "watch"]


def watch(folders: Sequence[Path], options: WatchOptions | None = None, job: str = "bridge.job:fit_file") -> int:
    """Watch folders, and everything below them, until Ctrl+C or SIGTERM; returns the exit code.

    `job` names the function that worker processes call for a workbook, as `MODULE:FUNCTION`; see `watch.worker`.
    Raises ValueError for an unknown `options.while_open`.
    """
    from bridge.watch.watcher import Watcher  # workers import this package, too, and need none of it

    return Watcher(folders, options or WatchOptions(), job).run()
