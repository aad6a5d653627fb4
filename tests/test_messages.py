"""Every message of the catalogue: said by the program, provoked by a test, its cell checked where it names one.

Most are provoked in the tests of the room that says them; what no room provokes is provoked here, through the front
door. A new message without a test fails here, and so does one that nothing says any more.
"""

from __future__ import annotations

import io
import os
import re
import string
import subprocess
import sys
import warnings
import zipfile
from collections.abc import Callable, Mapping
from itertools import count
from pathlib import Path

import openpyxl
import pytest

from bridge import job
from bridge.files import recovery, swap_link, whole, writable, writeback
from bridge.files.recovery import Mended
from bridge.job import Outcome, fit_workbook, strip_workbook
from bridge.messages import CATALOGUE, FileRefused, Problem, Severity, say
from bridge.package.package import Package
from bridge.watch import news
from bridge.watch.options import WatchOptions
from bridge.watch.screen import Screen
from bridge.watch.watcher import Watcher
from bridge.workbook import reading
from tests.books import ask, data_book, fitted_book, status

ROOT = Path(__file__).resolve().parent.parent
HERE = Path(__file__).resolve()

# Provoked with real processes in another room, by its words: key -> (where, words asserted there).
BY_WORDS = {
    "job-too-long": ("watch/test_watcher.py", "took longer than"),
    "job-too-large": ("watch/test_watcher.py", "of memory"),
    "job-broke": ("watch/test_watcher.py", "ended unexpectedly"),
    "not-fitted": ("test_story.py", "Not fitted"),
    "more-notes": ("sheets/test_request.py", "more: see"),
}
# Provoked below by a test of their own.
BY_THEMSELVES = {"entry-without-value", "watcher-note", "workbook-unreadable"}


# --- the catalogue as a whole -------------------------------------------------------------------


def sources() -> str:
    """All of the program but the catalogue."""
    files = [path for path in (ROOT / "bridge").rglob("*.py") if path.name != "messages.py"]
    return "\n".join(path.read_text(encoding="utf-8") for path in files)


def test_every_message_is_said_somewhere() -> None:
    program = sources()
    leftovers = {f"leftover-{mended.value.replace(' ', '-')}" for mended in Mended if mended is not Mended.KEPT}
    dead = [key for key in CATALOGUE if f'"{key}"' not in program and key not in leftovers]
    assert dead == []


def test_every_message_is_provoked_by_a_test() -> None:
    files = {path: path.read_text(encoding="utf-8") for path in (ROOT / "tests").rglob("*.py") if path != HERE}
    elsewhere = "\n".join(files.values())
    here = {*MODELS, *SHEETS, *FILES, *WATCHED, *BY_WORDS, *WHILE_OPEN, *BY_THEMSELVES}
    untested = [key for key in CATALOGUE if f'"{key}"' not in elsewhere and key not in here]
    assert untested == []


@pytest.mark.parametrize("key", BY_WORDS)
def test_the_words_looked_for_elsewhere_are_the_messages(key: str) -> None:
    where, words = BY_WORDS[key]
    assert words in CATALOGUE[key][1]
    assert words in (ROOT / "tests" / where).read_text(encoding="utf-8")


@pytest.mark.parametrize("key", CATALOGUE)
def test_one_tone(key: str) -> None:
    """Whole sentences, calm; a refusal or a warning says what to do, or what happens by itself."""
    severity, wording = CATALOGUE[key]
    if wording == "{note}":
        return
    fields = {name: "Xx" for _, name, _, _ in string.Formatter().parse(wording) if name}
    text = wording.format(**fields)
    assert text.rstrip().endswith((".", "?", "Xx")), "a sentence"
    assert "!" not in text
    assert not re.search(r"\b(invalid|illegal|error code|fatal|oops|sorry|exception)\b", text, re.IGNORECASE)
    assert "  " not in text
    assert severity is not Severity.REFUSAL or len(text) < 300, "short enough for a cell"


def test_a_field_that_is_missing_is_an_error() -> None:
    with pytest.raises(KeyError):
        say("no-data-sheet")
    with pytest.raises(KeyError):
        say("no such key")


