"""Running a piece of work in a child process that is killed, without a chance to clean up, at a chosen step."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path

ROOM = str(Path(__file__).resolve().parents[2] / "bridge" / "files") + os.sep


def dies_at_line(work: Callable[[], object], line: int, before: Callable[[], None] | None = None, at: int = -1) -> bool:
    """Run `work` in a child that ends abruptly at its `line`-th line inside `bridge/files`.

    `before`, if given, is called at line number `at`. False when the work was over before the line came.
    """
    child = os.fork()
    if child == 0:
        os._exit(_run(work, line, before, at))
    _, status = os.waitpid(child, 0)
    code = os.waitstatus_to_exitcode(status)
    assert code in (0, 9), f"the child failed by itself ({code})"
    return code == 9


def _run(work: Callable[[], object], line: int, before: Callable[[], None] | None, at: int) -> int:
    count = 0

    def trace(frame, event, _):
        nonlocal count
        if not frame.f_code.co_filename.startswith(ROOM):
            return None
        if event == "line":
            count += 1
            if count == at and before is not None:
                before()
            if count >= line:
                os._exit(9)
        return trace

    sys.settrace(trace)
    try:
        work()
    except BaseException as error:
        sys.settrace(None)
        print(repr(error), file=sys.stderr)
        return 1
    sys.settrace(None)
    return 0
