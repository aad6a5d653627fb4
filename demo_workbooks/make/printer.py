"""Printer settings as a spreadsheet program on Windows keeps them, which XlsxWriter does not make."""

from __future__ import annotations

import re
import struct

from demo_workbooks.make.opc import CONTENT, Members, declare, relate


def add_printer_settings(members: Members, sheet_part: str) -> None:
    """Give a sheet the binary settings that a spreadsheet program on Windows keeps for its printer."""
    part = "xl/printerSettings/printerSettings1.bin"
    members[part] = _device_mode("Invented printer")
    key = relate(members, sheet_part, "printerSettings", "../printerSettings/printerSettings1.bin")
    text = members[sheet_part].decode()
    members[sheet_part] = re.sub(r"(<pageSetup [^>]*?)/>", rf'\1 r:id="{key}"/>', text, count=1).encode()
    declare(members, f'<Default Extension="bin" ContentType="{CONTENT}printerSettings"/>')


def _device_mode(name: str) -> bytes:
    """A DEVMODEW structure of the Windows API (wingdi.h): A4, landscape, one copy."""
    fields = 0x1 | 0x2 | 0x100  # orientation, paper size, copies
    start = struct.pack("<64sHHHHI", name.encode("utf-16-le"), 0x0401, 0, 220, 0, fields)
    page = struct.pack("<13h", 2, 9, 0, 0, 100, 1, 0, 600, 1, 1, 600, 0, 1)
    return (start + page).ljust(220, b"\0")