# --- models the core cannot fit -----------------------------------------------------------------

N = 12
Y = [1.0 + 3 * at + at * 7 % 5 for at in range(N)]
X = [float(at) for at in range(N)]
WIDE = 700
Columns = Mapping[str, list[object]]
FOUR: Columns = {"y": Y[:4], "x": [1, 2, 3, 5], "z": [2, 1, 3, 4], "v": [1, 0, 0, 1], "w": [5, 1, 1, 2]}  # type: ignore[dict-item]

MODELS: dict[str, tuple[Columns, Mapping[object, object], str]] = {
    # key: (data, request, the cell named in the text)
    "fewer-rows-than-terms": (
        FOUR,
        {"y": "response", "x": "candidate", "z": "candidate", "v": "candidate", "w": "candidate", "search": "Cp"},
        "E",
    ),
    "too-many-terms": (
        {"y": [float(at * 7 % 13) for at in range(WIDE)], "c": [f"kind {at % 620}" for at in range(WIDE)]},
        {"y": "response", "c": "category"},
        "E",
    ),
    "cannot-be-fitted": (
        {"y": Y, "x": [1.0, 1e200, *X[2:]]},  # type: ignore[dict-item]
        {"y": "response", "x": "squared predictor"},
        "Data!B3",
    ),
    "numbers-broke-down": (
        {"y": [1e160 * y for y in Y], "x": X},  # type: ignore[dict-item]
        {"y": "response", "x": "predictor"},
        "E",
    ),
}


@pytest.mark.parametrize("key", MODELS)
def test_a_model_that_cannot_be_fitted(key: str, tmp_path: Path) -> None:
    columns, entries, named = MODELS[key]
    path = tmp_path / "book.xlsx"
    report = fitted_book(path, columns, {"A": entries, "B": {"y": "response"}})
    problem = next(problem for problem in report.models[0].problems if problem.key == key)
    assert problem.model == "A"
    assert problem.cell is not None
    short = problem.cell.removeprefix("'fit request'!")
    assert short.startswith(named)
    if named == "E":
        request = openpyxl.load_workbook(path)["fit request"]
        assert request[short].value == "response"
    assert short in problem.text
    assert problem.text in status(path, "A")
    assert report.exit_code == 1


@pytest.mark.parametrize("scale", [1e-310, 1e-200, 1e155, 1e300])
@pytest.mark.parametrize("column", ["x", "y"])
def test_numbers_of_extreme_size_never_stop_another_model(column: str, scale: float, tmp_path: Path) -> None:
    """Squares of these are beyond what a double holds."""
    columns = {"y": Y, "x": X, "other": [2 * at + at % 3 for at in X]}
    columns[column] = [value * scale for value in columns[column]]
    models = {"A": {"y": "response", "x": "predictor"}, "B": {"other": "response"}}
    with warnings.catch_warnings():
        warnings.simplefilter("error")  # nor fill the terminal
        report = fitted_book(tmp_path / "book.xlsx", columns, models)  # type: ignore[arg-type]
    assert report.outcome is Outcome.FITTED
    assert report.models[1].result is not None


def test_a_request_cell_without_a_stored_result(tmp_path: Path) -> None:
    """`entry-without-value`."""
    path = data_book(tmp_path / "book.xlsx", {"y": Y, "x": X})
    fit_workbook(path)
    ask(path, {"A": {"y": "response", "x": '="predictor"'}})
    report = fit_workbook(path)
    (problem,) = [problem for problem in report.models[0].problems if problem.key == "entry-without-value"]
    cell = (problem.cell or "").removeprefix("'fit request'!")
    assert openpyxl.load_workbook(path)["fit request"][cell].value == '="predictor"'
    assert cell in status(path, "A")


