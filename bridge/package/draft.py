"""A package being rewritten: which parts are new, which went, and the new bytes in the end.

Members that nobody touches keep their packed bytes, place, checksum, method and time.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from dataclasses import replace

from lxml import etree

from bridge.package import content_types as types
from bridge.package.archive import Member, content, packed, part_key, same_content, write_archive
from bridge.package.package import Package
from bridge.package.relationships import Relationship, read_relationships, relationships_part
from bridge.package.xml import parse, same_meaning, serialise


class Draft:
    """Changes to one package; `finish` gives the new file."""

    def __init__(self, package: Package) -> None:
        self.package = package
        self._new: dict[str, Member] = {}
        self._gone: set[str] = set()
        self._types = types.read_root(package.read(types.PART), package.limits)
        self._overridden = set(package.types.overrides)

    # --- reading ---------------------------------------------------------------------------------------------------

    def has(self, part: str) -> bool:
        """Whether the part is in the package as it stands now."""
        key = part_key(part)
        return key in self._new or (key in self.package.parts and key not in self._gone)

    def read(self, part: str) -> bytes | None:
        """A small part's content as it stands now; None if there is none."""
        if not self.has(part):
            return None
        key = part_key(part)
        return content(self._new.get(key) or self.package.parts[key], self.package.limits.part)

    def xml(self, part: str) -> etree._Element | None:
        """A part's root element, for changing and handing to `write_xml`."""
        data = self.read(part)
        return None if data is None else parse(data, part, self.package.limits)

    def relationships(self, source: str) -> tuple[Relationship, ...]:
        """The relationships of a part as they stand now."""
        return read_relationships(self.read(relationships_part(source)), source, self.package.limits)

    def reachable(self, starts: Iterable[str]) -> set[str]:
        """Keys of all parts that relationships lead to from `starts` (an empty name: the package), these included."""
        found: set[str] = set()
        waiting = deque(starts)
        while waiting:
            part = waiting.popleft()
            key = part_key(part)
            if key in found:
                continue
            found.add(key)
            waiting.extend(each.part for each in self.relationships(part) if each.part)
        return found

    # --- changing --------------------------------------------------------------------------------------------------

    def fresh(self, pattern: str) -> str:
        """The first part name that `pattern` (with `{}` for a number) makes and nobody has or claims a type for."""
        number = 1
        while self.has(pattern.format(number)) or part_key(pattern.format(number)) in self._overridden:
            number += 1
        return pattern.format(number)

    def write(self, part: str, pieces: Iterable[bytes], type_: str = "", level: int = 6) -> None:
        """Put a part in; where it stands already with the same content, it keeps its packed bytes."""
        key = part_key(part)
        member = packed(part, pieces, level)
        old = self.package.parts.get(key)
        if old is not None:
            member = (
                old if _same(old, member) else replace(member, name=old.name, raw_name=old.raw_name, flags=old.flags)
            )
        self._new[key] = member
        self._gone.discard(key)
        # A type stated for the part itself stays, even an odd one.
        if type_ and key not in self._overridden and types.content_types(self._types).of(part) != type_:
            types.override(self._types, part, type_)
            self._overridden.add(key)

    def write_xml(self, part: str, root: etree._Element, type_: str = "") -> None:
        """Put in a part that is shared with the user; where it means the same as before, its bytes stay."""
        old = self.package.parts.get(part_key(part))
        if old is not None and same_meaning(parse(self.package.read(part), part, self.package.limits), root):
            self._new[part_key(part)] = old
            return
        self.write(part, [serialise(root)], type_)

    def write_relationships(self, source: str, data: bytes | None) -> None:
        """Put in (None: take out) the relationships of a part."""
        name = relationships_part(source)
        if data is None:
            self._drop(name)
        else:
            self.write(name, [data], types.RELATIONSHIPS)

    def remove(self, part: str) -> None:
        """Take out a part with its relationships and its content type."""
        for name in (part, relationships_part(part)):
            self._drop(name)
            self._overridden.discard(part_key(name))

    def forget_type(self, part: str) -> None:
        """Take out what the content types say of this part itself."""
        types.forget(self._types, part)

    def _drop(self, part: str) -> None:
        self._new.pop(part_key(part), None)
        self._gone.add(part_key(part))

    def finish(self) -> bytes:
        """The new file's bytes."""
        # Only now, so that a part taken out and put in again keeps the place of its type in the list.
        for key in sorted(self._gone):
            types.forget(self._types, key)
        self.write_xml(types.PART, self._types)
        members: list[Member] = []
        written = set()
        for member in self.package.archive.members:
            key = part_key(member.name)
            if member.is_folder:
                members.append(member)
            elif key in self._new:
                members.append(self._new[key])
                written.add(key)
            elif key not in self._gone:
                members.append(member)
        members += [member for key, member in self._new.items() if key not in written]
        return write_archive(replace(self.package.archive, members=tuple(members)))


def _same(old: Member, new: Member) -> bool:
    return (old.size, old.crc) == (new.size, new.crc) and same_content(old, new)
