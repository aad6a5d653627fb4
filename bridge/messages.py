"""Every message to people, in one place: what is wrong, where, and what to do.

    Problem            one thing said to the user, with the cell it is about
      REFUSAL          the model (or the file) was not fitted because of it
      WARNING          it was fitted, and the user should look at this
      NOTE             said for completeness; nobody needs to act

    FileRefused        the file as a whole cannot be used; carries its Problem

Rooms raise or return problems by their key in `CATALOGUE`; nothing else holds wording.
Imports nothing of ours.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Severity(StrEnum):
    """How much a message weighs."""

    REFUSAL = "refusal"
    WARNING = "warning"
    NOTE = "note"


@dataclass(frozen=True, slots=True)
class Problem:
    """One message: its key in the catalogue, weight, full text, the cell it names, the model it concerns."""

    key: str
    severity: Severity
    text: str
    cell: str | None = None
    model: str | None = None


class FileRefused(Exception):
    """A file that cannot be used as it is; `problem` says why and what to do. Nothing was written."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(problem.text)
        self.problem = problem


_R, _W, _N = Severity.REFUSAL, Severity.WARNING, Severity.NOTE

CATALOGUE: dict[str, tuple[Severity, str]] = {
    # key: (severity, wording with {fields}); grouped by the room that says it.
    # package: files that are left alone
    "empty-file": (_R, "The file is empty. Save the workbook again from your spreadsheet program."),
    "not-a-workbook": (
        _R,
        "The file is not a workbook of the kind .xlsx, .xlsm, .xltx or .xltm. Save it as one of these.",
    ),
    "password-protected": (
        _R,
        "The workbook is protected with a password for opening, so it cannot be read. "
        "Take the password off (in the file's properties or its Save As options) and save again.",
    ),
    "older-format": (_R, "The file is in the older .xls format. Save it as .xlsx (or .xlsm if it has macros)."),
    "binary-format": (_R, "The workbook is in the binary .xlsb format. Save it as .xlsx (or .xlsm if it has macros)."),
    "opendocument": (_R, "The file is an OpenDocument spreadsheet (.ods). Save a copy of it as .xlsx."),
    "signed": (
        _R,
        "The workbook carries a digital signature, and any change would void it. Remove the signature, "
        "or work on an unsigned copy.",
    ),
    "revision-log": (
        _R,
        "The workbook is shared with a log of changes, which new sheets would contradict. "
        "Stop sharing it (or switch the change log off) and save again.",
    ),
    "locked-structure": (
        _R,
        "The workbook's structure is protected, so no sheet may be added. Unprotect the workbook's structure and save "
        "again.",
    ),
    "no-workbook-part": (
        _R,
        "The file is a package of another kind: it holds no workbook. Save the workbook again from your spreadsheet "
        "program.",
    ),
    "no-content-types": (
        _R,
        "The file is a zip archive but not a workbook: it does not say what its parts are. "
        "Save the workbook again from your spreadsheet program.",
    ),
    "zip-damaged": (
        _R,
        "The file is damaged: {detail}. Open it in your spreadsheet program, mend it there and save again.",
    ),
    "zip-encrypted": (_R, "The file's member {member} is encrypted, so it cannot be read. Save it without a password."),
    "zip-bad-name": (
        _R,
        "The file holds a member with a name that leads out of the package ({member}). It was left alone.",
    ),
    "duplicate-members": (
        _R,
        "The file holds two members called {member}, and programs do not agree which one counts. "
        "Open it in your spreadsheet program, check it and save again.",
    ),
    "file-too-big": (_R, "The file is too big ({size} MB; the limit is {limit} MB)."),
    "too-many-members": (_R, "The file holds {count} members; the limit is {limit}. It was left alone."),
    "unpacks-too-big": (
        _R,
        "The file unpacks to more than is reasonable ({member}), as files made to exhaust a computer do. "
        "It was left alone.",
    ),
    "part-damaged": (
        _R,
        "The part {part} of the workbook is damaged: {detail}. "
        "Open it in your spreadsheet program, mend it there and save again.",
    ),
    "part-missing": (
        _R,
        "The part {part} of the workbook is missing. Open it in your spreadsheet program, mend it there and save "
        "again.",
    ),
    "part-with-doctype": (
        _R,
        "The part {part} of the workbook declares a document type, which workbooks may not do. It was left alone.",
    ),
    "too-many-formats": (
        _R,
        "The workbook has {count} cell formats; with the {added} that the fit sheets need it would pass the limit of "
        "{limit}. Clear unused formats and save again.",
    ),
    # package: what is in the way of our sheets
    "sheet-not-ours": (
        _R,
        'The sheet "{sheet}" has the name of a fit sheet but was not made here and is not empty, so it was not '
        "overwritten. Rename it and save again.",
    ),
    "name-not-ours": (
        _R,
        'The name "{name}" is already used in this workbook (it stands for {refers_to}), so it was not overwritten. '
        "Rename yours, or choose another name for the model, and save again.",
    ),
    "user_objects_on_our_sheet": (
        _R,
        'The sheet "{sheet}" cannot be laid out anew because it holds {what} of yours, which would be lost. '
        "Move it to a sheet of your own, or delete it, and save again.",
    ),
}


def say(key: str, *, cell: str | None = None, model: str | None = None, **fields: object) -> Problem:
    """The catalogue's message `key` with its fields filled in.

    Raises KeyError for a key or a field that the catalogue does not have.
    """
    severity, wording = CATALOGUE[key]
    if cell is not None:
        fields["cell"] = cell
    return Problem(key, severity, wording.format(**fields), cell, model)
