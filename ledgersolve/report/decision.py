"""The Decision page: one printed page that a manager reads; what both jobs share of it."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from ledgersolve.findings import Answered
from ledgersolve.mip.run import Solved
from ledgersolve.report import style
from ledgersolve.report.certainty import most_saved, saving_note
from ledgersolve.report.checks import ChecksAt
from ledgersolve.report.inputs import RunFacts, Workbook
from ledgersolve.report.ledger import Ledger
from ledgersolve.report.run_record import RECORDED_COST
from ledgersolve.report.tables import FOOTER, Figure, paragraph, quoted, text_height
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Scalar, Series, Style

LEFT, RIGHT, LAST = 0, 4, 6
WIDTHS = (31.0, 15.0, 15.0, 2.0, 31.0, 18.0, 10.0)
LINE = 15.0
CHART_ROWS = 20

KICKER = Style(size=9.0, bold=True, colour=style.RUST)
HEADLINE = Style(size=15.0, bold=True, colour=style.INK, wrap=True, valign="top")
TILE_LABEL = Style(
    size=9.0, colour=style.QUIET, fill=style.PALE, top=2, border_colour=style.PETROL, align="left", indent=1)
TILE_NUMBER = Style(size=17.0, bold=True, colour=style.PETROL, fill=style.PALE, align="left", indent=1)
TILE_NOTE = Style(size=8.0, colour=style.QUIET, fill=style.PALE, wrap=True, valign="top", align="left", indent=1)
WARNING = Style(bold=True, colour=style.ALARM, wrap=True)

PICTURE_WIDTH = int(sum(7 * width + 5 for width in WIDTHS[:RIGHT])) - 8
PICTURE_HEIGHT = CHART_ROWS * 20 - 8
"""Size in pixels of the left one of two pictures."""

ROW = Style(bottom=1, border_colour="D5DBE1", align="left", indent=1)


@dataclass(frozen=True)
class Tile:
    """One of the four figures to remember; ``number_format`` is that of money unless given."""

    label: str
    value: Scalar
    note: str
    formula: str = ""
    number_format: str = ""


@dataclass(frozen=True)
class Today:
    """A row of the table against today: label, today's figure, the plan's, number format, formula of the plan's."""

    label: str
    today: Scalar
    plan: Scalar
    number_format: str
    formula: str = ""


@dataclass(frozen=True)
class Decision:
    """What stands on the page. Sentences are whole; lists are one point each."""

    kicker: str
    title: str
    headline: str
    second: str
    tiles: Sequence[Tile]
    changed: str
    comparison: Sequence[Today]
    compared: bool
    parts: Sequence[tuple[str, Figure]]
    total: Figure
    changes: Sequence[str]
    changes_title: str
    sure: Sequence[str]
    binding: Sequence[str]
    check: Sequence[str]
    asked: Sequence[tuple[str, str]]
    glossary: Sequence[tuple[str, str]]
    provenance: str
    currency: str
    per: str


def write_decision(name: str, page: Decision, picture: Chart | None) -> ResultSheet:
    """Write the page, left and right columns beside each other, everything on one sheet of paper.

    ``picture`` stands on the left, the chart of the cost parts on the right; alone, the chart takes both.
    """
    sheet = ResultSheet(name, tab_colour=style.RUST, pages_wide=1, pages_tall=1)
    sheet.widths = dict(enumerate(WIDTHS))
    row = _head(sheet, page)
    row = _tiles(sheet, page, row)
    parts_row = row + 1
    row = _tables(sheet, page, row)
    bars = parts_chart(name, parts_row, [figure.value for _, figure in page.parts], page.currency, page.per)
    row = _charts(sheet, [bars] if picture is None else [picture, bars], row)
    for left, right in (((page.changes_title, page.changes), ("How sure this is", page.sure)),
                        (("What limits the plan", page.binding), ("Check before you act", page.check))):
        row = _points(sheet, row, left, right)
    row = _asked(sheet, page.asked, row)
    row = _foot(sheet, page, row)
    sheet.print_area = (0, 0, row - 1, LAST)
    sheet.footer = FOOTER
    return sheet


def _head(sheet: ResultSheet, page: Decision) -> int:
    sheet.put(0, LEFT, page.kicker.upper(), KICKER)
    sheet.put(1, LEFT, page.title, replace(style.TITLE, size=13.0, colour=style.QUIET))
    sheet.heights |= {0: 14.0, 1: 20.0}
    paragraph(sheet, 2, LEFT, LAST, page.headline, HEADLINE)
    row = 3
    if page.second:
        paragraph(sheet, row, LEFT, LAST, page.second, replace(style.WRAPPED, size=11.0))
        row += 1
    return row


