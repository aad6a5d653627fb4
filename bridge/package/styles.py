"""The styles part (ECMA-376 part 1, 18.8), only ever appended to: no existing index changes its meaning.

A cell's `Format` becomes a font, a fill, a border, a number format and the cell format (`xf`) that ties them; equal
items that are already there are used again. Items are compared by local name, attributes and children, because the
same item looks different in canonical XML when the part uses a namespace prefix.
"""

from __future__ import annotations

import re
import zlib
from collections.abc import Iterator
from dataclasses import dataclass

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package import style_items
from bridge.package.xml import (
    child,
    children,
    insert_in_order,
    legal,
    local,
    namespace,
    remove_element,
)
from bridge.page.cells import Format

MOST_FORMATS = 64_000  # Excel's published limit of cell formats in a workbook

_ORDER = (
    "numFmts",
    "fonts",
    "fills",
    "borders",
    "cellStyleXfs",
    "cellXfs",
    "cellStyles",
    "dxfs",
    "tableStyles",
    "colors",
    "extLst",
)
_COUNTED = ("numFmts", "fonts", "fills", "borders", "cellStyleXfs", "cellXfs", "cellStyles", "dxfs")
# The built-in number formats that look the same in every language (18.8.30).
_BUILT_IN = {
    "General": 0,
    "0": 1,
    "0.00": 2,
    "#,##0": 3,
    "#,##0.00": 4,
    "0%": 9,
    "0.00%": 10,
    "0.00E+00": 11,
    "@": 49,
}
_FIRST_CUSTOM = 164

Key = tuple[object, ...]


def key(element: etree._Element) -> Key:
    """What makes two style items the same: local name, attributes, children, text."""
    attributes = sorted((etree.QName(name).localname, str(value)) for name, value in element.attrib.items())
    inner = tuple(key(each) for each in element if isinstance(each.tag, str))
    return local(element), tuple(attributes), inner, (element.text or "").strip()


def new_stylesheet(main: str) -> etree._Element:
    """A styles part for a workbook that has none: what a cell without a format gets anyway."""
    text = (
        f'<styleSheet xmlns="{main}">'
        '<fonts count="1"><font><sz val="11"/><name val="Calibri"/><family val="2"/></font></fonts>'
        '<fills count="2"><fill><patternFill patternType="none"/></fill>'
        '<fill><patternFill patternType="gray125"/></fill></fills>'
        '<borders count="1"><border><left/><right/><top/><bottom/><diagonal/></border></borders>'
        '<cellStyleXfs count="1"><xf numFmtId="0" fontId="0" fillId="0" borderId="0"/></cellStyleXfs>'
        '<cellXfs count="1"><xf numFmtId="0" fontId="0" fillId="0" borderId="0" xfId="0"/></cellXfs>'
        '<cellStyles count="1"><cellStyle name="Normal" xfId="0" builtinId="0"/></cellStyles></styleSheet>'
    )
    return etree.fromstring(text)


def _items(holder: etree._Element, part: str = "styles") -> Iterator[etree._Element]:
    """A list's items in index order; an item with alternatives counts once, as its fallback reads."""
    for element in holder:
        if local(element) == "AlternateContent":
            branches = [list(children_of_any(branch)) for branch in element if isinstance(branch.tag, str)]
            if len({len(branch) for branch in branches}) != 1:
                raise FileRefused(say("part-damaged", part=part, detail="its lists have no certain length"))
            yield from branches[-1]
        elif isinstance(element.tag, str):
            yield element


def children_of_any(parent: etree._Element) -> Iterator[etree._Element]:
    """Child elements of any namespace."""
    return (each for each in parent if isinstance(each.tag, str))


class _List:
    """One counted list of the stylesheet, with an index by key."""

    def __init__(self, styles: etree._Element, name: str) -> None:
        self.styles, self.name = styles, name
        self.element = child(styles, name)
        if self.element is not None and len(self.element) > MOST_FORMATS:
            raise FileRefused(say("too-many-formats", count=len(self.element), added=1, limit=MOST_FORMATS))
        self.items = [] if self.element is None else [key(item) for item in _items(self.element)]
        self.index = {item: number for number, item in reversed(list(enumerate(self.items)))}

    @property
    def length(self) -> int:
        """How many items the list has; -1 if it is not there."""
        return -1 if self.element is None else len(self.items)

    def number_of(self, item: etree._Element) -> int:
        """The index of an item equal to `item`, which is appended if there is none."""
        wanted = key(item)
        if wanted not in self.index:
            self.append(item, wanted)
        return self.index[wanted]

    def append(self, item: etree._Element, its_key: Key) -> None:
        if self.element is None:
            self.element = etree.Element(f"{{{namespace(self.styles)}}}{self.name}", {"count": "0"}, nsmap=None)
            insert_in_order(self.styles, self.element, _ORDER)
        self.element.append(item)
        _count_by(self.element, 1)
        self.index.setdefault(its_key, len(self.items))
        self.items.append(its_key)


