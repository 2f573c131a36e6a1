"""Short-time ballistic law of pairs, and triangles of particles: by hand, closed forms, loops, another library."""

from dataclasses import replace

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic

from regimes.curves.ballistic import ballistic_check
from regimes.curves.triplets import MOST_PER_RELEASE, triplets
from regimes.errors import DataError
from regimes.geodesy import separation, to_cartesian
from regimes.pairs import LAUNCHED, Pairs
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.tracks import Tracks
from regimes.units import DAY, HOUR, KM

MOTION = Motion(0.04, 1.0 / (2 * DAY))


def tracks_of(positions, step=HOUR, planar=True, release=None, start=None, error=0.0):
    """Tracks from a list of (n, 3) arrays."""
    n = len(positions)
    return Tracks(
        position=np.concatenate(positions),
        offset=np.concatenate([[0], np.cumsum([len(p) for p in positions])]),
        start_step=np.zeros(n) if start is None else start,
        step=step,
        first_time=0.0,
        planar=planar,
        labels=tuple(str(i) for i in range(n)),
        release=np.zeros(n) if release is None else release,
        position_error=error,
    )


def pairs_of(members, length, cluster):
    """Pairs of tracks that all start at step 0."""
    first, second = np.asarray(members).T
    n = first.size
    return Pairs(
        first=first,
        second=second,
        begin=np.zeros(n),
        length=np.full(n, length),
        kind=np.full(n, LAUNCHED),
        start_separation=np.ones(n),
        cluster=cluster,
        n_cluster=int(np.max(cluster)) + 1,
    )


def pairs_from_separations(vectors, **how):
    """One planar pair, and cluster, for each (n, 2) array of separation vectors."""
    paths = []
    for vector in vectors:
        paths += [np.zeros((len(vector), 3)), np.pad(np.asarray(vector, dtype=float), ((0, 0), (0, 1)))]
    n = len(vectors)
    tracks = tracks_of(paths, release=np.repeat(np.arange(n), 2), **how)
    return tracks, pairs_of(np.arange(2 * n).reshape(n, 2), len(vectors[0]), np.repeat(np.arange(n), 2))


# --- ballistic ------------------------------------------------------------------------------------------------------


def test_straight_paths_keep_the_law():
    t = HOUR * np.arange(30)[:, None]
    vectors = [np.array([3.0, 4.0]) * KM + t * v for v in ([0.1, 0.0], [-0.2, 0.1], [0.05, -0.3])]
    tracks, pairs = pairs_from_separations(vectors)
    found = ballistic_check(tracks, pairs)
    np.testing.assert_allclose(found.departure.value, 0.0, atol=1e-6)  # of 1e8 m2: round-off
    assert found.holds_until == found.departs_after == found.dispersion.axis[-1] == 29 * HOUR
    # By hand: (0.01 + 0.05 + 0.0925) / 3, and the projections 0.06, -0.04, -0.21 on the common direction.
    assert found.structure.value[0] == pytest.approx(0.1525 / 3, rel=1e-10)
    assert found.longitudinal.value[0] == pytest.approx(-0.19 / 3, rel=1e-10)
    assert found.start_square.value[0] == pytest.approx(25e6, rel=1e-12)
    assert "the ballistic law holds to the last time" in found.summary()


def test_until_when_it_holds():
    """Pairs that stop after 10 steps: with equal clusters the band has no width, and step 11 is outside."""
    steps = np.minimum(np.arange(30), 10)[:, None]
    tracks, pairs = pairs_from_separations([[1.0, 0.0] + steps * [0.5, 0.25]] * 3)
    found = ballistic_check(tracks, pairs, HOUR * np.arange(2.0, 30.0))
    assert found.holds_until == found.departs_after == 10 * HOUR
    assert found.summary().endswith("holds until 3.6e+04 s")
    late = ballistic_check(tracks, pairs, HOUR * np.arange(11.0, 30.0))
    assert late.holds_until == 0.0  # outside at the first time asked for


