"""The palette and the type scale: one quiet look for every sheet of ours."""

from __future__ import annotations

from dataclasses import replace

from bridge.page.cells import Format

INK = "22303A"
QUIET = "6F7B82"
DEEP = "2B5C6B"
CREAM = "FFF5E4"
TINT = "EAF1F3"
ALERT = "A5402D"
WHITE = "FFFFFF"
RULE = "C5CDD1"

TAB_FILL_IN = "E3B768"
TAB_RESULT = DEEP
TAB_DETAIL = "9DB4BC"

BODY = Format(color=INK)
TITLE = replace(BODY, size=16.0, bold=True)
SUBTITLE = replace(BODY, italic=True, color=QUIET)
SEAL = replace(BODY, bold=True, color=DEEP)
HEADING = replace(BODY, size=12.0, bold=True, color=DEEP)
HEADER = replace(BODY, bold=True, color=WHITE, fill=DEEP)
HEADER_RIGHT = replace(HEADER, align="right")
HEADER_CENTER = replace(HEADER, align="center")
ROW = replace(BODY, border_bottom="thin")
ROW_STRONG = replace(ROW, bold=True)
FACT = replace(ROW, color=QUIET)
NUMBER = replace(ROW, align="right")
INPUT = replace(ROW, fill=CREAM, align="center", locked=False)
INPUT_NUMBER = replace(INPUT, align="right")
PARAGRAPH = replace(BODY, wrap=True, valign="top")
WARNING = replace(BODY, color=ALERT)
