"""Result sheets put in front of the analyst's own in a copy of the analyst's package.

The sheets are rendered alone and their parts inserted; every part we did not write is copied as the
compressed bytes it is. Changed are the list of contents, the workbook part and its relationships, styles
and shared texts (appended to), and, where marks are asked for, the sheets they go on.
"""

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from io import BytesIO
from pathlib import Path

from ledgersolve.workbook import book
from ledgersolve.workbook.clearing import clear, refers_to, sheet_parts
from ledgersolve.workbook.container import open_container
from ledgersolve.workbook.draft import Draft
from ledgersolve.workbook.marks import (
    ERROR_FORMAT,
    NOTICE_FORMAT,
    by_sheet,
    is_selected,
    with_marks,
    with_tab_freed,
)
from ledgersolve.workbook.merge_strings import append_strings
from ledgersolve.workbook.merge_styles import MergedStyles, add_live_formats, merge_styles
from ledgersolve.workbook.ownership import FREED_TAB, MARKED_SHEET, OWN_SHEET, quoted, sheets_named
from ledgersolve.workbook.problems import Problem
from ledgersolve.workbook.render import render
from ledgersolve.workbook.result_parts import (
    Rendered,
    content_type,
    named_apart,
    reindexed,
    renamed,
    take_apart,
)
from ledgersolve.workbook.sheets import ResultSheet

LONGEST_NAME = 31
_RESERVED = "history"
_STRINGS_TYPE = "application/vnd.openxmlformats-officedocument.spreadsheetml.sharedStrings+xml"
_STYLES_TYPE = "application/vnd.openxmlformats-officedocument.spreadsheetml.styles+xml"


def plan_names(source: Path, wanted: Sequence[str]) -> dict[str, str]:
    """Final sheet names: as wanted, or with a number behind where the analyst has a sheet of that name.

    To be asked before formulas are built. Names of earlier sheets of ours are free again.

    Raises
    ------
    UnreadableWorkbookError
        Where the source cannot be read.
    """
    with open_container(source) as container:
        draft = Draft(container)
        text = draft.text(draft.part)
    own = sheets_named(OWN_SHEET, book.defined_names(text))
    taken = {tab.name.casefold() for tab in book.tabs(text) if tab.name not in own} | {_RESERVED}
    planned: dict[str, str] = {}
    for name in wanted:
        final, number = name[:LONGEST_NAME], 1
        while final.casefold() in taken:
            number += 1
            suffix = f" ({number})"
            final = name[:LONGEST_NAME - len(suffix)] + suffix
        taken.add(final.casefold())
        planned[name] = final
    return planned


def graft(source: Path, target: Path, sheets: Sequence[ResultSheet], marks: Sequence[Problem] = (), *,
          free_tab: bool = False) -> None:
    """Write a copy of ``source`` with the result sheets in front and marks on the cells that problems name.

    Earlier sheets and marks of ours are taken out first. The first result sheet is the active one. Problems
    without a cell, or on a sheet the workbook does not have, mark nothing.

    Parameters
    ----------
    source, target
        The analyst's workbook and where the copy goes (they may be the same).
    sheets
        Sheets under the names ``plan_names`` gave.
    marks
        Problems whose ``cell`` and ``more`` are marked on their ``sheet``.
    free_tab
        Take the selection from the analyst's selected sheet, by the one attribute that says so, until the
        next drop. Without it every unmarked sheet keeps its bytes, and some programs open the copy with two
        tabs selected, ours and theirs. A marked sheet is freed in any case.

    Raises
    ------
    UnreadableWorkbookError
        Where the source cannot be read or given back whole.
    """
    with open_container(source) as container, _written_whole(target) as partial:
        draft = Draft(container)
        own = clear(draft)
        parts = sheet_parts(draft)
        problems = {name: found for name, found in by_sheet(marks).items() if name in parts}
        selected = {name for name, part in parts.items() if is_selected(draft.head(part))}
        freed = selected if free_tab else selected & problems.keys()
        rendered = _rendered(sheets)
        styles = _add_sheets(draft, rendered, first_selected=not selected - freed)
        _add_marks(draft, styles, parts, problems, freed)
        text = book.with_sheets_in_front(
            draft.text(draft.part), _tabs(draft, rendered), _names(draft, rendered, set(problems), freed))
        if own and refers_to(draft, parts.values(), own):
            text = book.recalculated_on_load(text)
        draft.put(draft.part, text)
        draft.write(partial)


