"""XML of a workbook through expat, with document type definitions refused wherever they stand.

Without a definition there are no entities besides the five of XML itself: nothing can be expanded and
nothing fetched. Names arrive as ``namespace name``; the constants are those of the transitional form.
"""

from collections.abc import Callable, Iterable
from xml.parsers import expat

from ledgersolve.workbook.refusals import refusal

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
RELATIONS = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
PACKAGE_RELATIONS = "http://schemas.openxmlformats.org/package/2006/relationships"
CONTENT_TYPES = "http://schemas.openxmlformats.org/package/2006/content-types"
STRICT = "http://purl.oclc.org/ooxml/"

_UNICODE = ("UTF-8", "UTF-16", "UTF-16LE", "UTF-16BE")
_BYTES = bytes(range(256))

Attributes = dict[str, str]
OnStart = Callable[[str, Attributes], object]
OnText = Callable[[str], object]
OnEnd = Callable[[str], object]


def whole(text: str | None, default: int = 0) -> int:
    """A whole number of at most nine digits as it stands in an attribute; ``default`` for anything else."""
    return int(text) if text is not None and len(text) < 10 and text.isdecimal() else default


def escape(text: str) -> str:
    """Text as it stands between tags."""
    return text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")


def quoted_attribute(value: str) -> str:
    """Value of an attribute with its quotes; line ends and tabs outlast the next reading."""
    safe = escape(value).replace('"', "&quot;")
    return '"' + safe.replace("\n", "&#10;").replace("\r", "&#13;").replace("\t", "&#9;") + '"'


class _RootSeenError(Exception):
    """The root element was reached: nothing before it was a definition."""


def parser(part: str) -> expat.XMLParserType:
    """A namespace-aware expat parser that refuses a document type definition in ``part``."""
    made = expat.ParserCreate(namespace_separator=" ")
    made.buffer_text = True
    made.buffer_size = 1 << 16

    def refuse(*_: object) -> None:
        raise refusal("entity definitions", part)

    def declared(_version: str, encoding: str | None, _standalone: int) -> None:
        if encoding is not None and not _is_readable(encoding):
            raise refusal("broken XML", f"{part} is written in an encoding that cannot be read")

    made.StartDoctypeDeclHandler = refuse
    made.EntityDeclHandler = refuse
    made.XmlDeclHandler = declared
    return made


def _is_readable(encoding: str) -> bool:
    """Whether expat can read it: the Unicode ones it knows, and those of one byte a character."""
    try:
        return encoding.upper() in _UNICODE or len(_BYTES.decode(encoding, "replace")) == len(_BYTES)
    except (LookupError, ValueError):
        return False


def feed(reader: expat.XMLParserType, part: str, piece: bytes, *, last: bool = False) -> None:
    """Hand a piece to the parser; XML that is not well formed becomes words for the analyst."""
    try:
        reader.Parse(piece, last)
    except expat.ExpatError as error:
        raise refusal("broken XML", f"{part} is not well formed "
                      f"(line {error.lineno}: {expat.ErrorString(error.code)})") from None


def walk(part: str, pieces: Iterable[bytes], start: OnStart, text: OnText | None = None,
         end: OnEnd | None = None) -> None:
    """Parse a part to its end, calling ``start``, ``text`` and ``end`` as it goes."""
    reader = parser(part)
    reader.StartElementHandler = start
    if text is not None:
        reader.CharacterDataHandler = text
    if end is not None:
        reader.EndElementHandler = end
    for piece in pieces:
        feed(reader, part, piece)
    feed(reader, part, b"", last=True)


class PrologCheck:
    """Looks at what stands before the root element of a part and refuses a definition there.

    A definition cannot stand anywhere else. Broken XML is not this check's business: a part that is never
    read may be as it is.
    """

    def __init__(self, part: str) -> None:
        self._part = part
        self._reader = parser(part)
        self._reader.StartElementHandler = self._root
        self._reader.XmlDeclHandler = None
        self.done = False

    def _root(self, *_: object) -> None:
        raise _RootSeenError

    def feed(self, piece: bytes) -> None:
        """Look at the next piece."""
        try:
            self._reader.Parse(piece, False)
        except (_RootSeenError, expat.ExpatError, LookupError, ValueError):
            self.done = True
