"""Cutting and joining XML as text: elements found rightly, everything else left as it stands."""

import xml.etree.ElementTree as ElementTree

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ledgersolve.workbook import splice
from ledgersolve.workbook.splice import Edits

TRICKY = """<?xml version="1.0" encoding="UTF-8"?><!-- <a> -->
<x:top xmlns:x="urn:x" note="a > b &lt; c">
  <one a='1' b="two"/><!-- <one/> --><x:two><two><two/></two><![CDATA[</x:two>]]></x:two >
  <three	q = "x"
  />text
</x:top>
<!-- </x:top> -->"""


def test_elements_are_found_among_comments_and_data() -> None:
    """Children are told with their places; comments, CDATA and nested namesakes do not mislead."""
    top = splice.root(TRICKY)
    assert (top.name, top.prefix, top.attributes["note"]) == ("top", "x", "a > b < c")
    found = splice.children(TRICKY, top.inner, top.outer)
    assert [(child.name, child.prefix, child.empty) for child in found] == [
        ("one", "", True), ("two", "x", False), ("three", "", True)]
    assert found[0].attributes == {"a": "1", "b": "two"}
    assert found[1].content(TRICKY) == "<two><two/></two><![CDATA[</x:two>]]>"
    assert found[1].whole(TRICKY).endswith("</x:two >")
    assert found[2].attributes == {"q": "x"}


def test_an_empty_root_and_no_root() -> None:
    """A root without content is its own end; a part without any is refused."""
    top = splice.root("<?xml version='1.0'?><a/>")
    assert top.empty
    with pytest.raises(ValueError, match="no root"):
        splice.root("<!-- nothing -->")


def test_edits_touch_only_their_places() -> None:
    """Removing, setting and inserting leave every other character as it is."""
    top = splice.root(TRICKY)
    one, two, three = splice.children(TRICKY, top.inner, top.outer)
    edits = Edits(TRICKY)
    edits.set(three, {"q": None, "new": 'a"b'})
    edits.remove(two)
    edits.set(one, {"a": "2"})
    edits.replace(one.start, one.start, "<zero/>")
    expected = TRICKY.replace("<one a='1'", '<zero/><one a="2"', 1)
    expected = expected.replace(two.whole(TRICKY), "").replace('<three\tq = "x"\n  />', '<three new="a&quot;b"/>')
    assert edits.result() == expected


@pytest.mark.parametrize(("tag", "values", "expected"), [
    ("<a>", {"x": "1"}, '<a x="1">'),
    ("<a/>", {"x": "1"}, '<a x="1"/>'),
    ("<a />", {"x": "1"}, '<a x="1"/>'),
    ("<a x='1' y=\"2\">", {"x": "3"}, '<a x="3" y="2">'),
    ('<a x="1" y="2"/>', {"x": None}, '<a y="2"/>'),
    ('<a xx="1">', {"x": "2"}, '<a xx="1" x="2">'),
    ('<a x:y="1">', {"y": "2"}, '<a x:y="1" y="2">'),
    ("<a>", {"x": None}, "<a>"),
])
def test_attributes_are_set_in_place(tag: str, values: dict[str, str | None], expected: str) -> None:
    """An attribute is changed where it stands, added at the end, or taken out."""
    assert splice.with_attributes(tag, values) == expected


def test_content_is_added_at_the_end() -> None:
    """An element takes content at its end, one without content opens for it."""
    for text, expected in (("<p:a x='1'><b/></p:a>", "<p:a x='1'><b/><c/></p:a>"), ("<p:a />", "<p:a><c/></p:a>")):
        assert splice.with_content(text, splice.root(text), "<c/>") == expected


@pytest.mark.parametrize("data", [
    '<?xml version="1.0" encoding="UTF-8"?><a>ä</a>'.encode(),
    '<?xml version="1.0" encoding="UTF-16"?><a>ä</a>'.encode("utf-16"),
    '<?xml version="1.0" encoding="UTF-16"?><a>ä</a>'.encode("utf-16-be"),
    '<?xml version="1.0" encoding="utf-16"?><a>ä</a>'.encode("utf-16-le"),
    "<?xml version='1.0' encoding='windows-1252'?><a>ä</a>".encode("cp1252"),
    '<a>ä</a>'.encode("utf-8-sig"),
])
def test_text_is_decoded_and_says_utf8(data: bytes) -> None:
    """A part in any encoding gives text that says UTF-8, so that it can be written as such."""
    text = splice.decoded(data)
    assert ElementTree.fromstring(text.encode("utf-8")).text == "ä"


NAMES = st.sampled_from(["a", "b", "row", "x:c"])
VALUES = st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cs"]), max_size=8)


@st.composite
def trees(draw: st.DrawFn, depth: int = 3) -> ElementTree.Element:
    """Random small trees."""
    made = ElementTree.Element(draw(st.sampled_from(["a", "b", "row"])), {
        key: draw(VALUES) for key in draw(st.sets(st.sampled_from(["p", "q"]), max_size=2))})
    made.text = draw(VALUES)
    if depth:
        made.extend(draw(st.lists(trees(depth=depth - 1), max_size=3)))
    return made


@given(trees())
def test_children_are_those_a_parser_finds(tree: ElementTree.Element) -> None:
    """On random parts, names, attributes and nesting equal those of a parser."""
    def seen(text: str, start: int, end: int) -> list[object]:
        return [(child.name, dict(child.attributes), seen(text, child.inner, child.outer))
                for child in splice.children(text, start, end)]

    def parsed(element: ElementTree.Element) -> tuple[object, ...]:
        return element.tag, dict(element.attrib), [parsed(child) for child in element]

    text = ElementTree.tostring(tree, encoding="unicode")
    assert seen(text, 0, len(text)) == [parsed(ElementTree.fromstring(text))]
