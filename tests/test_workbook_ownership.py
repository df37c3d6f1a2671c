"""Our sheets are known by the sheet name in the text of their mark."""

import pytest

from ledgersolve.workbook.ownership import FREED_TAB, MARKED_SHEET, OWN_SHEET, quoted, sheet_of, sheets_named


@pytest.mark.parametrize(("reference", "sheet"), [
    ("Decision!$A$1", "Decision"), ("'Fix list'!$A$1", "Fix list"), ("'It''s'!A1", "It's"),
    ("=Decision!A1", "Decision"),
    ("$'Fix list'.$A$1", "Fix list"), ("$Decision.$A$1", "Decision"), ("'a!b'!$A$1", "a!b"), ("#REF!$A$1", "#REF"),
    ("", None), ("$A$1", None), ("'open!$A$1", None), ("Größe!$A$1", "Größe"),
])
def test_the_sheet_in_a_reference(reference: str, sheet: str | None) -> None:
    """Quoted and plain names are read, in the manner of several programs; what names none gives None."""
    assert sheet_of(reference) == sheet


def test_quoting_and_reading_are_inverse() -> None:
    """Every name comes back from its quoted form."""
    for name in ("Decision", "It's", "'", "a!b.c", "東京", "1"):
        assert sheet_of(f"{quoted(name)}!$A$1") == name


def test_marks_are_told_apart_whatever_the_case() -> None:
    """Each kind of mark finds its own sheets; other names are none."""
    names = [(OWN_SHEET.upper(), "A!$A$1"), (MARKED_SHEET, "B!$A$1"), (FREED_TAB, "C!$A$1"), ("Rate", "D!$A$1"),
             (OWN_SHEET, "broken")]
    assert sheets_named(OWN_SHEET, names) == {"A"}
    assert sheets_named(MARKED_SHEET, names) == {"B"}
    assert sheets_named(FREED_TAB, names) == {"C"}
