"""How much memory another process has in use."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path


def resident(pid: int) -> int:
    """Bytes of a process's memory that are in use (its resident set); 0 when that cannot be told."""
    try:
        if sys.platform == "linux":
            pages = Path(f"/proc/{pid}/statm").read_text(encoding="ascii").split()[1]
            return int(pages) * os.sysconf("SC_PAGE_SIZE")
        if sys.platform == "win32":
            return _resident_windows(pid)
        said = subprocess.run(
            ["ps", "-o", "rss=", "-p", str(pid)], capture_output=True, text=True, timeout=5, check=False
        )
        return int(said.stdout) << 10
    except (OSError, ValueError, IndexError, subprocess.TimeoutExpired):
        return 0


def _resident_windows(pid: int) -> int:
    """WorkingSetSize of GetProcessMemoryInfo."""
    import ctypes

    class Counters(ctypes.Structure):
        _fields_ = (
            ("cb", ctypes.c_ulong),
            ("PageFaultCount", ctypes.c_ulong),
            ("PeakWorkingSetSize", ctypes.c_size_t),
            ("WorkingSetSize", ctypes.c_size_t),
            ("others", ctypes.c_size_t * 6),
        )

    kernel = ctypes.windll.kernel32  # type: ignore[attr-defined,unused-ignore]
    query_limited = 0x1000
    kernel.OpenProcess.restype = ctypes.c_void_p
    handle = ctypes.c_void_p(kernel.OpenProcess(query_limited, False, pid))
    if not handle:
        return 0
    counters = Counters(cb=ctypes.sizeof(Counters))
    known = kernel.K32GetProcessMemoryInfo(handle, ctypes.byref(counters), counters.cb)
    kernel.CloseHandle(handle)
    return int(counters.WorkingSetSize) if known else 0
