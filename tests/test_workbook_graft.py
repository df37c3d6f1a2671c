"""Result sheets in the analyst's package: everything else as it came, drop after drop."""

import zipfile
from pathlib import Path

import openpyxl
import pytest
from openxml_audit import FileFormat, OpenXmlValidator

from ledgersolve.workbook.container import open_container
from ledgersolve.workbook.graft import fresh, graft, plan_names
from ledgersolve.workbook.package import SheetInfo, open_package
from ledgersolve.workbook.problems import Problem, UnreadableWorkbookError
from ledgersolve.workbook.render import render
from ledgersolve.workbook.sheets import Area, Chart, LiveFormat, ResultSheet, Series, Style
from tests.office import needs_office, saved_by_office
from tests.packages import (
    HEAD,
    LINKS,
    MAIN,
    contents,
    hashes,
    parts_of,
    second_reader,
    sheet_xml,
    strings_xml,
    styles_xml,
    workbook_xml,
    zipped,
)
from tests.rich_book import MACRO_TYPE, rich_book

MAY_CHANGE = {"[Content_Types].xml", "xl/workbook.xml", "xl/_rels/workbook.xml.rels", "xl/styles.xml",
              "xl/sharedStrings.xml", "xl/calcChain.xml"}
MONEY = Style(number_format='#,##0.00 "EUR"', bold=True, fill="FFEEDD", top=1)


def results(names: dict[str, str] | None = None, *, lines: int = 8) -> list[ResultSheet]:
    """Two result sheets with text, figures, formulas, links, a chart, live formats and page set-up."""
    name = {"Decision": "Decision", "Ledger": "Ledger"} | (names or {})
    decision, ledger = ResultSheet(name["Decision"]), ResultSheet(name["Ledger"])
    decision.put(0, 0, "Open HAM & <two> more: Größe 東京", Style(bold=True, size=16))
    decision.put(1, 0, 2801.5, MONEY, formula=f"='{ledger.name}'!B{lines + 1}")
    decision.put(2, 0, "=not a formula", Style(fill="EEEEEE", bottom=2, wrap=True))
    decision.print_area, decision.repeat_rows, decision.tab_colour = (0, 0, 30, 6), (0, 1), "335577"
    for line in range(lines):
        ledger.put(line, 0, f"Line {line}", link="'Sites'!A2")
        ledger.put(line, 1, 1200.0, MONEY, formula="='Sites'!$B$2")
    ledger.put(lines, 1, 2801.5, MONEY)
    ledger.filter, ledger.frozen = (0, 0, lines, 1), (1, 0)
    ledger.live_formats.append(LiveFormat(0, 1, lines, 1, "=B1>1000", Style(fill="FFCCCC")))
    series = Series("Cost", Area(ledger.name, 0, 0, lines - 1, 0), Area(ledger.name, 0, 1, lines - 1, 1), "335577")
    decision.charts.append(Chart("column", "Cost parts", (series,), 5, 0))
    return [decision, ledger]


def small_book(path: Path, **more: str) -> Path:
    """A workbook of one sheet without styles and shared texts, unless given."""
    rows = '<row r="1"><c r="A1"><v>1</v></c></row><row r="2"><c r="B2"><v>1200</v></c></row>'
    return zipped(path, parts_of({"Sites": sheet_xml(rows)}, **more))


def ours(part: str) -> bool:
    """Whether a part's name is one of ours."""
    return "ledgersolve" in part


def differing(first: Path, second: Path) -> set[str]:
    """Parts that are not the same in two packages."""
    one, two = hashes(first), hashes(second)
    return {part for part in one.keys() | two.keys() if one.get(part) != two.get(part)}


