"""Tracks on a common axis: interpolation, gaps, trimming, and what is refused."""

import numpy as np
import pytest

from regimes.errors import CaseError, DataError
from regimes.fixes import Fixes
from regimes.geodesy import to_cartesian, to_geographic
from regimes.tracks import Tracks, make_tracks

T0 = 1_700_000_400.0  # a whole multiple of 400 s, not of an hour


def planar_fixes(*particles, release=None):
    """Fixes on a plane from (times after T0 [s], x, y) of each particle."""
    code = np.repeat(np.arange(len(particles)), [len(p[0]) for p in particles])
    return Fixes(
        particle=code,
        labels=tuple(f"p{i}" for i in range(len(particles))),
        time=T0 + np.concatenate([np.asarray(p[0], dtype=float) for p in particles]),
        position=np.concatenate([np.column_stack(p[1:]) for p in particles]),
        planar=True,
        release=np.full(len(particles), -1) if release is None else release,
        release_labels=() if release is None else tuple(f"r{i}" for i in range(max(release) + 1)),
        position_error=2.0,
    )


def rows(tracks, i):
    return tracks.position[tracks.offset[i] : tracks.offset[i + 1]]


def times(tracks, i):
    step = tracks.start_step[i] + np.arange(tracks.n_step[i])
    return tracks.first_time + step * tracks.step


def test_interpolates_as_numpy_does():
    rng = np.random.default_rng(1)
    particles = []
    for n in (40, 25, 3):
        t = np.sort(rng.uniform(0, 30_000, n))
        particles.append((t, rng.normal(size=n) * 1e3, rng.normal(size=n) * 1e3))
    fixes = planar_fixes(*particles)
    tracks = make_tracks(fixes, step=700.0, longest_gap=1e6)
    assert tracks.n_track == 3
    for i, (t, x, y) in enumerate(particles):
        at = times(tracks, i)
        assert np.all(at % 700.0 == 0)
        assert at[0] - 700 < T0 + t[0] <= at[0]
        assert at[-1] <= T0 + t[-1] < at[-1] + 700
        np.testing.assert_allclose(rows(tracks, i)[:, 0], np.interp(at, T0 + t, x), atol=1e-6)  # round-off
        np.testing.assert_allclose(rows(tracks, i)[:, 1], np.interp(at, T0 + t, y), atol=1e-6)
        assert not np.any(rows(tracks, i)[:, 2])


def test_fixes_on_the_axis_are_kept_exactly():
    t = np.arange(10) * 400.0
    x = np.random.default_rng(2).normal(size=10)
    tracks = make_tracks(planar_fixes((t, x, -x)), step=400.0)
    assert tracks.first_time == T0
    np.testing.assert_array_equal(tracks.position[:, 0], x)
    np.testing.assert_array_equal(tracks.position[:, 1], -x)


def test_fractional_seconds_do_not_lose_the_last_step():
    t = np.arange(200) * 0.1
    tracks = make_tracks(planar_fixes((t, t, t)), step=0.1)
    assert tracks.n_step[0] == 200
    np.testing.assert_allclose(tracks.position[:, 0], t, atol=1e-6)


@pytest.mark.parametrize("step", [0.1, 0.7, 400.0])
@pytest.mark.parametrize("off", [-3e-7, 0.0, 3e-7])  # a time near 1.7e9 s is a double to 2.4e-7 s
def test_fixes_at_a_gap_are_kept_in_spite_of_round_off(step, off):
    t = np.append(np.arange(100), np.arange(150, 250)) * step + off
    tracks = make_tracks(planar_fixes((t, t, t)), step=step, longest_gap=1.5 * step)
    np.testing.assert_array_equal(np.flatnonzero(np.isnan(tracks.position[:, 0])), np.arange(100, 150))
    assert tracks.n_step[0] == 250


