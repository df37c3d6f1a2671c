"""One pass over the XML of a sheet: filled cells with their true addresses, and what lies around them.

The pass tells apart what other readers merge (an error value, a formula never calculated, a text, an
empty cell), believes no ``dimension``, and holds no more than one piece of the sheet at a time.
"""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from datetime import datetime

from ledgersolve.workbook.cells import Cell, Kind, address, column_letters
from ledgersolve.workbook.container import Limits
from ledgersolve.workbook.markup import MAIN, RELATIONS, Attributes, feed, parser, whole
from ledgersolve.workbook.refusals import refusal
from ledgersolve.workbook.strings import unescaped

LAST_ROW, LAST_COLUMN = 1_048_576, 16_384
COLUMNS = {column_letters(number): number for number in range(1, LAST_COLUMN + 1)}

_C, _V, _F, _T, _ROW = (f"{MAIN} {name}" for name in ("c", "v", "f", "t", "row"))
_GUIDE, _MERGE, _FILTER_COLUMN, _TABLE_PART, _COL = (
    f"{MAIN} {name}" for name in ("rPh", "mergeCell", "filterColumn", "tablePart", "col"))
_TEXTUAL = frozenset((_F, _T, _GUIDE))
_TRUE = ("1", "true")
_MOST_PERCENTS = 10_000  # cells shown as percentages that are remembered; only settings ask for them
_COUNTED = 1 << 60  # more than any row gives: a row that goes on after it was counted is not counted again
_MANY = 16  # pieces of text beyond which their length is looked at
_NUMBER, _TEXT = Kind.NUMBER, Kind.TEXT
_new = tuple.__new__  # a Cell without the detour through its constructor: a third of the time of a pass

Area = tuple[int, int, int, int]
"""First row, first column, last row, last column, from 1, inclusive."""


@dataclass(frozen=True)
class Texts:
    """What a sheet's cells refer to: shared texts, and the styles that make a number a date or a percentage."""

    shared: list[str]
    dates: frozenset[int]
    date1904: bool = False
    percents: frozenset[int] = frozenset()


@dataclass
class Surroundings:
    """What a pass finds besides cells; complete once the pass has ended."""

    hidden_rows: list[tuple[int, int]] = field(default_factory=list)
    hidden_columns: list[tuple[int, int]] = field(default_factory=list)
    merged: list[Area] = field(default_factory=list)
    filtered: bool = False
    table_ids: list[str] = field(default_factory=list)
    complete: bool = False
    percents: list[tuple[int, int]] = field(default_factory=list)


def stream_cells(sheet: str, part: str, pieces: Iterable[bytes], texts: Texts, limits: Limits,
                 around: Surroundings) -> Iterator[Cell]:
    """Yield the filled cells of a sheet in file order, filling ``around`` as it goes.

    Raises
    ------
    UnreadableWorkbookError
        Where the XML is broken, an address impossible, rows out of order, a shared text missing, or the
        sheet holds more than the limits allow.
    """
    reader = parser(part)
    scan = _Scan(sheet, texts, limits, around)
    reader.StartElementHandler = scan.start
    reader.EndElementHandler = scan.end
    reader.CharacterDataHandler = scan.text.append
    filled = 0
    for piece in pieces:
        feed(reader, part, piece)
        scan.check_limits()
        if scan.out:
            filled += len(scan.out)
            scan.count_row()
            refuse_too_much(sheet, filled, scan.rows, limits)
            yield from scan.out
            scan.out.clear()
    feed(reader, part, b"", last=True)
    yield from scan.out
    around.complete = True


def refuse_too_much(sheet: str, cells: int, rows: int, limits: Limits) -> None:
    """Refuse a sheet of more filled cells, or rows with any, than the limits allow."""
    if cells > limits.cells:
        raise refusal("too many cells", f"“{sheet}” has more than {limits.cells:,} filled cells")
    if rows > limits.rows:
        raise refusal("too many rows", f"“{sheet}” has more than {limits.rows:,} filled rows")


