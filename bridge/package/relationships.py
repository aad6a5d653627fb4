"""Relationships between parts (ECMA-376 part 2, 9.3): who points at whom, under which id."""

from __future__ import annotations

import posixpath
from collections.abc import Iterable
from dataclasses import dataclass
from urllib.parse import unquote

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package.limits import Limits
from bridge.package.xml import (
    DECLARATION,
    OFFICE_RELS,
    PACKAGE_RELS,
    attribute,
    parse,
    remove_element,
    transitional,
)

_TAG = f"{{{PACKAGE_RELS}}}Relationship"
OFFICE_DOCUMENT = f"{OFFICE_RELS}/officeDocument"


@dataclass(frozen=True, slots=True)
class Relationship:
    """One relationship. `type` is in the transitional form; `target` as written; `part` the part meant, if inside."""

    id: str
    type: str
    target: str
    part: str | None

    @property
    def kind(self) -> str:
        """The last word of the type: `worksheet`, `drawing`, ..."""
        return self.type.rsplit("/", 1)[-1]


def relationships_part(part: str) -> str:
    """The name of the part that holds the relationships of `part` (empty: of the package)."""
    folder, _, base = part.rpartition("/")
    return f"{folder}/_rels/{base}.rels".lstrip("/")


def resolve(source: str, target: str) -> str:
    """The part name a target means, seen from the part `source`: relative or absolute, percent escapes undone."""
    target = unquote(target.split("#", 1)[0]).replace("\\", "/")
    if not target:
        return source
    folder = source.rpartition("/")[0]
    return posixpath.normpath(posixpath.join("/" + folder, target)).lstrip("/")


def relative(source: str, part: str) -> str:
    """A target that leads from the part `source` to `part`."""
    return posixpath.relpath("/" + part, "/" + source.rpartition("/")[0])


def read_relationships(data: bytes | None, source: str, limits: Limits) -> tuple[Relationship, ...]:
    """The relationships of `source` from their part's content (None: it has none). Raises FileRefused if damaged."""
    if data is None:
        return ()
    name = relationships_part(source)
    root = parse(data, name, limits)
    if root.tag != f"{{{PACKAGE_RELS}}}Relationships":
        raise FileRefused(say("part-damaged", part=name, detail="it does not hold relationships"))
    found = tuple(_relationship(element, source) for element in root.iter(_TAG))
    ids = [each.id for each in found]
    if len(set(ids)) != len(ids) or not all(ids):
        raise FileRefused(say("part-damaged", part=name, detail="two relationships share an id, or one has none"))
    return found


def _relationship(element: etree._Element, source: str) -> Relationship:
    target = element.get("Target", "")
    inside = element.get("TargetMode", "Internal") != "External"
    return Relationship(
        element.get("Id", ""),
        transitional(element.get("Type", "")),
        target,
        resolve(source, target) if inside else None,
    )


def root_of(data: bytes | None, limits: Limits) -> etree._Element:
    """The root element of a relationships part, or of a new one without any."""
    return etree.fromstring(written(())) if data is None else parse(data, "the workbook's relationships", limits)


def fresh_id(taken: Iterable[str]) -> str:
    """The first free `rIdN`."""
    used = set(taken)
    number = 1
    while f"rId{number}" in used:
        number += 1
    return f"rId{number}"


def add(root: etree._Element, id_: str, type_: str, target: str) -> None:
    """Add a relationship inside the package to a relationships element."""
    etree.SubElement(root, _TAG, {"Id": id_, "Type": type_, "Target": target})


def drop(root: etree._Element, ids: Iterable[str]) -> None:
    """Take relationships out of a relationships element."""
    gone = set(ids)
    for element in list(root.iter(_TAG)):
        if element.get("Id") in gone:
            remove_element(element)


def written(rows: Iterable[tuple[str, str, str, bool]]) -> bytes:
    """A relationships part from (id, type, target, external) rows."""
    lines = [
        f'<Relationship Id="{attribute(id_)}" Type="{attribute(type_)}" Target="{attribute(target)}"'
        + (' TargetMode="External"/>' if external else "/>")
        for id_, type_, target, external in rows
    ]
    return f'{DECLARATION}<Relationships xmlns="{PACKAGE_RELS}">{"".join(lines)}</Relationships>'.encode()
