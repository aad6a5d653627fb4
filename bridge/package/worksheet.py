"""A `Sheet` as the text of a worksheet part (ECMA-376 part 1, 18.3), in the schema's order."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

from bridge.package import xml
from bridge.package.outline import A4
from bridge.package.rows import FormatIndex, sheet_rows, used_range
from bridge.package.styles import Styles
from bridge.page.cells import address
from bridge.page.sheet import DropDown, Highlight, Link, Sheet

_DEFAULT_WIDTH = 9.14
_MOST_LIST_TEXT = 255


@dataclass(frozen=True, slots=True)
class Kept:
    """What a sheet that is laid out anew keeps of the one it replaces.

    `fragments` are whole elements by local name, in the package's own namespaces; `links` hyperlink elements that lead
    outside; `widths` columns the user has set, as the file states them; `paper` the paper size's number (empty: the
    program's default).
    """

    selected: bool = False
    zoom: str = ""
    code_name: str = ""
    paper: str = A4
    widths: Mapping[int, float] = field(default_factory=dict)
    fragments: Mapping[str, str] = field(default_factory=dict)
    links: tuple[str, ...] = ()


def worksheet(sheet: Sheet, styles: Styles, kept: Kept, drawing: str, strict: bool) -> Iterator[bytes]:
    """The part's text in pieces. `drawing` is the relationship id of its drawing (empty: none).

    Raises ValueError for a drop-down that the format cannot hold, FileRefused for more cell formats than it allows.
    """
    yield xml.in_kind(_head(sheet, styles.width_scale, kept), strict).encode()
    for piece in sheet_rows(sheet, styles.xf):
        yield piece.encode()
    yield _tail(sheet, styles.dxf, kept, drawing, strict).encode()


def _head(sheet: Sheet, scale: float, kept: Kept) -> str:
    return "".join(
        (
            xml.DECLARATION,
            f'<worksheet xmlns="{xml.MAIN}" xmlns:r="{xml.OFFICE_RELS}">',
            _properties(sheet, kept),
            _dimension(sheet),
            _view(sheet, kept),
            '<sheetFormatPr defaultRowHeight="15"/>',
            _columns(sheet, scale, kept),
            "<sheetData>",
        )
    )


def _properties(sheet: Sheet, kept: Kept) -> str:
    code = f' codeName="{xml.attribute(kept.code_name)}"' if kept.code_name else ""
    tab = f'<tabColor rgb="FF{sheet.tab_color}"/>' if sheet.tab_color else ""
    return f'<sheetPr{code}>{tab}<pageSetUpPr fitToPage="1"/></sheetPr>'


def _range(first: tuple[int, int], last: tuple[int, int]) -> str:
    return address(*first) if first == last else f"{address(*first)}:{address(*last)}"


def _dimension(sheet: Sheet) -> str:
    used = used_range(sheet)
    return f'<dimension ref="{_range(used[:2], used[2:]) if used else "A1"}"/>'


def _view(sheet: Sheet, kept: Kept) -> str:
    attributes = ' showGridLines="0"'
    attributes += ' rightToLeft="1"' if sheet.right_to_left else ""
    attributes += ' tabSelected="1"' if kept.selected else ""
    attributes += f' zoomScale="{kept.zoom}" zoomScaleNormal="{kept.zoom}"' if kept.zoom else ""
    return f'<sheetViews><sheetView{attributes} workbookViewId="0">{_pane(sheet)}</sheetView></sheetViews>'


def _pane(sheet: Sheet) -> str:
    row, column = sheet.freeze or (0, 0)
    if not row and not column:
        return ""
    split = (f' xSplit="{column}"' if column else "") + (f' ySplit="{row}"' if row else "")
    active = "bottomRight" if row and column else "bottomLeft" if row else "topRight"
    cell = address(row, column)
    return (
        f'<pane{split} topLeftCell="{cell}" activePane="{active}" state="frozen"/>'
        f'<selection pane="{active}" activeCell="{cell}" sqref="{cell}"/>'
    )


def stated_width(characters: float, scale: float) -> float:
    """The width attribute that shows so many characters, padding included (18.3.1.13), for digits of 7 pixels."""
    return min(255.0, int((characters * scale * 7 + 5) / 7 * 256) / 256)


def stated_widths(sheet: Sheet, scale: float) -> dict[int, float]:
    """The widths a layout states, by column: those it gives, and the hidden columns'."""
    columns = sorted(set(sheet.widths) | sheet.hidden_columns)
    return {column: stated_width(sheet.widths.get(column, _DEFAULT_WIDTH), scale) for column in columns}


