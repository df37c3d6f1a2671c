"""Rules for a results workbook (WB-01 to WB-23), each as a check over the returned file.

``check_workbook`` gives every violation in words. The rules are those of common practice for spreadsheet models
(ICAEW, Twenty principles for good spreadsheet practice, 2nd ed. 2015; FAST Standard 02c; ICAEW Financial
Modelling Code 2018), the limits of the file format (ISO/IEC 29500), and OWASP's advice on formula injection.
WB-12 and the doctored half of WB-09 need other workbooks and stand in the tests themselves.
"""

import datetime
import re
from collections.abc import Iterator
from pathlib import Path

import openpyxl
from openpyxl.cell.cell import Cell
from openpyxl.formula import Tokenizer
from openpyxl.utils import range_boundaries
from openpyxl.workbook.workbook import Workbook
from openpyxl.worksheet.worksheet import Worksheet

from ledgersolve.report import style

ALLOWED_CONSTANTS = {"0", "1", "12", "100"}
ERRORS = ("#REF!", "#DIV/0!", "#N/A", "#VALUE!", "#NAME?", "#NUM!", "#NULL!", "#SPILL!")
LONGEST_FORMULA = 1200
FRONT_SHEETS = ("Decision", "To fix", "No plan")
PERIOD_SHEETS = ("Plan lots", "Plan stock", "Plan late", "Plan lost")


class Returned:
    """A returned workbook: formulas, values, and which sheets are ours."""

    def __init__(self, path: Path, source: Path | None) -> None:
        self.path = path
        self.formulas: Workbook = openpyxl.load_workbook(path)
        self.values: Workbook = openpyxl.load_workbook(path, data_only=True)
        self.source = None if source is None else openpyxl.load_workbook(source)
        theirs = set() if self.source is None else set(self.source.sheetnames)
        self.ours = [name for name in self.formulas.sheetnames if name not in theirs]
        self.tables = {name: list(find_tables(self.values[name])) for name in self.ours}

    def cells(self, *, formulas: bool = False) -> Iterator[Cell]:
        """All filled cells of our sheets."""
        book = self.formulas if formulas else self.values
        for name in self.ours:
            for row in book[name].iter_rows():
                for cell in row:
                    if cell.value is not None:
                        yield cell

    def formula_cells(self) -> Iterator[Cell]:
        """All cells of our sheets that hold formulas."""
        return (cell for cell in self.cells(formulas=True) if cell.data_type == "f")


def check_workbook(path: Path, source: Path | None = None) -> list[str]:
    """Give every violation of the rules, each with its number and place."""
    book = Returned(path, source)
    checks = (front_sheet, inputs_unchanged, period_sheets_alike, units_named, one_pattern_a_column, no_constants,
              simple_formulas, figures_once, checks_hold, nothing_hidden, no_errors, sizes, sheet_names, text_lengths,
              codes_are_text, dates_are_dates, text_is_text, no_controls, no_links_or_macros, contrasts, counts)
    return [violation for check in checks for violation in check(book)]


def place(cell: Cell) -> str:
    """Sheet and address of a cell."""
    return f"{cell.parent.title}!{cell.coordinate}"


def front_sheet(book: Returned) -> Iterator[str]:
    """WB-01: a front sheet says what, from which file, when, by which version, how good; options in the record."""
    first = book.formulas.sheetnames[0]
    if not any(first.startswith(name) for name in FRONT_SHEETS):
        yield f"WB-01 {first} is no front sheet"
        return
    if book.formulas.active.title != first:
        yield f"WB-01 {first} is not open on arrival"
    text = text_of(book.values[first])
    if not re.search(r"\d{4}-\d{2}-\d{2} \d{2}:\d{2}", text) or ".xls" not in text:
        yield f"WB-01 {first} does not say when it was made, and from which file"
    records = [name for name in book.ours if name.startswith("Run record")]
    if first.startswith("Decision"):
        record = text_of(book.values[records[0]]) if records else ""
        for word in ("SHA-256", "Version of", "Verdict", "lower bound", "Gap", "Settings used", "Time (seconds)"):
            if word not in record:
                yield f"WB-01 the run record lacks {word}"


