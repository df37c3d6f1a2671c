"""How parts point at each other."""

from pathlib import Path

import pytest

from ledgersolve.workbook.container import Limits, open_container
from ledgersolve.workbook.parts import Relation, content_types, relations, relations_name, workbook_part
from tests.packages import LINKS, WORKBOOK_TYPE, links_xml, parts_of, sheet_xml, zipped


@pytest.mark.parametrize(("part", "name"), [
    ("", "_rels/.rels"), ("xl/workbook.xml", "xl/_rels/workbook.xml.rels"), ("book.xml", "_rels/book.xml.rels"),
    ("xl/worksheets/sheet1.xml", "xl/worksheets/_rels/sheet1.xml.rels")])
def test_where_relationships_stand(part: str, name: str) -> None:
    """The relationships of a part stand beside it."""
    assert relations_name(part) == name


def test_relationships_are_resolved(tmp_path: Path) -> None:
    """Targets become part names; an external one stays an address."""
    links = links_xml([("a", "worksheet", "worksheets/s.xml"), ("b", "theme", "/xl/theme.xml"),
                       ("c", "x", "../custom/i.xml#frag"), ("d", "x", "a%20b.xml"), ("e", "x", "file:///c.xlsx")])
    links = links.replace('c.xlsx"', 'c.xlsx" TargetMode="External"')
    parts = parts_of({"S": sheet_xml("")}) | {"xl/_rels/workbook.xml.rels": links}
    with open_container(zipped(tmp_path / "a.xlsx", parts)) as container:
        assert relations(container, "xl/workbook.xml", Limits()) == (
            Relation("a", "worksheet", "xl/worksheets/s.xml"), Relation("b", "theme", "xl/theme.xml"),
            Relation("c", "x", "custom/i.xml"), Relation("d", "x", "xl/a b.xml"),
            Relation("e", "x", "file:///c.xlsx", external=True))
        assert relations(container, "xl/none.xml", Limits()) == ()
        assert LINKS.endswith("relationships")


def test_the_workbook_is_found_by_its_relationship(tmp_path: Path) -> None:
    """The workbook part may have any name; its type may stand as the default of its extension."""
    parts = parts_of({"S": sheet_xml("")})
    parts["odd/book.main"] = parts.pop("xl/workbook.xml")
    parts["_rels/.rels"] = links_xml([("r", "officeDocument", "/odd/book.main")])
    parts["[Content_Types].xml"] = str(parts["[Content_Types].xml"]).replace(
        f'<Override PartName="/xl/workbook.xml" ContentType="{WORKBOOK_TYPE}"/>',
        f'<Default Extension="MAIN" ContentType="{WORKBOOK_TYPE}"/>')
    with open_container(zipped(tmp_path / "a.xlsx", parts)) as container:
        assert workbook_part(container, Limits()) == "odd/book.main"
        assert content_types(container, Limits())["*.main"] == WORKBOOK_TYPE
