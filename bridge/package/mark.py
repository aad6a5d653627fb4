"""How the bridge knows its own sheets again, and where it keeps what it must remember.

All of it are hidden defined names that begin with `_savefit.`, because defined names are what spreadsheet programs
keep and keep right:

* `_savefit.sheet.<role>`, for the whole workbook, refers to the first cell of our sheet. Renaming or moving the
  sheet takes it along; a copy of the sheet does not get it. The same name scoped to the sheet stands in for it
  where a program lost it or renamed the tab without looking at references.
* `_savefit.laid.<role>` holds what the last layout gave the sheet (column widths, charts, print area), so that what
  the user changed since is told from what the bridge made.
* `_savefit.state.<key>` holds texts for the caller, `_savefit.names` the names the bridge put in for people's
  formulas, `_savefit.styles` and `_savefit.made` what to take out again.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from urllib.parse import quote, unquote

from bridge.package.names import Name, sheets_mentioned
from bridge.page.cells import quoted

PREFIX = "_savefit."
SHEET, LAID, STATE = f"{PREFIX}sheet.", f"{PREFIX}laid.", f"{PREFIX}state."
NAMES, STYLES, MADE = f"{PREFIX}names", f"{PREFIX}styles", f"{PREFIX}made"
# What `_savefit.made` may list: things the workbook lacked before our first graft.
MADE_NAMES, MADE_STYLES, MADE_STYLES_RELATION = "names", "styles", "styles-relation"
MADE_STYLES_TYPE = "styles-type"

# A literal in a formula may hold 255 characters, the whole formula 8,192 (Excel's published limits).
_LITERAL, _FORMULA = 200, 7600


def is_ours(name: str) -> bool:
    """Whether a defined name is one of the bridge's own hidden ones."""
    return name.casefold().startswith(PREFIX)


# --- texts as constants ------------------------------------------------------------------------------------------


def constants(name: str, text: str) -> list[Name]:
    """Hidden names that hold `text`: one, or as many (`name`, `name.2`, ...) as its length needs."""
    safe = quote(text, safe=" !#$&'()*+,/:;=?@[]<>|{}^~")
    chunks = [safe[at : at + _FORMULA // 2] for at in range(0, len(safe), _FORMULA // 2)] or [""]
    return [
        Name(name if number == 0 else f"{name}.{number + 1}", _literals(chunk), hidden=True)
        for number, chunk in enumerate(chunks)
    ]


def _literals(text: str) -> str:
    pieces = [text[at : at + _LITERAL] for at in range(0, len(text), _LITERAL)] or [""]
    return "&".join(f'"{piece}"' for piece in pieces)


_QUOTED = re.compile(r'"((?:[^"]|"")*)"')
_PART = re.compile(r"\.([2-9]|[1-9][0-9]+)\Z")


def texts(names: Iterable[Name], prefix: str) -> dict[str, str]:
    """The texts held by names that begin with `prefix`, by the rest of their name, parts joined in order."""
    pieces: dict[str, dict[int, str]] = {}
    for name in names:
        if name.scope is None and name.name.startswith(prefix):
            rest = name.name[len(prefix) :]
            part = _PART.search(rest)
            base, number = (rest[: part.start()], int(part[1])) if part and len(part[1]) < 5 else (rest, 1)
            pieces.setdefault(base, {})[number] = "".join(_QUOTED.findall(name.refers_to))
    return {base: unquote("".join(parts[number] for number in sorted(parts))) for base, parts in pieces.items()}


# --- marks -------------------------------------------------------------------------------------------------------


def coded(role: str) -> str:
    """A sheet's role as part of a defined name: blanks as `_`, what a name may not hold as `.xHHHH.`."""
    return re.sub(r"[^A-Za-z0-9 ]", lambda found: f".x{ord(found.group()):04x}.", role).replace(" ", "_")


def decoded(text: str) -> str:
    """The role that `coded` made `text` from."""
    return re.sub(r"\.x([0-9a-f]{4,6})\.", lambda found: chr(int(found[1], 16)), text.replace("_", " "))


def marks(role: str, tab: str, position: int) -> list[Name]:
    """The two marks of our sheet `role` whose tab reads `tab`."""
    name, cell = SHEET + coded(role), f"{quoted(tab)}!$A$1"
    return [Name(name, cell, hidden=True), Name(name, cell, scope=position, hidden=True)]


def owners(tabs: Sequence[str], names: Sequence[Name]) -> dict[int, str]:
    """Which positions hold sheets of ours: position -> role."""
    found: dict[int, str] = {}
    roles = {name.name[len(SHEET) :]: None for name in names if name.name.startswith(SHEET)}
    for role in roles:
        position = _position(role, tabs, [name for name in names if name.name == SHEET + role])
        if position is not None and position not in found:
            found[position] = decoded(role)
    return found


def _position(role: str, tabs: Sequence[str], of_role: Sequence[Name]) -> int | None:
    whole = [name for name in of_role if name.scope is None]
    local = {name.scope: name for name in of_role if name.scope is not None and name.scope < len(tabs)}
    if whole:
        mentioned = sheets_mentioned(whole[0].refers_to)
        where = _tab_at(mentioned[0], tabs) if mentioned else None
        if where is not None:
            return where
        if not mentioned:
            # The sheet is gone, or only its first row: then its own mark has lost its cell too, a copy's has not.
            local = {scope: name for scope, name in local.items() if not sheets_mentioned(name.refers_to)}
    if len(local) == 1:
        return next(iter(local))
    # Several sheets bear it: only the one with our own name can be told to be no copy.
    return next((scope for scope in local if tabs[scope].casefold() == decoded(role).casefold()), None)


def _tab_at(tab: str, tabs: Sequence[str]) -> int | None:
    wanted = tab.casefold()
    return next((position for position, each in enumerate(tabs) if each.casefold() == wanted), None)


# --- what a layout gave ------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class LaidOut:
    """What the bridge gave a sheet: widths by zero-based column, its charts' fingerprints, print area and titles.

    Print area and titles are cells without the sheet (`A1:F40`); empty: none.
    """

    widths: Mapping[int, float] = field(default_factory=dict)
    charts: tuple[str, ...] = ()
    print_area: str = ""
    print_titles: str = ""

    def text(self) -> str:
        """As one text, which `laid_out` reads back."""
        widths = ",".join(f"{column}={width:g}" for column, width in sorted(self.widths.items()))
        return f"{widths};{','.join(self.charts)};{self.print_area};{self.print_titles}"


def laid_out(text: str) -> LaidOut:
    """The record in `text`; whatever cannot be read counts as not recorded."""
    widths, charts, area, titles = [*text.split(";"), "", "", ""][:4]
    found = re.findall(r"(\d{1,5})=(\d{1,4}(?:\.\d{1,6})?)(?:,|\Z)", widths)
    given = {int(column): float(width) for column, width in found}
    return LaidOut(given, tuple(each for each in charts.split(",") if each), area, titles)