def test_band_of_data_is_wider_than_that_of_the_departure():
    """Pairs that start 1 to 3 km apart and all stop after 10 steps: the spread of starts hides it in D2 alone."""
    steps = np.minimum(np.arange(40), 10)[:, None]
    tracks, pairs = pairs_from_separations([[r * KM, 0.0] + steps * [20.0, 0.0] for r in np.linspace(1, 3, 9)])
    found = ballistic_check(tracks, pairs, HOUR * np.arange(2.0, 40.0))
    assert found.departs_after < found.holds_until
    error = found.dispersion.standard_error
    outside = np.abs(found.dispersion.value - found.prediction.value) > 2.306 * error  # t table, 8 degrees of freedom
    assert found.holds_until == found.dispersion.axis[np.argmax(outside) - 1]


def test_pairs_that_forget_exponentially():
    """D2 - law = 8 u'^2 T^2 (x - 1 + exp(-x)) - 4 u'^2 t^2: two independent particles (Taylor 1921) and S2 = 4 u'^2.

    The first difference averages over h: S2 comes out h / (3 T) too small, as expansion of Taylor's law shows.
    """
    tracks, pairs = drifting_particles(MOTION, (500, 2), HOUR, 200, 6, start_separation=3 * KM, position_error=80.0)
    t = HOUR * np.array([2, 5, 20, 50, 190.0])
    found = ballistic_check(tracks, pairs, t)
    factor = 1 - HOUR / (3 * 2 * DAY)
    x = t / (2 * DAY)
    true = 8 * 0.04 * (2 * DAY) ** 2 * (x - 1 + np.exp(-x)) - 4 * 0.04 * factor * t**2
    assert np.all(np.abs(found.departure.value - true) < 4 * found.departure.standard_error)
    assert abs(found.structure.value[0] - 0.16 * factor) < 4 * found.structure.standard_error[0]
    assert abs(found.longitudinal.value[0]) < 4 * found.longitudinal.standard_error[0]
    assert 10 * HOUR < found.holds_until < 100 * HOUR  # a share of T_L = 48 h


def test_noise_alone_is_no_velocity():
    """Particles at rest, fixes with errors: S2 and r0 du_L are zero after the correction, not before."""
    rng = np.random.default_rng(2)
    paths = [np.tile([0.0, i % 2 * 500.0, 0.0], (4, 1)) for i in range(4000)]
    for path in paths:
        path[:, :2] += 100.0 * rng.standard_normal((4, 2))
    tracks = tracks_of(paths, error=100.0)
    pairs = pairs_of(np.arange(4000).reshape(-1, 2), 4, np.repeat(np.arange(2000), 2))
    found = ballistic_check(tracks, pairs)
    for curve in (found.structure, found.longitudinal):
        assert abs(curve.value[0]) < 4 * curve.standard_error[0]
    plain = ballistic_check(replace(tracks, position_error=0.0), pairs)
    assert plain.structure.value[0] - found.structure.value[0] == pytest.approx(8 * (100.0 / HOUR) ** 2, rel=1e-9)
    assert plain.structure.value[0] > 20 * plain.structure.standard_error[0]
    assert plain.longitudinal.value[0] < -10 * plain.longitudinal.standard_error[0]


def test_pairs_between_clusters_gaps_and_ends_against_a_loop():
    rng = np.random.default_rng(9)
    paths = [np.cumsum(np.pad(rng.standard_normal((12, 2)), ((0, 0), (0, 1))), axis=0) for _ in range(5)]
    paths[1][6] = np.nan
    paths[4][1] = np.nan  # its pairs have no initial velocity
    tracks = tracks_of(paths, step=2.0)
    members = [(0, 1), (0, 2), (1, 2), (2, 3), (3, 4)]
    pairs = replace(pairs_of(members, 12, np.array([0, 0, 1, 1, 2])), length=np.array([12, 12, 9, 12, 12]))
    found = ballistic_check(tracks, pairs, 2.0 * np.arange(2, 12))
    for k, lag in enumerate(range(2, 12)):
        gaps = []
        for (i, j), length in zip(members[:4], pairs.length, strict=False):
            d = paths[j] - paths[i]
            if lag < length and np.isfinite(d[lag, 0]):
                gaps.append(np.sum(d[lag] ** 2) - np.sum((d[0] + (d[1] - d[0]) * lag) ** 2))
        assert found.departure.value[k] == pytest.approx(np.mean(gaps), rel=1e-10)
    assert found.dispersion.n_cluster[0] == 2
    swapped = ballistic_check(tracks, replace(pairs, first=pairs.second, second=pairs.first), 2.0 * np.arange(2, 12))
    np.testing.assert_allclose(swapped.departure.value, found.departure.value, rtol=1e-12)
    np.testing.assert_allclose(swapped.longitudinal.value, found.longitudinal.value, rtol=1e-12)


