"""A real LibreOffice as the saver: `python -m tests.stress.races_office [--rounds N] [--style direct|aside|open]`.

A document in a running LibreOffice writes a number into A1 and saves, twice per round with a random pause, while a
bridge in a process of its own is busy for up to 300 ms between reading and writing back. Three styles: LibreOffice
writes the workbook's name itself; writes a file beside it that is then renamed over the name; writes the workbook that
it holds open. The file must settle on a result made from the last save.
"""

from __future__ import annotations

import argparse
import io
import os
import random
import re
import subprocess
import sys
import tempfile
import threading
import time
import zipfile
from pathlib import Path

import openpyxl

from bridge.files import names
from bridge.files.snapshot import read
from bridge.files.writeback import write_back
from bridge.messages import FileRefused
from tests.office import running
from tests.stress.races import PASSING
from tests.stress.zips import with_member

PATIENCE_S = 30.0
RESULT = "result.txt"
BUSY_S = 0.3  # about what a save and the pause before it take here
STYLES = ("direct", "aside", "open")

SAVING = """
import os, random
path, aside, style, rounds = argv[0], argv[1], argv[2], int(argv[3])
chance = random.Random(1)
document = load(path if style == "open" else aside + ".source.xlsx")
cell = document.Sheets.getByIndex(0).getCellRangeByName("A1")
def save(number):
    cell.Value = number
    if style != "aside":
        save_xlsx(document, path)
    else:
        save_xlsx(document, aside)
        os.replace(aside, path)
for number in range(1, 2 * rounds, 2):
    save(number)
    time.sleep(chance.random() * 0.06)
    save(number + 1)
    open(path + ".saved", "w").write(str(number + 1))
    while not os.path.exists(path + ".go"):
        time.sleep(0.002)
    os.unlink(path + ".go")
document.close(True)
"""


def contents(data: bytes) -> tuple[int, int | None]:
    """The number in A1, and the number the result was made from."""
    with zipfile.ZipFile(io.BytesIO(data)) as book:
        sheet = book.read("xl/worksheets/sheet1.xml").decode()
        found = re.search(r'<c r="A1"[^>]*>.*?<v>([0-9.]+)</v>', sheet)
        made_from = int(book.read(RESULT)) if RESULT in book.namelist() else None
    return int(float(found[1])) if found else 0, made_from


def look(path: Path) -> tuple[int, int | None] | None:
    try:
        return contents(path.read_bytes())
    except (OSError, zipfile.BadZipFile, KeyError, EOFError, ValueError):
        return None


def bridge(path: Path) -> None:
    """Write back whatever comes; prints how often it wrote and had to begin again."""
    chance = random.Random(2)
    written = changed = refused = 0
    while not path.with_name("stop").exists():
        try:
            snapshot = read(path)
            number, made_from = contents(snapshot.data)
            if made_from is not None:
                time.sleep(0.002)
                continue
            time.sleep(chance.random() * BUSY_S)
            outcome = write_back(snapshot, with_member(snapshot.data, RESULT, str(number)))
        except FileRefused as refusal:
            if refusal.problem.key not in PASSING:
                print(refusal.problem.text, file=sys.stderr)
                refused += 1
            continue
        written += outcome.kind == "written"
        changed += outcome.kind == "changed"
    print(written, changed, refused)


def settled(path: Path, number: int) -> bool:
    until = time.monotonic() + PATIENCE_S
    while time.monotonic() < until:
        if look(path) == (number, number):
            return True
        time.sleep(0.002)
    print(f"expected {number}, found {look(path)}", file=sys.stderr)
    return False


def run(folder: Path, style: str, rounds: int) -> tuple[int, int, str]:
    """Lost rounds, leftovers, and what the bridge counted."""
    path = folder / "book.xlsx"
    book = openpyxl.Workbook()
    book.create_sheet("fit request")
    book.save(path)
    book.save(folder / "aside.tmp.source.xlsx")
    child = subprocess.Popen(
        [sys.executable, "-m", "tests.stress.races_office", "--bridge", str(path)], stdout=subprocess.PIPE, text=True
    )
    saved, go = Path(f"{path}.saved"), Path(f"{path}.go")
    lost = 0
    with running() as office:
        saving = threading.Thread(
            target=office.script,
            args=(SAVING, str(path), str(folder / "aside.tmp"), style, str(rounds)),
            kwargs={"timeout": 60 + rounds * (PATIENCE_S + 5)},
        )
        saving.start()
        for _ in range(rounds):
            while not saved.exists() or not saved.read_text():
                assert saving.is_alive(), "LibreOffice has stopped saving"
                time.sleep(0.002)
            lost += not settled(path, int(saved.read_text()))
            saved.unlink()
            go.touch()
        saving.join()
    (folder / "stop").touch()
    said, _ = child.communicate(timeout=60)
    return lost, sum(name.startswith(names.PREFIX) for name in os.listdir(folder)), said.strip()


def main() -> int:
    """Run and print; 1 when anything was lost."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--rounds", type=int, default=300)
    options.add_argument("--style", action="append", choices=STYLES)
    options.add_argument("--bridge", type=Path)
    wanted = options.parse_args()
    if wanted.bridge:
        bridge(wanted.bridge)
        return 0
    bad = 0
    for style in wanted.style or STYLES:
        start = time.monotonic()
        with tempfile.TemporaryDirectory(prefix="races-office-") as folder:
            lost, leftovers, counted = run(Path(folder), style, wanted.rounds)
        written, changed, refused = counted.split()
        bad += lost + leftovers + int(refused)
        print(
            f"LibreOffice, {style:7} rounds {wanted.rounds}  LOST {lost}  leftovers {leftovers}  refused {refused}  "
            f"written {written}  begun again {changed}  {time.monotonic() - start:.0f} s",
            flush=True,
        )
    return int(bad > 0)


if __name__ == "__main__":
    sys.exit(main())
