"""Former answers: the same workbook, the same answer."""

import hashlib
from dataclasses import replace
from pathlib import Path

import pytest

from ledgersolve.service.answers import Former, find, remember
from ledgersolve.service.disk import Disk
from ledgersolve.service.layout import Layout, prepare
from tests.service_share import names

INPUT = "ab" * 32


@pytest.fixture
def layout(tmp_path: Path) -> Layout:
    """A served folder."""
    prepare(tmp_path, Disk())
    return Layout(tmp_path)


def answer(layout: Layout, content: bytes, title: str | None = "Network 2030") -> Former:
    """A finished workbook in tmp."""
    path = layout.new_tmp("answer")
    path.write_bytes(content)
    return Former(path, hashlib.sha256(content).hexdigest(), "solved", ".xlsx", {"title": title})


def test_an_answer_is_found_again(layout):
    """By input and version; another input or version finds nothing."""
    entered = remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"one"))
    found = find(Disk(), layout, INPUT, "1", "b.xlsx")
    assert found == entered and found.payload.read_bytes() == b"one"
    assert find(Disk(), layout, "cd" * 32, "1", "a.xlsx") is None
    assert find(Disk(), layout, INPUT, "2", "a.xlsx") is None


def test_the_first_answer_counts(layout):
    """Two machines that solved the same workbook at once return the same file."""
    first = remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"one"))
    second = remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"two"))
    assert second == first


@pytest.mark.parametrize("title", ["a.xlsx", "a", None])
def test_a_workbook_titled_by_its_name_is_answered_for_that_name_only(layout, title):
    """Where the returned file speaks of the workbook by its file name, another name gets its own."""
    remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"one", title))
    assert find(Disk(), layout, INPUT, "1", "b.xlsx") is None
    assert find(Disk(), layout, INPUT, "1", "a.xlsx") is not None


def test_changed_or_missing_payloads_are_not_given_out(layout):
    """The hash is checked each time; a bad entry goes, so that the next answer can take its place."""
    entered = remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"one"))
    entered.payload.write_bytes(b"changed")
    assert find(Disk(), layout, INPUT, "1", "a.xlsx") is None
    again = remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"two"))
    assert find(Disk(), layout, INPUT, "1", "a.xlsx") == again
    again.payload.unlink()
    assert find(Disk(), layout, INPUT, "1", "a.xlsx") is None


@pytest.mark.parametrize("words", ["", "[]", "{}", '{"sha256": 1, "outcome": 2}'])
def test_garbage_entries_are_passed_over(layout, words):
    """An entry that cannot be read is no answer and does no harm."""
    remember(Disk(), layout, INPUT, "1", "a.xlsx", answer(layout, b"one"))
    (entry,) = layout.answers.glob("*.json")
    entry.write_text(words)
    assert find(Disk(), layout, INPUT, "1", "a.xlsx") is None


def test_an_entry_costs_no_space(layout):
    """The kept copy is a second name of the file that is returned."""
    made = answer(layout, b"one")
    entered = remember(Disk(), layout, INPUT, "1", "a.xlsx", made)
    assert entered.payload.samefile(made.payload)
    assert len(names(layout.answers)) == 2


def test_an_edited_copy_under_the_same_hash_is_not_entered(layout):
    """A payload of the same hash whose bytes were changed meanwhile does not become an answer."""
    made = answer(layout, b"one")
    entered = remember(Disk(), layout, INPUT, "1", "a.xlsx", made)
    entered.payload.write_bytes(b"edited")
    fresh = replace(answer(layout, b"one"), outcome="to fix")
    assert remember(Disk(), layout, "cd" * 32, "1", "a.xlsx", fresh) == fresh
    assert find(Disk(), layout, "cd" * 32, "1", "a.xlsx") is None
