"""What this room asks of an opened workbook. `bridge.package` provides it; tests provide a small one."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol


class SheetEntry(Protocol):
    """One tab. `state`: visible, hidden or veryHidden. `kind`: worksheet, chartsheet, ...

    `ours`: our name for it where it carries the bridge's mark, else None. `empty`: no cell holds anything.
    """

    @property
    def name(self) -> str: ...

    @property
    def state(self) -> str: ...

    @property
    def kind(self) -> str: ...

    @property
    def ours(self) -> str | None: ...

    @property
    def empty(self) -> bool: ...


class ExcelTable(Protocol):
    """A table object on a worksheet: its name, its whole range (`B3:F120`), its header rows (1 or 0), totals rows."""

    @property
    def name(self) -> str: ...

    @property
    def ref(self) -> str: ...

    @property
    def header_rows(self) -> int: ...

    @property
    def totals_rows(self) -> int: ...


class SheetSource(Protocol):
    """One opened workbook."""

    @property
    def sheets(self) -> Sequence[SheetEntry]:
        """Every tab, in order."""

    def worksheet_xml(self, tab: str) -> bytes:
        """The worksheet's XML, unpacked (within the package's bounds)."""

    def tables(self, tab: str) -> Sequence[ExcelTable]:
        """The table objects on a worksheet."""

    def shared_strings(self) -> bytes:
        """The XML of the shared texts, unpacked; empty where the workbook has none."""
