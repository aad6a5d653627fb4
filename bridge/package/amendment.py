"""The parts that our sheets share with the user's, while they are amended: the workbook part and what hangs on it."""

from __future__ import annotations

from bridge.messages import FileRefused, say
from bridge.package import calc_chain, mark, names, relationships, workbook_part, xml
from bridge.package.draft import Draft
from bridge.package.package import Package, SheetEntry
from bridge.package.user_objects import standing

# What of a removed sheet nobody misses: it belongs to the sheet's look or to its cells, which go too.
_NOT_MISSED = frozenset(
    {
        "column widths",
        "a print area",
        "repeated print rows",
        "page breaks",
        "sheet protection",
        "a header or footer",
        "a background picture",
        "custom properties",
        "a named view",
        "a link",
    }
)


class Amendment:
    """One change of a package in progress: a draft of its parts, the workbook part and its relationships as trees."""

    def __init__(self, package: Package) -> None:
        self.package = package
        self.draft = Draft(package)
        self.workbook = xml.parse(package.read(package.workbook_part), package.workbook_part, package.limits)
        data = self.draft.read(relationships.relationships_part(package.workbook_part))
        self.relations = relationships.root_of(data, package.limits)
        self._released: set[str] = set()
        self._sheet_ids: set[int] = set()

    def folder(self, below: str = "") -> str:
        """The folder of the workbook part, or one below it, with a slash at its end unless it is the top."""
        folder = self.package.workbook_part.rpartition("/")[0]
        return (f"{folder}/" if folder else "") + below

    def relate(self, type_: str, part: str) -> str:
        """Give the workbook a new relationship to `part`; its id."""
        id_ = relationships.fresh_id(each.get("Id", "") for each in self.relations)
        target = relationships.relative(self.package.workbook_part, part)
        relationships.add(self.relations, id_, xml.in_kind(type_, self.package.strict), target)
        return id_

    def release(self, entry: SheetEntry) -> None:
        """A sheet's content goes: what only it leads to may go too, and the calculation chain must not name it."""
        self._released |= self.draft.reachable([entry.part])
        self._sheet_ids.add(entry.sheet_id)

    def take_out(self, entry: SheetEntry) -> None:
        """Remove a sheet of ours, its marks, and all that only it uses.

        Raises FileRefused if the user placed something on it that would go with it.
        """
        going = [each for each in standing(self.package, entry).objects if each.kind not in _NOT_MISSED]
        if going:
            raise FileRefused(say("user-objects-would-go", sheet=entry.name, what=going[0].kind))
        self.release(entry)
        self.draft.remove(entry.part)
        workbook_part.remove_sheet(self.workbook, entry.relation)
        relationships.drop(self.relations, [entry.relation])
        if entry.ours is not None:
            coded = mark.coded(entry.ours)
            names.drop_names(self.workbook, {(f"{kind}{coded}".casefold(), None) for kind in (mark.SHEET, mark.LAID)})

    def finish(self) -> bytes:
        """Write the amended parts, drop what nothing leads to any more, and give the new file."""
        if not any(map(workbook_part.is_visible, workbook_part.sheet_elements(self.workbook))):
            raise FileRefused(say("no-sheet-left"))
        self._amend_chain()
        self.draft.write_xml(self.package.workbook_part, self.workbook)
        self.draft.write_xml(relationships.relationships_part(self.package.workbook_part), self.relations)
        self._drop_unreachable()
        return self.draft.finish()

    def _amend_chain(self) -> None:
        relation = next((each for each in self.package.workbook_relationships if each.kind == "calcChain"), None)
        if relation is None or relation.part is None or not self._sheet_ids:
            return
        root = self.draft.xml(relation.part)
        if root is None:
            return
        if calc_chain.without_sheets(root, self._sheet_ids):
            self.draft.write_xml(relation.part, root)
        else:
            self.draft.remove(relation.part)
            relationships.drop(self.relations, [relation.id])

    def _drop_unreachable(self) -> None:
        """Remove what the replaced sheets led to and nothing leads to any more; the user's own orphans stay."""
        if self._released:
            for part in sorted(self._released - self.draft.reachable([""])):
                self.draft.remove(part)
