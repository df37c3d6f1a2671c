"""Reads the sheets of one job from a workbook into checked lists, codes and matrices."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

from ledgersolve.contract.codes import Codes, codes_of
from ledgersolve.contract.columns import JobContract, ListSheet, MatrixSheet, listed, quoted
from ledgersolve.contract.faults import Fault, Faults
from ledgersolve.contract.lists import CheckedList, check_list, report_titles
from ledgersolve.contract.matrices import CheckedMatrix, check_matrix
from ledgersolve.contract.setting_values import SettingValues
from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.matrices import RawMatrix, read_matrix
from ledgersolve.workbook.package import Package, SheetDetails, SheetInfo
from ledgersolve.workbook.tables import read_list
from ledgersolve.workbook.text import cell_text, nearest, plain, unit_in


@dataclass
class Book:
    """What was read of a workbook; ``tables``, ``codes`` and ``matrices`` by the contract's sheet names.

    ``broken`` are sheets that could not be read as what they are, ``too_large`` lists that make too many
    pairs with another.
    """

    contract: JobContract
    faults: Faults
    settings: SettingValues
    sheets: dict[str, SheetInfo]
    tables: dict[str, CheckedList] = field(default_factory=dict)
    codes: dict[str, Codes] = field(default_factory=dict)
    matrices: dict[str, CheckedMatrix] = field(default_factory=dict)
    broken: set[str] = field(default_factory=set)
    too_large: set[str] = field(default_factory=set)

    def table(self, name: str) -> CheckedList | None:
        """A list sheet; None where it is absent, empty or could not be read."""
        return self.tables.get(name)

    def matrix(self, name: str) -> CheckedMatrix | None:
        """A matrix sheet; None where it is absent, empty or could not be read."""
        return self.matrices.get(name)


def find_sheets(package: Package, names: Sequence[str], faults: Faults) -> dict[str, SheetInfo]:
    """The analyst's sheet for each contract name; of two candidates the one without brackets."""
    found: dict[str, SheetInfo] = {}
    for name in names:
        fitting = [info for info in package.sheets if plain(info.name) == plain(name)]
        fitting.sort(key=lambda info: bool(unit_in(info.name)))
        if not fitting:
            continue
        found[name] = fitting[0]
        for other in fitting[1:]:
            if unit_in(other.name):
                faults.notice(other.name, None, "", "sheet like a known one",
                              f"the sheet {quoted(other.name)} beside {quoted(fitting[0].name)}", f"one sheet {name}",
                              "It was not used; rename it if it should stand for something else.")
            else:
                faults.add(other.name, None, "", Fault(
                    "sheet twice", f"the sheet {quoted(other.name)} beside {quoted(fitting[0].name)}",
                    f"one sheet {name}",
                    "Rename or take out one of the two sheets."))
    return found


def report_sheets(package: Package, contract: JobContract, other: JobContract, found: dict[str, SheetInfo],
                  faults: Faults) -> None:
    """Report required sheets that are missing, near misses, and sheets of the other job."""
    used = {info.name for info in found.values()}
    spare = [info.name for info in package.sheets if info.name not in used]
    absent = [sheet for sheet in contract.sheets if sheet.name not in found]
    near = {name: nearest(name, [sheet.name for sheet in absent], plain) for name in spare}
    for sheet in absent:
        slip = next((name for name, meant in near.items() if meant == sheet.name), None)
        if sheet.required:
            missing_sheet(sheet.name, slip, faults)
        elif slip is not None:
            faults.notice(slip, None, "", "sheet like a known one", f"the sheet {quoted(slip)}; it was not used",
                          f"{quoted(sheet.name)}, if that is what it means",
                          "Rename the sheet if it should be used.")
    foreign = {plain(sheet.name) for sheet in other.sheets}
    theirs = [name for name in spare if plain(name) in foreign]
    if theirs:
        faults.notice(theirs[0], None, "", "sheets of the other job",
                      f"{listed(theirs)}, sheets of a {other.job} workbook",
                      f"the sheets of a {contract.job} workbook, as Job in Settings says",
                      "They were not used; drop a workbook of its own for the other job.")


