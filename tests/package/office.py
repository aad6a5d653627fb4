"""Grafted files in LibreOffice: opened, looked at, saved again, grafted again, stripped.

`python -m tests.package.office [--count 40]` draws files from the shared corpus (or uses the synthetic packages where
it is absent) and prints a table. LibreOffice shows values, charts, formats and drop-downs; what it saved again must be
recognised, laid out anew without doubles, and leave nothing of ours behind after strip.
"""

from __future__ import annotations

import argparse
import json
import random
import subprocess
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from bridge.messages import FileRefused
from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.package.strip import strip
from bridge.package.user_objects import user_objects
from tests.office import Office, OfficeError, running
from tests.package import corpus, invariants, samples, synthetic, zips

# What LibreOffice shows on our sheets, as JSON, and the file saved again by it.
_LOOK = """
import json
doc = load(argv[0])
rows, request = doc.Sheets.getByName("fit rows"), doc.Sheets.getByName("fit request")
def cell(sheet, column, row):
    return sheet.getCellByPosition(column, row)
def format_of(c):
    return doc.NumberFormats.getByKey(c.NumberFormat).FormatString
seen = {
    "title": cell(rows, 0, 0).String,
    "text like a formula": [cell(rows, 0, 1).String, str(cell(rows, 0, 1).Type.value)],
    "sum": cell(rows, 1, 1).Value,
    "seal": cell(rows, 1, 2).String,
    "yes": cell(rows, 2, 1).Value,
    "numbers": [cell(rows, 1, row).Value for row in range(4, 64)],
    "gap": str(cell(rows, 2, 9).Type.value),
    "linked": [cell(rows, 0, 4).Value, cell(rows, 0, 4).Formula[:10]],
    "texts": [cell(rows, 3, 4).String, cell(rows, 3, 5).String],
    "bold": cell(rows, 0, 0).CharWeight,
    "font": cell(rows, 0, 0).CharFontName,
    "format": format_of(cell(rows, 1, 4)),
    "charts": rows.Charts.Count,
    "highlights": rows.ConditionalFormats.Length,
    "drop-downs": [str(cell(request, 1, 1).Validation.Type.value), str(cell(request, 5, 1).Validation.Type.value)],
    "name": doc.NamedRanges.getByName("fit_A_n").Content if doc.NamedRanges.hasByName("fit_A_n") else "",
    "sheets": list(doc.Sheets.ElementNames),
}
print(json.dumps(seen))
save_xlsx(doc, argv[1])
doc.close(True)
"""


def shown(office: Office, path: Path, again: Path, timeout: float = 120) -> dict[str, object]:
    """What LibreOffice shows of a grafted file; the file it saves goes to `again`."""
    return json.loads(office.script(_LOOK, str(path), str(again), timeout=timeout))


def wrong(seen: dict[str, object]) -> list[str]:
    """Where that differs from what was laid out."""
    x, _ = samples.numbers(1)
    plain = {
        "title": 'Rows "of" <Refits> & more',
        "text like a formula": ["=1+1", "TEXT"],
        "seal": "data unchanged",
        "yes": 1.0,
        "gap": "EMPTY",
        "linked": [7.0, "=HYPERLINK"],
        "texts": ["oak", "glass < fibre"],
        "bold": 150.0,
        "font": "Arial",
        "format": "0.000",
        "charts": 2,
        "highlights": 1,
        "drop-downs": ["LIST", "LIST"],
    }
    out = [f"{what}: {seen[what]!r} instead of {value!r}" for what, value in plain.items() if seen[what] != value]
    if not np.allclose(np.array(seen["numbers"]), x, rtol=1e-15, atol=0):
        out.append("the numbers differ")
    if not np.isclose(float(seen["sum"]), float(np.sum(x)), rtol=1e-12):  # type: ignore[arg-type]
        out.append(f"the sum is {seen['sum']}")
    if "fit rows" not in str(seen["name"]):
        out.append("the name fit_A_n is lost")
    return out


@dataclass
class Tally:
    """What became of the files."""

    asked: Counter[str] = field(default_factory=Counter)
    passed: Counter[str] = field(default_factory=Counter)
    failures: list[str] = field(default_factory=list)
    restarts: int = 0  # LibreOffice ended while several files went through it
    unopened: list[str] = field(default_factory=list)  # LibreOffice fails on the original alone

    def ask(self, question: str, name: str, faults: list[str]) -> None:
        """Count one question, answered well if there are no `faults`."""
        self.asked[question] += 1
        if faults:
            self.failures.append(f"{name}: {question}: {'; '.join(faults[:4])}")
        else:
            self.passed[question] += 1


