"""Distances and conversions on the ellipsoid, against another library and a published example."""

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic
from pyproj import Geod

from regimes.geodesy import separation, to_cartesian, to_geographic, wrap_longitude

WGS84 = Geodesic.WGS84


def geodesics(seed, n, shortest, longest, latitude=None):
    """Starts, ends, lengths and midpoint azimuths of random geodesics (Karney 2013, via geographiclib)."""
    rng = np.random.default_rng(seed)
    lat = np.degrees(np.arcsin(rng.uniform(-1, 1, n))) if latitude is None else rng.uniform(*latitude, n)
    lon, azimuth = rng.uniform(-180, 180, n), rng.uniform(0, 360, n)
    length = np.exp(rng.uniform(np.log(shortest), np.log(longest), n))
    ends = [WGS84.Direct(*line) for line in zip(lat, lon, azimuth, length, strict=True)]
    middles = [WGS84.Direct(*line) for line in zip(lat, lon, azimuth, length / 2, strict=True)]
    start = to_cartesian(lon, lat)
    end = to_cartesian([e["lon2"] for e in ends], [e["lat2"] for e in ends])
    return start, end, length, np.array([m["azi2"] for m in middles])


def turned(east, north, azimuth):
    """Angle from an azimuth to a vector, in degrees."""
    return (np.degrees(np.arctan2(east, north)) - azimuth + 180) % 360 - 180


@pytest.mark.parametrize("latitude", [None, (89.0, 90.0), (-90.0, -89.5), (-1.0, 1.0)])
def test_distance_of_geodesics_from_a_metre_to_a_thousand_kilometres(latitude):
    start, end, length, _ = geodesics(1, 400, 1.0, 1e6, latitude)
    r, east, north = separation(start, end, False)
    # Promised in the docstring: 1e-7. Below 100 m the round-off of the reference's degrees shows: 1e-8 m.
    np.testing.assert_allclose(r, length, rtol=1e-7, atol=1e-8)
    np.testing.assert_allclose(east**2 + north**2, r**2, rtol=1e-12)  # round-off


def test_distance_to_five_thousand_kilometres():
    start, end, length, azimuth = geodesics(2, 400, 1e6, 5e6)
    r, east, north = separation(start, end, False)
    np.testing.assert_allclose(r, length, rtol=2e-5)  # promised in the docstring
    assert np.abs(turned(east, north, azimuth)).max() < 0.01


def test_components_point_along_the_geodesic_at_its_midpoint():
    start, end, _, azimuth = geodesics(3, 400, 10.0, 1e6, (-89.0, 89.0))
    _, east, north = separation(start, end, False)
    assert np.abs(turned(east, north, azimuth)).max() < 1e-3  # promised in the docstring


def test_across_the_date_line():
    a, b = to_cartesian([179.99], [12.0]), to_cartesian([-179.99], [12.0])
    r, east, _ = separation(a, b, False)
    expected = WGS84.Inverse(12.0, 179.99, 12.0, -179.99)["s12"]
    np.testing.assert_allclose(r, expected, rtol=1e-9)
    assert east[0] > 0  # eastward, not around the world


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_across_a_pole(sign):
    lat = sign * 89.99
    for lon in (0.0, 37.0):
        a, b = to_cartesian([lon], [lat]), to_cartesian([lon + 180.0], [lat])
        r, east, north = separation(a, b, False)
        np.testing.assert_allclose(r, WGS84.Inverse(lat, lon, lat, lon + 180.0)["s12"], rtol=1e-9)
        np.testing.assert_allclose(np.hypot(east, north), r, rtol=1e-12)


def test_along_the_equator():
    # The equator is a circle, so an arc of it is its radius (6378137 m in WGS84) times its angle.
    degrees = np.array([1e-3, 1.0, 10.0, 20.0, 30.0, 34.0, 36.0, 90.0, 150.0])
    r, east, _ = separation(
        to_cartesian(np.full(9, -170.0), np.zeros(9)), to_cartesian(degrees - 170, degrees * 0), False
    )
    np.testing.assert_allclose(r, 6378137.0 * np.radians(degrees), rtol=2e-7)  # promised of the series
    np.testing.assert_allclose(east, r, rtol=1e-12)  # round-off


