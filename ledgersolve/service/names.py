"""Names: which are no drops, how a name is shown, and what a returned file is called."""

import re
import unicodedata
from pathlib import PurePath

MOST_BYTES = 200
"""Longest returned name. File systems take 255; the rest is for the path, which Windows counts in."""


_TEMPORARY = re.compile(
    r"""
    ~\$.* | \.~lock\..*\# | \._.*          # somebody has it open; a Mac's second half of a file
    | \..*                                 # hidden; also the temporary names of rsync
    | .*\.tmp | .*\.part | .*\.partial | .*\.crdownload | .*\.filepart | .*\.download
    | ~syncthing~.* | .*\.~[0-9a-z]{2,}    # sync programs
    | [0-9a-f]{8}                          # a spreadsheet program saving: eight hex digits, no ending
    | thumbs\.db | desktop\.ini | @eadir | \#recycle | system\ volume\ information
    """,
    re.IGNORECASE | re.VERBOSE | re.DOTALL,
)
_BARE_ENDING = re.compile(r"\.xls[xm]", re.IGNORECASE)
_CONFLICT = re.compile(r"conflicted copy|\bconflict\b|\.sync-conflict-|-DESKTOP-[0-9A-Z]+", re.IGNORECASE)
_FORMER = re.compile(r" \[[0-9A-Z]{6,13}\] (solved|to fix|failed)$")
_NOT_PLAIN = frozenset(("Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp", "Zs"))
_UNSAFE = re.compile(r'[<>:"/\\|?*]')


def is_temporary(name: str) -> bool:
    """Whether a name belongs to a program at work rather than to a drop; such names are never touched."""
    return bool(_TEMPORARY.fullmatch(name)) and not _BARE_ENDING.fullmatch(name)


def is_conflict_copy(name: str) -> bool:
    """Whether a sync program made this name; it is a drop all the same, but worth a warning."""
    return bool(_CONFLICT.search(name))


def owner_marks(name: str) -> tuple[str, str]:
    """The names beside a workbook that say that a spreadsheet program has it open."""
    return f"~${name}", f".~lock.{name}#"


def same_name_key(name: str) -> str:
    """What two names that people take for one have in common; never used on the disk."""
    return unicodedata.normalize("NFC", unicodedata.normalize("NFC", name).casefold())


def show(name: str) -> str:
    """A name as it may be shown: control, direction and undecodable characters spelled out."""
    return "".join(character if _is_plain(character) else _spelled(character) for character in name)


def _is_plain(character: str) -> bool:
    return character == " " or unicodedata.category(character) not in _NOT_PLAIN


def _spelled(character: str) -> str:
    code = ord(character)
    if 0xDC80 <= code <= 0xDCFF:
        return f"\\x{code - 0xDC00:02x}"
    return f"U+{code:04X}"


def _clean(text: str) -> str:
    """Text that every file system and program takes as (part of) a name, code points otherwise kept."""
    kept = "".join(character if _is_plain(character) else "_" for character in text)
    kept = _UNSAFE.sub("_", kept).strip(" ").rstrip(". ")
    if kept[:1] in ("-", "=", "+", "@", ".", "~", "$"):
        kept = "_" + kept[1:]
    return kept or "workbook"


def ending(name: str) -> str:
    """``.xlsx`` or ``.xlsm``, whatever the case in the name; ``.xlsx`` for all other names."""
    return ".xlsm" if name.lower().endswith(".xlsm") else ".xlsx"


def stem(name: str) -> str:
    """The name without a workbook's ending and without what an earlier return added to it."""
    bare = name[:-5] if _BARE_ENDING.fullmatch(name[-5:]) else name
    return _FORMER.sub("", bare)


def returned_name(name: str, short_id: str, outcome: str, suffix: str) -> str:
    """``NAME [id] outcome.xlsx``: safe on every system, cut to fit, never the name of another job.

    Parameters
    ----------
    name
        The drop's name as it stands on the disk.
    short_id
        The part of the job's id that people see.
    outcome
        ``solved``, ``to fix`` or ``failed``.
    suffix
        ``.xlsx`` or ``.xlsm``.
    """
    tail = f" [{short_id}] {outcome}{suffix}"
    return cut(_clean(stem(name)), MOST_BYTES - len(tail)) + tail


def private_name(name: str) -> str:
    """Name of the private copy that the child reads: it names the workbook where it has no title."""
    suffix = PurePath(name).suffix
    kept = suffix if re.fullmatch(r"\.[A-Za-z0-9]{1,8}", suffix) else ""
    return cut(_clean(name.removesuffix(kept)), 150) + kept


def cut(text: str, most: int) -> str:
    """The longest start of a text within ``most`` bytes of UTF-8 (which is never fewer UTF-16 units)."""
    if len(text.encode("utf-8")) <= most:
        return text
    shorter = text.encode("utf-8")[:most].decode("utf-8", "ignore")
    while shorter and unicodedata.combining(text[len(shorter)]):
        text, shorter = shorter, shorter[:-1]
    return shorter.rstrip(" .")