def test_every_part_comes_back_after_one_drop_and_after_five(tmp_path: Path) -> None:
    """Charts, pivots, slicers, notes, macros and all: each part's SHA-256 is the same, drop after drop."""
    source = rich_book(tmp_path / "a.xlsm")
    wanted = {part: digest for part, digest in hashes(source).items() if part not in MAY_CHANGE}
    assert len(wanted) > 40
    path = source
    for drop in range(5):
        path, previous = tmp_path / f"{drop}.xlsm", path
        graft(previous, path, results())
        found = hashes(path)
        assert {part: found.get(part) for part in wanted} == wanted
        assert {part for part in found if part not in wanted and part not in MAY_CHANGE} == {
            part for part in found if ours(part)}
    assert MACRO_TYPE in contents(path)["[Content_Types].xml"].decode()


def test_what_is_not_ours_is_copied_as_compressed_bytes(tmp_path: Path) -> None:
    """Untouched members keep even their compressed bytes and their time stamps."""
    source = rich_book(tmp_path / "a.xlsm")
    graft(source, tmp_path / "b.xlsm", results())
    with open_container(source) as before, open_container(tmp_path / "b.xlsm") as after:
        for member in before.members:
            if member.name not in MAY_CHANGE:
                copy = after.find(member.name)
                assert copy is not None
                assert b"".join(after.packed(copy)) == b"".join(before.packed(member))
                assert copy.stamp == member.stamp


def test_a_second_drop_equals_a_first(tmp_path: Path) -> None:
    """Dropping our own answer gives, part for part, what dropping the original gave."""
    source = rich_book(tmp_path / "a.xlsm")
    graft(source, tmp_path / "b.xlsm", results())
    graft(tmp_path / "b.xlsm", tmp_path / "c.xlsm", results())
    assert differing(tmp_path / "b.xlsm", tmp_path / "c.xlsm") == set()


def test_other_results_leave_no_trace_of_the_former(tmp_path: Path) -> None:
    """After results of another size, a drop equals a first drop but for styles that stay."""
    source = rich_book(tmp_path / "a.xlsm")
    graft(source, tmp_path / "long.xlsm", results(lines=300))
    graft(tmp_path / "long.xlsm", tmp_path / "short.xlsm", results())
    graft(source, tmp_path / "first.xlsm", results())
    assert differing(tmp_path / "short.xlsm", tmp_path / "first.xlsm") <= {"xl/styles.xml"}


def test_twenty_three_drops_do_not_grow_the_file(tmp_path: Path) -> None:
    """The file has the same length after 23 further drops."""
    path = small_book(tmp_path / "a.xlsx")
    graft(path, path, results())
    length = path.stat().st_size
    for _ in range(23):
        graft(path, path, results())
    assert path.stat().st_size == length


@needs_office
def test_after_a_save_by_another_program_only_ours_change(tmp_path: Path) -> None:
    """LibreOffice saves our answer; dropped again, its parts stay but for ours, which are replaced."""
    graft(rich_book(tmp_path / "a.xlsx", macros=False), tmp_path / "b.xlsx", results())
    saved = saved_by_office(tmp_path / "b.xlsx", tmp_path / "saved")
    graft(saved, tmp_path / "c.xlsx", results())
    with open_package(saved) as before, open_package(tmp_path / "c.xlsx") as after:
        assert before.own_sheets == after.own_sheets == (SheetInfo("Decision"), SheetInfo("Ledger"))
        assert before.sheets == after.sheets
        own = {before._members[sheet.name].name for sheet in before.own_sheets}
    old, new = hashes(saved), hashes(tmp_path / "c.xlsx")
    gone = {part for part in old if part not in new}
    assert own <= gone
    assert all("drawing" in part or "chart" in part or "sheet" in part for part in gone)
    assert {part for part in old if part in new and old[part] != new[part]} <= MAY_CHANGE
    assert {part for part in new if part not in old} == {part for part in new if ours(part)}


