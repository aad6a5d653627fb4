"""Every file of the shared corpus through graft, regraft and strip: `python -m tests.package.corpus [--audit all|N]`.

Prints one table. The corpus (430 real workbooks from four public repositories, many broken on purpose) stands beside
the project, not in it.
"""

from __future__ import annotations

import argparse
import random
import re
import sys
import tempfile
import time
import traceback
from collections import Counter
from dataclasses import dataclass, field, replace
from pathlib import Path

from lxml import etree

from bridge.messages import FileRefused
from bridge.package.archive import packed, read_archive, write_archive
from bridge.package.graft import graft
from bridge.package.limits import Limits
from bridge.package.package import Package
from bridge.package.strip import strip
from tests.package import harm, invariants, samples, zips

CORPUS = Path(__file__).resolve().parents[2] / ".." / "shared" / "corpus"


def files() -> list[Path]:
    """The corpus's workbooks, in order; none where it is absent."""
    return sorted(path for path in CORPUS.glob("*/*") if path.is_file())


@dataclass
class Tally:
    """What became of the files."""

    files: int = 0
    grafted: int = 0
    refused: Counter[str] = field(default_factory=Counter)
    unhandled: list[str] = field(default_factory=list)
    passed: Counter[str] = field(default_factory=Counter)
    asked: Counter[str] = field(default_factory=Counter)
    failures: list[str] = field(default_factory=list)

    def ask(self, question: str, name: str, wrong: list[str]) -> None:
        """Count one question, answered well if nothing is `wrong`."""
        self.asked[question] += 1
        if wrong:
            self.failures.append(f"{name}: {question}: {'; '.join(wrong[:4])}")
        else:
            self.passed[question] += 1

    @property
    def sound(self) -> bool:
        """Whether nothing failed."""
        return not self.unhandled and not self.failures


def examine(name: str, data: bytes, tally: Tally, audit: bool = False) -> None:
    """Put one file through everything and count."""
    tally.files += 1
    try:
        new = graft(Package.open(data), samples.sheets(), samples.names(), samples.STATE)
    except FileRefused as refusal:
        tally.refused[refusal.problem.key] += 1
        return
    except Exception:
        tally.unhandled.append(f"{name}: {traceback.format_exc(limit=-3)}")
        return
    tally.grafted += 1
    try:
        _questions(name, data, new, tally)
        wrong = audited(data, new) if audit else None
        if wrong is not None:
            tally.ask("no new errors in the public validator", name, wrong)
    except Exception:
        tally.unhandled.append(f"{name}: {traceback.format_exc(limit=-3)}")


def _questions(name: str, data: bytes, new: bytes, tally: Tally) -> None:
    tally.ask("other members byte-identical", name, harm.changed_members(data, new))
    tally.ask("the user's part of shared parts unchanged", name, harm.changed_shared(data, new))
    gone = harm.census(data) - harm.census(new)
    tally.ask("census of kinds unchanged", name, [f"{kind} is less" for kind, _ in gone])
    again = graft(Package.open(new), samples.sheets(), samples.names(), samples.STATE)
    tally.ask("graft twice, same bytes", name, [] if again == new else ["the bytes differ"])
    tally.ask("strip restores", name, harm.changed_after_strip(data, strip(Package.open(new))))
    known = {_without_counts(each) for each in invariants.faults(data)}
    wrong = [each for each in invariants.faults(new) if _without_counts(each) not in known]
    tally.ask("no new faults, none on our sheets", name, wrong + invariants.faults_of_ours(new, harm.OUR_TABS))
    moved = user_moves_our_last_sheet(new)
    tally.ask("moved sheet: regrafted in place", name, _regrafted(data, moved))
    tally.ask("moved sheet: strip restores", name, harm.changed_after_strip(data, strip(Package.open(moved))))


def _without_counts(fault: str) -> str:
    """A fault of the user's own reads the same though lists have grown since."""
    return re.sub(r" of \d+$", "", fault)