def examine(office: Office, name: str, data: bytes, tally: Tally, folder: Path) -> None:
    """Put one workbook through LibreOffice and back."""
    new = samples.grafted(data)
    path, again = folder / "grafted.xlsx", folder / "again.xlsx"
    again.unlink(missing_ok=True)
    path.write_bytes(new)
    tally.ask("opened; values, charts, formats, drop-downs shown", name, wrong(shown(office, path, again)))
    saved = again.read_bytes()
    package = Package.open(saved)
    roles = sorted(sheet.ours for sheet in package.sheets if sheet.ours)
    tally.ask("saved again: our sheets recognised", name, [] if roles == ["fit request", "fit rows"] else [str(roles)])
    tally.ask("saved again: what we stored is kept", name, [] if package.state == samples.STATE else ["lost"])
    placed = [f"{each.sheet}: {each.kind}" for each in user_objects(package)]
    tally.ask("saved again: nothing taken for the user's", name, placed)
    newer = graft(package, samples.sheets(2), samples.names(), samples.STATE)
    tally.ask("regrafted: no doubles, orphans, dangling", name, _doubles(saved, newer))
    twice = graft(Package.open(newer), samples.sheets(2), samples.names(), samples.STATE)
    tally.ask("regrafted twice: same bytes", name, [] if twice == newer else ["the bytes differ"])
    tally.ask("stripped: nothing of ours left", name, _left(saved, strip(Package.open(newer))))


def _doubles(saved: bytes, newer: bytes) -> list[str]:
    """Faults that the saved file did not have, sheets or charts that came twice."""
    known = set(invariants.faults(saved))
    out = [fault for fault in invariants.faults(newer) if fault not in known]
    was, now = zips.members(saved), zips.members(newer)
    if [tab for tab, _ in zips.sheet_parts(was)] != [tab for tab, _ in zips.sheet_parts(now)]:
        out.append("the sheets differ")
    for kind in ("charts/chart", "drawings/drawing", "worksheets/sheet"):
        before, after = (sum(kind in name and name.endswith(".xml") for name in parts) for parts in (was, now))
        if before != after:
            out.append(f"{after} {kind} parts, there were {before}")
    return out


def _left(saved: bytes, stripped: bytes) -> list[str]:
    known = set(invariants.faults(saved))
    out = [fault for fault in invariants.faults(stripped) if fault not in known]
    book = zips.part(zips.members(stripped), zips.workbook_part(zips.members(stripped))).decode()
    return out + [f"{word} is left in the workbook" for word in ("fit rows", "_savefit", "fit_A") if word in book]


def drawn(count: int) -> list[tuple[str, bytes]]:
    """Files that graft, drawn from the corpus with a fixed seed; synthetic ones where it is absent."""
    paths = corpus.files()
    random.Random(3).shuffle(paths)
    if not paths:
        return [(name, make()) for name, make in list(synthetic.KEPT.items())[:count]]
    found = []
    for path in paths:
        data = path.read_bytes()
        try:
            samples.grafted(data)
        except FileRefused:
            continue
        found.append((f"{path.parent.name}/{path.name}", data))
        if len(found) == count:
            break
    return found


def run(files: Iterable[tuple[str, bytes]], tally: Tally | None = None) -> Tally:
    """All files, in one LibreOffice as long as it stays up."""
    tally = tally or Tally()
    waiting = list(files)
    with tempfile.TemporaryDirectory() as folder:
        while waiting:
            with running() as office:
                failed = _until_it_fails(office, waiting, tally, Path(folder))
            if failed:
                _again_alone(*failed, tally, Path(folder))
    return tally


def _until_it_fails(
    office: Office, waiting: list[tuple[str, bytes]], tally: Tally, folder: Path
) -> tuple[str, bytes] | None:
    """Examine files off the list; the file at which LibreOffice failed, if it did."""
    while waiting:
        name, data = waiting.pop(0)
        try:
            examine(office, name, data, tally, folder)
        except (OfficeError, subprocess.TimeoutExpired):
            return name, data
    return None


def _again_alone(name: str, data: bytes, tally: Tally, folder: Path) -> None:
    """A file at which LibreOffice failed, in a fresh one: it may have been the file before."""
    tally.restarts += 1
    try:
        with running() as office:
            examine(office, name, data, tally, folder)
    except (OfficeError, subprocess.TimeoutExpired) as error:
        if opens_alone(data, folder):
            tally.ask("opened; values, charts, formats, drop-downs shown", name, [str(error)[-300:] or "it failed"])
        else:
            tally.unopened.append(name)


def opens_alone(data: bytes, folder: Path) -> bool:
    """Whether LibreOffice can open the user's file without anything of ours, and save it."""
    path = folder / "original.xlsx"
    path.write_bytes(data)
    try:
        with running() as office:
            office.script("doc = load(argv[0]); save_xlsx(doc, argv[1]); doc.close(True)", str(path), f"{path}.xlsx")
    except (OfficeError, subprocess.TimeoutExpired):
        return False
    return True


def main() -> int:
    """Run and print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--count", type=int, default=40)
    start = time.monotonic()
    files = drawn(parser.parse_args().count)
    tally = run(files)
    print(f"{'files':52} {len(files)}")
    for question, count in tally.asked.items():
        print(f"{question:52} {tally.passed[question]} of {count}")
    print(f"{'LibreOffice started anew':52} {tally.restarts}")
    print(f"{'LibreOffice fails on the original alone':52} {len(tally.unopened)} {' '.join(tally.unopened)}")
    print(*tally.failures, sep="\n")
    print(f"{time.monotonic() - start:.0f} s")
    return 1 if tally.failures else 0


if __name__ == "__main__":
    sys.exit(main())