def test_after_a_save_by_a_library_ours_are_replaced(tmp_path: Path) -> None:
    """Our sheets are known again after openpyxl has saved the workbook, also a renamed one."""
    graft(small_book(tmp_path / "a.xlsx"), tmp_path / "b.xlsx", results())
    book = second_reader(tmp_path / "b.xlsx")
    book["Ledger"].title = "My ledger"
    for name in book["My ledger"].defined_names.values():
        name.attr_text = name.attr_text.replace("'Ledger'", "'My ledger'")
    book.save(tmp_path / "c.xlsx")
    graft(tmp_path / "c.xlsx", tmp_path / "d.xlsx", results())
    assert second_reader(tmp_path / "d.xlsx").sheetnames == ["Decision", "Ledger", "Sites"]
    assert sum("worksheets/" in part and "rels" not in part for part in contents(tmp_path / "d.xlsx")) == 3


def test_names_are_settled_before_anything_is_written(tmp_path: Path) -> None:
    """Names the analyst has, whatever the case, get a number; long and reserved ones are made lawful."""
    wanted = ["Decision", "x" * 40, "Ledger", "History"]
    parts = parts_of({"DECISION": sheet_xml(""), "x" * 31: sheet_xml(""), "decision (2)": sheet_xml("")})
    names = plan_names(zipped(tmp_path / "a.xlsx", parts), wanted)
    assert list(names.values()) == ["Decision (3)", "x" * 27 + " (2)", "Ledger", "History (2)"]
    assert plan_names(small_book(tmp_path / "b.xlsx"), ["Proof", "Proofs"]) == {"Proof": "Proof", "Proofs": "Proofs"}


def test_our_former_names_are_free_again(tmp_path: Path) -> None:
    """A second drop uses the same names as the first."""
    path = zipped(tmp_path / "a.xlsx", parts_of({"decision": sheet_xml("")}))
    names = plan_names(path, ["Decision", "Ledger"])
    graft(path, path, results(names))
    assert plan_names(path, ["Decision", "Ledger"]) == names == {"Decision": "Decision (2)", "Ledger": "Ledger"}


def test_ours_stand_in_front_and_the_first_is_active(tmp_path: Path) -> None:
    """The sheet list starts with ours, the first is the active one, at most one tab is selected."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    graft(source, tmp_path / "b.xlsx", results())
    book = second_reader(tmp_path / "b.xlsx")
    assert book.sheetnames == ["Decision", "Ledger", "Sites", "Picture", "Lanes", "Rates & more"]
    assert book.active.title == "Decision"
    assert b"".join(contents(tmp_path / "b.xlsx").values()).count(b'tabSelected="1"') == 1
    graft(small_book(tmp_path / "c.xlsx"), tmp_path / "d.xlsx", results())
    assert contents(tmp_path / "d.xlsx")["xl/worksheets/ledgersolve1.xml"].count(b'tabSelected="1"') == 1


def test_local_names_stay_with_their_sheets(tmp_path: Path) -> None:
    """Print areas, titles, filters and local names belong to the same sheets as before, and ours to ours."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    graft(source, tmp_path / "b.xlsx", results())
    for path in (source, tmp_path / "b.xlsx"):
        book = second_reader(path)
        assert book["Lanes"].print_area == "'Lanes'!$A$1:$B$4"
        assert book["Sites"].print_title_rows == "$1:$1"
        assert book["Sites"].auto_filter.ref == "A1:B5"
        assert [name for name in book["Lanes"].defined_names if name[0] != "_"] == ["Local"]
        assert list(book.defined_names) == ["Rate"]
    assert book["Decision"].print_title_rows == "$1:$2"
    assert book["Decision"].print_area == "'Decision'!$A$1:$G$31"
    assert book["Ledger"].auto_filter.ref == "A1:B9"


def looks(cell: openpyxl.cell.Cell) -> tuple[object, ...]:
    """What a cell shows: value, fonts, fills, borders, formats."""
    return (cell.value, cell.data_type, cell.number_format, cell.font.name, cell.font.sz, cell.font.b,
            cell.font.color.rgb if cell.font.color else None, cell.fill.fgColor.rgb, cell.border.top.style,
            cell.border.bottom.style, cell.alignment.wrap_text, cell.alignment.vertical, cell.quotePrefix)


