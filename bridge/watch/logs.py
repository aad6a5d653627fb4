"""The log: what happened to which workbook and when, never what is in its cells. Rotates."""

from __future__ import annotations

import logging
import logging.handlers
from pathlib import Path

import platformdirs

_BYTES, _FILES = 1_000_000, 5
FILE_NAME = "watch.log"


def open_log(folder: Path | None) -> logging.Logger:
    """The watcher's log in `folder`, or in the user's log folder. Without a place to write, it keeps nothing."""
    log = logging.getLogger("bridge.watch")
    log.setLevel(logging.INFO)
    log.propagate = False
    for old in list(log.handlers):
        log.removeHandler(old)
        old.close()
    handler: logging.Handler
    try:
        place = folder or Path(platformdirs.user_log_dir("savefit", appauthor=False))
        place.mkdir(parents=True, exist_ok=True)
        handler = logging.handlers.RotatingFileHandler(
            place / FILE_NAME, maxBytes=_BYTES, backupCount=_FILES, encoding="utf-8", errors="backslashreplace"
        )
        handler.setFormatter(logging.Formatter("%(asctime)s %(process)d %(levelname)s %(message)s"))
    except OSError:
        handler = logging.NullHandler()
    log.addHandler(handler)
    return log