def missing_sheet(name: str, slip: str | None, faults: Faults) -> None:
    """Report a required sheet that is not there."""
    found = f"no sheet {name}" + (f"; there is a sheet {quoted(slip)}" if slip else "")
    remedy = f"Did you mean {name}? Rename {quoted(slip)}." if slip else f"Add a sheet named {name}."
    faults.add(name, None, "", Fault("missing sheet", found, f"a sheet named {name}", remedy))


def read_sheets(package: Package, book: Book) -> None:
    """Read and check every sheet of the job."""
    for sheet in book.contract.sheets:
        info = book.sheets.get(sheet.name)
        if info is None:
            continue
        if isinstance(sheet, ListSheet):
            _read_list(package, info, _relaxed(package, book, sheet), book)
        else:
            _read_matrix(package, info, sheet, book)
        if sheet.name in book.tables or sheet.name in book.matrices:
            _report_surroundings(info, package.details(info.name), _title_row(book, sheet.name), book)


def is_too_large(book: Book, down: str, across: str) -> bool:
    """Whether two lists make more pairs than fit into memory, which is then reported once."""
    sizes = [len(book.codes[name].codes) if name in book.codes else 0 for name in (down, across)]
    most = book.contract.most_pairs
    if sizes[0] * sizes[1] <= most:
        return False
    if down not in book.too_large:
        book.too_large.add(down)
        book.faults.add(book.tables[down].sheet, None, "", Fault(
            "too large", f"{sizes[0]:,} {down.casefold()} and {sizes[1]:,} {across.casefold()}",
            f"at most {most:,} pairs of the two",
            "Put rows together that can be planned as one, or split the workbook."))
    return True


def _title_row(book: Book, name: str) -> int:
    return book.tables[name].title_row if name in book.tables else book.matrices[name].title_row


def _relaxed(package: Package, book: Book, sheet: ListSheet) -> ListSheet:
    """The sheet without the requirement of columns whose figures a filled matrix sheet gives instead."""
    entries = tuple(
        replace(entry, required=False, default_words=f"by the sheet {entry.instead}")
        if entry.instead and _has_numbers(package, book.sheets.get(entry.instead)) else entry
        for entry in sheet.entries
    )
    return replace(sheet, entries=entries) if entries != sheet.entries else sheet


def _has_numbers(package: Package, info: SheetInfo | None) -> bool:
    return info is not None and any(cell.kind is Kind.NUMBER for cell in package.cells(info.name))


def _totals(package: Package, name: str) -> Callable[[], list[tuple[int, int, int]]]:
    """Totals rows of the table objects of a sheet, once it has been read."""
    def totals() -> list[tuple[int, int, int]]:
        return [
            (row, area.first_column, area.last_column)
            for area in package.details(name).tables
            for row in range(area.last_row - area.totals_rows + 1, area.last_row + 1)
        ]

    return totals


def _read_list(package: Package, info: SheetInfo, sheet: ListSheet, book: Book) -> None:
    wanted = {entry.title: entry.is_text for entry in sheet.entries}
    raw = read_list(package.cells(info.name), wanted, sheet.required_titles(), _totals(package, info.name))
    if raw is None:
        filled = sum(1 for _ in zip(package.cells(info.name), range(2), strict=False))
        if sheet.required or filled > 1:
            book.broken.add(sheet.name)
            _no_titles(info.name, sheet, book.faults)
        return
    if not len(raw.rows):
        if sheet.required:
            report_titles(info.name, sheet, raw, book.faults)
            book.broken.add(sheet.name)
            place = (raw.titles.row + 1, min(raw.titles.headings))
            book.faults.add(info.name, place, sheet.key[0], Fault(
                "empty list", "no row below the titles", "at least one row", f"Fill in {sheet.name}.",
                "filled"))
        return
    report_titles(info.name, sheet, raw, book.faults)
    table = check_list(info.name, sheet, raw, book.faults, package.date1904)
    if not table.count:
        book.broken.add(sheet.name)
        return
    book.tables[sheet.name] = table
    if len(sheet.key) == 1 and sheet.key[0] in table.columns:
        book.codes[sheet.name] = codes_of(table, book.faults)


