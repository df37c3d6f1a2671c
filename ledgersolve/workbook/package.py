"""A workbook opened for reading: its sheets, their cells, and what a reader should be told about them."""

from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from types import TracebackType
from typing import Self

from ledgersolve.workbook.cells import Cell
from ledgersolve.workbook.container import Container, Limits, Member
from ledgersolve.workbook.gate import pass_gate
from ledgersolve.workbook.markup import MAIN, RELATIONS, STRICT, Attributes, walk, whole
from ledgersolve.workbook.ownership import OWN_SHEET, sheets_named
from ledgersolve.workbook.parts import Relation, check_relations, relations, small_pieces, workbook_part
from ledgersolve.workbook.refusals import refusal
from ledgersolve.workbook.stream import Area, Surroundings, Texts, area_of, refuse_too_much, stream_cells
from ledgersolve.workbook.strings import shared_strings
from ledgersolve.workbook.styles import number_styles


@dataclass(frozen=True)
class SheetInfo:
    """A sheet with cells; ``state`` is visible, hidden or veryHidden."""

    name: str
    state: str = "visible"

    @property
    def hidden(self) -> bool:
        """Whether the analyst sees no tab of it."""
        return self.state != "visible"


@dataclass(frozen=True)
class TableArea:
    """A table object; rows and columns from 1, inclusive, header and totals rows included."""

    name: str
    first_row: int
    first_column: int
    last_row: int
    last_column: int
    header_rows: int = 1
    totals_rows: int = 0


@dataclass(frozen=True)
class SheetDetails:
    """What lies around the cells of a sheet.

    ``hidden_rows`` and ``hidden_columns`` are ranges from 1, inclusive, in order; ``filtered`` says that a
    filter is set (rows it hides are among the hidden ones); ``merged`` are areas, never expanded; ``percents``
    are number cells shown as a percentage (row, column; the first ten thousand).
    """

    tables: tuple[TableArea, ...] = ()
    hidden_rows: tuple[tuple[int, int], ...] = ()
    hidden_columns: tuple[tuple[int, int], ...] = ()
    filtered: bool = False
    merged: tuple[Area, ...] = ()
    percents: frozenset[tuple[int, int]] = frozenset()


@dataclass(frozen=True)
class Outline:
    """What the workbook part says: sheets with their relationship ids, names, and the date system."""

    sheets: tuple[tuple[str, str, str], ...]
    names: tuple[tuple[str, str], ...]
    date1904: bool


@dataclass
class Package:
    """An open workbook. ``sheets`` are the analyst's, ``own_sheets`` those of an earlier answer of ours."""

    container: Container
    limits: Limits
    part: str
    sheets: tuple[SheetInfo, ...]
    own_sheets: tuple[SheetInfo, ...]
    date1904: bool
    external_links: bool
    macros: bool
    _members: dict[str, Member]
    _relations: tuple[Relation, ...]
    _texts: Texts | None = None
    _around: dict[str, Surroundings] = field(default_factory=dict)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self.close()

    def close(self) -> None:
        """Close the file."""
        self.container.file.close()

    def cells(self, name: str) -> Iterator[Cell]:
        """Filled cells of a sheet, streaming in row order.

        Raises
        ------
        KeyError
            Where there is no such sheet.
        UnreadableWorkbookError
            Where the sheet cannot be read or holds too much.
        """
        member = self._members[name]
        refuse_too_much(name, *self.container.counts.get(member.name, (0, 0)), self.limits)
        around = Surroundings()
        yield from stream_cells(name, member.name, self.container.pieces(member), self._shared(), self.limits,
                                around)
        self._around[name] = around

    def details(self, name: str) -> SheetDetails:
        """What lies around the cells. Costs nothing after ``cells`` was read to its end, else a pass."""
        if name not in self._around:
            for _ in self.cells(name):
                pass
        around = self._around[name]
        tables, table_filter = self._tables(name, around.table_ids)
        return SheetDetails(tables, tuple(around.hidden_rows), tuple(around.hidden_columns),
                            around.filtered or table_filter, tuple(around.merged), frozenset(around.percents))

    def _shared(self) -> Texts:
        if self._texts is None:
            strings: list[str] = []
            dates: frozenset[int] = frozenset()
            percents: frozenset[int] = frozenset()
            for relation in self._relations:
                member = self.container.find(relation.target)
                if member is not None and relation.kind == "sharedStrings":
                    strings = shared_strings(member.name, self.container.pieces(member), self.limits)
                elif member is not None and relation.kind == "styles":
                    pieces = small_pieces(self.container, member, self.limits)
                    dates, percents = number_styles(member.name, pieces)
            self._texts = Texts(strings, dates, self.date1904, percents)
        return self._texts

    def _tables(self, name: str, ids: list[str]) -> tuple[tuple[TableArea, ...], bool]:
        targets = {relation.id: relation.target for relation in relations(
            self.container, self._members[name].name, self.limits)} if ids else {}
        found: list[TableArea] = []
        filtered = False
        for member in (self.container.find(targets.get(key, "")) for key in ids):
            if member is not None:
                table, with_filter = _table(member.name, small_pieces(self.container, member, self.limits))
                filtered |= with_filter
                found += [table] if table is not None else []
        return tuple(found), filtered


