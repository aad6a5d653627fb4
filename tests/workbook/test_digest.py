"""The digest changes with what a fit depends on, and with nothing else."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from bridge.workbook.contents import Contents
from bridge.workbook.digest import digest
from tests.workbook.support import Typed, contents, refits, typed, workbook

GOOD = {"hours": "response", "length (m)": "predictor", "hull": "category"}


def source(**changed: object) -> Contents:
    rows = refits()
    for place, value in changed.items():
        rows[int(place[2:])][int(place[1])] = value
    return contents(workbook({"Refits": rows, "Other": [["a", "b"], [1, 2], [3, 4.5 + len(changed)]]}))


def page(held: Contents) -> Typed:
    return typed(held, GOOD, data_sheet="Refits")


def made(one: Typed) -> str:
    return digest("1", one.understood(), one.source.tables, ())


def entry(one: Typed) -> None:
    one.put("crew", "A", "predictor")


def setting(one: Typed) -> None:
    one.put("interval level", "A", "90%")


def name(one: Typed) -> None:
    one.cells[(one.row("column"), one.column("A"))] = "first"


def note(one: Typed) -> None:
    one.cells[(3, 12)] = "a note"


def idle(one: Typed) -> None:
    one.put("job", "B", "label")


@pytest.mark.parametrize("change", [entry, setting, name])
def test_what_is_asked_counts(change: Callable[[Typed], None]) -> None:
    held = source()
    other = page(held)
    change(other)
    assert made(other) != made(page(held))


@pytest.mark.parametrize("change", [note, idle])
def test_notes_and_columns_not_asked_for_do_not(change: Callable[[Typed], None]) -> None:
    held = source()
    other = page(held)
    change(other)
    assert made(other) == made(page(held))


@pytest.mark.parametrize("value", [None, 41.25, "text", "=1+1", True])
def test_every_kind_of_cell_counts(value: object) -> None:
    assert made(page(source(_17=value))) != made(page(source()))


def test_sheets_that_are_not_data_sheets_do_not_count() -> None:
    before, after = page(source()), page(source())
    after.source = contents(workbook({"Refits": refits(), "Other": [["z", "y"], [7, 8], [9, 10]]}))
    assert made(before) == made(after)
