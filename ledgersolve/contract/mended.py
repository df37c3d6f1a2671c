"""Formulas by which a cell shows, without us, that its fault is mended: true once it is right, never an error.

They are asked in the list of faults and, where they look at one sheet only, by the mark on the cell. So they
use what every spreadsheet program of the last fifteen years knows, and no array constants, which conditional
formats must not hold. The cell stands in them as ``problems.CELL``, its row and the one above it as ``ROW`` and
``ABOVE``, its own sheet as ``OWN``.
"""

from collections.abc import Sequence
from dataclasses import replace

from ledgersolve.contract.columns import LARGEST, Entry, Holds
from ledgersolve.contract.faults import Fault
from ledgersolve.workbook.cells import column_letters
from ledgersolve.workbook.currencies import MINOR_UNITS
from ledgersolve.workbook.problems import ABOVE, CELL, OWN, ROW
from ledgersolve.workbook.text import alike

MOST_COMPARED = 20_000
"""A cell is compared with so many others at most: every change of the workbook asks the formula again."""

YES, NO = ("yes", "y", "true", "1"), ("no", "n", "false", "0")
"""Words for yes and no, as the contract fixes them."""

SPARE = 500
"""Rows below a list in which codes that are added to it count."""

_SHORT = f"TRIM({CELL})"
_FILLED = f"LEN({_SHORT})>0"
_ISO_DAY = f'AND(LEN({_SHORT})=10,MID({_SHORT},5,1)="-",MID({_SHORT},8,1)="-",ISNUMBER(DATEVALUE({_SHORT})))'

_DATES = (f'SUMPRODUCT(ISNUMBER({CELL})+(LEN({_SHORT})=10)*(MID({_SHORT},5,1)="-")*(MID({_SHORT},8,1)="-")'
          f"*ISNUMBER(DATEVALUE({_SHORT})))")


def watched(fault: Fault, entry: Entry) -> Fault:
    """The fault with the way in which a cell of this column shows that it is mended."""
    empty = not entry.required
    if entry.holds is Holds.WHOLE:
        return replace(fault, test=number(entry, or_empty=empty))
    if entry.numeric:
        if entry.low == 0 and not entry.above and entry.high >= LARGEST and fault.kind != "number too large":
            return replace(fault, recheck="not negative", may_be_empty=empty)
        return replace(fault, recheck="number", low=entry.low, high=entry.high, above=entry.above, may_be_empty=empty)
    if entry.holds is Holds.YES_NO:
        return replace(fault, test=yes_or_no(or_empty=empty), tally=_count_of(("yes", "no", "y", "n")),
                       may_be_empty=empty)
    if entry.holds is Holds.CHOICE:
        return replace(fault, test=one_of(entry.choices, or_empty=empty), tally=_count_of(entry.choices),
                       may_be_empty=empty)
    if entry.holds is Holds.DATE:
        return replace(fault, recheck="date", test=date(or_empty=empty), tally=_DATES, may_be_empty=empty)
    if entry.holds is Holds.CURRENCY:
        return replace(fault, test=currency())
    return replace(fault, recheck="no error" if empty else "filled")


def test_of(entry: Entry) -> str:
    """The test that a cell of a required column is filled rightly."""
    return number(entry) if entry.numeric else watched(Fault("", "", "", ""), entry).test or _safe(_FILLED)


def _count_of(words: Sequence[str]) -> str:
    return "+".join(f'COUNTIF({CELL},"{word}")' for word in words)


def _safe(condition: str) -> str:
    return f"IFERROR({condition},FALSE)"


def beside(column: int) -> str:
    """The cell of the same row in another column."""
    return f"{OWN}${column_letters(column)}{ROW}"


def at(row: int, column: int) -> str:
    """One cell of the same sheet."""
    return f"{OWN}${column_letters(column)}${row}"


def down(column: int, first: int, last: int) -> str:
    """Cells of a column of the same sheet; "" where they are too many to be compared with."""
    if last - first >= MOST_COMPARED:
        return ""
    letters = column_letters(column)
    return f"{OWN}${letters}${first}:${letters}${last + SPARE}"


def along(row: int, first: int, last: int) -> str:
    """Cells of a row of the same sheet."""
    return f"{OWN}${column_letters(first)}${row}:${column_letters(last + 20)}${row}"


def one_of(words: Sequence[str], *, or_empty: bool = False) -> str:
    """The cell holds one of a few words, whatever the case."""
    asked = [f'{_SHORT}="{word}"' for word in words]
    return _safe(f"OR({','.join([*asked, *_empty(or_empty)])})")


def yes_or_no(*, or_empty: bool = False) -> str:
    """The cell holds a word for yes or no, or a Boolean."""
    asked = [f"ISLOGICAL({CELL})", *(f'{_SHORT}="{word}"' for word in (*YES, *NO))]
    return _safe(f"OR({','.join([*asked, *_empty(or_empty)])})")


