"""The shared texts of a workbook, and texts as cells hold them."""

import re
from collections.abc import Iterable

from ledgersolve.workbook.container import Limits
from ledgersolve.workbook.markup import MAIN, Attributes, walk
from ledgersolve.workbook.refusals import refusal

_ESCAPE = re.compile("_x([0-9A-Fa-f]{4})_")


def unescaped(text: str) -> str:
    """Text with ``_x000A_`` and the like turned into the characters they stand for.

    A pair of halves (surrogates) becomes its one character; a half alone becomes the replacement sign.
    """
    if "_x" not in text:
        return text
    text = _ESCAPE.sub(lambda match: chr(int(match[1], 16)), text)
    return text.encode("utf-16", "surrogatepass").decode("utf-16", "replace")


def shared_strings(part: str, pieces: Iterable[bytes], limits: Limits) -> list[str]:
    """All texts in file order; runs of rich text joined, phonetic guides left out."""
    item, text, phonetic = f"{MAIN} si", f"{MAIN} t", f"{MAIN} rPh"
    found: list[str] = []
    collected: list[str] = []
    wanted = guide = False

    def start(name: str, _: Attributes) -> None:
        nonlocal wanted, guide
        if name == text:
            wanted = not guide
        elif name == phonetic:
            guide = True
        elif name == item:
            collected.clear()

    def end(name: str) -> None:
        nonlocal wanted, guide
        if name == text:
            wanted = False
        elif name == item:
            found.append(unescaped("".join(collected)))
            if len(found) > limits.strings:
                raise refusal("too large inside", f"more than {limits.strings:,} different texts")
        elif name == phonetic:
            guide = False

    def characters(piece: str) -> None:
        if wanted:
            collected.append(piece)

    walk(part, pieces, start, characters, end)
    return found