def test_scaling_and_rotation_of_the_ballistic_law():
    tracks, pairs = drifting_particles(MOTION, (10, 3), HOUR, 50, 1, position_error=30.0)
    found = ballistic_check(tracks, pairs)
    bigger = replace(tracks, position=3 * tracks.position, step=2 * HOUR, position_error=90.0)
    scaled = ballistic_check(bigger, pairs)
    np.testing.assert_allclose(scaled.departure.value, 9 * found.departure.value, rtol=1e-8)
    np.testing.assert_allclose(scaled.structure.value, 9 / 4 * found.structure.value, rtol=1e-10)
    np.testing.assert_allclose(scaled.longitudinal.value, 3 / 2 * found.longitudinal.value, rtol=1e-8)
    assert scaled.holds_until == pytest.approx(2 * found.holds_until)
    turned = ballistic_check(replace(tracks, position=tracks.position[:, [1, 0, 2]] * [-1, 1, 1]), pairs)
    np.testing.assert_allclose(turned.departure.value, found.departure.value, rtol=1e-9)


def test_one_cluster_says_nothing_of_the_band():
    tracks, pairs = drifting_particles(MOTION, (1, 3), HOUR, 50, 1)
    found = ballistic_check(tracks, pairs)
    assert np.isnan(found.holds_until)
    assert "one cluster says nothing of how long" in found.summary()


def test_ballistic_errors():
    tracks, pairs = drifting_particles(MOTION, (2, 2), HOUR, 50, 1)
    with pytest.raises(DataError, match=r"got a first time of 1 steps; must be 2 or more.*begin at 7200 s"):
        ballistic_check(tracks, pairs, np.array([HOUR, 2 * HOUR]))
    with pytest.raises(DataError, match="ballistic check: got no pairs"):
        ballistic_check(tracks, pairs.select(np.zeros(2, dtype=bool)))
    with pytest.raises(DataError, match="got pairs of two steps; needed are three"):
        ballistic_check(tracks, replace(pairs, length=np.array([2, 2])))
    holes = tracks.position.copy()
    holes[tracks.offset[:-1] + 1] = np.nan
    with pytest.raises(DataError, match="got 2 pairs, none with positions at its first two steps"):
        ballistic_check(replace(tracks, position=holes), pairs)


# --- triplets -------------------------------------------------------------------------------------------------------


def still(corners, n=3):
    return [np.tile([x, y, 0.0], (n, 1)) for x, y in corners]


def test_triangle_by_hand():
    """Sides 3, 4, 5: area 6, squares 50; mean square side 50 / 3."""
    found = triplets(tracks_of(still([(0, 0), (3, 0), (0, 4)])), np.array([0.0, HOUR]))
    np.testing.assert_allclose(found.area.value, 6.0, rtol=1e-12)
    np.testing.assert_allclose(found.log_area.value, np.log(6.0), rtol=1e-12)
    np.testing.assert_allclose(found.side_square.value, 50 / 3, rtol=1e-12)
    np.testing.assert_allclose(found.aspect.value, 4 * np.sqrt(3) * 6 / 50, rtol=1e-12)
    np.testing.assert_allclose(found.filling.value, found.aspect.value, rtol=1e-12)
    assert (found.n_triplet, found.n_left_out) == (1, 0)


