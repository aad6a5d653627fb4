"""Phrases that several sheets share: counts, lists, dates, units, the cautions."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Sequence
from datetime import date, datetime, timedelta

from bridge.messages import Severity
from bridge.regression.spec import FitBy, ModelSpec, NumberTerm, Shape
from bridge.sheets.book import ModelSheet
from bridge.workbook.tables import DataColumn, Table

MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")

CAUTIONS = (
    "The figures describe the cases in the data. Two things that move together need not be cause and effect.",
    "No estimate beyond the data: outside the range of the cases used, and in combinations that none of them shows, "
    "the model has nothing to go by. Such estimates are marked.",
    "Where safety, lending or the law on valuations is at stake, local codes and licensed practice decide, "
    "not this page.",
)

SEARCH_WARNING = (
    "The terms were chosen by a search over these same rows: p values and intervals no longer hold as stated, they "
    "look better than they are. Trust the typical miss, for which the search was done anew within each fold."
)

# Headers that are a unit by themselves ("crew hours"); anything else needs (…) or […].
_UNIT_WORDS = frozenset(
    {"seconds", "minutes", "hours", "days", "weeks", "months", "years", "km", "metres", "meters", "miles", "kg"}
    | {"tonnes", "tons", "litres", "liters", "gallons", "kw", "kwh", "mwh", "percent", "%"}
    | {"eur", "euro", "euros", "usd", "dollars", "gbp", "pounds", "chf"}
)


# --- counting and listing ----------------------------------------------------------------------


def plural(count: int, one: str, many: str | None = None) -> str:
    """`1 row`, `117 rows`; `many` where adding an s is not enough. Thousands are kept apart by a space."""
    return f"{number(count)} {one if count == 1 else many or one + 's'}"


def number(count: int) -> str:
    """A count as words show it: `117`, `12 300`."""
    return f"{count:,}".replace(",", "\u00a0") if count >= 10_000 else str(count)


def listing(items: Sequence[str], last: str = "and", most: int = 6) -> str:
    """`a, b and c`; beyond `most` items the rest are counted: `a, b and 5 more`."""
    if len(items) > most:
        items = (*items[: most - 1], f"{len(items) - most + 1} more")
    if len(items) < 2:
        return "".join(items)
    return f"{', '.join(items[:-1])} {last} {items[-1]}"


def sentence(text: str) -> str:
    """`text` with a capital first letter and a full stop, where it has none."""
    text = text.strip()
    text = text[:1].upper() + text[1:]
    return text if text.endswith((".", "!", "?")) else text + "."


def capital(name: str) -> str:
    """A header as a title begins: a plain lower-case word gets a capital, `y`, `pH` and codes stay as they are."""
    first = name.split(" ", 1)[0]
    return name[:1].upper() + name[1:] if len(first) > 2 and first.isalpha() and first.islower() else name


# --- dates -------------------------------------------------------------------------------------


def moment(when: datetime) -> str:
    """`1 Dec 2026 10:31`, the same in every locale."""
    return f"{day(when.date())} {when.hour:02}:{when.minute:02}"


def day(when: date) -> str:
    """`1 Dec 2026`."""
    return f"{when.day} {MONTHS[when.month - 1]} {when.year}"


def serial_day(serial: float) -> str:
    """A workbook's date serial (1900 system) as `1 Dec 2026`; a plain number where no date can be made of it."""
    if not 1 <= serial < 2_958_466:
        return f"{serial:g}"
    return day(date(1899, 12, 30) + timedelta(days=int(serial)))


# --- columns and units -------------------------------------------------------------------------


def unit_of(column: DataColumn | None) -> str:
    """The column's unit: what stands in its header's brackets, else a header's last word that is one, else nothing."""
    if column is None:
        return ""
    if column.unit:
        return column.unit.strip()
    last = column.name.split()[-1] if column.name.split() else ""
    return last if last.casefold() in _UNIT_WORDS else ""


def bare_name(column: DataColumn) -> str:
    """The header without the unit in brackets: `length (m)` gives `length`."""
    if not column.unit:
        return column.name
    cut = re.sub(r"\s*[(\[（][^)\]）]*[)\]）]\s*$", "", column.name).strip()
    return cut or column.name


def column_of(table: Table | None, name: str) -> DataColumn | None:
    """The table's column, or None where there is no table or no such column."""
    return table.column(name) if table is not None else None


def name_in(table: Table | None, name: str) -> str:
    """How sentences call a column: its header without the unit."""
    column = column_of(table, name)
    return isolated(bare_name(column) if column is not None else name)


def isolated(text: str) -> str:
    """A text kept together where it is written from right to left, so that the sentence around it stays in order."""
    if any(unicodedata.bidirectional(character) in ("R", "AL") for character in text):
        return f"\u2068{text}\u2069"
    return text


def unit_in(table: Table | None, name: str) -> str:
    """A column's unit, empty where none is known."""
    return unit_of(column_of(table, name))


def label_in(table: Table | None, label: str) -> str:
    """A design column's or term's label with the units taken out of its headers: `log length x hull steel`."""
    columns = table.columns if table is not None else ()
    for column in sorted(columns, key=lambda one: -len(one.name)):
        if column.unit:
            label = label.replace(column.name, bare_name(column))
    return label


def with_unit(number: str, unit: str) -> str:
    """`19 hours`, `22 m`, `17%`; the number alone without a unit."""
    if not unit:
        return number
    return f"{number}{unit}" if unit in ("%", "°") else isolated(f"{number} {unit}")


def axis_title(table: Table | None, name: str, shape: Shape = Shape.AS_IS) -> str:
    """What an axis says: the header, its unit in brackets, and the shape it was given: `log hours (h)`."""
    column = column_of(table, name)
    unit = unit_of(column)
    bare = bare_name(column) if column is not None else name
    title = f"{bare} ({unit})" if unit and unit.casefold() not in bare.casefold().split() else bare
    return title if shape is Shape.AS_IS else f"{shape.value} {title}"


# --- models ------------------------------------------------------------------------------------


def form(spec: ModelSpec) -> str:
    """The model's form in a few words: `straight`, `log - log`, `curved`, `straight with a bend`."""
    numbers = [term for term in spec.terms if isinstance(term, NumberTerm)]
    right = _shapes({term.shape for term in numbers}) if numbers else "by level" if spec.terms else "mean alone"
    plain = right
    if spec.response_shape is not Shape.AS_IS:
        plain = f"{spec.response_shape.value} - {right}"
    elif right not in ("straight", "by level", "mean alone"):
        plain = f"straight - {right}"
    extras = [
        text
        for text, there in (
            ("curved", any(term.degree > 1 for term in numbers)),
            ("with a bend", any(term.bends for term in numbers)),
            ("crossed", bool(spec.crossed)),
            ("weighted", spec.weight is not None),
            ("through zero", not spec.intercept and len(numbers) == len(spec.terms)),
            ("resistant", spec.fit_by is FitBy.RESISTANT),
        )
        if there
    ]
    return ", ".join([plain, *extras])


def refusal(model: ModelSheet) -> str:
    """Why a model was not fitted, in the words of its problems."""
    said = [problem.text for problem in model.problems if problem.severity is Severity.REFUSAL]
    return " ".join(said or [problem.text for problem in model.problems] or ["It was not fitted."])


def _shapes(shapes: set[Shape]) -> str:
    curved = [shape.value for shape in Shape if shape in shapes and shape is not Shape.AS_IS]
    return listing([*curved, "straight"] if Shape.AS_IS in shapes else curved)
