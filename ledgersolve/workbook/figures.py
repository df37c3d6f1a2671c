"""Figures and money in sentences: readable in every country, rounded as the sentence needs it."""

import math
import re
from typing import Literal

from ledgersolve.workbook.currencies import MINOR_UNITS

NO_BREAK = "\u00a0"
Rounding = Literal["nearest", "up", "down"]


def money_digits(currency: str) -> int:
    """Digits of the currency's minor unit (ISO 4217, list one); two for a code that is not listed."""
    return MINOR_UNITS.get(currency.upper(), 2)


def money_words(amount: float, currency: str, rounding: Rounding = "nearest") -> str:
    """Amount in a sentence: thousands apart by a space, whole units from 1,000 on, then the code."""
    digits = 0 if abs(amount) >= 1000 else money_digits(currency)
    return f"{figure_words(amount, digits, rounding)}{NO_BREAK}{currency}"


def figure_words(value: float, digits: int = 0, rounding: Rounding = "nearest") -> str:
    """Figure in a sentence with a space between thousands (readable in every country)."""
    scale = 10.0**digits
    scaled = value * scale
    snapped = int(math.copysign(math.floor(abs(scaled) * (1 + 1e-15) + 0.5), scaled))  # halves up, as sheets do
    if abs(scaled - snapped) > 1e-6 * max(1.0, abs(scaled) * 1e-6):
        snapped = math.ceil(scaled) if rounding == "up" else math.floor(scaled) if rounding == "down" else snapped
    return f"{snapped / scale:,.{digits}f}".replace(",", NO_BREAK).replace("-", "\u2212")


_SHORT_WORDS = frozenset(("bag", "bin", "box", "can", "keg", "lot", "pack", "set", "ton"))
_WORD = re.compile(r"[A-Za-z][a-z]{3,}")


def unit_words(amount: float, unit: str) -> str:
    """The unit behind an amount: ``1 pallet``, ``6 pallets``; symbols (kg, m3) stay as they are."""
    kind, _, word = unit.rpartition(" ")  # a "roll cage" is a word as well, a "pallet of cement" is left alone
    wordlike = bool(_WORD.fullmatch(word) or word in _SHORT_WORDS) and " " not in kind
    if abs(amount) == 1 or not wordlike or unit.endswith("s"):
        return unit
    if unit.endswith(("x", "ch", "sh")):
        return f"{unit}es"
    return f"{unit[:-1]}ies" if re.search("[^aeiou]y$", unit) else f"{unit}s"


def all_words(count: int, one: str, many: str = "") -> str:
    """``all 12 items``, and ``the only item`` where there is one."""
    return f"the only {one}" if count == 1 else f"all {count:,} {many or one + 's'}"
