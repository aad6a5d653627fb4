"""What may be chosen about watching."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True, slots=True)
class WatchOptions:
    """Choices for `watch`. Times in seconds, memory in MiB.

    `settle` is how long a file must be quiet before its save counts; `scan_every` how often the folders are looked
    through, whatever events say. Worker processes are let go after `idle_release` without work; a fit may take
    `time_limit` and `memory_limit`. A missing file counts as deleted after `absent_grace`, an open workbook as
    closed when the mark of its program has been gone for `closed_after`. A fit that a newer save has overtaken is
    ended when it has run for `let_finish`. `log_folder` None means the user's log folder.
    """

    polling: bool = False
    while_open: str = "auto"
    workers: int = 2
    settle: float = 0.3
    scan_every: float = 3.0
    idle_release: float = 120.0
    time_limit: float = 900.0
    memory_limit: int = 4096
    absent_grace: float = 10.0
    closed_after: float = 1.5
    let_finish: float = 2.0
    log_folder: Path | None = None
