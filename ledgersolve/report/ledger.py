"""The ledger: every cost of a plan as a line of quantity x rate, with subtotals that add up to the total."""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

from ledgersolve.report import style
from ledgersolve.report.tables import FIRST_ROW, FOOTER, TITLE_ROW, Figure, heading, quoted
from ledgersolve.workbook.origins import CellRef
from ledgersolve.workbook.sheets import ResultSheet, RowGroup, Style

KIND, PART, WHO, WHAT, QUANTITY, UNIT, RATE, RATE_UNIT, AMOUNT, FROM = range(10)
TOTAL_ROW = FIRST_ROW
SMALL_CELL = replace(style.SMALL, align="left", indent=1)


@dataclass(frozen=True, slots=True)
class Line:
    """One cost: quantity x rate. ``key`` lets detail sheets point at the line; ``source`` tells the rate's cell.

    ``note`` says why a rate is a constant, where it is one; units given here win over the part's.
    """

    key: tuple[str, int, int]
    who: str
    what: str
    quantity: Figure
    rate: Figure
    source: CellRef | None = None
    note: str = ""
    unit: str = ""
    rate_unit: str = ""

    @property
    def amount(self) -> float:
        """Money."""
        return self.quantity.value * self.rate.value


@dataclass(frozen=True)
class Group:
    """Lines with a subtotal of their own (the deliveries of one site)."""

    key: tuple[str, int, int]
    who: str
    what: str
    lines: Sequence[Line]


@dataclass(frozen=True)
class Part:
    """A part of the cost under the audit's name; ``groups`` without a subtotal have an empty ``what``."""

    name: str
    unit: str
    rate_unit: str
    quantity_format: str
    groups: Sequence[Group]

    @property
    def amount(self) -> float:
        """Money."""
        return sum(line.amount for group in self.groups for line in group.lines)


@dataclass
class Ledger:
    """The written sheet, and where its figures stand (rows from 0)."""

    sheet: ResultSheet
    rows: dict[tuple[str, int, int], int] = field(default_factory=dict)
    parts: dict[str, int] = field(default_factory=dict)
    last_row: int = FIRST_ROW

    @property
    def name(self) -> str:
        """Sheet name as a formula names it."""
        return quoted(self.sheet.name)

    @property
    def total(self) -> str:
        """Cell of the total."""
        return f"{self.name}!$I${TOTAL_ROW + 1}"

    def amount(self, key: tuple[str, int, int]) -> str:
        """Cell of a line's or a group's amount; "" where there is none."""
        return f"{self.name}!$I${self.rows[key] + 1}" if key in self.rows else ""

    def part(self, name: str) -> str:
        """Cell of a part's amount."""
        return f"{self.name}!$I${self.parts[name] + 1}"

    def column(self, letter: str) -> str:
        """All rows of a column, for a formula on another sheet."""
        return f"{self.name}!${letter}${FIRST_ROW + 1}:${letter}${self.last_row + 1}"


def group_of_lines(lines: Sequence[Line]) -> Group:
    """Lines that stand under their part without a subtotal of their own."""
    return Group(("", 0, 0), "", "", lines)


def write_ledger(name: str, parts: Sequence[Part], currency: str, per: str, who: str, what: str) -> Ledger:
    """Write the ledger.

    Parameters
    ----------
    parts
        In order; a part without lines is left out.
    per
        What one amount covers, behind a slash (``/year``), or "".
    who, what
        Titles of the two columns that say what a line is about (``Site``, ``Customer``).
    """
    sheet = ResultSheet(name, tab_colour=style.PETROL, landscape=True, frozen=(FIRST_ROW + 1, 0))
    ledger = Ledger(sheet)
    kept = [part for part in parts if any(group.lines for group in part.groups)]
    _titles(sheet, who, what, f"{currency}{per}")
    row = TOTAL_ROW + 1
    money = style.money_format(currency)
    for part in kept:
        row = _write_part(ledger, part, row, currency)
    ledger.last_row = row - 1
    _write_total(ledger, sum(part.amount for part in kept), money)
    sheet.filter = (TITLE_ROW, KIND, ledger.last_row, FROM)
    sheet.repeat_rows = (TITLE_ROW, TITLE_ROW)
    sheet.footer = FOOTER
    return ledger


def _titles(sheet: ResultSheet, who: str, what: str, money: str) -> None:
    titles = (
        ("Row", 9.0), ("Cost part", 25.0), (who, 15.0), (what, 28.0), ("Quantity", 14.0), ("Unit of quantity", 18.0),
        ("Rate", 14.0), ("Unit of rate", 24.0), (f"Amount ({money})", 19.0), ("Rate taken from", 30.0),
    )
    for column, (title, width) in enumerate(titles):
        right = column in (QUANTITY, RATE, AMOUNT)
        sheet.put(TITLE_ROW, column, title, style.HEADER_RIGHT if right else style.HEADER)
        sheet.widths[column] = width
    sheet.heights[TITLE_ROW] = 30.0
    heading(sheet, "Ledger", "Every cost of the plan as quantity x rate. Rates, and demands behind quantities, are "
                             "formulas into your own input cells: change one there and the cost of this same plan "
                             "follows, here and on the first page. What is open, delivered or made does not change "
                             "by itself: for a new plan, drop the workbook again. Filter the column Row by "
                             "\"line\" to see the single costs only.", 10)


