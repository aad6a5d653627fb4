"""The real watcher with real worker processes, and a job that knows no statistics."""

import io
import os
import shutil
import signal
import subprocess
import sys
import time
import zipfile
from contextlib import suppress
from pathlib import Path

import pytest

from bridge.files import claim, journal, names, owner
from bridge.files.fingerprint import digest_of, fingerprint
from tests.stress.zips import saved
from tests.watch import jobs
from tests.watch.conftest import eventually

ROOT = Path(__file__).resolve().parents[2]


def book(path: Path, number: int = 1, **members: str) -> Path:
    path.write_bytes(saved(number))
    if members:
        with zipfile.ZipFile(path, "a") as made:
            for name, text in members.items():
                made.writestr(f"{name}.txt", text)
    return path


def silent(path: Path) -> Path:
    """A workbook that asks for nothing."""
    with zipfile.ZipFile(path, "w") as made:
        made.writestr("xl/workbook.xml", "<workbook><sheets><sheet name='Data'/></sheets></workbook>")
    return path


def strays(folder: Path) -> list[str]:
    return [name for name in os.listdir(folder) if name.startswith(names.PREFIX)]


def test_a_save_is_answered_once_and_our_write_is_not(watching, folder):
    running = watching(folder)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    for number in (2, 3):
        path.write_bytes(saved(number))
        eventually(lambda: jobs.matches(path))
    time.sleep(1.0)
    assert running.logged("fitted") == 3
    assert running.logged("a.xlsx") == 3, "no job for our own writes"
    assert strays(folder) == []


def test_what_is_there_already_is_looked_at(watching, folder):
    paths = [book(folder / f"{number}.xlsx", number) for number in range(12)]
    watching(folder)
    eventually(lambda: all(jobs.matches(path) for path in paths))


def test_a_burst_is_answered_for_the_newest(watching, folder):
    running = watching(folder, settle=0.3)
    path = folder / "a.xlsx"
    for number in range(15):
        path.write_bytes(saved(number))
        time.sleep(0.02)
    eventually(lambda: jobs.matches(path))
    time.sleep(0.5)
    assert running.logged("fitted") == 1


def test_a_workbook_without_a_request_wakes_nobody(watching, folder):
    running = watching(folder)
    for number in range(5):
        silent(folder / f"{number}.xlsx")
    time.sleep(0.5)
    silent(folder / "0.xlsx")
    time.sleep(1.0)
    assert running.watcher._pool.workers == {}
    book(folder / "0.xlsx")
    eventually(lambda: jobs.matches(folder / "0.xlsx"))


@pytest.mark.parametrize("polling", [False, True])
def test_every_way_of_saving(watching, folder, polling):
    from random import Random

    from tests.stress.savers import SAVERS

    watching(folder, polling=polling)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    for number, save in enumerate(SAVERS.values(), 2):
        save(path, saved(number), Random(number))
        eventually(lambda: jobs.matches(path), save.__name__)


def test_without_any_event_the_scan_finds_it(watching, folder, monkeypatch):
    from bridge.watch.events import Events

    monkeypatch.setattr(Events, "follow", lambda *_: True)
    watching(folder)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    path.write_bytes(saved(2))
    eventually(lambda: jobs.matches(path))


def test_without_events_to_be_had_it_polls(watching, folder, monkeypatch):
    from bridge.watch.events import Events

    monkeypatch.setattr(Events, "follow", lambda *_: False)
    running = watching(folder)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    assert "every few seconds" in running.said


def test_same_size_and_time_put_back_is_noticed(watching, folder, monkeypatch):
    from bridge.watch.events import Events

    monkeypatch.setattr(Events, "follow", lambda *_: True)  # so that only the scan can see it
    path = folder / "a.xlsx"
    path.write_bytes(jobs.with_result(saved(1)))
    running = watching(folder)
    eventually(lambda: running.logged(": unchanged"))
    before = path.stat()
    stale = io.BytesIO(saved(2))
    with zipfile.ZipFile(stale, "a") as made:
        made.writestr(zipfile.ZipInfo(jobs.RESULT), jobs.users_digest(saved(1)))
    assert len(stale.getvalue()) == before.st_size
    with path.open("r+b") as file:
        file.write(stale.getvalue())
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))
    assert path.stat().st_mtime_ns == before.st_mtime_ns
    eventually(lambda: jobs.matches(path))