def text_of(sheet: Worksheet) -> str:
    """Everything that stands on a sheet."""
    return " ".join(str(cell.value) for row in sheet.iter_rows() for cell in row if cell.value is not None)


def inputs_unchanged(book: Returned) -> Iterator[str]:
    """WB-02: the analyst's sheets come back cell by cell."""
    if book.source is None:
        return
    for sheet in book.source.worksheets:
        copied = book.formulas[sheet.title]
        if copied.dimensions != sheet.dimensions:
            yield f"WB-02 {sheet.title} has another size"
        for row in sheet.iter_rows():
            for cell in row:
                if copied[cell.coordinate].value != cell.value:
                    yield f"WB-02 {sheet.title}!{cell.coordinate} was changed"


def period_sheets_alike(book: Returned) -> Iterator[str]:
    """WB-03: every sheet of periods has the same columns; the unit of a sum may differ (stock counts by period)."""
    titles = {}
    for name in book.ours:
        if name.startswith(PERIOD_SHEETS):
            row = [cell.value for cell in book.values[name][4]]
            periods = row.index("Resource") if "Resource" in row else row.index("Safety stock (units)") if (
                "Safety stock (units)" in row) else len(row)
            told = [str(value) for value in row[:periods] if value is not None]
            titles[name] = [re.sub(r"^Sum \(.*\)$", "Sum", title) for title in told]
    if len({tuple(row) for row in titles.values()}) > 1:
        yield f"WB-03 period sheets differ in their columns: {titles}"


Table = tuple[int, list[Cell], int]
"""Row of the titles, the title cells, last row."""


def find_tables(sheet: Worksheet) -> Iterator[Table]:
    """Tables of a sheet; titles are known by their ground."""
    titles: dict[int, list[Cell]] = {}
    for row in sheet.iter_rows():
        for cell in row:
            dark = cell.fill.fill_type == "solid" and cell.fill.fgColor.rgb[-6:] == style.PETROL
            if cell.value is not None and dark:
                titles.setdefault(cell.row, []).append(cell)
    for row, cells in titles.items():
        for block in blocks(cells):
            last = row
            while any(sheet.cell(last + 1, cell.column).value is not None for cell in block) and (
                    last + 1 not in titles or not set(titles[last + 1]) & set(block)):
                last += 1
            yield row, block, last


def blocks(cells: list[Cell]) -> list[list[Cell]]:
    """Title cells in groups without a gap between them."""
    groups: list[list[Cell]] = []
    for cell in cells:
        if groups and groups[-1][-1].column + 1 == cell.column:
            groups[-1].append(cell)
        else:
            groups.append([cell])
    return groups


def units_named(book: Returned) -> Iterator[str]:
    """WB-04: every column of figures names its unit: in its title, in a unit column, or in the row's label."""
    for name in book.ours:
        sheet = book.values[name]
        for row, titles, last in book.tables[name]:
            has_unit = any(str(cell.value).startswith("Unit") for cell in titles)
            for cell in titles:
                column = [sheet.cell(r, cell.column) for r in range(row + 1, last + 1)]
                figures = [c for c in column if isinstance(c.value, int | float)]
                if not figures or has_unit or re.search(r"[(/]|^[A-Z]{3}$", str(cell.value)):
                    continue
                if all("(" in str(sheet.cell(c.row, titles[0].column).value) for c in figures):
                    continue
                yield f"WB-04 {place(cell)} ({cell.value}) names no unit"


def skeleton(formula: str) -> str:
    """A formula with its references taken out."""
    parts = []
    for token in Tokenizer(formula).items:
        if token.type == "OPERAND" and token.subtype == "RANGE":
            parts.append("R")
        elif token.type != "WHITE-SPACE":
            parts.append(token.value)
    return "".join(parts)


