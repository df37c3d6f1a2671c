"""The house style: contrast, money by ISO 4217, figures in words never rounded in our favour."""

import itertools

import pytest

from ledgersolve.report import style


def test_every_pair_of_text_and_ground_is_readable() -> None:
    """Texts reach 4.5 to 1 on every ground they stand on (WCAG 2.2, success criterion 1.4.3)."""
    for text, ground in itertools.product((style.INK, style.QUIET, style.PETROL, style.RUST),
                                          (style.WHITE, style.PALE, style.SAND)):
        assert style.contrast(text, ground) >= 4.5, (text, ground)
    pairs = ((style.WHITE, style.PETROL), (style.ALARM, style.ALARM_GROUND), (style.GOOD, style.GOOD_GROUND))
    for text, ground in pairs:
        assert style.contrast(text, ground) >= 4.5, (text, ground)


def test_contrast_of_black_and_white_is_21() -> None:
    """The contrast formula gives 21 for black on white and 1 for equal colours (WCAG 2.2, definition)."""
    assert style.contrast("000000", "FFFFFF") == pytest.approx(21.0)
    assert style.contrast("336699", "336699") == pytest.approx(1.0)


@pytest.mark.parametrize(("codes", "digits"), [
    ("USD EUR GBP CNY CHF", 2),
    ("JPY KRW CLP ISK VND XAF XOF XPF PYG RWF UGX KMF DJF GNF BIF VUV", 0),
    ("BHD IQD JOD KWD LYD OMR TND", 3),
    ("CLF UYW", 4),
])
def test_money_has_the_digits_of_its_currency(codes: str, digits: int) -> None:
    """Minor units follow ISO 4217, list one."""
    for code in codes.split():
        assert style.money_digits(code) == digits
        assert style.money_format(code) == "#,##0" + ("." + "0" * digits if digits else "")


def test_sentences_round_against_us() -> None:
    """What could still be saved is rounded up, what is saved is rounded down."""
    assert style.money_words(1234.01, "EUR", "up") == "1\u00a0235\u00a0EUR"
    assert style.money_words(1234.99, "EUR", "down") == "1\u00a0234\u00a0EUR"
    assert style.money_words(0.001, "EUR", "up") == "0.01\u00a0EUR"
    assert style.percent_words(0.03999, "down") == "3.9\u00a0%"
    assert style.percent_words(0.000123, "up") == "0.013\u00a0%"


def test_rounding_noise_is_no_reason_to_round_away() -> None:
    """A figure that is whole but for the last digits of the machine stays what it is."""
    assert style.figure_words(3.0000000001, 0, "up") == "3"
    assert style.figure_words(2.9999999999, 0, "down") == "3"


def test_small_amounts_keep_their_minor_units() -> None:
    """Below 1,000 the currency's digits are shown; thousands are apart by a space that does not break."""
    assert style.money_words(12.5, "EUR") == "12.50\u00a0EUR"
    assert style.money_words(12.5, "KWD") == "12.500\u00a0KWD"
    assert style.money_words(1234567.891, "JPY") == "1\u00a0234\u00a0568\u00a0JPY"
    assert style.money_words(-5.0, "EUR") == "\u22125.00\u00a0EUR"


@pytest.mark.parametrize(("values", "expected"), [
    ([1.0, 20.0], "#,##0"), ([1.5], "#,##0.0"), ([0.25, 3.0], "#,##0.00"), ([1 / 3], "#,##0.000"), ([], "#,##0"),
    ([299.99996, 410.00002], "#,##0"), ([0.12504], "#,##0.000"),
])
def test_figures_show_the_decimals_they_need(values: list[float], expected: str) -> None:
    """A column of quantities has as many decimals as its figures need, at most three."""
    assert style.figure_format(values) == expected


@pytest.mark.parametrize(("words", "expected"), [
    ([], "none"), (["A"], "A"), (["A", "B"], "A and B"), (["A", "B", "C"], "A, B and C"),
    (list("ABCDE"), "A, B, C and 2 more"), (["Hall, small", "Hall, large"], "Hall, small; and Hall, large"),
    (["X, 1", "Y", "Z"], "X, 1; Y; and Z"),
])
def test_lists_read_as_sentences(words: list[str], expected: str) -> None:
    """Lists end in and; long ones count the rest; words with commas of their own are parted by semicolons."""
    assert style.listed(words, 3) == expected


def test_long_names_give_way_to_codes() -> None:
    """A name too long for a sentence is replaced by its code, and cut with a mark where the code is long too."""
    assert style.short("HAM", "Depot Hamburg") == "Depot Hamburg"
    assert style.short("HAM", "x" * 41) == "HAM"
    assert style.short("y" * 50, "x" * 41) == "y" * 39 + "\u2026"
    assert style.short("HAM", "Depot Hamburg", 8) == "HAM"


@pytest.mark.parametrize(("largest", "step"), [(0.0, None), (7.0, 2.0), (4763662.0, 2e6), (95.0, 25.0), (0.03, 0.01)])
def test_axis_marks_are_round(largest: float, step: float | None) -> None:
    """Marks of an axis stand at round figures, at most four of them to the largest."""
    found = style.axis_step(largest)
    assert found == (None if step is None else pytest.approx(step))
    assert found is None or found * 4 >= largest