class _Scan:
    """Handlers of one pass. The order of the tests in ``start`` and ``end`` is that of frequency."""

    __slots__ = ("around", "before", "cell", "column", "elements", "formula", "guide", "limits", "out", "raw",
                 "row", "row_text", "rows", "sheet", "text", "texts")

    def __init__(self, sheet: str, texts: Texts, limits: Limits, around: Surroundings) -> None:
        self.sheet, self.texts, self.limits, self.around = sheet, texts, limits, around
        self.out: list[Cell] = []
        self.text: list[str] = []
        self.row, self.row_text, self.column, self.elements = 0, "0", 0, 0
        self.rows, self.before = 0, 0  # filled rows; cells given out when the row at hand began
        self.cell: Attributes = {}
        self.raw: str | None = None
        self.formula: str | None = None
        self.guide = False

    def start(self, name: str, attributes: Attributes) -> None:
        """An element begins."""
        if name == _C:
            self.cell = attributes
            self.raw = self.formula = None
            self.elements += 1
        elif name == _V:
            self.text.clear()
        elif name == _ROW:
            self._start_row(attributes)
        elif name in _TEXTUAL:
            self.text.clear()
            if name == _GUIDE:
                self.guide = True
        else:
            _look_around(name, attributes, self.around)

    def end(self, name: str) -> None:
        """An element ends."""
        if name == _V:
            self.raw = "".join(self.text)
        elif name == _C:
            self._end_cell()
        elif name == _F:
            self.formula = "".join(self.text)
        elif name == _T:
            if not self.guide:
                self.raw = (self.raw or "") + "".join(self.text)
        elif name == _GUIDE:
            self.guide = False

    def _start_row(self, attributes: Attributes) -> None:
        given = attributes.get("r")
        row = self.row + 1 if given is None else whole(given)
        if not self.row < row <= LAST_ROW:
            raise refusal("damaged", f"row {given} of the sheet “{self.sheet}” is not where it should be")
        if len(self.out) > self.before:
            self.rows += 1
        self.before = len(self.out)
        self.row, self.row_text, self.column = row, str(row), 0
        if attributes.get("hidden") in _TRUE:
            _extend(self.around.hidden_rows, row)

    def _end_cell(self) -> None:
        cell = self.cell
        reference = cell.get("r")
        row_text = self.row_text
        if reference is None:
            column = self.column + 1
        else:
            found = COLUMNS.get(reference[:-len(row_text)])
            column = found if found and reference.endswith(row_text) else self._odd_reference(reference)
        self.column = column
        raw = self.raw
        if not raw and self.formula is None:
            return
        kind = cell.get("t")
        if kind == "s" and self.formula is None:
            value = self._shared(raw)
            if value:
                self.out.append(_new(Cell, (self.row, column, _TEXT, value, "", False)))
        elif kind is None and self.formula is None and cell.get("s") is None:
            self._number(column, raw or "", _NUMBER)
        else:
            self._other(column, kind, raw)

    def _odd_reference(self, reference: str) -> int:
        column = COLUMNS.get(reference.upper().removesuffix(self.row_text))
        if column is None or not 0 < column <= LAST_COLUMN:
            raise refusal("damaged", f"the sheet “{self.sheet}” has a cell {reference} in row {self.row}")
        return column

    def _shared(self, raw: str | None) -> str:
        try:
            index = int(raw or "")
            if index >= 0:
                return self.texts.shared[index]
        except (ValueError, IndexError):
            pass
        where = address(self.row, max(1, self.column))
        raise refusal("damaged", f"the text of cell {where} on the sheet “{self.sheet}” is missing")

    def _number(self, column: int, raw: str, kind: Kind) -> None:
        try:
            value = float(raw)
        except ValueError:
            value = None
        if value is None or "_" in raw or not raw.isascii():
            cell = Cell(self.row, column, _TEXT, raw, raw, self.formula is not None)
        else:
            cell = _new(Cell, (self.row, column, kind, value, raw, self.formula is not None))
        self.out.append(cell)

    def _other(self, column: int, kind: str | None, raw: str | None) -> None:
        """A cell with a formula, a style, or a rarer type."""
        formula = self.formula is not None
        if formula and (raw is None or (not raw and kind != "str")):
            self.out.append(Cell(self.row, column, Kind.UNCALCULATED, f"={self.formula}", "", True))
            return
        if not raw:
            return
        if kind is None or kind == "n":
            style = self.cell.get("s")
            index = whole(style, -1)
            if index in self.texts.percents and len(self.around.percents) < _MOST_PERCENTS:
                self.around.percents.append((self.row, column))
            self._number(column, raw, Kind.DATE if index in self.texts.dates else _NUMBER)
            return
        found, value = self._typed(kind, raw)
        if value != "":
            self.out.append(Cell(self.row, column, found, value, "", formula))

    def _typed(self, kind: str, raw: str) -> tuple[Kind, float | str | bool]:
        if kind == "s":
            return _TEXT, self._shared(raw)
        if kind == "b":
            return Kind.BOOLEAN, raw.strip() in _TRUE
        if kind == "e":
            return Kind.ERROR, raw.strip()
        if kind == "d":
            serial = _serial(raw, self.texts.date1904)
            return (_TEXT, raw) if serial is None else (Kind.DATE, serial)
        return _TEXT, unescaped(raw)

    def count_row(self) -> None:
        """Count the row at hand where it is filled so far; called before ``out`` is emptied."""
        if len(self.out) > self.before:
            self.rows += 1
            self.before = _COUNTED
        elif self.before != _COUNTED:
            self.before = 0

    def check_limits(self) -> None:
        """Refuse a sheet of too many cells, and a text that grows without end."""
        if self.elements > self.limits.cell_elements:
            raise refusal("too many cells",
                          f"“{self.sheet}” has more than {self.limits.cell_elements:,} cells, empty or not")
        if len(self.text) > _MANY and sum(map(len, self.text)) > self.limits.cell_length:
            raise refusal("damaged", f"a cell in row {self.row} of the sheet “{self.sheet}” holds more than "
                          f"{self.limits.cell_length:,} characters")