def test_equilateral_and_flat():
    equal = triplets(tracks_of(still([(0, 0), (2, 0), (1, np.sqrt(3))])), np.zeros(1))
    assert equal.aspect.value[0] == pytest.approx(1.0, rel=1e-12)
    flat = triplets(tracks_of(still([(0, 0), (1, 0), (3, 0)])), np.zeros(1))
    assert flat.area.value[0] == flat.aspect.value[0] == 0.0
    assert np.isnan(flat.log_area.value[0])


def test_area_on_the_ellipsoid_against_geographiclib():
    lon, lat = np.array([-0.1, 0.15, 0.02]), np.array([60.0, 60.02, 60.2])
    tracks = tracks_of([np.tile(p, (3, 1)) for p in to_cartesian(lon, lat)], planar=False)
    polygon = Geodesic.WGS84.Polygon()
    for x, y in zip(lon, lat, strict=True):
        polygon.AddPoint(y, x)
    area = abs(polygon.Compute()[2])
    # Sides of 20 km: the chord triangle is smaller by (d / R)^2 / 8 or so, 1e-6, see the notes.
    assert triplets(tracks, np.zeros(1)).area.value[0] == pytest.approx(area, rel=4e-6)


def test_independent_wanderers_have_aspect_one_half():
    """Triangles of Gaussian points are uniform on Kendall's sphere, of which the aspect is the sine of the latitude:
    uniform from 0 to 1 (Kendall 1984, Bull. London Math. Soc. 16, 81, from memory). The mean area is sqrt(3)/8 of the
    mean square side: the determinant of a Gaussian 2 by 2 matrix has mean modulus one.
    """
    tracks, _ = drifting_particles(MOTION, (1500, 3), DAY, 60, 7, start_separation=100.0)
    found = triplets(tracks, np.array([0.0, 30.0, 59.0]) * DAY)
    for curve in (found.aspect, found.filling):
        assert curve.value[0] == pytest.approx(1.0, rel=1e-9)
        assert np.all(np.abs(curve.value[1:] - 0.5) < 4 * curve.standard_error[1:])
        assert np.all(curve.standard_error[1:] < 0.02)
    # Two independent particles (Taylor 1921), to 100 m.
    x = 59.0 / 2
    square = 8 * 0.04 * (2 * DAY) ** 2 * (x - 1 + np.exp(-x))
    assert abs(found.side_square.value[2] - square) < 4 * found.side_square.standard_error[2]


def test_straining_keeps_the_area():
    """x exp(s t), y exp(-s t): area constant; sides grow at 2 s once the y part is gone."""
    s, t = 0.5 / DAY, HOUR * np.arange(480)
    corners = [(0.0, 0.0), (1.0, 0.2), (0.3, 1.0)]
    paths = [np.stack([x * np.exp(s * t), y * np.exp(-s * t), 0 * t], axis=1) for x, y in corners]
    found = triplets(tracks_of(paths + paths, release=np.repeat([0, 1], 3)), np.array([0.0, 5.0, 10.0, 15.0]) * DAY)
    np.testing.assert_allclose(found.area_growth().value, 0.0, atol=1e-10 * s)
    assert found.side_growth().value[-1] == pytest.approx(2 * s, rel=1e-3)
    np.testing.assert_allclose(found.area_growth().standard_error, 0.0, atol=1e-10)
    np.testing.assert_allclose(found.side_growth().axis, np.array([2.5, 7.5, 12.5]) * DAY)
    assert np.all(np.diff(found.aspect.value) < 0)


def test_growth_error_against_the_bootstrap():
    tracks, _ = drifting_particles(MOTION, (120, 3), HOUR, 100, 3)
    found = triplets(tracks, np.array([5.0, 50.0, 99.0]) * HOUR)
    growth = found.area_growth()
    draws = np.log(found.area.bootstrap(4000, np.random.default_rng(1)))
    rates = np.diff(draws, axis=1) / np.diff(found.area.axis)
    # Delta method against resampling of 120 clusters of skewed areas: a tenth.
    np.testing.assert_allclose(growth.standard_error, rates.std(axis=0), rtol=0.1)
    np.testing.assert_allclose(growth.value, np.diff(np.log(found.area.value)) / np.diff(found.area.axis))


