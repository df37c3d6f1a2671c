"""The picture of sites and customers: round degrees that are true, whatever the extent, and nothing outside."""

import zipfile
from pathlib import Path

import numpy as np
import pytest

from ledgersolve.report.site_map import PLOT_RATIO, map_scale
from tests import report_cases
from tests.report_books import returned, site_report


@pytest.mark.parametrize("extent", [0.0, 0.004, 0.03, 0.2, 1.5, 7.0, 40.0, 110.0])
def test_marks_stand_where_their_figures_say(extent: float) -> None:
    """From one street to a continent: every mark's figure, as written, is where the mark is."""
    for seed in range(20):
        rng = np.random.default_rng(seed)
        middle = np.array([rng.uniform(-120, 120), rng.uniform(-20, 60)])
        places = middle + rng.uniform(-0.5, 0.5, (9, 2)) * np.array([extent, extent / 3])
        scale = map_scale(places)
        axes = ((scale.across, scale.step_across), (scale.up, scale.step_up))
        for ((start, end), step), shown in zip(axes, scale.formats, strict=True):
            decimals = len(shown.partition(".")[2])
            marks = np.arange(start, end, step)
            assert 3 <= marks.size <= 14
            assert np.abs(marks - np.array([float(f"{mark:.{decimals}f}") for mark in marks])).max() < 1e-9 * 180
            assert abs(start / step - round(start / step)) < 1e-6


@pytest.mark.parametrize("seed", range(20))
def test_every_point_is_inside_and_a_mile_is_a_mile(seed: int) -> None:
    """No point touches the frame, and a mile is as long sideways as upwards."""
    rng = np.random.default_rng(seed)
    places = np.column_stack([rng.uniform(5, 15, 12), rng.uniform(47, 55, 12)])
    places[3] = np.nan
    scale = map_scale(places)
    known = places[np.isfinite(places).all(axis=1)]
    for axis, (start, end) in enumerate((scale.across, scale.up)):
        assert start < known[:, axis].min()
        assert known[:, axis].max() < end
    squeeze = np.cos(np.radians((known[:, 1].min() + known[:, 1].max()) / 2))
    wide, tall = scale.across[1] - scale.across[0], scale.up[1] - scale.up[0]
    assert wide * squeeze / tall == pytest.approx(PLOT_RATIO)


def test_round_degrees_by_hand() -> None:
    """A country of some degrees: marks at whole degrees, written without decimals."""
    scale = map_scale(np.array([[6.0, 47.5], [14.8, 54.9]]))
    assert (scale.step_up, scale.up[0] % 2) == (2.0, 0.0)
    assert scale.formats == ("0", "0")
    town = map_scale(np.array([[2.30, 48.84], [2.40, 48.88]]))
    assert town.formats == ("0.00", "0.00")


def test_the_chart_says_where_its_marks_are(tmp_path: Path) -> None:
    """Begin, distance of marks and number format stand in the chart of the first page."""
    source = report_cases.rich_site_book(tmp_path / "sites.xlsx")
    given = site_report(source)
    case = given.case
    scale = map_scale(np.vstack([np.column_stack([case.site_longitude, case.site_latitude]),
                                 np.column_stack([case.customer_longitude, case.customer_latitude])]))
    with zipfile.ZipFile(returned(source, tmp_path / "out.xlsx", given)) as package:
        charts = [package.read(name).decode() for name in package.namelist() if "/charts/" in name]
    chart = next(text for text in charts if "scatterChart" in text)
    assert f'<c:majorUnit val="{scale.step_across}"/>' in chart
    assert f'<c:majorUnit val="{scale.step_up}"/>' in chart
    assert f'<c:min val="{scale.across[0]}"/>' in chart
    for shown in scale.formats:
        assert f'<c:numFmt formatCode="{shown}" sourceLinked="0"/>' in chart
