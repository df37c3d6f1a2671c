"""What a cell means under its column: numbers, texts that are numbers, yes and no, words, dates."""

import datetime
import math
import re

from ledgersolve.contract import mended
from ledgersolve.contract.columns import LARGEST, Entry, Holds, quoted, shown
from ledgersolve.contract.degrees import LATITUDE, LONGITUDE, Coordinate, coordinates
from ledgersolve.contract.faults import Fault
from ledgersolve.workbook.cells import Cell, Kind
from ledgersolve.workbook.text import alike, cell_text, clean, nearest, serial_date

_PLAIN = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_SPACED = re.compile(r"[+-]?\d{1,3}(?:[ \u00a0\u2009\u202f'’]\d{3})+(?:\.\d+)?", re.ASCII)
_GROUPED = re.compile(r"[+-]?[1-9]\d{0,2}(?:(?:\.\d{3})+|(?:,\d{3})+)", re.ASCII)
_SEPARATED = re.compile(r"[+-]?[\d.,]*\d[\d.,]*", re.ASCII)
_LEADING = re.compile(r"\D{0,4}[\d.,]*\d[\d.,]*\s*\D{1,12}|\D{1,4}[\d.,]*\d[\d.,]*", re.ASCII)
_DAY_TEXT = re.compile(r"\d{1,4}[./-]\d{1,2}[./-]\d{1,4}", re.ASCII)

DEGREES = "degrees"
"""Unit of the columns that hold coordinates."""
YES, NO = frozenset(mended.YES), frozenset(mended.NO)
_NOTHING = frozenset({"-", "–", "—", "n/a", "na", "none", "nil", "unlimited", "null", "nan", "inf", "."})


def readings(text: str) -> tuple[float, ...]:
    """The numbers a text can mean: none, one, or two where the separators leave it open; the likelier first.

    A comma is a decimal sign in some countries and a thousands separator in others, a point likewise. Digits
    behind the one separator of a text are thousands only where they are exactly three and one to three others,
    no zero first, stand before: so ``1,200`` has two readings and ``7,35`` has one. Several equal separators are
    thousands. Of two different ones the last is the decimal sign; what the text would be with the first one as
    decimal sign is shown too, where that stands once.
    """
    text = text.replace("\u2212", "-")
    if _SPACED.fullmatch(text):
        return (float(re.sub(r"[^\d.+-]", "", text)),)
    if _PLAIN.fullmatch(text) and not _GROUPED.fullmatch(text):
        return (float(text),)
    if not _SEPARATED.fullmatch(text):
        return ()
    signs = sorted({character for character in text if character in ",."}, key=text.rfind)
    if len(signs) == 2:
        return _mixed(text, *signs)
    found = [float(text.replace(signs[0], ""))] if _GROUPED.fullmatch(text) else []
    if text.count(signs[0]) == 1:
        found.append(float(text.replace(signs[0], ".")))
    return tuple(found)


def _mixed(text: str, thousands: str, decimal: str) -> tuple[float, ...]:
    """Readings of a text with both separators, of which ``decimal`` stands last."""
    whole, _, part = text.partition(decimal)
    if not _GROUPED.fullmatch(whole) or not (part == "" or part.isdigit()):
        return ()
    found = [float(f"{whole.replace(thousands, '')}.{part}")]
    if whole.count(thousands) == 1:
        found.append(float(f"{whole.replace(thousands, '.')}{part}"))
    return tuple(dict.fromkeys(found))


def _number_fault(entry: Entry, kind: str, found: str, remedy: str) -> Fault:
    return mended.watched(Fault(kind, found, entry.expected(), remedy), entry)


def or_empty(entry: Entry) -> str:
    """The way out for a cell that need not be filled."""
    return "" if entry.required else f", or leave the cell empty ({entry.default_text()})"


def cell_fault(cell: Cell, entry: Entry) -> Fault | None:
    """The fault of a cell that holds an error value or a formula without a value; None for others."""
    if cell.kind is Kind.ERROR:
        fault = Fault("error value", f"the error value {cell.value}", entry.expected(),
                      f"Mend the formula, or type the value{or_empty(entry)}.", "no error")
    elif cell.kind is Kind.UNCALCULATED:
        fault = Fault(
            "formula never calculated", f"a formula without a result: {quoted(cell.value)}",
            entry.expected(),
            "Open the workbook in a spreadsheet program, let it calculate, save, and drop it again.", "no error")
    else:
        return None
    return fault if entry.holds in (Holds.TEXT, Holds.CODE, Holds.CODES) else mended.watched(fault, entry)


