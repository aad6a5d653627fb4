"""What the parts of the watcher tell its main loop."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from bridge.files.recovery import Recovered


@dataclass(frozen=True, slots=True)
class Due:
    """A workbook has a save that asks to be dealt with. `lookout` says whose it is."""

    lookout: int
    real: str
    path: str


@dataclass(frozen=True, slots=True)
class Stirring:
    """A workbook that asked for a fit before is being saved: a worker will be wanted in a moment."""


@dataclass(frozen=True, slots=True)
class Quiet:
    """A workbook asks for nothing (any more)."""

    real: str
    path: str


@dataclass(frozen=True, slots=True)
class Torn:
    """A workbook has not been whole for a long time."""

    real: str
    path: str


@dataclass(frozen=True, slots=True)
class Deleted:
    """A workbook is gone."""

    real: str


@dataclass(frozen=True, slots=True)
class FolderAway:
    """A watched folder cannot be looked into: it vanished, or its share dropped out."""

    folder: str
    reason: str


@dataclass(frozen=True, slots=True)
class FolderBack:
    """It is there again, or for the first time. `polling` when no events tell of changes."""

    folder: str
    polling: bool
    workbooks: int


@dataclass(frozen=True, slots=True)
class Cleared:
    """Leftovers of a bridge that was stopped were settled."""

    recovered: Recovered


@dataclass(frozen=True, slots=True)
class Answer:
    """A worker's answer."""

    worker: int
    report: Mapping[str, object] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class WorkerEnded:
    """A worker process is no more."""

    worker: int


@dataclass(frozen=True, slots=True)
class Stop:
    """Enough."""


News = Due | Stirring | Quiet | Torn | Deleted | FolderAway | FolderBack | Cleared | Answer | WorkerEnded | Stop
