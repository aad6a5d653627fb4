"""Fonts, fills, borders and the rest of a `Format` as items of the styles part (ECMA-376 part 1, 18.8)."""

from __future__ import annotations

import math

from lxml import etree

from bridge.package.xml import child
from bridge.page.cells import Format


def _size(size: float) -> str:
    return f"{size:g}"


def _rgb(tag: str, colour: str) -> str:
    return f'<{tag} rgb="FF{colour.upper()}"/>'


def font(format_: Format) -> str:
    """A font."""
    flags = "".join(
        tag for tag, on in (("<b/>", format_.bold), ("<i/>", format_.italic), ("<u/>", format_.underline)) if on
    )
    colour = _rgb("color", format_.color) if format_.color else ""
    return f'<font>{flags}<sz val="{_size(format_.size)}"/>{colour}<name val="{format_.font}"/><family val="2"/></font>'


def fill(format_: Format) -> str:
    """A fill, which may be none."""
    if not format_.fill:
        return '<fill><patternFill patternType="none"/></fill>'
    colour = _rgb("fgColor", format_.fill)
    return f'<fill><patternFill patternType="solid">{colour}<bgColor indexed="64"/></patternFill></fill>'


def _edge(tag: str, style: str | None, colour: str) -> str:
    return f'<{tag} style="{style}">{_rgb("color", colour)}</{tag}>' if style else f"<{tag}/>"


def border(format_: Format) -> str:
    """A border, of which only top and bottom may show."""
    top = _edge("top", format_.border_top, format_.border_color)
    bottom = _edge("bottom", format_.border_bottom, format_.border_color)
    return f"<border><left/><right/>{top}{bottom}<diagonal/></border>"


def alignment(format_: Format) -> str:
    """A cell format's alignment."""
    horizontal = format_.align or ("left" if format_.indent else None)
    attributes = [
        f'horizontal="{horizontal}"' if horizontal else "",
        f'vertical="{format_.valign}"' if format_.valign else "",
        'wrapText="1"' if format_.wrap else "",
        f'indent="{format_.indent}"' if format_.indent else "",
    ]
    return f"<alignment {' '.join(each for each in attributes if each)}/>"


def dxf(format_: Format) -> str:
    """A differential format: only what a highlight changes."""
    flags = "".join(tag for tag, on in (("<b/>", format_.bold), ("<i/>", format_.italic)) if on)
    colour = _rgb("color", format_.color) if format_.color else ""
    font = f"<font>{flags}{colour}</font>" if flags or colour else ""
    fill = f"<fill><patternFill>{_rgb('bgColor', format_.fill)}</patternFill></fill>" if format_.fill else ""
    edge = _edge("bottom", format_.border_bottom, format_.border_color)
    border = f"<border>{edge}</border>" if format_.border_bottom else ""
    return f"<dxf>{font}{fill}{border}</dxf>"


def digit_width(font: etree._Element) -> int:
    """Pixels at 96 per inch of the widest digit of a font, from its size and what is known of its design."""
    size_element, name_element = child(font, "sz"), child(font, "name")
    try:
        size = float("" if size_element is None else size_element.get("val", ""))
    except ValueError:
        size = 11.0
    if not math.isfinite(size) or not 4 <= size <= 40:
        return 7
    name = ("" if name_element is None else name_element.get("val", "")).casefold()
    return max(3, round(size * 96 / 72 * _DIGIT_EM.get(name, 0.507)))


# Advance width of the digits in ems, from the fonts' own tables (from memory, to three digits).
_DIGIT_EM = {
    "arial": 0.556,
    "helvetica": 0.556,
    "liberation sans": 0.556,
    "verdana": 0.636,
    "tahoma": 0.546,
    "segoe ui": 0.539,
    "cambria": 0.554,
    "courier new": 0.6,
    "consolas": 0.55,
    "aptos narrow": 0.5,
}
