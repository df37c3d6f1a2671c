"""Currency codes."""

import pytest

from ledgersolve.workbook.currencies import MINOR_UNITS


@pytest.mark.parametrize(("digits", "codes"), [
    (2, "USD EUR GBP CNY CHF"), (0, "JPY KRW CLP ISK VND XAF XOF XPF PYG RWF UGX KMF DJF GNF BIF VUV"),
    (3, "BHD IQD JOD KWD LYD OMR TND"), (4, "CLF UYW"),
])
def test_digits_of_minor_units(digits, codes):
    """Minor units of ISO 4217, list one (check case GEO-06)."""
    for code in codes.split():
        assert MINOR_UNITS[code] == digits


def test_codes_have_three_capital_letters():
    """Every code is three capital letters, and there are some 150 of them."""
    assert all(len(code) == 3 and code.isalpha() and code.isupper() for code in MINOR_UNITS)
    assert 150 <= len(MINOR_UNITS) <= 170
