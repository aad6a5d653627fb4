"""Reading: whole, at one moment, and refused for a stated reason otherwise."""

import os
import threading
import time

import pytest

from bridge.files import snapshot
from bridge.files.snapshot import NotWhole, read
from bridge.messages import FileRefused
from tests.stress.zips import saved


@pytest.fixture
def book(tmp_path):
    path = tmp_path / "book.xlsx"
    path.write_bytes(saved(1))
    return path


def refusal(path, **limits):
    with pytest.raises(FileRefused) as caught:
        read(path, **limits)
    return caught.value


def test_what_was_read_is_known_again(book):
    seen = read(book)
    assert seen.data == saved(1)
    assert seen.fingerprint.stands(book.stat())
    os.utime(book, ns=(1, 1))
    assert not seen.fingerprint.stands(book.stat())
    assert read(book).fingerprint.digest == seen.fingerprint.digest


def test_links_lead_to_the_real_file(book, tmp_path):
    (tmp_path / "far").mkdir()
    link = tmp_path / "far" / "link.xlsx"
    link.symlink_to(book)
    seen = read(link)
    assert (seen.path, seen.real) == (link, book)


@pytest.mark.parametrize("content", [b"", saved(1)[:-30], b"PK\x03\x04", b"\0" * 9000])
def test_torn_files_may_be_whole_later(book, content):
    book.write_bytes(content)
    assert isinstance(refusal(book), NotWhole)


def test_other_files_are_passed_on(book):
    book.write_bytes(b"\xd0\xcf\x11\xe0 an older format")
    assert read(book).data.startswith(b"\xd0\xcf")


def test_reasons(book, tmp_path):
    assert refusal(tmp_path / "none.xlsx").problem.key == "file-missing"
    assert refusal(tmp_path).problem.key == "file-not-plain"
    assert refusal(book, limit_bytes=10).problem.key == "file-too-large"
    circle = tmp_path / "circle.xlsx"
    circle.symlink_to(circle)
    assert refusal(circle).problem.key == "file-unreadable"
    os.mkfifo(tmp_path / "pipe.xlsx")
    assert refusal(tmp_path / "pipe.xlsx").problem.key == "file-not-plain"


def test_unreadable(book, monkeypatch):
    def fail(*_):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(snapshot, "opened", fail)
    assert refusal(book).problem.key == "file-unreadable"


def test_never_a_mixture_while_somebody_writes_in_place(book):
    """Two versions of the same size, written over each other in place: only whole ones are ever seen."""
    versions = {number: saved(number, padding=200_000) for number in (1, 2)}
    stop = threading.Event()

    def write():
        while not stop.is_set():
            for data in versions.values():
                with book.open("r+b", buffering=0) as file:
                    for at in range(0, len(data), 40_000):
                        file.write(data[at : at + 40_000])
                time.sleep(0.002)

    book.write_bytes(versions[1])
    writer = threading.Thread(target=write)
    writer.start()
    good = 0
    try:
        until = time.monotonic() + 20
        while good < 10 and time.monotonic() < until:
            try:
                data = read(book).data
            except NotWhole:
                continue
            assert data in versions.values()
            good += 1
    finally:
        stop.set()
        writer.join()
    assert good == 10
