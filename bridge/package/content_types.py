"""The content types of parts (ECMA-376 part 2, 10.1): a default by extension, an override by part name."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from lxml import etree

from bridge.messages import FileRefused, say
from bridge.package.archive import part_key
from bridge.package.limits import Limits
from bridge.package.relationships import resolve
from bridge.package.xml import CONTENT_TYPES, parse, remove_element

PART = "[Content_Types].xml"
_OVERRIDE = f"{{{CONTENT_TYPES}}}Override"
_DEFAULT = f"{{{CONTENT_TYPES}}}Default"

SPREADSHEET = "application/vnd.openxmlformats-officedocument.spreadsheetml."
WORKSHEET = f"{SPREADSHEET}worksheet+xml"
STYLES = f"{SPREADSHEET}styles+xml"
DRAWING = "application/vnd.openxmlformats-officedocument.drawing+xml"
CHART = "application/vnd.openxmlformats-officedocument.drawingml.chart+xml"
RELATIONSHIPS = "application/vnd.openxmlformats-package.relationships+xml"


@dataclass(frozen=True, slots=True)
class ContentTypes:
    """Types by part key (see `part_key`) and by extension in lower case."""

    overrides: Mapping[str, str]
    defaults: Mapping[str, str]

    def of(self, part: str) -> str:
        """The content type of a part; empty if none is stated."""
        key = part_key(part)
        return self.overrides.get(key) or self.defaults.get(key.rpartition(".")[2], "")


def read_root(data: bytes, limits: Limits) -> etree._Element:
    """The root element of the content types' part. Raises FileRefused if it is damaged."""
    root = parse(data, PART, limits)
    if root.tag != f"{{{CONTENT_TYPES}}}Types":
        raise FileRefused(say("part-damaged", part=PART, detail="it does not hold content types"))
    return root


def content_types(root: etree._Element) -> ContentTypes:
    """The types in `root`. Raises FileRefused where two overrides name the same part differently."""
    overrides: dict[str, str] = {}
    for element in root.iter(_OVERRIDE):
        key, type_ = _key(element), element.get("ContentType", "")
        if overrides.setdefault(key, type_) != type_:
            raise FileRefused(say("part-damaged", part=PART, detail=f"it gives {key} two content types"))
    defaults = {element.get("Extension", "").lower(): element.get("ContentType", "") for element in root.iter(_DEFAULT)}
    return ContentTypes(overrides, defaults)


def _key(element: etree._Element) -> str:
    return part_key(resolve("", element.get("PartName", "")))


def override(root: etree._Element, part: str, type_: str) -> None:
    """State the type of a part that has no override yet."""
    etree.SubElement(root, _OVERRIDE, {"PartName": f"/{part}", "ContentType": type_})


def forget(root: etree._Element, part: str) -> None:
    """Take out the overrides of `part`."""
    for element in list(root.iter(_OVERRIDE)):
        if _key(element) == part_key(part):
            remove_element(element)
