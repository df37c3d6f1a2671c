"""Shared texts: runs joined, guides left out, escapes undone, white space kept."""

import pytest

from ledgersolve.workbook.container import Limits
from ledgersolve.workbook.problems import UnreadableWorkbookError
from ledgersolve.workbook.strings import shared_strings, unescaped
from tests.packages import strings_xml


def read(*items: str, limits: Limits | None = None) -> list[str]:
    """Texts of a part with the given entries."""
    return shared_strings("s", (strings_xml(*items).encode(),), limits or Limits())


@pytest.mark.parametrize(("item", "text"), [
    ("<t>HAM</t>", "HAM"),
    ('<t xml:space="preserve"> a\n b </t>', " a\n b "),
    ("<t/>", ""),
    ("", ""),
    ("<r><rPr><b/></rPr><t>Ham</t></r><r><t>burg</t></r>", "Hamburg"),
    ('<t>東京</t><rPh sb="0" eb="2"><t>トウキョウ</t></rPh><phoneticPr fontId="1"/>', "東京"),
    ("<t>a_x000D__x000A_b</t>", "a\r\nb"),
    ("<t>_x005F_x000A_</t>", "_x000A_"),
    ("<t>_xD83D__xDE00_</t>", "😀"),
    ("<t>_xD83D_</t>", "\ufffd"),
    ("<t>&amp;lt; <![CDATA[<b>]]></t>", "&lt; <b>"),
])
def test_each_way_to_write_a_text(item: str, text: str) -> None:
    """An entry gives the text that a person sees."""
    assert read("<t>first</t>", item, "<t>last</t>") == ["first", text, "last"]


def test_too_many_texts_are_refused() -> None:
    """The number of texts has a limit, whatever the part says about itself."""
    with pytest.raises(UnreadableWorkbookError, match="more than 2 different texts"):
        read("<t>a</t>", "<t>b</t>", "<t>c</t>", limits=Limits(strings=2))


def test_text_without_escapes_is_the_same_object() -> None:
    """Text that holds no escape is not copied."""
    text = "x_y"
    assert unescaped(text) is text
