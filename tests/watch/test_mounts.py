"""Which file systems are polled: the formats of proc(5) and mount(8), read from samples."""

import sys
from pathlib import Path

import pytest

from bridge.watch import mounts

PROC = """/dev/vda / ext4 rw,relatime 0 0
tmpfs /dev/shm tmpfs rw 0 0
//server/share /mnt/our\\040share cifs rw,vers=3.0 0 0
server:/export /home/nfs nfs4 rw 0 0
drive /home/ann/Cloud fuse.rclone rw 0 0
/dev/sdb1 /media/stick fuseblk rw 0 0
C:\\134 /mnt/c 9p rw 0 0
/dev/vdb /srv/\\303\\244 ext4 rw 0 0
"""


@pytest.mark.parametrize(
    ("path", "remote"),
    [
        ("/home/ann/quotes", False),
        ("/dev/shm/x", False),
        ("/mnt/our share/2026/quotes", True),
        ("/mnt/our shared", False),
        ("/home/nfs", True),
        ("/home/ann/Cloud/a", True),
        ("/media/stick/a", False),
        ("/mnt/c/Users", True),
        ("/srv/ä/b", False),
    ],
)
def test_by_mount_type(path, remote):
    assert mounts.is_remote(mounts.mount_type(path, mounts.parse_proc_mounts(PROC))) is remote


def test_macos_listing():
    text = "/dev/disk1 on / (apfs, local)\n//ann@server/our%20share on /Volumes/our share (smbfs, nodev, nosuid)\n"
    found = mounts.parse_mount_listing(text)
    assert found == {"/": "apfs", "/Volumes/our share": "smbfs"}
    assert mounts.is_remote(mounts.mount_type("/Volumes/our share/a", found))


def test_odd_lines_do_no_harm():
    assert mounts.parse_proc_mounts("\n# x\nnone\n") == {}
    assert mounts.parse_mount_listing("nonsense\n") == {}
    assert mounts.mount_type("/a", {}) == ""


@pytest.mark.skipif(sys.platform != "linux", reason="reads /proc/mounts")
def test_here(tmp_path):
    kinds = mounts.parse_proc_mounts(Path("/proc/mounts").read_text(encoding="latin-1"))
    assert "/" in kinds
    assert mounts.needs_polling(tmp_path) is mounts.is_remote(mounts.mount_type(str(tmp_path.resolve()), kinds))
