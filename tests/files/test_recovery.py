"""After a kill at any step: the newest save is there, the file is whole, nothing is left behind."""

import errno
import os
import random
import sys
from itertools import count

import pytest

from bridge.files import claim, journal, names, owner, recovery, swap_linux
from bridge.files.fingerprint import digest_of, fingerprint
from bridge.files.recovery import Mended, recover
from bridge.files.snapshot import read
from bridge.files.writeback import write_back
from tests.files.dying import dies_at_line
from tests.stress.zips import look, saved, with_result

# Every line takes forty seconds: SAVEFIT_EVERY_LINE=1.
STRIDE = 1 if os.environ.get("SAVEFIT_EVERY_LINE") else 4

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="children by fork")


@pytest.fixture
def book(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_bytes(saved(1))
    return path


@pytest.fixture(autouse=True)
def no_waiting(monkeypatch):
    monkeypatch.setattr(recovery, "_HALF_WRITTEN_AGE_S", -1.0)
    monkeypatch.setattr(recovery, "_NAMELESS_AGE_S", -1.0)
    monkeypatch.setattr(claim, "_UNREADABLE_EXPIRY", -1.0)


def strays(folder):
    return [name for name in os.listdir(folder) if name.startswith(names.PREFIX)]


def write(path):
    seen = read(path)
    write_back(seen, with_result(seen.data))


def save_by_rename(path, number):
    aside = path.with_name("lu1.tmp")
    aside.write_bytes(saved(number))
    os.replace(aside, path)


@pytest.mark.parametrize("exchange", [True, False], ids=["exchange", "second name and rename"])
def test_killed_at_every_line(book, tmp_path, monkeypatch, exchange):
    if not exchange:

        def fail(*_):
            raise OSError(errno.EINVAL, "Invalid argument")

        monkeypatch.setattr(swap_linux, "exchange", fail)
    killed = put_in = 0
    for line in count(1, STRIDE):
        book.write_bytes(saved(line))
        if not dies_at_line(lambda: write(book), line):
            break
        killed += 1
        recover(tmp_path)
        assert look(book) in ((line, None), (line, line)), f"killed at line {line}"
        assert strays(tmp_path) == [], f"killed at line {line}"
        put_in += look(book) == (line, line)
    assert killed > 200 / STRIDE
    assert 0 < put_in < killed


def test_killed_at_every_line_after_a_save_came_in(book, tmp_path):
    """The save is renamed in at an earlier line; the kill may hit before, between and after swap and check."""
    chance = random.Random(4)
    newest_came_back = 0
    for line in count(2, STRIDE):
        book.write_bytes(saved(1))
        if not dies_at_line(lambda: write(book), line, lambda: save_by_rename(book, 2), at=chance.randint(1, line)):
            break
        settled = recover(tmp_path)
        newest_came_back += any(one.mended is Mended.PUT_BACK for one in settled)
        assert look(book) in ((2, None), (2, 2)), f"killed at line {line}"
        assert strays(tmp_path) == [], f"killed at line {line}"
    assert line > 200
    assert newest_came_back, "no kill fell between swap and check"


def test_recovery_itself_may_be_killed(book, tmp_path):
    for line in count(1, STRIDE):
        for path in tmp_path.iterdir():
            path.unlink()
        book.write_bytes(saved(1))
        entry = dead_swap(book, standing=with_result(saved(1)), left=saved(2))
        assert entry.leftovers()
        if not dies_at_line(lambda: recover(tmp_path), line):
            break
        recover(tmp_path)
        assert look(book) == (2, None), f"killed at line {line}"
        assert strays(tmp_path) == [], f"killed at line {line}"
    assert line > 50


def dead_swap(book, standing, left, kind=names.NEW, read_as=None, **changes):
    """What a bridge that is gone left: `standing` under the workbook's name, `left` under a hidden one."""
    base = read_as or saved(1)
    dead = owner.Owner(**{**vars_of(owner.me()), "pid": 2**22 - 1, "started": 1})
    found = fingerprint(book.stat(), digest_of(base))
    with journal.begun(book, found, digest_of(with_result(base))) as entry:
        text = entry.path.read_text()
        place = entry.place(kind)
        place.write_bytes(left)
        book.write_bytes(standing)
    entry.path.write_text(text.replace(f'"pid": {os.getpid()}', f'"pid": {dead.pid}'))
    return entry


def vars_of(one):
    return {name: getattr(one, name) for name in one.__slots__}


def mended(folder):
    return [one.mended for one in recover(folder)]


def test_users_newer_save_under_our_name_goes_back(book, tmp_path):
    dead_swap(book, standing=with_result(saved(1)), left=saved(2))
    assert mended(tmp_path) == [Mended.PUT_BACK]
    assert look(book) == (2, None)
    assert strays(tmp_path) == []


def test_but_not_over_a_still_newer_one(book, tmp_path):
    entry = dead_swap(book, standing=saved(3), left=saved(2))
    os.utime(entry.place(names.NEW), (1, 1))
    assert mended(tmp_path) == [Mended.CLEARED]
    assert look(book) == (3, None)
    assert strays(tmp_path) == []


def test_the_old_version_and_ours_just_go(book, tmp_path):
    for left in (saved(1), with_result(saved(1))):
        dead_swap(book, standing=saved(1), left=left)
        assert mended(tmp_path) == [Mended.CLEARED]
        assert look(book) == (1, None)
        assert strays(tmp_path) == []


def test_stopped_between_two_steps_of_a_swap_in_steps(book, tmp_path):
    """The old file has only the backup name (ReplaceFileW's error 1177, then a crash)."""
    dead_swap(book, standing=b"", left=saved(1), kind=names.OLD)
    book.unlink()
    assert mended(tmp_path) == [Mended.PUT_BACK]
    assert look(book) == (1, None)
    assert strays(tmp_path) == []


def test_a_workbook_that_was_deleted_meanwhile_is_not_brought_back(book, tmp_path):
    dead_swap(book, standing=b"", left=saved(1))
    book.unlink()
    recover(tmp_path)
    assert os.listdir(tmp_path) == []


def test_unless_the_leftover_is_a_users_save(book, tmp_path):
    dead_swap(book, standing=b"", left=saved(2))
    book.unlink()
    assert mended(tmp_path) == [Mended.PUT_BACK]
    assert look(book) == (2, None)


def test_a_save_never_finished_is_shown(book, tmp_path, monkeypatch):
    dead_swap(book, standing=with_result(saved(1)), left=saved(2)[:-40])
    assert mended(tmp_path) == [Mended.KEPT], "somebody may still be writing"
    monkeypatch.setattr(recovery, "_UNFINISHED_AGE_S", -1.0)
    assert mended(tmp_path) == [Mended.SET_ASIDE]
    assert look(book) == (1, 1)
    assert (tmp_path / "book - unfinished save.xlsx").read_bytes() == saved(2)[:-40]
    assert strays(tmp_path) == []


def test_swaps_under_way_are_left_alone(book, tmp_path):
    found = fingerprint(book.stat(), digest_of(book.read_bytes()))
    with journal.begun(book, found, "new") as entry:
        entry.place(names.NEW).write_bytes(saved(2))
        assert recover(tmp_path) == ()
        assert entry.place(names.NEW).exists()
        entry.place(names.NEW).unlink()
    assert strays(tmp_path) == []


def test_a_journal_about_another_folder_is_none_of_its_business(book, tmp_path):
    elsewhere = tmp_path / "elsewhere"
    elsewhere.mkdir()
    (elsewhere / "victim.xlsx").write_bytes(saved(5))
    entry = dead_swap(book, standing=with_result(saved(1)), left=saved(2))
    text = entry.path.read_text()
    entry.path.write_text(text.replace('"book.xlsx"', '"elsewhere/victim.xlsx"'))
    recover(tmp_path)
    assert look(elsewhere / "victim.xlsx") == (5, None)


def test_nonsense_in_our_names_does_no_harm(tmp_path):
    for name in (".~savefit-", ".~savefit-x", ".~savefit-a.journal", ".~savefit-b.kept", ".~savefit-c.claim"):
        (tmp_path / name).write_bytes(b"\xff\x00{")
    (tmp_path / ".~savefit-d.journal").mkdir()
    recover(tmp_path)
    recover(tmp_path / "not there")


def test_dead_claims_go_and_live_ones_stay(book, tmp_path):
    with claim.claimed(book):
        text = claim.claim_path(book).read_text()
        recover(tmp_path)
        assert claim.claim_path(book).exists()
    claim.claim_path(book).write_text(text.replace(f'"pid": {os.getpid()}', f'"pid": {2**22 - 1}'))
    recover(tmp_path)
    assert strays(tmp_path) == []
