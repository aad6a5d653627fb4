"""A worker process: `python -m bridge.watch.worker MODULE:FUNCTION MEMORY_MIB`.

Takes requests and gives answers as lines of JSON on its standard streams, one workbook at a time, and stays warm in
between. Ends when its input ends; on SIGTERM it rolls back what it is in the middle of, and ends.

The function is called as `function(path, while_open, note)` and returns a mapping: `outcome`; `message`, shown to
people; `note`, the part of it that comes from write-back and may go into the log; `fingerprint` of the workbook as it
is now, where known; `seconds`, `stages`. It may raise FileRefused.
"""

from __future__ import annotations

import importlib
import json
import os
import signal
import sys
import time
import traceback
from collections.abc import Callable, Mapping
from contextlib import suppress
from pathlib import Path
from typing import TextIO

from bridge.files import claim
from bridge.files.fingerprint import Fingerprint
from bridge.files.snapshot import PASSING
from bridge.messages import FileRefused, say

Job = Callable[[str, str, str], Mapping[str, object]]
_OVERHEAD = 1.25  # address space a process reserves without using it


def main(arguments: list[str]) -> int:
    """Serve until the input ends."""
    module, _, function = arguments[0].partition(":")
    answers = _private_output()
    _end_when_told()
    _limit_memory(int(arguments[1]) << 20)
    job: Job = getattr(importlib.import_module(module), function)
    for line in sys.stdin:
        answer = take_turn(job, **json.loads(line))
        answers.write(json.dumps(answer, default=str) + "\n")
        answers.flush()
    return 0


def take_turn(job: Job, path: str, while_open: str, note: str) -> Mapping[str, object]:
    """One workbook's turn: its claim, the job, and whatever became of it as an answer."""
    start = time.monotonic()
    try:
        with claim.claimed(Path(os.path.realpath(path))):
            answer = dict(job(path, while_open, note))
        found = answer.get("fingerprint")
        if isinstance(found, Fingerprint):
            answer["fingerprint"] = found.as_dict()
    except claim.Claimed as other:
        answer = {"outcome": "claimed", "message": f"{other.owner.user} on {other.owner.host}" if other.owner else ""}
    except FileRefused as refusal:
        outcome = "not whole" if refusal.problem.key in PASSING else "refused"
        answer = {"outcome": outcome, "message": refusal.problem.text, "key": refusal.problem.key}
    except MemoryError:
        answer = {"outcome": "too large"}
    except Exception as error:
        # Frames only: the text of an error may quote cells, and this goes into a log.
        where = [f"{frame.name} ({Path(frame.filename).name}:{frame.lineno})" for frame in _frames(error)]
        kind = type(error).__name__
        answer = {"outcome": "failed", "message": say("job-broke", kind=kind).text, "kind": kind, "where": where}
    answer.setdefault("seconds", time.monotonic() - start)
    return answer


def _frames(error: Exception) -> traceback.StackSummary:
    return traceback.extract_tb(error.__traceback__)


def _private_output() -> TextIO:
    """The stream for answers; what the job or a library prints goes nowhere."""
    own = os.fdopen(os.dup(1), "w", encoding="utf-8")
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, 1)
    os.close(nowhere)
    return own


def _end_when_told() -> None:
    """SIGTERM unwinds whatever is going on, once; Ctrl+C is the watcher's business."""

    def end(number: int, frame: object) -> None:
        signal.signal(signal.SIGTERM, signal.SIG_IGN)
        raise SystemExit(143)

    signal.signal(signal.SIGTERM, end)
    signal.signal(signal.SIGINT, signal.SIG_IGN)


def _limit_memory(limit: int) -> None:
    """Let a request for far too much memory fail, where the system knows such a limit (setrlimit(2))."""
    if sys.platform == "linux":
        import resource

        with suppress(ValueError, OSError):
            _, hard = resource.getrlimit(resource.RLIMIT_DATA)
            wanted = int(limit * _OVERHEAD)
            resource.setrlimit(resource.RLIMIT_DATA, (wanted if hard < 0 else min(wanted, hard), hard))


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