def test_antisymmetric_and_zero_for_one_point():
    start, end, _, _ = geodesics(4, 50, 10.0, 1e6)
    there, back = separation(start, end, False), separation(end, start, False)
    np.testing.assert_array_equal(there[0], back[0])
    np.testing.assert_array_equal(there[1], -back[1])
    np.testing.assert_array_equal(there[2], -back[2])
    assert not np.any(separation(start, start, False))


def test_ends_of_a_diameter():
    # Half the circumference of a sphere with the earth's mean radius, 6371.0088 km (from memory).
    r, _, _ = separation([[6378137.0, 0, 0]], [[-6378137.0, 0, 0]], False)
    np.testing.assert_allclose(r, np.pi * 6371008.8, rtol=1e-8)


def test_plane():
    r, east, north = separation([[1.0, 2.0, 0.0]], [[4.0, -2.0, 0.0]], True)
    assert (r[0], east[0], north[0]) == (5.0, 3.0, -4.0)


@pytest.mark.parametrize("planar", [True, False])
def test_missing_stays_missing(planar):
    parts = separation([[np.nan] * 3], [[6378137.0, 0.0, 0.0]], planar)
    assert all(np.isnan(part[0]) for part in parts)


def test_geocentric_coordinates_of_a_published_point():
    # EPSG Guidance Note 7-2, geographic to geocentric conversion, its example in WGS 84 (from memory):
    # 53d48m33.820s N, 2d07m46.380s E, 73 m; X 3771793.968, Y 140253.342, Z 5124304.349 m, to the millimetre.
    lon, lat = to_geographic([[3771793.968, 140253.342, 5124304.349]])
    printed = 0.0005 / 3600  # half a unit of the last digit of the seconds
    np.testing.assert_allclose(lat, 53 + 48 / 60 + 33.820 / 3600, atol=printed, rtol=0)
    np.testing.assert_allclose(lon, 2 + 7 / 60 + 46.380 / 3600, atol=printed, rtol=0)


def test_round_trip_everywhere():
    rng = np.random.default_rng(5)
    lon, lat = rng.uniform(-180, 180, 500), np.degrees(np.arcsin(rng.uniform(-1, 1, 500)))
    back = to_geographic(to_cartesian(lon, lat))
    np.testing.assert_allclose(back[0], lon, atol=1e-9, rtol=0)
    np.testing.assert_allclose(back[1], lat, atol=1e-9, rtol=0)


def test_geographic_position_between_two_fixes():
    # The chord midpoint of two near points is the geodesic midpoint (pyproj's geodesics).
    a, b = (179.95, 60.0), (-179.95, 60.05)
    middle = Geod(ellps="WGS84").npts(*a, *b, 1)[0]
    cartesian = to_cartesian([a[0], b[0]], [a[1], b[1]])
    lon, lat = to_geographic(cartesian.mean(axis=0))
    # Their sagitta of 1 m moves the foot of the perpendicular by less than 1e-7 degrees.
    np.testing.assert_allclose((lon[0], lat[0]), middle, atol=1e-7, rtol=0)


def test_conversions_pass_missing_values_through():
    position = to_cartesian([10.0, np.nan], [20.0, 30.0])
    assert np.isfinite(position[0]).all()
    assert np.isnan(position[1]).all()
    lon, lat = to_geographic(position)
    np.testing.assert_array_equal(np.isnan([lon, lat]), [[False, True], [False, True]])


def test_windings_of_longitude():
    given = [-180.0, 180.0, 540.0, 359.5, -1e-17, 12.3]
    np.testing.assert_array_equal(wrap_longitude(given), [-180.0, -180.0, -180.0, -0.5, -1e-17, 12.3])
    assert wrap_longitude(np.nextafter(-180.0, -200.0)) == -180.0  # its remainder rounds to 360
    np.testing.assert_allclose(to_cartesian([350.0], [45.0]), to_cartesian([-10.0], [45.0]), atol=1e-8)