def _write_part(ledger: Ledger, part: Part, row: int, currency: str) -> int:
    sheet, top = ledger.sheet, row
    ledger.parts[part.name] = top
    money = style.money_format(currency)
    rates = (line.rate.value for group in part.groups for line in group.lines)
    looks = _Looks.of(part.quantity_format, style.rate_format(currency, rates), money)
    row += 1
    for group in part.groups:
        if not group.lines:
            continue
        first = row
        if group.what:
            row += 1
        for line in group.lines:
            _write_line(ledger, part, line, row, looks)
            row += 1
        if group.what:
            _write_group(ledger, part, group, first, row - 1, money)
    last = row - 1
    formula = f'=SUMIF(A{top + 2}:A{last + 1},"line",I{top + 2}:I{last + 1})'
    _strip(sheet, top, style.SUBTOTAL)
    sheet.put(top, KIND, "part", style.SUBTOTAL)
    sheet.put(top, PART, part.name, style.SUBTOTAL)
    sheet.put(top, AMOUNT, part.amount, style.with_format(style.SUBTOTAL, money), formula=formula)
    sheet.groups.append(RowGroup(top + 1, last, 1))
    return row


def _write_group(ledger: Ledger, part: Part, group: Group, row: int, last: int, money: str) -> None:
    sheet = ledger.sheet
    ledger.rows[group.key] = row
    look = style.SUBSUBTOTAL
    _strip(sheet, row, look)
    sheet.put(row, KIND, "subtotal", look)
    sheet.put(row, PART, part.name, look)
    sheet.put(row, WHO, group.who, look)
    sheet.put(row, WHAT, group.what, look)
    amount = sum(line.amount for line in group.lines)
    sheet.put(row, AMOUNT, amount, style.with_format(look, money), formula=f"=SUM(I{row + 2}:I{last + 1})")
    sheet.groups.append(RowGroup(row + 1, last, 2))


@dataclass(frozen=True)
class _Looks:
    quantity: Style
    rate: Style
    amount: Style

    @classmethod
    def of(cls, quantity: str, rate: str, amount: str) -> "_Looks":
        return cls(style.number(quantity), style.number(rate), style.number(amount))


def _write_line(ledger: Ledger, part: Part, line: Line, row: int, looks: _Looks) -> None:
    put = ledger.sheet.put
    ledger.rows[line.key] = row
    put(row, KIND, "line", SMALL_CELL)
    put(row, PART, part.name, SMALL_CELL)
    put(row, WHO, line.who, style.CELL)
    put(row, WHAT, line.what, style.CELL)
    put(row, QUANTITY, line.quantity.value, looks.quantity, formula=line.quantity.written)
    put(row, UNIT, line.unit or part.unit, SMALL_CELL)
    put(row, RATE, line.rate.value, looks.rate, formula=line.rate.written)
    put(row, RATE_UNIT, line.rate_unit or part.rate_unit, SMALL_CELL)
    put(row, AMOUNT, line.amount, looks.amount, formula=f"=E{row + 1}*G{row + 1}")
    if line.source is not None:
        words = f"{line.source.sheet}, {line.source.address}"
        put(row, FROM, f"{words} {line.note}".rstrip(), style.LINK, link=link_to(line.source))
    else:
        put(row, FROM, line.note, SMALL_CELL)


def link_to(ref: CellRef) -> str:
    """Target of a click that leads to the cell."""
    return f"{quoted(ref.sheet)}!{ref.address}"


def _write_total(ledger: Ledger, amount: float, money: str) -> None:
    sheet, last = ledger.sheet, ledger.last_row + 1
    first = TOTAL_ROW + 2
    _strip(sheet, TOTAL_ROW, style.TOTAL)
    sheet.put(TOTAL_ROW, KIND, "total", style.TOTAL)
    sheet.put(TOTAL_ROW, PART, "Cost of the plan", style.TOTAL)
    formula = f'=SUMIF(A{first}:A{last},"part",I{first}:I{last})' if last >= first else ""
    sheet.put(TOTAL_ROW, AMOUNT, amount, style.with_format(style.TOTAL, money), formula=formula)


def _strip(sheet: ResultSheet, row: int, look: Style) -> None:
    for column in range(FROM + 1):
        sheet.put(row, column, None, look)
