"""Make the pictures of the README again: ``python inbox_demo/make_pictures.py``.

Solves two of the demo workbooks, prints their first sheets with LibreOffice and cuts off the empty rest of the
page. Needs ``soffice`` and ``pdftoppm``; a font with the measures of Arial (Liberation Sans) makes them look as
they do on a desk.
"""

import subprocess
import tempfile
from pathlib import Path

import numpy as np

from ledgersolve import solve_workbook

HERE = Path(__file__).resolve().parent
PICTURES = {"decision": "1 depots from coordinates", "to_fix": "4 eight faults"}
RESOLUTION = 110
FOOTER = 0.94
"""Part of the page above its footer."""
MARGIN = 12
"""White pixels left around what is shown."""


def main() -> None:
    """Make every picture."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        for picture, demo in PICTURES.items():
            returned = solve_workbook(HERE / f"{demo}.xlsx", folder).returned
            take(printed(Path(str(returned)), folder), HERE / "pictures" / picture)


def printed(book: Path, folder: Path) -> Path:
    """A workbook as LibreOffice prints it."""
    profile = f"-env:UserInstallation={(folder / 'profile').as_uri()}"
    subprocess.run(["soffice", profile, "--headless", "--convert-to", "pdf", "--outdir", str(folder), str(book)],
                   check=True, capture_output=True)
    return folder / f"{book.stem}.pdf"


def take(pdf: Path, picture: Path) -> None:
    """Write the first page as a picture, without the white around it and without the footer."""
    page = ["pdftoppm", "-r", str(RESOLUTION), "-singlefile", "-f", "1", "-l", "1"]
    grey = pixels(subprocess.run([*page, "-gray", str(pdf)], check=True, capture_output=True).stdout)
    ink = np.argwhere(grey[: int(FOOTER * grey.shape[0])] < 255)
    (top, left), (bottom, right) = ink.min(axis=0) - MARGIN, ink.max(axis=0) + MARGIN
    cut = ["-x", left, "-y", top, "-W", right - left, "-H", bottom - top]
    subprocess.run([*page, *map(str, cut), "-png", str(pdf), str(picture)], check=True)


def pixels(image: bytes) -> np.ndarray:
    """Shape (height, width): grey levels of a portable graymap."""
    _, size, _, data = image.split(b"\n", 3)
    width, height = map(int, size.split())
    return np.frombuffer(data, dtype=np.uint8).reshape(height, width)


if __name__ == "__main__":
    main()
