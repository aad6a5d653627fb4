"""Claims: one holder at a time, dead holders lose theirs, none is left behind."""

import os
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from bridge.files import claim, owner

ROOT = Path(__file__).resolve().parents[2]
HOLD = """
import sys, time
from pathlib import Path
from bridge.files import claim
with claim.claimed(Path(sys.argv[1])):
    print("held", flush=True)
    sys.stdin.readline()
"""


@pytest.fixture
def book(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_bytes(b"-")
    return path


@pytest.fixture
def other(book):
    """Another process that holds the claim."""
    process = subprocess.Popen(
        [sys.executable, "-c", HOLD, str(book)], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, cwd=ROOT
    )
    assert process.stdout.readline() == "held\n"
    yield process
    process.kill()
    process.wait()
    process.stdin.close()
    process.stdout.close()


def test_held_by_another(book, other):
    with pytest.raises(claim.Claimed) as caught, claim.claimed(book):
        pass
    assert caught.value.owner.pid == other.pid
    assert caught.value.owner.host == owner.me().host


def test_waits_for_it(book, other):
    threading.Timer(0.3, lambda: other.communicate("\n")).start()
    with claim.claimed(book, wait=10):
        assert claim.claim_path(book).exists()
    assert os.listdir(book.parent) == ["book.xlsx"]


def test_a_dead_owners_claim_is_taken_over_at_once(book, other):
    other.kill()
    other.wait()
    assert claim.claim_path(book).exists()
    with claim.claimed(book):
        pass
    assert os.listdir(book.parent) == ["book.xlsx"]


def test_again_inside_is_fine(book):
    with claim.claimed(book):
        with claim.claimed(book):
            pass
        assert claim.claim_path(book).exists()
    assert os.listdir(book.parent) == ["book.xlsx"]


def from_elsewhere(book, age):
    """A claim of another machine, last renewed `age` seconds ago."""
    with claim.claimed(book):
        text = claim.claim_path(book).read_text()
    path = claim.claim_path(book)
    path.write_text(text.replace(owner.me().machine, "another-machine"))
    then = time.time() - age
    os.utime(path, (then, then))
    return path


def test_another_machines_claim_holds_until_it_is_over(book):
    path = from_elsewhere(book, age=claim.EXPIRY - 10)
    with pytest.raises(claim.Claimed), claim.claimed(book):
        pass
    then = time.time() - claim.EXPIRY - 1
    os.utime(path, (then, then))
    with claim.claimed(book):
        pass
    assert os.listdir(book.parent) == ["book.xlsx"]


@pytest.mark.parametrize("content", [b"", b"\xff\xfe", b"{}", b"[1]"])
def test_unreadable_claims_hold_for_a_moment(book, content):
    path = claim.claim_path(book)
    path.write_bytes(content)
    with pytest.raises(claim.Claimed) as caught, claim.claimed(book):
        pass
    assert caught.value.owner is None
    os.utime(path, (1, 1))
    with claim.claimed(book):
        pass


def test_renewed_while_work_goes_on(book, monkeypatch):
    monkeypatch.setattr(claim, "_BEAT", 0.05)
    with claim.claimed(book):
        path = claim.claim_path(book)
        os.utime(path, (1, 1))
        until = time.monotonic() + 10
        while path.stat().st_mtime == 1 and time.monotonic() < until:
            time.sleep(0.01)
        assert path.stat().st_mtime > 1
    assert os.listdir(book.parent) == ["book.xlsx"]


def test_a_folder_moved_meanwhile_keeps_no_claim(tmp_path):
    folder = tmp_path / "before"
    folder.mkdir()
    with claim.claimed(folder / "book.xlsx"):
        moved = folder.rename(tmp_path / "after")
        assert len(os.listdir(moved)) == 1
    assert os.listdir(moved) == []


def test_an_owner_who_no_longer_renews_has_lost_it(book, other):
    os.utime(claim.claim_path(book), (1, 1))
    with claim.claimed(book):
        pass


def test_a_claim_taken_over_from_us_is_not_removed(book):
    with claim.claimed(book):
        path = claim.claim_path(book)
        path.write_text(path.read_text().replace(owner.me().machine, "another-machine"))
    assert path.exists()


def test_where_nothing_can_be_written_there_is_nothing_to_claim(book, monkeypatch):
    def fail(*_):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, "open", fail)
    with claim.claimed(book):
        pass


def test_only_one_of_many_at_a_time(book):
    """Eight processes take turns; a file tells whether two were ever inside together."""
    turn = """
import sys, time, os
from pathlib import Path
from bridge.files import claim
book = Path(sys.argv[1])
for _ in range(10):
    with claim.claimed(book, wait=60):
        os.close(os.open(book.with_name("inside"), os.O_CREAT | os.O_EXCL))
        time.sleep(0.002)
        os.unlink(book.with_name("inside"))
"""
    processes = [subprocess.Popen([sys.executable, "-c", turn, str(book)], cwd=ROOT) for _ in range(8)]
    assert [process.wait(120) for process in processes] == [0] * 8
    assert os.listdir(book.parent) == ["book.xlsx"]


def test_alive():
    mine = owner.me()
    assert owner.is_me(mine)
    assert owner.alive(mine) is True
    ended = subprocess.Popen([sys.executable, "-c", ""])
    ended.wait()
    fields = {name: getattr(mine, name) for name in mine.__slots__}
    assert owner.alive(owner.Owner(**fields | {"pid": ended.pid})) is False
    assert owner.alive(owner.Owner(**fields | {"started": mine.started + 1})) is (not mine.started)
    assert owner.alive(owner.Owner(**fields | {"machine": "elsewhere"})) is None
