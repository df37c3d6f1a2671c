"""Parts of rendered sheets under names and numbers of their own."""

import re
from io import BytesIO

from ledgersolve.workbook.render import render
from ledgersolve.workbook.result_parts import named_apart, reindexed, renamed, take_apart
from ledgersolve.workbook.sheets import Area, Chart, LiveFormat, ResultSheet, Series, Style


def rendered(sheets: int = 2):
    """Rendered sheets with a chart each, texts, styles and a live format."""
    made = []
    for number in range(sheets):
        sheet = ResultSheet(f"Sheet {number}")
        sheet.put(0, 0, 'v="1" s="2" t="s"><v>3', Style(bold=True))
        sheet.put(1, 0, 1.0, Style(italic=True), formula='="<c r=""A1"" s=""9"">"')
        sheet.put(2, 0, 1.0)
        sheet.live_formats.append(LiveFormat(0, 0, 1, 0, '="dxfId=""0"""="x"', Style(fill="FFEEDD")))
        area = Area(sheet.name, 0, 0, 1, 0)
        sheet.charts.append(Chart("bar", "T", (Series("s", area, area, "112233"),), 5, 0))
        made.append(sheet)
    memory = BytesIO()
    render(made, memory)
    return take_apart(memory.getvalue())


def test_parts_get_free_names_and_point_at_each_other() -> None:
    """Sheets, drawings and charts get free names of ours; each relationship leads to the new name."""
    found = rendered()
    taken = {"xl/worksheets/ledgersolve1.xml", "xl/charts/ledgersolve2.xml"}
    names = named_apart(found, taken.__contains__)
    assert list(names.values())[:2] == ["xl/worksheets/ledgersolve2.xml", "xl/worksheets/ledgersolve3.xml"]
    assert sorted(names.values())[:2] == ["xl/charts/ledgersolve1.xml", "xl/charts/ledgersolve3.xml"]
    assert not taken & set(names.values())
    parts = renamed(found, names)
    assert b'Target="../drawings/ledgersolve1.xml"' in parts["xl/worksheets/_rels/ledgersolve2.xml.rels"]
    assert b'Target="../charts/ledgersolve3.xml"' in parts["xl/drawings/_rels/ledgersolve2.xml.rels"]


def test_only_numbers_that_count_styles_and_texts_change() -> None:
    """Cell formats, live formats and texts are counted anew; words that look like them stay."""
    found = rendered(1)
    sheet = found.parts[found.sheets[0][1]]
    cells = {index: index + 100 for index in range(10)}
    changed = reindexed(sheet, cells, {0: 77}, 1000, selected=False)
    before = re.findall(rb'<c r="A\d+" s="(\d+)"', sheet)
    assert re.findall(rb'<c r="A\d+" s="(\d+)"', changed) == [str(int(style) + 100).encode() for style in before]
    assert re.findall(rb't="s"><v>(\d+)</v>', changed) == [b"1000"]
    assert b'dxfId="77"' in changed
    for words in (b's=""9""', b'dxfId=""0""'):
        assert words in changed
    assert found.strings == [b'<si><t>v="1" s="2" t="s"&gt;&lt;v&gt;3</t></si>']
    assert found.uses == 1


def test_one_sheet_at_most_is_selected() -> None:
    """The selection is taken from every sheet and given where asked."""
    found = rendered(1)
    sheet = found.parts[found.sheets[0][1]]
    assert reindexed(sheet, dict.fromkeys(range(10), 0), {0: 0}, 0, selected=False).count(b"tabSelected") == 0
    assert reindexed(sheet, dict.fromkeys(range(10), 0), {0: 0}, 0, selected=True).count(b"tabSelected") == 1
