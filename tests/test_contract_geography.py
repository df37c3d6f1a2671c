"""Great-circle distances against published values and an independent formula."""

import math

import numpy as np
import pytest

from ledgersolve.contract.geography import EARTH_RADIUS_KM, KM_PER_MILE, great_circle
from tests.books import read_sheets, site_sheets


def distance(a: tuple[float, float], b: tuple[float, float], radius: float = EARTH_RADIUS_KM) -> float:
    """Distance of two points."""
    ends = [np.array([x]) for x in (*a, *b)]
    return float(great_circle(*ends, radius=radius)[0, 0])


def test_the_radius_is_the_mean_of_the_ellipsoid():
    """(2a + b) / 3 of WGS 84 (NIMA TR 8350.2; H. Moritz 2000), check case GEO-01."""
    a, flattening = 6_378_137.0, 1 / 298.257223563
    mean = (2 * a + a * (1 - flattening)) / 3
    assert mean == pytest.approx(6_371_008.7714, abs=1e-4)
    assert pytest.approx(mean / 1000, abs=1e-4) == EARTH_RADIUS_KM
    assert KM_PER_MILE == 1.609344


@pytest.mark.parametrize(("a", "b", "kilometres"), [
    ((36.12, -86.67), (33.94, -118.40), 2886.448430),
    ((33.95, -118.4), (40 + 38 / 60, -(73 + 47 / 60)), 3972.863264),
    ((0, 0), (0, 90), 10007.557221),
    ((90, 0), (0, 0), 10007.557221),
    ((0, 0), (0, 180), 20015.114442),
    ((0, 0), (1, 0), 111.195080),
    ((60, 0), (60, 1), 55.597011),
    ((0, 179.5), (0, -179.5), 111.195080),
])
def test_published_distances(a, b, kilometres):
    """Check case GEO-02 (Rosetta Code, haversine task; E. Williams, Aviation Formulary)."""
    assert distance(a, b) == pytest.approx(kilometres, abs=2e-6)


def test_published_distances_with_other_radii():
    """The haversine task's own figures, with the radii it names (check case GEO-02)."""
    pair = ((36.12, -86.67), (33.94, -118.40))
    assert distance(*pair, radius=6372.8) == pytest.approx(2887.25995, abs=1e-5)
    assert distance(*pair, radius=6371.0) == pytest.approx(2886.44444, abs=1e-5)


def test_the_same_point_is_exactly_zero():
    """No rounding and no NaN for equal points, also on the date line."""
    assert distance((10, 20), (10, 20)) == 0.0
    assert distance((10, 180), (10, -180)) == 0.0


def test_the_sphere_is_within_its_stated_error_of_the_ellipsoid():
    """Flinders Peak to Buninyong: 54,972.271 m (T. Vincenty 1975; check case GEO-03), sphere -0.085 %."""
    def degrees(d: float, m: float, s: float) -> float:
        return d + m / 60 + s / 3600

    a = (-degrees(37, 57, 3.72030), degrees(144, 25, 29.52440))
    b = (-degrees(37, 39, 10.15610), degrees(143, 55, 35.38390))
    ours = distance(a, b) * 1000
    assert ours == pytest.approx(54_925.508, abs=0.01)
    assert abs(ours / 54_972.271 - 1) < 0.006


def test_all_pairs_agree_with_the_arctangent_form():
    """Random pairs agree with the two-argument arctangent form within a millimetre."""
    rng = np.random.default_rng(5)
    lat, lon, to_lat, to_lon = (rng.uniform(-90, 90, 30), rng.uniform(-180, 180, 30), rng.uniform(-90, 90, 40),
                                rng.uniform(-180, 180, 40))
    ours = great_circle(lat, lon, to_lat, to_lon)
    for j in range(30):
        for i in range(40):
            p, q, d = math.radians(lat[j]), math.radians(to_lat[i]), math.radians(to_lon[i] - lon[j])
            y = math.hypot(math.cos(q) * math.sin(d),
                           math.cos(p) * math.sin(q) - math.sin(p) * math.cos(q) * math.cos(d))
            x = math.sin(p) * math.sin(q) + math.cos(p) * math.cos(q) * math.cos(d)
            assert ours[j, i] == pytest.approx(EARTH_RADIUS_KM * math.atan2(y, x), abs=1e-6)


