"""Small flat drawings as PNG files, made from polygons and circles, without an image library.

PNG: ISO/IEC 15948. Drawn three times as large and averaged, so that edges come out smooth.
"""

from __future__ import annotations

import math
import struct
import zlib
from collections.abc import Sequence

Point = tuple[float, float]
_FINE = 3


class Canvas:
    """A white picture of `width` x `height` pixels; positions are in pixels from the top left corner."""

    def __init__(self, width: int, height: int) -> None:
        self.width, self.height = width, height
        self._rows = [bytearray(b"\xff" * (3 * width * _FINE)) for _ in range(height * _FINE)]

    def polygon(self, corners: Sequence[Point], color: str) -> None:
        """Fill the polygon (even-odd rule) with `color`, six hex digits."""
        ink = bytes.fromhex(color)
        fine = [(x * _FINE, y * _FINE) for x, y in corners]
        edges = list(zip(fine, fine[1:] + fine[:1], strict=True))
        for y, row in enumerate(self._rows):
            middle = y + 0.5
            cuts = sorted(
                x0 + (middle - y0) * (x1 - x0) / (y1 - y0)
                for (x0, y0), (x1, y1) in edges
                if min(y0, y1) <= middle < max(y0, y1)
            )
            for start, end in zip(cuts[::2], cuts[1::2], strict=False):
                first, last = max(0, round(start)), min(self.width * _FINE, round(end))
                if last > first:
                    row[3 * first : 3 * last] = ink * (last - first)

    def circle(self, x: float, y: float, radius: float, color: str) -> None:
        """Fill a circle."""
        turns = [2 * math.pi * step / 72 for step in range(72)]
        self.polygon([(x + radius * math.cos(turn), y + radius * math.sin(turn)) for turn in turns], color)

    def line(self, start: Point, end: Point, thickness: float, color: str) -> None:
        """A straight bar from `start` to `end`."""
        dx, dy = end[0] - start[0], end[1] - start[1]
        scale = thickness / 2 / math.hypot(dx, dy)
        nx, ny = -dy * scale, dx * scale
        corners = [(start[0] + nx, start[1] + ny), (end[0] + nx, end[1] + ny)]
        corners += [(end[0] - nx, end[1] - ny), (start[0] - nx, start[1] - ny)]
        self.polygon(corners, color)

    def png(self) -> bytes:
        """The picture as the bytes of a PNG file."""
        lines = b"".join(b"\x00" + self._averaged(row) for row in range(self.height))
        header = struct.pack(">IIBBBBB", self.width, self.height, 8, 2, 0, 0, 0)
        parts = (_chunk(b"IHDR", header), _chunk(b"IDAT", zlib.compress(lines, 9)), _chunk(b"IEND", b""))
        return b"\x89PNG\r\n\x1a\n" + b"".join(parts)

    def _averaged(self, row: int) -> bytes:
        fine = self._rows[row * _FINE : (row + 1) * _FINE]
        step = 3 * _FINE
        return bytes(
            sum(line[at + channel + 3 * inner] for line in fine for inner in range(_FINE)) // _FINE**2
            for at in range(0, step * self.width, step)
            for channel in range(3)
        )


def _chunk(kind: bytes, content: bytes) -> bytes:
    return struct.pack(">I", len(content)) + kind + content + struct.pack(">I", zlib.crc32(kind + content))


def boat(hull: str, sail: str, water: str) -> bytes:
    """A small sailing boat."""
    canvas = Canvas(150, 110)
    canvas.polygon([(78, 8), (78, 72), (124, 72)], sail)
    canvas.polygon([(72, 18), (72, 72), (38, 72)], water)
    canvas.line((75, 5), (75, 78), 3, hull)
    canvas.polygon([(18, 77), (134, 77), (114, 97), (36, 97)], hull)
    for left in (6, 42, 78, 114):
        canvas.line((left, 103), (left + 26, 103), 3, water)
    return canvas.png()


def snow(ink: str, ground: str) -> bytes:
    """A snow crystal on a disc."""
    canvas = Canvas(110, 110)
    canvas.circle(55, 55, 52, ground)
    for arm in range(6):
        turn = arm * math.pi / 3
        tip = (55 + 42 * math.sin(turn), 55 - 42 * math.cos(turn))
        canvas.line((55, 55), tip, 4, ink)
        root = (55 + 25 * math.sin(turn), 55 - 25 * math.cos(turn))
        for side in (-0.7, 0.7):
            end = (root[0] + 14 * math.sin(turn + side), root[1] - 14 * math.cos(turn + side))
            canvas.line(root, end, 3, ink)
    return canvas.png()


def meter(pipe: str, face: str, needle: str) -> bytes:
    """A dial on a pipe."""
    canvas = Canvas(150, 110)
    canvas.polygon([(0, 72), (150, 72), (150, 98), (0, 98)], pipe)
    for left in (22, 118):
        canvas.polygon([(left, 66), (left + 10, 66), (left + 10, 104), (left, 104)], needle)
    canvas.circle(75, 50, 46, pipe)
    canvas.circle(75, 50, 39, face)
    for mark in range(7):
        turn = math.radians(-120 + 40 * mark)
        inner, outer = ((75 + radius * math.sin(turn), 50 - radius * math.cos(turn)) for radius in (31, 37))
        canvas.line(inner, outer, 2.5, pipe)
    canvas.line((75, 50), (97, 31), 3.5, needle)
    canvas.circle(75, 50, 5, needle)
    return canvas.png()
