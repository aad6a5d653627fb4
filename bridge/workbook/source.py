"""What this room asks of an opened workbook. `bridge.package` provides it; tests provide a small one."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol


class SheetEntry(Protocol):
    """One tab."""

    @property
    def name(self) -> str:
        """What the tab says."""

    @property
    def state(self) -> str:
        """visible, hidden or veryHidden."""

    @property
    def kind(self) -> str:
        """worksheet, chartsheet, ..."""

    @property
    def ours(self) -> str | None:
        """Our name for it where it carries the bridge's mark, else None."""

    @property
    def empty(self) -> bool:
        """No cell holds anything."""


class ExcelTable(Protocol):
    """A table object on a worksheet."""

    @property
    def name(self) -> str:
        """The table's name."""

    @property
    def ref(self) -> str:
        """Its whole range, `B3:F120`."""

    @property
    def header_rows(self) -> int:
        """1, or 0 where the headers are switched off."""

    @property
    def totals_rows(self) -> int:
        """1 where a totals row is switched on, else 0."""


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
