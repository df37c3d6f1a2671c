"""Templates: current, answered when dropped untouched, right when filled in."""

import textwrap
from pathlib import Path

import openpyxl
import pytest
from openxml_audit import FileFormat, OpenXmlValidator

from ledgersolve.contract import Job
from ledgersolve.contract.columns import Holds, ListSheet
from ledgersolve.contract.read import CONTRACTS
from ledgersolve.contract.templates import EXAMPLE, FIRST, GUIDE, TITLES, write_template
from tests.books import errors, notices, read_book

COMMITTED = Path(__file__).parents[1] / "templates_xlsx"


def meaning(path: Path) -> dict[str, object]:
    """Give what a workbook says and how it guides: values, formats, widths and validations by sheet."""
    book = openpyxl.load_workbook(path)
    return {
        sheet.title: (
            {cell.coordinate: (cell.value, cell.number_format, cell.font.b)
             for row in sheet.iter_rows() for cell in row},
            {letter: (column.width, column.min, column.max) for letter, column in sheet.column_dimensions.items()},
            sorted((str(r.sqref), r.type, r.operator, r.formula1, r.formula2, r.prompt, r.error, r.errorStyle)
                   for r in sheet.data_validations.dataValidation),
            sheet.freeze_panes,
        )
        for sheet in book
    }


@pytest.mark.parametrize("job", list(Job))
def test_the_committed_templates_are_current(tmp_path, job):
    """What is committed is what the descriptions give today; if not, run `ledgersolve template JOB FILE` again."""
    write_template(job, tmp_path / "fresh.xlsx")
    assert meaning(COMMITTED / f"{job}.xlsx") == meaning(tmp_path / "fresh.xlsx")


@pytest.mark.parametrize(("job", "expected"), [
    (Job.SITE_SELECTION, [("required cell empty", "Settings", "B8"), ("empty list", "Sites", "A6"),
                          ("empty list", "Customers", "A6")]),
    (Job.LOT_SIZING, [("required cell empty", "Settings", "B8"), ("empty list", "Periods", "A6"),
                      ("empty list", "Items", "A6"), ("empty matrix", "Demand", "")]),
])
def test_an_untouched_template_comes_back_with_what_is_to_be_filled_in(job, expected):
    """Only what has to be filled in is asked for; no example is taken for data."""
    reading = read_book(COMMITTED / f"{job}.xlsx")
    assert errors(reading) == expected
    assert notices(reading) == []
    assert reading.job is job


def fill(job: Job, target: Path, lists: dict[str, list[list[object]]], matrices: dict[str, list[list[object]]],
         settings: dict[str, object]) -> Path:
    """Fill in a template as an analyst would, below and beside its titles."""
    book = openpyxl.load_workbook(COMMITTED / f"{job}.xlsx")
    for row in book["Settings"].iter_rows(min_row=FIRST + 1):
        if row[0].value in settings:
            row[1].value = settings[row[0].value]
    for name, rows in lists.items():
        for r, row in enumerate(rows, start=FIRST + 1):
            for c, value in enumerate(row, start=1):
                book[name].cell(r, c, value)
    for name, rows in matrices.items():
        for r, row in enumerate(rows, start=TITLES + 1):
            for c, value in enumerate(row, start=1):
                if value is not None:
                    book[name].cell(r, c, value)
    book.save(target)
    return target


def test_a_filled_in_site_template_works(tmp_path):
    """Rows typed below the titles, codes of the examples included, make a case."""
    path = fill(
        Job.SITE_SELECTION, tmp_path / "filled.xlsx",
        {"Sites": [["HAM", "Hamburg", 100, 50], ["MUC", None, 120]],
         "Customers": [["C001", None, 10], ["C002", None, 20]]},
        {"Lane costs": [[None, "C001", "C002"], ["HAM", 1, 2], ["MUC", 3, 4]]}, {"Currency": "EUR", "Most sites": 1})
    reading = read_book(path)
    assert errors(reading) == []
    assert reading.case.lane_cost.tolist() == [[1, 2], [3, 4]]
    assert reading.case.capacity.tolist()[0] == 50
    assert reading.case.most_sites == 1


