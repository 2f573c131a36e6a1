"""Cleaning of fixes: each fault planted in an invented drift must be found and counted, and nothing else."""

import numpy as np
import pandas as pd
import pytest
from pyproj import Geod

from regimes.fixes import Columns, fixes_from_frame
from regimes.fixes.speeds import distances

GEO = Columns(particle="id", time="time", longitude="lon", latitude="lat")
GEO_RELEASE = Columns(particle="id", time="time", longitude="lon", latitude="lat", release="release")
PLANE = Columns(particle="id", time="time", x="x", y="y")
T0 = 1_700_000_000
KEYS = ["id", "time", "lon", "lat", "x", "y", "release"]


def drift(seed=1, n_particle=4, n_fix=60):
    """Random walks of about 0.3 m/s, hourly, across the date line; also on a plane."""
    rng = np.random.default_rng(seed)
    step = rng.normal(0, 0.008, (n_particle, n_fix, 2))
    place = np.array([179.9, -10.0]) + np.cumsum(step, axis=1) + rng.normal(0, 0.05, (n_particle, 1, 2))
    frame = pd.DataFrame({"id": np.repeat([f"d{k}" for k in range(n_particle)], n_fix)})
    frame["time"] = np.tile(T0 + 3600.0 * np.arange(n_fix), n_particle)
    frame[["lon", "lat"]] = place.reshape(-1, 2)
    frame["lon"] = (frame["lon"] + 180) % 360 - 180
    frame[["x", "y"]] = (place.reshape(-1, 2) - place[0, 0]) * 111e3 + 5000
    frame["release"] = np.where(frame["id"] < "d2", "one", "two")
    return frame


def clean(frame, columns=GEO, error=10.0, limit=None):
    return fixes_from_frame(frame, columns, error, limit)


def counts(fixes):
    return {item.reason: item.count for item in fixes.cleaning}


def same(one, other):
    np.testing.assert_array_equal(one.particle, other.particle)
    np.testing.assert_array_equal(one.time, other.time)
    np.testing.assert_allclose(one.position, other.position, atol=1e-10, rtol=0)
    np.testing.assert_array_equal(one.release, other.release)


def insert(frame, at, **values):
    """A copy of one row, changed."""
    return pd.concat([frame, frame.iloc[[at]].assign(**values)], ignore_index=True)


def changed(frame, at, **values):
    frame = frame.copy()
    for key, value in values.items():
        frame.loc[at, key] = value
    return frame


def dirty():
    """A drift with one of most faults."""
    frame = drift()
    frame = changed(frame, 10, lat=frame.loc[10, "lat"] + 3.0)
    frame = insert(frame, 70)
    frame = insert(frame, 80, lat=-20.0)
    frame = insert(frame, 90, lat=np.nan)
    frame = insert(frame, 110, lat=frame.loc[110, "lat"] + 1e-4)
    return insert(frame, 100, id="alone", release="two")


def test_a_clean_drift_is_kept_whole():
    for columns in (GEO, PLANE):
        fixes = clean(drift(), columns)
        assert fixes.n_fix == 240
        assert fixes.cleaning == ()


def test_order_of_rows_never_matters():
    expected = clean(dirty(), GEO_RELEASE)
    for seed in range(5):
        order = np.random.default_rng(seed).permutation(len(dirty()))
        got = clean(dirty().iloc[order], GEO_RELEASE)
        same(got, expected)
        assert got.labels == expected.labels
        assert counts(got).pop("rows out of time order") > 0
        assert {key: value for key, value in counts(got).items() if "order" not in key} == {
            key: value for key, value in counts(expected).items() if "order" not in key
        }


def test_names_never_matter():
    names = {"d0": "zebra", "d1": "9", "d2": "10", "d3": "Ab"}
    one, other = clean(drift()), clean(drift().replace({"id": names}))
    assert other.labels == ("9", "10", "Ab", "zebra")
    for k, name in enumerate(one.labels):
        mine, theirs = one.particle == k, other.particle == other.labels.index(names[name])
        np.testing.assert_array_equal(one.position[mine], other.position[theirs])


def test_winding_of_longitude_never_matters():
    frame = changed(dirty(), 4, lon=-180.0)
    rng = np.random.default_rng(2)
    mixed = np.where(rng.uniform(size=len(frame)) < 0.5, frame["lon"] % 360, frame["lon"])
    edge = frame["lon"].replace(-180.0, np.nextafter(-180.0, -200.0))  # its remainder rounds to 360
    for lon in (frame["lon"] % 360, mixed, edge):
        got = clean(frame.assign(lon=lon))
        same(got, clean(frame))
        assert counts(got) == counts(clean(frame))
        assert got.position[:, 0].min() >= -180
        assert got.position[:, 0].max() < 180


def test_later_changes_to_the_table_change_nothing():
    frame = drift()
    fixes = clean(frame)
    before = fixes.position.copy()
    frame[["lon", "lat", "time"]] = 0.0
    np.testing.assert_array_equal(fixes.position, before)


