"""Pairs: brute force as the independent route, laws of relabelling and shifting, clusters, refusals."""

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic

from regimes.errors import CaseError, DataError
from regimes.geodesy import to_cartesian
from regimes.pairs import CHANCE, LAUNCHED, Pairs, find_pairs
from regimes.tracks import Tracks

STEP = 600.0


def make(paths, starts, release=None, labels=None):
    """Planar tracks from lists of (n, 2) positions [m]."""
    n = len(paths)
    flat = np.concatenate([np.column_stack([p, np.zeros(len(p))]) for p in map(np.asarray, paths)])
    return Tracks(
        position=np.where(np.isnan(flat[:, :1]), np.nan, flat),
        offset=np.append(0, np.cumsum([len(p) for p in paths])),
        start_step=starts,
        step=STEP,
        first_time=0.0,
        planar=True,
        labels=tuple(labels) if labels else tuple(f"p{i}" for i in range(n)),
        release=[-1] * n if release is None else release,
        position_error=1.0,
    )


def line(n, x, y=0.0, speed=0.0):
    """A straight path of n steps."""
    return np.column_stack([x + speed * np.arange(n), np.full(n, float(y))])


def world(seed, n=14, trimmed=True):
    """Random walks with gaps, staggered starts and a mixture of known and unknown releases."""
    rng = np.random.default_rng(seed)
    paths, starts, release = [], [], []
    for _ in range(n):
        path = rng.uniform(0, 3000, 2) + np.cumsum(rng.normal(0, 400, (rng.integers(5, 40), 2)), axis=0)
        hole = rng.uniform(size=len(path)) < 0.3
        if trimmed:
            hole[[0, -1]] = False
        path[hole] = np.nan
        paths.append(path)
        starts.append(int(rng.integers(0, 20)))
        release.append(int(rng.integers(-1, 2)))
    return paths, starts, release


def brute_force(paths, starts, release, limit, window):
    """Every pair by the words of the rule, step by step."""
    n, horizon = len(paths), 80
    full = np.full((n, horizon, 2), np.nan)
    for i, path in enumerate(paths):
        full[i, starts[i] : starts[i] + len(path)] = path
    found = {}
    for i in range(n):
        for j in range(i + 1, n):
            distance = np.hypot(*(full[i] - full[j]).T)
            common = np.flatnonzero(~np.isnan(distance))
            if len(common) == 0:
                continue
            begin = common[0]
            soon = begin - min(starts[i], starts[j]) <= window
            if release[i] == release[j] and soon and distance[begin] <= limit:
                kind = LAUNCHED
            else:
                near = [k for k in common if distance[k] <= limit]
                if not near:
                    continue
                kind, begin = CHANCE, near[0]
            if common[-1] > begin:
                found[i, j] = (kind, begin, common[-1] - begin + 1, distance[begin])
    return found


def as_dict(pairs):
    columns = (pairs.first, pairs.second, pairs.kind, pairs.begin, pairs.length, pairs.start_separation)
    return {(i, j): tuple(rest) for i, j, *rest in zip(*(c.tolist() for c in columns), strict=True)}


@pytest.mark.parametrize("seed", range(25))
def test_agrees_with_brute_force(seed):
    paths, starts, release = world(seed, trimmed=seed % 2 == 0)
    expected = brute_force(paths, starts, release, 900.0, 6)
    tracks = make(paths, starts, release)
    got = as_dict(find_pairs(tracks, "both", 900.0, 6 * STEP))
    assert got.keys() == expected.keys()
    for key, value in expected.items():
        assert got[key][:3] == value[:3]
        np.testing.assert_allclose(got[key][3], value[3], rtol=1e-12)  # round-off
    for kind, code in (("launched", LAUNCHED), ("chance", CHANCE)):
        part = {key: value for key, value in got.items() if value[0] == code}
        if part:
            assert as_dict(find_pairs(tracks, kind, 900.0, 6 * STEP)) == part
        else:
            with pytest.raises(DataError, match=f"no {kind} pair"):
                find_pairs(tracks, kind, 900.0, 6 * STEP)
        assert as_dict(find_pairs(tracks, "both", 900.0, 6 * STEP).of_kind(kind)) == part


