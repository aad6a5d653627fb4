"""Taking our sheets, names and the use of our styles out of a workbook again, for a clean hand-over."""

from __future__ import annotations

import re
from collections.abc import Iterator

from bridge.package import mark, names, our_names, relationships, styles
from bridge.package.amendment import Amendment
from bridge.package.archive import Member, part_key, readable
from bridge.package.package import Package
from bridge.package.relationships import Relationship


def strip(package: Package) -> bytes:
    """The workbook's bytes without anything of ours; `package.data` itself where there is nothing of ours.

    Styles we appended go where nothing uses them and no other program has saved the workbook since (then they can
    no longer be told from the user's). Formulas of the user's that speak of our sheets or names stay as they are.
    Raises FileRefused: something of the user's would go with a sheet of ours, no visible sheet would be left.
    """
    ours = [sheet for sheet in package.sheets if sheet.ours]
    if not ours and not any(mark.is_ours(name.name) for name in package.defined_names):
        return package.data
    amendment = Amendment(package)
    for sheet in ours:
        amendment.take_out(sheet)
    our_names.drop_all(amendment.workbook, package)
    made = set(mark.texts(package.defined_names, mark.MADE).get("", "").split(","))
    if mark.MADE_NAMES in made:
        names.drop_empty_list(amendment.workbook)
    _restore_styles(amendment, made)
    return amendment.finish()


def _restore_styles(amendment: Amendment, made: set[str]) -> None:
    package = amendment.package
    relation = next((each for each in package.workbook_relationships if each.kind == "styles"), None)
    root = amendment.draft.xml(relation.part) if relation and relation.part else None
    if relation is None or relation.part is None or root is None:
        return
    record = mark.texts(package.defined_names, mark.STYLES).get("", "")
    ours = styles.ours(root, record)
    if ours is None or _used(package, ours):
        return
    if mark.MADE_STYLES in made:
        _drop_styles(amendment, relation, mark.MADE_STYLES_RELATION in made)
    else:
        styles.take_out(root, ours)
        amendment.draft.write_xml(relation.part, root)
        if mark.MADE_STYLES_TYPE in made:
            amendment.draft.forget_type(relation.part)


def _drop_styles(amendment: Amendment, relation: Relationship, relation_too: bool) -> None:
    """The workbook had no styles part before: it goes again."""
    assert relation.part is not None
    amendment.draft.remove(relation.part)
    if relation_too:
        relationships.drop(amendment.relations, [relation.id])


# --- what the user's sheets use ------------------------------------------------------------------------------------

_FORMAT_USES = re.compile(rb"""\s(?:s|style)\s*=\s*["'](\d{1,6})["']""")
_HIGHLIGHT_USES = re.compile(rb"""\s(?:\w*[dD]xfId)\s*=\s*["'](\d{1,6})["']""")


def _used(package: Package, ours: styles.Ours) -> bool:
    """Whether a sheet, table or pivot table of the user's uses a format that is ours.

    What of a damaged part can be read is looked at; an index beyond all lists, which broken files have, is no use.
    """
    return any(_uses(member, is_sheet, ours) for member, is_sheet in _users_members(package))


def _uses(member: Member, is_sheet: bool, ours: styles.Ours) -> bool:
    seam = b""
    for piece in readable(member):
        text = seam + piece
        if b"\0" in text:  # UTF-16: not worth a second reader; the styles stay
            return True
        if is_sheet and any(int(number) in ours.formats for number in set(_FORMAT_USES.findall(text))):
            return True
        if any(int(number) in ours.highlights for number in set(_HIGHLIGHT_USES.findall(text))):
            return True
        seam = text[-32:]
    return False


def _users_members(package: Package) -> Iterator[tuple[Member, bool]]:
    """The members that may use cell formats or highlights, and whether each is a sheet."""
    ours = {part_key(sheet.part) for sheet in package.sheets if sheet.ours}
    sheets = {part_key(sheet.part) for sheet in package.sheets if sheet.part} - ours
    for key, member in package.parts.items():
        if key in sheets:
            yield member, True
        elif "able+xml" in package.types.of(key):  # tables and pivot tables
            yield member, False
