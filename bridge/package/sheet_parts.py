"""A sheet's own parts: worksheet, drawing, charts, and the relationships between them."""

from __future__ import annotations

from bridge.package import content_types as types
from bridge.package import drawing, names, relationships, xml
from bridge.package.amendment import Amendment
from bridge.package.charts import chart_part, fingerprint_of
from bridge.package.mark import LaidOut
from bridge.package.names import Name
from bridge.package.relationships import Relationship
from bridge.package.styles import Styles
from bridge.package.user_objects import Standing
from bridge.package.worksheet import stated_widths, worksheet
from bridge.page.cells import column_letters, quoted, reference
from bridge.page.sheet import Sheet

_DRAWING_TYPE = f"{xml.OFFICE_RELS}/drawing"
_CHART_TYPE = f"{xml.OFFICE_RELS}/chart"
# From this many cells on a part is deflated faster and comes out a little larger.
_LONG, _FAST, _TIGHT = 50_000, 1, 6


def write_sheet(amendment: Amendment, sheet: Sheet, part: str, styles: Styles, found: Standing) -> None:
    """Write the parts of `sheet`, whose worksheet is `part`, keeping what was `found` of the user's."""
    strict = amendment.package.strict
    drawn = _write_drawing(amendment, sheet, found)
    rows = [_row(each, strict) for each in found.relations]
    drawing_id = ""
    if drawn:
        stay = [each.id for each in found.relations]
        drawing_id = found.drawing.id if found.drawing else relationships.fresh_id(stay)
        rows.append((drawing_id, xml.in_kind(_DRAWING_TYPE, strict), relationships.relative(part, drawn), False))
    amendment.draft.write_relationships(part, relationships.written(rows) if rows else None)
    pieces = worksheet(sheet, styles, found.kept, drawing_id, strict)
    amendment.draft.write(part, pieces, types.WORKSHEET, _FAST if _cells(sheet) > _LONG else _TIGHT)


def _cells(sheet: Sheet) -> int:
    blocks = (len(block.columns) * len(block.columns[0].values) for block in sheet.blocks if block.columns)
    return len(sheet.cells) + sum(blocks)


def _row(relation: Relationship, strict: bool) -> tuple[str, str, str, bool]:
    """A relationship that stays, as it is written again."""
    return relation.id, xml.in_kind(relation.type, strict), relation.target, relation.part is None


def _write_drawing(amendment: Amendment, sheet: Sheet, found: Standing) -> str:
    """Write the drawing with our charts and the user's own objects; its part, empty if there is nothing to draw."""
    if not sheet.charts and not found.user_anchors:
        return ""
    strict, draft = amendment.package.strict, amendment.draft
    old = found.drawing.part if found.drawing else None
    part = old or draft.fresh(amendment.folder("drawings/drawing{}.xml"))
    root, rows = drawing.empty_drawing(strict), list[tuple[str, str, str, bool]]()
    if old and found.drawing_root is not None and found.user_anchors:
        root, rows = found.drawing_root, [_row(each, strict) for each in _users_relations(amendment, old, found)]
        for anchor in found.our_anchors:
            xml.remove_element(anchor)
    ids = []
    for chart in sheet.charts:
        chart_at = draft.fresh(amendment.folder("charts/chart{}.xml"))
        draft.write(chart_at, [chart_part(chart, strict)], types.CHART)
        ids.append(relationships.fresh_id(row[0] for row in rows))
        target = relationships.relative(part, chart_at)
        rows.append((ids[-1], xml.in_kind(_CHART_TYPE, strict), target, False))
    drawing.add_charts(root, sheet.name, sheet.charts, ids, strict)
    draft.write(part, [xml.serialise(root)], types.DRAWING)
    draft.write_relationships(part, relationships.written(rows) if rows else None)
    return part


def _users_relations(amendment: Amendment, part: str, found: Standing) -> list[Relationship]:
    """The drawing's relationships without those to our charts."""
    ours = {drawing.chart_relation(each) for each in found.our_anchors}
    return [each for each in amendment.package.relationships(part) if each.id not in ours]


def laid_out(sheet: Sheet, tab: str, scale: float) -> LaidOut:
    """What this layout gives the sheet, for telling later what the user changed."""
    return LaidOut(
        stated_widths(sheet, scale),
        tuple(fingerprint_of(chart) for chart in sheet.charts),
        names.without_sheets(_print_area(sheet, tab)),
        names.without_sheets(_print_titles(sheet, tab)),
    )


def print_names(sheet: Sheet, tab: str, found: Standing) -> tuple[Name, ...]:
    """The sheet's print area and repeated rows: the user's where the user changed them, else the layout's."""
    given = {names.PRINT_AREA: _print_area(sheet, tab), names.PRINT_TITLES: _print_titles(sheet, tab)}
    users = {name.name: name.refers_to for name in found.print_names}
    chosen = {kind: users.get(kind, "") if kind in found.own_print else text for kind, text in given.items()}
    return tuple(Name(kind, text) for kind, text in chosen.items() if text)


def _print_area(sheet: Sheet, tab: str) -> str:
    areas = (sheet.print_area, *sheet.more_print_areas) if sheet.print_area else ()
    return ",".join(reference(tab, *area) for area in areas if area)


def _print_titles(sheet: Sheet, tab: str) -> str:
    parts = []
    if sheet.title_columns is not None:
        first, last = sheet.title_columns
        parts.append(f"{quoted(tab)}!${column_letters(first)}:${column_letters(last)}")
    if sheet.print_titles is not None:
        first, last = sheet.print_titles
        parts.append(f"{quoted(tab)}!${first + 1}:${last + 1}")
    return ",".join(parts)