@pytest.mark.parametrize("make", [
    lambda path: rich_book(path, macros=False), small_book,
    lambda path: small_book(path, styles=styles_xml('<numFmt numFmtId="170" formatCode="0.0"/>', 170, 9)),
])
def test_grafted_sheets_look_as_rendered_alone(tmp_path: Path, make) -> None:
    """Values, formulas, cached values and looks of our sheets are those of the same sheets alone."""
    make(tmp_path / "a.xlsx")
    graft(tmp_path / "a.xlsx", tmp_path / "b.xlsx", results())
    render(results(), tmp_path / "alone.xlsx")
    for values in (False, True):
        alone = second_reader(tmp_path / "alone.xlsx", values=values)
        grafted = second_reader(tmp_path / "b.xlsx", values=values)
        for name in ("Decision", "Ledger"):
            expected = {cell.coordinate: looks(cell) for row in alone[name] for cell in row if cell.has_style}
            assert {cell.coordinate: looks(cell) for row in grafted[name] for cell in row
                    if cell.coordinate in expected} == expected
            assert len(expected) >= 3
            rules = [rule for area in grafted[name].conditional_formatting for rule in area.rules]
            assert [rule.dxf.fill.bgColor.rgb for rule in rules] == (["FFFFCCCC"] if name == "Ledger" else [])
            assert len(grafted[name]._charts) == len(alone[name]._charts)


def test_the_looks_of_the_analyst_stay(tmp_path: Path) -> None:
    """Every cell of the analyst looks as before: nothing of theirs is renumbered."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    graft(source, tmp_path / "b.xlsx", results())
    before, after = second_reader(source), second_reader(tmp_path / "b.xlsx")
    for name in ("Sites", "Lanes", "Rates & more"):
        for row in before[name].iter_rows():
            for cell in row:
                assert looks(after[name][cell.coordinate]) == looks(cell)


def test_texts_of_the_analyst_stay_first(tmp_path: Path) -> None:
    """The list of shared texts begins with the analyst's entries as they were written."""
    rows = '<row r="1"><c r="A1" t="s"><v>1</v></c></row><row r="2"><c r="B2"><v>1200</v></c></row>'
    inside = ["<t>a</t>", '<r><rPr><b/></rPr><t xml:space="preserve"> b</t></r>', "<t>&#228;</t>"]
    path = zipped(tmp_path / "a.xlsx", parts_of({"Sites": sheet_xml(rows)}, strings=strings_xml(*inside)))
    graft(path, tmp_path / "b.xlsx", results())
    written = contents(tmp_path / "b.xlsx")["xl/sharedStrings.xml"].decode()
    assert "".join(f"<si>{item}</si>" for item in inside) + "<si><t>ledgersolve texts" in written
    with open_package(tmp_path / "b.xlsx") as package:
        assert [cell.value for cell in package.cells("Sites")] == [" b", 1200.0]
        assert next(package.cells("Decision")).value == "Open HAM & <two> more: Größe 東京"


@pytest.mark.parametrize("encode", [
    lambda text: text.replace("UTF-8", "UTF-16").encode("utf-16"),
    lambda text: text.encode("utf-8-sig"),
    lambda text: text.replace("UTF-8", "ISO-8859-1").encode("latin-1"),
])
def test_workbook_parts_in_any_encoding_take_our_sheets(tmp_path: Path, encode) -> None:
    """The parts we must change may be in any encoding that XML allows."""
    parts = parts_of({"Größe": sheet_xml("")}, strings=strings_xml("<t>ä</t>"), styles=styles_xml())
    for part in MAY_CHANGE & parts.keys():
        parts[part] = encode(str(parts[part]))
    graft(zipped(tmp_path / "a.xlsx", parts), tmp_path / "b.xlsx", results())
    assert second_reader(tmp_path / "b.xlsx").sheetnames == ["Decision", "Ledger", "Größe"]


