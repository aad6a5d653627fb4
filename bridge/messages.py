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
    # the story
    "watcher-note": (_W, "{note}"),
    "saved-again-and-again": (_R, "{name} is being saved again and again. Try once more when it is quiet."),
    "fewer-rows-than-terms": (
        _R,
        "The model has {count} coefficients but only {rows} rows to find them from. Give it more rows or fewer terms.",
    ),
    "too-many-terms": (
        _R,
        "The model is wider than can be fitted here: {reason}. Use fewer predictors, levels or crossed columns.",
    ),
    "cannot-be-fitted": (_R, "The model cannot be fitted to these rows: {reason}. Look at the columns it uses."),
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
    "user-objects-would-go": (
        _R,
        'The sheet "{sheet}" was not taken out because it holds {what} of yours, which would go with it. '
        "Move it to a sheet of your own, or delete it, and try again.",
    ),
    "no-sheet-left": (
        _R,
        "Without the fit sheets no visible sheet would be left, which a workbook must have. "
        "Add or show a sheet of your own and try again.",
    ),
    # files: reading and writing back
    "file-missing": (_R, "'{name}' is not there. Check the name and the folder."),
    "file-not-plain": (_R, "'{name}' is not a plain file, so it is left alone."),
    "file-unreadable": (_R, "'{name}' cannot be read ({reason}). Check that you may open it."),
    "file-too-large": (
        _R,
        "'{name}' has {size} MB; more than {limit} MB are not read. Take sheets or pictures that are not needed out.",
    ),
    "file-unpacks-too-large": (
        _R,
        "'{name}' unpacks to more than {limit} GB, which no ordinary workbook does, so it is left alone.",
    ),
    "file-being-saved": (_R, "'{name}' is being saved at this moment. It is looked at again when that is done."),
    "file-not-whole": (
        _R,
        "'{name}' is not whole ({detail}): it is still being saved or copied, or it is damaged. "
        "Save it once more from your spreadsheet program.",
    ),
    "file-hard-linked": (
        _R,
        "'{name}' is one file under {count} names (hard links). Putting results in would part them, "
        "so it is left alone. Copy the workbook to a file of its own.",
    ),
    "file-read-only": (_R, "'{name}' is marked read-only, and that is respected. Allow writing to it and save again."),
    "folder-read-only": (
        _R,
        "Nothing can be written into the folder '{folder}', so '{name}' keeps its old version. "
        "Ask for the right to write there, or move the workbook.",
    ),
    "folder-sticky": (
        _R,
        "In the folder '{folder}' only a file's owner may replace it, and '{name}' belongs to somebody else. "
        "Let its owner run the bridge, or move the workbook.",
    ),
    "no-space": (
        _R,
        "There is no space left in '{folder}' for the new version of '{name}'; the old one is untouched. "
        "Make room and save again.",
    ),
    "not-permitted": (
        _R,
        "The system does not permit '{name}' in '{folder}' to be replaced; it is untouched. "
        "Check the rights on the file and the folder.",
    ),
    "name-too-long": (
        _R,
        "The path of '{name}' is so long that no working file fits next to it in '{folder}'. Use shorter folder names.",
    ),
    "mounted-alone": (
        _R,
        "'{name}' is mounted as a single file and cannot be replaced. Mount its folder instead, or move the workbook.",
    ),
    "write-failed": (_R, "The new version of '{name}' could not be written ({reason}). The old one is untouched."),
    "claimed-elsewhere": (
        _R,
        "Another bridge ({user} on {host}) is at work on '{name}' and will put the results in.",
    ),
    "written-while-open": (
        _N,
        "The workbook is open in {program}: File > Reload shows the results. If it asks at the next save whether "
        "to save anyway, your entries are kept and the results are put in again.",
    ),
    "beside-while-open": (
        _N,
        "The workbook is open in {program} and cannot be replaced: the results are in '{copy}' for now, "
        "and go into the workbook when it is closed.",
    ),
    "waiting-while-open": (_N, "The workbook is open in {program}: the results go in when it is closed."),
    "owner-not-kept": (_N, "The file now belongs to you, because the system does not let it be given back."),
    # watch: what becomes of a workbook's turn
    "job-too-long": (
        _W,
        "The last fit took longer than {limit} and was ended. Ask for fewer models, candidates or folds, "
        "or allow more time.",
    ),
    "job-too-large": (
        _W,
        "The last fit needed more than {limit} of memory and was ended. Ask for fewer models or terms.",
    ),
    "job-broke": (_W, "The last fit ended unexpectedly ({kind}). Save again to repeat it."),
}


def say(key: str, *, cell: str | None = None, model: str | None = None, **fields: object) -> Problem:
    """The catalogue's message `key` with its fields filled in.

    Raises KeyError for a key or a field that the catalogue does not have.
    """
    severity, wording = CATALOGUE[key]
    if cell is not None:
        fields["cell"] = cell
    return Problem(key, severity, wording.format(**fields), cell, model)
