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
        "The model has {count} coefficients ({at}) and {rows} rows to find them from; it needs more rows than "
        "coefficients. Use fewer terms, or more cases.",
    ),
    "too-many-terms": (
        _R,
        "The model ({at}) is wider than can be fitted here: {reason}. Use fewer predictors, levels or crossed columns.",
    ),
    "numbers-broke-down": (
        _R,
        "The numbers of this model ({at}) are too large or too small to compute with ({kind}). "
        "Look for values of extreme size in its columns, or change their unit.",
    ),
    "cannot-be-fitted": (
        _R,
        "The model cannot be fitted to these rows: {reason} ({at}). Look at the columns it uses.",
    ),
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
    "folder-away": (_W, "{folder} cannot be looked into ({reason}). It is watched again as soon as it is back."),
    "folder-watched": (_N, "Watching {folder}. Workbooks there: {count}."),
    "folder-polled": (_N, "Watching {folder} by looking every few seconds. Workbooks there: {count}."),
    "leftover-cleared": (_N, "{path}: cleared up after a bridge that was stopped in the middle of its work."),
    "leftover-put-back": (_N, "{path}: a bridge was stopped in the middle of its work; your latest save is in place."),
    "leftover-set-aside": (
        _W,
        "{path}: a save of it was never finished. What there is of it stands next to it as '… - unfinished save'.",
    ),
    "job-broke": (_W, "The last fit ended unexpectedly ({kind}). Save again to repeat it."),
    # workbook: reading cells
    "workbook-unreadable": (
        _R,
        "The workbook's cells cannot be read. Open it in your spreadsheet program and save it again as .xlsx.",
    ),
    "sheet-unreadable": (
        _R,
        'The sheet "{sheet}" cannot be read. Open the workbook in your spreadsheet program and save it again.',
    ),
    "sheet-reaches-too-far": (
        _R,
        'The sheet "{sheet}" reaches out to {cell}, with next to nothing in between. '
        "Delete what stands far away from the data and save again.",
    ),
    # workbook: the request's data sheet and models
    "no-data-sheet": (_R, "No data sheet is named yet. Type the name of the sheet with your cases in {at}."),
    "data-sheet-unknown": (_R, 'There is no sheet "{sheet}", which {at} names.{hint}'),
    "data-sheet-without-table": (
        _R,
        'No table was found on the sheet "{sheet}" ({at}). '
        "Give it one row of column names with the cases in the rows below.",
    ),
    "model-name-bad": (
        _R,
        '"{name}" in {at} cannot be a model\'s name. Use letters, digits and _, at most {most} of them.',
    ),
    "model-name-twice": (_R, 'Two models are called "{name}" ({other} and {at}). Give this one a name of its own.'),
    "model-names-clash": (
        _R,
        'The models "{name}" ({at}) and "{other}" would both own the name {formula_name} in formulas. '
        "Give this one another name.",
    ),
    "model-without-name": (_W, "Column {letters} has entries but no model name. Type one in {at}."),
    # workbook: entries beside the data columns
    "entry-without-value": (
        _R,
        "{at} holds a formula whose result is not stored. "
        "Let your spreadsheet program calculate it and save, or type the entry.",
    ),
    "entry-without-column": (
        _R,
        "{at} holds an entry, but no column is named in its row. Type its name in {label_cell}.",
    ),
    "column-unknown": (_R, 'There is no column "{column}" on {sheets} (asked for in {at}).{hint}'),
    "column-renamed": (
        _R,
        'There is no column "{column}" any more; "{new}" stands in its place. If it is the same, type "{new}" in '
        "{at}. If not, clear the entries of that row.",
    ),
    "column-empty": (_R, '"{column}" is used in {at}, but that column is empty on "{sheet}".'),
    "entry-not-words": (
        _R,
        '{at} holds {typed}, where the role of a column is expected, for example "predictor" or "log response".',
    ),
    "entry-unknown-word": (_R, '"{typed}" in {at} is not understood{because}.{hint}'),
    "entry-without-role": (
        _R,
        '"{typed}" in {at} does not say what the column is. Add a role, for example "predictor".',
    ),
    "entry-two-roles": (
        _R,
        '"{typed}" in {at} names two roles, {first} and {second}. A column has one role in a model.',
    ),
    "shape-needs-number-role": (
        _R,
        '"{typed}" in {at}: a {role} cannot be given a shape. Shapes go with predictor, candidate and response.',
    ),
    "response-shape": (_R, '"{typed}" in {at}: a response is taken as it is, or as "log response" or "root response".'),
    "two-shapes": (_R, '"{typed}" in {at} asks for more than one shape. Choose one of them.'),
    "base-needs-category": (_R, '"{typed}" in {at}: a base level goes with a category, as in "category base oak".'),
    "base-without-level": (_R, '"{typed}" in {at} does not say which level is the base, as in "category base oak".'),
    "base-unknown": (_R, '"{column}" has no level "{base}", which {at} asks for as the base.{hint}'),
    "bend-without-place": (_R, '"{typed}" in {at} does not say where the bend is, as in "predictor bend at 15".'),
    "bend-unclear": (
        _R,
        '"{typed}" in {at}: {number} can be read in two ways. Write it without a thousands separator.',
    ),
    "power-out-of-range": (
        _R,
        '"{typed}" in {at}: write "to power" and a whole number from 2 to {most}, as in "predictor to power 3".',
    ),
    "no-response": (
        _R,
        'No column is the response. Write "response" under {at} beside the column that is to be estimated.',
    ),
    "two-responses": (_R, '"{first}" ({other}) and "{second}" ({at}) are both the response. Keep one.'),
    "response-also-predictor": (
        _R,
        '"{column}" is the response and a predictor at once ({other} and {at}). Clear one of the two.',
    ),
    "column-twice": (_R, '"{column}" stands in two rows, with entries in {other} and {at}. Clear one of them.'),
    "role-twice": (_R, '"{first}" ({other}) and "{second}" ({at}) are both the {role}. Keep one.'),
    "two-sheets": (
        _R,
        'All columns of a model come from one sheet, but "{column}" ({at}) is on "{sheet}" and "{other}" on "{first}".',
    ),
    "text-as-number": (_R, '"{column}" holds texts, so it cannot be {role} ({at}).{instead}'),
    "date-as-number": (_N, '"{column}" holds dates; as a number it counts in days.'),
    "yes-no-as-number": (_N, '"{column}" holds TRUE and FALSE; as a number TRUE is 1 and FALSE is 0.'),
    "no-predictor": (_W, "The model has no predictor yet, so it only gives the mean. Write one beside another column."),
    "nothing-to-fit": (
        _R,
        "Without a predictor and without an intercept there is nothing to fit ({at}). Add a predictor.",
    ),
    # workbook: crossed terms
    "crossed-not-yes": (_R, '"{typed}" in {at} is not understood: write "yes" where a model takes the product.'),
    "crossed-incomplete": (_R, "A crossed term needs two columns; {at} names none."),
    "crossed-not-a-term": (
        _R,
        '"{column}" is crossed ({at}) but is neither predictor nor category of this model. '
        "Give it a role above, or clear the yes.",
    ),
    "crossed-with-itself": (_R, '"{column}" is crossed with itself ({at}). For its square write "squared predictor".'),
    # workbook: settings and row filters
    "setting-unknown": (_R, '"{typed}" in {at} is not one of the choices for {setting}: {choices}.{hint}'),
    "setting-row-unknown": (_W, 'The row "{label}" is not a setting, so {at} has no effect. Did you mean "{near}"?'),
    "setting-not-whole": (_R, '"{typed}" in {at}: {setting} takes a whole number, {least} or more.'),
    "level-out-of-range": (
        _R,
        '"{typed}" in {at} is not an interval level. Write a percentage from 50% to below 100%, such as 95%.',
    ),
    "filter-without-column": (_R, '{at} says how to choose rows, but "{where}" names no column.'),
    "filter-without-value": (_R, 'The row filter names "{column}" ({at}) but no value to compare it with.'),
    "filter-other-sheet": (_R, '"{column}" ({at}) is not a column of "{sheet}", where the model\'s columns are.'),
    "filter-order-on-text": (
        _R,
        '"{column}" holds no numbers or dates, so "{comparison}" ({at}) cannot be applied. Use equals or is not.',
    ),
    "filter-between": (_R, '"{typed}" in {at}: between takes two values, as in "5 and 12".'),
    "filter-value": (_R, '"{typed}" in {at} cannot be compared with "{column}": {kind} is needed.'),
    "filter-leaves-nothing": (_R, "No row is left: in none of them {condition} ({at}).{hint}"),
    "filter-value-absent": (
        _W,
        'No row has "{column}" equal to "{value}", so leaving those out changes nothing.{hint}',
    ),
    "grouped-without-group": (
        _R,
        'Grouped standard errors ({at}) need to know the groups. Write "group" beside the column that tells them.',
    ),
    "serial-without-order": (
        _N,
        "No column is the order, so serial standard errors take the rows in the order of the sheet.",
    ),
    "lags-without-serial": (_N, "Lags have no effect, because the standard errors are not serial ({at})."),
    "search-without-candidates": (
        _W,
        'There is nothing to search ({at}): write "candidate" beside the columns that may be dropped.',
    ),
    "candidates-without-search": (_N, "All candidates stay in the model, because no search is chosen below."),
    "too-many-candidates": (_R, "{count} candidates are too many for an exact search ({at}); the most is {most}."),
    "back-on-without-shape": (_N, "The response is not transformed, so {at} has no effect."),
    # workbook: the rows and values a model takes
    "formula-without-value": (
        _R,
        "{column}: the formula in {cells} has no stored result. "
        "Open the workbook in your spreadsheet program, let it calculate, and save.",
    ),
    "error-cells": (
        _W,
        "{column} holds an error in {cells}; {rows} left out for it. Mend the formula or clear the cell.",
    ),
    "text-in-number-column": (
        _R,
        '"{column}" is {role}, but {cell} holds the text "{text}"{more}. '
        "Give it {what}, empty the cell, or clear the entry in {at}.",
    ),
    "number-stored-as-text": (
        _R,
        '"{column}" is {role}, but {cell} holds "{text}" as a text, not as a number{more}. Type it again as a number.',
    ),
    "number-among-texts": (
        _W,
        "{column}: cell {cell} holds a number among texts; it was read as the level '{level}'{more}.",
    ),
    "text-among-numbers": (
        _W,
        "{column}: cell {cell} holds a text among numbers; it was read as the level '{level}'{more}.",
    ),
    "kind-among-others": (
        _W,
        "{column}: cell {cell} holds {what} among {others}; it was read as {value}{more}.",
    ),
    "rows-left-out": (_N, "{rows} left out: {reasons}."),
    "rows-filtered": (_N, "{rows} left out by the filter: only those where {condition} are used."),
    "hidden-rows-used": (
        _N,
        '{rows} among those used are hidden on "{sheet}". They count all the same; "use rows where" leaves rows out.',
    ),
    "no-rows": (
        _R,
        'No row of "{sheet}" is complete: each has a blank or an error in one of the columns used ({at} and others).',
    ),
    "too-few-rows": (
        _R,
        "{rows} cannot carry the {count} coefficients asked for ({at}). Use fewer terms, or more cases.",
    ),
    "constant-response": (
        _R,
        'The response "{column}" ({at}) is {value} in every row used, so there is nothing to explain.',
    ),
    "one-level": (_R, '"{column}" ({at}) is "{level}" in every row used; a category needs at least two levels.'),
    "one-group": (_R, 'All rows used belong to the group "{level}" of "{column}" ({at}); grouped errors need more.'),
    "base-not-in-rows": (_R, '"{column}" is never "{base}" in the rows used, so that cannot be the base ({at}).{hint}'),
    "log-of-nothing": (
        _R,
        '"{column}" has {value} in {cell}{more}, and only numbers above zero have a log. '
        "Correct the cell or change the entry in {at}.",
    ),
    "root-of-negative": (
        _R,
        '"{column}" has {value} in {cell}{more}, and numbers below zero have no root. '
        "Correct the cell or change the entry in {at}.",
    ),
    "reciprocal-of-zero": (
        _R,
        '"{column}" is 0 in {cell}{more}, and zero has no reciprocal. Correct the cell or change the entry in {at}.',
    ),
    "weight-not-positive": (
        _R,
        'The weight "{column}" is {value} in {cell}{more}; weights must be above zero. Empty the cell to leave the '
        "row out.",
    ),
    "too-many-lags": (_R, "{lags} lags ({at}) need more than the {rows} rows there are. Ask for fewer."),
    "too-many-folds": (_R, "{folds} folds ({at}) need at least as many rows; there are {rows}."),
    # workbook: the data as found
    "found-blanks": (_N, "{column} is blank in {cells}."),
    "found-errors": (_W, "{column} holds an error in {cells}."),
    "found-no-value": (_W, "{column} has a formula without a stored result in {cells}."),
    "found-texts": (_W, "{column} holds a text among numbers in {cells}."),
    "found-total-row": (
        _W,
        'The last row ({cell} reads "{text}") looks like a total. If it is one, move it away from the cases.',
    ),
    "found-repeated-rows": (_N, "{count} rows are the same in every column used, such as rows {first} and {second}."),
    "found-single-case": (
        _N,
        "{column}: only one case is '{level}' ({cell}){more}; what is said of that level rests on it alone.",
    ),
    "found-nearly-constant": (_N, "{column} is {value} in {count} of {rows} rows; it differs only in {cells}."),
    "found-spelled-twice": (
        _W,
        "{column}: '{level}' in {cells} and '{other}' differ only in {difference}; they count as two levels.",
    ),
    "found-far-value": (_N, "{column}: {value} in {cell} is far from the rest{more}. Is it typed right?"),
    "found-order-twice": (_N, "{column}: {value} comes up more than once, in {cell} for instance."),
    "found-order-gap": (_N, "{column}: there is a gap between {first} and {second}{more}."),
    # sheets: the request's answers
    "fitted": (_N, "Fitted {when} from {used} of {rows} rows."),
    "not-fitted": (_R, "Not fitted."),
    "more-notes": (_N, "And {count} more: see {sheet}."),
}


def say(key: str, *, cell: str | None = None, model: str | None = None, **fields: object) -> Problem:
    """The catalogue's message `key` with its fields filled in.

    Raises KeyError for a key or a field that the catalogue does not have.
    """
    severity, wording = CATALOGUE[key]
    if cell is not None:
        fields["cell"] = cell
    return Problem(key, severity, wording.format(**fields), cell, model)