def test_prefixed_parts_take_our_sheets(tmp_path: Path) -> None:
    """Parts whose every element carries a prefix stay so; what we add names its own namespace."""
    parts = parts_of({"Sites": sheet_xml("")}, strings=strings_xml("<t>a</t>"), styles=styles_xml("", 9))
    for part in ("xl/sharedStrings.xml", "xl/styles.xml", "xl/_rels/workbook.xml.rels", "[Content_Types].xml"):
        parts[part] = _prefixed(str(parts[part]))
    parts["xl/workbook.xml"] = (
        f'{HEAD}<x:workbook xmlns:x="{MAIN}" xmlns:q="{LINKS}"><x:sheets><x:sheet name="Sites" sheetId="1" '
        'q:id="rId1"/></x:sheets></x:workbook>')
    graft(zipped(tmp_path / "a.xlsx", parts), tmp_path / "b.xlsx", results())
    graft(tmp_path / "b.xlsx", tmp_path / "c.xlsx", results())
    assert differing(tmp_path / "b.xlsx", tmp_path / "c.xlsx") == set()
    with open_package(tmp_path / "c.xlsx") as package:
        assert [sheet.name for sheet in (*package.own_sheets, *package.sheets)] == ["Decision", "Ledger", "Sites"]
        assert next(package.cells("Decision")).value == "Open HAM & <two> more: Größe 東京"
    render(results(), tmp_path / "alone.xlsx")
    alone, grafted = (second_reader(tmp_path / name)["Decision"] for name in ("alone.xlsx", "c.xlsx"))
    assert [looks(grafted[place]) for place in ("A1", "A2")] == [looks(alone[place]) for place in ("A1", "A2")]


def _prefixed(text: str) -> str:
    """The part with a prefix on every element."""
    text = text.replace(HEAD, "").replace("</", "\1").replace("<", "<p:").replace("\1", "</p:")
    return HEAD + text.replace(" xmlns=", " xmlns:p=")


def test_formulas_of_the_analyst_on_our_sheets_are_calculated_anew(tmp_path: Path) -> None:
    """Where the analyst refers to a result sheet, the next answer asks to be calculated on opening; else not."""
    path = small_book(tmp_path / "a.xlsx")
    graft(path, path, results())
    graft(path, path, results())
    assert b"fullCalcOnLoad" not in contents(path)["xl/workbook.xml"]
    parts = contents(path)
    parts["xl/worksheets/sheet1.xml"] = sheet_xml(
        '<row r="1"><c r="A1"><f>\'Decision\'!A2</f><v>1</v></c></row>').encode()
    graft(zipped(path, parts), path, results())
    assert b'fullCalcOnLoad="1"' in contents(path)["xl/workbook.xml"]


def test_a_chart_of_the_analyst_that_ours_shared_stays(tmp_path: Path) -> None:
    """Taking out our sheets takes what only they lead to: a part the analyst's sheet uses too stays."""
    path = small_book(tmp_path / "a.xlsx")
    graft(path, path, results())
    parts = contents(path)
    drawing = parts["xl/worksheets/_rels/ledgersolve1.xml.rels"]
    parts["xl/worksheets/_rels/sheet1.xml.rels"] = drawing
    graft(zipped(path, parts), path, results())
    assert "xl/drawings/ledgersolve1.xml" in contents(path)
    assert "xl/drawings/ledgersolve2.xml" in contents(path)


def test_fresh_answers_are_ours_alone(tmp_path: Path) -> None:
    """A workbook of our own is known as ours, carries its values and asks nothing on closing."""
    fresh(tmp_path / "a.xlsx", results())
    with open_package(tmp_path / "a.xlsx") as package:
        assert package.sheets == ()
        assert [sheet.name for sheet in package.own_sheets] == ["Decision", "Ledger"]
    assert b"fullCalcOnLoad" not in contents(tmp_path / "a.xlsx")["xl/workbook.xml"]
    book = second_reader(tmp_path / "a.xlsx", values=True)
    assert book["Decision"]["A2"].value == 2801.5
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.xlsx"]