def _empty(allowed: bool) -> list[str]:
    return [f"LEN({_SHORT})=0"] if allowed else []


def currency() -> str:
    """The cell holds a currency code. A text in a formula has at most 255 characters, so the list is parted."""
    codes = sorted(MINOR_UNITS)
    parts = ["".join(f"{code}," for code in codes[first:first + 60]) for first in range(0, len(codes), 60)]
    known = "&".join(f'"{part}"' for part in (",", *parts))
    return _safe(f'AND(LEN({_SHORT})=3,ISNUMBER(FIND(","&UPPER({_SHORT})&",",{known})))')


def title(name: str) -> str:
    """The cell holds a title or the name of a setting, with or without a unit in brackets behind it."""
    return _safe(f'OR({_SHORT}="{name}",LEFT({_SHORT},{len(name) + 2})="{name} (")')


def or_cleared(test: str, first: int, last: int) -> str:
    """The test is true, or the whole row is empty from one column to another."""
    return any_of(test, f"COUNTA({beside(first)}:${column_letters(last)}{ROW})=0")


def any_of(*tests: str) -> str:
    """One of several tests is true."""
    return f"OR({','.join(tests)})"


def number(entry: Entry, *, or_empty: bool = False) -> str:
    """The cell holds a number within the limits of its column."""
    whole = [f"{CELL}=INT({CELL})"] if entry.holds is Holds.WHOLE else []
    low = [f"{CELL}>{'' if entry.above else '='}{entry.low:.15g}"]
    right = f"AND({','.join([*whole, *low, f'{CELL}<={min(entry.high, LARGEST):.15g}'])})"
    return _safe(f"IF(ISNUMBER({CELL}),{right},{_empty(or_empty)[0] if or_empty else 'FALSE'})")


def date(*, or_empty: bool = False) -> str:
    """The cell holds a date, or the text of one as year-month-day."""
    return _safe(f"IF(ISNUMBER({CELL}),TRUE,OR({','.join([_safe(_ISO_DAY), *_empty(or_empty)])}))")


def listed(codes: str) -> str:
    """The cell holds one of the codes that stand in a range, in the same writing."""
    return _safe(f"AND({_FILLED},SUMPRODUCT(EXACT(TRIM({codes}),{_SHORT})*1)>0)") if codes else ""


def count_listed(codes: str, code: str, near: str | None) -> str:
    """Number of cells of a run that hold one of the codes, for a run whose cells hold ``code`` so far.

    Formulas that search do not tell capitals from small letters and take some signs for others, so a slip in
    these is not left to them.
    """
    slip = near is not None and alike(near) == alike(code)
    if not codes or slip or any(sign in code for sign in "*?~"):
        return ""
    return f"SUMPRODUCT(ISNUMBER(MATCH(TRIM({CELL}),TRIM({codes}),0))*1)"


def unique(among: str) -> str:
    """No other cell of the range holds the same, in whatever case and spacing."""
    if not among:
        return ""
    same = f'SUMPRODUCT((SUBSTITUTE({among}," ","")=SUBSTITUTE({CELL}," ",""))*1)=1'
    return _safe(f"AND({_FILLED},{same})")


def unique_pair(firsts: str, first: str, seconds: str, second: str) -> str:
    """No other row of two columns holds the same pair."""
    if not firsts or not seconds:
        return ""
    same = f"SUMPRODUCT(EXACT(TRIM({firsts}),TRIM({first}))*EXACT(TRIM({seconds}),TRIM({second})))<=1"
    return _safe(f"AND({_FILLED},{same})")


def at_most(other: str) -> str:
    """The cell's number is not above another cell's, if there is one."""
    return _safe(f"IF(ISNUMBER({other}),{CELL}<={other},TRUE)")


def after_those_above(column: int, first: int) -> str:
    """The cell's date comes after every date above it in its column, where none of them is a text."""
    above = f"{OWN}${column_letters(column)}${first}:${column_letters(column)}{ABOVE}"
    dates = f"AND(ISNUMBER({CELL}),COUNT({above})=COUNTA({above}))"
    return _safe(f"IF({dates},{CELL}>MAX({above}),{_empty(True)[0]})")


def any_number(*cells: str) -> str:
    """One of the cells holds a number of 0 or more."""
    return "+".join(f'COUNTIF({cell},">=0")' for cell in cells) + ">0"


def is_no(other: str) -> str:
    """Another cell says no."""
    words = ",".join(f'TRIM({other})="{word}"' for word in NO)
    return _safe(f"OR({words})")


def number_or_none(entry: Entry, other: str) -> str:
    """The cell holds a number of its column, or the other cell that asks for it is empty."""
    return _safe(f"OR({number(entry)},LEN(TRIM({other}))=0)")


def both_or_neither(other: str) -> str:
    """The cell and another one both hold numbers, or both are empty."""
    filled = f"(LEN({_SHORT})=0)=(LEN(TRIM({other}))=0)"
    return _safe(f"AND(COUNT({CELL})=COUNT({other}),{filled})")