def test_the_watchers_note_stands_on_the_request_and_goes_again(tmp_path: Path) -> None:
    """`watcher-note`: what became of a turn that was ended is told at the next one, once."""
    path = tmp_path / "book.xlsx"
    fitted_book(path, {"y": Y, "x": X}, {"A": {"y": "response", "x": "predictor"}})
    report = fit_workbook(path, note="The last fit took longer than 5 minutes and was ended.")
    assert [problem.key for problem in report.problems] == ["watcher-note"]
    shown = lambda: [str(cell.value) for row in openpyxl.load_workbook(path)["fit request"] for cell in row]  # noqa: E731
    assert any("took longer than 5 minutes" in text for text in shown())
    assert fit_workbook(path, always_fit=True).problems == ()


# --- cells that cannot be read -------------------------------------------------------------------


def with_part(path: Path, part: str, change: Callable[[bytes], bytes]) -> None:
    """The workbook with one part changed by hand."""
    with zipfile.ZipFile(path) as old:
        parts = {name: old.read(name) for name in old.namelist()}
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as new:
        for name, data in parts.items():
            new.writestr(name, change(data) if name == part else data)


FAR = b'<row r="900000"><c r="XFD900000"><v>1</v></c></row></sheetData>'
SHEETS: dict[str, tuple[str, Callable[[bytes], bytes], str]] = {
    # key: (part, what is wrong with it, the cell named)
    "sheet-unreadable": ("xl/worksheets/sheet1.xml", lambda xml: xml.replace(b"<v>", b"<v", 1), ""),
    "sheet-reaches-too-far": (
        "xl/worksheets/sheet1.xml",
        lambda xml: xml.replace(b"</sheetData>", FAR),
        "Data!XFD900000",
    ),
}


@pytest.mark.parametrize("key", SHEETS)
def test_a_data_sheet_that_cannot_be_read(key: str, tmp_path: Path) -> None:
    path = data_book(tmp_path / "book.xlsx", {"y": Y, "x": X})
    fit_workbook(path)
    ask(path, {"A": {"y": "response", "x": "predictor"}})
    with_part(path, *SHEETS[key][:2])
    report = fit_workbook(path)
    problem = next(problem for problem in report.all_problems if problem.key == key)
    assert '"Data"' in problem.text
    assert SHEETS[key][2] in problem.text
    assert report.exit_code == 1


def test_a_workbook_whose_cells_cannot_be_read(tmp_path: Path) -> None:
    """`workbook-unreadable`: the parts are sound, yet the cell reader gives up."""
    path = data_book(tmp_path / "book.xlsx", {"y": Y, "x": X})
    with pytest.raises(FileRefused) as caught:
        reading.read(b"no zip at all", Package.open(path.read_bytes()))
    assert caught.value.problem.key == "workbook-unreadable"


# --- files ---------------------------------------------------------------------------------------


def refusal(path: Path) -> Problem:
    """What a fit of this file is refused with; the file stays as it is."""
    before = path.read_bytes()
    report = fit_workbook(path)
    assert report.outcome is Outcome.REFUSED
    assert path.read_bytes() == before
    return report.problems[0]


def saved_again_and_again(path: Path, monkeypatch: pytest.MonkeyPatch) -> Problem:
    times = count(1)

    def meanwhile(snapshot: writeback.Snapshot, new: bytes, wish: str) -> writeback.Outcome:
        book = openpyxl.load_workbook(path)
        book["Data"]["A2"] = next(times)
        book.save(path)
        return writeback.write_back(snapshot, new, wish)

    monkeypatch.setattr(job, "write_back", meanwhile)
    with pytest.raises(FileRefused) as caught:
        strip_workbook(path)
    return caught.value.problem


def unpacks_too_large(path: Path, monkeypatch: pytest.MonkeyPatch) -> Problem:
    monkeypatch.setattr(whole, "UNPACKED_LIMIT", 1000)
    return refusal(path)


def in_a_sticky_folder(path: Path, monkeypatch: pytest.MonkeyPatch) -> Problem:
    path.parent.chmod(0o1777)
    monkeypatch.setattr(writable.os, "geteuid", lambda: 65_534)
    monkeypatch.setattr(writable.os, "access", lambda *_: True)
    return refusal(path)