def _look_around(name: str, attributes: Attributes, around: Surroundings) -> None:
    """Elements beside the cells: merges, filters, tables, hidden columns."""
    if name == _MERGE:
        area = area_of(attributes.get("ref", ""))
        if area is not None:
            around.merged.append(area)
    elif name == _FILTER_COLUMN:
        around.filtered = True
    elif name == _TABLE_PART:
        around.table_ids.append(attributes.get(f"{RELATIONS} id", ""))
    elif name == _COL and attributes.get("hidden") in _TRUE:
        first, last = whole(attributes.get("min")), min(whole(attributes.get("max")), LAST_COLUMN)
        if 0 < first <= last:
            around.hidden_columns.append((first, last))


def _extend(ranges: list[tuple[int, int]], row: int) -> None:
    if ranges and ranges[-1][1] == row - 1:
        ranges[-1] = (ranges[-1][0], row)
    else:
        ranges.append((row, row))


def area_of(reference: str) -> Area | None:
    """Area of a reference such as ``A1:D8`` or ``B2``; None where it is no such thing."""
    corners = [corner_of(corner) for corner in reference.replace("$", "").split(":")]
    if len(corners) > 2 or corners[0] is None or corners[-1] is None:
        return None
    (first_row, first_column), (last_row, last_column) = corners[0], corners[-1]
    return (min(first_row, last_row), min(first_column, last_column),
            max(first_row, last_row), max(first_column, last_column))


def corner_of(reference: str) -> tuple[int, int] | None:
    """Row and column of an address such as ``D8``; None where it is none."""
    letters = reference.rstrip("0123456789")
    row, column = whole(reference[len(letters):]), COLUMNS.get(letters.upper())
    return None if column is None or not 0 < row <= LAST_ROW else (row, column)


def _serial(text: str, date1904: bool) -> float | None:
    """Serial number of a date written out (ISO 8601), None where it is none."""
    try:
        moment = datetime.fromisoformat(text.strip()).replace(tzinfo=None)
    except ValueError:
        return None
    epoch = datetime(1904, 1, 1) if date1904 else datetime(1899, 12, 30)  # right from March 1900 on
    return (moment - epoch).total_seconds() / 86_400