def test_missing_values():
    frame = drift().astype({"id": object})
    for at, key in ((3, "id"), (70, "time"), (80, "lon"), (90, "lat")):
        frame.loc[at, key] = np.nan
    frame.loc[200, ["lon", "lat"]] = np.nan
    fixes = clean(frame)
    assert counts(fixes) == {"missing values": 5}
    assert fixes.n_fix == 235


def test_missing_dates():
    frame = drift()
    frame["time"] = pd.to_datetime(frame["time"], unit="s", utc=True)
    frame.loc[7, "time"] = pd.NaT
    assert counts(clean(frame)) == {"missing values": 1}


def test_times_that_cannot_be():
    frame = drift()
    frame.loc[[5, 6, 100], "time"] = [0.0, 9.969209968386869e36, 5e9]
    fixes = clean(frame)
    assert counts(fixes) == {"fill-value times": 3}
    assert fixes.n_fix == 237


def test_positions_that_cannot_be():
    frame = drift()
    frame.loc[[5, 6, 100], "lat"] = [91.0, -999.0, 1e35]
    frame.loc[[50, 51], "lon"] = [400.0, -999.0]
    frame.loc[[60, 61, 62], ["lon", "lat"]] = 0.0
    fixes = clean(frame)
    assert counts(fixes) == {"impossible positions": 5, "null positions": 3, "missing values": 8}
    assert fixes.n_fix == 232


def test_a_drift_around_the_null_point_is_kept():
    frame = drift().iloc[:60]
    frame = frame.assign(lon=frame["lon"] % 360 - 179.9, lat=frame["lat"] + 10)
    near = changed(frame, 0, lon=0.0, lat=0.0)
    assert counts(clean(near)) == {"null positions": 1, "missing values": 1}


def test_repeats():
    fixes = clean(insert(insert(insert(drift(), 70), 70), 200, release="two"), GEO_RELEASE)
    assert counts(fixes) == {"duplicates": 3, "rows out of time order": 2}
    same(fixes, clean(drift(), GEO_RELEASE))


def test_repeats_within_the_position_error_are_one_fix():
    frame = insert(drift(), 70, lat=drift().loc[70, "lat"] + 0.0003)  # 33 m
    assert counts(clean(frame, error=10.0)) == {"duplicates": 1, "rows out of time order": 1}
    assert counts(clean(frame, error=5.0)) == {"conflicting duplicates": 2, "rows out of time order": 1}


def test_of_conflicting_repeats_all_go():
    frame = insert(drift(), 70, lat=-10.5)
    fixes = clean(frame)
    assert counts(fixes)["conflicting duplicates"] == 2
    same(fixes, clean(drift().drop(70)))


def test_particles_of_one_fix():
    frame = insert(insert(drift(), 100, id="alone"), 100, id="alone too")
    fixes = clean(frame)
    assert counts(fixes) == {"particles of one fix": 2}
    same(fixes, clean(drift()))


def test_release_of_a_particle_is_taken_from_the_fixes_that_name_one():
    frame = drift().astype({"release": object})
    frame.loc[frame.index % 7 > 0, "release"] = None
    frame.loc[frame["id"] == "d3", "release"] = None
    fixes = clean(frame, GEO_RELEASE)
    assert fixes.release_labels == ("one", "two")
    np.testing.assert_array_equal(fixes.release, [0, 0, 1, -1])


# --- impossible speeds ----------------------------------------------------------------------------------


@pytest.mark.parametrize("columns", [GEO, PLANE])
@pytest.mark.parametrize("at", [0, 30, 59, 60, 119, 239])
def test_a_lone_wrong_fix_goes(columns, at):
    frame = drift()
    wrong = changed(frame, at, lat=frame.loc[at, "lat"] + 1.0, y=frame.loc[at, "y"] + 1.1e5)
    fixes = clean(wrong, columns)
    assert counts(fixes) == {"impossible speeds": 1}
    same(fixes, clean(frame.drop(at), columns))


def test_every_other_fix_wrong_for_a_while():
    frame = drift()
    bad = [20, 22, 24, 26, 140, 142]
    wrong = changed(frame, bad, lat=frame.loc[bad, "lat"] + 1.0)
    same(clean(wrong), clean(frame.drop(bad)))


def test_scattered_wrong_fixes_in_a_row():
    frame = drift()
    bad = [20, 21, 22, 23]
    wrong = changed(frame, bad, lat=frame.loc[bad, "lat"] + np.array([1.0, -2.0, 3.0, -1.5]))
    fixes = clean(wrong)
    assert counts(fixes) == {"impossible speeds": 4}
    same(fixes, clean(frame.drop(bad)))


