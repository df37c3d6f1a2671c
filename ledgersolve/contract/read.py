"""One workbook from an open package to a case, or to the list of all its problems."""

from pathlib import PurePath

from ledgersolve.contract import lot_sizing, settings, site_selection
from ledgersolve.contract.book import Book, find_sheets, missing_sheet, read_sheets, report_sheets
from ledgersolve.contract.columns import JobContract
from ledgersolve.contract.faults import Fault, Faults
from ledgersolve.contract.reading import Job, Reading, RunSettings
from ledgersolve.contract.records import defaults_of, origins_of
from ledgersolve.contract.setting_values import SettingValues, job_of, read_settings
from ledgersolve.lot_sizing.case import Case as LotCase
from ledgersolve.site_selection.case import Case as SiteCase
from ledgersolve.workbook.cells import Cell
from ledgersolve.workbook.origins import Origins
from ledgersolve.workbook.package import Package
from ledgersolve.workbook.tables import TitleRow, read_rows
from ledgersolve.workbook.text import nearest, plain

CONTRACTS: dict[Job, JobContract] = {
    Job.SITE_SELECTION: site_selection.CONTRACT,
    Job.LOT_SIZING: lot_sizing.CONTRACT,
}


def read_workbook(package: Package, file_name: str) -> Reading:
    """Read and check a whole workbook; every problem is reported at once.

    Parameters
    ----------
    package
        The open workbook.
    file_name
        Its name; without its ending it is the title where none is given.

    Raises
    ------
    UnreadableWorkbookError
        Where a sheet turns out to be damaged.
    """
    faults = Faults()
    order = [info.name for info in package.sheets]
    titles, rows, sheet = _settings_rows(package, faults)
    named = job_of(rows)
    job = named or _likely_job(package)
    if job is None:
        _report_job(sheet, titles, rows, faults, package.date1904)
        return Reading(None, PurePath(file_name).stem, "", None, faults.problems(order))
    contract = CONTRACTS[job]
    other = CONTRACTS[Job.LOT_SIZING if job is Job.SITE_SELECTION else Job.SITE_SELECTION]
    if titles is None:
        values = SettingValues(values={entry.title: entry.default for entry in contract.settings},
                               readable=False)
    else:
        values = read_settings(sheet, titles, rows, contract.settings, other.settings, faults, package.date1904,
                               package.details(sheet).percents)
    found = find_sheets(package, [each.name for each in contract.sheets], faults)
    book = Book(contract, faults, values, found)
    report_sheets(package, contract, other, found, faults)
    read_sheets(package, book)
    _report_file(package, faults)
    return _reading(book, named, file_name, order)


def _reading(book: Book, named: Job | None, file_name: str, order: list[str]) -> Reading:
    """Build the case and everything that travels beside it; what builds the other job's is not loaded."""
    values = book.settings
    title = values.text("Title") or PurePath(file_name).stem
    values.values["Title"] = title
    case: SiteCase | LotCase | None
    road_cost, road_factor = None, 1.0
    if book.contract.job is Job.SITE_SELECTION:
        from ledgersolve.contract import site_case, site_judgement

        data = site_case.build(book, title)
        case = data.case
        site_judgement.judge_inputs(book)
        if data.case is not None and data.lanes is not None:
            site_judgement.judge(book, data.case, data.lanes, data.rows)
        if data.lanes is not None and data.lanes.by_distance:
            road_cost = values.number(site_selection.RATE)
            road_factor = values.number(site_selection.ROAD_FACTOR) or 1.0
    else:
        from ledgersolve.contract import lot_case, lot_judgement

        case = lot = lot_case.build(book, title)
        lot_judgement.judge_inputs(book)
        if lot is not None:
            lot_judgement.judge(book, lot)
    if case is not None:
        values.values[settings.COMPARE] = case.compare_today
    return Reading(
        named, title, values.text("Currency"), case, book.faults.problems(order), _run(values),
        origins_of(book) if case is not None else Origins(), values.shown(book.contract.settings),
        defaults_of(book), road_cost, road_factor,
    )


def _run(values: SettingValues) -> RunSettings:
    return RunSettings(
        time_limit=values.number(settings.TIME_LIMIT.title) or 300.0,
        accepted_gap=(values.number(settings.ACCEPTED_GAP.title) or 0.0) / 100,
        questions=values.flag(settings.QUESTIONS.title),
        questions_share=(values.number(settings.QUESTIONS_SHARE.title) or 0.0) / 100,
    )


def _settings_rows(package: Package, faults: Faults) -> tuple[TitleRow | None, list[dict[str, Cell]], str]:
    """Title row and rows of the Settings sheet; a sheet that is missing or has no titles is reported."""
    info = find_sheets(package, [settings.SHEET], faults).get(settings.SHEET)
    if info is None:
        slip = next((each.name for each in package.sheets if nearest(each.name, [settings.SHEET], plain)),
                    None)
        missing_sheet(settings.SHEET, slip, faults)
        return None, [], settings.SHEET
    read = read_rows(package.cells(info.name), ("Setting", "Value"), settings.LIST.required_titles())
    if read is None or read[0].missing:
        faults.add(info.name, None, "", Fault(
            "no title row", "no row with the titles Setting and Value within the first 30 rows",
            "a title row with “Setting” and “Value”",
            "Put the titles Setting and Value above the two columns."))
        return None, [], info.name
    return read[0], read[1], info.name


def _likely_job(package: Package) -> Job | None:
    """The job whose required sheets are there, where Settings does not say; None where that is not clear."""
    names = {plain(info.name) for info in package.sheets}
    fitting = [
        job for job, contract in CONTRACTS.items()
        if any(plain(sheet.name) in names for sheet in contract.sheets if sheet.required)
    ]
    return fitting[0] if len(fitting) == 1 else None


def _report_job(sheet: str, titles: TitleRow | None, rows: list[dict[str, Cell]], faults: Faults,
                date1904: bool) -> None:
    """Report what is wrong with the common settings where not even the job is known."""
    if titles is not None:
        read_settings(sheet, titles, rows, settings.FIRST, (), faults, date1904)


def _report_file(package: Package, faults: Faults) -> None:
    """Notices for what a reader of the whole file should know."""
    if package.external_links:
        faults.notice("", None, "", "external links", "links to other workbooks", "figures of this workbook",
                      "The values saved last were used; nothing was fetched from the other files.")
    if package.macros:
        faults.notice("", None, "", "macros", "macros in the workbook", "plain figures",
                      "They were kept and not run.")
