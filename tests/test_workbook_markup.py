"""Parsing under guard: no definitions, no strange encodings, words for what is broken."""

import pytest

from ledgersolve.workbook.markup import MAIN, PrologCheck, feed, parser, quoted_attribute, walk, whole
from ledgersolve.workbook.problems import UnreadableWorkbookError

LAUGHS = b'<?xml version="1.0"?><!DOCTYPE x [<!ENTITY a "ha">]><x>&a;</x>'


def test_elements_arrive_with_their_namespace() -> None:
    """Names are told with their namespace, whatever the prefix; text and ends arrive too."""
    seen: list[str] = []
    for text in (f'<a xmlns="{MAIN}">t</a>', f'<p:a xmlns:p="{MAIN}">t</p:a>'):
        walk("p", (text[:9].encode(), text[9:].encode()), lambda name, _: seen.append(name), seen.append,
             lambda name: seen.append(f"/{name}"))
    assert seen == [f"{MAIN} a", "t", f"/{MAIN} a"] * 2


@pytest.mark.parametrize("data", [
    LAUGHS, LAUGHS.decode().encode("utf-16"), b'<!DOCTYPE x SYSTEM "file:///etc/passwd"><x/>',
    b'<!DOCTYPE x PUBLIC "a" "http://localhost/"><x/>', b"<!--c--><?pi?><!DOCTYPE x><x/>",
])
def test_definitions_are_refused_wherever_they_stand(data: bytes) -> None:
    """A document type definition is refused by the parser and by the look at what precedes the root."""
    with pytest.raises(UnreadableWorkbookError) as caught:
        walk("part.xml", (data,), lambda *_: None)
    assert caught.value.problem.kind == "entity definitions"
    check = PrologCheck("part.xml")
    with pytest.raises(UnreadableWorkbookError):
        for place in range(0, len(data), 3):
            check.feed(data[place:place + 3])


def test_the_look_at_the_beginning_ends_at_the_root() -> None:
    """Nothing behind the root's start is looked at, and what is not XML is left alone."""
    for data in (b"<x/><broken", b"no markup at all", b'<?xml version="1.0" encoding="nonsense"?><x/>'):
        check = PrologCheck("part.xml")
        check.feed(data)
        assert check.done


def test_what_is_broken_is_told_with_its_line() -> None:
    """Markup that is not well formed is refused with the part and the line."""
    with pytest.raises(UnreadableWorkbookError, match=r"sheet1.xml is not well formed \(line 3"):
        walk("sheet1.xml", (b"<a>\n\n<b></a>",), lambda *_: None)
    reader = parser("sheet1.xml")
    feed(reader, "sheet1.xml", b"<a>")
    with pytest.raises(UnreadableWorkbookError, match="not well formed"):
        feed(reader, "sheet1.xml", b"", last=True)


def test_a_fault_of_ours_is_not_taken_for_a_broken_file() -> None:
    """An error in a handler comes through as what it is."""
    def start(*_: object) -> None:
        raise KeyError("ours")

    with pytest.raises(KeyError, match="ours"):
        walk("p", (b"<a/>",), start)


@pytest.mark.parametrize(("text", "number"), [
    ("12", 12), ("0", 0), (None, 7), ("", 7), ("-1", 7), ("1.5", 7), (" 1", 7),
    ("9" * 9, 999_999_999), ("9" * 10, 7)])
def test_whole_numbers_in_attributes(text: str | None, number: int) -> None:
    """Only whole numbers of up to nine digits are numbers."""
    assert whole(text, 7) == number


@pytest.mark.parametrize("value", ["plain", 'a "b" & <c>', "two\nlines\tand\r", "it's", "größer ≥"])
def test_a_written_attribute_reads_as_what_it_was(value) -> None:
    """Quotes, brackets, line ends and tabs outlast writing and reading."""
    read = []
    walk("x", [f"<a b={quoted_attribute(value)}/>".encode()], lambda _, attributes: read.append(attributes["b"]))
    assert read == [value]
