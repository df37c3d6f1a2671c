"""The parts of a package and how they point at each other: content types and relationships."""

from collections.abc import Iterator
from dataclasses import dataclass
from posixpath import dirname, join, normpath
from urllib.parse import unquote

from ledgersolve.workbook.container import Container, Limits, Member
from ledgersolve.workbook.markup import CONTENT_TYPES, PACKAGE_RELATIONS, STRICT, Attributes, walk
from ledgersolve.workbook.refusals import refusal

CONTENT_LIST = "[Content_Types].xml"

_OTHER_DOCUMENTS = {
    "opendocument.text": "a text document",
    "opendocument.presentation": "a presentation",
    "wordprocessingml": "a text document",
    "ms-word": "a text document",
    "presentationml": "a presentation",
    "ms-powerpoint": "a presentation",
    "ms-visio": "a drawing",
}


@dataclass(frozen=True)
class Relation:
    """One relationship: its id, the last word of its type, and the part (or address) it points at."""

    id: str
    kind: str
    target: str
    external: bool = False


def small_pieces(container: Container, member: Member, limits: Limits) -> Iterator[bytes]:
    """Pieces of a part that is read as a list; refused where it is absurdly large."""
    if member.size > limits.part_size:
        raise refusal("too large inside", f"the part {member.name} alone has {member.size // 1_000_000} MB")
    return container.pieces(member)


def relations(container: Container, part: str, limits: Limits) -> tuple[Relation, ...]:
    """Relationships of a part (``""`` for those of the package), in file order."""
    member = container.find(relations_name(part))
    if member is None:
        return ()
    found: list[Relation] = []

    def start(name: str, attributes: Attributes) -> None:
        if name == f"{PACKAGE_RELATIONS} Relationship":
            found.append(_relation(part, attributes))

    walk(member.name, small_pieces(container, member, limits), start)
    return tuple(found)


def check_relations(container: Container, limits: Limits) -> None:
    """Read every relationships part once, so that a broken one is told now and not when an answer is written."""
    for member in container.members:
        if member.name.lower().endswith(".rels"):
            walk(member.name, small_pieces(container, member, limits), lambda _, attributes: attributes)


def relations_name(part: str) -> str:
    """Name of the relationships part of a part."""
    folder, _, name = part.rpartition("/")
    return f"{folder}/_rels/{name}.rels" if folder else f"_rels/{name}.rels"


def _relation(part: str, attributes: Attributes) -> Relation:
    kind = attributes.get("Type", "")
    if kind.startswith(STRICT):
        raise refusal("strict")
    target = attributes.get("Target", "")
    if attributes.get("TargetMode") == "External":
        return Relation(attributes.get("Id", ""), kind.rpartition("/")[2], target, external=True)
    return Relation(attributes.get("Id", ""), kind.rpartition("/")[2], _resolved(part, target))


def _resolved(part: str, target: str) -> str:
    """Part name a relationship of ``part`` points at."""
    path = unquote(target.partition("#")[0])
    return normpath(path if path.startswith("/") else join("/", dirname(part), path)).lstrip("/")


def content_types(container: Container, limits: Limits) -> dict[str, str]:
    """Content type of each part that has one of its own, by name; defaults by ``*.ext``."""
    member = container.find(CONTENT_LIST)
    if member is None:
        raise _no_content_list(container)
    found: dict[str, str] = {}

    def start(name: str, attributes: Attributes) -> None:
        if name == f"{CONTENT_TYPES} Override":
            found[attributes.get("PartName", "").lstrip("/").casefold()] = attributes.get("ContentType", "")
        elif name == f"{CONTENT_TYPES} Default":
            found["*." + attributes.get("Extension", "").casefold()] = attributes.get("ContentType", "")

    walk(member.name, small_pieces(container, member, limits), start)
    return found


def _no_content_list(container: Container) -> Exception:
    mimetype = container.find("mimetype")
    if mimetype is not None and mimetype.size < 1000:
        kind = container.read(mimetype).decode("ascii", "replace")
        if "opendocument.spreadsheet" in kind:
            return refusal("OpenDocument")
        for word, name in _OTHER_DOCUMENTS.items():
            if word in kind:
                return refusal("other document", name)
    if container.find("xl/workbook.xml") is not None:
        return refusal("no content list")
    return refusal("archive")


def workbook_part(container: Container, limits: Limits) -> str:
    """Name of the workbook part of a package that can be given back whole.

    Raises
    ------
    UnreadableWorkbookError
        Where the package is signed, strict, binary, another kind of document, or points at no workbook.
    """
    types = content_types(container, limits)
    roots = relations(container, "", limits)
    if (any(relation.kind == "origin" for relation in roots)
            or any("digital-signature" in kind for name, kind in types.items() if not name.startswith("*"))
            or any(member.name.startswith("_xmlsignatures/") for member in container.members)):
        raise refusal("signed")
    found = [root.target for root in roots if root.kind == "officeDocument" and not root.external]
    member = container.find(found[0]) if found else None
    if member is None:
        raise refusal("no workbook part")
    name = member.name.casefold()
    _check_document(types.get(name) or types.get("*." + name.rpartition(".")[2], ""))
    return member.name


def _check_document(kind: str) -> None:
    lowered = kind.casefold()
    if "sheet.binary" in lowered:
        raise refusal("binary workbook")
    for word, name in _OTHER_DOCUMENTS.items():
        if word in lowered:
            raise refusal("other document", name)
    if "spreadsheetml" not in lowered and "ms-excel" not in lowered:
        raise refusal("no workbook part")