def test_order_of_tracks_and_their_names_change_nothing():
    paths, starts, release = world(3)
    one = find_pairs(make(paths, starts, release), "both", 900.0, 6 * STEP)
    order = np.random.default_rng(0).permutation(len(paths))
    shuffled = make(
        [paths[i] for i in order],
        [starts[i] for i in order],
        [[-1, 7, 3][release[i] + 1] for i in order],
        [f"new {i}" for i in order],
    )
    other = find_pairs(shuffled, "both", 900.0, 6 * STEP)

    def named(pairs, number):
        return {frozenset((number[i], number[j])): value for (i, j), value in as_dict(pairs).items()}

    assert named(other, order) == named(one, range(len(paths)))
    same = [one.cluster[i] == one.cluster[j] for i in order for j in order]
    assert same == [a == b for a in other.cluster for b in other.cluster]
    assert one.n_cluster == other.n_cluster


def test_moving_turning_and_delaying_everything_changes_nothing():
    paths, starts, release = world(4)
    turn = np.array([[0.6, -0.8], [0.8, 0.6]])
    one = find_pairs(make(paths, starts, release), "both", 900.0, 6 * STEP)
    moved = make([p @ turn + 5e4 for p in paths], [s + 7 for s in starts], release)
    other = find_pairs(moved, "both", 900.0, 6 * STEP)
    for name in ("first", "second", "length", "kind", "cluster"):
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name))
    np.testing.assert_array_equal(one.begin + 7, other.begin)
    np.testing.assert_allclose(one.start_separation, other.start_separation, rtol=1e-9)  # round-off at 50 km


def test_the_limit_is_included():
    tracks = make([line(3, 0), line(3, 300, 400)], [0, 0])
    assert find_pairs(tracks, "launched", 500.0).start_separation.tolist() == [500.0]
    with pytest.raises(DataError, match=r"0\.5 km"):
        find_pairs(tracks, "launched", 499.9)


def test_the_launch_window_is_included():
    tracks = make([line(30, 0), line(20, 100)], [0, 6])
    assert find_pairs(tracks, "launched", 500.0, 6 * STEP).begin.tolist() == [6]
    with pytest.raises(DataError, match=r"need 1 h; raise pairs.launched_within_h"):
        find_pairs(tracks, "launched", 500.0, 5 * STEP)


def test_first_seen_together_after_the_window_is_no_launched_pair():
    # It would be chosen for having stayed close through the gap.
    gappy = line(30, 0)
    gappy[2:20] = np.nan
    tracks = make([gappy, line(28, 100)], [0, 2])
    pairs = find_pairs(tracks, "both", 500.0, 6 * STEP)
    assert (pairs.kind.tolist(), pairs.begin.tolist()) == ([CHANCE], [20])


def test_different_releases_are_no_launched_pair():
    paths = [line(5, 0), line(5, 10), line(5, 20), line(5, 30), line(5, 40)]
    pairs = find_pairs(make(paths, [0] * 5, [0, 1, 0, -1, -1]), "both", 500.0)
    launched = pairs.of_kind("launched")
    assert list(zip(launched.first.tolist(), launched.second.tolist(), strict=True)) == [(0, 2), (3, 4)]
    assert pairs.n_pair == 10


def test_chance_pair_begins_at_its_first_meeting_and_is_met_once():
    # Passes at 100 m/step through a range of 250 m around the other, leaves, and comes back.
    path = np.concatenate([line(20, -1000, speed=100.0), line(20, 1000, speed=-100.0)])
    pairs = find_pairs(make([line(40, 0), path], [0, 0]), "chance", 250.0)
    assert pairs.begin.tolist() == [8]  # at -200 m
    assert pairs.length.tolist() == [32]
    assert pairs.start_separation.tolist() == [200.0]


