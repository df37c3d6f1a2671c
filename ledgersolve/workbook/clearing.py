"""Our earlier sheets and marks taken out of a package again, so that a second drop starts like a first."""

import re
from collections.abc import Iterable

from ledgersolve.workbook import book, marks
from ledgersolve.workbook.draft import Draft
from ledgersolve.workbook.markup import escape
from ledgersolve.workbook.merge_strings import cut_strings
from ledgersolve.workbook.ownership import FREED_TAB, MARKED_SHEET, OWN_SHEET, quoted, sheets_named
from ledgersolve.workbook.parts import relations_name

_PLAIN_NAME = re.compile(r"[^\W\d][\w.]*")


def clear(draft: Draft) -> frozenset[str]:
    """Take out our sheets, what only they point at, our texts, our marks and names; gives our sheets' names.

    The list of calculation order goes too: it names cells that will be gone, and every program makes it anew.
    """
    text = draft.text(draft.part)
    names = book.defined_names(text)
    own = sheets_named(OWN_SHEET, names)
    parts = sheet_parts(draft)
    _clear_marks(draft, parts, names)
    gone = {tab.link for tab in book.tabs(text) if tab.name in own}
    chains = {link.id: link.target for link in draft.relations(draft.part) if link.kind == "calcChain"}
    lonely = _reached_only_from(draft, {part for name, part in parts.items() if name in own}, gone)
    for part in lonely | {part for target in chains.values() if (part := _spelled(draft, target))}:
        draft.remove(part)
    _cut_texts(draft, gone)
    draft.put(draft.part, book.without_sheets(text, own))
    if gone or chains:
        draft.unlink(gone | set(chains))
    draft.declare({})
    return own


def sheet_parts(draft: Draft) -> dict[str, str]:
    """Part of each sheet of the list, by sheet name."""
    targets = {link.id: link.target for link in draft.relations(draft.part) if not link.external}
    found = {}
    for tab in book.tabs(draft.text(draft.part)):
        part = _spelled(draft, targets.get(tab.link, ""))
        if part is not None:
            found[tab.name] = part
    return found


def refers_to(draft: Draft, parts: Iterable[str], sheets: Iterable[str]) -> bool:
    """Whether a formula in one of the parts, or a defined name, may refer to one of the sheets."""
    words = [escape(f"{quoted(name)}!").encode() for name in sheets]
    words += [f"{name}!".encode() for name in sheets if _PLAIN_NAME.fullmatch(name)]
    defined = "\n".join(value for _, value in book.defined_names(draft.text(draft.part)))
    if not words:
        return False
    if any(word in escape(defined).encode() for word in words):
        return True
    longest = max(map(len, words))
    for part in parts:
        member = draft.container.find(part)
        rest = b""
        for piece in draft.container.pieces(member) if member is not None else ():
            block = rest + piece
            if any(word in block for word in words):
                return True
            rest = block[-longest:]
    return False


def _clear_marks(draft: Draft, parts: dict[str, str], names: list[tuple[str, str]]) -> None:
    freed = sheets_named(FREED_TAB, names)
    own = sheets_named(OWN_SHEET, names)
    marked = (sheets_named(MARKED_SHEET, names) | freed) - own
    for name in marked & parts.keys():
        draft.put(parts[name], marks.without_marks(draft.read(parts[name])))
    others = [part for name, part in parts.items() if name not in own]
    for name in freed & parts.keys():
        if not any(marks.is_selected(draft.head(part)) for part in others):
            draft.put(parts[name], marks.with_tab_selected(draft.read(parts[name])))


def _cut_texts(draft: Draft, gone: set[str]) -> None:
    part = draft.target("sharedStrings")
    if part is None or not gone:
        return
    cut = cut_strings(draft.read(part))
    if not cut.made:
        draft.put(part, cut.data)
        return
    draft.remove(part)
    gone |= {link.id for link in draft.relations(draft.part) if link.kind == "sharedStrings"}


def _reached_only_from(draft: Draft, own: set[str], gone: set[str]) -> set[str]:
    """Parts that only our sheets lead to, their relationship parts included."""
    if not own:
        return set()
    kept: set[str] = set()
    starts = [link.target for link in draft.relations("") if not link.external]
    starts += [link.target for link in draft.relations(draft.part)
               if not link.external and link.id not in gone]
    _reach(draft, starts, kept, {draft.part})
    mine: set[str] = set()
    _reach(draft, list(own), mine, set())
    lonely = mine - kept
    return lonely | {name for part in lonely if (name := _spelled(draft, relations_name(part)))}


def _reach(draft: Draft, starts: list[str], found: set[str], closed: set[str]) -> None:
    waiting = list(starts)
    while waiting:
        part = _spelled(draft, waiting.pop())
        if part is None or part in found:
            continue
        found.add(part)
        if part not in closed:
            waiting += [link.target for link in draft.relations(part) if not link.external]


def _spelled(draft: Draft, target: str) -> str | None:
    """The part name as the package spells it."""
    member = draft.container.find(target)
    return None if member is None else member.name
