"""Makes the templates: `python -m templates.make`, from the top folder; needs XlsxWriter.

Each is a workbook to write one's own data into: a short guide, a data sheet with invented example rows to overwrite,
and a filled `fit request`. What each is for stands in `bridge/samples.py`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path
from random import Random

from xlsxwriter.workbook import Workbook

from demo_workbooks.make.grid import Ask, request_sheet
from demo_workbooks.make.workshop import Column, about_sheet, data_sheet, make_book, save

_INVENTED = "The rows on the data sheet are invented examples: write your own over them."
_STEPS = (
    "How to use it:",
    "1. Put your own rows on the sheet {sheet}: one line per case, headings in the first row with their units. Delete "
    "the example rows that are left over. Add or remove columns as you need; leave a cell empty where a value is not "
    "known.",
    "2. On the sheet fit request say under A, B, ... what each column does. The example entries show how.",
    "3. Save. The result sheets appear in this workbook; start reading at fit results, and enter new cases in fit "
    "estimates. Nothing else in the workbook is changed.",
)
_CAUTION = "Before you rely on it:"


@dataclass(frozen=True)
class Template:
    """What makes one template: title, words of its own, the data sheet's columns, the request."""

    title: str
    words: Sequence[str]
    columns: Sequence[Column]
    ask: Ask

    def members(self) -> dict[str, bytes]:
        """The workbook's parts."""
        steps = [step.format(sheet=self.ask.data_sheet) for step in _STEPS]

        def fill(book: Workbook) -> None:
            about_sheet(book, self.title, [_INVENTED, *self.words[:1], *steps, *self.words[1:]], name="Start here")
            page = data_sheet(book, self.ask.data_sheet, self.columns)
            page.autofilter(0, 0, len(self.columns[0].cells), len(self.columns) - 1)
            request_sheet(book, self.ask, self.columns)

        return make_book({"title": self.title, "subject": "savefit template"}, fill)


def _blank() -> Template:
    random = Random(11)
    rows = range(24)
    size = [round(random.uniform(10, 50), 1) for _ in rows]
    count = [random.randint(1, 8) for _ in rows]
    kind = [random.choice(("first", "second", "third")) for _ in rows]
    effect = {"first": 0.0, "second": 6.0, "third": -4.0}
    result = [
        round(12 + 1.8 * s + 2.5 * c + effect[k] + random.gauss(0, 4), 1)
        for s, c, k in zip(size, count, kind, strict=True)
    ]
    columns = (
        Column(
            "name", [f"case {at + 1}" for at in rows], 14, note="What you call the case. Names the row in the results."
        ),
        Column("result (unit)", result, 14, "0.0", "What you want to explain or estimate, with its unit."),
        Column("size (unit)", size, 14, "0.0", "A number that may explain the result."),
        Column("count", count, 12, "0", "Another number."),
        Column("kind", kind, 14, note="A category: a few different words."),
    )
    uses = {
        "name": "label",
        "result (unit)": "response",
        "size (unit)": "predictor",
        "count": "predictor",
        "kind": "category",
    }
    words = (
        "A bare start. One column holds the result; the others may explain it. Model A asks for a straight dependence "
        "on two numbers and a category; add B, C, ... for other forms and compare them.",
    )
    return Template("A start of your own", words, columns, Ask("Data", {"A": uses}))


def _quote() -> Template:
    random = Random(23)
    rows = range(60)
    materials = ("timber", "masonry", "steel")
    area = [round(math.exp(random.uniform(math.log(12), math.log(240)))) for _ in rows]
    material = [random.choices(materials, (5, 4, 3))[0] for _ in rows]
    coats = [random.choice((1, 2, 2, 3)) for _ in rows]
    access = [random.choice(("easy", "easy", "scaffold")) for _ in rows]
    factor = {"timber": 1.0, "masonry": 1.2, "steel": 0.85}
    hours = [
        round(
            2
            * 0.42
            * a**0.92
            * factor[m]
            * (1 + 0.3 * (c - 1))
            * (1.25 if x == "scaffold" else 1.0)
            * math.exp(random.gauss(0, 0.14))
        )
        / 2
        for a, m, c, x in zip(area, material, coats, access, strict=True)
    ]
    columns = (
        Column("job", [f"J-{at + 101}" for at in rows], 11, note="Your number for the job."),
        Column("finished", [date(2024, 1, 8) + timedelta(days=13 * at) for at in rows], 13, "yyyy-mm-dd"),
        Column("hours", hours, 10, "0.0", "Working hours booked on the job, all hands together."),
        Column("area (m²)", area, 11, "0", "Or weight, length, pieces: whatever the work grows with."),
        Column("material", material, 13),
        Column("coats", coats, 9, "0"),
        Column("access", access, 12),
    )
    uses = {"job": "label", "finished": "order", "material": "category", "coats": "predictor", "access": "category"}
    ask = Ask(
        "Past jobs",
        {
            "A": uses | {"hours": "response", "area (m²)": "predictor"},
            "B": uses | {"hours": "log response", "area (m²)": "log predictor"},
        },
    )
    words = (
        "What will the next job take? From your past jobs: hours from size, material, coats and access. Model A adds "
        "up hours; model B works in per cent, which suits jobs of very different size. Keep the one with the smaller "
        "typical miss.",
        _CAUTION,
        "Quote from the range for a single case (case low to case high), not from the estimate alone. Jobs that you "
        "did not win are not in the list; if they were different jobs, the estimate is off for them.",
    )
    return Template("Quote from past jobs", words, columns, ask)


