"""LibreOffice without a screen, as the program in which an analyst opens, mends and saves a workbook."""

import shutil
import subprocess
import tempfile
from pathlib import Path

import pytest

PROGRAM = shutil.which("soffice") or shutil.which("libreoffice")

needs_office = pytest.mark.skipif(PROGRAM is None, reason="LibreOffice is not installed here")


def saved_by_office(path: Path, folder: Path, kind: str = "xlsx") -> Path:
    """Open a workbook and save it into another folder as ``kind``; gives the new file."""
    assert PROGRAM is not None
    with tempfile.TemporaryDirectory() as profile:
        subprocess.run(
            [PROGRAM, "--headless", "--norestore", f"-env:UserInstallation=file://{profile}", "--convert-to", kind,
             "--outdir", str(folder), str(path)], check=True, capture_output=True, timeout=180)
    return folder / f"{path.stem}.{kind}"
