"""The house style: colours, cell styles, number formats and figures in words. Nothing else sets a look.

Every pair of text and ground has a contrast of at least 4.5 to 1, and no meaning rests on colour alone.
"""

import math
from collections.abc import Iterable
from dataclasses import replace

from ledgersolve.workbook.figures import NO_BREAK
from ledgersolve.workbook.figures import Rounding as Rounding
from ledgersolve.workbook.figures import figure_words as figure_words
from ledgersolve.workbook.figures import money_digits as money_digits
from ledgersolve.workbook.figures import money_words as money_words
from ledgersolve.workbook.sheets import Style

INK = "1F2933"
QUIET = "52606D"
PETROL = "0F4C5C"
RUST = "8A3B12"
MOSS = "3F6B3A"
PALE = "E6EFF1"
SAND = "F6F1E7"
WHITE = "FFFFFF"
ALARM_GROUND, ALARM = "F9DDD2", "7A1F0B"
GOOD_GROUND, GOOD = "E3F0E6", "1B5E3B"
LINE = "9AA5B1"

TEXT = Style()
CELL = Style(align="left", indent=1)
WRAPPED = Style(wrap=True, valign="top")
WRAPPED_CELL = Style(wrap=True, align="left", indent=1)
SMALL = Style(size=8.0, colour=QUIET)
SMALL_WRAPPED = Style(size=8.0, colour=QUIET, wrap=True, valign="top")
BOLD = Style(bold=True)
TITLE = Style(size=16.0, bold=True, colour=PETROL)
SECTION = Style(size=11.0, bold=True, colour=PETROL, bottom=1, border_colour=PETROL, valign="bottom")
HEADER = Style(bold=True, colour=WHITE, fill=PETROL, wrap=True, align="left", indent=1, size=9.0)
HEADER_RIGHT = replace(HEADER, align="right", indent=0)
NOTE = Style(italic=True, colour=QUIET, size=9.0)
LINK = Style(colour=PETROL, underline=True, align="left", indent=1)
TOTAL = Style(bold=True, fill=PALE, top=1, bottom=2, border_colour=PETROL, align="left", indent=1)
SUBTOTAL = Style(bold=True, fill=PALE, align="left", indent=1)
SUBSUBTOTAL = Style(bold=True, fill=SAND, align="left", indent=1)
BAD = Style(bold=True, colour=ALARM, fill=ALARM_GROUND)
FINE = Style(colour=GOOD, fill=GOOD_GROUND)

PERCENT = "0.0%"
WHOLE = "#,##0"
DATE = "yyyy-mm-dd"
DATE_TIME = "yyyy-mm-dd hh:mm"
SECONDS = "0.00"


def money_format(currency: str) -> str:
    """Number format of an amount; the reader's own separators are shown."""
    digits = money_digits(currency)
    return "#,##0" + ("." + "0" * digits if digits else "")


def rate_format(currency: str, rates: Iterable[float] = ()) -> str:
    """Number format of rates: the currency's digits, and two more where one of them needs more."""
    digits = money_digits(currency)
    finer = any(abs(rate * 10**digits - round(rate * 10**digits)) > 1e-6 for rate in rates)
    shown = digits + 2 if finer else digits
    return "#,##0" + ("." + "0" * shown if shown else "")


def figure_format(values: Iterable[float], most: int = 3) -> str:
    """Number format for a column of quantities: as many decimals as they need, at most ``most``."""
    needed = 0
    for given in values:
        value = round(given, most)  # what lies beyond is not shown anyway
        while needed < most and abs(value * 10**needed - round(value * 10**needed)) > 1e-6:
            needed += 1
        if needed == most:
            break
    return "#,##0" + ("." + "0" * needed if needed else "")


def without_zeros(number_format: str) -> str:
    """Number format that shows a dash in place of 0, so that the other figures stand out."""
    return f"{number_format};\u2212{number_format};\u2013"


def axis_step(largest: float, marks: int = 4) -> float | None:
    """Round distance between marks of an axis up to ``largest``; None where there is nothing to measure."""
    if not largest > 0:
        return None
    size = 10.0 ** math.floor(math.log10(largest / marks))
    return next(size * part for part in (1.0, 2.0, 2.5, 5.0, 10.0) if size * part * marks >= largest)


def with_format(style: Style, number_format: str) -> Style:
    """Give the style with a number format, figures to the right."""
    return replace(style, number_format=number_format, align="right", indent=0)


def number(number_format: str) -> Style:
    """Style of a plain figure."""
    return Style(number_format=number_format, align="right")


def quantity_words(value: float) -> str:
    """Quantity in a sentence: whole where it is whole or large, else three significant digits."""
    if value == round(value) or abs(value) >= 1000:
        return figure_words(value)
    digits = max(0, 2 - math.floor(math.log10(abs(value))))
    return figure_words(value, min(digits, 6))


def percent_words(fraction: float, rounding: Rounding = "nearest") -> str:
    """Fraction as a percentage in a sentence; small ones keep two significant digits."""
    percent = 100 * fraction
    digits = 1 if abs(percent) >= 1 or percent == 0 else min(6, 1 - math.floor(math.log10(abs(percent))))
    return f"{figure_words(percent, digits, rounding)}{NO_BREAK}%"


def listed(words: list[str], most: int = 12) -> str:
    """Words as a list in a sentence: ``A, B and C``; beyond ``most`` the rest is counted.

    Where a word holds a comma itself, semicolons part them.
    """
    mark = "; " if any("," in word for word in words[:most]) else ", "
    if len(words) > most:
        return f"{mark.join(words[:most])} and {len(words) - most} more"
    if len(words) < 2:
        return words[0] if words else "none"
    return f"{mark.join(words[:-1])}{';' if mark == '; ' else ''} and {words[-1]}"


def short(code: str, name: str, most: int = 40) -> str:
    """A thing by its name, or by its code where the name is longer than a sentence bears."""
    shown = name if len(name) <= most else code
    return shown if len(shown) <= most else f"{shown[:most - 1]}\u2026"


def named(code: str, name: str) -> str:
    """A thing by name and code; the code alone where it is the name."""
    return code if not name or name == code else f"{name} ({code})"


def counted(number_of: int, one: str, many: str = "") -> str:
    """``1 site``, ``3 sites``."""
    return f"{figure_words(number_of)} {one if number_of == 1 else many or one + 's'}"


def contrast(first: str, second: str) -> float:
    """Contrast of two colours (WCAG 2.2, relative luminance)."""
    light, dark = sorted((_luminance(first), _luminance(second)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def _luminance(colour: str) -> float:
    def linear(channel: int) -> float:
        part = channel / 255
        return part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4
    red, green, blue = (linear(int(colour[place:place + 2], 16)) for place in (0, 2, 4))
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue
