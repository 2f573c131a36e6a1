"""Velocities of single particles, removal of the mean, lagged sums: closed forms, loops, another library."""

import numpy as np
import pytest
import xarray as xr
from geographiclib.geodesic import Geodesic

from regimes.errors import CaseError, DataError
from regimes.geodesy import to_cartesian
from regimes.particles import MeanFlow, eddy_velocities
from regimes.particles.mean_flow import low_pass
from regimes.particles.sums import lagged_sums
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.tracks import Tracks
from regimes.units import DAY, HOUR


def tracks_of(positions, step=HOUR, planar=True, release=None, error=0.0):
    """Tracks from a list of (n, 3) arrays, all from step 0."""
    return Tracks(
        position=np.concatenate(positions),
        offset=np.concatenate([[0], np.cumsum([len(p) for p in positions])]),
        start_step=np.zeros(len(positions)),
        step=step,
        first_time=0.0,
        planar=planar,
        labels=tuple(str(i) for i in range(len(positions))),
        release=np.full(len(positions), -1) if release is None else release,
        position_error=error,
    )


def line(n, velocity, step=HOUR):
    """A straight planar path."""
    t = step * np.arange(n)
    return np.stack([velocity[0] * t, velocity[1] * t, np.zeros(n)], axis=1)


def gappy_tracks(seed=3, n_track=5, release=None):
    """Random walks of different length with gaps."""
    rng = np.random.default_rng(seed)
    paths = []
    for _ in range(n_track):
        path = np.zeros((int(rng.integers(60, 120)), 3))
        path[:, :2] = np.cumsum(np.cumsum(rng.standard_normal((len(path), 2)), axis=0), axis=0)
        path[20:24] = np.nan
        path[40] = np.nan
        paths.append(path)
    return tracks_of(paths, step=10.0, release=release)


def test_motion_along_a_parallel():
    # Radius of a parallel of the ellipsoid, a cos(lat) / sqrt(1 - e2 sin2(lat)): geodesy text books, from memory.
    latitude, turn = 57.0, 0.01  # degrees, degrees a step
    lon = 170.0 + turn * np.arange(2000)  # across the date line
    v = eddy_velocities(tracks_of([to_cartesian(lon, np.full(lon.size, latitude))], planar=False), mean="none")
    e2, phi = 0.00669437999014, np.radians(latitude)
    radius = 6378137.0 * np.cos(phi) / np.sqrt(1.0 - e2 * np.sin(phi) ** 2)
    east, north = v.value[1:-1].T
    # Between two points 0.6 km apart the geodesic bends less than 1e-8 of its length off the parallel.
    np.testing.assert_allclose(east, radius * np.radians(turn) / HOUR, rtol=1e-7)
    np.testing.assert_allclose(north, 0.0, atol=1e-7)


def test_motion_along_a_meridian_against_geographiclib():
    lat = 30.0 + 0.01 * np.arange(50)
    v = eddy_velocities(tracks_of([to_cartesian(np.full(50, 5.0), lat)], planar=False), mean="none")
    true = Geodesic.WGS84.Inverse(lat[9], 5.0, lat[11], 5.0)["s12"] / (2 * HOUR)
    assert v.value[10, 1] == pytest.approx(true, rel=1e-7)  # of the distances, see geodesy


def test_no_velocity_at_ends_and_gaps():
    path = line(9, (0.1, -0.2))
    path[4] = np.nan
    v = eddy_velocities(tracks_of([path]), mean="none")
    assert np.isnan(v.value[[0, 3, 4, 5, 8]]).all()
    np.testing.assert_allclose(v.value[[1, 2, 6, 7]], [[0.1, -0.2]] * 4, rtol=1e-12)
    # A constant mean can be followed across the gap.
    np.testing.assert_allclose(v.path[8] - v.path[0], np.array([0.1, -0.2]) * 8 * HOUR, rtol=1e-12)
    assert v.n_sample == 4


