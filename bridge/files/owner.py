"""Which process, on which machine, holds a claim or a journal, and whether it is still alive."""

from __future__ import annotations

import getpass
import os
import socket
import sys
from dataclasses import dataclass
from functools import cache
from pathlib import Path


@dataclass(frozen=True, slots=True)
class Owner:
    """A process. `machine` tells machines, boots and process spaces apart; `started` tells reused process numbers."""

    user: str
    host: str
    machine: str
    pid: int
    started: int


def me() -> Owner:
    """This process."""
    return Owner(_user(), socket.gethostname(), _machine(), os.getpid(), _started(os.getpid()))


def alive(owner: Owner) -> bool | None:
    """Whether the process still runs; None when it is on another machine, where we cannot look."""
    if owner.machine != _machine():
        return None
    return _runs(owner.pid) and _started(owner.pid) == owner.started


def is_me(owner: Owner) -> bool:
    """Whether it is this very process."""
    return owner.machine == _machine() and owner.pid == os.getpid() and owner.started == _started(owner.pid)


@cache
def _user() -> str:
    try:
        return getpass.getuser()
    except (OSError, KeyError):  # no name for this user number (containers)
        return f"user {os.getuid()}" if hasattr(os, "getuid") else "user"


@cache
def _machine() -> str:
    # The boot and the process space count as well: a process number means nothing outside of them.
    try:
        boot = Path("/proc/sys/kernel/random/boot_id").read_text(encoding="ascii").strip()
        return f"{boot}/{os.readlink('/proc/self/ns/pid')}"
    except OSError:
        return socket.gethostname()


def _started(pid: int) -> int:
    """When a process began, in the system's own unit; 0 where it cannot be told (proc(5), field 22)."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text(encoding="utf-8", errors="replace").rpartition(")")[2].split()
        return int(fields[19])
    except (OSError, IndexError, ValueError):
        return 0


def _runs(pid: int) -> bool:
    if sys.platform == "win32":
        return _runs_windows(pid)
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except OSError:
        return True
    return True


def _runs_windows(pid: int) -> bool:
    """Whether the process exists and has not ended (OpenProcess, GetExitCodeProcess; 259 is STILL_ACTIVE)."""
    import ctypes

    kernel = ctypes.windll.kernel32  # type: ignore[attr-defined,unused-ignore]
    query_limited, still_active = 0x1000, 259
    handle = kernel.OpenProcess(query_limited, False, pid)
    if not handle:
        return False
    code = ctypes.c_ulong()
    known = kernel.GetExitCodeProcess(handle, ctypes.byref(code))
    kernel.CloseHandle(handle)
    return bool(known) and code.value == still_active
