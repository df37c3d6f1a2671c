"""A package while it is changed."""

from pathlib import Path

import pytest

from ledgersolve.workbook.container import open_container
from ledgersolve.workbook.draft import Draft
from tests.packages import book_of, contents


def test_changes_and_removals_are_seen_at_once(tmp_path: Path) -> None:
    """A part that was put is read back, one taken out is gone, and may be put again."""
    with open_container(book_of(tmp_path / "a.xlsx", "")) as container:
        draft = Draft(container)
        draft.put("new.xml", "<a/>")
        assert draft.has("new.xml")
        assert draft.read("new.xml") == draft.head("new.xml") == b"<a/>"
        draft.remove("new.xml")
        assert not draft.has("new.xml")
        with pytest.raises(KeyError):
            draft.read("new.xml")
        draft.remove("xl/worksheets/sheet1.xml")
        with pytest.raises(KeyError):
            draft.read("xl/worksheets/sheet1.xml")
        draft.put("xl/worksheets/sheet1.xml", b"<b/>")
        assert draft.read("xl/worksheets/sheet1.xml") == b"<b/>"


def test_links_take_free_ids_and_targets_relative_to_the_workbook(tmp_path: Path) -> None:
    """A relationship is added under a free id; taken out, the list is as before."""
    path = book_of(tmp_path / "a.xlsx", "")
    with open_container(path) as container:
        draft = Draft(container)
        assert draft.link("styles", "xl/styles.xml", "rId1") == "rId1x"
        assert draft.link("theme", "theme.xml", "free") == "free"
        text = draft.text("xl/_rels/workbook.xml.rels")
        assert 'Target="styles.xml"' in text
        assert 'Target="../theme.xml"' in text
        draft.unlink({"rId1x", "free"})
        assert draft.read("xl/_rels/workbook.xml.rels") == contents(path)["xl/_rels/workbook.xml.rels"]


def test_the_list_of_contents_follows(tmp_path: Path) -> None:
    """New parts are declared, those gone are not; members keep their order, new ones come last."""
    with open_container(book_of(tmp_path / "a.xlsx", "")) as container:
        draft = Draft(container)
        draft.put("z.xml", "<z/>")
        draft.remove("xl/worksheets/sheet1.xml")
        draft.declare({"z.xml": "text/z"})
        draft.write(tmp_path / "b.xlsx")
        order = [member.name for member in container.members]
    after = contents(tmp_path / "b.xlsx")
    assert b"sheet1.xml" not in after["[Content_Types].xml"]
    assert b'<Override PartName="/z.xml" ContentType="text/z"/></Types>' in after["[Content_Types].xml"]
    assert list(after) == [name for name in order if "sheet1" not in name] + ["z.xml"]