def test_record_mean_leaves_nothing_of_a_straight_path():
    v = eddy_velocities(tracks_of([line(9, (0.1, -0.2)), line(5, (0.3, 0.0))]))
    np.testing.assert_allclose(v.value[np.isfinite(v.value)], 0.0, atol=1e-15)
    np.testing.assert_allclose(v.path, 0.0, atol=1e-9)


def test_noise_of_position_errors():
    """Variance of a centred difference of independent errors: sum of two variances over (2 dt)^2."""
    rng = np.random.default_rng(1)
    path = np.zeros((40_000, 3))
    path[:, :2] = 30.0 * rng.standard_normal((40_000, 2))
    v = eddy_velocities(tracks_of([path], error=30.0), mean="none")
    values = v.value[1:-1]
    # Differences two steps apart share a fix: the effective number is 2/3 of the samples (correlation 1/2).
    error = v.noise * np.sqrt(2.0 / values.size * 1.5)
    assert abs(np.mean(values**2) - v.noise) < 5 * error


@pytest.mark.parametrize("cycles", [0.25, 0.5, 1.0, 1.5])
def test_low_pass_gain(cycles):
    """Gain of a Gaussian filter of half amplitude at the cut-off: 2^-(f P)^2, from its Fourier transform."""
    period = 2 * DAY
    t = HOUR * np.arange(2000)
    wave = np.stack([np.cos(2 * np.pi * cycles * t / period), np.sin(2 * np.pi * cycles * t / period)], axis=1)
    slow = low_pass(wave, HOUR, period)[500:-500]
    # Weights beyond four standard deviations, 6e-5 of all, are cut off.
    np.testing.assert_allclose(slow, 2.0 ** -(cycles**2) * wave[500:-500], atol=1e-4)


def test_low_pass_keeps_a_trend_beside_gaps_and_says_where_it_knows_nothing():
    t = HOUR * np.arange(400)
    trend = np.stack([1e-6 * t - 0.1, 0.2 - 2e-6 * t], axis=1)
    trend[150:160] = np.nan
    trend[250:330] = np.nan
    slow = low_pass(trend, HOUR, 2 * DAY)
    full = np.stack([1e-6 * t - 0.1, 0.2 - 2e-6 * t], axis=1)
    known = np.isfinite(slow[:, 0])
    np.testing.assert_allclose(slow[known], full[known], atol=1e-12)
    # Three quarters of a Gaussian lie beyond 0.674 standard deviations (tables of the normal distribution), an
    # eighth of the period, 6 hours here; half a step because the weights are a sum.
    assert not known[:5].any()
    assert known[7:140].all()
    assert not known[265:315].any()
    assert not known[-5:].any()


def test_low_pass_of_tracks_counts_what_it_cannot_tell():
    tracks, _ = drifting_particles(Motion(0.01, 1.0 / DAY, mean=(0.3, 0.0)), (2, 1), HOUR, 600, 1)
    v = eddy_velocities(tracks, mean="lowpass", period=10 * DAY)
    known = np.isfinite(v.value[:, 0])
    assert v.lost == 2 * 598 - known.sum() > 0
    assert abs(np.mean(v.value[known])) < 0.05  # the mean flow of 0.3 m/s is gone
    # Displacements are those of the velocities within each unbroken piece (both are trapezia of the same path).
    first = np.flatnonzero(known)[0]
    moved = v.path[first + 100] - v.path[first]
    summed = HOUR * (v.value[first : first + 101].sum(axis=0) - 0.5 * (v.value[first] + v.value[first + 100]))
    np.testing.assert_allclose(moved, summed, atol=3 * HOUR * 0.05)  # the ends differ by a smoothing of the path
    assert len(np.unique(v.piece[v.piece >= 0])) == 2


def uniform_flow(u=0.1, v=-0.05, **changes):
    lon, lat = np.arange(-10.0, 11.0, 2.0), np.arange(40.0, 51.0)
    return MeanFlow(lon, lat, np.full((11, 11), u), np.full((11, 11), v), **changes)