def _tiles(sheet: ResultSheet, page: Decision, row: int) -> int:
    """Four figures to remember, and the line that warns when they no longer hold."""
    sheet.heights[row] = 6.0
    places = ((0, 0), (1, 2), (RIGHT, RIGHT), (RIGHT + 1, LAST))
    grounds = (style.PALE, style.SAND, style.PALE, style.SAND)
    for columns, tile, ground in zip(places, page.tiles, grounds, strict=True):
        _tile(sheet, row + 1, columns, tile, (ground, page.currency))
    sheet.heights |= {row + 1: 18.0, row + 2: 26.0, row + 3: 24.0, row + 4: 14.0}
    sheet.put(row + 4, LEFT, "", WARNING, formula=page.changed)
    sheet.merges.append((row + 4, LEFT, row + 4, LAST))
    return row + 5


def _tile(sheet: ResultSheet, row: int, columns: tuple[int, int], tile: Tile, how: tuple[str, str]) -> None:
    ground, currency = how
    look = replace(TILE_NUMBER, size=12.0, wrap=True)
    if isinstance(tile.value, int | float):
        shown = f"{tile.value:,.{style.money_digits(currency)}f}"
        size = 17.0 if len(shown) < 15 else 12.0
        look = replace(TILE_NUMBER, number_format=tile.number_format or style.money_format(currency), size=size)
    lines = ((tile.label, TILE_LABEL, ""), (tile.value, look, tile.formula), (tile.note, TILE_NOTE, ""))
    first, last = columns
    for place, (words, line, calculated) in enumerate(lines, start=row):
        for column in range(first, last + 1):
            sheet.put(place, column, words if column == first else None, replace(line, fill=ground),
                      formula=calculated if column == first else "")
        if last > first:
            sheet.merges.append((place, first, place, last))


def _tables(sheet: ResultSheet, page: Decision, row: int) -> int:
    """Against today on the left, cost parts on the right."""
    left, right = _comparison(sheet, page, row), _parts(sheet, page, row)
    return max(left, right) + 1


def _comparison(sheet: ResultSheet, page: Decision, row: int) -> int:
    """Today's figures beside the plan's; the plan's alone where there is nothing to compare with."""
    titles = ("Against today", "Today", "This plan") if page.compared else ("The plan in figures", "This plan", None)
    own, other = (2, 1) if page.compared else (1, 2)
    for column, title in enumerate(titles):
        sheet.put(row, column, title, style.HEADER if column == 0 else style.HEADER_RIGHT)
    for line in page.comparison:
        row += 1
        figures = style.with_format(ROW, line.number_format)
        sheet.put(row, 0, line.label, ROW)
        sheet.put(row, own, line.plan, replace(figures, bold=True), formula=line.formula)
        sheet.put(row, other, line.today if page.compared else None, figures)
    return row + 1


def _parts(sheet: ResultSheet, page: Decision, row: int) -> int:
    titles = ("Cost by part", f"{page.currency}{page.per}", "Part (%)")
    for column, title in enumerate(titles, start=RIGHT):
        sheet.put(row, column, title, style.HEADER if column == RIGHT else style.HEADER_RIGHT)
    total_row = row + 1 + len(page.parts)
    money = style.money_format(page.currency)
    total = page.total.value
    for place, (label, figure) in enumerate(page.parts, start=row + 1):
        look = ROW
        _part_row(sheet, place, total_row, label, figure, total, (look, money))
    _part_row(sheet, total_row, total_row, "Cost of the plan", page.total, total, (style.TOTAL, money))
    return total_row + 1


def _part_row(sheet: ResultSheet, row: int, total_row: int, label: str, figure: Figure, total: float,
              looks: tuple[Style, str]) -> None:
    look, money = looks
    sheet.put(row, RIGHT, label, look)
    sheet.put(row, RIGHT + 1, figure.value, style.with_format(look, money), formula=figure.written)
    share = figure.value / total if total else None
    formula = f"=F{row + 1}/F${total_row + 1}" if total else ""
    sheet.put(row, RIGHT + 2, share, style.with_format(look, style.PERCENT), formula=formula)


def parts_chart(name: str, row: int, amounts: Sequence[float], currency: str, per: str) -> Chart:
    """Bar chart of the cost parts; ``row`` is the first part's row (from 0)."""
    count, negative = len(amounts), min(amounts, default=0.0) < 0
    series = Series("Cost", Area(name, row, RIGHT, row + count - 1, RIGHT),
                    Area(name, row, RIGHT + 1, row + count - 1, RIGHT + 1), style.PETROL)
    return Chart("bar", "Cost by part", (series,), 0, RIGHT, y_title=f"{currency}{per}", number_format="#,##0",
                 legend="", from_zero=not negative, step=style.axis_step(max(amounts, default=0.0)),
                 description="Bars of the cost parts that stand in the table above")


def _charts(sheet: ResultSheet, charts: Sequence[Chart], row: int) -> int:
    """Two charts beside each other, or one over the whole width."""
    widths = [_pixels(LEFT, 3), _pixels(RIGHT, LAST)] if len(charts) > 1 else [_pixels(LEFT, LAST)]
    for chart, column, width in zip(charts, (LEFT, RIGHT), widths, strict=False):
        sheet.charts.append(replace(chart, row=row, column=column, width=width - 8, height=PICTURE_HEIGHT))
    for place in range(row, row + CHART_ROWS):
        sheet.heights[place] = LINE
    return row + CHART_ROWS