def one_pattern_a_column(book: Returned) -> Iterator[str]:
    """WB-05: one pattern down each column of a table (in the ledger: for each cost part)."""
    for name in book.ours:
        sheet = book.formulas[name]
        ledger = name.startswith("Ledger")
        for row, titles, last in book.tables[name]:
            for cell in titles:
                patterns: dict[str, set[str]] = {}
                for r in range(row + 1, last + 1):
                    held = sheet.cell(r, cell.column)
                    if held.data_type == "f":
                        key = f"{sheet.cell(r, 1).value} {sheet.cell(r, 2).value}" if ledger else ""
                        patterns.setdefault(key, set()).add(skeleton(held.value))
                for key, found in patterns.items():
                    if len(found) > most_patterns(name, str(cell.value)):
                        yield f"WB-05 {place(cell)} {key} holds {len(found)} patterns: {sorted(found)[:4]}"


def most_patterns(sheet: str, title: str) -> int:
    """How many patterns a column may hold: more only where sources differ by row, which the sheet says."""
    if sheet.startswith("Ledger") and title == "Rate":
        return 2  # a cell of its own, or distance x rate; a yearly rate on the value
    if sheet.startswith(("Proof", "Decision")):
        return 20  # one rule a row, one figure a row
    if sheet.startswith("To fix"):
        return 10  # one kind of fault a row
    if sheet.startswith("Plan deliveries") and title.startswith(("Distance", "Rate")):
        return 2  # a cell of its own, or straight line x road factor, distance x rate
    return 2 if sheet.startswith("Plan stock") else 1  # with and without a receipt


def no_constants(book: Returned) -> Iterator[str]:
    """WB-06: no constants in formulas.

    The status of an entry of the list of faults holds the limits that its own row says in words.
    """
    for cell in book.formula_cells():
        if cell.parent.title.startswith("To fix"):
            continue
        for token in Tokenizer(cell.value).items:
            if token.type == "OPERAND" and token.subtype == "NUMBER" and token.value not in ALLOWED_CONSTANTS:
                yield f"WB-06 {place(cell)} holds the constant {token.value}: {cell.value[:80]}"


def simple_formulas(book: Returned) -> Iterator[str]:
    """WB-07: short formulas without nested IF, OFFSET, INDIRECT, structured references and arrays."""
    for cell in book.formula_cells():
        formula = cell.value if isinstance(cell.value, str) else f"array {cell.value.text}"
        if len(formula) > LONGEST_FORMULA:
            yield f"WB-07 {place(cell)} is {len(formula)} long"
        if re.search(r"\b(OFFSET|INDIRECT)\(|\[|^array|_xlfn", re.sub(r"'[^']*'", "", formula)):
            yield f"WB-07 {place(cell)} uses what it must not: {formula[:80]}"
        if nested_if(formula):
            yield f"WB-07 {place(cell)} nests IF in IF"


def nested_if(formula: str) -> bool:
    """Whether an IF stands inside another one."""
    open_functions: list[str] = []
    for token in Tokenizer(formula).items:
        if token.type == "FUNC" and token.subtype == "OPEN":
            if token.value.upper() == "IF(" and "IF(" in open_functions:
                return True
            open_functions.append(token.value.upper())
        elif token.type == "FUNC" and token.subtype == "CLOSE":
            open_functions.pop()
    return False


def figures_once(book: Returned) -> Iterator[str]:
    """WB-08: the total on the front sheet is the ledger's, which is the sum of its lines."""
    ledgers = [name for name in book.ours if name.startswith("Ledger")]
    if not ledgers:
        return
    sheet = book.values[ledgers[0]]
    rows = [(row[0].value, row[8].value) for row in sheet.iter_rows(min_row=5)]
    total = next(amount for kind, amount in rows if kind == "total")
    lines = sum(amount for kind, amount in rows if kind == "line")
    if abs(lines - total) > 1e-9 * (1 + abs(total)):
        yield f"WB-08 the ledger's lines add up to {lines}, not {total}"
    front = book.formulas[book.formulas.sheetnames[0]]
    pointers = [cell for row in front.iter_rows() for cell in row
                if cell.data_type == "f" and cell.value.replace("'", "") == f"={ledgers[0]}!$I$5"]
    if len(pointers) < 2:
        yield "WB-08 the front sheet does not point at the ledger's total"