def _calibration() -> Template:
    random = Random(37)
    levels = (0.0, 2.0, 5.0, 10.0, 20.0, 40.0, 60.0, 80.0)
    order = [level for level in levels for _ in range(4)]
    random.shuffle(order)
    reading = [round(3.1 + 12.4 * level + random.gauss(0, 2.2), 1) for level in order]
    columns = (
        Column("run", list(range(1, len(order) + 1)), 9, "0", "Number the runs in the order in which you made them."),
        Column("standard (mg/l)", order, 16, "0.0", "The known value. Run each one at least twice, in mixed order."),
        Column("reading (counts)", reading, 17, "0.0", "What the instrument showed."),
        Column("operator", [random.choice(("first", "second")) for _ in order], 13),
    )
    uses = {"run": "order", "reading (counts)": "response", "standard (mg/l)": "predictor"}
    ask = Ask("Readings", {"A": uses, "B": uses | {"standard (mg/l)": "predictor squared"}})
    words = (
        "An instrument's readings at known values. Model A is the straight line, B allows for a curve. Where "
        "standards are run more than once, the fit tells lack of fit from mere scatter. If the spread grows with the "
        "value, add a column with 1/variance and give it the role weight.",
        _CAUTION,
        "Use the line only between the lowest and the highest standard. Where a certificate is issued, the rules of "
        "the accrediting body and the method's own standard decide.",
    )
    return Template("A calibration line", words, columns, ask)


def _energy() -> Template:
    random = Random(41)
    rows = range(104)
    start = date(2024, 1, 1)
    temperature = [round(10.5 - 9.5 * math.cos(2 * math.pi * (at - 2) / 52) + random.gauss(0, 2.0), 1) for at in rows]
    output = [round(max(20.0, random.gauss(118, 19) - (60 if at % 52 in (30, 31, 51) else 0)), 1) for at in rows]
    energy, error = [], 0.0
    for degrees, tonnes in zip(temperature, output, strict=True):
        error = 0.3 * error + random.gauss(0, 190)
        energy.append(round(2600 + 155 * max(15 - degrees, 0) + 31 * tonnes + error))
    columns = (
        Column("week from", [start + timedelta(weeks=at) for at in rows], 13, "yyyy-mm-dd"),
        Column("energy (kWh)", energy, 14, "#,##0", "What the meter counted in the week."),
        Column(
            "outdoor temperature (°C)",
            temperature,
            19,
            "0.0",
            "Mean of the week, from your own or the nearest station.",
        ),
        Column("output (t)", output, 13, "0.0", "What was made or moved in the week."),
    )
    common = {"week from": "order", "energy (kWh)": "response", "output (t)": "predictor"}
    ask = Ask(
        "Weeks",
        {
            "A": common | {"outdoor temperature (°C)": "predictor"},
            "B": common | {"outdoor temperature (°C)": "predictor bend at 15"},
        },
        settings={"standard errors": {"A": "serial", "B": "serial"}},
    )
    words = (
        "How much of the energy follows the weather, how much the output, and how much is always there? Model A is "
        "straight in temperature; B bends at 15 °C, where heating ends. Try other temperatures in fit request. The "
        "standard errors allow for weeks that resemble the week before.",
        _CAUTION,
        "A saving is the difference between what the fit of the time before expects and what the meter counts "
        "afterwards: fit the time before a change only (use rows where ...).",
    )
    return Template("Energy against weather and output", words, columns, ask)