def _columns(sheet: Sheet, scale: float, kept: Kept) -> str:
    out = []
    for column, width in sorted({**stated_widths(sheet, scale), **kept.widths}.items()):
        hidden = ' hidden="1"' if column in sheet.hidden_columns else ""
        out.append(f'<col min="{column + 1}" max="{column + 1}" width="{width:g}"{hidden} customWidth="1"/>')
    return f"<cols>{''.join(out)}</cols>" if out else ""


def _tail(sheet: Sheet, dxf: FormatIndex, kept: Kept, drawing: str, strict: bool) -> str:
    """Everything after the rows. Kept fragments already are in the package's kind of namespaces."""

    def keep(*names: str) -> str:
        return "".join(kept.fragments.get(name, "") for name in names)

    ours = [
        "</sheetData>",
        keep("sheetProtection", "protectedRanges"),
        _merges(sheet),
        "".join(_highlight(each, dxf, number + 1) for number, each in enumerate(sheet.highlights)),
        _drop_downs(sheet),
        _links(sheet, kept),
        '<pageMargins left="0.5" right="0.5" top="0.6" bottom="0.6" header="0.3" footer="0.3"/>',
        _page_setup(sheet, kept),
        keep("headerFooter", "rowBreaks", "colBreaks", "customProperties"),
        _no_false_alarms(sheet),
        f'<drawing r:id="{drawing}"/>' if drawing else "",
        keep("legacyDrawing", "legacyDrawingHF", "picture"),
        "</worksheet>",
    ]
    return xml.in_kind("".join(ours), strict)


def _merges(sheet: Sheet) -> str:
    cells = "".join(f'<mergeCell ref="{_range(each.first, each.last)}"/>' for each in sheet.merges)
    return f'<mergeCells count="{len(sheet.merges)}">{cells}</mergeCells>' if cells else ""


def _highlight(highlight: Highlight, dxf: FormatIndex, priority: int) -> str:
    where = _range(highlight.first, highlight.last)
    return (
        f'<conditionalFormatting sqref="{where}"><cfRule type="expression" dxfId="{dxf(highlight.format)}" '
        f'priority="{priority}"><formula>{xml.formula(highlight.formula.removeprefix("="))}</formula></cfRule>'
        "</conditionalFormatting>"
    )


def _drop_downs(sheet: Sheet) -> str:
    rules = "".join(_drop_down(each) for each in sheet.drop_downs)
    return f'<dataValidations count="{len(sheet.drop_downs)}">{rules}</dataValidations>' if rules else ""


def _drop_down(drop_down: DropDown) -> str:
    attributes = ' showErrorMessage="1"' if drop_down.strict else ""
    if drop_down.prompt or drop_down.prompt_title:
        title, prompt = xml.attribute(drop_down.prompt_title[:32]), xml.attribute(drop_down.prompt[:255])
        attributes += f' showInputMessage="1" promptTitle="{title}" prompt="{prompt}"'
    return (
        f'<dataValidation type="list" allowBlank="1"{attributes} sqref="{_range(drop_down.first, drop_down.last)}">'
        f"<formula1>{xml.formula(_choices(drop_down))}</formula1></dataValidation>"
    )


def _choices(drop_down: DropDown) -> str:
    if isinstance(drop_down.choices, str):
        return drop_down.choices.removeprefix("=")
    joined = ",".join(drop_down.choices)
    if len(joined) > _MOST_LIST_TEXT or any("," in choice for choice in drop_down.choices):
        raise ValueError(f"these choices need cells of their own: {joined[:300]}")
    return '"' + joined.replace('"', '""') + '"'


def _links(sheet: Sheet, kept: Kept) -> str:
    inner = "".join(_link(each) for each in sheet.links) + "".join(kept.links)
    return f"<hyperlinks>{inner}</hyperlinks>" if inner else ""


def _link(link: Link) -> str:
    tip = f' tooltip="{xml.attribute(link.tooltip[:255])}"' if link.tooltip else ""
    return f'<hyperlink ref="{address(link.row, link.column)}" location="{xml.attribute(link.location)}"{tip}/>'


def _page_setup(sheet: Sheet, kept: Kept) -> str:
    paper = f' paperSize="{kept.paper}"' if kept.paper else ""
    fit = f'fitToWidth="{sheet.fit_width}" fitToHeight="{sheet.fit_height}"'
    return f'<pageSetup{paper} {fit} orientation="{"landscape" if sheet.landscape else "portrait"}"/>'


def _no_false_alarms(sheet: Sheet) -> str:
    """No green corners for numbers written as texts and formulas unlike their neighbours: both are meant."""
    used = used_range(sheet)
    if used is None:
        return ""
    checks = 'numberStoredAsText="1" formula="1" formulaRange="1" unlockedFormula="1" emptyCellReference="1"'
    return f'<ignoredErrors><ignoredError sqref="{_range(used[:2], used[2:])}" {checks}/></ignoredErrors>'