def checks_hold(book: Returned) -> Iterator[str]:
    """WB-09: visible checks, all ok, and a master check on the front sheet."""
    proofs = [name for name in book.ours if name == "Proof" or name.startswith("Proof (")]
    for name in proofs:
        states = [cell for row in book.values[name].iter_rows() for cell in row if cell.value in ("ok", "BROKEN")]
        if not states:
            yield f"WB-09 {name} has no checks"
        yield from (f"WB-09 {place(cell)} is BROKEN" for cell in states if cell.value == "BROKEN")
        front = book.values[book.formulas.sheetnames[0]]
        if not any(cell.value == "All checks hold" for row in front.iter_rows() for cell in row):
            yield "WB-09 the front sheet has no master check"


def nothing_hidden(book: Returned) -> Iterator[str]:
    """WB-10: no hidden sheet, row or column of ours; no merged cells in tables."""
    for name in book.ours:
        sheet = book.values[name]
        if sheet.sheet_state != "visible":
            yield f"WB-10 {name} is hidden"
        hidden = [*(k for k, d in sheet.row_dimensions.items() if d.hidden),
                  *(k for k, d in sheet.column_dimensions.items() if d.hidden)]
        if hidden:
            yield f"WB-10 {name} hides {hidden[:5]}"
        areas = [(row, titles[0].column, last, titles[-1].column) for row, titles, last in book.tables[name]]
        for merged in sheet.merged_cells.ranges:
            left, top, right, bottom = range_boundaries(str(merged))
            if any(top <= last and bottom >= row and left <= end and right >= start
                   for row, start, last, end in areas):
                yield f"WB-10 {name} merges {merged} inside a table"


def no_errors(book: Returned) -> Iterator[str]:
    """WB-11: no error value."""
    for cell in book.cells():
        if cell.data_type == "e" or cell.value in ERRORS:
            yield f"WB-11 {place(cell)} is {cell.value}"


def sizes(book: Returned) -> Iterator[str]:
    """WB-13: no sheet is larger than a sheet can be."""
    for name in book.ours:
        sheet = book.values[name]
        if sheet.max_row > 1_048_576 or sheet.max_column > 16_384:
            yield f"WB-13 {name} is too large"


def sheet_names(book: Returned) -> Iterator[str]:
    """WB-14: names that every program takes."""
    folded = [name.casefold() for name in book.formulas.sheetnames]
    if len(set(folded)) != len(folded):
        yield "WB-14 two sheets share a name"
    for name in book.ours:
        if not 1 <= len(name) <= 31 or re.search(r"[\\/?*\[\]:]", name) or name[0] == "'" or name[-1] == "'" or (
                name.casefold() == "history"):
            yield f"WB-14 {name!r} is no sheet name"


def text_lengths(book: Returned) -> Iterator[str]:
    """WB-15: no text is longer than a cell."""
    for cell in book.cells():
        if isinstance(cell.value, str) and len(cell.value.encode("utf-16-le")) > 2 * 32_767:
            yield f"WB-15 {place(cell)} is too long"


def codes_are_text(book: Returned) -> Iterator[str]:
    """WB-16: codes stay text."""
    for name in book.ours:
        if not name.startswith(("Plan", "Ledger")):
            continue
        for row, titles, last in book.tables[name]:
            for cell in titles:
                if cell.value in ("Site", "Customer", "Item", "Resource", "Main site"):
                    held = [book.values[name].cell(r, cell.column).value for r in range(row + 1, last + 1)]
                    if any(value is not None and not isinstance(value, str) for value in held):
                        yield f"WB-16 {place(cell)} holds codes that are not text"