def _price() -> Template:
    random = Random(59)
    rows = range(80)
    area = [round(math.exp(random.uniform(math.log(38), math.log(190)))) for _ in rows]
    age = [random.randint(0, 70) for _ in rows]
    condition = [random.choices(("good", "fair", "poor"), (4, 4, 2))[0] for _ in rows]
    place = [random.choices(("centre", "riverside", "hill"), (4, 3, 3))[0] for _ in rows]
    parking = [random.choice(("yes", "no")) for _ in rows]
    factor = {"good": 1.12, "fair": 1.0, "poor": 0.86, "centre": 1.15, "riverside": 1.0, "hill": 0.94}
    price = [
        round(
            7.4
            * a**0.86
            * math.exp(-0.004 * y)
            * factor[c]
            * factor[p]
            * (1.05 if k == "yes" else 1.0)
            * math.exp(random.gauss(0, 0.1)),
            1,
        )
        for a, y, c, p, k in zip(area, age, condition, place, parking, strict=True)
    ]
    columns = (
        Column("offer", [f"no. {at + 1}" for at in rows], 11),
        Column(
            "price (thousand)", price, 13, "#,##0.0", "In thousands of your currency. One kind of price: asked or paid."
        ),
        Column("floor area (m²)", area, 12, "0"),
        Column("age (years)", age, 11, "0"),
        Column("condition", condition, 13, note="Few levels, judged by one person."),
        Column("place", place, 13),
        Column("parking", parking, 11),
    )
    uses = {
        "offer": "label",
        "age (years)": "predictor",
        "condition": "category base fair",
        "place": "category",
        "parking": "category base no",
    }
    ask = Ask(
        "Offers",
        {
            "A": uses | {"price (thousand)": "response", "floor area (m²)": "predictor"},
            "B": uses | {"price (thousand)": "log response", "floor area (m²)": "log predictor"},
        },
        settings={"standard errors": {"A": "uneven spread"}},
    )
    words = (
        "What do size, age, condition and place do to a price? Model A adds up amounts; model B works in per cent. "
        "The same sheet serves for flats, machines, vehicles or land: name the columns after what buyers look at.",
        _CAUTION,
        "An estimate from a list of prices is not a valuation. Where a price decides over lending, tax, insurance or "
        "a sale, local codes and licensed practice decide. Prices that depend on who lives somewhere may be unlawful "
        "to use.",
    )
    return Template("Price from attributes", words, columns, ask)


def _repeated() -> Template:
    random = Random(67)
    units, visits = 30, 4
    unit, visit, result, dose, method = [], [], [], [], []
    for number in range(1, units + 1):
        own = random.gauss(0, 3.0)
        way = ("usual", "new")[number % 2]
        for at in range(visits):
            amount = round(random.uniform(5, 30), 1)
            unit.append(f"U{number:02d}")
            visit.append(date(2025, 3, 3) + timedelta(weeks=3 * at, days=number % 5))
            dose.append(amount)
            method.append(way)
            result.append(round(41 + 0.62 * amount + (3.5 if way == "new" else 0.0) + own + random.gauss(0, 2.0), 1))
    columns = (
        Column("unit", unit, 10, note="Which plot, machine, patient, tree, ...: the rows of one belong together."),
        Column("visit", visit, 13, "yyyy-mm-dd"),
        Column("result (kg)", result, 13, "0.0", "What you measured at the visit."),
        Column("dose (g)", dose, 12, "0.0", "A number that differs from visit to visit."),
        Column("method", method, 13, note="A category that stays the same for a unit."),
    )
    uses = {
        "unit": "group",
        "result (kg)": "response",
        "dose (g)": "predictor",
        "method": "category base usual",
    }
    ask = Ask("Visits", {"A": uses, "B": uses}, settings={"standard errors": {"A": "grouped"}})
    words = (
        "Several measurements from each unit. Rows of one unit resemble each other, so they count for less than as "
        "many rows of different units. Model A makes its standard errors by unit (the role group and the setting "
        "grouped); B is the same model with ordinary ones, to see the difference.",
        _CAUTION,
        "The number of units matters, not the number of rows: with fewer than about thirty units even grouped "
        "standard errors come out too small. Where people's health is at stake, local codes and licensed practice "
        "decide.",
    )
    return Template("Repeated measurements by group", words, columns, ask)


TEMPLATES: dict[str, Callable[[], Template]] = {
    "blank": _blank,
    "quote": _quote,
    "calibration": _calibration,
    "energy": _energy,
    "price": _price,
    "repeated": _repeated,
}


def make(folder: Path) -> list[Path]:
    """Make all templates in `folder`; their paths."""
    paths = [folder / f"{name}.xlsx" for name in TEMPLATES]
    for path, template in zip(paths, TEMPLATES.values(), strict=True):
        save(template().members(), path)
    return paths
