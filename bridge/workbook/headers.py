"""Column names from header cells: trimmed, units, blanks named by their letters, repeats numbered."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence

from bridge.page.cells import column_letters

_UNIT = re.compile(r".*[(\[（]([^()\[\]（）]+)[)\]）]\s*", re.DOTALL)
_MISSING = frozenset({"n/a", "na", "nan", "none", "null", "missing", "unknown", "tbd", "?", "x"})
_DASHES = frozenset({"-", "–", "—", "."})


def clean(text: str) -> str:
    """A header as people read it: one line, single spaces, nothing around it."""
    return " ".join(text.replace("\u00a0", " ").split())


def unit(name: str) -> str | None:
    """What stands in the header's last (…) or […], if the header ends with it."""
    found = _UNIT.fullmatch(name)
    return found[1].strip() or None if found and found.start(1) > 1 else None


def names(texts: Sequence[str | None], columns: Sequence[int], above: Sequence[str | None] = ()) -> tuple[str, ...]:
    """A unique name for each column (unique without case).

    `texts` are the header cells, `columns` the zero-based sheet columns, `above` the headings that span several of
    them: a repeated name takes its heading before it, and a number where that does not help.
    """
    wanted = [clean(text or "") or f"column {column_letters(at)}" for text, at in zip(texts, columns, strict=True)]
    counts = Counter(name.casefold() for name in wanted)
    repeated = {name for name, count in counts.items() if count > 1}
    if above:
        wanted = [
            clean(f"{heading} {name}") if heading and name.casefold() in repeated else name
            for name, heading in zip(wanted, above, strict=True)
        ]
    return _numbered(wanted)


def _numbered(wanted: Sequence[str]) -> tuple[str, ...]:
    taken: set[str] = set()
    given = []
    for name in wanted:
        unique, number = name, 1
        while unique.casefold() in taken:
            number += 1
            unique = f"{name} ({number})"
        taken.add(unique.casefold())
        given.append(unique)
    return tuple(given)


def looks_like_unit(text: str) -> bool:
    """Whether a text under a header may be a unit (`h`, `(m)`, `kg/m3`) rather than a missing value or a word."""
    bare = text.strip()
    if bare.casefold() in _MISSING or bare in _DASHES:
        return False
    return bool(re.fullmatch(r"[(\[][^()\[\]]{1,20}[)\]]", bare)) or (len(bare) <= 6 and " " not in bare)


def is_dash(text: str) -> bool:
    """Whether a text stands for nothing in a line of units."""
    return text.strip() in _DASHES