def _pixels(first: int, last: int) -> int:
    return int(sum(7 * WIDTHS[column] + 5 for column in range(first, last + 1)))


def _points(sheet: ResultSheet, row: int, left: tuple[str, Sequence[str]], right: tuple[str, Sequence[str]]) -> int:
    """Two lists beside each other, each one block of text of the same height."""
    blocks = ((LEFT, 2, left), (RIGHT, LAST, right))
    texts = [("\n".join(f"\u2022 {point}" for point in points)) for _, _, (_, points) in blocks]
    tallest = 0.0
    for (first, last, (title, _)), words in zip(blocks, texts, strict=True):
        for column in range(first, last + 1):
            sheet.put(row, column, title if column == first else None, style.SECTION)
        wide = sum(WIDTHS[first:last + 1])
        tallest = max(tallest, text_height(words, wide, 10.0))
        sheet.put(row + 1, first, words, style.WRAPPED)
        sheet.merges.append((row + 1, first, row + 1, last))
    sheet.heights |= {row: 20.0, row + 1: tallest + 4.0}
    return row + 2


def _asked(sheet: ResultSheet, asked: Sequence[tuple[str, str]], row: int) -> int:
    """Questions that the meeting will ask, with their answers, over the whole width."""
    if not asked:
        return row
    for column in range(LAST + 1):
        sheet.put(row, column, "Asked ahead" if column == LEFT else None, style.SECTION)
    sheet.heights[row] = 20.0
    words = "\n".join(f"\u2022 {question} {answer}" for question, answer in asked)
    paragraph(sheet, row + 1, LEFT, LAST, words, style.TEXT)
    sheet.heights[row + 1] += 4.0
    return row + 2


def _foot(sheet: ResultSheet, page: Decision, row: int) -> int:
    for column in range(LAST + 1):
        sheet.put(row, column, None, replace(style.SMALL, top=1, border_colour=style.PETROL))
    sheet.heights[row] = 4.0
    words = "Words used here. " + " ".join(f"{word}: {meaning}." for word, meaning in page.glossary)
    paragraph(sheet, row + 1, LEFT, LAST, words, style.SMALL_WRAPPED)
    paragraph(sheet, row + 2, LEFT, LAST, page.provenance, style.SMALL_WRAPPED)
    return row + 3


def cost_tile(cost: float, currency: str, ledger: Ledger, note: str) -> Tile:
    """Cost of the plan, as the ledger has it."""
    return Tile(f"Cost of this plan ({currency})", cost, f"{note}; line by line in the ledger", f"={ledger.total}")


def against_tile(saved: float, unit: str) -> Tile:
    """What the plan saves against today, or costs more."""
    return Tile("Saved against today" if saved >= 0 else "Costs more than today", abs(saved), unit)


def still_tile(solved: Solved[Any], currency: str) -> Tile:
    """The most that a better plan could save."""
    if solved.cost is None or solved.bound is None:
        return Tile("Could still be saved", "not known", "no bound is known")
    note = f"{currency}; {saving_note(solved)}"
    return Tile("Could still be saved, at most", most_saved(solved.cost, solved.bound, currency), note)


def checks_tile(checks: ChecksAt) -> Tile:
    """The master check."""
    note = f"{style.counted(checks.count, 'rule')} watched in Proof"
    return Tile("Checks", "All checks hold", note, f"={checks.master()}")


def changed_since(ledger: Ledger, record: str, proof: str) -> str:
    """Formula that warns when the ledger's total is no longer the cost the plan was solved with.

    ``record`` and ``proof`` are the settled names of the run record and the proof.
    """
    solved, tolerance = f"{quoted(record)}!{RECORDED_COST}", f"{quoted(proof)}!$C$4"
    same = f"ABS({ledger.total}-{solved})<={tolerance}*(1+ABS({solved}))"
    words = ("Inputs or plan cells were changed after the run: costs, counts and checks follow; the sentences, what "
             "is saved and what could still be saved are those of the run.")
    return f'=IF({same},"","{words}")'


def provenance(workbook: Workbook, run: RunFacts) -> str:
    """One line that says where the page comes from."""
    versions = ", ".join(f"{program} {version}" for program, version in run.versions[:1])
    notices = sum(1 for problem in workbook.problems if not problem.is_error)
    listed = f"{style.counted(notices, 'notice')} and {style.counted(len(workbook.defaults), 'default')}"
    made = f"Made {run.when:%Y-%m-%d %H:%M} from {run.file_name} by {versions or 'LedgerSolve'}."
    return f"{made} The run record lists {listed}, all settings and times."


def asked_ahead(answers: Sequence[Answered], most: int = 4) -> list[tuple[str, str]]:
    """Give the answers that belong on the first page; what changes against today stands there already."""
    return [(answer.question, answer.words) for answer in answers
            if answer.headline and "today" not in answer.question.lower()][:most]
