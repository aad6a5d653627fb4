"""Write-back on the system the tests run on: what is kept, what is refused, what open workbooks get."""

import errno
import os
import shutil
import socket
import stat
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import pytest

from bridge.files import names, openness, prepare, recovery, replace, swap_linux
from bridge.files.beside import remove_copy
from bridge.files.snapshot import read
from bridge.files.swap import this_system
from bridge.files.writeback import write_back
from bridge.messages import FileRefused
from tests.stress.zips import look, saved, with_result

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="leases, exchange and mode bits as Linux has them")


@pytest.fixture
def book(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_bytes(saved(1))
    return path


def put(path, **options):
    seen = read(path)
    return write_back(seen, with_result(seen.data), **options)


def strays(folder):
    return [name for name in os.listdir(folder) if name.startswith(names.PREFIX)]


def refused(path):
    before = path.read_bytes()
    with pytest.raises(FileRefused) as caught:
        put(path)
    assert path.read_bytes() == before
    assert strays(path.parent) == []
    return caught.value.problem.key


def test_written_and_known_again(book, tmp_path):
    outcome = put(book)
    assert outcome.kind == "written"
    assert look(book) == (1, 1)
    assert read(book).fingerprint == outcome.fingerprint
    assert strays(tmp_path) == []


def test_mode_attributes_and_owner_are_kept(book):
    book.chmod(0o640)
    if os.geteuid() == 0:
        os.chown(book, 1234, 4321)
    try:
        os.setxattr(book, "user.tag", b"mine")
    except OSError:
        pytest.skip("no extended attributes here")
    before = book.stat()
    put(book)
    after = book.stat()
    assert (stat.S_IMODE(after.st_mode), after.st_uid, after.st_gid) == (0o640, before.st_uid, before.st_gid)
    assert os.getxattr(book, "user.tag") == b"mine"
    assert after.st_ino != before.st_ino


@pytest.mark.parametrize("offset", [-5.0, 0.0, 0.4, 2.5])
def test_time_lies_in_a_later_whole_second(book, offset):
    when = time.time_ns() + int(offset * 1e9)
    os.utime(book, ns=(when, when))
    put(book)
    assert book.stat().st_mtime_ns // 10**9 > when // 10**9


def test_a_save_in_between_is_left_alone(book, tmp_path):
    seen = read(book)
    book.write_bytes(saved(2))
    assert write_back(seen, with_result(seen.data)).kind == "changed"
    assert look(book) == (2, None)
    assert strays(tmp_path) == []


def test_a_save_at_the_very_last_moment_goes_back(book, tmp_path, monkeypatch):
    """Somebody renames a new version in after our last look and before the exchange."""
    exchange = swap_linux.exchange
    once = iter([True])

    def late(first, second):
        if next(once, False):
            aside = book.with_name("lu1.tmp")
            aside.write_bytes(saved(2))
            os.replace(aside, book)
        exchange(first, second)

    monkeypatch.setattr(swap_linux, "exchange", late)
    assert put(book).kind == "changed"
    assert look(book) == (2, None)
    assert strays(tmp_path) == []


def test_a_second_save_while_the_first_goes_back(book, tmp_path, monkeypatch):
    exchange = swap_linux.exchange
    saves = iter([2, 3])

    def late(first, second):
        number = next(saves, None)
        if number is not None:
            aside = book.with_name("lu1.tmp")
            aside.write_bytes(saved(number))
            os.replace(aside, book)
        exchange(first, second)

    monkeypatch.setattr(swap_linux, "exchange", late)
    assert put(book).kind == "changed"
    assert look(book) == (3, None)
    assert strays(tmp_path) == []


def test_name_gone_is_a_save_in_progress(book, tmp_path):
    seen = read(book)
    away = book.rename(tmp_path / "away")
    assert write_back(seen, with_result(seen.data)).kind == "changed"
    assert not book.exists()
    assert away.read_bytes() == saved(1)
    assert strays(tmp_path) == []


def test_link_is_kept_and_its_file_replaced(book, tmp_path):
    (tmp_path / "far").mkdir()
    link = tmp_path / "far" / "link.xlsx"
    link.symlink_to(book)
    assert put(link).kind == "written"
    assert link.is_symlink()
    assert look(book) == (1, 1)


def test_link_that_leads_elsewhere_now(book, tmp_path):
    other = tmp_path / "other.xlsx"
    other.write_bytes(saved(7))
    link = tmp_path / "link.xlsx"
    link.symlink_to(book)
    seen = read(link)
    link.unlink()
    link.symlink_to(other)
    assert write_back(seen, with_result(seen.data)).kind == "changed"
    assert look(book) == (1, None)
    assert look(other) == (7, None)


def test_longest_name(tmp_path):
    path = tmp_path / ("n" * 250 + ".xlsx")
    path.write_bytes(saved(1))
    assert put(path).kind == "written"
    assert look(path) == (1, 1)


@pytest.mark.parametrize("name", ["Kosten höhe.xlsx", "見積り.xlsx", "смета.xlsx", "تكلفة.xlsx", "a'b\"c%s.xlsx"])
def test_names_in_any_script(tmp_path, name):
    path = tmp_path / name
    path.write_bytes(saved(1))
    assert put(path).kind == "written"
    assert look(path) == (1, 1)


def test_hard_linked_is_refused(book, tmp_path):
    os.link(book, tmp_path / "second.xlsx")
    assert refused(book) == "file-hard-linked"


def test_read_only_is_respected(book):
    book.chmod(0o444)
    assert refused(book) == "file-read-only"


@pytest.mark.parametrize(
    ("code", "key"),
    [
        (errno.ENOSPC, "no-space"),
        (errno.EDQUOT, "no-space"),
        (errno.EROFS, "folder-read-only"),
        (errno.EACCES, "not-permitted"),
        (errno.EIO, "write-failed"),
        (errno.ENAMETOOLONG, "name-too-long"),
    ],
)
def test_no_way_to_write_the_new_file(book, monkeypatch, code, key):
    def fail(*_):
        raise OSError(code, os.strerror(code))

    monkeypatch.setattr(prepare, "_reserve", fail)
    assert refused(book) == key


@pytest.mark.parametrize(
    ("code", "key"), [(errno.EPERM, "not-permitted"), (errno.EXDEV, "mounted-alone"), (errno.EBUSY, "mounted-alone")]
)
def test_exchange_that_fails(book, monkeypatch, code, key):
    def fail(*_):
        raise OSError(code, os.strerror(code))

    monkeypatch.setattr(swap_linux, "exchange", fail)
    assert refused(book) == key


def as_nobody(path):
    """What write-back says to a user without rights, in a child process; needs root to begin with."""
    seen = read(path)
    ours, theirs = os.pipe()
    child = os.fork()
    if child == 0:
        try:
            os.setgid(65534)
            os.setuid(65534)
            try:
                outcome = write_back(seen, with_result(seen.data))
                said = f"{outcome.kind} {outcome.note}"
            except FileRefused as refusal:
                said = refusal.problem.key
            os.write(theirs, said.encode())
        finally:
            os._exit(0)
    os.close(theirs)
    os.waitpid(child, 0)
    with open(ours) as pipe:
        return pipe.read()


@pytest.mark.skipif(os.geteuid() != 0, reason="takes root to become somebody without rights")
class TestWithoutRights:
    @pytest.fixture
    def theirs(self):
        folder = Path(tempfile.mkdtemp(prefix="rights-"))
        book = folder / "book.xlsx"
        book.write_bytes(saved(1))
        book.chmod(0o666)
        yield book
        shutil.rmtree(folder)

    def test_folder_not_writable(self, theirs):
        theirs.parent.chmod(0o755)
        assert as_nobody(theirs) == "folder-read-only"
        assert look(theirs) == (1, None)

    def test_sticky_folder(self, theirs):
        theirs.parent.chmod(0o1777)
        assert as_nobody(theirs) == "folder-sticky"
        assert look(theirs) == (1, None)

    def test_owner_that_cannot_be_kept_is_said(self, theirs):
        theirs.parent.chmod(0o777)
        assert as_nobody(theirs).startswith("written The file now belongs to you")
        assert stat.S_IMODE(theirs.stat().st_mode) == 0o666
        assert look(theirs) == (1, 1)
        assert strays(theirs.parent) == []


class TestWithoutExchange:
    """Shares that know no exchange: a second name, then a rename."""

    @pytest.fixture(autouse=True)
    def no_exchange(self, monkeypatch):
        def fail(*_):
            raise OSError(errno.EINVAL, "Invalid argument")

        monkeypatch.setattr(swap_linux, "exchange", fail)

    def test_written(self, book, tmp_path):
        assert put(book).kind == "written"
        assert look(book) == (1, 1)
        assert strays(tmp_path) == []

    def test_without_hard_links_either(self, book, tmp_path, monkeypatch):
        def fail(*_, **__):
            raise OSError(errno.EPERM, "Operation not permitted")

        monkeypatch.setattr(os, "link", fail)
        assert put(book).kind == "written"
        assert look(book) == (1, 1)
        assert strays(tmp_path) == []

    def test_a_save_in_place_in_the_gap_goes_back(self, book, tmp_path, monkeypatch):
        replace_ = os.replace

        def late(first, second):
            if str(first).endswith(".new"):
                with book.open("r+b") as file:  # the same file that has our second name
                    file.write(saved(2))
                    file.truncate()
            replace_(first, second)

        monkeypatch.setattr(os, "replace", late)
        monkeypatch.setattr(swap_linux, "_leased", lambda handle: swap_linux.Unguarded())
        assert put(book).kind == "changed"
        assert look(book) == (2, None)
        assert strays(tmp_path) == []


class TestHandlesOpenedEarlier:
    def test_a_writer_who_waits_gets_the_workbook(self, book, tmp_path, monkeypatch):
        """Somebody opens the old file while we hold its lease, and writes as soon as we let go."""
        writer = []
        exchange = swap_linux.exchange

        def late(first, second):
            if not writer:
                script = "import sys; f = open(sys.argv[1], 'r+b'); f.write(bytes.fromhex(sys.argv[2])); f.truncate()"
                writer.append(subprocess.Popen([sys.executable, "-c", script, str(second), saved(2).hex()]))
                time.sleep(0.5)
            exchange(first, second)

        monkeypatch.setattr(swap_linux, "exchange", late)
        assert put(book).kind == "changed"
        assert writer[0].wait(10) == 0
        assert look(book) == (2, None)
        assert strays(tmp_path) == []

    def test_what_came_out_is_kept_while_somebody_has_it_open(self, book, tmp_path, monkeypatch):
        monkeypatch.setattr(replace, "_AWAIT_CLOSING_S", 0.05)
        monkeypatch.setattr(replace, "_how_long", lambda *_: replace._Keeping(0.05, then_delete=False))
        with book.open("r+b", buffering=0) as file:
            assert put(book).kind == "written"
            assert [name.rpartition(".")[2] for name in sorted(strays(tmp_path))].count("kept") == 1
            assert {r.mended for r in recovery.recover(tmp_path)} == {recovery.Mended.KEPT}
            file.write(saved(2))
            file.truncate()
        assert {r.mended for r in recovery.recover(tmp_path)} == {recovery.Mended.PUT_BACK}
        assert look(book) == (2, None)
        assert strays(tmp_path) == []

    def test_and_goes_when_they_close_it_without_writing(self, book, tmp_path, monkeypatch):
        monkeypatch.setattr(replace, "_AWAIT_CLOSING_S", 0.05)
        monkeypatch.setattr(replace, "_how_long", lambda *_: replace._Keeping(0.05, then_delete=False))
        with book.open("r+b"):
            assert put(book).kind == "written"
        assert {r.mended for r in recovery.recover(tmp_path)} == {recovery.Mended.CLEARED}
        assert look(book) == (1, 1)
        assert strays(tmp_path) == []


def office_mark(path, host):
    path.with_name(f".~lock.{path.name}#").write_text(f",ann,{host},01.12.2026 08:47,file:///profile;")


def locker_mark(path, user="Ann"):
    name = user.encode("latin-1")
    mark = bytes([len(name)]) + name.ljust(54) + len(user).to_bytes(2, "little") + user.encode("utf-16-le")
    path.with_name(f"~${path.name}").write_bytes(mark.ljust(165, b" "))


class TestOpenWorkbooks:
    @pytest.mark.parametrize(
        ("wish", "kind"), [("auto", "written"), ("write", "written"), ("wait", "waiting"), ("beside", "beside")]
    )
    def test_open_in_libreoffice(self, book, wish, kind):
        office_mark(book, socket.gethostname())
        with book.open("r+b"):  # as its window keeps it
            outcome = put(book, while_open=wish)
        assert outcome.kind == kind
        assert "LibreOffice" in outcome.note
        assert ("Reload" in outcome.note) == (kind == "written")

    @pytest.mark.parametrize(
        ("wish", "kind"), [("auto", "beside"), ("write", "written"), ("wait", "waiting"), ("beside", "beside")]
    )
    def test_open_in_a_program_that_locks(self, book, wish, kind):
        locker_mark(book)
        with book.open("r+b"):
            assert put(book, while_open=wish).kind == kind

    def test_stale_marks_are_not_believed(self, book):
        office_mark(book, socket.gethostname())
        locker_mark(book)
        assert openness.holder(book, this_system()) is None
        assert put(book, while_open="wait").kind == "written"

    def test_a_mark_from_another_machine_is_believed(self, book):
        office_mark(book, "another-machine")
        holder = openness.holder(book, this_system())
        assert holder is not None
        assert (holder.program, holder.user, holder.locks) == ("LibreOffice", "ann", False)

    def test_who_has_it(self, book):
        locker_mark(book, "Zoë")
        with book.open("r+b"):
            holder = openness.holder(book, this_system())
        assert holder is not None
        assert (holder.user, holder.locks) == ("Zoë", True)

    def test_copy_beside_goes_when_results_are_in(self, book, tmp_path):
        locker_mark(book)
        copy = tmp_path / "book - fit.xlsx"
        with book.open("r+b"):
            outcome = put(book)
        assert outcome.path == copy
        assert look(copy) == (1, 1)
        assert look(book) == (1, None)
        book.with_name("~$book.xlsx").unlink()
        assert put(book).kind == "written"
        assert not copy.exists()
        assert strays(tmp_path) == []

    def test_copy_is_brought_up_to_date(self, book, tmp_path):
        copy = tmp_path / "book - fit.xlsx"
        locker_mark(book)
        with book.open("r+b") as file:
            put(book)
            file.write(saved(22))
            file.truncate()
            file.flush()
            assert put(book).path == copy
        assert look(copy) == (22, 22)
        remove_copy(book)
        assert os.listdir(tmp_path) == ["book.xlsx", "~$book.xlsx"] or not copy.exists()

    def test_a_copy_that_its_user_changed_stays(self, book, tmp_path):
        copy = tmp_path / "book - fit.xlsx"
        locker_mark(book)
        with book.open("r+b"):
            put(book)
            copy.write_bytes(saved(99))
            assert put(book).path == tmp_path / "book - fit 2.xlsx"
        book.with_name("~$book.xlsx").unlink()
        assert put(book).kind == "written"
        assert look(copy) == (99, None)
        assert not (tmp_path / "book - fit 2.xlsx").exists()
        assert strays(tmp_path) == []

    def test_a_file_that_was_there_before_is_not_taken_for_a_copy(self, book, tmp_path):
        other = tmp_path / "book - fit.xlsx"
        other.write_bytes(saved(5))
        locker_mark(book)
        with book.open("r+b"):
            assert put(book).path == tmp_path / "book - fit 2.xlsx"
        assert look(other) == (5, None)

    def test_a_name_too_long_for_a_copy_waits(self, tmp_path):
        path = tmp_path / ("n" * 248 + ".xlsx")
        path.write_bytes(saved(1))
        locker_mark(path)
        with path.open("r+b"):
            assert put(path).kind == "waiting"
        assert strays(tmp_path) == []


def test_unknown_wish(book):
    with pytest.raises(ValueError, match="sometimes"):
        put(book, while_open="sometimes")
