"""Number formats that show dates and percentages."""

import pytest

from ledgersolve.workbook.styles import number_styles

HEAD = '<styleSheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main">'


def styles(code: int, text: str = "") -> tuple[bool, bool]:
    """Whether a number format is a date, and whether it is a percentage."""
    formats = f'<numFmts><numFmt numFmtId="{code}" formatCode="{text}"/></numFmts>' if text else ""
    part = (f'{HEAD}{formats}<cellStyleXfs><xf numFmtId="9"/></cellStyleXfs>'
            f'<cellXfs><xf numFmtId="0"/><xf numFmtId="{code}"/></cellXfs></styleSheet>')
    dates, percents = number_styles("styles", (part.encode(),))
    assert 0 not in dates | percents
    return 1 in dates, 1 in percents


@pytest.mark.parametrize(("code", "expected"), [
    (9, (False, True)), (10, (False, True)), (0, (False, False)), (2, (False, False)), (14, (True, False)),
    (22, (True, False)), (30, (True, False)),
])
def test_built_in_formats(code, expected):
    """The formats that have no text in the file (ECMA-376 part 1, 18.8.30)."""
    assert styles(code) == expected


@pytest.mark.parametrize(("text", "expected"), [
    ("0.0%", (False, True)), ("0&quot;%&quot;", (False, False)), ("0\\%", (False, False)),
    ("yyyy-mm-dd", (True, False)),
    ("#,##0.00", (False, False)), ("0 %;[Red]-0 %", (False, True)),
])
def test_formats_of_the_file(text, expected):
    """A percent sign that multiplies counts, one in quotes or behind a backslash does not."""
    assert styles(170, text) == expected
