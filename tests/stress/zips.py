"""The smallest files that count as whole zips: a number the user saved, and perhaps a result made from it."""

from __future__ import annotations

import io
import zipfile
from pathlib import Path

WORKBOOK_XML = '<workbook><sheets><sheet name="Data"/><sheet name="fit request"/></sheets></workbook>'


def saved(number: int, padding: int = 0) -> bytes:
    """What a user's save number `number` writes; `padding` bytes that do not compress make it larger."""
    made = io.BytesIO()
    with zipfile.ZipFile(made, "w") as book:
        # ZipInfo's fixed date, so that the same number gives the same bytes.
        book.writestr(zipfile.ZipInfo("xl/workbook.xml"), WORKBOOK_XML)
        book.writestr(zipfile.ZipInfo("number.txt"), str(number))
        if padding:
            book.writestr(zipfile.ZipInfo("xl/media/picture.bin"), number.to_bytes(8, "little") * (padding // 8))
    return made.getvalue()


def with_result(data: bytes) -> bytes:
    """The same with a result made from it."""
    return with_member(data, "result.txt", str(contents(data)[0]))


def with_member(data: bytes, name: str, text: str) -> bytes:
    """The same with one more member."""
    made = io.BytesIO(data)
    with zipfile.ZipFile(made, "a") as book:
        book.writestr(zipfile.ZipInfo(name), text)
    return made.getvalue()


def contents(data: bytes) -> tuple[int, int | None]:
    """The user's number and the number the result was made from. Raises zipfile.BadZipFile."""
    with zipfile.ZipFile(io.BytesIO(data)) as book:
        number = int(book.read("number.txt"))
        made_from = int(book.read("result.txt")) if "result.txt" in book.namelist() else None
    return number, made_from


def look(path: Path) -> tuple[int, int | None] | None:
    """`contents` of a file; None while it is absent or not whole."""
    try:
        return contents(path.read_bytes())
    except (OSError, zipfile.BadZipFile, KeyError, ValueError, EOFError):
        return None