def _no_titles(name: str, sheet: ListSheet, faults: Faults) -> None:
    wanted = listed(" or ".join(map(quoted, titles)) for titles in sheet.required_titles())
    faults.add(name, None, "", Fault(
        "no title row", "no row with the titles within the first 30 rows", f"a title row with {wanted}",
        f"Put the titles above the columns; the template shows how {sheet.name} looks."))


def _read_matrix(package: Package, info: SheetInfo, sheet: MatrixSheet, book: Book) -> None:
    down, across = book.codes.get(sheet.rows_of), book.codes.get(sheet.columns_of)
    if is_too_large(book, sheet.rows_of, sheet.columns_of):
        return
    raw = read_matrix(
        package.cells(info.name), down.number if down else (), across.number if across else (),
        _totals(package, info.name), package.date1904)
    if raw is None or not (len(raw.values) or raw.others):
        if sheet.required or _has_numbers(package, info):
            book.broken.add(sheet.name)
            _no_matrix(package, info.name, sheet, raw, down, across, book.faults)
        return
    down = down or _own_codes(sheet.rows_of, raw.row_codes, package.date1904)
    across = across or _own_codes(sheet.columns_of, raw.column_codes, package.date1904)
    book.matrices[sheet.name] = check_matrix(
        info.name, sheet, raw, down, across, book.faults, package.date1904)


def _own_codes(sheet: str, cells: Sequence[Cell], date1904: bool) -> Codes:
    """Codes of a matrix itself, where their list could not be read: its figures are checked all the same."""
    unique = tuple(dict.fromkeys(cell_text(cell, date1904) or "" for cell in cells))
    return Codes(sheet, unique, {code: number for number, code in enumerate(unique)}, whole=False)


def _no_matrix(package: Package, name: str, sheet: MatrixSheet, raw: RawMatrix | None, down: Codes | None,
               across: Codes | None, faults: Faults) -> None:
    """Report a matrix without title row or figures, or one that stands the wrong way round."""
    expected = (f"codes of {sheet.rows_of} down the first column, codes of {sheet.columns_of} "
                "along the title row, figures between them")
    if raw is not None or not any(cell.kind is Kind.NUMBER for cell in package.cells(name)):
        faults.add(name, None, "", Fault("empty matrix", "no figures", expected, f"Fill in {sheet.name}."))
        return
    turned = down and across and read_matrix(
        package.cells(name), across.number, down.number, date1904=package.date1904)
    if turned:
        faults.add(name, (turned.title_row, turned.code_column), "", Fault(
            "matrix transposed", f"codes of {sheet.rows_of} along the title row", expected,
            "Turn the matrix round: copy, then paste special with “transpose”."))
    else:
        faults.add(name, None, "", Fault(
            "no title row", f"no row with codes of {sheet.columns_of} within the first 30 rows", expected,
            "Put the codes above the columns, written as in their own sheet."))


def _report_surroundings(info: SheetInfo, details: SheetDetails, title_row: int, book: Book) -> None:
    """Notices for what is easily overlooked on a sheet that was used."""
    faults = book.faults
    if info.hidden:
        faults.notice(info.name, None, "", "hidden sheet", "a hidden sheet", "sheets one can see",
                      "It was used; unhide it to check.")
    below = [(max(first, title_row + 1), last) for first, last in details.hidden_rows if last > title_row]
    hidden = sum(last - first + 1 for first, last in below)
    if hidden:
        by = "hidden by a filter or by hand" if details.filtered else "hidden"
        faults.notice(info.name, None, "", "hidden rows", f"{hidden} rows {by}", "rows one can see",
                      "They were used like the others; unhide them to check, or take them out.")
    merged = [area for area in details.merged if area[2] > title_row]
    if merged:
        first = merged[0]
        faults.notice(info.name, (first[0], first[1]), "", "merged cells",
                      f"{len(merged)} merged areas below the titles", "one cell a figure",
                      "Only the first cell of a merged area counts; unmerge them to check.")