def test_grid_is_bilinear():
    """A field that is linear in each coordinate is met exactly between its nodes."""
    lon, lat = np.array([0.0, 1.0, 3.0]), np.array([10.0, 12.0])
    field = 0.1 + 0.02 * lon[None] - 0.03 * lat[:, None] + 0.004 * lon[None] * lat[:, None]
    flow = MeanFlow(lon, lat[::-1], field[::-1], -field[::-1])
    x, y = np.array([0.3, 2.9, 360.5, -359.0]), np.array([10.1, 11.7, 12.0, 10.0])
    expected = 0.1 + 0.02 * np.mod(x, 360) - 0.03 * y + 0.004 * np.mod(x, 360) * y
    np.testing.assert_allclose(flow.at(x, y), np.stack([expected, -expected], axis=1), rtol=1e-12)
    assert np.isnan(flow.at([3.1, 1.0, np.nan], [11.0, 9.9, 11.0])).all()


def test_grid_around_the_globe_closes_and_unknown_nodes_stay_unknown():
    lon, lat = np.arange(0.0, 360.0, 30.0), np.array([-10.0, 10.0])
    u = np.tile(np.where(lon == 330.0, 1.0, 0.0), (2, 1))
    flow = MeanFlow(lon, lat, u, np.where(lon[None] == 90.0, np.nan, u))
    assert flow.at([-15.0], [0.0])[0, 0] == pytest.approx(0.5, abs=1e-12)  # halfway from 330 to 360 = 0
    assert np.isnan(flow.at([80.0], [0.0])[0, 1])


def test_grid_mean_of_tracks():
    """Drifting with the mean flow leaves nothing; outside the grid nothing is known, and it is counted."""
    still = np.stack([np.full(30, -9.0), np.full(30, 45.0)])
    away = np.stack([np.full(30, -11.0), np.full(30, 45.0)])
    paths = [to_cartesian(*p) for p in (still, away)]
    v = eddy_velocities(tracks_of(paths, planar=False), mean="grid", flow=uniform_flow())
    np.testing.assert_allclose(v.value[1:29], [[-0.1, 0.05]] * 28, atol=1e-12)
    np.testing.assert_allclose(v.path[29] - v.path[0], np.array([-0.1, 0.05]) * 29 * HOUR, rtol=1e-9)
    assert v.lost == 28
    assert np.isnan(v.value[30:]).all()
    assert (v.piece[30:] == -1).all()


def test_mean_flow_of_a_dataset():
    flow = uniform_flow()
    names = {"lon": ("lon", flow.x), "lat": ("lat", flow.y)}
    data = xr.Dataset({"u": (("lon", "lat"), flow.u.T), "v": (("lat", "lon"), flow.v)}, coords=names)
    np.testing.assert_array_equal(MeanFlow.from_dataset(data).at([0.0], [45.0]), [[0.1, -0.05]])
    with pytest.raises(DataError, match=r"v not in the dataset, which has lat, lon, u; needed are lon, lat, u and v"):
        MeanFlow.from_dataset(data.drop_vars("v"))
    with pytest.raises(DataError, match=r"u has dimensions time, lon, lat; must be lat and lon"):
        MeanFlow.from_dataset(data.assign(u=data.u.expand_dims(time=2)))


def test_mean_flow_is_a_copy():
    u = np.zeros((2, 2))
    flow = MeanFlow([0.0, 1.0], [0.0, 1.0], u, u)
    u[:] = 5.0
    np.testing.assert_array_equal(flow.at([0.5], [0.5]), [[0.0, 0.0]])


@pytest.mark.parametrize(
    ("axes", "message"),
    [
        (([0.0, 1.0, 2.0], [0.0, 1.0]), r"got axes of 3 and 2 points, u \(2, 2\)"),
        (([1.0, 0.0], [0.0, 1.0]), "neither rise nor fall"),
        (([0.0, 1.0], [0.0, 0.0]), "neither rise nor fall"),
    ],
)
def test_wrong_grids(axes, message):
    with pytest.raises(DataError, match=message):
        MeanFlow(*axes, np.zeros((2, 2)), np.zeros((2, 2)))