def _regrafted(data: bytes, moved: bytes) -> list[str]:
    """What is wrong after the sheets were laid out anew, with other numbers, where the user had moved them."""
    newer = graft(Package.open(moved), samples.sheets(2), samples.names(), samples.STATE)
    tabs = [tab for tab, _ in zips.sheet_parts(zips.members(newer))]
    order = [] if tabs == [tab for tab, _ in zips.sheet_parts(zips.members(moved))] else ["the sheets' order changed"]
    return order + harm.changed_members(data, newer) + harm.changed_shared(data, newer)


def user_moves_our_last_sheet(data: bytes) -> bytes:
    """As a spreadsheet program does when the last sheet is dragged to the front: positions are kept right."""
    parts = zips.members(data)
    book = next(name for name in parts if name.lower() == zips.workbook_part(parts).lower())
    root = etree.fromstring(parts[book])
    holder = next(root.iter("{*}sheets"))
    last = len(holder) - 1
    holder.insert(0, holder[last])

    def moved(text: str | None) -> str | None:
        if text is None or not text.isdecimal() or int(text) > last:
            return text
        return "0" if int(text) == last else str(int(text) + 1)

    for element in root.iter("{*}definedName", "{*}workbookView"):
        for attribute in ("localSheetId", "activeTab", "firstSheet"):
            value = moved(element.get(attribute))
            if value is None and attribute != "localSheetId" and etree.QName(element).localname == "workbookView":
                value = "1"
            if value is not None and (attribute == "localSheetId") == (etree.QName(element).localname == "definedName"):
                element.set(attribute, value)
    return _with_part(data, book, etree.tostring(root))


def _with_part(data: bytes, part: str, content: bytes) -> bytes:
    """A copy with one part's content, every other member's packed bytes as they are."""
    archive = read_archive(data, Limits())
    members = tuple(
        replace(packed(part, [content]), name=each.name, raw_name=each.raw_name) if each.name == part else each
        for each in archive.members
    )
    return write_archive(replace(archive, members=members))


def audited(before: bytes, after: bytes) -> list[str] | None:
    """Errors that the public validator finds in `after` and not in `before`; None where it cannot read `before`."""
    try:
        known = _audit_errors(before)
    except Exception:
        return None
    return list(_audit_errors(after) - known)


def _audit_errors(data: bytes) -> Counter[str]:
    from openxml_audit import OpenXmlValidator

    with tempfile.NamedTemporaryFile(suffix=".xlsx") as file:
        file.write(data)
        file.flush()
        result = OpenXmlValidator(max_errors=1000).validate(file.name)
    errors = (each for each in result.errors if "ERROR" in str(each.severity).upper())
    return Counter(re.sub(r"\d+", "N", f"{each.part_uri}|{each.description}") for each in errors)


def run(paths: list[Path], audit: int) -> Tally:
    """All files; the validator looks at `audit` of them, drawn at random with a fixed seed."""
    tally = Tally()
    drawn = set(random.Random(1).sample(paths, min(audit, len(paths))))
    for path in paths:
        examine(f"{path.parent.name}/{path.name}", path.read_bytes(), tally, path in drawn)
    return tally


def table(tally: Tally) -> str:
    """The figures as text."""
    refused = sum(tally.refused.values())
    lines = [
        f"{'files':46} {tally.files}",
        f"{'grafted / refused with reason / unhandled error':46} {tally.grafted} / {refused} / {len(tally.unhandled)}",
        *(f"{question:46} {tally.passed[question]} of {count}" for question, count in tally.asked.items()),
        "",
        "refused because:",
        *(f"    {count:4}  {key}" for key, count in tally.refused.most_common()),
        *tally.failures,
        *tally.unhandled,
    ]
    return "\n".join(lines)


def main() -> int:
    """Run over the whole corpus and print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--audit", default="60", help="how many files the public validator looks at, or `all`")
    arguments = parser.parse_args()
    paths = files()
    if not paths:
        print("the corpus is not there: nothing was run")
        return 0
    start = time.monotonic()
    tally = run(paths, len(paths) if arguments.audit == "all" else int(arguments.audit))
    print(table(tally))
    print(f"\n{time.monotonic() - start:.0f} s")
    return 0 if tally.sound else 1


if __name__ == "__main__":
    sys.exit(main())
