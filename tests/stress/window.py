"""A person at a real LibreOffice window: `python -m tests.stress.window [--rounds N]` (needs Xvfb and xdotool).

Each round the person types a number into A1 and presses Ctrl+S, and the watcher puts a sheet RESULT in while the
window is open. Then, in turn:

    reload     File > Reload shows the sheet, and the next save asks nothing
    carry on   the person types and saves without reloading: LibreOffice asks because the file was changed by others;
               Save Anyway keeps the person's entry, and the results are put in again

What the person typed last must be in the file after every round.
"""

from __future__ import annotations

import argparse
import os
import shutil
import subprocess
import sys
import tempfile
import time
import uuid
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path

import openpyxl

from tests.office import SOFFICE, Office, OfficeError
from tests.stress.faults import START

PATIENCE_S = 60.0
ASKS = "Changed by Others"
SETTINGS = """<?xml version="1.0" encoding="UTF-8"?>
<oor:items xmlns:oor="http://openoffice.org/2001/registry">
<item oor:path="/org.openoffice.Office.Common/Save/Document"><prop oor:name="WarnAlienFormat" oor:op="fuse">
<value>false</value></prop></item>
<item oor:path="/org.openoffice.Office.Common/Misc"><prop oor:name="ShowTipOfTheDay" oor:op="fuse">
<value>false</value></prop></item>
<item oor:path="/org.openoffice.Office.Common/Misc"><prop oor:name="FirstRun" oor:op="fuse">
<value>false</value></prop></item>
</oor:items>
"""
SHOWN = """
for document in desktop.Components:
    sheets = document.Sheets
    print(int(sheets.getByName("RESULT").getCellRangeByName("A1").Value) if sheets.hasByName("RESULT") else "none")
"""
RELOAD = """
frame = desktop.CurrentFrame or next(iter(desktop.Frames))
helper = context.ServiceManager.createInstanceWithContext("com.sun.star.frame.DispatchHelper", context)
helper.executeDispatch(frame, ".uno:Reload", "", 0, ())
"""


def missing() -> str | None:
    """What is lacking here for this."""
    absent = [name for name in ("Xvfb", "xdotool") if shutil.which(name) is None]
    return ", ".join(absent + ([] if SOFFICE else ["soffice"])) or None


def wait(seen: Callable[[], object], what: str, patience: float = PATIENCE_S) -> None:
    until = time.monotonic() + patience
    while not seen():
        if time.monotonic() > until:
            raise AssertionError(f"not seen: {what}")
        time.sleep(0.05)


@dataclass(frozen=True)
class Person:
    """Hands on the keyboard of one display."""

    display: str

    def do(self, *words: str) -> str:
        env = os.environ | {"DISPLAY": self.display}
        said = subprocess.run(["xdotool", *words], capture_output=True, text=True, env=env, timeout=60, check=False)
        return said.stdout.strip()

    def window(self, title: str) -> str:
        return self.do("search", "--onlyvisible", "--name", title).splitlines()[-1:][0] if self.sees(title) else ""

    def sees(self, title: str) -> bool:
        return bool(self.do("search", "--onlyvisible", "--name", title))

    def press(self, title: str, *keys: str) -> None:
        self.do("windowfocus", "--sync", self.window(title))
        for key in keys:
            self.do("key", "--delay", "40", key)
            time.sleep(0.1)

    def types_and_saves(self, title: str, number: int) -> None:
        """A number into A1, and Ctrl+S."""
        self.do("windowfocus", "--sync", self.window(title))
        self.press(title, "ctrl+Home")
        self.do("type", "--delay", "30", str(number))
        self.press(title, "Return", "ctrl+s")


@contextmanager
def display() -> Iterator[str]:
    """A screen nobody looks at."""
    reader, writer = os.pipe()
    server = subprocess.Popen(
        ["Xvfb", "-displayfd", str(writer), "-screen", "0", "1280x800x24", "-nolisten", "tcp"],
        pass_fds=[writer], stderr=subprocess.DEVNULL,
    )  # fmt: skip
    os.close(writer)
    try:
        with open(reader) as told:
            yield f":{told.readline().strip()}"
    finally:
        server.terminate()
        server.wait(20)


