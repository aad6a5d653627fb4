"""The demo workbooks as they stand in the folder: whole, invented, made again alike, and full of things to keep."""

from __future__ import annotations

import re
from pathlib import Path

import openpyxl
import pytest

from bridge import samples
from demo_workbooks.make import DEMOS, make
from tests.office import convert, needs_office, running
from tests.samples import BLOCKS, ROLES, asked_of, contents, data, differing, faults, formulas, grid, parts, words

FOLDER = Path(__file__).parents[2] / "demo_workbooks"
FILES = sorted(FOLDER.glob("*.xlsx"))
pytestmark = pytest.mark.filterwarnings("ignore:.*extension is not supported", "ignore:Unable to read chart")
each = pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)


def test_three_and_found() -> None:
    """The folder, the maker and the program's own look-up agree."""
    assert [file.name for file in FILES] == sorted(DEMOS)
    assert dict(samples.demo_files()) == {file.name: file.read_bytes() for file in FILES}


def test_made_again_alike(tmp_path: Path) -> None:
    """Two runs give the same bytes; the committed workbooks hold the same cells, whichever XlsxWriter made them."""
    (tmp_path / "one").mkdir()
    (tmp_path / "two").mkdir()
    for first, second in zip(make(tmp_path / "one"), make(tmp_path / "two"), strict=True):
        assert first.read_bytes() == second.read_bytes()
        assert contents(first) == contents(FOLDER / first.name)


@each
def test_no_faults(file: Path) -> None:
    """Schema and semantics of ECMA-376, as openxml-audit checks them."""
    assert faults(file) == []


@each
def test_said_to_be_invented(file: Path) -> None:
    """The first sheet says so, states the truth, and no person stands in the properties."""
    book = openpyxl.load_workbook(file)
    about = "\n".join(str(cell.value) for cell in book.worksheets[0]["A"] if cell.value)
    assert "Everything in this workbook is invented" in about
    assert "The truth behind the rows" in about
    assert book.properties.creator in (None, "")
    assert book.properties.lastModifiedBy in (None, "")


@each
def test_names_nobody(file: Path) -> None:
    """No firm's form of name, no mark, no address of the web or of mail in any text."""
    firm = re.compile(r"\b(Ltd|Inc|GmbH|LLC|Corp|PLC|S\.A\.|Mr|Mrs|Ms|Dr)\b|[®™©@]|https?:|www\.")
    assert firm.findall(words(file)) == []


@each
def test_request_is_whole(file: Path) -> None:
    """Four blocks with the same models; one response each, roles the program knows; the columns are the data's."""
    asked = grid(file)
    assert tuple(asked) == BLOCKS
    assert len({tuple(models) for models in asked.values()}) == 1
    sheet, listed = asked_of(file)
    header = 4 if file.stem == "boatyard" else 1
    assert listed == list(data(file, sheet, header).columns)
    for entries in asked["column"].values():
        roles = [next(word for word in str(entry).split() if word in ROLES) for entry in entries.values()]
        assert roles.count("response") == 1
        assert roles.count("predictor") >= 1
        assert all(roles.count(once) <= 1 for once in ("weight", "label", "order"))


KEPT = {
    "boatyard": ("image", "comments", "vmlDrawing", "chart", "drawing", "printerSettings"),
    "cold store": ("image", "comments", "chart", "table", "pivotTable", "pivotCacheDefinition", "pivotCacheRecords"),
    "flow meter": ("image", "comments", "chart", "drawing"),
}


@each
def test_holds_what_people_keep(file: Path) -> None:
    """Parts of each kind, and on the sheets: conditional formats, validations, a frozen pane, names, print set-up."""
    members = parts(file)
    for kind in KEPT[file.stem]:
        assert any(re.search(rf"/{kind}\d+\.\w+$", name) for name in members), kind
    sheets = b"".join(content for name, content in members.items() if "/worksheets/sheet" in name)
    for element in (b"<conditionalFormatting", b"<dataValidation ", b'state="frozen"', b"<pageSetup", b"<headerFooter"):
        assert element in sheets
    assert (b"sparklineGroup" in sheets) == (file.stem == "boatyard")
    own_names = {
        "boatyard": {"hull_materials", "hourly_rate"},
        "cold store": {"store_energy"},
        "flow meter": {"set_flows"},
    }
    assert own_names[file.stem] <= set(openpyxl.load_workbook(file).defined_names)


@each
def test_stands_without_a_fit(file: Path) -> None:
    """No formula shows an error, and those that read the fit say that there is none yet."""
    texts = formulas(file)
    assert not [address for address, (_, stored) in texts.items() if stored is None or str(stored).startswith("#")]
    reading = {address: stored for address, (text, stored) in texts.items() if "fit_" in str(text)}
    assert len(reading) >= 3
    assert set(reading.values()) == {"not fitted yet"}


@needs_office
@each
def test_stored_values_are_the_calculated_ones(file: Path) -> None:
    """LibreOffice, made to calculate everything anew, comes to the stored values."""
    assert differing(file, convert(file, "xlsx", recalculate=True)) == []


@needs_office
def test_pivot_table_is_one_to_libreoffice() -> None:
    """LibreOffice sees a pivot table with the table's fields, and refreshed it shows the stored figures."""
    with running() as office:
        said = office.script(
            "doc = load(argv[0]); sheet = doc.Sheets.getByName('By month'); pivots = sheet.getDataPilotTables()\n"
            "pivot = pivots.getByIndex(0); pivot.refresh(); area = pivot.OutputRange\n"
            "print(pivots.Count, [f.Name for f in (pivot.DataPilotFields.getByIndex(i) for i in range(7))])\n"
            "cells = sheet.getCellRangeByPosition(0, area.StartRow, 2, area.EndRow).DataArray\n"
            "print([row for row in cells if row[0] == '2025-03'])\n"
            "doc.close(True)",
            str(FOLDER / "cold store.xlsx"),
        )
    count, shown = said.strip().split("\n")
    table = data(FOLDER / "cold store.xlsx", "Daily")
    march = table[table["month"] == "2025-03"]
    assert count.startswith("1 ['date', 'month', 'mean energy (kWh a day)', 'outdoor temperature (°C)'")
    _, energy, tonnes = eval(shown)[0]  # our own script's output
    assert energy == pytest.approx(march["energy (kWh)"].mean(), rel=1e-12)
    assert tonnes == pytest.approx(march["throughput (t)"].sum(), rel=1e-12)