def test_a_wrong_fix_with_a_slow_way_back():
    # Half a minute after a right fix, 3 km off: 100 m/s out, but an hour to return.
    frame = drift()
    wrong = insert(frame, 30, time=frame.loc[30, "time"] + 30.0, lat=frame.loc[30, "lat"] + 0.027)
    fixes = clean(wrong)
    assert counts(fixes)["impossible speeds"] == 1
    same(fixes, clean(frame))
    early = insert(frame, 30, time=frame.loc[30, "time"] - 30.0, lat=frame.loc[30, "lat"] + 0.027)
    same(clean(early), clean(frame))


def test_a_jump_that_persists_is_kept_and_counted():
    frame = drift()
    moved = frame.assign(lat=frame["lat"] + np.where((frame["id"] == "d1") & (frame.index >= 90), 1.0, 0.0))
    fixes = clean(moved)
    assert counts(fixes) == {"jumps that persist": 1}
    assert fixes.n_fix == 240


def test_a_fix_is_not_blamed_for_a_jump_that_its_loss_would_hide_or_keep():
    n = 20
    frame = pd.DataFrame({"id": "a", "time": T0 + 3600.0 * np.arange(n), "x": 100.0 * np.arange(n), "y": 0.0})
    # 22 km in an hour: above 5 m/s, but not over two hours.
    aside = frame.assign(y=np.where(frame.index >= 10, 22e3, 0.0))
    assert counts(clean(aside, PLANE)) == {"jumps that persist": 1}
    # 17 km one way at a possible speed, then 60 km back: far off the way, and impossible without it too.
    bent = frame.assign(x=np.where(frame.index >= 10, 36e3, 100.0 * frame.index), y=0.0)
    bent.loc[9, "x"] = -16.5e3
    bent.loc[10:, "y"] = 27e3
    assert counts(clean(bent, PLANE)) == {"jumps that persist": 1}


def test_wrong_fixes_and_jumps_of_several_particles_are_told_apart():
    frame = drift()
    moved = frame.assign(lat=frame["lat"] + np.where((frame["id"] == "d1") & (frame.index >= 90), 1.0, 0.0))
    wrong = changed(moved, [10, 150], lat=moved.loc[[10, 150], "lat"] + 2.0)
    assert counts(clean(wrong)) == {"impossible speeds": 2, "jumps that persist": 1}


def test_position_error_is_no_speed():
    # Ten seconds and 40 m apart is 4 m/s on top of the drift; errors of 10 m explain it.
    frame = insert(drift(), 30, time=drift().loc[30, "time"] + 1.0, lat=drift().loc[30, "lat"] + 0.00045)  # 50 m
    assert clean(frame, error=10.0).n_fix == 241
    assert clean(frame, error=1.0).n_fix == 240


def test_highest_speed_is_obeyed():
    # 9.5 km in an hour, out and back: 2.6 m/s.
    frame = drift()
    wrong = changed(frame, 30, lat=frame.loc[[29, 31], "lat"].mean() + 0.0856, lon=frame.loc[29, "lon"])
    assert clean(wrong).n_fix == 240
    assert clean(wrong, limit=3.5).n_fix == 240
    assert clean(wrong, limit=2.0).n_fix == 239


def test_default_limit_follows_fast_particles():
    # Balloons: 30 m/s all the time, a limit of 300 m/s.
    n = 50
    frame = pd.DataFrame({"id": "b", "time": T0 + 60.0 * np.arange(n), "x": 1800.0 * np.arange(n), "y": 0.0})
    assert clean(frame, PLANE).cleaning == ()
    wrong = changed(frame, 25, y=30_000.0)
    [note] = clean(wrong, PLANE).cleaning
    assert (note.reason, note.count) == ("impossible speeds", 1)
    assert note.note == "need more than 300 m/s; dropped"


def test_distances_of_the_speed_check():
    # A sphere of the mean radius is within 0.6 % of the ellipsoid (pyproj's geodesics).
    rng = np.random.default_rng(3)
    a = np.column_stack([rng.uniform(-180, 180, 200), rng.uniform(-89, 89, 200)])
    b = a + rng.normal(0, 2.0, a.shape) * [1, 0.4]
    expected = Geod(ellps="WGS84").inv(*a.T, *b.T)[2]
    np.testing.assert_allclose(distances(a, b, False), expected, rtol=0.006)
    np.testing.assert_array_equal(distances(np.zeros((1, 2)), np.array([[3.0, 4.0]]), True), [5.0])


def test_summary_tells_everything():
    lines = clean(dirty(), GEO_RELEASE).summary().splitlines()
    assert lines[0] == (
        "238 fixes of 4 particles, 2 releases, 2023-11-14T22:13:20Z to 2023-11-17T09:13:20Z (2.46 days)"
    )
    assert [line.split(" (")[0].strip() for line in lines[1:]] == [
        "missing values: 1",
        "rows out of time order: 1",
        "duplicates: 2",
        "conflicting duplicates: 2",
        "impossible speeds: 1",
        "particles of one fix: 1",
    ]