def test_clusters_by_release_or_by_launch():
    # 0-1 one release though launched far apart, 2-3-4 tied by nearness (2-4 only through 3), 5 alone but met.
    paths = [
        line(9, 0),
        line(9, 9000),
        line(9, 50_000),
        line(9, 50_400),
        line(9, 50_800),
        line(9, 54_000, speed=-400),
    ]
    tracks = make([*paths, line(9, 1e6)], [0] * 7, [0, 0, -1, -1, -1, -1, -1])
    pairs = find_pairs(tracks, "both", 500.0)
    cluster = pairs.cluster.tolist()
    assert cluster[2] == cluster[3] == cluster[4] != cluster[5]
    assert cluster[0] == cluster[1] == cluster[6] == -1  # in no pair
    assert pairs.n_cluster == 2
    wide = find_pairs(tracks, "both", 10_000.0)
    assert wide.cluster[0] == wide.cluster[1] >= 0


def test_tracks_of_one_release_are_one_cluster_even_if_no_pair_ties_them():
    paths = [line(9, 0), line(9, 9000), line(9, 1800, speed=-400), line(9, 10_800, speed=-400)]
    pairs = find_pairs(make(paths, [0] * 4, [1, 1, -1, -1]), "both", 500.0)
    assert sorted(zip(pairs.first.tolist(), pairs.second.tolist(), strict=True)) == [(0, 2), (1, 3)]
    assert pairs.cluster[0] == pairs.cluster[1]
    assert pairs.n_cluster == 3


def test_both_members_of_a_launched_pair_share_their_cluster():
    for seed in range(10):
        pairs = find_pairs(make(*world(seed)), "both", 900.0, 6 * STEP).of_kind("launched")
        np.testing.assert_array_equal(pairs.cluster[pairs.first], pairs.cluster[pairs.second])


def test_geographic_pairs_across_the_date_line():
    east, west = to_cartesian([179.998] * 3, [10.0] * 3), to_cartesian([-179.999] * 3, [10.0] * 3)
    tracks = Tracks(np.concatenate([east, west]), [0, 3, 6], [0, 0], STEP, 0.0, False, ("a", "b"), [-1, -1], 1.0)
    pairs = find_pairs(tracks, "launched", 1000.0)
    expected = Geodesic.WGS84.Inverse(10.0, 179.998, 10.0, -179.999)["s12"]  # Karney 2013, via geographiclib
    np.testing.assert_allclose(pairs.start_separation, expected, rtol=1e-7)


def test_progress_counts_the_steps():
    seen = []
    find_pairs(make([line(5, 0), line(5, 1)], [0, 2]), "both", 500.0, progress=lambda *at: seen.append(at))
    assert seen == [(k + 1, 7) for k in range(7)]


def test_many_entries_are_thinned_without_loss(monkeypatch):
    paths, starts, release = world(5)
    one = find_pairs(make(paths, starts, release), "both", 900.0)
    monkeypatch.setattr("regimes.pairs.meetings._MOST_ENTRIES", 3)
    assert as_dict(find_pairs(make(paths, starts, release), "both", 900.0)) == as_dict(one)


def test_later_changes_change_nothing():
    first = np.array([0])
    pairs = Pairs(first, [1], [0], [2], [0], [1.0], [0, 0], 1)
    first[0] = 1
    assert pairs.first.tolist() == [0]
    with pytest.raises(ValueError, match="read-only"):
        pairs.begin[0] = 3


def test_selection_keeps_the_numbers_of_clusters():
    pairs = find_pairs(make(*world(1)), "both", 900.0, 6 * STEP)
    some = pairs.select(pairs.length > np.median(pairs.length))
    assert 0 < some.n_pair < pairs.n_pair
    np.testing.assert_array_equal(some.cluster, pairs.cluster)
    assert some.n_cluster == pairs.n_cluster