@contextmanager
def opened(path: Path, shown_on: str, home: Path) -> Iterator[Office]:
    """The workbook in a LibreOffice window."""
    assert SOFFICE is not None
    (home / "profile" / "user").mkdir(parents=True)
    (home / "profile" / "user" / "registrymodifications.xcu").write_text(SETTINGS)
    pipe = f"window{uuid.uuid4().hex[:10]}"
    program = subprocess.Popen(
        [SOFFICE, f"-env:UserInstallation={(home / 'profile').as_uri()}", "--norestore", "--nologo",
         f"--accept=pipe,name={pipe};urp;", str(path)],
        env=os.environ | {"DISPLAY": shown_on, "SAL_USE_VCLPLUGIN": "gen"},
        stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, start_new_session=True,
    )  # fmt: skip
    office = Office(pipe)
    try:
        yield office
    finally:
        with suppress(OfficeError, subprocess.TimeoutExpired):
            office.script("desktop.terminate()", timeout=10)
        with suppress(subprocess.TimeoutExpired):
            program.wait(10)
        if program.poll() is None:
            os.killpg(program.pid, 9)
            program.wait()


def file_says(path: Path) -> tuple[object, object]:
    """A1 of the person's sheet, and of RESULT."""
    try:
        book = openpyxl.load_workbook(path, read_only=False)
    except Exception:
        return None, None
    return book.worksheets[0]["A1"].value, book["RESULT"]["A1"].value if "RESULT" in book.sheetnames else None


@dataclass
class Count:
    rounds: int = 0
    written: int = 0
    shown_after_reload: int = 0
    old_before_reload: int = 0
    silent_after_reload: int = 0
    asked_without_reload: int = 0
    lost: int = 0


def one_round(number: int, path: Path, person: Person, office: Office, count: Count) -> None:
    """A save, then reload or carry on."""
    title = path.name
    count.rounds += 1
    person.types_and_saves(title, number)
    if person.sees(ASKS):
        person.press(ASKS, "Return")
    wait(lambda: file_says(path) == (number, number), f"results of {number}")
    count.written += 1
    if count.rounds % 2:
        count.old_before_reload += office.script(SHOWN).strip() != str(number)
        office.script(RELOAD)
        wait(lambda: office.script(SHOWN).strip() == str(number), "the new result after reload")
        count.shown_after_reload += 1
        time.sleep(1.0)
        person.types_and_saves(title, number + 1)
        time.sleep(2.0)
        count.silent_after_reload += not person.sees(ASKS)
    else:
        person.types_and_saves(title, number + 1)
        wait(lambda: person.sees(ASKS), "the question")
        count.asked_without_reload += 1
        person.press(ASKS, "Return")
    with suppress(AssertionError):
        wait(lambda: file_says(path) == (number + 1, number + 1), f"results of {number + 1}")
    count.lost += file_says(path)[0] != number + 1
    person.press(title, "ctrl+Home")


def run(home: Path, rounds: int) -> Count:
    """A watcher, a window, a person."""
    folder = home / "quotes"
    folder.mkdir()
    path, count = folder / "book.xlsx", Count()
    book = openpyxl.Workbook()
    book.create_sheet("fit request")
    book.save(path)
    with (home / "out").open("wb") as out:
        watcher = subprocess.Popen(
            [sys.executable, "-c", START, str(folder), str(home), "sheet"], stdout=out, stderr=out
        )
    try:
        wait(lambda: file_says(path)[1] is None and "Watching" in (home / "out").read_text(), "the watcher")
        wait(lambda: "RESULT" in openpyxl.load_workbook(path).sheetnames, "the first result")
        with display() as shown_on, opened(path, shown_on, home) as office:
            person = Person(shown_on)
            wait(lambda: person.sees(path.name), "the window")
            wait(lambda: office.script(SHOWN), "the document")
            time.sleep(2.0)
            for number in range(10, 10 + 2 * rounds, 2):
                one_round(number, path, person, office, count)
    finally:
        watcher.terminate()
        watcher.wait(20)
    return count


def main() -> int:
    """Run and print; 1 when an entry was lost or something was not as it should be."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--rounds", type=int, default=12)
    wanted = options.parse_args()
    if missing():
        print(f"not run: {missing()} is not installed here")
        return 0
    with tempfile.TemporaryDirectory(prefix="window-", ignore_cleanup_errors=True) as home:
        count = run(Path(home), wanted.rounds)
    print(count)
    half = wanted.rounds // 2
    fine = count.lost == 0 and count.written == wanted.rounds and count.asked_without_reload == half
    return int(not fine or count.shown_after_reload != wanted.rounds - half)


if __name__ == "__main__":
    sys.exit(main())
