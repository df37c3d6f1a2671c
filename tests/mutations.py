"""Random damage to the parts of a workbook: deleted, doubled and foreign pieces of XML, odd attribute values."""

import random
import re

PIECES = [b"<", b">", b'"', b"/", b"&amp;", b"<!--", b"-->", b"<![CDATA[", b"]]>", b"x:", b"sheet", b"1", b"-1",
          b"99999999999", b'r:id=""', b' t="s"', b"<c/>", b"<v/>", b"<si/>", b"rId1", b"\0", b"\xff", b"<sheetData/>",
          b"</sheetData>", b'count="x"', b'localSheetId="-5"', b'sheetId="abc"', b'priority="x"', b"<!DOCTYPE x>"]
VALUES = [b"", b"0", b"-1", b"99999999", b"x", b"../../x", b"A1:XFD1048576", b"#REF!", b"_ledgersolve_sheet"]
TEXTS = [b"", b"0", b"-1", b"1e300", b"NaN", b"1,5", b"Total", b"yes", b"HAM", b"site selection", b"lot sizing",
         b"=1+1", b"7", b"3", b"99999", b"x" * 300, b"2027-01-04", b"TRUE", b"#N/A"]
OFTEN = re.compile(r"\[Content_Types\]\.xml|_rels/\.rels|xl/(workbook|styles|sharedStrings)\.xml|"
                   r"xl/_rels/workbook\.xml\.rels|xl/worksheets/(_rels/)?sheet\d+\.xml(\.rels)?")


def mutated(parts: dict[str, bytes], draw: random.Random) -> dict[str, bytes]:
    """The parts with one to four changes."""
    changed = dict(parts)
    for _ in range(draw.choice((1, 1, 1, 2, 4))):
        names = [name for name in changed if name.endswith((".xml", ".rels"))]
        often = [name for name in names if OFTEN.fullmatch(name)]
        name = draw.choice(names if draw.random() < 0.3 or not often else often)
        content = bytearray(changed[name])
        if draw.random() < 0.03 or not content:
            del changed[name]
        else:
            _mutate(content, draw)
            changed[name] = bytes(content)
    return changed


def retyped(parts: dict[str, bytes], draw: random.Random) -> dict[str, bytes]:
    """The parts with one to three texts between tags replaced: still a workbook, with other contents."""
    changed = dict(parts)
    names = [name for name in changed if name.startswith("xl/worksheets/sheet") or name == "xl/sharedStrings.xml"]
    for _ in range(draw.choice((1, 1, 2, 3))):
        content = bytearray(changed[name := draw.choice(names)])
        _replace_one(content, rb"(?<=>)[^<>]+(?=</[vt]>)", draw.choice(TEXTS), draw)
        changed[name] = bytes(content)
    return changed


def _mutate(content: bytearray, draw: random.Random) -> None:
    start = draw.randrange(len(content))
    end = start + draw.choice((1, 1, 3, 10, 50))
    way = draw.random()
    if way < 0.2:
        del content[start:end]
    elif way < 0.55:
        content[start:start] = draw.choice(PIECES)
    elif way < 0.65:
        content[start] = draw.randrange(256)
    elif way < 0.75:
        content[start:end] *= 2
    elif way < 0.9:
        _replace_one(content, rb'"[^"]*"', b'"' + draw.choice(VALUES) + b'"', draw)
    else:
        _replace_one(content, rb"<[^<>]*>", b"", draw)


def _replace_one(content: bytearray, pattern: bytes, new: bytes, draw: random.Random) -> None:
    found = list(re.finditer(pattern, bytes(content)))
    if found:
        match = draw.choice(found)
        content[match.start():match.end()] = new
