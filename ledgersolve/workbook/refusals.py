"""Why a file cannot be taken as a workbook at all: one entry a reason, in the analyst's words."""

from ledgersolve.workbook.problems import Problem, UnreadableWorkbookError

EXPECTED = "a workbook saved as .xlsx or .xlsm, without a password"

COPY_AGAIN = "copy the file again; if that does not help, open it, save it as .xlsx and hand in the new file"
SAVE_AS = "open the file in your spreadsheet program, choose Save as, take the type .xlsx, and hand in that file"
SMALLER = "leave only the sheets that the job needs, as plain values, and hand in that file"

REASONS: dict[str, tuple[str, str]] = {
    # kind: what was found, what to do
    "not a file": ("this is not a plain file", "hand in the workbook itself, not a folder or a shortcut to it"),
    "lock file": ("this is the note a spreadsheet program leaves beside an open workbook",
                  "close the workbook and hand in the workbook itself"),
    "cannot be read": ("the file cannot be opened for reading: {detail}",
                       "give the service the right to read it, or hand in a copy of it"),
    "empty file": ("the file is empty (0 bytes)", COPY_AGAIN),
    "file too large": ("the file has {detail}", SMALLER),
    "zeros": ("the file holds nothing but zeros, as a copy that was never finished does", COPY_AGAIN),
    "old workbook": ("this is a workbook of the old type .xls", SAVE_AS),
    "password": ("the workbook is protected by a password for opening",
                 "open it, take the password off (File, Info, Protect workbook), save it as .xlsx without "
                 "password, and hand in that file"),
    "old office file": ("this is an office file of the old kind, not an .xlsx workbook", SAVE_AS),
    "OpenDocument": ("this is an OpenDocument spreadsheet (.ods)", SAVE_AS),
    "binary workbook": ("this is a binary workbook (.xlsb)", SAVE_AS),
    "web page": ("this is a web page (HTML), not a workbook", SAVE_AS),
    "XML file": ("this is an XML file, not a workbook", SAVE_AS),
    "text file": ("this is a text file (such as .csv), not a workbook", SAVE_AS),
    "PDF": ("this is a PDF document, not a workbook",
            "hand in the workbook it was printed from, saved as .xlsx"),
    "other document": ("this is an office document of another kind: {detail}",
                       "copy the tables into a workbook, save it as .xlsx, and hand in that file"),
    "archive": ("this is a plain zip archive, not a workbook",
                "unpack it and hand in the workbooks in it one by one"),
    "not a workbook": ("the file is none of the kinds of workbook", SAVE_AS),
    "cut off": ("the file is cut off: its end is missing, as in a copy that was not finished", COPY_AGAIN),
    "bytes before": ("something stands before the beginning of the workbook in the file", COPY_AGAIN),
    "bytes behind": ("something stands behind the end of the workbook in the file", COPY_AGAIN),
    "damaged": ("the file is damaged: {detail}", COPY_AGAIN),
    "duplicate part": ("the file holds the part {detail} twice: it is not clear which counts", SAVE_AS),
    "part name": ("the file holds a part with a name that is not allowed: {detail}", SAVE_AS),
    "compression": ("the part {detail} is packed by a method that workbooks do not use", SAVE_AS),
    "encrypted part": ("the part {detail} is locked by a zip password",
                       "take the password off and hand in that file"),
    "overlap": ("the parts {detail} lie on top of each other in the file", SAVE_AS),
    "too many parts": ("the file has {detail} parts inside", SMALLER),
    "too large inside": ("unpacked, the workbook is too large: {detail}", SMALLER),
    "packed too densely": ("the part {detail}, far more than a workbook has",
                           "save the workbook under a new name and hand in that file"),
    "too many cells": ("the sheet {detail}", SMALLER),
    "too many rows": ("the sheet {detail}",
                      "leave out the rows that cannot matter, or give what is known for each pair as a matrix, and "
                      "hand in that file"),
    "too many names": ("the workbook holds more than {detail} defined names",
                       "delete the names that nothing needs (Formulas, Name Manager) and hand in the workbook again"),
    "no content list": ("the list of contents of the workbook ([Content_Types].xml) is missing", SAVE_AS),
    "no workbook part": ("the file does not say where its workbook part is", SAVE_AS),
    "strict": ("the workbook is saved as Strict Open XML, which cannot be given back whole",
               "choose Save as, take the type Excel workbook (.xlsx) - not Strict - and hand in that file"),
    "signed": ("the workbook carries a digital signature, which any added sheet would break",
               "hand in a copy without the signature (File, Info, View signatures, Remove)"),
    "entity definitions": ("the part {detail} holds definitions (DTD) that no workbook needs and that can do "
                           "harm", SAVE_AS),
    "broken XML": ("the part {detail}", SAVE_AS),
    "no sheet": ("the workbook has no sheet with cells", SAVE_AS),
}


def refusal(kind: str, detail: str = "") -> UnreadableWorkbookError:
    """The error to raise for a reason of ``REASONS``; ``detail`` goes into its words."""
    found, remedy = REASONS[kind]
    return UnreadableWorkbookError(Problem(
        severity="error", kind=kind, sheet="", cell="", title="",
        found=found.format(detail=shown(detail)), expected=EXPECTED, remedy=remedy))


def shown(text: str, most: int = 120) -> str:
    """Text from a file made safe to show: control characters as U+XXXX, cut where long."""
    safe = "".join(
        character if character.isprintable() else f"<U+{ord(character):04X}>" for character in text)
    return safe if len(safe) <= most else safe[:most - 1] + "…"