def _count_by(holder: etree._Element, change: int) -> None:
    """Change the stated count by as many as the list grew; a list that states none, or a wrong one, stays so."""
    stated = holder.get("count")
    if stated is not None and re.fullmatch(r"-?\d{1,9}", stated):
        holder.set("count", str(int(stated) + change))


class Styles:
    """A stylesheet being added to. `root` is changed in place.

    `before` are the lists' lengths before the bridge added anything: those of `earlier`, the record of the last
    graft, if the stylesheet still is as that left it.
    """

    def __init__(self, root: etree._Element, earlier: str = "") -> None:
        self.root = root
        self._lists = {name: _List(root, name) for name in _COUNTED}
        sound = ours(root, earlier)
        self.before = sound.lengths if sound else {name: each.length for name, each in self._lists.items()}
        self._xfs: dict[Format, int] = {}
        self._dxfs: dict[Format, int] = {}
        self._by_identity: dict[int, tuple[Format, int]] = {}

    def xf(self, format_: Format) -> int:
        """The index for a cell's `s` attribute. Raises FileRefused beyond the format's limit."""
        # Hashing a format costs more than the rest of writing a cell, and sheets share few format objects.
        known = self._by_identity.get(id(format_))
        if known is None:
            number = self._xfs.get(format_)
            if number is None:
                number = self._xfs[format_] = self._new_xf(format_)
            known = self._by_identity[id(format_)] = (format_, number)
        return known[1]

    def dxf(self, format_: Format) -> int:
        """The index for a highlight's `dxfId`."""
        if format_ not in self._dxfs:
            self._dxfs[format_] = self._lists["dxfs"].number_of(self._built(style_items.dxf(format_)))
        return self._dxfs[format_]

    def _new_xf(self, format_: Format) -> int:
        if self._lists["cellXfs"].element is None or not self._lists["cellXfs"].items:
            self._add_plain_xf()
        fills = self._lists["fills"]
        if len(fills.items) < 2:  # the first two are the format's own (18.8.21)
            for pattern in ("none", "gray125")[len(fills.items) :]:
                item = self._built(f'<fill><patternFill patternType="{pattern}"/></fill>')
                fills.append(item, key(item))
        number = self._lists["cellXfs"].number_of(self._built(self._xf(format_)))
        count, was = len(self._lists["cellXfs"].items), max(0, self.before["cellXfs"])
        if count > MOST_FORMATS and count > was:
            raise FileRefused(say("too-many-formats", count=was, added=count - was, limit=MOST_FORMATS))
        return number

    def _add_plain_xf(self) -> None:
        """Index 0 is what cells without a format get: it must not become one of ours."""
        for name, text in (("fonts", _PLAIN_FONT), ("borders", _PLAIN_BORDER)):
            if not self._lists[name].items:
                item = self._built(text)
                self._lists[name].append(item, key(item))
        item = self._built('<xf numFmtId="0" fontId="0" fillId="0" borderId="0"/>')
        self._lists["cellXfs"].append(item, key(item))

    def _xf(self, format_: Format) -> str:
        font = self._lists["fonts"].number_of(self._built(style_items.font(format_)))
        fill = self._lists["fills"].number_of(self._built(style_items.fill(format_)))
        border = self._lists["borders"].number_of(self._built(style_items.border(format_)))
        normal = self._normal()
        return (
            f'<xf numFmtId="{self._number_format(format_.number_format)}" fontId="{font}" fillId="{fill}" '
            f'borderId="{border}"{"" if normal is None else f" xfId={chr(34)}{normal}{chr(34)}"} '
            'applyNumberFormat="1" applyFont="1" applyFill="1" applyBorder="1" applyAlignment="1" applyProtection="1">'
            f'{style_items.alignment(format_)}<protection locked="{int(format_.locked)}"/></xf>'
        )

    def _normal(self) -> int | None:
        """The index of the Normal style among the style formats, if there are any."""
        if not self._lists["cellStyleXfs"].items:
            return None
        holder = self._lists["cellStyles"].element
        styles = () if holder is None else children(holder, "cellStyle")
        found = next((style.get("xfId") for style in styles if style.get("builtinId") == "0"), None)
        number = int(found) if found is not None and found.isdecimal() and len(found) < 9 else 0
        return number if number < len(self._lists["cellStyleXfs"].items) else 0

    def _number_format(self, code: str) -> int:
        listed = self._number_formats()
        built_in = _BUILT_IN.get(code)
        # A file may redefine a built-in number (one in the wild makes 0 a date): then it is no longer what we mean.
        if built_in is not None and listed.get(built_in, code) == code:
            return built_in
        for number, listed_code in listed.items():
            if listed_code == code:
                return number
        number = max([_FIRST_CUSTOM - 1, *listed]) + 1
        if number > 60_000:
            number = next(free for free in range(_FIRST_CUSTOM, 60_000) if free not in listed)
        item = etree.Element(f"{{{namespace(self.root)}}}numFmt", {"numFmtId": str(number), "formatCode": legal(code)})
        self._lists["numFmts"].append(item, key(item))
        return number

    def _number_formats(self) -> dict[int, str]:
        holder = self._lists["numFmts"].element
        found: dict[int, str] = {}
        for item in () if holder is None else _items(holder):
            number = item.get("numFmtId", "")
            if number.isdecimal() and len(number) < 9:
                found.setdefault(int(number), item.get("formatCode", ""))
        return found

    def _built(self, text: str) -> etree._Element:
        """An item from its text, in the stylesheet's own namespace."""
        item = etree.fromstring(text)
        main = namespace(self.root)
        for each in item.iter():
            each.tag = f"{{{main}}}{each.tag}"
        return item

    @property
    def width_scale(self) -> float:
        """By how much widths meant for digits of 7 pixels must grow for this workbook's Normal font."""
        style = self._normal()
        holder = self._lists["cellStyleXfs"].element
        if style is None or holder is None:
            return 1.0
        font = list(_items(holder))[style].get("fontId", "")
        fonts = self._lists["fonts"].element
        items = [] if fonts is None else list(_items(fonts))
        if not font.isdecimal() or len(font) > 8 or int(font) >= min(len(items), self.before["fonts"]):
            return 1.0
        return 7 / style_items.digit_width(items[int(font)])

    def record(self) -> str:
        """What `ours` needs to tell our items from the user's."""
        counts = ",".join(f"{name}={self.before[name]}" for name in _COUNTED)
        return f"{counts},sum={_checksum(self.root, self.before)}"