def test_a_long_gap_is_not_bridged():
    t = np.array([0, 400, 800, 2800, 3200]) + 0.0
    tracks = make_tracks(planar_fixes((t, t, t)), step=400.0, longest_gap=1600.0)
    x = tracks.position[:, 0]
    np.testing.assert_array_equal(np.isnan(x), [False, False, False, True, True, True, True, False, False])
    np.testing.assert_array_equal(np.isnan(tracks.position).all(axis=1), np.isnan(x))


def test_a_gap_of_the_allowed_length_is_bridged():
    t = np.array([0, 400, 800, 2400, 2800]) + 0.0
    tracks = make_tracks(planar_fixes((t, t, t)), step=400.0, longest_gap=1600.0)
    np.testing.assert_allclose(tracks.position[:, 0], np.arange(8) * 400.0)


def test_default_gap_is_three_steps():
    t = np.array([0, 400, 800, 2000, 3600, 4000, 4400]) + 0.0
    tracks = make_tracks(planar_fixes((t, t, t)))
    assert tracks.step == 400.0
    np.testing.assert_array_equal(np.flatnonzero(np.isnan(tracks.position[:, 0])), [6, 7, 8])


def test_default_gap_bridges_fixes_when_the_step_is_finer():
    t = np.arange(6) * 400.0
    tracks = make_tracks(planar_fixes((t, t, t)), step=100.0)
    np.testing.assert_allclose(tracks.position[:, 0], np.arange(21) * 100.0)


def test_gaps_at_both_ends_are_trimmed():
    t = np.array([50, 4050, 4450, 4850, 5250, 9050]) + 0.0
    tracks = make_tracks(planar_fixes((t, t, t)), step=400.0, longest_gap=400.0)
    np.testing.assert_array_equal(times(tracks, 0) - T0, [4400, 4800, 5200])
    assert tracks.start_step[0] == 0
    assert not np.isnan(tracks.position).any()


def test_a_particle_too_short_for_the_axis_is_left_out_and_named():
    long, short = np.arange(5) * 400.0, np.array([10.0, 20.0])
    fixes = planar_fixes((short, short, short), (long, long, long), (short, short, short), release=[0, 1, 2])
    tracks = make_tracks(fixes, step=400.0)
    assert tracks.labels == ("p1",)
    np.testing.assert_array_equal(tracks.release, [1])
    assert tracks.missing_from(fixes) == ("p0", "p2")


@pytest.mark.parametrize(
    ("interval", "step"), [(3601.0, 3600.0), (1806.0, 1800.0), (1863.4, 1863.0), (0.25, 0.25), (907.0, 900.0)]
)
def test_default_step_is_a_round_interval(interval, step):
    t = np.arange(20) * interval
    assert make_tracks(planar_fixes((t, t, t))).step == step


def test_geographic_positions_across_the_date_line():
    lon = np.array([179.9, 179.98, -179.94, -179.86])
    fixes = Fixes([0] * 4, ("a",), T0 + 400.0 * np.arange(4), np.column_stack([lon, [5.0] * 4]), False, [-1], (), 1.0)
    tracks = make_tracks(fixes, step=200.0)
    back = to_geographic(tracks.position)
    np.testing.assert_allclose(back[0] % 360, 179.9 + 0.04 * np.arange(7), atol=1e-8)
    np.testing.assert_array_equal(tracks.position[::2], to_cartesian(lon, [5.0] * 4))


def test_sagitta_of_interpolation_is_as_small_as_promised():
    # Two fixes 10 km apart: the chord runs d^2 / 8 R = 2 m below the surface.
    fixes = Fixes([0, 0], ("a",), [T0, T0 + 800], [[0.0, 0.0], [0.08983, 0.0]], False, [-1], (), 1.0)
    radius = np.linalg.norm(make_tracks(fixes, step=400.0).position, axis=1)
    np.testing.assert_allclose(radius[0] - radius[1], 1e4**2 / 8 / 6378137, rtol=0.01)


