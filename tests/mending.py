"""Mending a workbook by hand in LibreOffice, without a screen: cells typed and cleared, rows taken out.

Unlike a library that writes cells, the program moves the references of formulas when a row is taken out, and
calculates them anew: what an analyst would see of a live status is what is told.
"""

import os
import subprocess
from collections.abc import Sequence
from functools import partial
from pathlib import Path

from tests.recalculation import OFFICE, profile

Step = tuple[str, ...]
"""``("type", sheet, cell, text)`` as on the keyboard, ``("clear", sheet, cell)``, ``("take out", sheet, row)``."""

_MODULE = """<?xml version="1.0" encoding="UTF-8"?>
<!DOCTYPE script:module PUBLIC "-//OpenOffice.org//DTD OfficeDocument 1.0//EN" "module.dtd">
<script:module xmlns:script="http://openoffice.org/2000/script" script:name="Mending" script:language="StarBasic">
Sub Mend(orders As String, answered As String)
 Dim hidden(0) As New com.sun.star.beans.PropertyValue
 hidden(0).Name = "Hidden" : hidden(0).Value = True
 store = CreateUnoService("com.sun.star.ucb.SimpleFileAccess")
 reader = CreateUnoService("com.sun.star.io.TextInputStream")
 reader.setInputStream(store.openFileRead(ConvertToURL(orders)))
 reader.setEncoding("UTF-8")
 answers = CreateUnoService("com.sun.star.io.TextOutputStream")
 answers.setOutputStream(store.openFileWrite(ConvertToURL(answered)))
 answers.setEncoding("UTF-8")
 Do While Not reader.isEOF()
  given = Split(reader.readLine(), Chr(9))
  Select Case given(0)
  Case "open"
   book = StarDesktop.loadComponentFromURL(ConvertToURL(given(1)), "_blank", 0, hidden())
  Case "type"
   book.Sheets.getByName(given(1)).getCellRangeByName(given(2)).FormulaLocal = given(3)
  Case "clear"
   book.Sheets.getByName(given(1)).getCellRangeByName(given(2)).clearContents(1023)
  Case "take out"
   book.Sheets.getByName(given(1)).Rows.removeByIndex(CLng(given(2)) - 1, 1)
  Case "tell"
   book.calculateAll()
   told = ""
   For Each line In book.Sheets.getByName(given(1)).getCellRangeByName(given(2)).getDataArray()
    told = told &amp; line(0) &amp; Chr(9)
   Next
   answers.writeString(told &amp; Chr(10))
   book.close(True)
  End Select
 Loop
 reader.closeInput()
 answers.closeOutput()
End Sub
</script:module>
"""
_LIBRARY = """<?xml version="1.0" encoding="UTF-8"?>
<!DOCTYPE library:library PUBLIC "-//OpenOffice.org//DTD OfficeDocument 1.0//EN" "library.dtd">
<library:library xmlns:library="http://openoffice.org/2000/library" library:name="Standard" library:readonly="false"
 library:passwordprotected="false">
 <library:element library:name="Mending"/>
</library:library>
"""


def mend(books: Sequence[tuple[Path, Sequence[Step]]], sheet: str, area: str, folder: Path,
         seconds: float = 280.0) -> list[list[str]]:
    """Open each workbook, take its steps in turn and calculate; gives what a column of cells then says in each."""
    if OFFICE is None:
        raise RuntimeError("LibreOffice is not installed")
    user = profile(folder)
    start = [OFFICE, f"-env:UserInstallation={user.as_uri()}", "--headless", "--norestore"]
    run = partial(subprocess.run, check=True, capture_output=True, timeout=seconds,
                  env={**os.environ, "HOME": str(folder)})
    run([*start, "--terminate_after_init"])  # a first start writes a library of its own over any other
    library = user / "user" / "basic" / "Standard"
    (library / "script.xlb").write_text(_LIBRARY, encoding="utf-8")
    (library / "Mending.xba").write_text(_MODULE, encoding="utf-8")
    lines: list[Step] = []
    for source, steps in books:
        lines += [("open", str(source)), *steps, ("tell", sheet, area)]
    orders, answered = folder / "orders.txt", folder / "answered.txt"
    orders.write_text("\n".join("\t".join(line) for line in lines), encoding="utf-8")
    run([*start, f"macro:///Standard.Mending.Mend({orders},{answered})"])
    told = [line.split("\t") for line in answered.read_text(encoding="utf-8").splitlines()]
    if len(told) != len(books):
        raise RuntimeError(f"LibreOffice answered {len(told)} of {len(books)} workbooks")
    return told