_PLAIN_FONT = '<font><sz val="11"/><name val="Calibri"/><family val="2"/></font>'
_PLAIN_BORDER = "<border><left/><right/><top/><bottom/><diagonal/></border>"


# --- taking our items out again --------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Ours:
    """Which items are ours: `lengths` are the lists' before the bridge added anything (-1: the list was not there).

    `formats` and `highlights` are the indexes of our cell formats and differential formats.
    """

    lengths: dict[str, int]
    formats: range
    highlights: range


def ours(root: etree._Element, record: str) -> Ours | None:
    """Which items are ours, if `root` still is as our last graft left it; else None.

    Another program that saves the workbook writes its styles anew; then ours cannot be told from the user's.
    """
    lengths = _parsed(record)
    if lengths is None or not record.endswith(f"sum={_checksum(root, lengths)}"):
        return None
    formats, highlights = _List(root, "cellXfs"), _List(root, "dxfs")
    return Ours(
        lengths,
        range(max(0, lengths["cellXfs"]), len(formats.items)),
        range(max(0, lengths["dxfs"]), len(highlights.items)),
    )


def take_out(root: etree._Element, added: Ours) -> None:
    """Take the items the bridge added out of the stylesheet."""
    for name, length in added.lengths.items():
        holder = child(root, name)
        if holder is None:
            continue
        if length < 0:
            remove_element(holder)
            continue
        extra = len(list(_items(holder))) - length
        elements = list(children_of_any(holder))
        for item in elements[len(elements) - extra :]:
            remove_element(item)
        _count_by(holder, -extra)


def _parsed(record: str) -> dict[str, int] | None:
    found = {name: int(number) for name, number in re.findall(r"(\w+)=(-?\d{1,7})(?=,)", record)}
    return found if set(found) == set(_COUNTED) else None


def _checksum(root: etree._Element, lengths: dict[str, int]) -> str:
    """A checksum over the items beyond `lengths` and over how many stand before them."""
    seen = 0
    for name in _COUNTED:
        holder = child(root, name)
        items = [] if holder is None else [key(item) for item in _items(holder)]
        ours = items[max(0, lengths[name]) :]
        seen = zlib.crc32(repr((name, holder is None, min(len(items), lengths[name]), ours)).encode(), seen)
    return f"{seen:08x}"
