"""How our own sheets and marks are known again, also after another program has saved the file.

A result sheet carries a hidden defined name, local to it, that refers to its first cell; a sheet of the
analyst with marks carries another. Programs keep such names and follow a renamed sheet in their text; so
the sheet is found by the name in the text, never by a number.
"""

import re
from collections.abc import Iterable

OWN_SHEET = "_ledgersolve_sheet"
MARKED_SHEET = "_ledgersolve_marks"
FREED_TAB = "_ledgersolve_tab"
OWN_NAMES = frozenset((OWN_SHEET, MARKED_SHEET, FREED_TAB))

_REFERENCE = re.compile(r"^=?\$?(?:'((?:[^']|'')+)'|([^'!]+))[!.]")


def sheets_named(kind: str, names: Iterable[tuple[str, str]]) -> frozenset[str]:
    """Names of the sheets that carry our mark ``kind``, from (name, text) of all defined names."""
    return frozenset(
        found for name, text in names
        if name.casefold() == kind and (found := sheet_of(text)) is not None)


def sheet_of(reference: str) -> str | None:
    """Sheet name in a reference such as ``'Lane costs'!$A$1``; None where it names none."""
    match = _REFERENCE.match(reference.strip())
    if match is None:
        return None
    return match[1].replace("''", "'") if match[1] is not None else match[2]


def quoted(sheet: str) -> str:
    """A sheet name as formulas quote it."""
    return "'" + sheet.replace("'", "''") + "'"