def test_a_failure_leaves_the_target_as_it_was(tmp_path: Path) -> None:
    """Where writing fails, no half file stays and a former file is untouched."""
    path = small_book(tmp_path / "a.xlsx")
    before = path.read_bytes()
    with pytest.raises(ValueError, match="names of their own"):
        graft(path, path, [ResultSheet("Twice"), ResultSheet("Twice")])
    with pytest.raises(ValueError, match="names of their own"):
        fresh(path, [])
    assert path.read_bytes() == before
    assert sorted(found.name for found in tmp_path.iterdir()) == ["a.xlsx"]


def test_what_cannot_be_kept_whole_is_refused(tmp_path: Path) -> None:
    """A signed workbook is refused with words also where it comes straight to the graft."""
    parts = parts_of({"Sites": sheet_xml("")}) | {"_xmlsignatures/sig1.xml": "<x/>"}
    with pytest.raises(UnreadableWorkbookError, match="signature"):
        graft(zipped(tmp_path / "a.xlsx", parts), tmp_path / "b.xlsx", results())


def test_marks_and_list_go_with_the_next_drop(tmp_path: Path) -> None:
    """A file that went back to be mended is, dropped again, byte for byte the analyst's in every sheet."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    problems = [Problem("error", "number expected", "Sites", "B3", "Fixed cost", "x", "y", "z", ("B4", "B5"), 3,
                        "number"),
                Problem("notice", "hidden", "Rates & more", "A1", "", "x", "y", "z"),
                Problem("error", "missing sheet", "Nowhere", "A1", "", "x", "y", "z"),
                Problem("error", "whole sheet", "Lanes", "", "", "x", "y", "z")]
    graft(source, tmp_path / "b.xlsx", results(), problems)
    changed = differing(source, tmp_path / "b.xlsx") - MAY_CHANGE
    assert {part for part in changed if not ours(part)} == {
        "xl/worksheets/sheet1.xml", "xl/worksheets/sheet3.xml"}
    book = second_reader(tmp_path / "b.xlsx")
    marked = {str(area.sqref) for area in book["Sites"].conditional_formatting
              if any("ledgersolve-flag" in rule.formula[0] for rule in area.rules if rule.formula)}
    assert marked == {"B3:B5"}
    graft(tmp_path / "b.xlsx", tmp_path / "c.xlsx", results())
    assert {part for part in differing(source, tmp_path / "c.xlsx") if not ours(part)} <= MAY_CHANGE


def test_a_marked_sheet_is_no_longer_selected_and_is_again_when_cleared(tmp_path: Path) -> None:
    """Where a marked sheet was the selected one, our list takes the selection, and gives it back."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    problem = Problem("error", "number expected", "Sites", "B3", "Fixed cost", "x", "y", "z")
    graft(source, tmp_path / "b.xlsx", results(), [problem])
    parts = contents(tmp_path / "b.xlsx")
    assert b'tabSelected="0"' in parts["xl/worksheets/sheet1.xml"]
    assert b'tabSelected="1"' in parts["xl/worksheets/ledgersolve1.xml"]
    graft(tmp_path / "b.xlsx", tmp_path / "c.xlsx", results())
    assert contents(tmp_path / "c.xlsx")["xl/worksheets/sheet1.xml"] == contents(source)["xl/worksheets/sheet1.xml"]


