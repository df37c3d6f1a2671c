"""Where each figure of a case stands in the analyst's workbook: a map from codes to cells.

It travels beside the case, so that the arrays carry no addresses. The ledger asks it for the cell of a
rate; marks ask it for the cell of a rule that cannot hold.
"""

from collections.abc import Container, Mapping
from dataclasses import dataclass, field

from ledgersolve.workbook.cells import address


@dataclass(frozen=True)
class CellRef:
    """A cell of one of the analyst's sheets (sheet name as the analyst wrote it); rows, columns from 1."""

    sheet: str
    row: int
    column: int

    @property
    def address(self) -> str:
        """Address such as ``D8``."""
        return address(self.row, self.column)

    @property
    def formula(self) -> str:
        """The cell as a formula names it: ``'Lane costs'!$D$8`` (without an equals sign)."""
        letters = self.address.rstrip("0123456789")
        quoted = self.sheet.replace("'", "''")
        return f"'{quoted}'!${letters}${self.row}"


@dataclass(frozen=True)
class TableMap:
    """A list sheet: title -> column, key -> row; ``not_numbers`` are cells a formula cannot use.

    ``key`` is the tuple of the codes that name a row: ``(site,)``, ``(site, customer)``, ``(setting,)``.
    ``not_numbers`` holds (row, column) of cells whose number stands there as text.
    A blank cell is in ``blanks``: a default was taken.
    """

    sheet: str
    columns: Mapping[str, int]
    rows: Mapping[tuple[str, ...], int]
    blanks: Container[tuple[int, int]] = frozenset()
    not_numbers: Container[tuple[int, int]] = frozenset()


@dataclass(frozen=True)
class MatrixMap:
    """A matrix sheet: code -> row and code -> column; blanks and texts as in ``TableMap``."""

    sheet: str
    rows: Mapping[str, int]
    columns: Mapping[str, int]
    blanks: Container[tuple[int, int]] = frozenset()
    not_numbers: Container[tuple[int, int]] = frozenset()


@dataclass(frozen=True)
class Origins:
    """All maps of one workbook, by the contract's sheet name (``"Lane costs"``, ``"Settings"``)."""

    tables: Mapping[str, TableMap] = field(default_factory=dict)
    matrices: Mapping[str, MatrixMap] = field(default_factory=dict)

    def cell(self, sheet: str, key: tuple[str, ...], title: str) -> CellRef | None:
        """Cell of ``title`` in the row of ``key``, filled or not; None where row or column is absent."""
        table = self.tables.get(sheet)
        if table is None or key not in table.rows or title not in table.columns:
            return None
        return CellRef(table.sheet, table.rows[key], table.columns[title])

    def number(self, sheet: str, key: tuple[str, ...], title: str) -> CellRef | None:
        """As ``cell``, but None unless a formula can use the cell as a number."""
        ref = self.cell(sheet, key, title)
        return None if ref is None or not _usable(self.tables[sheet], ref) else ref

    def matrix_cell(self, sheet: str, row: str, column: str) -> CellRef | None:
        """Cell of a matrix, filled or not; None where row or column is absent."""
        matrix = self.matrices.get(sheet)
        if matrix is None or row not in matrix.rows or column not in matrix.columns:
            return None
        return CellRef(matrix.sheet, matrix.rows[row], matrix.columns[column])

    def matrix_number(self, sheet: str, row: str, column: str) -> CellRef | None:
        """Cell of a matrix that a formula can use as a number; None where absent, blank or text."""
        ref = self.matrix_cell(sheet, row, column)
        return None if ref is None or not _usable(self.matrices[sheet], ref) else ref

    def setting(self, name: str) -> CellRef | None:
        """Value cell of a setting that a formula can use as a number."""
        return self.number("Settings", (name,), "Value")


def _usable(where: TableMap | MatrixMap, ref: CellRef) -> bool:
    place = (ref.row, ref.column)
    return place not in where.blanks and place not in where.not_numbers
