"""A package while it is being changed: parts replaced, added and taken out; all else copied as it lies."""

from dataclasses import dataclass, field
from itertools import islice
from pathlib import Path
from posixpath import dirname, relpath

from ledgersolve.workbook import splice
from ledgersolve.workbook.container import Container, Limits
from ledgersolve.workbook.markup import CONTENT_TYPES, PACKAGE_RELATIONS, RELATIONS
from ledgersolve.workbook.packing import Packer
from ledgersolve.workbook.parts import CONTENT_LIST, Relation, relations, relations_name, workbook_part

_HEAD = 1 << 18
_NO_RELATIONS = (f'<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'
                 f'<Relationships xmlns="{PACKAGE_RELATIONS}"></Relationships>')


@dataclass
class Draft:
    """The analyst's package with our changes to it. Part names as the package spells them."""

    container: Container
    limits: Limits = field(default_factory=Limits)
    changed: dict[str, bytes] = field(default_factory=dict)
    removed: set[str] = field(default_factory=set)
    part: str = ""

    def __post_init__(self) -> None:
        self.part = workbook_part(self.container, self.limits)

    def has(self, part: str) -> bool:
        """Whether the part is there."""
        return part in self.changed or (
            part not in self.removed and self.container.find(part) is not None)

    def read(self, part: str) -> bytes:
        """Content of a part as it now is.

        Raises
        ------
        KeyError
            Where there is no such part.
        """
        if part in self.changed:
            return self.changed[part]
        member = self.container.find(part)
        if member is None or part in self.removed:
            raise KeyError(part)
        return self.container.read(member)

    def head(self, part: str) -> bytes:
        """The first 256 KB of a part as it now is, without unpacking the rest."""
        member = self.container.find(part)
        if part in self.changed or member is None:
            return self.changed.get(part, b"")[:_HEAD]
        return b"".join(islice(self.container.pieces(member), _HEAD >> 16))

    def text(self, part: str) -> str:
        """Text of a small XML part as it now is."""
        return splice.decoded(self.read(part))

    def put(self, part: str, content: str | bytes) -> None:
        """Replace or add a part."""
        self.removed.discard(part)
        self.changed[part] = content.encode("utf-8") if isinstance(content, str) else content

    def remove(self, part: str) -> None:
        """Take out a part."""
        self.changed.pop(part, None)
        self.removed.add(part)

    def relations(self, part: str) -> tuple[Relation, ...]:
        """Relationships of a part as the analyst's package has them."""
        return relations(self.container, part, self.limits)

    def target(self, kind: str) -> str | None:
        """The part of a kind (``styles``) that the workbook points at."""
        for relation in self.relations(self.part):
            member = None if relation.external else self.container.find(relation.target)
            if relation.kind == kind and member is not None and member.name not in self.removed:
                return member.name
        return None

    def unlink(self, ids: set[str]) -> None:
        """Take relationships out of the workbook's list."""
        name = relations_name(self.part)
        edits = splice.Edits(self.text(name))
        top = splice.root(edits.text)
        for element in splice.children(edits.text, top.inner, top.outer):
            if element.attributes.get("Id") in ids:
                edits.remove(element)
        self.put(name, edits.result())

    def link(self, kind: str, target: str, wanted: str) -> str:
        """Add a relationship of the workbook to a part; gives its id, ``wanted`` where that is free."""
        name = relations_name(self.part)
        text = self.text(name) if self.has(name) else _NO_RELATIONS
        top = splice.root(text)
        taken = {element.attributes.get("Id") for element in splice.children(text, top.inner, top.outer)}
        key = wanted
        while key in taken:
            key += "x"
        added = splice.made("Relationship", {
            "Id": key, "Type": f"{RELATIONS}/{kind}", "Target": relpath(target, dirname(self.part) or "."),
        }, PACKAGE_RELATIONS, top)
        self.put(name, text[:top.start] + splice.with_content(text, top, added) + text[top.end:])
        return key

    def declare(self, types: dict[str, str]) -> None:
        """Add content types of new parts and drop those of parts that are gone."""
        text = self.text(CONTENT_LIST)
        top = splice.root(text)
        gone = {f"/{part}".casefold() for part in self.removed}
        kept = splice.Edits(text)
        for element in splice.children(text, top.inner, top.outer):
            if element.attributes.get("PartName", "").casefold() in gone:
                kept.remove(element)
        text = kept.result()
        top = splice.root(text)
        added = "".join(
            splice.made("Override", {"PartName": f"/{part}", "ContentType": kind}, CONTENT_TYPES, top)
            for part, kind in types.items())
        self.put(CONTENT_LIST, text[:top.start] + splice.with_content(text, top, added) + text[top.end:])

    def write(self, target: Path) -> None:
        """Write the package: members in their order, changed ones in place, new ones behind them."""
        with target.open("wb") as file:
            packer = Packer(file)
            waiting = dict(self.changed)
            for member in self.container.members:
                if member.name in waiting:
                    packer.add(member.name, waiting.pop(member.name))
                elif member.name not in self.removed:
                    packer.copy(self.container, member)
            for name, content in waiting.items():
                packer.add(name, content)
            packer.close()