def test_later_changes_to_fixes_change_nothing():
    t = np.arange(5) * 400.0
    x = np.arange(5) * 1.0
    fixes = planar_fixes((t, x, x))
    tracks = make_tracks(fixes)
    for record in (fixes, tracks):
        with pytest.raises(ValueError, match="read-only"):
            record.position[0] = 9.0
    position = np.zeros((2, 3))
    mine = Tracks(position, [0, 2], [0], 60.0, 0.0, True, ("a",), [-1], 1.0)
    position[:] = 7.0
    assert not mine.position.any()


def test_shift_of_time_by_whole_steps_changes_only_the_clock():
    t = np.sort(np.random.default_rng(3).uniform(0, 20_000, 50))
    one = make_tracks(planar_fixes((t, t, t)), step=400.0)
    other = make_tracks(planar_fixes((t + 4000.0, t, t)), step=400.0)
    assert other.first_time - one.first_time == 4000.0
    np.testing.assert_array_equal(one.start_step, other.start_step)
    np.testing.assert_allclose(one.position, other.position, atol=1e-5)  # round-off of a time near 1e9 s


def test_summary():
    t = np.array([0, 400, 800, 2800, 3200]) + 0.0
    text = make_tracks(planar_fixes((t, t, t)), step=400.0, longest_gap=400.0).summary()
    assert text == "1 track every 0.1111 h, 0.037 days long, 44.4% of the steps in gaps"


@pytest.mark.parametrize("value", [0.0, -1.0, np.nan, np.inf])
def test_refuses_a_step_or_gap_that_is_not_positive(value):
    t = np.arange(5) * 400.0
    with pytest.raises(CaseError, match=r"^step: got .* s; must be a number > 0"):
        make_tracks(planar_fixes((t, t, t)), step=value)
    with pytest.raises(CaseError, match=r"^longest_gap: got .* s; must be a number > 0"):
        make_tracks(planar_fixes((t, t, t)), longest_gap=value)


def test_refuses_a_step_that_would_invent_positions():
    t = np.arange(5) * 400.0
    with pytest.raises(DataError, match=r"step is 99 s but the median fix interval is 400 s.*at least 100 s"):
        make_tracks(planar_fixes((t, t, t)), step=99.0)


def test_refuses_when_nothing_is_left():
    t = np.arange(5) * 400.0 + 10
    with pytest.raises(DataError, match=r"no particle has two positions on an axis of 400 s.*over 300 s"):
        make_tracks(planar_fixes((t, t, t)), step=400.0, longest_gap=300.0)


def test_refuses_single_fixes():
    with pytest.raises(DataError, match="no particle has two fixes; a track needs at least two"):
        make_tracks(planar_fixes(([0.0], [1.0], [1.0]), ([0.0], [2.0], [1.0])))


def test_refuses_a_gap_that_would_fill_the_memory():
    t = np.append(np.arange(50) * 1.0, 3e8)
    with pytest.raises(DataError, match=r"longest gap is 3472 days, in particle p0: look for a wrong date"):
        make_tracks(planar_fixes((t, t, t)))


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"position": np.zeros((4, 2))}, r"position has shape \(4, 2\); must be \(n_sample, 3\)"),
        ({"labels": ("a",)}, "2 start steps, 3 offsets, 2 releases and 1 labels"),
        ({"offset": [0, 2, 3]}, "offset must rise from 0 to the number of samples"),
        ({"offset": [0, 0, 4]}, "offset must rise from 0 to the number of samples"),
        ({"step": 0.0}, "step is 0.0 s; must be > 0"),
    ],
)
def test_the_record_checks_itself(change, message):
    good = {
        "position": np.zeros((4, 3)),
        "offset": [0, 2, 4],
        "start_step": [0, 0],
        "step": 60.0,
        "first_time": 0.0,
        "planar": True,
        "labels": ("a", "b"),
        "release": [-1, -1],
        "position_error": 1.0,
    }
    assert Tracks(**good).n_track == 2
    with pytest.raises(DataError, match=message):
        Tracks(**(good | change))