def open_package(path: Path, limits: Limits | None = None) -> Package:
    """Open a dropped workbook after every check of the gate.

    Raises
    ------
    UnreadableWorkbookError
        Where the file cannot be read as a workbook, or could not be given back whole; with a problem in
        plain words.
    """
    limits = limits or Limits()
    container = pass_gate(path, limits)
    try:
        return _package(container, limits)
    except BaseException:
        container.file.close()
        raise


def _package(container: Container, limits: Limits) -> Package:
    part = workbook_part(container, limits)
    check_relations(container, limits)
    outline = read_outline(container, part, limits)
    links = relations(container, part, limits)
    worksheets = {link.id: link.target for link in links if link.kind == "worksheet" and not link.external}
    own = sheets_named(OWN_SHEET, outline.names)
    sheets: dict[bool, list[SheetInfo]] = {False: [], True: []}
    members: dict[str, Member] = {}
    for name, state, key in outline.sheets:
        member = container.find(worksheets[key]) if key in worksheets else None
        if member is not None:
            members[name] = member
            sheets[name in own].append(SheetInfo(name, state))
        elif key in worksheets:
            raise refusal("damaged", f"the sheet “{name}” is missing in it")
    if not members:
        raise refusal("no sheet")
    return Package(
        container, limits, part, tuple(sheets[False]), tuple(sheets[True]), outline.date1904,
        external_links=any(link.kind == "externalLink" for link in links),
        macros=any(link.kind == "vbaProject" for link in links),
        _members=members, _relations=links)


def read_outline(container: Container, part: str, limits: Limits) -> Outline:
    """Read the workbook part.

    Raises
    ------
    UnreadableWorkbookError
        Where it is strict Open XML, not a workbook at all, or names a sheet twice.
    """
    sheets: list[tuple[str, str, str]] = []
    names: list[tuple[str, list[str]]] = []
    date1904 = False
    current: list[str] | None = None

    def start(name: str, attributes: Attributes) -> None:
        nonlocal date1904, current
        if name.startswith(STRICT) or attributes.get("conformance") == "strict":
            raise refusal("strict")
        if name == f"{MAIN} sheet":
            sheets.append((attributes.get("name", ""), attributes.get("state", "visible"),
                           attributes.get(f"{RELATIONS} id", "")))
        elif name == f"{MAIN} workbookPr":
            date1904 = attributes.get("date1904") in ("1", "true")
        elif name == f"{MAIN} definedName":
            current = []
            names.append((attributes.get("name", ""), current))
            if len(names) > limits.names:
                raise refusal("too many names", f"{limits.names:,}")

    def text(piece: str) -> None:
        if current is not None:
            current.append(piece)

    def end(name: str) -> None:
        nonlocal current
        if name == f"{MAIN} definedName":
            current = None

    member = container.find(part)
    assert member is not None
    walk(member.name, small_pieces(container, member, limits), start, text, end)
    folded = [name.casefold() for name, _, _ in sheets]
    if len(set(folded)) < len(folded):
        raise refusal("damaged", "two of its sheets have the same name")
    return Outline(tuple(sheets), tuple((name, "".join(pieces)) for name, pieces in names), date1904)


def _table(part: str, pieces: Iterator[bytes]) -> tuple[TableArea | None, bool]:
    found: list[TableArea] = []
    filtered = False

    def start(name: str, attributes: Attributes) -> None:
        nonlocal filtered
        if name == f"{MAIN} table":
            area = area_of(attributes.get("ref", ""))
            if area is not None:
                found.append(TableArea(attributes.get("displayName") or attributes.get("name", ""), *area,
                                       whole(attributes.get("headerRowCount"), 1),
                                       whole(attributes.get("totalsRowCount"), 0)))
        elif name == f"{MAIN} filterColumn":
            filtered = True

    walk(part, pieces, start)
    return (found[0] if found else None), filtered