def test_torn_files_are_waited_for(watching, folder):
    running = watching(folder)
    path, data = folder / "a.xlsx", saved(1, padding=50_000)
    path.write_bytes(data[:20_000])
    time.sleep(0.6)
    assert running.logged("a.xlsx") == 0
    path.write_bytes(data)
    eventually(lambda: jobs.matches(path))


def test_links_and_their_folders(watching, folder, tmp_path):
    far = tmp_path / "far"
    far.mkdir()
    path = book(far / "a.xlsx")
    (folder / "link.xlsx").symlink_to(path)
    watching(folder)
    eventually(lambda: jobs.matches(path))
    path.write_bytes(saved(2))
    eventually(lambda: jobs.matches(path))
    assert (folder / "link.xlsx").is_symlink()
    deep = tmp_path / "deep"
    deep.mkdir()
    (folder / "sub").symlink_to(deep)
    other = book(deep / "b.xlsx")
    eventually(lambda: jobs.matches(other))


def test_renamed_and_moved_workbooks_are_not_fitted_again(watching, folder):
    running = watching(folder)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    (folder / "sub").mkdir()
    moved = path.rename(folder / "sub" / "b.xlsx")
    time.sleep(1.2)
    assert running.logged(": fitted") == 1
    moved.write_bytes(saved(2))
    eventually(lambda: jobs.matches(moved))


