"""Files that are left alone, each for a reason of its own."""

from __future__ import annotations

from collections.abc import Iterable

from bridge.messages import FileRefused, say
from bridge.package.content_types import ContentTypes
from bridge.package.relationships import Relationship

_CFB = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"
_ENCRYPTED_STREAM = "EncryptedPackage".encode("utf-16-le")  # MS-OFFCRYPTO 2.3
_SIGNATURE_ORIGIN = "/digital-signature/origin"
_SIGNATURE_TYPE = "application/vnd.openxmlformats-package.digital-signature"


def refuse_other_containers(data: bytes) -> None:
    """Refuse what is no zip: password-protected files, the older binary format, anything else."""
    if data.startswith(_CFB):
        raise FileRefused(say("password-protected" if _ENCRYPTED_STREAM in data else "older-format"))
    if b"PK\x05\x06" not in data:
        raise FileRefused(say("empty-file" if not data else "not-a-workbook"))


def refuse_other_packages(names: Iterable[str]) -> None:
    """Refuse zips of another kind by their telling members (names in lower case)."""
    present = set(names)
    if "mimetype" in present and "content.xml" in present:
        raise FileRefused(say("opendocument"))
    if "encryptedpackage" in present:
        raise FileRefused(say("password-protected"))
    if "[content_types].xml" not in present:
        raise FileRefused(say("no-content-types"))


def refuse_signed(names: Iterable[str], types: ContentTypes, root_relationships: Iterable[Relationship]) -> None:
    """Refuse signed packages: any change would void the signature. (A signed macro project is no signed package.)"""
    signed = (
        any(each.type.endswith(_SIGNATURE_ORIGIN) for each in root_relationships)
        or any(type_.startswith(_SIGNATURE_TYPE) for type_ in types.overrides.values())
        or any(name.startswith("_xmlsignatures/") for name in names)
    )
    if signed:
        raise FileRefused(say("signed"))


def refuse_workbook_type(type_: str, part: str) -> None:
    """Refuse a main part that is no workbook in XML."""
    if "sheet.binary" in type_ or part.lower().endswith(".bin"):
        raise FileRefused(say("binary-format"))
    if type_ and "spreadsheetml" not in type_ and "ms-excel" not in type_ and type_ != "application/xml":
        raise FileRefused(say("no-workbook-part"))


def refuse_revision_log(workbook_relationships: Iterable[Relationship]) -> None:
    """Refuse a shared workbook with a log of changes: the log names sheets and cells and would no longer agree."""
    if any(each.kind in ("revisionHeaders", "revisionLog") for each in workbook_relationships):
        raise FileRefused(say("revision-log"))
