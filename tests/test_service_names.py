"""Names of drops and of returned files."""

import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ledgersolve.service.names import (
    MOST_BYTES,
    cut,
    is_conflict_copy,
    is_temporary,
    private_name,
    returned_name,
    same_name_key,
    show,
    stem,
)


@pytest.mark.parametrize("name", [
    "~$plan.xlsx", ".~lock.plan.xlsx#", "._plan.xlsx", ".plan.xlsx.Ab3dEf", "x.tmp", "~x.tmp", "x.part", "x.partial",
    "x.crdownload", "x.filepart", "~syncthing~plan.xlsx.tmp", ".syncthing.plan.xlsx.tmp", "plan.xlsx.~4f2a1c",
    "Thumbs.db", "THUMBS.DB", "desktop.ini", ".DS_Store", "@eaDir", "A1B2C3D4", "00ffee99",
])  # fmt: skip
def test_names_of_programs_at_work_are_no_drops(name):
    """Lock, temporary, hidden and sync names are passed over."""
    assert is_temporary(name)


@pytest.mark.parametrize("name", [
    "plan.xlsx", "PLAN.XLSM", ".xlsx", "a1b2c3d4.xlsx", "tmp.xlsx", "plan (conflicted copy).xlsx", "-x.xlsx", "x.csv",
    "A1B2C3D4E", "part.xlsx", "Überplan.xlsx",
])  # fmt: skip
def test_names_of_people_are_drops(name):
    """Odd names of people are drops all the same."""
    assert not is_temporary(name)


def test_conflict_copies_are_known():
    """The names that sync programs give to a second version are recognised, plain ones are not."""
    assert is_conflict_copy("plan (Ann's conflicted copy 2024-01-01).xlsx")
    assert is_conflict_copy("plan-DESKTOP-AB12CD3.xlsx")
    assert not is_conflict_copy("conflicts of supply.xlsx")


@pytest.mark.parametrize(("name", "shown"), [
    ("plan\n.xlsx", "planU+000A.xlsx"), ("\x1b[31m", "U+001B[31m"), ("x\u202exslx", "xU+202Exslx"),
    ("b\udcff.xlsx", "b\\xff.xlsx"), ("a b", "a b"), ("naïve 😀", "naïve 😀"), ("a\u200bb", "aU+200Bb"),
])  # fmt: skip
def test_a_shown_name_hides_nothing(name, shown):
    """Control, direction, zero-width and undecodable characters are spelled out; others stay."""
    assert show(name) == shown


@pytest.mark.parametrize(("name", "wanted"), [
    ("plan.xlsx", "plan [AB12CD34] solved.xlsx"),
    ("plan [K3Q9ZZ01] to fix.xlsx", "plan [AB12CD34] solved.xlsx"),
    (".xlsx", "workbook [AB12CD34] solved.xlsx"),
    ("data.csv", "data.csv [AB12CD34] solved.xlsx"),
    ("=cmd.xlsx", "_cmd [AB12CD34] solved.xlsx"),
    ("-rf.xlsx", "_rf [AB12CD34] solved.xlsx"),
    ("../x.xlsx", "_._x [AB12CD34] solved.xlsx"),
    ("a<b>:c|d?.xlsx", "a_b__c_d_ [AB12CD34] solved.xlsx"),
    ("plan . .xlsx", "plan [AB12CD34] solved.xlsx"),
    ("x\u202e\n\udcff.xlsx", "x___ [AB12CD34] solved.xlsx"),
])  # fmt: skip
def test_a_returned_name_keeps_the_drops_name_and_is_safe(name, wanted):
    """The returned file is called like the drop, without what systems or shells trip over."""
    assert returned_name(name, "AB12CD34", "solved", ".xlsx") == wanted


@given(st.text(alphabet=st.characters(exclude_characters="/\0"), min_size=1, max_size=300))
def test_every_returned_name_can_be_written(name):
    """Any name on a disk gives a name of at most 200 bytes of sound UTF-8 that ends as it should."""
    made = returned_name(name, "AB12CD34", "to fix", ".xlsm")
    raw = made.encode("utf-8")
    assert len(raw) <= MOST_BYTES
    assert made.endswith(" [AB12CD34] to fix.xlsm")
    assert not any(unicodedata.category(character) in ("Cc", "Cs", "Cf") for character in made)
    assert private_name(name) not in ("", ".", "..") and "/" not in private_name(name)


@given(st.text(max_size=80), st.integers(0, 120))
def test_cutting_keeps_whole_characters(text, most):
    """A cut text is a start of the text, within the bytes, and never ends before a combining mark."""
    short = cut("".join(character for character in text if not "\ud800" <= character <= "\udfff"), most)
    assert len(short.encode("utf-8")) <= max(most, 0) or short == ""


def test_two_spellings_of_one_name_are_known_as_such():
    """Composed and decomposed, upper and lower case: people take them for one name."""
    assert same_name_key("Überplan.xlsx") == same_name_key("u\u0308berplan.XLSX")


def test_a_returned_file_dropped_again_does_not_grow():
    """What an earlier return added to the name is taken off."""
    assert stem("plan [AB12CD34] failed.xlsx") == "plan"
    assert stem("plan [2024] failed.xlsx") == "plan [2024] failed"