def number(cell: Cell, entry: Entry) -> float | Fault:
    """The number a cell means (limits are not checked here), or what is wrong with it."""
    if cell.kind is Kind.NUMBER:
        return float(cell.value)
    if cell.kind is Kind.TEXT:
        return text_number(clean(str(cell.value)), entry)
    if cell.kind is Kind.DATE:
        day = serial_date(float(cell.value)) or "a date"
        return Fault(  # a formula cannot tell a date from its number: only the next drop can
            "date instead of number", f"the date {day} (number {shown(cell.value)})", entry.expected(),
            "Type the number and give the cell a number format.")
    if cell.kind is Kind.BOOLEAN:
        return _number_fault(entry, "number expected", "TRUE" if cell.value else "FALSE", "Type a number.")
    fault = cell_fault(cell, entry)
    return fault or _number_fault(entry, "number expected", str(cell.value), "Type a number.")


def text_number(words: str, entry: Entry) -> float | Fault:
    """The one number a text can mean in this column, or what is wrong with it."""
    meanings = readings(words)
    fitting = [value for value in meanings if entry.low <= value <= entry.high]
    separated = "," in words or words.count(".") > 1
    # looked for before numbers outside the limits are taken as such: ISO 6709 writes 52°31.2' as +5231.2
    meant = coordinates(words, entry.title) if entry.unit == DEGREES and not fitting else ()
    if len(meanings) == 1 and not separated and not meant:
        return meanings[0]
    if len(fitting) == 1 and not separated:
        return fitting[0]
    found = f"the text {quoted(words)}"
    if meant or (entry.unit == DEGREES and not meanings):
        return _degrees_fault(words, meant, entry)
    if meanings:
        return _separated(words, meanings, fitting, entry)
    if _DAY_TEXT.fullmatch(words):
        return _number_fault(entry, "date instead of number", found, "Type the number.")
    if words.casefold() in _NOTHING:
        remedy = "Type a number." if entry.required else f"Leave the cell empty for {entry.default_text()}."
    elif _LEADING.fullmatch(words):
        remedy = "Type the number alone; units, currency and % signs belong into the title."
    else:
        remedy = f"Type a number{or_empty(entry)}."
    return _number_fault(entry, "number expected", found, remedy)


def _separated(words: str, meanings: tuple[float, ...], fitting: list[float], entry: Entry) -> Fault:
    """The fault of a number typed with separators: which number to type, where one can be told."""
    found, last = f"the text {quoted(words)}", words.rstrip("0123456789")[-1:] or "."
    name, other = ("comma", "point") if last == "," else ("point", "comma")
    if len(meanings) == 1:
        use = f"thousands {name}s" if words.count(last) > 1 else f"a decimal {name}"
        found += f", which means {shown(meanings[0])} with {use}"
    elif "," in words and "." in words:
        found += (f", which is {shown(meanings[0])} with a decimal {name} and {shown(meanings[1])} with a decimal "
                  f"{other}")
    else:
        found += f", which can be read as {shown(meanings[0])} or {shown(meanings[1])}"
    mixed = "," in words and "." in words and meanings[0] in fitting
    if len(meanings) == 1 or mixed:
        remedy = _typed(meanings[0])
    elif len(fitting) == 1:
        remedy = f"{_typed(fitting[0])} The other reading is outside the limits."
    else:
        remedy = "Type the one that is meant as a number, without a thousands separator."
    return _number_fault(entry, "ambiguous number", found, remedy)


def _degrees_fault(words: str, meant: tuple[Coordinate, ...], entry: Entry) -> Fault:
    """The fault of a coordinate that is no decimal number: what it is in decimal degrees, where that can be told."""
    kind, found = "decimal degrees expected", f"the text {quoted(words)}"
    if len(meant) == 2:
        here, there = meant if entry.title == LATITUDE else meant[::-1]
        other = LONGITUDE if entry.title == LATITUDE else LATITUDE
        found += ", which holds latitude and longitude"
        remedy = f"{_typed(here.degrees)} The other one, {shown(there.degrees)}, belongs into the column {other}."
    elif meant and meant[0].axis in ("", entry.title):
        found += f", which is {shown(meant[0].degrees)} in decimal degrees"
        remedy = _typed(meant[0].degrees)
    elif meant:
        found += f", which is a {meant[0].axis.lower()}: {shown(meant[0].degrees)} in decimal degrees"
        remedy = f"Type the {entry.title.lower()} here; this one belongs into the column {meant[0].axis}."
    else:
        remedy = (f"Type decimal degrees as a number, such as {shown(entry.example)}; south and west are negative"
                  f"{or_empty(entry)}.")
    return _number_fault(entry, kind, found, remedy)


