"""Styles of result sheets in the analyst's style part: each once, nothing renumbered."""

import re
from io import BytesIO

import xlsxwriter

from ledgersolve.workbook.merge_styles import add_live_formats, merge_styles
from ledgersolve.workbook.result_parts import take_apart
from tests.packages import HEAD, MAIN, styles_xml


def ours() -> str:
    """A style part made by the writer: three cell formats, one live format."""
    memory = BytesIO()
    book = xlsxwriter.Workbook(memory)
    sheet = book.add_worksheet()
    sheet.write(0, 0, 1, book.add_format({"num_format": "0.0", "bold": True}))
    sheet.write(1, 0, 1, book.add_format({"num_format": "0.00%", "bg_color": "#FFEEDD", "align": "center"}))
    sheet.write(2, 0, 1, book.add_format({"num_format": 9, "border": 1}))
    sheet.conditional_format("A1", {"type": "no_blanks", "format": book.add_format({"num_format": "0.0", "bold": 1})})
    book.close()
    return take_apart(memory.getvalue()).styles


THEIRS = styles_xml('<numFmt numFmtId="171" formatCode="0.0"/><numFmt numFmtId="164" formatCode="d"/>', 171, 164)


def inside(text: str, name: str) -> str:
    """What stands in a list of the style part."""
    return re.search(rf"<{name}[^>]*>(.*)</{name}>", text)[1]


def test_theirs_stay_first_and_ours_follow() -> None:
    """Each list begins with the analyst's entries as written; counts are right."""
    merged = merge_styles(THEIRS, ours())
    for name, entry in (("fonts", "font"), ("fills", "fill"), ("borders", "border"), ("cellXfs", "xf")):
        before, after = inside(THEIRS, name), inside(merged.text, name)
        assert after.startswith(before)
        count = int(re.search(rf'<{name}[^>]*count="(\d+)"', merged.text)[1])
        assert count == len(re.findall(rf"<{entry}[ />]", after))
    assert merged.cells[0] == 0
    assert sorted(merged.cells.values()) == [0, 3, 4, 5]
    assert merged.live == {0: 0}


def test_number_formats_are_matched_by_their_text() -> None:
    """A number format the analyst has under another code is used under that code; a new one gets a free code."""
    merged = merge_styles(THEIRS, ours())
    formats = re.findall(r'<xf numFmtId="(\d+)"', inside(merged.text, "cellXfs"))[3:]
    assert formats == ["171", "172", "9"]
    assert re.findall(r'numFmtId="(\d+)"', inside(merged.text, "dxfs")) == ["171"]
    other = merge_styles(THEIRS.replace("0.0", "0.000"), ours())
    assert 'numFmtId="172" formatCode="0.0"' in other.text


def test_every_part_of_a_format_is_applied() -> None:
    """Ours say of font, fill, border and number format that they apply, whatever the base style holds."""
    for entry in re.findall(r"<xf [^>]*>", inside(merge_styles(THEIRS, ours()).text, "cellXfs"))[3:]:
        for part in ("NumberFormat", "Font", "Fill", "Border"):
            assert f'apply{part}="1"' in entry


def test_a_second_merge_adds_nothing() -> None:
    """What is there already is used again, also when attributes are spaced and ordered otherwise."""
    once = merge_styles(THEIRS, ours())
    assert merge_styles(once.text, ours()) == once
    shuffled = once.text.replace('<sz val="11"/>', "<sz  val='11' />")
    assert merge_styles(shuffled, ours()).cells == once.cells


def test_missing_and_empty_lists_are_made() -> None:
    """Lists the part lacks are made at their place; one without content opens."""
    bare = f'{HEAD}<styleSheet xmlns="{MAIN}"><fonts count="1"><font/></fonts><fills count="1"><fill/></fills>' \
           '<borders count="1"><border/></borders><cellXfs count="1"><xf/></cellXfs><dxfs count="0"/><colors/>' \
           "</styleSheet>"
    text = merge_styles(bare, ours()).text
    order = re.findall(r"<(numFmts|fonts|fills|borders|cellXfs|dxfs|colors)\b", text)
    assert order == ["numFmts", "fonts", "fills", "borders", "cellXfs", "dxfs", "colors"]
    assert '<dxfs count="1"><dxf>' in text


def test_a_workbook_without_styles_gets_a_plain_part() -> None:
    """Without a style part the base is one plain format, and a second merge adds nothing."""
    once = merge_styles(None, ours())
    assert once.cells == {0: 0, 1: 1, 2: 2, 3: 3}
    assert merge_styles(once.text, ours()) == once


def test_live_formats_are_added_once() -> None:
    """Formats of marks are found again where they are."""
    text, first = add_live_formats(THEIRS, ["<dxf><font><b/></font></dxf>", "<dxf/>"])
    assert first == [0, 1]
    assert add_live_formats(text, ["<dxf/>", "<dxf><font><b/></font></dxf>"]) == (text, [1, 0])
