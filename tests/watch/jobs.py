"""Jobs for the tests that know no statistics: a workbook's "result" is a member that repeats what the user saved.

repeat      puts the result in, through the real read and write-back
others      sleep, take memory, break, so that limits can be seen to work
"""

from __future__ import annotations

import errno
import hashlib
import io
import os
import time
import zipfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from bridge.files import swap_linux
from bridge.files.snapshot import read
from bridge.files.writeback import write_back

RESULT, NOTE = "result.txt", "note.txt"


def users_digest(data: bytes) -> str:
    """A digest of everything in the zip that is the user's."""
    made = hashlib.sha256()
    with zipfile.ZipFile(io.BytesIO(data)) as book:
        for name in sorted(set(book.namelist()) - {RESULT, NOTE}):
            made.update(name.encode() + b"\0" + book.read(name))
    return made.hexdigest()


def result_of(data: bytes) -> str | None:
    """The result that stands in the workbook."""
    with zipfile.ZipFile(io.BytesIO(data)) as book:
        return book.read(RESULT).decode() if RESULT in book.namelist() else None


def note_of(data: bytes) -> str | None:
    """The watcher's note that stands in the workbook."""
    with zipfile.ZipFile(io.BytesIO(data)) as book:
        return book.read(NOTE).decode() if NOTE in book.namelist() else None


def matches(path: Path) -> bool:
    """Whether a whole workbook stands there, with the result of just what it holds."""
    try:
        data = path.read_bytes()
        return result_of(data) == users_digest(data)
    except (OSError, zipfile.BadZipFile, KeyError, EOFError, ValueError):
        return False


def with_result(data: bytes, note: str = "") -> bytes:
    """The workbook with its result, every other member as it was."""
    made = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(made, "w") as new:
        for info in old.infolist():
            if info.filename not in (RESULT, NOTE):
                new.writestr(info, old.read(info))
        new.writestr(zipfile.ZipInfo(RESULT), users_digest(data))
        if note:
            new.writestr(zipfile.ZipInfo(NOTE), note)
    return made.getvalue()


def repeat(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """The usual job."""
    for _ in range(5):
        snapshot = read(path)
        made_from = users_digest(snapshot.data)
        if result_of(snapshot.data) == made_from and not note:
            return {"outcome": "unchanged", "fingerprint": snapshot.fingerprint}
        put = write_back(snapshot, with_result(snapshot.data, note), while_open)
        if put.kind != "changed":
            outcome = "fitted" if put.kind == "written" else put.kind.value
            told = {"outcome": outcome, "message": f"secret {put.note}", "note": put.note}
            return told | {"fingerprint": put.fingerprint, "made_from": made_from}
    return {"outcome": "changed"}


def repeat_counting(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """The usual job, which also writes down each write: a line with the workbook's name and what it was made from."""
    answer = repeat(path, while_open, note)
    if answer["outcome"] == "fitted":
        line = f"{Path(path).parent.name}/{Path(path).name} {answer['made_from']}\n"
        handle = os.open(os.environ["SAVEFIT_TEST_WRITES"], os.O_WRONLY | os.O_CREAT | os.O_APPEND)
        os.write(handle, line.encode())
        os.close(handle)
    return answer


def slow(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """Takes as many seconds as the workbook's member `seconds.txt` says."""
    with zipfile.ZipFile(path) as book:
        seconds = float(book.read("seconds.txt"))
    Path(path).with_name(f"{Path(path).stem}.begun").touch()
    time.sleep(0.0 if note else seconds)
    return repeat(path, while_open, note)


def greedy(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """Takes much more memory than is allowed, slowly or at once, as the workbook's name says."""
    taken = []
    for _ in range(0 if note else 400):
        taken.append(b"\1" * (8 << 20))
        if "slowly" in path:
            time.sleep(0.02)
    return repeat(path, while_open, note)


def broken(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """Fails with an error whose text quotes a cell, or takes its process with it, as the workbook's name says."""
    if note:
        return repeat(path, while_open, note)
    if "abruptly" in path:
        os._exit(3)
    raise ZeroDivisionError("the secret cell B7")


def faulty(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """The usual job on a system that fails as the workbook's name says: `ENOSPC.xlsx`."""
    code = getattr(errno, Path(path).stem, 0)

    def fail(*_: object) -> None:
        raise OSError(code, os.strerror(code))

    if not code:
        return repeat(path, while_open, note)
    place: Any = os if code == errno.ENOSPC else swap_linux
    name = "posix_fallocate" if code == errno.ENOSPC else "exchange"
    kept = getattr(place, name)
    setattr(place, name, fail)
    try:
        return repeat(path, while_open, note)
    finally:
        setattr(place, name, kept)


def sheet(path: str, while_open: str, note: str) -> Mapping[str, object]:
    """Puts in a sheet RESULT that repeats A1 of the first sheet, so that a person would see it."""
    import openpyxl

    snapshot = read(path)
    book = openpyxl.load_workbook(io.BytesIO(snapshot.data))
    typed = book.worksheets[0]["A1"].value
    if "RESULT" in book.sheetnames and book["RESULT"]["A1"].value == typed:
        return {"outcome": "unchanged", "fingerprint": snapshot.fingerprint}
    page = book["RESULT"] if "RESULT" in book.sheetnames else book.create_sheet("RESULT")
    page["A1"] = typed
    made = io.BytesIO()
    book.save(made)
    put = write_back(snapshot, made.getvalue(), while_open)
    outcome = "fitted" if put.kind == "written" else put.kind.value
    return {"outcome": outcome, "message": put.note, "fingerprint": put.fingerprint}
