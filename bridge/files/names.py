"""The short hidden names the bridge uses next to a workbook, and nothing else in a folder is ever the bridge's.

Short and random, so that they fit beside a workbook whose own name is as long as a name may be; `.~` as other
programs' lock files have it, so that folder views and synchronisers leave them out.
"""

from __future__ import annotations

import hashlib
import secrets
from dataclasses import dataclass
from pathlib import Path

PREFIX = ".~savefit-"
JOURNAL = "journal"
PART = "part"  # what is being written and was never in anybody's place
NEW = "new"  # what is to be swapped in; after an exchange, what was swapped out
OLD = "old"  # what was swapped out, where a system gives it a name of its own
CLAIM = "claim"
COPY = "copy"  # tells which copy beside a workbook is the bridge's
PROBE = "probe"


@dataclass(frozen=True, slots=True)
class Hidden:
    """One of our names, taken apart: `.~savefit-TOKEN.KIND`."""

    token: str
    kind: str


def token() -> str:
    """Eight random hex digits."""
    return secrets.token_hex(4)


def key(workbook: str) -> str:
    """Eight hex digits that stand for a workbook's name (compared without case, as most shares do)."""
    return hashlib.blake2b(workbook.casefold().encode("utf-8", "surrogatepass"), digest_size=4).hexdigest()


def hidden(folder: Path, token: str, kind: str) -> Path:
    """The path of one of our files in `folder`."""
    return folder / f"{PREFIX}{token}.{kind}"


def parse(name: str) -> Hidden | None:
    """`name` taken apart, or None when it is not one of ours."""
    if not name.startswith(PREFIX):
        return None
    token, dot, kind = name[len(PREFIX) :].partition(".")
    return Hidden(token, kind) if dot and token else None
