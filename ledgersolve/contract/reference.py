"""The reference page of the contract, made from the descriptions."""

from collections.abc import Iterable

from ledgersolve.contract import settings
from ledgersolve.contract.columns import Entry, JobContract, ListSheet, MatrixSheet
from ledgersolve.contract.read import CONTRACTS
from ledgersolve.contract.templates import example_text, needed_text, sheets_in_order

_HEAD = """# What a workbook holds

Made from the descriptions in `ledgersolve/contract`; do not edit by hand.

Sheets are found by their names, columns by their titles, whatever the case, the spacing and a unit in brackets
behind them. Columns stand in any order; other sheets and columns are left alone. The title row is the first of the
first 30 rows that holds all required titles, so headings and examples above it do no harm.
"""


def reference_page() -> str:
    """The page as Markdown."""
    parts = [_HEAD]
    shared = set(settings.FIRST)
    parts.append("## Settings of both jobs\n\nSheet `Settings`, columns `Setting` and `Value`.\n")
    parts.append(_entries(settings.FIRST, [_need(entry) for entry in settings.FIRST]))
    for contract in CONTRACTS.values():
        parts.append(f"## Job `{contract.job}`\n\n### Further settings\n")
        own = [entry for entry in contract.settings if entry not in shared]
        parts.append(_entries(own, [_need(entry) for entry in own]))
        parts.extend(_sheet(sheet, contract) for sheet in sheets_in_order(contract))
    return "\n".join(parts)


def _need(entry: Entry) -> str:
    return "required" if entry.required else f"if empty: {entry.default_text()}"


def _sheet(sheet: ListSheet | MatrixSheet, contract: JobContract) -> str:
    needed = "required" if sheet.required else "optional"
    head = f"### Sheet `{sheet.name}` ({needed})\n\n{sheet.meaning}\n"
    if isinstance(sheet, ListSheet):
        return f"{head}\n{_entries(sheet.entries, [needed_text(entry, sheet) for entry in sheet.entries])}"
    down, across = contract.list_sheet(sheet.rows_of), contract.list_sheet(sheet.columns_of)
    return (f"{head}\nA matrix: codes of `{down.name}` down the first column, codes of `{across.name}` along the "
            f"title row.\n\n{_entries((sheet.figure,), [_need(sheet.figure)])}")


def _entries(entries: Iterable[Entry], needs: Iterable[str]) -> str:
    lines = ["| title | meaning | expected | | example |", "|---|---|---|---|---|"]
    lines += [
        f"| {entry.title} | {entry.meaning} | {entry.expected()} | {need} | {example_text(entry)} |"
        for entry, need in zip(entries, needs, strict=True)
    ]
    return "\n".join(lines) + "\n"
