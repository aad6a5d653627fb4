"""Short versions of the long runs; each module's own command prints the full figures."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from bridge.package.graft import graft
from bridge.package.package import Package
from tests.office import needs_office, running
from tests.package import corpus, mutations, office, samples, synthetic

NO_CORPUS = pytest.mark.skipif(not corpus.files(), reason="../shared/corpus is not there")


@NO_CORPUS
def test_every_sixth_file_of_the_corpus_is_unharmed_or_refused_with_a_reason() -> None:
    tally = corpus.run(corpus.files()[::6], audit=4)
    assert tally.unhandled == []
    assert tally.failures == []
    assert tally.grafted > 0.8 * tally.files
    assert tally.grafted + sum(tally.refused.values()) == tally.files


@pytest.mark.parametrize("kind", synthetic.KEPT)
def test_packages_the_corpus_lacks_are_unharmed(kind: str) -> None:
    tally = corpus.Tally()
    corpus.examine(kind, synthetic.KEPT[kind](), tally, audit=True)
    assert tally.unhandled == []
    assert tally.failures == []
    assert tally.grafted == 1


def test_mutated_packages_are_used_or_refused_within_bounds() -> None:
    outcome = mutations.run_watched(280, seed=7)
    assert outcome.unhandled == []
    assert outcome.slow == []
    assert outcome.changed == 0
    assert outcome.megabytes < mutations.MOST_MEGABYTES
    assert outcome.ends["used"] > 50
    assert len(outcome.ends) > 5


@needs_office
def test_libreoffice_shows_grafted_files_and_what_it_saves_is_recognised() -> None:
    tally = office.run(office.drawn(6))
    assert tally.failures == []
    assert sum(tally.passed.values()) >= 5 * 7


_USER_AT_WORK = """
doc = load(argv[0]); sheets = doc.Sheets
sheets.copyByName("fit rows", "fit rows (2)", 0)
sheets.getByName("fit rows").Name = "Zeilen & mehr"
sheets.moveByName("Zeilen & mehr", 1)
save_xlsx(doc, argv[1])
sheets.removeByName("Zeilen & mehr")
save_xlsx(doc, argv[2])
sheets.getByName("fit request").Rows.removeByIndex(0, 1)
save_xlsx(doc, argv[3])
doc.close(True)
"""


@needs_office
def test_marks_follow_what_a_user_does_in_libreoffice(tmp_path: Path) -> None:
    path = tmp_path / "grafted.xlsx"
    path.write_bytes(samples.grafted(samples.plain_workbook()))
    moved, deleted, cut = (tmp_path / f"{name}.xlsx" for name in ("moved", "deleted", "cut"))
    with running() as office:
        office.script(_USER_AT_WORK, *map(str, (path, moved, deleted, cut)))
    packages = [Package.open(each.read_bytes()) for each in (moved, deleted, cut)]
    seen = [[(sheet.name, sheet.ours) for sheet in package.sheets] for package in packages]
    assert seen[0] == [("fit rows (2)", None), ("Zeilen & mehr", "fit rows"), ("Refits", None), ("Notes", None),
                       ("fit request", "fit request")]  # fmt: skip
    # The original is gone: its copy is the user's, and stays the user's.
    assert seen[1] == [("fit rows (2)", None), ("Refits", None), ("Notes", None), ("fit request", "fit request")]
    # Its first row is gone, and with it the cell the mark refers to.
    assert seen[2] == seen[1]
    again = graft(packages[0], [samples.rows_sheet(2, "Zeilen & mehr")], [], samples.STATE)
    assert [sheet.name for sheet in Package.open(again).sheets] == [tab for tab, _ in seen[0]]


@needs_office
@pytest.mark.parametrize("make", [synthetic.strict, synthetic.prefixed, synthetic.no_styles])
def test_libreoffice_shows_our_sheets_in_unusual_packages(make: Callable[[], bytes]) -> None:
    tally = office.run([(make.__name__, make())])
    assert tally.failures == []
    assert tally.unopened == []
