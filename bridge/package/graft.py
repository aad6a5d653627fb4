"""Putting our sheets into a workbook's package: new parts in, four shared parts amended, all else byte for byte.

The shared parts are the content types, the workbook part and its relationships, and the styles; the calculation
chain only where it names a sheet of ours. The same input gives the same bytes, and grafting twice changes nothing.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package import content_types as types
from bridge.package import mark, our_names, sheet_parts, styles, workbook_part, xml
from bridge.package.amendment import Amendment
from bridge.package.our_names import Marked
from bridge.package.package import Package, SheetEntry
from bridge.package.styles import Styles
from bridge.package.user_objects import NOTHING, Standing, refuse_in_the_way, standing
from bridge.package.worksheet import stated_widths
from bridge.page.sheet import DefinedName, Sheet

_WORKSHEET_TYPE = f"{xml.OFFICE_RELS}/worksheet"
_STYLES_TYPE = f"{xml.OFFICE_RELS}/styles"


@dataclass(frozen=True, slots=True)
class _Place:
    """A sheet and the entry it replaces (None: it is appended)."""

    sheet: Sheet
    entry: SheetEntry | None

    @property
    def tab(self) -> str:
        return self.entry.name if self.entry else self.sheet.title or self.sheet.name


def graft(
    package: Package,
    sheets: Sequence[Sheet],
    names: Sequence[DefinedName],
    state: Mapping[str, str],
    *,
    adopt: frozenset[str] = frozenset(),
    remove: frozenset[str] = frozenset(),
) -> bytes:
    """The workbook's bytes with these sheets, names and stored texts in it.

    Each sheet replaces ours of the same `name`, wherever the user moved it and whatever its tab says, or is appended
    in the order given. Sheets of ours that are neither in `sheets` nor named in `remove` stay as they are.
    `adopt` holds tab texts of unmarked sheets that may become ours; an empty one with our name may without.

    Raises FileRefused, with nothing changed: a sheet or a name of the user's has one of our names; something of the
    user's stands on a sheet in the way; too many cell formats; a damaged part. Raises ValueError where a sheet's
    `title` is not what its tab says, a name can be none, or the format cannot hold what a sheet asks for.
    """
    places = _places(package, sheets, adopt)
    our_names.refuse_foreign(package, names, [place.tab for place in places])
    amendment = Amendment(package)
    made = _made_before(package, amendment.workbook)
    styles_part, stylesheet = _styles(amendment, made)
    for entry in package.sheets:
        if entry.ours in remove:
            amendment.take_out(entry)
    marked = _put_in(amendment, places, stylesheet)
    our_names.renew(amendment.workbook, package, marked, names, _remembered(names, state, stylesheet, made))
    amendment.draft.write_xml(styles_part, stylesheet.root, types.STYLES)
    return amendment.finish()


# --- where each sheet goes -----------------------------------------------------------------------------------------


def _places(package: Package, sheets: Sequence[Sheet], adopt: frozenset[str]) -> list[_Place]:
    adoptable = {tab.casefold() for tab in adopt}
    return [_Place(sheet, _entry_for(package, sheet, adoptable)) for sheet in sheets]


def _entry_for(package: Package, sheet: Sheet, adoptable: set[str]) -> SheetEntry | None:
    tab = sheet.title or sheet.name
    entry = package.of_role(sheet.name)
    if entry is None:
        entry = package.entry(tab)
        if entry is not None and not _may_become_ours(entry, adoptable):
            raise FileRefused(say("sheet-not-ours", sheet=entry.name))
    if entry is not None and entry.name.casefold() != tab.casefold():
        raise ValueError(f"the sheet {sheet.name!r} was laid out for the tab {tab!r}, but the tab says {entry.name!r}")
    return entry


def _may_become_ours(entry: SheetEntry, adoptable: set[str]) -> bool:
    plain = entry.ours is None and entry.kind == "worksheet" and bool(entry.part)
    return plain and (entry.name.casefold() in adoptable or entry.empty)


# --- sheets --------------------------------------------------------------------------------------------------------


def _put_in(amendment: Amendment, places: Sequence[_Place], stylesheet: Styles) -> list[Marked]:
    """Write the sheets' parts and add new ones to the workbook."""
    # Our old charts go first, from all sheets, so that the new ones get the same part names again.
    found = [_cleared(amendment, place, stylesheet.width_scale) for place in places]
    return [_put(amendment, place, stylesheet, each) for place, each in zip(places, found, strict=True)]


def _cleared(amendment: Amendment, place: _Place, scale: float) -> Standing:
    """What of the user's stands on the sheet to be replaced; our charts are taken off it."""
    if place.entry is None:
        return NOTHING
    found = standing(amendment.package, place.entry, stated_widths(place.sheet, scale))
    refuse_in_the_way(found.objects)
    amendment.release(place.entry)
    for part in found.our_charts:
        amendment.draft.remove(part)
    return found


def _put(amendment: Amendment, place: _Place, stylesheet: Styles, found: Standing) -> Marked:
    sheet, strict = place.sheet, amendment.package.strict
    part = place.entry.part if place.entry else amendment.draft.fresh(amendment.folder("worksheets/sheet{}.xml"))
    sheet_parts.write_sheet(amendment, sheet, part, stylesheet, found)
    if place.entry:
        relation = place.entry.relation
    else:
        relation = amendment.relate(_WORKSHEET_TYPE, part)
        workbook_part.append_sheet(amendment.workbook, place.tab, relation, strict)
    laid = sheet_parts.laid_out(sheet, place.tab, stylesheet.width_scale)
    return Marked(sheet.name, place.tab, relation, laid, sheet_parts.print_names(sheet, place.tab, found))


# --- styles and what is remembered ---------------------------------------------------------------------------------


def _styles(amendment: Amendment, made: set[str]) -> tuple[str, Styles]:
    """The styles part's name and its stylesheet; both are made where the workbook has none."""
    relation = next((each for each in amendment.package.workbook_relationships if each.kind == "styles"), None)
    part = relation.part if relation else None
    root = amendment.draft.xml(part) if part else None
    if root is None:
        made.add(mark.MADE_STYLES)
        root = styles.new_stylesheet(xml.namespace(amendment.workbook))
    elif part and amendment.package.types.of(part) != types.STYLES:
        made.add(mark.MADE_STYLES_TYPE)
    if part is None:
        made.add(mark.MADE_STYLES_RELATION)
        part = amendment.draft.fresh(amendment.folder("styles{}.xml"))
        amendment.relate(_STYLES_TYPE, part)
    return part, Styles(root, mark.texts(amendment.package.defined_names, mark.STYLES).get("", ""))


def _made_before(package: Package, workbook: etree._Element) -> set[str]:
    """What the workbook lacked before our first graft."""
    earlier = mark.texts(package.defined_names, mark.MADE).get("")
    if earlier is not None:
        return set(filter(None, earlier.split(",")))
    return {mark.MADE_NAMES} if xml.child(workbook, "definedNames") is None else set()


def _remembered(
    names: Sequence[DefinedName], state: Mapping[str, str], stylesheet: Styles, made: set[str]
) -> dict[str, str]:
    """The texts to be stored, by the name that holds each."""
    texts = {mark.STATE + key: text for key, text in sorted(state.items())}
    texts[mark.NAMES] = ",".join(name.name for name in names)
    texts[mark.STYLES] = stylesheet.record()
    texts[mark.MADE] = ",".join(sorted(made))
    return texts