def _typed(value: float) -> str:
    """The advice to type a number, whose decimal sign depends on the analyst's program."""
    sign = "" if value == int(value) else ", with the decimal sign of your own program"
    return f"Type {shown(value)} as a number{sign}."


def text(cell: Cell, entry: Entry, date1904: bool) -> str | Fault:
    """The text or code of a cell, or what is wrong with it; "" for a blank one."""
    fault = cell_fault(cell, entry)
    if fault is not None:
        return fault
    words = cell_text(cell, date1904)
    if words is None:
        return Fault("text expected", found_in(cell), entry.expected(), "Type the text.", "filled")
    return words


def yes_no(word: str, entry: Entry) -> bool | Fault:
    """Yes or no of a word, or what is wrong with it."""
    if word.casefold() in YES:
        return True
    if word.casefold() in NO:
        return False
    return mended.watched(Fault("yes or no expected", f"{quoted(word)}", entry.expected(),
                                f"Type yes or no{or_empty(entry)}."), entry)


def choice(words: str, entry: Entry) -> str | Fault:
    """The word of a CHOICE that a text means, or what is wrong with it."""
    wanted = alike(words)
    for word in entry.choices:
        if alike(word) == wanted:
            return word
    near = nearest(words, entry.choices)
    remedy = f"Did you mean {quoted(near)}?" if near else f"Type one of these words{or_empty(entry)}."
    return mended.watched(Fault("unknown word", f"{quoted(words)}", entry.expected(), remedy), entry)


def date(cell: Cell, entry: Entry, date1904: bool) -> str | Fault:
    """ISO date of a cell, or what is wrong with it."""
    if cell.kind is Kind.DATE:
        day = serial_date(float(cell.value), date1904)
        if day:
            return day[:10]
    if cell.kind is Kind.TEXT:
        try:
            return datetime.date.fromisoformat(clean(str(cell.value))).isoformat()
        except ValueError:
            pass
    remedy = f"Type a date, or its text as year-month-day such as {entry.example}{or_empty(entry)}."
    return cell_fault(cell, entry) or mended.watched(
        Fault("date expected", found_in(cell), entry.expected(), remedy), entry)


def bare_serial(serial: float, entry: Entry, date1904: bool = False) -> Fault:
    """The fault of a number where a date belongs; it may be a date without its format."""
    day = serial_date(serial, date1904)
    meant = f"Give the cell a date format if {day[:10]} is meant." if day and day > "1950" else ""
    remedy = meant or "Type a date."
    # a formula cannot tell a date from its number: only the next drop can
    return Fault("date expected", f"the number {shown(serial)}", entry.expected(), remedy)


def found_in(cell: Cell) -> str:
    """What stands in a cell, in words."""
    if cell.kind is Kind.TEXT:
        return f"the text {quoted(cell.value)}"
    if cell.kind is Kind.BOOLEAN:
        return "TRUE" if cell.value else "FALSE"
    if cell.kind is Kind.DATE:
        return f"the date {serial_date(float(cell.value)) or shown(cell.value)}"
    if cell.kind is Kind.NUMBER:
        return f"the number {shown(cell.value)}"
    return f"the error value {cell.value}" if cell.kind is Kind.ERROR else "a formula without a result"


def limit_fault(entry: Entry, value: float) -> Fault | None:
    """What is wrong with a number under the column's limits; None where nothing is.

    The same limits are in the row models; this gives the words.
    """
    found = f"the number {shown(value)}"
    if not math.isfinite(value):
        return _number_fault(entry, "number expected", "a value that is no finite number", "Type a number.")
    if abs(value) > LARGEST:
        return _number_fault(entry, "number too large", found,
                             f"No figure may exceed {LARGEST:.0e}; check it.")
    if value < 0 <= entry.low:
        return _number_fault(entry, "negative number", found, "Type the figure without a minus sign.")
    if value < entry.low or (entry.above and value == entry.low):
        return _number_fault(entry, "number too small", found, entry.hint or f"Type {entry.expected()}.")
    if value > entry.high:
        return _number_fault(entry, "number too large", found, entry.hint or f"Type {entry.expected()}.")
    if entry.holds is Holds.WHOLE and value != int(value):
        return _number_fault(entry, "whole number expected", found, "Round it up or down.")
    return None
