"""Marks on the analyst's own sheets: conditional formats that look at the cell and vanish once it is right.

A mark is a rule before the analyst's own ones, known again by a comparison in its formula that is always
true. Cells, styles and notes stay as they are: a marked sheet differs from the original by one insertion
and by the priorities of the analyst's rules, and clearing gives the original's bytes again.
"""

import re
from collections.abc import Iterable, Mapping, Sequence
from typing import NamedTuple

from ledgersolve.workbook import splice
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.markup import MAIN, whole
from ledgersolve.workbook.problems import Problem, Recheck, asked
from ledgersolve.workbook.splice import Edits, Element
from ledgersolve.workbook.stream import corner_of

FLAG = "ledgersolve-flag"
MOST_RANGES = 150

# Fill and a frame as well as a colour of letters, so that a mark shows in black and white.
ERROR_FORMAT = (
    '<dxf><font><b/><color rgb="FF7A1010"/></font><fill><patternFill patternType="solid">'
    '<fgColor rgb="FFFAD4CC"/><bgColor rgb="FFFAD4CC"/></patternFill></fill>'
    '<border><left style="thin"><color rgb="FF7A1010"/></left>'
    '<right style="thin"><color rgb="FF7A1010"/></right><top style="thin"><color rgb="FF7A1010"/></top>'
    '<bottom style="thin"><color rgb="FF7A1010"/></bottom></border></dxf>')
NOTICE_FORMAT = (
    '<dxf><font><i/><color rgb="FF5B4300"/></font><fill><patternFill patternType="solid">'
    '<fgColor rgb="FFFFEFB8"/><bgColor rgb="FFFFEFB8"/></patternFill></fill></dxf>')

_CONDITIONS: dict[Recheck, str] = {
    "number": "NOT(ISNUMBER({cell}))",
    "not negative": "IF(ISNUMBER({cell}),{cell}<0,TRUE)",
    "filled": "IF(ISERROR({cell}),FALSE,LEN(TRIM({cell}))=0)",
    "empty": "NOT(ISBLANK({cell}))",
    "no error": "ISERROR({cell})",
    "date": "NOT(ISNUMBER({cell}))",
    "static": "TRUE",
}
# Elements that the schema puts between the cells and the conditional formats.
_BEFORE = frozenset((
    "sheetCalcPr", "sheetProtection", "protectedRanges", "scenarios", "autoFilter", "sortState",
    "dataConsolidate", "customSheetViews", "mergeCells", "phoneticPr"))
_TAIL = re.compile(rb"</(?:\w+:)?sheetData\s*>|<(?:\w+:)?sheetData\s*/>")
_PRIORITY = re.compile(r"""(<(?:\w+:)?cfRule\b[^>]*?\spriority\s*=\s*["'])(\d{1,9})(?!\d)""")
_SELECTED = re.compile(rb"""(<(?:\w+:)?sheetView\b[^>]*?\stabSelected\s*=\s*["'])(1|true)(?=["'])""")
_FREED = re.compile(rb"""(<(?:\w+:)?sheetView\b[^>]*?\stabSelected\s*=\s*["'])(0|false)(?=["'])""")


class _Rule(NamedTuple):
    """What cells with one mark have in common; notices come behind errors."""

    notice: bool
    column: int
    recheck: Recheck
    low: float | None
    high: float | None
    above: bool
    may_be_empty: bool
    test: str
    typed: str


def by_sheet(problems: Iterable[Problem]) -> dict[str, list[Problem]]:
    """Problems that name a cell, by sheet."""
    found: dict[str, list[Problem]] = {}
    for problem in problems:
        if problem.sheet and corner_of(problem.cell) is not None:
            found.setdefault(problem.sheet, []).append(problem)
    return found


