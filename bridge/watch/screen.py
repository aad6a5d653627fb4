"""What a person sees while watching: a quiet list on a terminal, plain lines elsewhere."""

from __future__ import annotations

import os
import shutil
import sys
import unicodedata
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import TextIO

_CLEAR_BELOW, _CLEAR_LINE, _HIDE, _SHOW = "\x1b[J", "\x1b[K", "\x1b[?25l", "\x1b[?25h"
_STATE_WIDTH, _TIME_WIDTH = 14, 8
_LONGEST_NAME = 44


@dataclass(frozen=True, slots=True)
class Line:
    """One workbook: its path, what is going on, when it was last fitted, and a sentence. `told` orders the list."""

    path: str
    state: str
    last_fit: datetime | None = None
    message: str = ""
    told: float = 0.0


class Screen:
    """The live list. Draws over itself on a terminal; elsewhere prints a line when a workbook's turn has ended."""

    def __init__(self, out: TextIO | None = None) -> None:
        self._out = out or sys.stdout
        self.live = self._out.isatty() and os.environ.get("TERM") != "dumb"
        self._drawn = 0
        if self.live and sys.platform == "win32":
            os.system("")  # makes the console understand the marks
        if self.live:
            self._write(_HIDE)

    def say(self, text: str) -> None:
        """A sentence that stays, above the list."""
        self._rub_out()
        self._write(f"{_printable(text)}\n")

    def ended(self, line: Line) -> None:
        """A workbook's turn has ended; said at once where there is no list."""
        if not self.live:
            when = datetime.now().strftime("%H:%M:%S")
            said = f". {line.message}" if line.message else ""
            self._write(f"{when}  {_printable(line.path)}: {line.state}{_printable(said)}\n")

    def draw(self, lines: Iterable[Line], foot: str) -> None:
        """Draw the list anew; workbooks of the latest news first."""
        if not self.live:
            return
        size = shutil.get_terminal_size()
        shown = list(layout(lines, foot, size.columns, size.lines))
        self._rub_out()
        self._write("".join(f"{line}{_CLEAR_LINE}\n" for line in shown))
        self._drawn = len(shown)

    def close(self) -> None:
        """Leave the terminal as it was; the list stays to be read."""
        if self.live:
            self._write(_SHOW)

    def _rub_out(self) -> None:
        if self.live and self._drawn:
            self._write(f"\x1b[{self._drawn}F{_CLEAR_BELOW}")
            self._drawn = 0

    def _write(self, text: str) -> None:
        try:
            self._out.write(text)
            self._out.flush()
        except (OSError, ValueError):  # the terminal is gone; the work is not
            self.live = False
        except UnicodeEncodeError:
            self._out.write(text.encode("ascii", "replace").decode())


def layout(lines: Iterable[Line], foot: str, columns: int, rows: int) -> Iterator[str]:
    """The list as texts that fit a terminal of `columns` by `rows`; what does not fit is counted."""
    ordered = sorted(lines, key=lambda line: line.told, reverse=True)
    room = max(1, rows - 4)
    shown = ordered[:room]
    if shown:
        width = min(_LONGEST_NAME, max(len("workbook"), *(_width(Path(line.path).name) for line in shown)))
        yield _row("workbook", "state", "last fit", "message", width, columns)
        for line in shown:
            when = line.last_fit.strftime("%H:%M:%S") if line.last_fit else ""
            yield _row(Path(line.path).name, line.state, when, line.message, width, columns)
    if len(ordered) > len(shown):
        foot = f"{len(ordered) - len(shown)} more; {foot}"
    yield _fit(foot, columns - 1)


def _row(name: str, state: str, when: str, message: str, width: int, columns: int) -> str:
    cells = (_fit(name, width, pad=True), f"{state:<{_STATE_WIDTH}}", f"{when:<{_TIME_WIDTH}}", message)
    return _fit("  ".join(cells), columns - 1)


def _fit(text: str, width: int, pad: bool = False) -> str:
    """Cut to so many terminal cells, with an ellipsis; characters of East Asian scripts take two."""
    text = _printable(text)
    if _width(text) > width:
        kept, used = [], 0
        for character in text:
            used += _cells(character)
            if used > width - 1:
                break
            kept.append(character)
        text = "".join(kept) + "…"
    return text + " " * (width - _width(text)) if pad else text.rstrip()


def _width(text: str) -> int:
    return sum(_cells(character) for character in text)


def _cells(character: str) -> int:
    if unicodedata.combining(character):
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1


def _printable(text: str) -> str:
    """File names and messages cannot move the cursor."""
    safe = text.encode("utf-8", "surrogateescape").decode("utf-8", "replace")
    return "".join(c if c.isprintable() else " " if c.isspace() else "?" for c in safe)