def test_a_moved_folder(watching, folder):
    watching(folder)
    (folder / "sub").mkdir()
    path = book(folder / "sub" / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    (folder / "sub").rename(folder / "new name")
    path = book(folder / "new name" / "a.xlsx", 2)
    eventually(lambda: jobs.matches(path))


def test_a_folder_that_vanishes_and_returns(watching, folder, tmp_path):
    running = watching(folder)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    folder.rename(tmp_path / "elsewhere")
    eventually(lambda: "cannot be looked into" in running.said)
    (tmp_path / "elsewhere").rename(folder)
    eventually(lambda: running.said.count("Watching") == 2)
    path.write_bytes(saved(2))
    eventually(lambda: jobs.matches(path))
    shutil.rmtree(folder)
    eventually(lambda: running.said.count("cannot be looked into") == 2)
    folder.mkdir()
    path = book(folder / "b.xlsx")
    eventually(lambda: jobs.matches(path))


def test_a_folder_that_is_not_there_yet(watching, folder, tmp_path):
    running = watching(tmp_path / "later", folder)
    assert "cannot be looked into" in running.said
    (tmp_path / "later").mkdir()
    path = book(tmp_path / "later" / "a.xlsx")
    eventually(lambda: jobs.matches(path))


def test_names_in_any_script(watching, folder):
    watching(folder)
    paths = [book(folder / name) for name in ("見積り.xlsx", "смета 2.xlsm", "a'b\"c.xlsx", "Köln & Söhne.xlsx")]
    with suppress(OSError):
        paths.append(book(folder / os.fsdecode(b"b\xff.xlsx")))
    eventually(lambda: all(jobs.matches(path) for path in paths))


def test_two_watchers_write_once(watching, folder, tmp_path, monkeypatch):
    monkeypatch.setenv("SAVEFIT_TEST_WRITES", str(tmp_path / "writes"))
    running = [watching(folder, job="repeat_counting") for _ in range(2)]
    paths = [book(folder / f"{number}.xlsx", number) for number in range(6)]
    eventually(lambda: all(jobs.matches(path) for path in paths))
    time.sleep(2.5)
    writes = (tmp_path / "writes").read_text().splitlines()
    assert sorted(writes) == sorted(set(writes))
    assert len(writes) == 6
    assert sum(one.logged(": fitted") for one in running) == 6
    assert strays(folder) == []


def test_one_workbook_does_not_hold_up_another(watching, folder):
    watching(folder, job="slow")
    book(folder / "long.xlsx", seconds="20")
    eventually(lambda: (folder / "long.begun").exists())
    path = book(folder / "short.xlsx", seconds="0")
    eventually(lambda: jobs.matches(path))
    assert not jobs.matches(folder / "long.xlsx")


def test_a_newer_save_overtakes_a_long_job(watching, folder):
    running = watching(folder, job="slow", let_finish=0.1)
    path = book(folder / "a.xlsx", 1, seconds="60")
    eventually(lambda: (folder / "a.begun").exists())
    time.sleep(0.3)
    book(path, 2, seconds="0")
    eventually(lambda: jobs.matches(path))
    eventually(lambda: running.logged(": fitted") == 1)
    assert running.logged("overtaken") == 1


def test_too_long_is_ended_and_told_at_the_next_save(watching, folder):
    running = watching(folder, job="slow", time_limit=1.0)
    path = book(folder / "a.xlsx", 1, seconds="60")
    eventually(lambda: "was ended" in running.said)
    time.sleep(1.0)
    assert running.logged("worker ended (too long)") == 1, "not tried again by itself"
    book(path, 2, seconds="60")
    eventually(lambda: jobs.matches(path))
    assert "took longer than 1 seconds" in jobs.note_of(path.read_bytes())


@pytest.mark.skipif(sys.platform != "linux", reason="memory limits as Linux has them")
@pytest.mark.parametrize("name", ["slowly", "at once"])
def test_too_much_memory_is_ended_and_told(watching, folder, name):
    running = watching(folder, job="greedy", memory_limit=256)
    path = book(folder / f"{name}.xlsx")
    eventually(lambda: "was ended" in running.said)
    path.write_bytes(saved(2))
    eventually(lambda: jobs.matches(path))
    assert "0.25 GB of memory" in jobs.note_of(path.read_bytes())


@pytest.mark.parametrize("name", ["plainly", "abruptly"])
def test_a_job_that_breaks_ends_nothing_else(watching, folder, name):
    running = watching(folder, job="broken")
    path = book(folder / f"{name}.xlsx")
    eventually(lambda: "ended unexpectedly" in running.said)
    assert "secret" not in running.said
    assert "secret" not in running.log.read_text()
    if name == "abruptly":
        path.write_bytes(saved(2))
        eventually(lambda: jobs.matches(path))
        assert "unexpectedly" in jobs.note_of(path.read_bytes())


@pytest.mark.skipif(sys.platform != "linux", reason="faults of Linux's calls")
@pytest.mark.parametrize(
    ("name", "said"),
    [
        ("ENOSPC", "no space left"),
        ("EACCES", "does not permit"),
        ("EPERM", "does not permit"),
        ("EXDEV", "mounted as a single file"),
        ("EIO", "could not be written"),
    ],
)
def test_faults_are_said_and_the_file_stays_whole(watching, folder, name, said):
    running = watching(folder, job="faulty")
    path, other = book(folder / f"{name}.xlsx"), folder / "other.xlsx"
    eventually(lambda: said in running.said)
    assert path.read_bytes() == saved(1)
    eventually(lambda: strays(folder) == [])
    book(other)
    eventually(lambda: jobs.matches(other))


def test_no_exchange_falls_back(watching, folder):
    watching(folder, job="faulty")
    path = book(folder / "EINVAL.xlsx")
    eventually(lambda: jobs.matches(path))


@pytest.mark.skipif(sys.platform != "linux", reason="leases tell who has it open")
def test_open_in_a_program_that_locks_goes_in_when_closed(watching, folder, tmp_path):
    running = watching(folder)
    path, mark, copy = folder / "a.xlsx", folder / "~$a.xlsx", folder / "a - fit.xlsx"
    mark.write_bytes(b"\3Ann".ljust(165))
    elsewhere = book(tmp_path / "a.xlsx", 5)
    with elsewhere.open("r+b"):
        elsewhere.rename(path)  # so that it is open from its first moment here
        eventually(lambda: jobs.matches(copy))
        assert not jobs.matches(path)
        eventually(lambda: "a - fit.xlsx" in running.said)
        time.sleep(1.0)
        assert not jobs.matches(path)
        assert running.logged(" - fit.xlsx: ") == 0, "the copy itself is not watched"
    mark.unlink()
    eventually(lambda: jobs.matches(path))
    eventually(lambda: sorted(os.listdir(folder)) == ["a.xlsx"])


@pytest.mark.skipif(sys.platform != "linux", reason="leases tell who has it open")
def test_waiting_goes_in_when_closed(watching, folder):
    running = watching(folder, while_open="wait")
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    mark = folder / f".~lock.{path.name}#"
    mark.write_text(",ann,elsewhere,01.12.2026 08:47,file:///p;")
    path.write_bytes(saved(2))
    eventually(lambda: running.logged(": waiting"))
    assert running.logged("go in when it is closed"), "what write-back says is in the log"
    assert "secret" not in running.log.read_text(), "what the job says is not"
    time.sleep(0.8)
    assert not jobs.matches(path)
    mark.unlink()
    eventually(lambda: jobs.matches(path))


def test_leftovers_of_a_dead_bridge_are_settled_at_the_start(watching, folder):
    path = book(folder / "a.xlsx", 1)
    found = fingerprint(path.stat(), digest_of(saved(1)))
    with journal.begun(path, found, digest_of(jobs.with_result(saved(1)))) as entry:
        entry.place(names.NEW).write_bytes(saved(2))
        path.write_bytes(jobs.with_result(saved(1)))
    entry.path.write_text(entry.path.read_text().replace(f'"pid": {os.getpid()}', '"pid": 4194303'))
    running = watching(folder)
    eventually(lambda: path.read_bytes() == jobs.with_result(saved(2)))
    assert "latest save is in place" in running.said
    eventually(lambda: strays(folder) == [])


def test_a_claim_from_elsewhere_is_respected_until_it_is_over(watching, folder):
    path = book(folder / "a.xlsx")
    with claim.claimed(path):
        text = claim.claim_path(path).read_text()
    claim.claim_path(path).write_text(text.replace(owner.me().machine, "another"))
    running = watching(folder)
    eventually(lambda: running.logged(": claimed"))
    assert not jobs.matches(path)
    os.utime(claim.claim_path(path), (1, 1))
    eventually(lambda: jobs.matches(path))
    eventually(lambda: strays(folder) == [])


def test_workers_are_let_go_and_come_back(watching, folder):
    running = watching(folder, idle_release=0.3)
    path = book(folder / "a.xlsx")
    eventually(lambda: jobs.matches(path))
    eventually(lambda: running.watcher._pool.workers == {})
    path.write_bytes(saved(2))
    eventually(lambda: jobs.matches(path))


def test_unknown_wish_is_an_error_before_anything_begins(watching, folder):
    with pytest.raises(ValueError, match="sometimes"):
        watching(folder, while_open="sometimes")


START = """
import sys
from pathlib import Path
from bridge.watch import WatchOptions, watch
sys.exit(watch([Path(sys.argv[1])], WatchOptions(settle=0.05, log_folder=Path(sys.argv[2])), sys.argv[3]))
"""


def process(folder: Path, log: Path, job: str, **options) -> subprocess.Popen:
    command = [sys.executable, "-c", START, str(folder), str(log), f"tests.watch.jobs:{job}"]
    return subprocess.Popen(command, cwd=ROOT, stdout=subprocess.PIPE, text=True, **options)


@pytest.mark.skipif(sys.platform == "win32", reason="signals")
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_signals_roll_back_and_end_cleanly(folder, tmp_path, number):
    path = book(folder / "a.xlsx", 1, seconds="60")
    before = path.read_bytes()
    watcher = process(folder, tmp_path / "log", "slow")
    eventually(lambda: (folder / "a.begun").exists())
    (worker,) = children(watcher.pid)
    watcher.send_signal(number)
    said, _ = watcher.communicate(timeout=20)
    assert watcher.returncode == 0
    assert "Traceback" not in said
    eventually(lambda: not Path(f"/proc/{worker}").exists())
    assert path.read_bytes() == before
    assert strays(folder) == []


def children(pid: int) -> list[int]:
    listed = Path(f"/proc/{pid}/task").iterdir()
    return [int(child) for task in listed for child in (task / "children").read_text().split()]


LIGHT = """
import sys, threading, time
from pathlib import Path
import bridge.watch.watcher as watcher
from bridge.watch import WatchOptions
running = watcher.Watcher([Path(sys.argv[1])], WatchOptions(log_folder=Path(sys.argv[2])), "tests.watch.jobs:repeat")
threading.Timer(4, running.stop).start()
running.run()
heavy = {"numpy", "scipy", "pandas", "lxml", "openpyxl", "python_calamine", "bridge.job"} & set(sys.modules)
peak = next(line for line in open("/proc/self/status") if line.startswith("VmHWM")).split()[1]
print("heavy:", sorted(heavy), "peak kB:", peak)
"""


@pytest.mark.skipif(sys.platform != "linux", reason="reads /proc")
def test_the_watcher_is_light_over_a_thousand_workbooks(folder, tmp_path):
    first = silent(folder / "0.xlsx").read_bytes()
    for number in range(1, 1000):
        (folder / f"{number}.xlsx").write_bytes(first)
    book(folder / "asks.xlsx")
    command = [sys.executable, "-c", LIGHT, str(folder), str(tmp_path / "log")]
    said = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, timeout=60, check=True).stdout
    assert jobs.matches(folder / "asks.xlsx")
    assert "heavy: []" in said
    assert int(said.split()[-1]) < 60_000