def with_marks(sheet: bytes, problems: Sequence[Problem], error_format: int, notice_format: int) -> bytes:
    """The sheet's XML with a mark on every cell the problems name.

    ``error_format`` and ``notice_format`` are indices of live formats in the style part.
    """
    rules = _rules(problems)
    if not rules:
        return sheet
    head, tail, codec = _parted(sheet)
    elements = _elements(tail)
    place = next((element.start for element in elements if element.name not in _BEFORE),
                 elements[-1].end if elements else tail.rfind("</"))
    pivot = any('pivot="' in element.whole(tail) for element in elements
                if element.name == "conditionalFormatting")
    if pivot:  # a pivot table names its rules by priority: they keep theirs
        first = max((int(match[2]) for match in _PRIORITY.finditer(tail)), default=0) + 1
    else:
        first = 1
        shift = sum(map(len, rules.values()))
        tail, place = _shifted(tail, place, shift)
    prefix = _prefix(tail)
    added = "".join(_written(rules, first, prefix, error_format, notice_format))
    return head + _encoded(tail[:place] + added + tail[place:], codec)


def without_marks(sheet: bytes) -> bytes:
    """The sheet's XML without our marks, priorities of the other rules as before them."""
    if FLAG.encode() not in sheet.replace(b"\0", b""):
        return sheet
    head, tail, codec = _parted(sheet)
    edits = Edits(tail)
    ours: list[int] = []
    for element in _elements(tail):
        if element.name != "conditionalFormatting":
            continue
        rules = splice.children(tail, element.inner, element.outer)
        mine = [rule for rule in rules if FLAG in rule.content(tail)]
        ours += [whole(rule.attributes.get("priority")) for rule in mine]
        if rules and len(mine) == len(rules):
            edits.remove(element)
        else:
            for rule in mine:
                edits.remove(rule)

    def lowered(match: re.Match[str]) -> str:
        priority = int(match[2])
        return match[1] + str(priority - sum(own < priority for own in ours))

    return head + _encoded(_PRIORITY.sub(lowered, edits.result()), codec)


def with_tab_freed(sheet: bytes) -> bytes:
    """The sheet no longer selected: two selected tabs form a group in which every edit hits both."""
    return _SELECTED.sub(lambda match: match[1] + (b"0" if match[2] == b"1" else b"false"), sheet, count=1)


def with_tab_selected(sheet: bytes) -> bytes:
    """The reverse of ``with_tab_freed``."""
    return _FREED.sub(lambda match: match[1] + (b"1" if match[2] == b"0" else b"true"), sheet, count=1)


def is_selected(head: bytes) -> bool:
    """Whether the tab of the sheet that begins so is selected."""
    return _SELECTED.search(head.replace(b"\0", b"")) is not None


def _rules(problems: Sequence[Problem]) -> Mapping[_Rule, list[list[tuple[int, int]]]]:
    """Ranges of rows by rule, in portions of at most ``MOST_RANGES``."""
    rows: dict[_Rule, set[int]] = {}
    for problem in problems:
        for cell in (problem.cell, *problem.more):
            place = corner_of(cell)
            if place is not None:
                rule = _Rule(not problem.is_error, place[1], problem.recheck, problem.low, problem.high,
                             problem.above, problem.may_be_empty, problem.test, problem.typed)
                rows.setdefault(rule, set()).add(place[0])
    found = {}
    for rule in sorted(rows, key=lambda rule: (rule.notice, rule.column, rule.recheck, str(rule[3:]))):
        ranges = _ranges(sorted(rows[rule]))
        found[rule] = [ranges[first:first + MOST_RANGES] for first in range(0, len(ranges), MOST_RANGES)]
    return found


def _ranges(rows: list[int]) -> list[tuple[int, int]]:
    found: list[tuple[int, int]] = []
    for row in rows:
        if found and found[-1][1] == row - 1:
            found[-1] = (found[-1][0], row)
        else:
            found.append((row, row))
    return found


