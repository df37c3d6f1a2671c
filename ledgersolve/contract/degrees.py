"""Coordinates as texts: degrees, minutes and seconds, letters for the hemisphere, ISO 6709, both in one cell.

They are never used as they stand. What they are in decimal degrees is worked out only to tell the analyst what
to type. Forms: those of ISO 6709:2022 (``+5231.2``, ``+523112``, ``+52.52+013.405/``) and those people write
(``52°31'12"N``, ``N 52 31 12``, ``52.52 N``, ``52.52, 13.405``).
"""

import re
from dataclasses import dataclass

LATITUDE, LONGITUDE = "Latitude", "Longitude"
_AXES = {"N": LATITUDE, "S": LATITUDE, "E": LONGITUDE, "W": LONGITUDE}
_LIMITS = {LATITUDE: 90.0, LONGITUDE: 180.0}
_WHOLE_DIGITS = {LATITUDE: 2, LONGITUDE: 3}

_SIGNS = str.maketrans({
    "′": "'", "’": "'", "‘": "'", "´": "'", "`": "'", "ʹ": "'", "″": '"', "”": '"', "“": '"', "ʺ": '"', "º": "°",
    "˚": "°", "\u2212": "-",
})
_COMMA = re.compile(r"(?<=\d),(?=\d)")
_SEXAGESIMAL = re.compile(
    r"(?P<sign>[+-]?)(?P<degrees>\d{1,3}(?:\.\d+)?)\s*(?:°|:|\s|$)\s*"
    r"(?:(?P<minutes>\d{1,2}(?:\.\d+)?)\s*(?:'|:|\s|$)\s*(?:(?P<seconds>\d{1,2}(?:\.\d+)?)\s*(?:\"|$))?)?", re.ASCII)
_COMPACT = re.compile(r"(?P<sign>[+-]?)(?P<digits>\d{4,7})(?P<part>\.\d+)?", re.ASCII)
_ISO_PAIR = re.compile(r"([+-]\d{2,7}(?:\.\d+)?)([+-]\d{3,7}(?:\.\d+)?)(?:[+-]\d+(?:\.\d+)?)?(?:CRS\w*)?/?", re.ASCII)
_DECIMAL_PAIR = re.compile(r"\(?\s*([+-]?\d{1,3}\.\d+)\s*[,;\s]\s*([+-]?\d{1,3}\.\d+)\s*\)?", re.ASCII)
_LETTER_PAIR = re.compile(r"(\D*\d.*?[NS]|[NS].*?\d\D*?)[\s,;/]+(\D*\d.*?[EW]|[EW].*\d\D*)")


@dataclass(frozen=True)
class Coordinate:
    """A coordinate in decimal degrees; ``axis`` is empty where the text does not say which one it is."""

    degrees: float
    axis: str = ""


def coordinates(text: str, title: str) -> tuple[Coordinate, ...]:
    """What a text means as coordinates: none, one, or latitude and longitude where it holds both.

    Parameters
    ----------
    text
        As it stands in the cell.
    title
        ``Latitude`` or ``Longitude``: the column it stands in, which bounds what it can mean.
    """
    words = text.translate(_SIGNS).replace("''", '"').strip().upper()
    for pattern in (_ISO_PAIR, _DECIMAL_PAIR, _LETTER_PAIR):
        match = pattern.fullmatch(words)
        if match is not None:
            pair = _one(match[1], LATITUDE, told=True), _one(match[2], LONGITUDE, told=True)
            return tuple(each for each in pair if each is not None) if None not in pair else ()
    found = _one(words, title, told=False)
    return () if found is None else (found,)


def _one(words: str, title: str, *, told: bool) -> Coordinate | None:
    """The one coordinate that a text means; ``told`` where it is known to be one without letter or mark."""
    bare, letter = words.strip(), ""
    if bare[:1] in _AXES:
        bare, letter = bare[1:].strip(), bare[0]
    elif bare[-1:] in _AXES:
        bare, letter = bare[:-1].strip(), bare[-1]
    axis = _AXES.get(letter, "")
    size = _compact(bare, axis or title, told=told or bool(letter))
    if size is None:
        size = _sexagesimal(_COMMA.sub(".", bare), told=told or bool(letter))
    if size is None or abs(size) > _LIMITS[axis or title] or (letter and bare[:1] in "+-"):
        return None
    return Coordinate(round(-size if letter in ("S", "W") else size, 6) + 0.0, axis)


def _compact(bare: str, axis: str, *, told: bool) -> float | None:
    """Degrees of digits without marks, DDMM or DDMMSS (longitude DDDMM or DDDMMSS), with sign or letter."""
    match = _COMPACT.fullmatch(bare)
    digits, whole = (match["digits"], _WHOLE_DIGITS[axis]) if match else ("", 0)
    if match is None or len(digits) - whole not in (2, 4) or not (told or match["sign"]):
        return None
    pieces = [digits[:whole], *re.findall("..", digits[whole:])]
    pieces[-1] += match["part"] or ""
    return _sum(match["sign"], pieces)


def _sexagesimal(bare: str, *, told: bool) -> float | None:
    """Degrees of a text with marks, colons or blanks between degrees, minutes and seconds."""
    match = _SEXAGESIMAL.fullmatch(bare)
    if match is None or not (told or re.search("[°:']", bare)):
        return None
    return _sum(match["sign"], [piece for piece in match.group("degrees", "minutes", "seconds") if piece])


def _sum(sign: str, pieces: list[str]) -> float | None:
    """Degrees of degrees, minutes and seconds; only the last may have a fraction, and sixty carry over."""
    if any("." in piece for piece in pieces[:-1]) or any(float(piece) >= 60.0 for piece in pieces[1:]):
        return None
    size = sum(float(piece) / 60.0**place for place, piece in enumerate(pieces))
    return -size if sign == "-" else size
