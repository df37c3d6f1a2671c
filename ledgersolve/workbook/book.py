"""The workbook part (sheet list, defined names, views) changed as text."""

from collections.abc import Sequence
from dataclasses import dataclass
from html import unescape

from ledgersolve.workbook import splice
from ledgersolve.workbook.markup import MAIN, RELATIONS, whole
from ledgersolve.workbook.ownership import OWN_NAMES
from ledgersolve.workbook.splice import Edits, Element

LAST_SHEET_ID = 65_000


@dataclass(frozen=True)
class Tab:
    """One entry of the sheet list."""

    name: str
    sheet_id: int
    link: str


@dataclass(frozen=True)
class LocalName:
    """A defined name of ours, local to the sheet at ``position`` of the finished list."""

    name: str
    position: int
    text: str
    hidden: bool = False


def section(text: str, name: str) -> Element | None:
    """A direct child of the workbook element."""
    top = splice.root(text)
    return next((found for found in splice.children(text, top.inner, top.outer) if found.name == name), None)


def tabs(text: str) -> list[Tab]:
    """The sheet list in order."""
    return [Tab(element.attributes.get("name", ""), whole(element.attributes.get("sheetId")),
                next((value for key, value in element.attributes.items() if key.endswith(":id")), ""))
            for element in _inside(text, "sheets")]


def defined_names(text: str) -> list[tuple[str, str]]:
    """(name, text) of all defined names."""
    return [(element.attributes.get("name", ""), unescape(element.content(text)))
            for element in _inside(text, "definedNames")]


def without_sheets(text: str, names: frozenset[str]) -> str:
    """The part without some sheets, without what is local to them, and without names that are our marks."""
    edits = Edits(text)
    gone = []
    for position, element in enumerate(_inside(text, "sheets")):
        if element.attributes.get("name") in names:
            gone.append(position)
            edits.remove(element)
    everything = section(text, "definedNames")
    entries = _inside(text, "definedNames")
    dropped = [entry for entry in entries if _is_dropped(entry, gone)]
    if everything is not None and entries and len(dropped) == len(entries):
        edits.remove(everything)
        return edits.result()
    for entry in entries:
        local = entry.attributes.get("localSheetId")
        if entry in dropped:
            edits.remove(entry)
        elif gone and local is not None:
            shift = sum(position < whole(local) for position in gone)
            edits.set(entry, {"localSheetId": str(whole(local) - shift)})
    return edits.result()


def _is_dropped(entry: Element, gone: list[int]) -> bool:
    local = entry.attributes.get("localSheetId")
    return (entry.attributes.get("name", "").casefold() in OWN_NAMES
            or (local is not None and whole(local) in gone))


def with_sheets_in_front(text: str, added: Sequence[Tab], names: Sequence[LocalName]) -> str:
    """The part with sheets before all others, the first of them active, and with local names added."""
    edits = Edits(text)
    sheets = section(text, "sheets")
    if sheets is None:
        raise ValueError("the workbook has no list of sheets")
    for entry in _inside(text, "definedNames"):
        local = entry.attributes.get("localSheetId")
        if local is not None and added:
            edits.set(entry, {"localSheetId": str(whole(local) + len(added))})
    views = section(text, "bookViews")
    if views is None:
        view = splice.made("bookViews", {}, MAIN, sheets, "<workbookView/>")
        edits.replace(sheets.start, sheets.start, view)
    else:
        for element in splice.children(text, views.inner, views.outer):
            edits.set(element, {"activeTab": None, "firstSheet": None})
    edits.replace(sheets.inner, sheets.inner, "".join(_tab(text, sheets, tab) for tab in added))
    return _with_names(edits.result(), names)


def _tab(text: str, sheets: Element, tab: Tab) -> str:
    declared = [key.partition(":")[2] for key, value in splice.root(text).attributes.items()
                if key.startswith("xmlns:") and value == RELATIONS]
    values = {"name": tab.name, "sheetId": str(tab.sheet_id)}
    if declared:
        values[f"{declared[0]}:id"] = tab.link
    else:
        values |= {"xmlns:r": RELATIONS, "r:id": tab.link}
    return splice.made("sheet", values, MAIN, sheets)


def _with_names(text: str, names: Sequence[LocalName]) -> str:
    if not names:
        return text
    top = splice.root(text)
    added = "".join(_name(top, name) for name in names)
    known = section(text, "definedNames")
    if known is not None:
        return text[:known.start] + splice.with_content(text, known, added) + text[known.end:]
    before = [found.end for found in splice.children(text, top.inner, top.outer)
              if found.name in ("sheets", "functionGroups", "externalReferences")]
    place = max(before)
    return text[:place] + splice.made("definedNames", {}, MAIN, top, added) + text[place:]


def _name(top: Element, name: LocalName) -> str:
    values = {"name": name.name, "localSheetId": str(name.position)}
    if name.hidden:
        values["hidden"] = "1"
    return splice.made("definedName", values, MAIN, top, splice.escaped(name.text))


def recalculated_on_load(text: str) -> str:
    """The part with the wish that formulas be calculated when the workbook is opened."""
    known = section(text, "calcPr")
    if known is not None:
        edits = Edits(text)
        edits.set(known, {"fullCalcOnLoad": "1"})
        return edits.result()
    top = splice.root(text)
    before = [found.end for found in splice.children(text, top.inner, top.outer)
              if found.name in ("sheets", "functionGroups", "externalReferences", "definedNames")]
    place = max(before)
    return text[:place] + splice.made("calcPr", {"fullCalcOnLoad": "1"}, MAIN, top) + text[place:]


def calculated_as_written(text: str) -> str:
    """The part without that wish: every formula carries its value, and nothing is asked on closing."""
    known = section(text, "calcPr")
    if known is None:
        return text
    edits = Edits(text)
    edits.set(known, {"fullCalcOnLoad": None})
    return edits.result()


def free_sheet_ids(text: str, count: int) -> list[int]:
    """Sheet ids not in use: behind the largest, or the smallest free ones where that is near its limit."""
    used = {tab.sheet_id for tab in tabs(text)}
    largest = max(used, default=0)
    if largest + count < LAST_SHEET_ID:
        return list(range(largest + 1, largest + 1 + count))
    return [number for number in range(1, LAST_SHEET_ID) if number not in used][:count]


def _inside(text: str, name: str) -> list[Element]:
    found = section(text, name)
    return [] if found is None else splice.children(text, found.inner, found.outer)
