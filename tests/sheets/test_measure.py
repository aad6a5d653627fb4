"""Room for texts: the widths against a real font of the same metrics, and wrapping."""

from __future__ import annotations

import struct
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from bridge.sheets import measure

FONT = Path("/usr/share/fonts/truetype/liberation/LiberationSans-Regular.ttf")


def advances(path: Path) -> dict[str, float]:
    """Advance widths (thousandths of the size) of a TrueType font, from its cmap (format 4) and hmtx tables."""
    data = path.read_bytes()
    tables = {}
    for at in range(struct.unpack_from(">H", data, 4)[0]):
        tag, _, offset, _ = struct.unpack_from(">4sIII", data, 12 + 16 * at)
        tables[tag.decode()] = offset
    scale = struct.unpack_from(">H", data, tables["head"] + 18)[0]
    metrics = struct.unpack_from(">H", data, tables["hhea"] + 34)[0]
    cmap = tables["cmap"]
    subtables = [
        struct.unpack_from(">HHI", data, cmap + 4 + 8 * at)[2]
        for at in range(struct.unpack_from(">H", data, cmap + 2)[0])
    ]
    start = next(cmap + at for at in subtables if struct.unpack_from(">H", data, cmap + at)[0] == 4)
    segments = struct.unpack_from(">H", data, start + 6)[0] // 2
    read = f">{segments}H"
    ends, firsts = struct.unpack_from(read, data, start + 14), struct.unpack_from(read, data, start + 16 + 2 * segments)
    deltas = struct.unpack_from(read, data, start + 16 + 4 * segments)
    where = start + 16 + 6 * segments
    found = {}
    for at, (first, end) in enumerate(zip(firsts, ends, strict=True)):
        offset = struct.unpack_from(">H", data, where + 2 * at)[0]
        for code in range(first, min(end, 0x2FFF) + 1):
            glyph = (
                code if not offset else struct.unpack_from(">H", data, where + 2 * at + offset + 2 * (code - first))[0]
            )
            glyph = (glyph + deltas[at]) & 0xFFFF
            place = tables["hmtx"] + 4 * min(glyph, metrics - 1)
            found[chr(code)] = struct.unpack_from(">H", data, place)[0] * 1000 / scale
    return found


@pytest.mark.skipif(not FONT.exists(), reason="Liberation Sans, which has Arial's metrics, is not installed")
def test_widths_are_those_of_a_font_with_the_same_metrics():
    real = advances(FONT)
    for code in [*range(32, 127), 0xA0, 0xE9, 0xF6, 0xC5, 0x2212]:
        character = chr(code)
        assert measure.pixels(character, 10) == pytest.approx(real[character] / 1000 * 10 * 96 / 72, rel=0.01), (
            character
        )


def test_east_asian_characters_take_a_full_square():
    assert measure.pixels("建築", 10) == pytest.approx(2 * 10 * 96 / 72)
    assert measure.lines("建築面積の合計" * 10, 40) > measure.lines("abcdefg" * 10, 40)


def test_a_text_wraps_as_a_known_width_says():
    # 40 units are 275 pixels inside; "mmmm " is 4 x 833 + 278 thousandths of 13.3 pixels, 48: five fit in a line
    assert measure.lines("mmmm " * 5, 40) == 1
    assert measure.lines("mmmm " * 6, 40) == 2


@given(st.text(alphabet="abc xyz建é-\n", max_size=200), st.floats(5, 120), st.floats(5, 120))
def test_wider_columns_never_need_more_lines(text, one, other):
    narrow, wide = sorted((one, other))
    assert measure.lines(text, wide) <= measure.lines(text, narrow)


@given(st.text(max_size=60))
def test_a_column_as_wide_as_a_text_holds_it_in_its_own_lines(text):
    assert measure.lines(text, measure.units(text)) == text.count("\n") + 1
