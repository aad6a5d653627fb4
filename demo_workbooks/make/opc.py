"""Adding parts to a made package: relationships and content types. ECMA-376 part 2."""

from __future__ import annotations

RELS = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
CONTENT = "application/vnd.openxmlformats-officedocument.spreadsheetml."
HEAD = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'
_PACKAGE_RELS = "http://schemas.openxmlformats.org/package/2006/relationships"

Members = dict[str, bytes]


def rels_of(part: str) -> str:
    """Where a part's relationships stand."""
    folder, _, name = part.rpartition("/")
    return f"{folder}/_rels/{name}.rels"


def relationships(*entries: tuple[str, str, str]) -> str:
    """A list of relationships from (id, last word of the type, target)."""
    made = "".join(f'<Relationship Id="{key}" Type="{RELS}/{kind}" Target="{to}"/>' for key, kind, to in entries)
    return f'{HEAD}<Relationships xmlns="{_PACKAGE_RELS}">{made}</Relationships>'


def relate(members: Members, part: str, kind: str, target: str) -> str:
    """Add a relationship to a part's own list; returns its id."""
    name = rels_of(part)
    text = members[name].decode() if name in members else relationships()
    key = f"rId{text.count('<Relationship ') + 1}"
    entry = f'<Relationship Id="{key}" Type="{RELS}/{kind}" Target="{target}"/></Relationships>'
    members[name] = text.replace("</Relationships>", entry).encode()
    return key


def declare(members: Members, entry: str) -> None:
    """Add a Default or an Override to the content types."""
    text = members["[Content_Types].xml"].decode()
    first = text.index("<Override") if entry.startswith("<Default") else text.index("</Types>")
    members["[Content_Types].xml"] = (text[:first] + entry + text[first:]).encode()
