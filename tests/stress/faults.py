"""Each fault once, against the real watcher: `python -m tests.stress.faults`.

Prints per fault whether it was reported, whether the watcher lived on, and whether the workbook stayed whole. A full
disk is a real one (a small tmpfs) where mounting is allowed, injected otherwise.
"""

from __future__ import annotations

import argparse
import errno
import os
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from bridge.files import names
from tests.stress.zips import saved
from tests.watch import jobs

PATIENCE_S = 40.0
START = """
import sys
from pathlib import Path
from bridge.watch import WatchOptions, watch
watch([Path(sys.argv[1])], WatchOptions(log_folder=Path(sys.argv[2])), "tests.watch.jobs:" + sys.argv[3])
"""


@dataclass
class Watched:
    """A watcher process and its folder."""

    folder: Path
    out: Path
    process: subprocess.Popen[bytes]

    def said(self, words: str) -> bool:
        return wait(lambda: words in self.out.read_text(errors="replace"))

    def lives(self) -> bool:
        """Whether it still does its work."""
        path = self.folder / "sign of life.xlsx"
        path.write_bytes(saved(time.time_ns()))
        return self.process.poll() is None and wait(lambda: jobs.matches(path))


def wait(seen: Callable[[], bool], patience: float = PATIENCE_S) -> bool:
    until = time.monotonic() + patience
    while time.monotonic() < until:
        if seen():
            return True
        time.sleep(0.02)
    return False


@contextmanager
def watched(job: str = "faulty", folder: Path | None = None) -> Iterator[Watched]:
    with tempfile.TemporaryDirectory(prefix="faults-") as home:
        place = folder or Path(home) / "quotes"
        place.mkdir(exist_ok=True)
        out = Path(home) / "out"
        with out.open("wb") as stream:
            command = [sys.executable, "-c", START, str(place), home, job]
            process = subprocess.Popen(command, stdout=stream, stderr=stream)
            try:
                watcher = Watched(place, out, process)
                assert watcher.said("Watching")
                yield watcher
            finally:
                process.send_signal(signal.SIGCONT)
                process.terminate()
                process.wait(20)


def whole(path: Path) -> bool:
    return path.read_bytes() == saved(1)


def injected(name: str, words: str) -> tuple[bool, bool, bool]:
    """A system call that fails in the worker with this error."""
    with watched() as watcher:
        path = watcher.folder / f"{name}.xlsx"
        path.write_bytes(saved(1))
        reported = watcher.said(words)
        return reported, watcher.lives(), whole(path) and wait(lambda: not strays(watcher.folder))


def no_exchange() -> tuple[bool, bool, bool]:
    """EINVAL on the exchange, as shares answer: not a fault for the user, the fall-back does it."""
    with watched() as watcher:
        path = watcher.folder / "EINVAL.xlsx"
        path.write_bytes(saved(1))
        done = wait(lambda: jobs.matches(path))
        return done, watcher.lives(), wait(lambda: not strays(watcher.folder))


def overflow() -> tuple[bool, bool, bool]:
    """More events than the kernel keeps, and the save's own lost among them."""
    most = int(Path("/proc/sys/fs/inotify/max_queued_events").read_text())
    with watched("repeat") as watcher:
        path = watcher.folder / "book.xlsx"
        path.write_bytes(saved(1))
        assert wait(lambda: jobs.matches(path))
        watcher.process.send_signal(signal.SIGSTOP)
        for number in range(most):
            other = watcher.folder / f"x{number}.tmp"
            other.touch()
            other.unlink()
        path.write_bytes(saved(2))
        watcher.process.send_signal(signal.SIGCONT)
        found = wait(lambda: jobs.matches(path))
        return found, watcher.lives(), jobs.matches(path)


def vanished() -> tuple[bool, bool, bool]:
    """The folder goes away and comes back."""
    with watched("repeat") as watcher:
        path = watcher.folder / "book.xlsx"
        path.write_bytes(saved(1))
        assert wait(lambda: jobs.matches(path))
        away = watcher.folder.rename(watcher.folder.with_name("away"))
        reported = watcher.said("cannot be looked into")
        time.sleep(4)
        away.rename(watcher.folder)
        time.sleep(0.1)
        path.write_bytes(saved(2))
        return reported, watcher.lives(), wait(lambda: jobs.matches(path))


def full_disk() -> tuple[bool, bool, bool]:
    """A real full disk, if we may mount one."""
    folder = Path(tempfile.mkdtemp(prefix="full-"))
    mounted = subprocess.run(["mount", "-t", "tmpfs", "-o", "size=1m", "none", str(folder)], capture_output=True)
    if mounted.returncode:
        shutil.rmtree(folder)
        return injected("ENOSPC", "no space left")
    try:
        with watched("repeat", folder) as watcher:
            path = folder / "book.xlsx"
            large = saved(1, padding=600_000)
            path.write_bytes(large)
            reported = watcher.said("no space left")
            return reported, watcher.lives(), path.read_bytes() == large and wait(lambda: not strays(folder))
    finally:
        subprocess.run(["umount", "-l", str(folder)], check=False)
        folder.rmdir()


def strays(folder: Path) -> list[str]:
    return [name for name in os.listdir(folder) if name.startswith(names.PREFIX)]


FAULTS: dict[str, Callable[[], tuple[bool, bool, bool]]] = {
    "queue overflow": overflow,
    "vanished folder": vanished,
    "ENOSPC (disk full)": full_disk,
    "EACCES": lambda: injected(errno.errorcode[errno.EACCES], "does not permit"),
    "EPERM": lambda: injected(errno.errorcode[errno.EPERM], "does not permit"),
    "EXDEV": lambda: injected(errno.errorcode[errno.EXDEV], "mounted as a single file"),
    "EINVAL on exchange": no_exchange,
    "EIO": lambda: injected(errno.errorcode[errno.EIO], "could not be written"),
}


def main() -> int:
    """Run and print; 1 when anything was not as it should be."""
    argparse.ArgumentParser(description=__doc__).parse_args()
    bad = 0
    for name, fault in FAULTS.items():
        reported, lives, sound = fault()
        bad += not (reported and lives and sound)
        shown = (
            "found by the scan"
            if name == "queue overflow"
            else "done all the same"
            if "exchange" in name
            else "reported"
        )
        print(f"{name:20} {shown}: {reported}   watcher alive: {lives}   workbook whole: {sound}", flush=True)
    return int(bad > 0)


if __name__ == "__main__":
    sys.exit(main())
