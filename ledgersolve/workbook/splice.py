"""Small edits in the text of XML parts that leave everything else as it stands, character for character.

Parsing and writing a part again would change its prefixes, its white space and what we do not know; so
parts of the analyst are cut and joined as text. Comments, CDATA and processing instructions are stepped over.
"""

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from html import unescape

from ledgersolve.workbook.markup import escape, quoted_attribute

_TAG = re.compile(
    r"""<!--.*?-->|<!\[CDATA\[.*?\]\]>|<\?.*?\?>"""
    r"""|<(?P<close>/?)(?P<name>[^\s/>!?]+)(?P<rest>(?:[^>"'/]++|"[^"]*"|'[^']*'|/(?!>))*+)(?P<empty>/?)>""",
    re.DOTALL)
_ATTRIBUTE = re.compile(r"""([^\s=]+)\s*=\s*(?:"([^"]*)"|'([^']*)')""")
_DECLARATION = re.compile(r"""^<\?xml[^>]*?\sencoding\s*=\s*(["'])([\w.:-]+)\1""")


@dataclass(frozen=True)
class Element:
    """Where an element stands in a text: [start, end); start tag up to ``inner``, content up to ``outer``.

    For an element without content (``<a/>``) ``inner``, ``outer`` and ``end`` are the same.
    """

    name: str
    prefix: str
    start: int
    inner: int
    outer: int
    end: int
    attributes: Mapping[str, str]

    @property
    def empty(self) -> bool:
        """Whether it is written without an end tag."""
        return self.outer == self.end

    def content(self, text: str) -> str:
        """What stands between its tags."""
        return text[self.inner:self.outer]

    def whole(self, text: str) -> str:
        """The element with its tags."""
        return text[self.start:self.end]


def children(text: str, start: int = 0, end: int | None = None) -> list[Element]:
    """Elements directly inside a stretch of text, in order; closing tags of outer ones are stepped over."""
    found: list[Element] = []
    depth = 0
    head: re.Match[str] | None = None
    for tag in _tags(text, start, len(text) if end is None else end):
        if tag["close"]:
            depth -= 1
            if depth == 0 and head is not None:
                found.append(_element(head, tag.start(), tag.end()))
            depth = max(depth, 0)
        elif depth == 0:
            head = tag
            if tag["empty"]:
                found.append(_element(tag, tag.end(), tag.end()))
            else:
                depth = 1
        elif not tag["empty"]:
            depth += 1
    return found


def root(text: str) -> Element:
    """The root element of a part.

    Raises
    ------
    ValueError
        Where there is none.
    """
    head = last = None
    for last in _tags(text, 0, len(text)):
        head = head or last
    if head is None or last is None:
        raise ValueError("the part has no root element")
    return _element(head, last.end() if head["empty"] else last.start(), last.end())


def attributes(tag: str) -> dict[str, str]:
    """Attributes of a start tag, by their names as written, values unescaped."""
    return {match[1]: unescape(match[2] if match[2] is not None else match[3])
            for match in _ATTRIBUTE.finditer(tag)}


def with_attributes(tag: str, values: Mapping[str, str | None]) -> str:
    """A start tag with attributes set, or taken out where the value is None; the rest as it stands."""
    for name, value in values.items():
        match = re.search(rf"""\s+{re.escape(name)}\s*=\s*(?:"[^"]*"|'[^']*')""", tag)
        written = "" if value is None else f" {name}={quoted_attribute(value)}"
        if match is not None:
            tag = tag[:match.start()] + written + tag[match.end():]
        elif value is not None:
            stem = tag[:-2].rstrip() if tag.endswith("/>") else tag[:-1]
            tag = stem + written + tag[len(stem):].lstrip()
    return tag


class Edits:
    """Replacements in one text, gathered first and made in one go."""

    def __init__(self, text: str) -> None:
        self.text = text
        self._made: list[tuple[int, int, str]] = []

    def replace(self, start: int, end: int, new: str) -> None:
        """Put ``new`` in place of [start, end)."""
        self._made.append((start, end, new))

    def remove(self, element: Element) -> None:
        """Take an element out."""
        self.replace(element.start, element.end, "")

    def set(self, element: Element, values: Mapping[str, str | None]) -> None:
        """Set attributes of an element."""
        tag = self.text[element.start:element.inner]
        self.replace(element.start, element.inner, with_attributes(tag, values))

    def result(self) -> str:
        """The edited text. Insertions at one place come in the order in which they were asked for."""
        pieces: list[str] = []
        place = 0
        for start, end, new in sorted(self._made, key=lambda edit: edit[:2]):
            pieces += [self.text[place:start], new]
            place = end
        return "".join([*pieces, self.text[place:]])


def with_content(text: str, element: Element, added: str,
                 values: Mapping[str, str | None] | None = None) -> str:
    """The element's whole text with ``added`` at the end of its content and attributes set."""
    tag = with_attributes(text[element.start:element.inner], values or {})
    if element.empty:
        qualified = f"{element.prefix}:{element.name}" if element.prefix else element.name
        return f"{tag[:-2].rstrip()}>{added}</{qualified}>"
    return f"{tag}{element.content(text)}{added}{text[element.outer:element.end]}"


def made(name: str, values: Mapping[str, str], namespace: str, parent: Element, content: str = "") -> str:
    """A new element for a place inside ``parent``, in ``namespace`` whatever prefixes the part uses."""
    written = "".join(f" {key}={quoted_attribute(value)}" for key, value in values.items())
    spaced = f' xmlns="{namespace}"' if parent.prefix else ""
    return f"<{name}{spaced}{written}>{content}</{name}>" if content else f"<{name}{spaced}{written}/>"


def escaped(text: str) -> str:
    """Text as the content of an element."""
    return escape(text)


def decoded(data: bytes) -> str:
    """Text of an XML part by its byte order mark or declaration; the declaration then says UTF-8."""
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        text = data.decode("utf-16")
    elif data[:2] == b"<\0" or data[:2] == b"\0<":
        text = data.decode("utf-16-le" if data[:1] == b"<" else "utf-16-be")
    else:
        match = _DECLARATION.match(data[:200].decode("latin-1"))
        text = data.decode("utf-8-sig" if match is None or match[2].lower() == "utf-8" else match[2])
    match = _DECLARATION.match(text)
    return text if match is None else text[:match.start(2)] + "UTF-8" + text[match.end(2):]


def _tags(text: str, start: int, end: int) -> Iterator[re.Match[str]]:
    return (match for match in _TAG.finditer(text, start, end) if match["name"])


def _element(head: re.Match[str], outer: int, end: int) -> Element:
    prefix, _, name = head["name"].rpartition(":")
    return Element(name, prefix, head.start(), head.end(), outer, end, attributes(head["rest"]))