def test_a_filled_in_lot_template_works(tmp_path):
    """Periods, items and the demand matrix typed into the template make a case."""
    path = fill(
        Job.LOT_SIZING, tmp_path / "filled.xlsx",
        {"Periods": [["W01"], ["W02"]], "Items": [["P100", None, None, 320, None, 0.5]]},
        {"Demand": [[None, "W01", "W02"], ["P100", 7, 8]]}, {"Currency": "EUR"})
    reading = read_book(path)
    assert errors(reading) == []
    assert reading.case.demand.tolist() == [[7, 8]]
    assert reading.case.setup_cost.tolist() == [[320, 320]]


@pytest.mark.parametrize("job", list(Job))
def test_every_column_has_its_title_example_note_and_validation(job):
    """Each column has its title, a marked example above it, an input message, a list where words are fixed."""
    book = openpyxl.load_workbook(COMMITTED / f"{job}.xlsx")
    assert book.sheetnames[:2] == [GUIDE, "Settings"]
    for contract in (sheet for sheet in CONTRACTS[job].sheets if isinstance(sheet, ListSheet)):
        sheet = book[contract.name]
        rules = {rule.sqref.ranges[0].min_col if hasattr(rule.sqref.ranges, "__getitem__")
                 else next(iter(rule.sqref.ranges)).min_col: rule for rule in sheet.data_validations.dataValidation}
        assert str(sheet.cell(EXAMPLE + 1, 1).value).startswith("Example")
        for column, entry in enumerate(contract.entries, start=1):
            assert sheet.cell(TITLES + 1, column).value.startswith(entry.title)
            rule = rules[column]
            assert entry.meaning[:60] in rule.prompt
            assert (rule.type == "list") == (entry.holds in (Holds.YES_NO, Holds.CHOICE)
                                             or (entry.holds is Holds.CODE and bool(entry.refers)))


@pytest.mark.parametrize("job", list(Job))
def test_templates_are_right_by_the_standard(job):
    """A validator of the format (ISO/IEC 29500) finds nothing to complain about."""
    assert OpenXmlValidator(FileFormat.OFFICE_2019).validate(str(COMMITTED / f"{job}.xlsx")).errors == []


@pytest.mark.parametrize("job", list(Job))
def test_the_guide_has_ten_lines(job):
    """The sheet that explains is ten numbered lines."""
    sheet = openpyxl.load_workbook(COMMITTED / f"{job}.xlsx")[GUIDE]
    assert [row[0].value for row in sheet.iter_rows(min_row=3)] == list(range(1, 11))


@pytest.mark.parametrize("job", list(Job))
def test_no_folded_text_is_cut(job):
    """Every text that folds stands in a row as high as its lines, at some 14 points a line."""
    book = openpyxl.load_workbook(COMMITTED / f"{job}.xlsx")
    folded = 0
    for sheet in book:
        for cell in (cell for row in sheet.iter_rows() for cell in row if cell.alignment.wrap_text and cell.value):
            sizes = sheet.column_dimensions.values()
            width = next(size.width for size in sizes if size.min <= cell.column <= size.max)
            lines = len(textwrap.wrap(str(cell.value), int(width)))
            small = 12 if cell.font.sz < 11 else 14
            folded += lines > 1
            height = sheet.row_dimensions[cell.row].height or 15
            assert lines == 1 or height >= lines * small, f"{sheet.title}!{cell.coordinate}"
    assert folded > 5


def test_examples_of_settings_are_those_of_the_job():
    """The example of Job is the template's own job, that of Title a title of such a workbook."""
    examples = {}
    for job in Job:
        sheet = openpyxl.load_workbook(COMMITTED / f"{job}.xlsx")["Settings"]
        examples[job] = {row[0].value: row[4].value for row in sheet.iter_rows(min_row=FIRST + 1)}
        assert examples[job]["Job"] == job
    assert examples[Job.SITE_SELECTION]["Title"] != examples[Job.LOT_SIZING]["Title"]


@pytest.mark.parametrize("job", list(Job))
def test_every_setting_is_in_the_template(job):
    """All settings stand in the template, the job filled in, every other value empty."""
    sheet = openpyxl.load_workbook(COMMITTED / f"{job}.xlsx")["Settings"]
    values = {row[0].value: row[1].value for row in sheet.iter_rows(min_row=FIRST + 1)}
    assert list(values) == [entry.title for entry in CONTRACTS[job].settings]
    assert {name: value for name, value in values.items() if value} == {"Job": str(job)}
