"""The reference page of the contract, made from the descriptions."""

from collections.abc import Iterable

from ledgersolve.contract import settings
from ledgersolve.contract.columns import Entry, JobContract, ListSheet, MatrixSheet
from ledgersolve.contract.read import CONTRACTS
from ledgersolve.contract.reading import Job
from ledgersolve.contract.templates import example_text, needed_text, sheets_in_order

_HEAD = """# What a workbook holds

Made from the descriptions in `ledgersolve/contract`; do not edit by hand.

Sheets are found by their names, columns by their titles, whatever the case, the spacing and a unit in brackets
behind them. Columns stand in any order; other sheets and columns are left alone. The title row is the first of the
first 30 rows that holds all required titles, so headings and examples above it do no harm.

- Codes are text, trimmed; `7` and `7.0` are one code. Codes that differ in case or inner spacing only are an
  error.
- A number is a number cell, or text that can mean one number only: `" 12 "`, `"12.5"`, `"1 200"`. Text with a comma,
  and text such as `"1.200"`, is an error that shows how it can be read: `"7,35"` as 7.35, `"1,200"` as 1200 or 1.2.
  No figure may be larger than 1e12.
- yes/no cells take yes, no, y, n, true, false, 1, 0 and Boolean cells. Dates are date cells or year-month-day texts.
- A cell with a percent format in a setting in % is read as it is shown.
- Each code, and each pair of codes, stands once in its list. An empty optional cell takes the default named below.
- Empty rows, and the totals row of a table object, are no data. Formulas count by the value saved with them.
"""

_NOTES = {
    Job.SITE_SELECTION: """### How lanes come together

- A lane's cost is its Unit cost in `Lanes`, else its figure in `Lane costs`, else Cost per unit and distance x its
  distance (x the customer's demand, where costs are for the whole demand).
- Its distance is the one in `Lanes`, else in `Distances`, else great circle (sphere of radius 6371.0088 km) x Road
  factor. The road factor does not touch distances that are given.
- Each row of `Lanes` needs a Unit cost or a Distance, its own or that of the pair in `Lane costs` or `Distances`; a
  row with Allowed = no needs neither. Coordinates do not stand in for them: a row without a figure is more often
  forgotten than meant.
- An empty cell of `Lane costs` is no lane, unless a row of `Lanes` names the pair. A row with Allowed = no is no
  lane.
- Without Cost per unit and distance, pairs that are not listed do not exist; with it, they are costed from
  coordinates.
- A workbook holds at most 40 million pairs of sites and customers.
""",
    Job.LOT_SIZING: """### How figures come together

- A holding cost is the one in `Period costs`, else the item's, else Yearly holding rate (%) x Unit value / Periods a
  year. An item with none of the three is an error: 0 has to be typed.
- A capacity is the one in the sheet `Capacity`, else the one figure in `Resources`.
- A backlog cost counts only where Late deliveries is yes.
- A workbook holds at most 5 million pairs of items and periods.
""",
}


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
        parts.append(_NOTES[contract.job])
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