@pytest.mark.parametrize(
    ("how", "message"),
    [
        ({"mean": "median"}, "mean: got 'median'; known: none, record, lowpass, grid"),
        ({"unit": "cluster"}, "unit: got 'cluster'; known: release, particle"),
        ({"mean": "lowpass"}, "got period None; lowpass needs a period"),
        ({"period": 3.0}, "got period 3.0; lowpass needs a period and no other"),
        ({"mean": "lowpass", "period": -1.0}, "period: got -1.0 s; must be a number > 0"),
        ({"mean": "grid"}, "got flow None; grid needs a mean flow"),
        ({"mean": "grid", "flow": uniform_flow()}, "got planar = False for tracks with planar = True"),
    ],
)
def test_wrong_choices(how, message):
    with pytest.raises(CaseError, match=message):
        eddy_velocities(tracks_of([line(9, (0.1, 0.1))]), **how)


def test_no_velocity_left():
    with pytest.raises(DataError, match=r"got none after removing the mean \(none\) from 1 tracks"):
        eddy_velocities(tracks_of([line(2, (0.1, 0.1))]), mean="none")


def test_units_are_releases_or_particles():
    tracks = gappy_tracks(release=[4, 4, -1, 7, -1])
    assert eddy_velocities(tracks).unit.tolist() == [0, 0, 2, 1, 3]
    assert eddy_velocities(tracks, unit="particle").unit.tolist() == [0, 1, 2, 3, 4]


def brute_sums(v, track, lag):
    """Sums of one track at one lag, sample by sample."""
    span = range(v.offset[track], v.offset[track + 1])
    covariance, transport, count, moved = np.zeros(3), np.zeros(3), 0, 0
    for t in span:
        if t - lag < v.offset[track] or np.isnan(v.value[t, 0]):
            continue
        (a, b), (c, d) = v.value[t], v.value[t - lag]
        if np.isfinite(c):
            covariance += [a * c, b * d, 0.5 * (a * d + b * c)]
            count += 1
        x, y = v.path[t] - v.path[t - lag]
        if np.isfinite(x) and v.piece[t] == v.piece[t - lag]:
            transport += [a * x, b * y, 0.5 * (a * y + b * x)]
            moved += 1
    return covariance, transport, count, moved


@pytest.mark.parametrize("how", [{"mean": "record"}, {"mean": "lowpass", "period": 150.0}])
def test_lagged_sums_against_loops(how):
    v = eddy_velocities(gappy_tracks(release=[0, 0, 1, -1, -1]), **how)
    chosen = np.array([0, 1, 2, 4])  # the fourth takes no part
    sums = lagged_sums(v, chosen, 30)
    assert sums.count.shape == (3, 30)
    for row, members in enumerate(([0, 1], [2], [4])):
        for lag in (0, 1, 2, 7, 29):
            parts = [brute_sums(v, m, lag) for m in members]
            covariance, transport, count, moved = (sum(p[i] for p in parts) for i in range(4))
            # Round-off of transforms, relative to the largest sum.
            size = np.abs(sums.covariance).max(), np.abs(sums.transport).max()
            np.testing.assert_allclose(sums.covariance[row, lag], covariance, atol=1e-12 * size[0])
            np.testing.assert_allclose(sums.transport[row, lag], transport, atol=1e-11 * size[1])
            assert (sums.count[row, lag], sums.transport_count[row, lag]) == (count, moved)
    length = [np.isfinite(v.value[v.offset[k] : v.offset[k + 1], 0]).sum() * v.step for k in range(5)]
    short = [sum(brute_sums(v, m, 3)[2] / length[m] ** k for m in (0, 1)) for k in (1, 2)]
    np.testing.assert_allclose(sums.shortness[0, 3], short, rtol=1e-12)
