"""Text that a cell of a workbook can hold."""

import re

MOST_TEXT = 32_767
CUT_MARK = " [... cut here: longer than a cell can hold]"

_NOT_IN_XML = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x84\x86-\x9f\ufffe\uffff]")
_LONE_SURROGATE = re.compile("[\ud800-\udfff]")


def clean_text(text: str) -> str:
    """Text that a cell can hold: no control characters, no half characters, at most 32,767 long.

    Length counts UTF-16 units, as the file format does; longer text ends in a visible mark.
    """
    if text.isascii() and text.isprintable() and len(text) <= MOST_TEXT:
        return text
    plain = text.replace("\r\n", "\n").replace("\r", "\n")
    plain = _LONE_SURROGATE.sub("�", _NOT_IN_XML.sub("", plain))
    if len(plain) * 2 <= MOST_TEXT:
        return plain
    units = plain.encode("utf-16-le")
    if len(units) // 2 <= MOST_TEXT:
        return plain
    kept = units[: 2 * (MOST_TEXT - len(CUT_MARK))].decode("utf-16-le", errors="ignore")
    return kept + CUT_MARK
