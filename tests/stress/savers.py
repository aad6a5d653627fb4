"""Four ways in which programs save a file, each as a function that may be slow on purpose."""

from __future__ import annotations

import os
import random
import time
import zlib
from collections.abc import Callable
from pathlib import Path

Saver = Callable[[Path, bytes, random.Random], None]


def dawdle(chance: random.Random, longest_ms: float) -> None:
    """Wait up to so long; about every third time not at all."""
    if chance.random() < 0.67:
        time.sleep(chance.random() * longest_ms / 1000)


def in_place(path: Path, data: bytes, chance: random.Random) -> None:
    """Truncate and write, in two goes."""
    with path.open("wb", buffering=0) as file:
        half = len(data) // 2
        file.write(data[:half])
        dawdle(chance, 1)
        file.write(data[half:])


def early_handle(path: Path, data: bytes, chance: random.Random) -> None:
    """Open first, think, then truncate and write through the handle."""
    with path.open("r+b", buffering=0) as file:
        dawdle(chance, 4)
        file.truncate()
        file.write(data)


def _mark(path: Path) -> str:
    """Seven digits for temporary names: savers may share a folder, but never a workbook."""
    return f"{zlib.crc32(path.name.encode()) % 16**7:07X}"


def renamed_in(path: Path, data: bytes, chance: random.Random) -> None:
    """A temporary file renamed over the name."""
    aside = path.with_name(f"lu{_mark(path)}.tmp")
    aside.write_bytes(data)
    dawdle(chance, 1)
    os.replace(aside, path)


def three_steps(path: Path, data: bytes, chance: random.Random) -> None:
    """A temporary file; the old one renamed away, the new one renamed in, the old one deleted."""
    aside, away = path.with_name(f"{_mark(path)}0"), path.with_name(f"{_mark(path)}1")
    aside.write_bytes(data)
    dawdle(chance, 1)
    os.rename(path, away)
    dawdle(chance, 0.3)
    os.rename(aside, path)
    away.unlink()


SAVERS: dict[str, Saver] = {
    "in place": in_place,
    "handle opened earlier": early_handle,
    "temp + rename": renamed_in,
    "three-step rename": three_steps,
}
