"""The parts of rendered result sheets, taken out of the workbook they were rendered into.

Sheets, drawings and charts get names of ours that are free in the analyst's package; styles and shared
texts are re-indexed in our sheets only.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from html import unescape
from io import BytesIO
from posixpath import dirname, join, normpath, relpath
from zipfile import ZipFile

from ledgersolve.workbook import book, splice
from ledgersolve.workbook.parts import relations_name

_CELL = re.compile(rb'(<c r="[A-Z]+[0-9]+")(?: s="([0-9]+)")?( t="s"><v>)?(?(3)([0-9]+))')
_ROW = re.compile(rb'(<row [^>]*?) s="([0-9]+)"')
_COLUMN = re.compile(rb'(<col [^>]*?) style="([0-9]+)"')
_RULE = re.compile(rb'(<cfRule [^>]*?dxfId=")([0-9]+)"')
_SELECTED = re.compile(rb' tabSelected="1"')
_TYPES = {
    "worksheets": "application/vnd.openxmlformats-officedocument.spreadsheetml.worksheet+xml",
    "drawings": "application/vnd.openxmlformats-officedocument.drawing+xml",
    "charts": "application/vnd.openxmlformats-officedocument.drawingml.chart+xml",
}


@dataclass
class Rendered:
    """A rendered workbook in memory: part name -> content."""

    parts: dict[str, bytes]
    sheets: list[tuple[str, str]] = field(default_factory=list)
    names: list[book.LocalName] = field(default_factory=list)

    @property
    def styles(self) -> str:
        """Text of the style part."""
        return splice.decoded(self.parts["xl/styles.xml"])

    @property
    def strings(self) -> list[bytes]:
        """Entries of the list of shared texts, as written."""
        return re.findall(rb"<si>.*?</si>", self.parts.get("xl/sharedStrings.xml", b""), re.DOTALL)

    @property
    def uses(self) -> int:
        """How often shared texts are used."""
        return sum(self.parts[part].count(b' t="s"><v>') for _, part in self.sheets)


def take_apart(data: bytes) -> Rendered:
    """Read the rendered workbook: sheets in order, local names, parts."""
    with ZipFile(BytesIO(data)) as package:
        rendered = Rendered({name: package.read(name) for name in package.namelist()})
    text = splice.decoded(rendered.parts["xl/workbook.xml"])
    targets = {entry.attributes["Id"]: entry.attributes["Target"]
               for entry in _relations(rendered.parts, "xl/workbook.xml")}
    rendered.sheets = [(tab.name, f"xl/{targets[tab.link]}") for tab in book.tabs(text)]
    names = book.section(text, "definedNames")
    for entry in [] if names is None else splice.children(text, names.inner, names.outer):
        values = entry.attributes
        rendered.names.append(book.LocalName(
            values["name"], int(values["localSheetId"]), unescape(entry.content(text)),
            values.get("hidden") == "1"))
    return rendered


def named_apart(rendered: Rendered, taken: Callable[[str], bool]) -> dict[str, str]:
    """New names, by their own, for the sheets and all they point at."""
    found: dict[str, str] = {}
    counts = dict.fromkeys(_TYPES, 0)
    waiting = [part for _, part in rendered.sheets]
    while waiting:
        part = waiting.pop(0)
        if part in found:
            continue
        folder = dirname(part).rpartition("/")[2]
        counts[folder] += 1
        while taken(f"xl/{folder}/ledgersolve{counts[folder]}.xml"):
            counts[folder] += 1
        found[part] = f"xl/{folder}/ledgersolve{counts[folder]}.xml"
        waiting += [normpath(join(dirname(part), entry.attributes["Target"]))
                    for entry in _relations(rendered.parts, part)
                    if entry.attributes.get("TargetMode") != "External"]
    return found


def content_type(part: str) -> str:
    """Content type of a part of ours by its folder."""
    return _TYPES[dirname(part).rpartition("/")[2]]


def renamed(rendered: Rendered, names: Mapping[str, str]) -> dict[str, bytes]:
    """Parts under their new names with their relationships, contents as rendered."""
    found: dict[str, bytes] = {}
    for part, name in names.items():
        found[name] = rendered.parts[part]
        links = rendered.parts.get(relations_name(part))
        if links is None:
            continue
        edits = splice.Edits(splice.decoded(links))
        for entry in _relations(rendered.parts, part):
            target = normpath(join(dirname(part), entry.attributes["Target"]))
            if entry.attributes.get("TargetMode") != "External":
                edits.set(entry, {"Target": relpath(names[target], dirname(name))})
        found[relations_name(name)] = edits.result().encode("utf-8")
    return found


def reindexed(sheet: bytes, cells: Mapping[int, int], live: Mapping[int, int], first_text: int, *,
              selected: bool) -> bytes:
    """A rendered sheet with styles, live formats and shared texts counted as in the analyst's package."""
    styles = {str(old).encode(): str(new).encode() for old, new in cells.items()}
    rules = {str(old).encode(): str(new).encode() for old, new in live.items()}

    def cell(match: re.Match[bytes]) -> bytes:
        head, style, shared, text = match.groups()
        if style is not None:
            head += b' s="' + styles[style] + b'"'
        if shared is None:
            return head
        return head + shared + str(int(text) + first_text).encode()

    sheet = _CELL.sub(cell, sheet)
    sheet = _ROW.sub(lambda match: match[1] + b' s="' + styles[match[2]] + b'"', sheet)
    sheet = _COLUMN.sub(lambda match: match[1] + b' style="' + styles[match[2]] + b'"', sheet)
    sheet = _RULE.sub(lambda match: match[1] + rules[match[2]] + b'"', sheet)
    sheet = _SELECTED.sub(b"", sheet, count=1)
    return sheet.replace(b"<sheetView ", b'<sheetView tabSelected="1" ', 1) if selected else sheet


def _relations(parts: Mapping[str, bytes], part: str) -> list[splice.Element]:
    links = parts.get(relations_name(part))
    if links is None:
        return []
    text = splice.decoded(links)
    top = splice.root(text)
    return splice.children(text, top.inner, top.outer)
