"""LibreOffice as an independent calculator: convert headless, always recalculating, and compare with cached values.

A workbook's formulas must give, in another program, the values that were written beside them.
"""

import math
import os
import shutil
import subprocess
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import openpyxl

OFFICE = shutil.which("soffice") or shutil.which("libreoffice")

_ALWAYS = """<?xml version="1.0" encoding="UTF-8"?>
<oor:items xmlns:oor="http://openoffice.org/2001/registry" xmlns:xs="http://www.w3.org/2001/XMLSchema"
 xmlns:xsi="http://www.w3.org/2001/XMLSchema-instance">
<item oor:path="/org.openoffice.Office.Calc/Formula/Load"><prop oor:name="OOXMLRecalcMode" oor:op="fuse">
<value>0</value></prop></item>
<item oor:path="/org.openoffice.Office.Calc/Formula/Load"><prop oor:name="ODFRecalcMode" oor:op="fuse">
<value>0</value></prop></item>
</oor:items>
"""


@dataclass(frozen=True)
class Difference:
    """A formula whose cached value is not what recalculating gives."""

    sheet: str
    cell: str
    formula: str
    cached: object
    recalculated: object


def profile(folder: Path) -> Path:
    """Make a LibreOffice profile that recalculates every workbook on loading."""
    user = folder / "profile" / "user"
    user.mkdir(parents=True, exist_ok=True)
    (user / "registrymodifications.xcu").write_text(_ALWAYS, encoding="utf-8")
    return folder / "profile"


def convert(sources: Sequence[Path], folder: Path, kind: str = "xlsx", seconds: float = 280.0) -> list[Path]:
    """Convert workbooks with LibreOffice, recalculated, in one go; gives the new files in ``folder``."""
    if OFFICE is None:
        raise RuntimeError("LibreOffice is not installed")
    target = folder / "converted"
    target.mkdir(parents=True, exist_ok=True)
    command = [OFFICE, f"-env:UserInstallation={profile(folder).as_uri()}", "--headless", "--norestore",
               "--convert-to", kind, "--outdir", str(target), *map(str, sources)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=seconds, check=False,
                          env={**os.environ, "HOME": str(folder)})
    made = [target / f"{source.stem}.{kind}" for source in sources]
    if not all(path.is_file() for path in made):
        raise RuntimeError(f"LibreOffice gave nothing: {done.stdout} {done.stderr}")
    return made


def recalculated_all(sources: Sequence[Path], folder: Path) -> "dict[Path, openpyxl.Workbook]":
    """Give the values of workbooks (of different names) after LibreOffice has calculated every formula anew."""
    made = convert(sources, folder)
    return {source: openpyxl.load_workbook(path, data_only=True) for source, path in zip(sources, made, strict=True)}


def differences(source: Path, again: "openpyxl.Workbook") -> list[Difference]:
    """List the formulas of ``source`` whose cached value differs from the recalculated one.

    Figures count as equal within 1e-9 of their size; no text and an empty cell are the same.
    """
    formulas = openpyxl.load_workbook(source)
    cached = openpyxl.load_workbook(source, data_only=True)
    found = []
    for name in formulas.sheetnames:
        for row in formulas[name].iter_rows():
            for cell in row:
                if cell.data_type != "f":
                    continue
                before, after = cached[name][cell.coordinate].value, again[name][cell.coordinate].value
                if not same(before, after):
                    found.append(Difference(name, cell.coordinate, str(cell.value), before, after))
    return found


def same(before: object, after: object) -> bool:
    """Whether two cell values are equal as a reader sees them."""
    numbers = (int, float)
    if isinstance(before, numbers) and isinstance(after, numbers):
        return math.isclose(before, after, rel_tol=1e-9, abs_tol=1e-9)
    return (before or "") == (after or "")
