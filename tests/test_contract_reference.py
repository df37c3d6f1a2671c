"""The reference page."""

from pathlib import Path

from ledgersolve.contract.columns import ListSheet
from ledgersolve.contract.read import CONTRACTS
from ledgersolve.contract.reference import reference_page

COMMITTED = Path(__file__).parents[1] / "templates_xlsx" / "REFERENCE.md"


def test_the_committed_page_is_current():
    """If not, write ``reference_page()`` of ledgersolve.contract.reference to templates_xlsx/REFERENCE.md again."""
    assert COMMITTED.read_text(encoding="utf-8") == reference_page()


def test_every_title_of_the_contract_is_on_the_page():
    """Every sheet, column and setting of both jobs is described."""
    page = reference_page()
    for contract in CONTRACTS.values():
        for sheet in contract.sheets:
            assert f"Sheet `{sheet.name}`" in page
            entries = sheet.entries if isinstance(sheet, ListSheet) else (sheet.figure,)
            assert all(f"| {entry.title} | {entry.meaning} |" in page for entry in entries)
        assert all(f"| {entry.title} | {entry.meaning} |" in page for entry in contract.settings)
