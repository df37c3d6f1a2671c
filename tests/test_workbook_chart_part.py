"""Charts say every switch whose default depends on the version of the program that a workbook names."""

import io
import re
import shutil
import subprocess
import zipfile
from pathlib import Path
from xml.etree import ElementTree

import pytest

from ledgersolve.workbook.chart_part import spelled_out
from ledgersolve.workbook.render import render
from ledgersolve.workbook.sheets import Area, Chart, ResultSheet, Series
from tests.recalculation import OFFICE, convert

CHART = "{http://schemas.openxmlformats.org/drawingml/2006/chart}"
KINDS = ("column", "bar", "stacked column", "stacked bar", "line", "scatter", "step")
SHOWN = ("showLegendKey", "showVal", "showCatName", "showSerName", "showPercent", "showBubbleSize")
VERSIONS = ("12.0000", "16.0300", "3.1", "")


def book_of(kind: str) -> bytes:
    """A workbook with one chart: two series, labels at the points of the first, a gap in the second."""
    sheet = ResultSheet("Decision", footer="")  # the usual one names the file
    for row, figure in enumerate((3.0, 1.0, 2.0, 5.0)):
        sheet.put(row, 0, float(row) if kind == "scatter" else f"part {row}")
        sheet.put(row, 1, figure)
        sheet.put(row, 2, figure + 1 if row != 1 else None)
    first, last = Area("Decision", 0, 0, 3, 0), Area("Decision", 0, 2, 3, 2)
    series = (Series("Cost", first, Area("Decision", 0, 1, 3, 1), "0F4C5C", marker="diamond",
                     labels=kind != "scatter", point_labels=("a", "b", "c", "d") if kind == "scatter" else ()),
              Series("Limit", first, last, "8A3B12", kind="line" if kind == "column" else "", marker="square",
                     dash="solid"))
    sheet.charts.append(Chart(kind, "Costs", series, 5, 0, x_title="part", y_title="EUR"))
    target = io.BytesIO()
    render([sheet], target)
    return target.getvalue()


def chart_of(data: bytes) -> str:
    """Text of the chart's part."""
    with zipfile.ZipFile(io.BytesIO(data)) as package:
        return package.read("xl/charts/chart1.xml").decode()


def said(element: ElementTree.Element, name: str) -> str | None:
    """What the element's switch says; None where it is left out."""
    found = element.find(f"{CHART}{name}")
    return None if found is None else found.get("val")


@pytest.mark.parametrize("kind", KINDS)
def test_no_switch_is_left_to_the_reader(kind: str) -> None:
    """Lines are straight, axes have marks outside only, labels have no key, gaps stay gaps: all in so many words."""
    root = ElementTree.fromstring(chart_of(book_of(kind)))
    for axis in [*root.iter(f"{CHART}catAx"), *root.iter(f"{CHART}valAx")]:
        assert [said(axis, name) for name in ("delete", "majorTickMark", "minorTickMark")] == ["0", "out", "none"]
    for plot in [*root.iter(f"{CHART}lineChart"), *root.iter(f"{CHART}scatterChart")]:
        assert [said(series, "smooth") for series in plot.findall(f"{CHART}ser")].count("0") == len(
            plot.findall(f"{CHART}ser"))
    for plot in root.iter(f"{CHART}barChart"):
        assert {said(series, "invertIfNegative") for series in plot.findall(f"{CHART}ser")} == {"0"}
    labels = [*root.iter(f"{CHART}dLbl"), *root.iter(f"{CHART}dLbls")]
    assert labels
    for label in labels:
        assert [said(label, name) for name in SHOWN] == ["0", "1", "0", "0", "0", "0"]
    chart = root.find(f"{CHART}chart")
    assert chart is not None
    assert [said(chart, name) for name in ("autoTitleDeleted", "plotVisOnly", "dispBlanksAs")] == ["0", "1", "gap"]
    assert {said(title, "overlay") for title in root.iter(f"{CHART}title")} == {"0"}
    assert said(root, "roundedCorners") == "0"


@pytest.mark.parametrize("kind", KINDS)
def test_spelling_out_twice_changes_nothing(kind: str) -> None:
    """A part that says everything comes back as it is, declaration first."""
    text = chart_of(book_of(kind))
    assert text.startswith('<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n<c:chartSpace ')
    assert spelled_out(text) == text


def test_what_is_said_stays() -> None:
    """A switch that is written keeps its word, and an entry that is taken out gets no switches."""
    space = 'xmlns:c="http://schemas.openxmlformats.org/drawingml/2006/chart"'
    text = spelled_out(f'<c:chartSpace {space}><c:chart><c:title><c:overlay val="1"/></c:title><c:plotArea/>'
                       f'<c:dLbls><c:delete val="1"/></c:dLbls></c:chart></c:chartSpace>')
    assert '<c:title><c:overlay val="1"/></c:title><c:autoTitleDeleted val="0"/><c:plotArea/>' in text
    assert '<c:dLbls><c:delete val="1"/></c:dLbls>' in text


def versioned(data: bytes, version: str) -> bytes:
    """The workbook as if the program of this version had made it; "" = no version is named."""
    target = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as package, zipfile.ZipFile(target, "w") as copy:
        for name in package.namelist():
            part = package.read(name)
            if name == "docProps/app.xml":
                said_so = f"<AppVersion>{version}</AppVersion>".encode() if version else b""
                part, swaps = re.subn(rb"<AppVersion>[^<]*</AppVersion>", said_so, part)
                assert swaps == 1
            copy.writestr(name, part)
    return target.getvalue()


@pytest.mark.skipif(OFFICE is None or shutil.which("pdftoppm") is None, reason="LibreOffice or poppler is missing")
@pytest.mark.parametrize("kind", ["scatter", "column"])
def test_every_version_is_drawn_alike(kind: str, tmp_path: Path) -> None:
    """LibreOffice draws the same picture whichever version of which program the workbook names."""
    data = book_of(kind)
    books = [tmp_path / f"book{number}.xlsx" for number in range(len(VERSIONS))]
    for book, version in zip(books, VERSIONS, strict=True):
        book.write_bytes(versioned(data, version))
    drawn = [subprocess.run(["pdftoppm", "-r", "60", "-singlefile", str(page)], check=True, capture_output=True,
                            timeout=60).stdout for page in convert(books, tmp_path, "pdf")]
    assert len(drawn[0]) > 100_000
    assert all(picture == drawn[0] for picture in drawn)