def test_blocks_do_not_show(monkeypatch):
    """Distances are the same however the pairs are cut into blocks; unknown points give NaN."""
    rng = np.random.default_rng(6)
    ends = (rng.uniform(-90, 90, 7), rng.uniform(-180, 180, 7), rng.uniform(-90, 90, 5), rng.uniform(-180, 180, 5))
    ends[0][3] = np.nan
    whole = great_circle(*ends)
    monkeypatch.setattr("ledgersolve.contract.geography._BLOCK", 10)
    np.testing.assert_array_equal(great_circle(*ends), whole)
    assert np.isnan(whole[3]).all()
    assert np.isfinite(np.delete(whole, 3, axis=0)).all()


def coordinates(settings: dict[str, object], **site: object) -> dict[str, list[list[object]]]:
    """Give one site on the equator, one customer a quarter of the circle away."""
    return site_sheets([{"Site": "A", "Fixed cost": 1, "Latitude": 0, "Longitude": 0, **site}],
                       [{"Customer": "C", "Demand": 2, "Latitude": 0, "Longitude": 90}], settings=settings)


@pytest.mark.parametrize(("settings", "distance_shown", "cost"), [
    ({"Cost per unit and distance": 0.5}, 10007.557221, 5003.7786105),
    ({"Cost per unit and distance": 0.5, "Road factor": 1.2}, 12009.0686652, 6004.5343326),
    ({"Cost per unit and distance": 0.5, "Distance unit": "mi"}, 10007.557221 / 1.609344, 10007.557221 / 3.218688),
    ({"Cost per unit and distance": 0.5, "Lane cost basis": "whole demand"}, 10007.557221, 10007.557221),
])
def test_lanes_are_costed_from_coordinates(tmp_path, settings, distance_shown, cost):
    """Cost is distance x road factor x rate, times the demand on the whole-demand basis; miles are statute miles."""
    case = read_sheets(tmp_path, coordinates(settings)).case
    assert case.distance[0, 0] == pytest.approx(distance_shown, rel=1e-9)
    assert case.lane_cost[0, 0] == pytest.approx(cost, rel=1e-9)


@pytest.mark.parametrize(("place", "cell"), [
    ({"Latitude": -118.40, "Longitude": 33.94}, "C2"), ({"Latitude": 0, "Longitude": 180.5}, "D2"),
    ({"Latitude": 90.1, "Longitude": 0}, "C2"),
])
def test_coordinates_out_of_range_are_errors(tmp_path, place, cell):
    """Latitude beyond 90 or longitude beyond 180 is an error that asks whether they are swapped (GEO-04)."""
    reading = read_sheets(tmp_path, coordinates({"Cost per unit and distance": 1}, **place))
    assert [(p.sheet, p.cell) for p in reading.problems if p.is_error] == [("Sites", cell)]
    assert "swapped" in reading.problems[0].remedy


@pytest.mark.parametrize(("factor", "outcome"), [(0.9, "error"), (1.05, "notice"), (1.3, "none"), (2.2, "notice")])
def test_road_factors_are_judged(tmp_path, factor, outcome):
    """Below 1 is impossible; outside 1.1 to 2.1 gives a notice (Ballou et al. 2002, check case GEO-05)."""
    reading = read_sheets(tmp_path, coordinates({"Cost per unit and distance": 1, "Road factor": factor}))
    kinds = {p.severity for p in reading.problems if p.title == "Road factor"}
    assert kinds == (set() if outcome == "none" else {outcome})