def _written(rules: Mapping[_Rule, list[list[tuple[int, int]]]], first: int, prefix: str, error_format: int,
             notice_format: int) -> Iterable[str]:
    priority = first
    spaced = f' xmlns="{MAIN}"' if prefix else ""
    for rule, portions in rules.items():
        letters = column_letters(rule.column)
        for ranges in portions:
            area = " ".join(f"{letters}{start}" if start == end else f"{letters}{start}:{letters}{end}"
                            for start, end in ranges)
            formula = splice.escaped(
                f'AND({_condition(rule, letters, ranges[0][0])},"{FLAG}"="{FLAG}")')
            style = notice_format if rule.notice else error_format
            yield (f'<conditionalFormatting{spaced} sqref="{area}"><cfRule type="expression" dxfId="{style}" '
                   f'priority="{priority}"><formula>{formula}</formula></cfRule></conditionalFormatting>')
            priority += 1


def _condition(rule: _Rule, letters: str, row: int) -> str:
    """Formula that is true while the cell is wrong, and never an error value (that would hide the mark)."""
    cell = f"{letters}{row}"
    if rule.test and "!" not in rule.test:
        return f"NOT({asked(rule.test, '', letters, row)})"
    if rule.typed:
        typed = rule.typed.replace('"', '""')
        return f'IFERROR(EXACT(TRIM({cell}),"{typed}"),TRUE)'
    wrong = _CONDITIONS[rule.recheck].format(cell=cell)
    if rule.recheck == "number" and (rule.low is not None or rule.high is not None):
        limits = [f"{cell}<{'=' if rule.above else ''}{rule.low:.15g}"] if rule.low is not None else []
        limits += [f"{cell}>{rule.high:.15g}"] if rule.high is not None else []
        wrong = f"IF(ISNUMBER({cell}),OR({','.join(limits)}),TRUE)"
    return f"IF(ISBLANK({cell}),FALSE,{wrong})" if rule.may_be_empty else wrong


def _shifted(tail: str, place: int, shift: int) -> tuple[str, int]:
    """The tail with the analyst's priorities raised, and the place of insertion in it."""
    def raised(match: re.Match[str]) -> str:
        return match[1] + str(int(match[2]) + shift)

    before, behind = _PRIORITY.sub(raised, tail[:place]), _PRIORITY.sub(raised, tail[place:])
    return before + behind, len(before)


def _parted(sheet: bytes) -> tuple[bytes, str, str]:
    """What stands up to the end of the cells, what stands behind (as text), and how that is encoded."""
    codec = _wide_codec(sheet)
    if codec:
        text = sheet.decode(codec)
        ends = [match.end() for match in re.finditer(_TAIL.pattern.decode(), text)]
        end = ends[-1] if ends else len(text)
        return text[:end].encode(codec), text[end:], codec
    place = max(sheet.rfind(b"sheetData>"), sheet.rfind(b"sheetData/>"), sheet.rfind(b"sheetData />"))
    found = _TAIL.search(sheet, max(0, place - 80))
    end = found.end() if found is not None else len(sheet)
    return sheet[:end], sheet[end:].decode("utf-8", "surrogateescape"), ""


def _encoded(tail: str, codec: str) -> bytes:
    return tail.encode(codec) if codec else tail.encode("utf-8", "surrogateescape")


def _wide_codec(sheet: bytes) -> str:
    """The encoding of a sheet written in two bytes a character; the mark before it stays in the text."""
    if sheet[:2] == b"\xff\xfe" or sheet[:2] == b"<\0":
        return "utf-16-le"
    if sheet[:2] == b"\xfe\xff" or sheet[:2] == b"\0<":
        return "utf-16-be"
    return ""


def _elements(tail: str) -> list[Element]:
    return splice.children(tail)


def _prefix(tail: str) -> str:
    """Prefix of the sheet's own elements, from its closing tag."""
    name = tail[tail.rfind("</") + 2:].partition(">")[0]
    return name.rpartition(":")[0]