def test_the_selection_can_be_taken_without_marks(tmp_path: Path) -> None:
    """Asked to, the graft frees the analyst's selected tab by one attribute, and the next drop restores it."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    graft(source, tmp_path / "b.xlsx", results(), free_tab=True)
    parts, before = contents(tmp_path / "b.xlsx"), contents(source)
    part = "xl/worksheets/sheet1.xml"
    assert parts[part] == before[part].replace(b'tabSelected="1"', b'tabSelected="0"')
    assert b"".join(parts.values()).count(b'tabSelected="1"') == 1
    graft(tmp_path / "b.xlsx", tmp_path / "c.xlsx", results())
    assert contents(tmp_path / "c.xlsx")[part] == before[part]


def test_results_without_any_text(tmp_path: Path) -> None:
    """Sheets of figures alone need no list of texts, and make none."""
    sheet = ResultSheet("Figures")
    sheet.put(0, 0, 1.5)
    graft(small_book(tmp_path / "a.xlsx"), tmp_path / "b.xlsx", [sheet])
    assert "xl/sharedStrings.xml" not in contents(tmp_path / "b.xlsx")


def test_a_list_of_texts_of_ours_alone_goes_again(tmp_path: Path) -> None:
    """Where the analyst had no list of shared texts, the next drop takes ours out whole."""
    graft(small_book(tmp_path / "a.xlsx"), tmp_path / "b.xlsx", results())
    assert "xl/sharedStrings.xml" in contents(tmp_path / "b.xlsx")
    sheet = ResultSheet("Figures")
    sheet.put(0, 0, 1.5)
    graft(tmp_path / "b.xlsx", tmp_path / "c.xlsx", [sheet])
    parts = contents(tmp_path / "c.xlsx")
    assert "xl/sharedStrings.xml" not in parts
    assert b"sharedStrings" not in parts["[Content_Types].xml"] + parts["xl/_rels/workbook.xml.rels"]


def test_ids_in_use_are_not_used_again(tmp_path: Path) -> None:
    """Sheet ids and relationship ids of ours differ from all that are there."""
    parts = parts_of({"Sites": sheet_xml("")})
    parts["xl/workbook.xml"] = workbook_xml(["Sites"]).replace('sheetId="1"', 'sheetId="65533"').replace(
        "rId1", "ledgersolve0")
    parts["xl/_rels/workbook.xml.rels"] = str(parts["xl/_rels/workbook.xml.rels"]).replace("rId1", "ledgersolve0")
    graft(zipped(tmp_path / "a.xlsx", parts), tmp_path / "b.xlsx", results())
    text = contents(tmp_path / "b.xlsx")["xl/workbook.xml"].decode()
    assert text.count("sheetId=") == 3
    assert len({text[place:place + 20] for place in range(len(text)) if text.startswith("sheetId=", place)}) == 3
    with open_package(tmp_path / "b.xlsx") as package:
        assert len(package.sheets) == 1
        assert len(package.own_sheets) == 2


def test_the_result_is_a_sound_zip(tmp_path: Path) -> None:
    """The standard library's reader finds every checksum right."""
    graft(rich_book(tmp_path / "a.xlsm"), tmp_path / "b.xlsm", results())
    with zipfile.ZipFile(tmp_path / "b.xlsm") as package:
        assert package.testzip() is None


def test_a_schema_check_finds_nothing(tmp_path: Path) -> None:
    """The schemas of the format hold for a rich workbook, for its answer with marks, and for a fresh one."""
    source = rich_book(tmp_path / "a.xlsx", macros=False)
    graft(source, tmp_path / "b.xlsx", results(), [
        Problem("error", "number expected", "Sites", "B3", "Fixed cost", "x", "y", "z", ("B9", "D1"), 3, "number"),
        Problem("notice", "hidden", "Lanes", "A1", "", "x", "y", "z")])
    fresh(tmp_path / "c.xlsx", results())
    check = OpenXmlValidator(file_format=FileFormat.MICROSOFT_365)
    for name in ("a.xlsx", "b.xlsx", "c.xlsx"):
        assert [str(error) for error in check.validate(str(tmp_path / name)).errors] == [], name