def test_summary():
    tracks = make([line(5, 0), line(5, 300), line(5, 5000, speed=-1250)], [0, 0, 0])
    assert find_pairs(tracks, "both", 1000.0).summary() == (
        "2 pairs (1 launched, 1 chance) of 3 tracks in 2 clusters, 0.3 to 0.95 km apart at the start "
        "(median 0.625 km), 2 to 5 steps long (median 4)"
    )
    assert find_pairs(tracks, "launched", 1000.0).of_kind("chance").summary() == "0 pairs"


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("lunched", 1.0, 0.0), r"pairs.kind: got 'lunched'; known: launched, chance, both"),
        (("both", 0.0, 0.0), r"pairs.max_separation_km: got 0.0; must be > 0"),
        (("both", np.nan, 0.0), r"pairs.max_separation_km: got nan; must be > 0"),
        (("both", 1.0, -3600.0), r"pairs.launched_within_h: got -1.0; must be >= 0"),
    ],
)
def test_refuses_arguments_out_of_range(arguments, message):
    with pytest.raises(CaseError, match=message):
        find_pairs(make([line(5, 0), line(5, 1)], [0, 0]), *arguments)


def test_refuses_an_unknown_kind_of_selection():
    with pytest.raises(CaseError, match=r"got 'both'; known: launched, chance$"):
        find_pairs(make([line(5, 0), line(5, 1)], [0, 0]), "both", 10.0).of_kind("both")


def test_refuses_a_single_particle():
    with pytest.raises(DataError, match="1 particle with a usable track; a pair needs at least two"):
        find_pairs(make([line(5, 0)], [0]), "launched", 10.0)


def test_says_how_close_the_launches_were():
    tracks = make([line(5, 0), line(5, 2500), line(5, 9000)], [0, 0, 1])
    with pytest.raises(
        DataError,
        match=r"no launched pair among 3 particles: the smallest start separation within 6 h is 2.5 km; must "
        r"be at most 1 km; raise pairs.max_separation_km or pairs.launched_within_h",
    ):
        find_pairs(tracks, "launched", 1000.0)


def test_says_that_releases_never_overlap():
    tracks = make([line(5, 0), line(5, 0)], [0, 10])
    with pytest.raises(DataError, match=r'no two of one release have a valid position at the same time.*"chance"'):
        find_pairs(tracks, "launched", 1000.0)
    with pytest.raises(DataError, match=r"no chance pair.*no two of them have a valid position at the same time"):
        find_pairs(tracks, "chance", 1000.0)


def test_says_how_close_any_two_came():
    tracks = make([line(5, 0), line(5, 5000, speed=-500)], [0, 0])
    with pytest.raises(
        DataError,
        match=r"no chance pair among 2.*smallest separation at any time is 3 km; must be at most 1 km",
    ):
        find_pairs(tracks, "chance", 1000.0)
    with pytest.raises(DataError, match=r"^no pair among 2 particles"):
        find_pairs(tracks, "both", 1000.0)


def test_says_that_pairs_share_one_step_only():
    tracks = make([line(5, 0), line(5, 10)], [0, 4])
    with pytest.raises(DataError, match=r"1 came within 1 km but share one step only; choose a shorter"):
        find_pairs(tracks, "launched", 1000.0)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"begin": [0, 0]}, "pairs: columns have shapes .* must be equal"),
        ({"second": [2]}, "members must be track numbers from 0 to 1"),
        ({"first": [-1]}, "members must be track numbers from 0 to 1"),
        ({"cluster": [0, 1]}, "cluster numbers must lie in -1 to 0"),
    ],
)
def test_the_record_checks_itself(change, message):
    good = {
        "first": [0],
        "second": [1],
        "begin": [0],
        "length": [5],
        "kind": [LAUNCHED],
        "start_separation": [1.0],
        "cluster": [0, 0],
        "n_cluster": 1,
    }
    assert Pairs(**good).n_pair == 1
    with pytest.raises(DataError, match=message):
        Pairs(**(good | change))