def dates_are_dates(book: Returned) -> Iterator[str]:
    """WB-17: the date of the run is a true date."""
    for name in (name for name in book.ours if name.startswith("Run record")):
        for row in book.values[name].iter_rows(max_col=2):
            if row[0].value == "Date and time of the run" and not isinstance(row[1].value, datetime.datetime):
                yield f"WB-17 {place(row[1])} is no date"


def text_is_text(book: Returned) -> Iterator[str]:
    """WB-18: text that looks like a formula is text, and stays so when it is edited."""
    for cell in book.cells(formulas=True):
        if cell.data_type == "s" and str(cell.value).startswith(("=", "+", "-", "@", "\t")) and not cell.quotePrefix:
            yield f"WB-18 {place(cell)} would become a formula when edited"


def no_controls(book: Returned) -> Iterator[str]:
    """WB-19: no control characters."""
    for cell in book.cells():
        if isinstance(cell.value, str) and re.search("[\x00-\x08\x0b\x0c\x0e-\x1f]", cell.value):
            yield f"WB-19 {place(cell)} holds a control character"


def no_links_or_macros(book: Returned) -> Iterator[str]:
    """WB-20: no formula of ours leaves the workbook (that a second library opens it is shown by reading it here)."""
    for cell in book.formula_cells():
        if re.search(r"\[\d+\]|https?:|file:", str(cell.value)):
            yield f"WB-20 {place(cell)} leaves the workbook"


def contrasts(book: Returned) -> Iterator[str]:
    """WB-21: text and ground differ by at least 4.5 to 1, in cells and in live formats."""
    seen, looked_at = set(), []
    for cell in book.cells():
        if cell._style in looked_at:
            continue
        looked_at.append(cell._style)
        if cell.font.color is None or cell.font.color.type != "rgb":
            yield f"WB-21 {place(cell)} has no colour of its own"
            continue
        ground = cell.fill.fgColor.rgb[-6:] if cell.fill.fill_type == "solid" else "FFFFFF"
        seen.add((cell.font.color.rgb[-6:], ground))
    for name in book.ours:
        for area in book.values[name].conditional_formatting:
            for rule in area.rules:
                if rule.dxf is not None and rule.dxf.font is not None and rule.dxf.font.color is not None:
                    fill = rule.dxf.fill
                    ground = fill.bgColor.rgb[-6:] if fill is not None else "FFFFFF"
                    seen.add((rule.dxf.font.color.rgb[-6:], ground))
    for text, ground in seen:
        if style.contrast(text, ground) < 4.5:
            yield f"WB-21 {text} on {ground} is hard to read ({style.contrast(text, ground):.2f})"


def counts(book: Returned) -> Iterator[str]:
    """WB-23: formats, links, widths and heights within the limits of the file format."""
    if len(book.formulas._cell_styles) > 65_490:
        yield "WB-23 too many formats"
    for name in book.ours:
        sheet = book.formulas[name]
        if sum(cell.hyperlink is not None for row in sheet.iter_rows() for cell in row) > 65_530:
            yield f"WB-23 {name} has too many links"
        if any((d.width or 0) > 255 for d in sheet.column_dimensions.values()) or any(
                (d.height or 0) > 409 for d in sheet.row_dimensions.values()):
            yield f"WB-23 {name} is too wide or too high"


def values_of(path: Path, theirs: Path) -> dict[str, dict[str, object]]:
    """Values of our sheets without dates, times and what a run measures, for WB-22."""
    book = Returned(path, theirs)
    return {
        name: {cell.coordinate: cell.value for row in book.values[name].iter_rows() for cell in row
               if cell.value is not None and not isinstance(cell.value, datetime.datetime)}
        for name in book.ours if not name.startswith("Run record")
    }
