"""Whether a folder lies on a file system whose changes by other machines no event tells."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

# Types as they stand in /proc/mounts (proc(5)) and in macOS's mount(8).
_REMOTE = {
    "nfs", "nfs4", "cifs", "smb3", "smbfs", "smb", "9p", "virtiofs", "afs", "afpfs", "webdav", "davfs", "ceph",
    "glusterfs", "lustre", "beegfs", "gfs", "gfs2", "ocfs2", "ncpfs", "coda", "vboxsf", "prl_fs", "drvfs", "acfs",
}  # fmt: skip
# FUSE may be anything, a cloud drive as well; these are local disks.
_LOCAL_FUSE = {"fuseblk", "fuse.ntfs-3g", "fuse.exfat", "fuse.ext4"}
_DRIVE_REMOTE = 4


def needs_polling(folder: Path) -> bool:
    """True for shares, cloud drives and folders of a host machine."""
    real = os.path.realpath(folder)
    if sys.platform == "win32":
        return _remote_drive(real)
    return is_remote(mount_type(real, _mounts()))


def is_remote(kind: str) -> bool:
    """Whether a file system type is one that other machines change unseen."""
    return kind in _REMOTE or (kind.startswith("fuse") and kind not in _LOCAL_FUSE)


def mount_type(path: str, mounts: dict[str, str]) -> str:
    """The type of the file system that `path` lies on, from mount point -> type; empty when not known."""
    while True:
        if path in mounts:
            return mounts[path]
        above = os.path.dirname(path)
        if above == path:
            return ""
        path = above


def parse_proc_mounts(text: str) -> dict[str, str]:
    """Mount point -> type; blanks in names stand as `\\040` there. A later mount hides an earlier one."""
    found = {}
    for line in text.splitlines():
        fields = line.split(" ")
        if len(fields) >= 3:
            point = re.sub(r"\\([0-7]{3})", lambda code: chr(int(code[1], 8)), fields[1])
            found[point.encode("latin-1", "replace").decode("utf-8", "replace")] = fields[2]
    return found


def parse_mount_listing(text: str) -> dict[str, str]:
    """Mount point -> type from macOS's `mount`: `//host/share on /Volumes/share (smbfs, nodev, ...)`."""
    lines = (re.match(r".*? on (.*) \(([^,)]+)", line) for line in text.splitlines())
    return {match[1]: match[2] for match in lines if match}


def _mounts() -> dict[str, str]:
    try:
        if sys.platform == "linux":
            return parse_proc_mounts(Path("/proc/mounts").read_text(encoding="latin-1"))
        said = subprocess.run(["/sbin/mount"], capture_output=True, text=True, timeout=10, check=False)
    except (OSError, subprocess.TimeoutExpired):
        return {}
    return parse_mount_listing(said.stdout)


def _remote_drive(real: str) -> bool:
    """A network path, or a drive letter that stands for one (GetDriveTypeW)."""
    import ctypes

    if real.startswith("\\\\"):
        return True
    drive = os.path.splitdrive(real)[0] + "\\"
    return bool(ctypes.windll.kernel32.GetDriveTypeW(drive) == _DRIVE_REMOTE)  # type: ignore[attr-defined,unused-ignore]