def fresh(target: Path, sheets: Sequence[ResultSheet]) -> None:
    """Write a workbook of result sheets alone, for answers to a file that cannot carry them."""
    with _written_whole(target) as partial:
        alone = partial.with_name(partial.name + "0")
        try:
            render(sheets, alone)
            with open_container(alone) as container:
                draft = Draft(container)
                text = book.calculated_as_written(draft.text(draft.part))
                own = [_own_name(OWN_SHEET, tab.name, position)
                       for position, tab in enumerate(book.tabs(text))]
                draft.put(draft.part, book.with_sheets_in_front(text, (), own))
                draft.write(partial)
        finally:
            alone.unlink(missing_ok=True)


@contextmanager
def _written_whole(target: Path) -> Iterator[Path]:
    """A path beside the target that takes its place once all is written, and goes where writing fails."""
    partial = target.with_name(f"~{target.stem[:40]}.tmp")
    try:
        yield partial
        partial.replace(target)
    finally:
        partial.unlink(missing_ok=True)


def _rendered(sheets: Sequence[ResultSheet]) -> Rendered:
    memory = BytesIO()
    render(sheets, memory)
    return take_apart(memory.getvalue())


def _add_sheets(draft: Draft, rendered: Rendered, *, first_selected: bool) -> str:
    """Add the parts of the rendered sheets; gives the name of the style part, which counts for marks too."""
    styles, merged = _merged_styles(draft, rendered)
    first_text = _append_texts(draft, rendered)
    names = named_apart(rendered, draft.has)
    parts = renamed(rendered, names)
    for position, (_, part) in enumerate(rendered.sheets):
        parts[names[part]] = reindexed(
            rendered.parts[part], merged.cells, merged.live, first_text,
            selected=first_selected and position == 0)
    for name, content in parts.items():
        draft.put(name, content)
    draft.declare({name: content_type(name) for name in names.values()})
    rendered.sheets = [(name, names[part]) for name, part in rendered.sheets]
    return styles


def _merged_styles(draft: Draft, rendered: Rendered) -> tuple[str, MergedStyles]:
    part = draft.target("styles")
    merged = merge_styles(None if part is None else draft.text(part), rendered.styles)
    part = part or _new_part(draft, "styles", _STYLES_TYPE)
    draft.put(part, merged.text)
    return part, merged


def _append_texts(draft: Draft, rendered: Rendered) -> int:
    """Append the texts of our sheets; gives the index of the first."""
    ours = rendered.strings
    if not ours:
        return 0
    part = draft.target("sharedStrings")
    data, first = append_strings(None if part is None else draft.read(part), ours, rendered.uses)
    draft.put(part or _new_part(draft, "sharedStrings", _STRINGS_TYPE), data)
    return first


def _new_part(draft: Draft, kind: str, content_type: str) -> str:
    """Name of a part the workbook lacked, linked and declared."""
    name = f"xl/{kind}.xml"
    while draft.has(name):
        name = name.replace(".xml", "1.xml")
    draft.link(kind, name, f"ledgersolve{kind}")
    draft.declare({name: content_type})
    return name


def _add_marks(draft: Draft, styles: str, parts: dict[str, str], problems: dict[str, list[Problem]],
               freed: set[str]) -> None:
    if problems:
        text, (error, notice) = add_live_formats(draft.text(styles), [ERROR_FORMAT, NOTICE_FORMAT])
        draft.put(styles, text)
    for name, found in problems.items():
        draft.put(parts[name], with_marks(draft.read(parts[name]), found, error, notice))
    for name in freed:
        draft.put(parts[name], with_tab_freed(draft.read(parts[name])))


def _tabs(draft: Draft, rendered: Rendered) -> list[book.Tab]:
    ids = book.free_sheet_ids(draft.text(draft.part), len(rendered.sheets))
    return [book.Tab(name, sheet_id, draft.link("worksheet", part, f"ledgersolve{position}"))
            for position, ((name, part), sheet_id) in enumerate(zip(rendered.sheets, ids, strict=True))]


def _names(draft: Draft, rendered: Rendered, marked: set[str], freed: set[str]) -> list[book.LocalName]:
    """Local names: those the sheets brought along, our marks on them, and those on the analyst's sheets."""
    names = list(rendered.names)
    names += [_own_name(OWN_SHEET, name, position) for position, (name, _) in enumerate(rendered.sheets)]
    for position, tab in enumerate(book.tabs(draft.text(draft.part)), len(rendered.sheets)):
        names += [_own_name(kind, tab.name, position)
                  for kind, group in ((MARKED_SHEET, marked), (FREED_TAB, freed)) if tab.name in group]
    return names


def _own_name(kind: str, sheet: str, position: int) -> book.LocalName:
    return book.LocalName(kind, position, f"{quoted(sheet)}!$A$1", hidden=True)
