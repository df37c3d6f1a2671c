"""Which cell styles show a number as a date, and which as a percentage."""

import re
from collections.abc import Iterable

from ledgersolve.workbook.markup import MAIN, Attributes, walk, whole

# Codes 27-36 and 50-58 are dates in the East Asian editions; a file names them without a format text.
_EAST_ASIAN_DATES = frozenset((*range(27, 37), *range(50, 59)))
# Codes that a file uses without a format text (ISO/IEC 29500, 18.8.30).
_BUILT_IN_DATES = frozenset((*range(14, 23), *range(45, 48)))
_BUILT_IN_PERCENTS = frozenset((9, 10))


# What a number format shows as it is: text in quotes, and characters behind a backslash, an underscore or a star.
_LITERAL = re.compile(r'"[^"]*"|[\\_*].')


def number_styles(part: str, pieces: Iterable[bytes]) -> tuple[frozenset[int], frozenset[int]]:
    """Indices of the cell formats (``cellXfs``) that show a date or a time, and of those that show percent."""
    formats: dict[int, str] = {}
    used: list[int] = []
    inside = False

    def start(name: str, attributes: Attributes) -> None:
        nonlocal inside
        if name == f"{MAIN} numFmt":
            formats[whole(attributes.get("numFmtId"))] = attributes.get("formatCode", "")
        elif name == f"{MAIN} cellXfs":
            inside = True
        elif inside and name == f"{MAIN} xf":
            used.append(whole(attributes.get("numFmtId")))

    def end(name: str) -> None:
        nonlocal inside
        if name == f"{MAIN} cellXfs":
            inside = False

    walk(part, pieces, start, end=end)
    dates = {code for code in set(used) if _is_date(code, formats.get(code))}
    percents = {code for code in set(used) if _is_percent(code, formats.get(code))}
    return (frozenset(index for index, code in enumerate(used) if code in dates),
            frozenset(index for index, code in enumerate(used) if code in percents))


def _is_percent(code: int, text: str | None) -> bool:
    return code in _BUILT_IN_PERCENTS if text is None else "%" in _LITERAL.sub("", text)


def _is_date(code: int, text: str | None) -> bool:
    if text is None:
        return code in _EAST_ASIAN_DATES or code in _BUILT_IN_DATES
    if not re.search("[ymdhs]", text, re.IGNORECASE):
        return False
    # loading this library takes as long as reading a small workbook, and few formats come here
    from openpyxl.styles.numbers import is_date_format

    return bool(is_date_format(text))
