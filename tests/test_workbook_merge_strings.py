"""Our texts behind the analyst's, and out again to the byte."""

import pytest

from ledgersolve.workbook.container import Limits
from ledgersolve.workbook.merge_strings import append_strings, cut_strings
from ledgersolve.workbook.strings import shared_strings
from tests.packages import HEAD, MAIN, strings_xml

OURS = [b"<si><t>one</t></si>", b'<si><t xml:space="preserve"> two</t></si>']


def texts(data: bytes) -> list[str]:
    """Texts of a list as they are read."""
    return shared_strings("s", (data,), Limits())


@pytest.mark.parametrize("theirs", [
    strings_xml("<t>a</t>", "<r><t>b</t></r>"),
    strings_xml("<t>a</t>").replace(' count="1" uniqueCount="1"', ""),
    strings_xml("<t>a</t>").replace('count="1"', 'count="77"'),
    strings_xml("<t><![CDATA[<si>]]></t><!-- <si> -->"),
    f'{HEAD}<x:sst xmlns:x="{MAIN}" count="1" uniqueCount="1"><x:si><x:t>a</x:t></x:si></x:sst>',
    strings_xml("<t>ledgersolve texts 2 uses 2 check 1 added</t>"),
    strings_xml(),
])
def test_ours_go_in_behind_and_out_to_the_byte(theirs: str) -> None:
    """Appended texts are read at their places, the analyst's before them; cutting gives the same bytes."""
    before = texts(theirs.encode())
    data, first = append_strings(theirs.encode(), OURS, 5)
    found = texts(data)
    assert found[:len(before)] == before
    assert found[first:] == ["one", " two"]
    assert len(found) == len(before) + 3
    cut = cut_strings(data)
    assert (cut.data, cut.made) == (theirs.encode(), False)


def test_counts_are_kept() -> None:
    """The counts of the list grow by what is added: texts, and uses."""
    data, _ = append_strings(strings_xml("<t>a</t>").encode(), OURS, 5)
    assert b'count="6" uniqueCount="4"' in data


def test_an_empty_list_takes_ours() -> None:
    """A list without content opens for ours."""
    theirs = f'{HEAD}<sst xmlns="{MAIN}" count="0" uniqueCount="0" />'.encode()
    data, first = append_strings(theirs, OURS, 2)
    assert texts(data)[first:] == ["one", " two"]
    again, _ = append_strings(cut_strings(data).data, OURS, 2)
    assert again == data


def test_a_list_of_ours_alone_says_so() -> None:
    """Where there was no list, cutting tells that the whole list can go."""
    data, first = append_strings(None, OURS, 2)
    assert texts(data)[first:] == ["one", " two"]
    assert cut_strings(data).made


@pytest.mark.parametrize("change", [
    lambda data: data.replace(b"one", b"two"),
    lambda data: data.replace(b"</sst>", b"<si><t>more</t></si></sst>"),
    lambda data: data.replace(b"texts 2", b"texts 3"),
])
def test_a_list_that_another_program_changed_stays(change) -> None:
    """Where anything behind our first text is not as we wrote it, nothing is cut."""
    changed = change(append_strings(strings_xml("<t>a</t>").encode(), OURS, 2)[0])
    assert cut_strings(changed).data == changed


def test_another_encoding_becomes_utf8() -> None:
    """A list in UTF-16 or Latin-1 takes our texts as UTF-8 and keeps its own."""
    for encoding, name in (("utf-16", "UTF-16"), ("latin-1", "ISO-8859-1")):
        data, _ = append_strings(strings_xml("<t>Größe</t>").replace("UTF-8", name).encode(encoding), OURS, 2)
        assert texts(data)[0] == "Größe"
