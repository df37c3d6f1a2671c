"""What a cell says as text: codes, titles, dates, and which known word a stray one is close to."""

import datetime
import re
import unicodedata
from collections.abc import Callable, Iterable

from ledgersolve.workbook.cells import Cell, Kind

CLOSE = 80.0
"""Least similarity, in percent of rapidfuzz's ratio (normalised Indel distance), of a near miss."""

_UNSEEN = dict.fromkeys(map(ord, "\u200b\u200c\u200d\u2060\ufeff\u00ad\u200e\u200f"))
_SPACES = re.compile(r"\s+")
_WHOLE = re.compile(r"(-?\d+)\.0+", re.ASCII)


def clean(text: str) -> str:
    """Text in Unicode normal form C, without characters that cannot be seen, trimmed."""
    if text.isascii():
        return text.strip()
    return unicodedata.normalize("NFC", text).translate(_UNSEEN).strip()


def code_text(text: str) -> str:
    """The code a text stands for: cleaned, and ``7.0`` as ``7``."""
    code = clean(text)
    match = _WHOLE.fullmatch(code) if code.endswith("0") else None
    return match[1] if match else code


def alike(text: str) -> str:
    """What two codes have in common that differ in case or in inner spacing only."""
    return _SPACES.sub("", unicodedata.normalize("NFKC", text).translate(_UNSEEN).casefold())


def plain(title: str) -> str:
    """A title without case, spacing and a unit in brackets behind it: ``Fixed cost (EUR)`` is ``fixedcost``.

    Marks some people put behind a title (``*``, ``:``) do not count either.
    """
    start, _ = _bracket(title)
    return alike(title[:start]).rstrip("*:") or alike(title)


def unit_in(title: str) -> str:
    """The unit in brackets behind a title; ``""`` where none."""
    _, unit = _bracket(title)
    return unit


def _bracket(title: str) -> tuple[int, str]:
    """Where the last bracket of a title starts, and what stands in it; the whole title where none."""
    text = title.rstrip(" \t\r\n\u00a0*:")
    if not text or text[-1] not in ")]":
        return len(title), ""
    close, opened = text[-1], {")": "(", "]": "["}[text[-1]]
    depth = 0
    for place in range(len(text) - 1, -1, -1):
        depth += (text[place] == close) - (text[place] == opened)
        if depth == 0:
            return place, clean(text[place + 1:-1])
    return len(title), ""


def number_text(value: float, raw: str = "") -> str:
    """A number as a code or in a sentence: whole numbers without a point, long ones as they were stored."""
    if raw.isdigit() and len(raw) > 15:
        return raw
    if value == int(value) if abs(value) < 1e15 else False:
        return str(int(value))
    return repr(value)


def serial_date(serial: float, date1904: bool = False) -> str | None:
    """ISO date (with the time, where it is not midnight) of a date's serial number; None where there is none.

    Serial 60 of the 1900 system is the 29 February 1900 that never was.
    """
    if not 0 <= serial < 2958466:
        return None
    day = int(serial)
    if date1904:
        start = datetime.datetime(1904, 1, 1)
    elif day == 60:
        return None
    else:
        start = datetime.datetime(1899, 12, 30 if day > 60 else 31)
    try:
        moment = start + datetime.timedelta(days=day, seconds=round((serial - day) * 86400))
    except OverflowError:
        return None
    midnight = (moment.hour, moment.minute, moment.second) == (0, 0, 0)
    return moment.date().isoformat() if midnight else moment.isoformat(sep=" ")


def cell_text(cell: Cell, date1904: bool = False) -> str | None:
    """The code or text a cell holds; ``""`` for blank text, None for errors and the like."""
    if cell.kind is Kind.TEXT:
        return code_text(str(cell.value))
    if cell.kind is Kind.NUMBER:
        return number_text(float(cell.value), cell.raw)
    if cell.kind is Kind.DATE:
        return serial_date(float(cell.value), date1904)
    if cell.kind is Kind.BOOLEAN:
        return "TRUE" if cell.value else "FALSE"
    return None


def nearest(word: str, known: Iterable[str], form: Callable[[str], str] = alike) -> str | None:
    """The known word that ``word`` is most likely a slip of; None where none is close.

    A difference in case, spacing or leading zeros only always counts as close; so does, in words of three or
    more characters, a single letter that is wrong, missing, too many or swapped with its neighbour (the optimal
    string alignment distance is 1), where one known word alone is that near. Digits that differ make other codes,
    not slips. ``form`` is what is compared: ``plain`` for titles, whose units do not count.
    """
    choices = {each: form(each) for each in known}
    wanted = form(word)
    bare = wanted.lstrip("0")
    for each, shape in choices.items():
        if shape == wanted or (bare.isdigit() and shape.lstrip("0") == bare):
            return each
    from rapidfuzz import fuzz, process  # here, because a workbook without slips does not need it
    from rapidfuzz.distance import OSA

    best = process.extractOne(wanted, choices, scorer=fuzz.ratio, score_cutoff=CLOSE)
    if best is not None or len(wanted) < 3:
        return None if best is None else str(best[2])
    slips = [each for _, _, each in process.extract(wanted, choices, scorer=OSA.distance, score_cutoff=1, limit=2)]
    return slips[0] if len(slips) == 1 and _digits(choices[slips[0]]) == _digits(wanted) else None


def _digits(text: str) -> str:
    return "".join(filter(str.isdigit, text))