HOLD = """
import sys
import zipfile
from pathlib import Path
from bridge.files import claim
with claim.claimed(Path(sys.argv[1])):
    print("held", flush=True)
    sys.stdin.readline()
"""


def claimed_by_another_bridge(path: Path, monkeypatch: pytest.MonkeyPatch) -> Problem:
    monkeypatch.setattr(writeback, "_CLAIM_WAIT_S", 0.0)
    command = [sys.executable, "-c", HOLD, str(path)]
    with subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, cwd=ROOT) as other:
        assert other.stdout is not None
        assert other.stdout.readline() == "held\n"
        try:
            return refusal(path)
        finally:
            other.communicate("\n")


FILES: dict[str, Callable[[Path, pytest.MonkeyPatch], Problem]] = {
    "saved-again-and-again": saved_again_and_again,
    "file-unpacks-too-large": unpacks_too_large,
    "folder-sticky": in_a_sticky_folder,
    "claimed-elsewhere": claimed_by_another_bridge,
}


@pytest.mark.skipif(sys.platform == "win32", reason="owners and mode bits")
@pytest.mark.parametrize("key", FILES)
def test_a_file_that_cannot_be_used(key: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "book.xlsx"
    fitted_book(path, {"y": Y, "x": X}, {"A": {"y": "response", "x": "predictor"}})
    ask(path, {"A": {"interval level": "90%"}})
    problem = FILES[key](path, monkeypatch)
    assert (problem.key, problem.severity) == (key, Severity.REFUSAL)
    assert path.name in problem.text


# --- a workbook that is open, or was somebody else's ---------------------------------------------

WHILE_OPEN = {
    "written-while-open": "write",
    "beside-while-open": "beside",
    "waiting-while-open": "wait",
    "owner-not-kept": "auto",
}


@pytest.mark.skipif(sys.platform != "linux", reason="open workbooks as Linux tells them")
@pytest.mark.parametrize("key", WHILE_OPEN)
def test_what_is_said_when_the_results_are_put_in(key: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = data_book(tmp_path / "book.xlsx", {"y": Y, "x": X})
    if key == "owner-not-kept":
        dress = swap_link.dress
        monkeypatch.setattr(swap_link, "dress", lambda new, like: dress(new, like) and False)
        report = fit_workbook(path)
    else:
        (tmp_path / f".~lock.{path.name}#").write_text(f",ann,{os.uname().nodename},01.12.2026 08:47,file:///profile;")
        with path.open("r+b"):
            report = fit_workbook(path, while_open=WHILE_OPEN[key])
    fields = {"program": "LibreOffice", "copy": "book - fit.xlsx"}
    assert report.message == CATALOGUE[key][1].format(**fields)


# --- the watcher ----------------------------------------------------------------------------------


def recovered(folder: Path, mended: Mended) -> news.Cleared:
    return news.Cleared(recovery.Recovered(folder / "book.xlsx", mended))


WATCHED: dict[str, Callable[[Path], news.News]] = {
    "folder-away": lambda folder: news.FolderAway(str(folder), "No such file or directory"),
    "folder-watched": lambda folder: news.FolderBack(str(folder), False, 3),
    "folder-polled": lambda folder: news.FolderBack(str(folder), True, 3),
    "leftover-cleared": lambda folder: recovered(folder, Mended.CLEARED),
    "leftover-put-back": lambda folder: recovered(folder, Mended.PUT_BACK),
    "leftover-set-aside": lambda folder: recovered(folder, Mended.SET_ASIDE),
}


@pytest.mark.parametrize("key", WATCHED)
def test_what_the_watcher_tells_of_its_folders(key: str, tmp_path: Path) -> None:
    out = io.StringIO()
    watcher = Watcher([tmp_path], WatchOptions(log_folder=tmp_path / "log"), "tests.watch.jobs:repeat", Screen(out))
    watcher._hear(WATCHED[key](tmp_path))
    wording = CATALOGUE[key][1]
    fields = {"folder": tmp_path, "path": tmp_path / "book.xlsx", "count": 3, "reason": "No such file or directory"}
    assert wording.format(**fields) in out.getvalue()