def test_who_makes_a_triangle():
    """Four of one release make four; unknown releases and couples none; the last to start sets the clock."""
    paths = still([(0, 0), (1, 0), (0, 1), (1, 1), (5, 5), (6, 6), (7, 8), (7, 9), (8, 8)], n=6)
    paths[2][4] = np.nan
    tracks = tracks_of(paths, release=[2, 2, 2, 2, 7, 7, -1, -1, -1], start=[0, 0, 2, 0, 0, 0, 0, 0, 0])
    found = triplets(tracks, HOUR * np.arange(6.0))
    assert found.n_triplet == 4
    assert found.area.weight.size == 1
    # Tracks 0, 1 and 3 start at once and have six steps; with track 2, four common ones from its start; it is
    # missing at its fifth, which lies beyond them.
    assert found.area.denominator[0].tolist() == [4, 4, 4, 4, 1, 1]
    np.testing.assert_allclose(found.area.value, 0.5)
    near = still([(0, 0), (1, 0), (0, 1), (9, 9)])
    assert triplets(tracks_of(near), np.zeros(1), largest_side=1.5).n_triplet == 1
    # Three that are never there together make none.
    apart = replace(tracks_of(near), start_step=np.array([0, 5, 0, 0]))
    assert triplets(apart, np.zeros(1)).n_triplet == 1


def test_laws_of_triangles():
    tracks, _ = drifting_particles(MOTION, (6, 4), HOUR, 50, 3)
    times = HOUR * np.array([1.0, 10.0, 49.0])
    found = triplets(tracks, times)
    assert found.n_triplet == 24
    scaled = triplets(replace(tracks, position=3 * tracks.position, step=2 * HOUR), 2 * times)
    np.testing.assert_allclose(scaled.area.value, 9 * found.area.value, rtol=1e-10)
    np.testing.assert_allclose(scaled.aspect.value, found.aspect.value, rtol=1e-10)
    np.testing.assert_allclose(scaled.area_growth().value, found.area_growth().value / 2, rtol=1e-8)
    turned = triplets(replace(tracks, position=tracks.position[:, [1, 0, 2]] + [1e4, 0, 0]), times)
    np.testing.assert_allclose(turned.area.value, found.area.value, rtol=1e-7)
    # Mean square side of all triangles is that of all pairs of the release: each pair is in equally many.
    square = 0.0
    for g in range(6):
        rows = tracks.offset[4 * g : 4 * g + 4] + 10
        for i in range(4):
            for j in range(i):
                square += separation(tracks.position[rows[i]], tracks.position[rows[j]], True)[0][0] ** 2 / 36
    assert found.side_square.value[1] == pytest.approx(square, rel=1e-10)


def test_large_releases_are_sampled():
    tracks, _ = drifting_particles(MOTION, (1, 30), HOUR, 3, 3)
    found = triplets(tracks, np.array([HOUR]), seed=1)
    assert found.n_triplet == MOST_PER_RELEASE
    assert found.n_left_out == 30 * 29 * 28 // 6 - MOST_PER_RELEASE
    assert "(3060 more left out)" in found.summary()
    again, other = (triplets(tracks, np.array([HOUR]), seed=k) for k in (1, 2))
    assert again.area.value[0] == found.area.value[0] != other.area.value[0]
    # A thousand of four thousand: within a few per cent of all (pairs of the same drifters make it less).
    assert found.side_square.value[0] == pytest.approx(other.side_square.value[0], rel=0.1)


def test_no_triangles():
    tracks, _ = drifting_particles(MOTION, (3, 2), HOUR, 10, 1)
    with pytest.raises(DataError, match="triplets: got none among 6 tracks, largest side None m"):
        triplets(tracks, np.zeros(1))
    three, _ = drifting_particles(MOTION, (3, 3), HOUR, 10, 1)
    with pytest.raises(DataError, match=r"largest side 10.0 m; needed are three particles of one release"):
        triplets(three, np.zeros(1), largest_side=10.0)
