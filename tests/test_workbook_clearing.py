"""Our earlier sheets taken out with what only they lead to, and nothing else."""

from pathlib import Path

from ledgersolve.workbook.clearing import clear, refers_to, sheet_parts
from ledgersolve.workbook.container import open_container
from ledgersolve.workbook.draft import Draft
from tests.packages import contents, links_xml, parts_of, sheet_xml, workbook_xml, zipped

MARK = ('<definedNames><definedName name="_ledgersolve_sheet" localSheetId="0" hidden="1">Ours!$A$1</definedName>'
        "</definedNames>")


def book(folder: Path, **changes: str) -> Path:
    """A workbook of one sheet of ours with a drawing, and one of the analyst's; ``+`` stands for ``/``."""
    parts = parts_of({"Ours": sheet_xml(""), "Sites": sheet_xml("")}, inside=MARK)
    parts |= {"xl/worksheets/_rels/sheet1.xml.rels": links_xml([("r", "drawing", "../drawings/d.xml")]),
              "xl/drawings/d.xml": "<d/>", "xl/drawings/_rels/d.xml.rels": links_xml([("r", "chart", "../c.xml")]),
              "xl/c.xml": "<c/>", "xl/calcChain.xml": "<calcChain/>", "stray.xml": "<x/>"}
    links = str(parts["xl/_rels/workbook.xml.rels"])
    chain = '<Relationship Id="cc" Type="http://x/calcChain" Target="calcChain.xml"/>'
    parts["xl/_rels/workbook.xml.rels"] = links.replace("</Relationships>", chain + "</Relationships>")
    return zipped(folder / "a.xlsx", parts | {name.replace("+", "/"): text for name, text in changes.items()})


def cleared(path: Path, target: Path) -> dict[str, bytes]:
    """Parts after clearing."""
    with open_container(path) as container:
        draft = Draft(container)
        assert clear(draft) == {"Ours"}
        draft.write(target)
    return contents(target)


def test_what_only_ours_lead_to_goes(tmp_path: Path) -> None:
    """Sheet, drawing, chart, their relationships and the order of calculation go; a stray part stays."""
    before = book(tmp_path)
    after = cleared(before, tmp_path / "b.xlsx")
    assert contents(before).keys() - after.keys() == {
        "xl/worksheets/sheet1.xml", "xl/worksheets/_rels/sheet1.xml.rels", "xl/drawings/d.xml",
        "xl/drawings/_rels/d.xml.rels", "xl/c.xml", "xl/calcChain.xml"}
    assert b"Ours" not in after["xl/workbook.xml"]
    assert b"sheet1.xml" not in after["xl/_rels/workbook.xml.rels"] + after["[Content_Types].xml"]
    assert b"calcChain" not in after["xl/_rels/workbook.xml.rels"]


def test_what_others_lead_to_as_well_stays(tmp_path: Path) -> None:
    """A chart that the analyst's sheet uses too stays."""
    links = links_xml([("r", "chart", "../c.xml")])
    after = cleared(book(tmp_path, **{"xl+worksheets+_rels+sheet2.xml.rels": links}), tmp_path / "b.xlsx")
    assert "xl/c.xml" in after
    assert "xl/drawings/d.xml" not in after


def test_parts_of_sheets(tmp_path: Path) -> None:
    """Each sheet is told with its part; an entry that leads nowhere with none."""
    parts = parts_of({"A": sheet_xml(""), "B": sheet_xml("")})
    parts["xl/workbook.xml"] = workbook_xml(["A", "B", "C"])
    with open_container(zipped(tmp_path / "a.xlsx", parts)) as container:
        assert sheet_parts(Draft(container)) == {"A": "xl/worksheets/sheet1.xml", "B": "xl/worksheets/sheet2.xml"}


def test_references_to_our_sheets_are_found(tmp_path: Path) -> None:
    """A formula or a defined name that names one of our sheets is found, also where a piece ends in it."""
    filler = "<row/>" * 10_922
    sheets = {"plain": "<f>Decision!A1</f>", "quoted": "<f>'It''s &amp; ours'!A1</f>", "none": "<f>Decisions!A1</f>",
              "late": filler + "<f>Decision!A1</f>"}
    path = zipped(tmp_path / "a.xlsx", parts_of({name: sheet_xml(text) for name, text in sheets.items()}))
    with open_container(path) as container:
        draft = Draft(container)
        parts = sheet_parts(draft)
        for name, expected in {"plain": True, "quoted": False, "none": False, "late": True}.items():
            assert refers_to(draft, [parts[name]], ["Decision"]) is expected, name
        assert refers_to(draft, [parts["quoted"]], ["It's & ours"])
        assert not refers_to(draft, parts.values(), [])
    named = parts_of({"A": sheet_xml("")}, inside='<definedNames><definedName name="x">Decision!$A$1</definedName>'
                                                  "</definedNames>")
    with open_container(zipped(tmp_path / "b.xlsx", named)) as container:
        assert refers_to(Draft(container), [], ["Decision"])
