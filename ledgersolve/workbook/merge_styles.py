"""The styles of result sheets brought into the analyst's style part, each once, behind what is there.

Nothing of the analyst's is renumbered; what is equal to something there is used, not added again.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from ledgersolve.workbook import splice
from ledgersolve.workbook.markup import MAIN, whole
from ledgersolve.workbook.splice import Element

_ORDER = ("numFmts", "fonts", "fills", "borders", "cellStyleXfs", "cellXfs", "cellStyles", "dxfs",
          "tableStyles", "colors", "extLst")
_FIRST_OWN_FORMAT = 164
# What a workbook without a style part looks like: one plain format.
_PLAIN = (
    f'<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n<styleSheet xmlns="{MAIN}">'
    '<fonts count="1"><font><sz val="11"/><name val="Calibri"/><family val="2"/></font></fonts>'
    '<fills count="2"><fill><patternFill patternType="none"/></fill>'
    '<fill><patternFill patternType="gray125"/></fill></fills>'
    '<borders count="1"><border><left/><right/><top/><bottom/><diagonal/></border></borders>'
    '<cellStyleXfs count="1"><xf numFmtId="0" fontId="0" fillId="0" borderId="0"/></cellStyleXfs>'
    '<cellXfs count="1"><xf numFmtId="0" fontId="0" fillId="0" borderId="0" xfId="0"/></cellXfs>'
    '<cellStyles count="1"><cellStyle name="Normal" xfId="0" builtinId="0"/></cellStyles></styleSheet>')

Key = tuple[object, ...]


@dataclass(frozen=True)
class MergedStyles:
    """The merged part, and where our cell formats and live (differential) formats are in it."""

    text: str
    cells: Mapping[int, int]
    live: Mapping[int, int]


def merge_styles(theirs: str | None, ours: str) -> MergedStyles:
    """Bring all cell formats and live formats of ``ours`` into ``theirs`` (None: there is no style part)."""
    theirs = _PLAIN if theirs is None else theirs
    pools = {name: _Pool(theirs, name) for name in ("fonts", "fills", "borders", "cellXfs", "dxfs")}
    formats = _Formats(theirs, ours)
    maps = {name: [pools[name].index(part) for part in _parts(ours, name)]
            for name in ("fonts", "fills", "borders")}
    cells_map = {0: 0}
    for index, entry in enumerate(_entries(ours, "cellXfs")):
        if index:
            cells_map[index] = pools["cellXfs"].index(_cell_format(ours, entry, maps, formats.code))
    live_map = {index: pools["dxfs"].index(_live_format(part, formats.code))
                for index, part in enumerate(_parts(ours, "dxfs"))}
    return MergedStyles(_joined(theirs, {**{name: pool.added for name, pool in pools.items()},
                                         "numFmts": formats.added}), cells_map, live_map)


def add_live_formats(theirs: str, formats: list[str]) -> tuple[str, list[int]]:
    """The part with live formats (``<dxf>`` texts) in it, and their indices."""
    pool = _Pool(theirs, "dxfs")
    indices = [pool.index(part) for part in formats]
    return _joined(theirs, {"dxfs": pool.added}), indices


class _Pool:
    """One list of the style part: what is in it already and what has to be added."""

    def __init__(self, theirs: str, name: str) -> None:
        self.added: list[str] = []
        self._known: dict[Key, int] = {}
        self._count = 0
        for part in _parts(theirs, name):
            self._known.setdefault(_key(part), self._count)
            self._count += 1

    def index(self, part: str) -> int:
        key = _key(part)
        if key not in self._known:
            self._known[key] = self._count
            self._count += 1
            self.added.append(part)
        return self._known[key]


class _Formats:
    """Number formats by their text: the codes differ from workbook to workbook."""

    def __init__(self, theirs: str, ours: str) -> None:
        self._ours = {entry.attributes["numFmtId"]: entry.attributes["formatCode"]
                      for entry in _entries(ours, "numFmts")}
        self._theirs: dict[str, str] = {}
        codes = [_FIRST_OWN_FORMAT - 1]
        for entry in _entries(theirs, "numFmts"):
            code = entry.attributes.get("numFmtId", "")
            self._theirs.setdefault(entry.attributes.get("formatCode", ""), code)
            codes.append(whole(code))
        self._next = max(codes) + 1
        self.added: list[str] = []

    def code(self, ours: str) -> str:
        text = self._ours.get(ours)
        if text is None:
            return ours  # one of the built-in ones, the same everywhere
        if text not in self._theirs:
            self._theirs[text] = str(self._next)
            self._next += 1
            written = splice.with_attributes(
                "<numFmt/>", {"numFmtId": self._theirs[text], "formatCode": text})
            self.added.append(written)
        return self._theirs[text]


def _cell_format(ours: str, entry: Element, maps: Mapping[str, list[int]], code: Callable[[str], str]) -> str:
    """Text of a cell format with its indices and every part of it applied, whatever their base style is."""
    values: dict[str, str | None] = {"numFmtId": code(entry.attributes.get("numFmtId", "0")), "xfId": "0"}
    for name, attribute in (("fonts", "fontId"), ("fills", "fillId"), ("borders", "borderId")):
        values[attribute] = str(maps[name][int(entry.attributes.get(attribute, "0"))])
    for applied in ("applyNumberFormat", "applyFont", "applyFill", "applyBorder"):
        values[applied] = "1"
    return splice.with_attributes(ours[entry.start:entry.inner], values) + ours[entry.inner:entry.end]


def _live_format(part: str, code: Callable[[str], str]) -> str:
    edits = splice.Edits(part)
    top = splice.root(part)
    for child in splice.children(part, top.inner, top.outer):
        if child.name == "numFmt":
            edits.set(child, {"numFmtId": code(child.attributes.get("numFmtId", "0"))})
    return edits.result()


def _joined(theirs: str, added: Mapping[str, list[str]]) -> str:
    """The part with entries added to its lists, making the lists that are missing."""
    top = splice.root(theirs)
    lists = {element.name: element for element in splice.children(theirs, top.inner, top.outer)}
    edits = splice.Edits(theirs)
    for name in _ORDER:
        entries = added.get(name, [])
        if not entries:
            continue
        spaced = [part.replace(" ", f' xmlns="{MAIN}" ', 1) if top.prefix else part for part in entries]
        known = lists.get(name)
        if known is None:
            behind = [lists[other].end for other in _ORDER[:_ORDER.index(name)] if other in lists]
            place = max(behind, default=top.inner)
            edits.replace(place, place, splice.made(name, {"count": str(len(entries))}, MAIN, top,
                                                    "".join(entries)))
        else:
            count = len(splice.children(theirs, known.inner, known.outer)) + len(entries)
            edits.replace(known.start, known.end, splice.with_content(
                theirs, known, "".join(spaced), {"count": str(count)}))
    return edits.result()


def _key(part: str) -> Key:
    """What makes two entries equal: elements and attributes, whatever their order, prefix and spacing."""
    found: list[object] = []
    _collect(part, 0, len(part), found)
    return tuple(found)


def _collect(text: str, start: int, end: int, found: list[object]) -> None:
    for element in splice.children(text, start, end):
        values = (pair for pair in element.attributes.items() if not pair[0].startswith("xmlns"))
        found += [element.name, tuple(sorted(values)), "("]
        _collect(text, element.inner, element.outer, found)
        found.append(")")


def _entries(text: str, name: str) -> list[Element]:
    top = splice.root(text)
    for element in splice.children(text, top.inner, top.outer):
        if element.name == name:
            return splice.children(text, element.inner, element.outer)
    return []


def _parts(text: str, name: str) -> list[str]:
    return [element.whole(text) for element in _entries(text, name)]
