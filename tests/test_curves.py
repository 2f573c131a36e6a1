"""Curves: passages counted by hand and by a slow independent route, laws, errors of known truth."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.curves import (
    Curve,
    default_times,
    dispersion_statistics,
    exit_statistics,
    make_groups,
    separation_counts,
)
from regimes.errors import DataError
from regimes.geodesy import separation, to_cartesian
from regimes.pairs import LAUNCHED, Pairs
from regimes.tracks import Tracks

THRESHOLDS = np.array([1.0, 2.0, 4.0, 8.0])


def tracks_of(positions, step=10.0, planar=True):
    """Tracks from a list of (n, 3) arrays that all start at step 0."""
    sizes = [len(p) for p in positions]
    return Tracks(
        position=np.concatenate(positions).astype(float),
        offset=np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64),
        start_step=np.zeros(len(positions), dtype=np.int64),
        step=step,
        first_time=0.0,
        planar=planar,
        labels=tuple(str(i) for i in range(len(positions))),
        release=np.full(len(positions), -1, dtype=np.int64),
        position_error=0.0,
    )


def pairs_of(tracks, members, cluster):
    """Pairs over the common record of their members, which start at step 0."""
    first, second = np.asarray(members, dtype=np.int64).reshape(-1, 2).T
    size = np.diff(tracks.offset)
    a, b = tracks.position[tracks.offset[first]], tracks.position[tracks.offset[second]]
    return Pairs(
        first=first,
        second=second,
        begin=np.zeros(first.size, dtype=np.int64),
        length=np.minimum(size[first], size[second]).astype(np.int64),
        kind=np.full(first.size, LAUNCHED, dtype=np.int8),
        start_separation=separation(a, b, tracks.planar)[0],
        cluster=np.asarray(cluster, dtype=np.int64),
        n_cluster=int(np.max(cluster)) + 1,
    )


def pairs_with(*separations, step=10.0):
    """One planar pair along x for each list of separations, each its own cluster; NaN is a gap."""
    positions = []
    for values in separations:
        r = np.asarray(values, dtype=float)
        positions.append(np.zeros((r.size, 3)))
        positions.append(np.stack([r, np.zeros(r.size), np.zeros(r.size)], axis=1))
        positions[-1][np.isnan(r)] = np.nan
    tracks = tracks_of(positions, step)
    n = len(separations)
    return tracks, pairs_of(tracks, np.arange(2 * n).reshape(n, 2), np.repeat(np.arange(n), 2))


def random_world(seed, n_cluster=6, per_cluster=3, n_step=120, gaps=True):
    """Particles that spread as random walks with growing steps, all pairs of all particles."""
    rng = np.random.default_rng(seed)
    positions = []
    for c in range(n_cluster):
        for _ in range(per_cluster):
            path = np.zeros((n_step, 3))
            scale = 0.3 * 1.03 ** np.arange(n_step)[:, None]
            path[:, :2] = np.cumsum(rng.standard_normal((n_step, 2)) * scale, axis=0) + 2.0 * c
            if gaps:
                for start in rng.integers(5, n_step, 2):
                    path[start : start + 4] = np.nan
            positions.append(path)
    tracks = tracks_of(positions)
    one, two = np.triu_indices(len(positions), 1)
    cluster = np.repeat(np.arange(n_cluster), per_cluster)
    return tracks, pairs_of(tracks, np.stack([one, two], axis=1), cluster)


def within_clusters(pairs):
    same = pairs.cluster[pairs.first] == pairs.cluster[pairs.second]
    return pairs.select(same)


def paths(tracks, pairs):
    """Separation of each pair at every step, from its definition."""
    for i, j, n in zip(pairs.first, pairs.second, pairs.length, strict=True):
        a, b = (tracks.position[tracks.offset[k] : tracks.offset[k] + n] for k in (i, j))
        yield separation(a, b, tracks.planar)[0]


def slow_passage(r, low, high):
    """One threshold, from the definition: (exits, steps at risk, steps of exits, zero-length exits, sums of u and
    u^2 at the start, of u and u^2 at the exit, last r if unfinished), u = ln(r / threshold) unless zero-length."""
    known = np.flatnonzero(np.isfinite(r))
    at_or_above = np.flatnonzero(r >= low)
    if r[known[0]] > low or at_or_above.size == 0:
        return None
    start = at_or_above[0]
    if start != known[0] and not np.isfinite(r[start - 1]):
        return None  # crossed out of sight
    rest = np.arange(start, r.size)
    ends = rest[(r[rest] >= high)]
    lost = rest[np.isnan(r[rest])]
    end = ends[0] if ends.size else r.size
    if ends.size and not (lost.size and lost[0] < end):
        if end == start:
            return 1, 0, 0, 1, 0, 0, 0, 0, None
        u, v = np.log(r[start] / low), np.log(r[end] / high)
        return 1, end - start, end - start, 0, u, u**2, v, v**2, None
    last = (lost[0] if lost.size else r.size) - 1
    u = np.log(r[start] / low)
    return 0, last - start, 0, 0, u, u**2, 0, 0, r[last]


class TestPassagesByHand:
    """Expected numbers counted with pencil and paper from the rule, thresholds 1, 2, 4, 8 m, step 10 s."""

    @pytest.mark.parametrize(
        ("record", "exits", "risk", "zero", "censored"),
        [
            # starts below all; the last sample passes 4 and 8 at once
            ([0.5, 1, 1.5, 2.5, 3, 9], [1, 1, 1], [20, 20, 0], [0, 0, 1], [0, 0, 0]),
            # starts above 1 and 2, so only 4 counts; ends before 8
            ([3, 5, 6], [0, 0, 0], [0, 0, 10], [0, 0, 0], [0, 0, 1]),
            # starts exactly on 2, falls back, then reaches 4 at the very end
            ([2, 1, 4], [0, 1, 0], [0, 20, 0], [0, 0, 0], [0, 0, 1]),
            # the gap ends the passage at 1 at its first sample; 2 is crossed in sight afterwards
            ([0.5, 1.2, np.nan, np.nan, 1.5, 2.5, 4], [0, 1, 0], [0, 10, 0], [0, 0, 0], [1, 0, 1]),
            # 1 and 2 are crossed inside the gap and lost, 4 is not
            ([0.5, np.nan, 2.5, 4, 8], [0, 0, 1], [0, 0, 10], [0, 0, 0], [0, 0, 0]),
            # on a threshold right after a gap: when it was crossed is unknown, so it is lost too
            ([0.5, np.nan, 2, 4.5, 8], [0, 0, 1], [0, 0, 10], [0, 0, 0], [0, 0, 0]),
            # returns below 1 and comes back: time runs from the first crossing on
            ([0.5, 1.5, 0.3, 2.1], [1, 0, 0], [20, 0, 0], [0, 0, 0], [0, 1, 0]),
            # everything within one sampling interval
            ([0.5, 100], [1, 1, 1], [0, 0, 0], [1, 1, 1], [0, 0, 0]),
            # never reaches the first threshold; starts above the last
            ([0.1, 0.9, 0.2], [0, 0, 0], [0, 0, 0], [0, 0, 0], [0, 0, 0]),
            ([9, 10, 0.1, 20], [0, 0, 0], [0, 0, 0], [0, 0, 0], [0, 0, 0]),
        ],
    )
    def test_counts(self, record, exits, risk, zero, censored):
        found = exit_statistics(*pairs_with(record), THRESHOLDS)
        assert found.exits.sum(axis=0).tolist() == exits
        assert found.time_at_risk.sum(axis=0).tolist() == risk
        assert found.zero_length.tolist() == zero
        assert found.censored.tolist() == censored
        assert found.passages.tolist() == (np.array(exits) + censored).tolist()

    def test_unfinished_passages_are_listed_with_where_they_were_last_seen(self):
        found = exit_statistics(*pairs_with([0.5, 1.5, 3.0, 3.5, 3.2], [0.5, 1.0, 0.7]), THRESHOLDS)
        assert found.loose_row.tolist() == [0, 1]
        assert found.loose_interval.tolist() == [1, 0]
        assert np.exp(found.loose_log) == pytest.approx([3.2, 0.7], rel=1e-14)
        assert found.finished_time.tolist() == [[10, 0, 0], [0, 0, 0]]

    def test_unfinished_passages_of_pairs_between_clusters_stand_in_all_their_rows(self):
        tracks, _ = pairs_with([0.5, 1.5])
        found = exit_statistics(tracks, pairs_of(tracks, [[0, 1]], [0, 1]), THRESHOLDS)
        assert sorted(found.loose_row.tolist()) == [0, 1, 2]
        assert found.weight.tolist() == [1, 1, -1]
        assert np.exp(found.loose_log) == pytest.approx([1.5] * 3, rel=1e-14)

    def test_textbook_rate_knows_only_finished_passages(self):
        found = exit_statistics(*pairs_with([0.5, 1, 1.5, 2.5], [0.5, 1, 1, 1, 1, 1, 1]), THRESHOLDS)
        assert found.textbook_rate[0] == pytest.approx(np.log(2) / 20, rel=1e-14)
        assert np.isnan(found.textbook_rate[1:]).all()

    def test_exponent_is_log_ratio_times_exits_over_risk(self):
        found = exit_statistics(*pairs_with([0.5, 1, 1.5, 2.5], [0.5, 1, 1, 1, 1, 1, 1]), THRESHOLDS)
        curve = found.curve()
        # one exit in 20 s and 50 s without: ln 2 / 70 s; nothing at risk at 2 m beyond the last sample
        assert curve.value[0] == pytest.approx(np.log(2) / 70, rel=1e-14)
        assert np.isnan(curve.value[1:]).all()
        assert curve.n_cluster.tolist() == [2, 0, 0]

    def test_coinciding_members_have_no_infinite_logarithm(self):
        found = exit_statistics(*pairs_with([0.5, 1.0, 1.5, 0.0]), THRESHOLDS)
        assert found.time_at_risk.sum(axis=0).tolist() == [20, 0, 0]
        assert np.exp(found.loose_log) == pytest.approx([1.5], rel=1e-14)


@pytest.mark.parametrize("planar", [True, False])
def test_passages_agree_with_the_definition_applied_one_threshold_at_a_time(planar):
    """Independent route: every threshold on its own by `slow_passage`, no chain."""
    tracks, pairs = random_world(1)
    thresholds = 2.0 * 1.3 ** np.arange(12)
    if not planar:  # the same world on the ellipsoid, scaled to separations up to thousands of km
        scale = 2e-3
        lonlat = tracks.position[:, :2] * scale / np.cos(np.radians(50.0)), 50.0 + tracks.position[:, 1] * scale
        tracks = replace(tracks, position=to_cartesian(lonlat[0][:, 0], lonlat[1]), planar=False)
        thresholds = thresholds * scale * 111e3 * 5
        pairs = pairs_of(tracks, np.stack([pairs.first, pairs.second], axis=1), pairs.cluster)
    found = exit_statistics(tracks, pairs, thresholds)
    expected, last = np.zeros((8, thresholds.size - 1)), []
    for r in paths(tracks, pairs):
        for n in range(thresholds.size - 1):
            passage = slow_passage(r, thresholds[n], thresholds[n + 1]) or (*[0] * 8, None)
            expected[:, n] += passage[:8]
            last += [] if passage[8] is None else [(n, passage[8])]
    w = found.weight
    assert expected[0].min() > 5, "the world must exercise every threshold"
    assert np.array_equal(w @ found.exits, expected[0])
    assert w @ found.time_at_risk == pytest.approx(expected[1] * tracks.step, rel=1e-12)
    assert w @ found.finished_time == pytest.approx(expected[2] * tracks.step, rel=1e-12)
    assert np.array_equal(w @ found.at_once, expected[3])
    assert np.array_equal(found.zero_length, expected[3])
    over = (found.start_over, found.start_over_square, found.exit_over, found.exit_over_square)
    for k, sums in enumerate(over):
        assert w @ sums == pytest.approx(expected[4 + k], rel=1e-9)
    assert np.array_equal(found.passages - found.censored, expected[0])
    once = np.sort(found.loose_log[w[found.loose_row] < 0])
    inside = found.loose_log[w[found.loose_row] > 0]
    assert inside.size - once.size == len(last), "two cluster rows and one shared row for each such pair"
    n, r = np.array(last).T
    assert np.bincount(n.astype(int), minlength=11).tolist() == found.censored.tolist()
    net = np.sum(w[found.loose_row] * found.loose_log)
    assert net == pytest.approx(np.sum(np.log(r)), rel=1e-10)


def test_thresholds_around_the_globe_are_not_skipped():
    """A chord never exceeds the earth's diameter; half the circumference (20004 km, from memory) does."""
    lon = np.array([0.0, 1.0, 60.0, 120.0, 170.0])
    tracks = tracks_of([to_cartesian(np.zeros(5), np.zeros(5)), to_cartesian(lon, np.zeros(5))], planar=False)
    found = exit_statistics(tracks, pairs_of(tracks, [[0, 1]], [0, 0]), np.array([1e5, 6e6, 13e6, 18e6]))
    assert found.exits.sum(axis=0).tolist() == [1, 1, 1]
    assert found.time_at_risk.sum(axis=0).tolist() == [10, 10, 10]


class TestErrorsOfCurves:
    def test_dyadic_variance_agrees_with_the_double_sum_over_pairs(self):
        """Brute force: sum of u_p u_q over pairs p, q that share a cluster (Aronow et al. 2015, eq. 3)."""
        tracks, pairs = random_world(2, n_cluster=15, per_cluster=2, gaps=False)
        curve = dispersion_statistics(tracks, pairs, [0.0, 200.0, 600.0]).relative_dispersion()
        squared = np.array(list(paths(tracks, pairs)))[:, [0, 20, 60]] ** 2
        u = (squared - squared.mean(axis=0)) / len(squared)
        ends = [{pairs.cluster[i], pairs.cluster[j]} for i, j in zip(pairs.first, pairs.second, strict=True)]
        shared = np.array([[bool(p & q) for q in ends] for p in ends])
        expected = np.einsum("pi,pq,qj->ij", u, shared, u) * 15 / 14
        assert curve.value == pytest.approx(squared.mean(axis=0), rel=1e-12)
        assert curve.covariance == pytest.approx(expected, rel=1e-9)

    def test_dyadic_variance_is_that_of_a_known_statistic(self):
        """Mean of (x_i - x_j)^2 over all pairs is twice the sample variance: its variance is 8 / (N - 1)."""
        n, replicates = 40, 300
        rng = np.random.default_rng(3)
        estimates = np.empty(replicates)
        one, two = np.triu_indices(n, 1)
        for i in range(replicates):
            position = np.zeros((n, 2, 3))
            position[:, :, 0] = rng.standard_normal(n)[:, None]
            tracks = tracks_of(list(position))
            pairs = pairs_of(tracks, np.stack([one, two], axis=1), np.arange(n))
            curve = dispersion_statistics(tracks, pairs, [0.0]).relative_dispersion()
            estimates[i] = curve.covariance[0, 0]
        error = estimates.std() / np.sqrt(replicates)
        # 4 standard errors, and a bias of the estimator of order 1 / N
        assert abs(estimates.mean() - 8 / (n - 1)) < 4 * error + 8 / (n - 1) * 2 / n
        naive = 8 / (n * (n - 1) / 2)  # variance of chi2_1 twice, over independent pairs
        assert estimates.mean() > 10 * naive

    def test_dyadic_variance_agrees_with_the_node_bootstrap(self):
        """Resample clusters, weigh each pair by the product of its clusters' multiplicities."""
        n, draws = 60, 4000
        rng = np.random.default_rng(4)
        position = np.zeros((n, 2, 3))
        position[:, :, :2] = rng.exponential(size=(n, 1, 2))
        tracks = tracks_of(list(position))
        one, two = np.triu_indices(n, 1)
        pairs = pairs_of(tracks, np.stack([one, two], axis=1), np.arange(n))
        curve = dispersion_statistics(tracks, pairs, [0.0]).relative_dispersion()
        times = rng.multinomial(n, np.full(n, 1 / n), size=draws)
        weight = times[:, one] * times[:, two]
        values = weight @ pairs.start_separation**2 / weight.sum(axis=1)
        # variance of `draws` bootstrap values to 4 / sqrt(draws / 2), bootstrap and sandwich differ by O(1/N)
        tolerance = 4 / np.sqrt(draws / 2) + 4 / n
        assert values.var() == pytest.approx(curve.covariance[0, 0], rel=tolerance)

    def test_variance_never_falls_below_that_of_uncorrelated_pairs(self):
        """Two pairs that share a cluster and pull in opposite directions: the plain sum is negative."""
        numerator = np.array([[2.0], [1.0], [-1.0], [1.0], [-1.0]])
        weight = np.array([1.0, 1.0, 1.0, -1.0, -1.0])
        denominator = np.array([[2.0], [1.0], [1.0], [1.0], [1.0]])
        numerator[0] = 0.0
        curve = Curve("c", "time", np.array([1.0]), numerator, denominator, weight, "m")
        plain = float(np.sum(weight[:, None] * curve.influence**2))
        assert plain <= 0
        assert curve.covariance[0, 0] == pytest.approx(0.5 * 3 / 2 * np.sum(curve.influence[:3] ** 2), rel=1e-12)

    def test_covariance_has_no_negative_eigenvalue_with_more_bins_than_clusters(self):
        tracks, pairs = random_world(5, n_cluster=5, per_cluster=2)
        curve = dispersion_statistics(tracks, pairs, 10.0 * np.arange(1, 60)).relative_dispersion()
        values = np.linalg.eigvalsh(curve.covariance)
        assert values[0] > -1e-9 * values[-1]
        assert np.all(curve.standard_error > 0)

    def test_one_cluster_has_no_error(self):
        curve = dispersion_statistics(*pairs_with([1.0, 2.0]), [0.0, 10.0]).relative_dispersion()
        assert curve.value.tolist() == [1.0, 4.0]
        assert np.isnan(curve.standard_error).all()

    def test_covariance_with_itself_and_with_another(self):
        tracks, pairs = random_world(6)
        pairs = within_clusters(pairs)
        statistics = dispersion_statistics(tracks, pairs, [100.0, 300.0])
        one, east, north = statistics.relative_dispersion(), statistics.east(), statistics.north()
        assert one.covariance_with(one) == pytest.approx(one.covariance, rel=1e-12)
        # r2 is the sum of its two parts, so covariances add
        total = one.covariance_with(east) + one.covariance_with(north)
        assert total == pytest.approx(one.covariance, rel=1e-10)

    def test_bootstrap_scatter_matches_the_standard_error(self):
        tracks, pairs = random_world(7, n_cluster=80, per_cluster=2, n_step=30)
        curve = dispersion_statistics(tracks, within_clusters(pairs), [100.0, 200.0]).relative_dispersion()
        values = curve.bootstrap(4000, np.random.default_rng(0))
        # 4 standard errors of a bootstrap standard deviation for tails like these (kurtosis below 8), and C/(C-1)
        tolerance = 4 * np.sqrt((8 - 1) / (4 * 4000)) + 1 / 80
        assert values.std(axis=0) == pytest.approx(curve.standard_error, rel=tolerance)

    def test_leaving_out_a_cluster_equals_computing_without_it(self):
        tracks, pairs = random_world(8)
        statistics = dispersion_statistics(tracks, pairs, [100.0, 300.0])
        found = statistics.relative_dispersion().leave_one_out()
        for c in range(pairs.n_cluster):
            touches = (pairs.cluster[pairs.first] == c) | (pairs.cluster[pairs.second] == c)
            rest = dispersion_statistics(tracks, pairs.select(~touches), [100.0, 300.0])
            assert found[c] == pytest.approx(rest.relative_dispersion().value, rel=1e-10)
        inside = dispersion_statistics(tracks, within_clusters(pairs), [100.0, 300.0]).relative_dispersion()
        assert inside.without(2).value == pytest.approx(inside.leave_one_out()[2], rel=1e-12)
        assert inside.without(2).weight.size == pairs.n_cluster - 1

    def test_effective_clusters(self):
        """Kish: equal shares count in full; shares 3, 1 give 16 / 10."""
        denominator = np.array([[1.0, 3.0, 0.0], [1.0, 1.0, 0.0]])
        curve = Curve("c", "time", np.arange(3.0), denominator, denominator, np.ones(2), "m")
        assert curve.effective_clusters[:2].tolist() == [2.0, 1.6]
        assert np.isnan(curve.effective_clusters[2])

    def test_kurtosis_and_its_error(self):
        """Value from its definition; error against the jackknife over clusters, equal to first order."""
        tracks, pairs = random_world(9, n_cluster=60, per_cluster=2, n_step=30, gaps=False)
        pairs = within_clusters(pairs)
        statistics = dispersion_statistics(tracks, pairs, [100.0, 250.0])
        found = statistics.kurtosis()
        r = np.array(list(paths(tracks, pairs)))[:, [10, 25]]
        assert found.value == pytest.approx(np.mean(r**4, axis=0) / np.mean(r**2, axis=0) ** 2, rel=1e-12)
        second, fourth = np.sum(r**2, axis=0) - r**2, np.sum(r**4, axis=0) - r**4
        left = fourth * 59 / second**2
        jackknife = np.sqrt(59 / 60 * np.sum((left - left.mean(axis=0)) ** 2, axis=0))
        assert found.standard_error == pytest.approx(jackknife, rel=0.15)  # they differ at order skewness / C
        assert found.n_sample.tolist() == [60, 60]
        assert found.n_cluster.tolist() == [60, 60]


class TestDispersion:
    def test_moments_from_their_definition(self):
        tracks, pairs = random_world(10)
        steps = np.array([0, 7, 40, 119])
        found = dispersion_statistics(tracks, pairs, steps * 10.0 + 3.0)
        assert found.times.tolist() == (steps * 10.0).tolist()
        a, b = (
            np.array([tracks.position[tracks.offset[k] + steps, :2] for k in m]) for m in (pairs.first, pairs.second)
        )
        d = b - a
        r2 = np.sum(d**2, axis=2)
        pieces = {
            "relative_dispersion": r2,
            "east": d[..., 0] ** 2,
            "north": d[..., 1] ** 2,
            "cross": d[..., 0] * d[..., 1],
            "mean_log_separation": 0.5 * np.log(r2),
        }
        for name, values in pieces.items():
            assert getattr(found, name)().value == pytest.approx(np.nanmean(values, axis=0), rel=1e-9), name
        assert np.array_equal(found.weight @ found.count, np.isfinite(r2).sum(axis=0))

    def test_coinciding_members_have_no_logarithm_and_are_counted(self):
        found = dispersion_statistics(*pairs_with([1.0, 0.0], [1.0, np.e]), [0.0, 10.0])
        assert found.mean_log_separation().value == pytest.approx([0.0, 1.0], abs=1e-14)
        assert found.n_zero.tolist() == [0, 1]
        assert found.relative_dispersion().value[1] == pytest.approx(np.e**2 / 2, rel=1e-14)

    def test_time_counts_from_the_start_of_each_pair(self):
        tracks, pairs = pairs_with([9.0, 1.0, 2.0, 3.0])
        late = replace(pairs, begin=pairs.begin + 1, length=pairs.length - 1)
        assert dispersion_statistics(tracks, late, [0.0, 20.0]).relative_dispersion().value.tolist() == [1.0, 9.0]

    def test_default_times(self):
        tracks, pairs = random_world(11)
        times = default_times(pairs, 10.0)
        assert times[0] == 10.0
        assert times[-1] == (pairs.length.max() - 1) * 10.0
        assert np.all(np.diff(times) >= 10.0)
        assert 25 <= times.size <= 40
        assert dispersion_statistics(tracks, pairs, times).times.tolist() == times.tolist()


class TestSeparationCounts:
    def test_counts_equal_histograms(self):
        """Independent route: numpy histograms per cluster and start bin."""
        tracks, pairs = random_world(12)
        pairs = within_clusters(pairs)
        times, start_edges, edges = [50.0, 400.0], np.array([0.0, 0.5, 1.0]), np.array([0.0, 3.0, 10.0, 60.0])
        found = separation_counts(tracks, pairs, times, start_edges, edges)
        r = np.array(list(paths(tracks, pairs)))
        dense = np.zeros((found.weight.size, 2, 2, 3))
        dense[found.row, found.time, found.start, found.separation] = found.count
        for c in range(pairs.n_cluster):
            for s in range(2):
                member = (
                    (pairs.cluster[pairs.first] == c) & (r[:, 0] >= start_edges[s]) & (r[:, 0] < start_edges[s + 1])
                )
                for k, step in enumerate([5, 40]):
                    values = r[member, step]
                    expected = np.histogram(values[np.isfinite(values)], edges)[0]
                    assert dense[c, k, s].tolist() == expected.tolist()
        used = r[:, 0] < 1.0
        assert found.outside.tolist() == [np.sum(r[used, 5] > 60), np.sum(r[used, 40] > 60)]
        for s in range(2):
            inside = (r[:, 0] >= start_edges[s]) & (r[:, 0] < start_edges[s + 1])
            assert found.start_count[s] == inside.sum()
            assert found.start_log_mean[s] == pytest.approx(np.log(r[inside, 0]).mean(), rel=1e-12)

    def test_lower_edges_belong_to_a_bin_and_the_last_edge_does_not(self):
        world = pairs_with([1.0, 2.0], [1.0, 3.0], [2.0, 2.5])
        found = separation_counts(*world, [10.0], [1.0, 2.0], [1.0, 2.0, 3.0])
        assert found.start_count.tolist() == [2]
        assert found.total().tolist() == [[[0.0, 1.0]]]
        assert found.outside.tolist() == [1]

    def test_total_counts_each_pair_once(self):
        tracks, pairs = random_world(13, gaps=False)
        found = separation_counts(tracks, pairs, [50.0, 400.0], [0.0, np.inf], [0.0, 5.0, np.inf])
        assert (found.weight < 0).any(), "the world must have pairs between clusters"
        assert found.total().sum(axis=(1, 2)).tolist() == [pairs.first.size, pairs.first.size]
        assert found.outside.tolist() == [0, 0]

    def test_blocks_of_pairs_add_up(self, monkeypatch):
        tracks, pairs = random_world(14)
        arguments = (tracks, pairs, [50.0, 400.0], [0.0, 2.0, np.inf], [0.0, 5.0, 20.0, np.inf])
        whole = separation_counts(*arguments)
        monkeypatch.setattr("regimes.curves.counts._BLOCK", 7)
        parts = separation_counts(*arguments)
        for name in ("row", "time", "start", "separation", "count", "outside"):
            assert np.array_equal(getattr(whole, name), getattr(parts, name)), name

    def test_merge(self):
        tracks, pairs = random_world(15)
        pairs = within_clusters(pairs)
        options = ([50.0, 400.0], [0.0, 0.5, 2.0, 9.0], [0.0, 5.0, 20.0, np.inf])
        whole = separation_counts(tracks, pairs, *options)
        low, high = halves(pairs)
        merged = separation_counts(tracks, low, *options).merge(separation_counts(tracks, high, *options))
        assert np.array_equal(merged.total(), whole.total())
        assert np.array_equal(merged.start_count, whole.start_count)
        assert merged.start_log_mean == pytest.approx(whole.start_log_mean, rel=1e-12, nan_ok=True)
        for c in (whole, merged):
            assert np.array_equal(np.unique(c.row), np.arange(pairs.n_cluster))
        assert np.array_equal(np.bincount(merged.row, merged.count), np.bincount(whole.row, whole.count))


def halves(pairs):
    """Pairs of the first three clusters, and of the others numbered from zero."""
    low = pairs.select(pairs.cluster[pairs.first] < 3)
    high = pairs.select(pairs.cluster[pairs.first] >= 3)
    named = np.where(pairs.cluster < 3, pairs.cluster, -1), np.where(pairs.cluster < 3, -1, pairs.cluster - 3)
    return replace(low, cluster=named[0], n_cluster=3), replace(high, cluster=named[1], n_cluster=pairs.n_cluster - 3)


LADDER = 2.0 * 1.4 ** np.arange(8)


def all_curves(tracks, pairs, thresholds=LADDER, times=(0.0, 100.0, 500.0)):
    dispersion = dispersion_statistics(tracks, pairs, np.array(times))
    return [exit_statistics(tracks, pairs, thresholds).curve(), dispersion.relative_dispersion()]


def assert_same(one, two, scale=(1.0, 1.0), error_scale=1.0):
    for a, b, s in zip(one, two, scale, strict=True):
        assert b.value == pytest.approx(s * a.value, rel=1e-9, nan_ok=True)
        assert b.standard_error == pytest.approx(error_scale * s * a.standard_error, rel=1e-6, nan_ok=True)


class TestLaws:
    @pytest.fixture
    def world(self):
        return random_world(20)

    def test_lengths_and_times_scale(self, world):
        tracks, pairs = world
        bigger = replace(tracks, position=tracks.position * 1000.0, step=tracks.step * 60.0)
        found = all_curves(bigger, pairs, 2000.0 * 1.4 ** np.arange(8), (0.0, 6000.0, 30000.0))
        assert_same(all_curves(tracks, pairs), found, scale=(1 / 60.0, 1e6))
        assert found[0].axis == pytest.approx(2000.0 * 1.4 ** np.arange(7), rel=1e-15)

    def test_rotation_mirror_and_translation_change_nothing(self, world):
        tracks, pairs = world
        c, s = np.cos(0.7), np.sin(0.7)
        moved = tracks.position @ np.array([[c, s, 0], [s, -c, 0], [0, 0, 1]]) + [1e3, -2e3, 0]
        assert_same(all_curves(tracks, pairs), all_curves(replace(tracks, position=moved), pairs))

    def test_order_of_pairs_and_of_members_changes_nothing(self, world):
        tracks, pairs = world
        mixed = pairs.select(np.random.default_rng(0).permutation(pairs.first.size))
        swapped = replace(mixed, first=mixed.second, second=mixed.first)
        assert_same(all_curves(tracks, pairs), all_curves(tracks, swapped))

    def test_names_of_clusters_change_nothing(self, world):
        tracks, pairs = world
        renamed = replace(pairs, cluster=np.array([3, 0, 5, 1, 4, 2])[pairs.cluster])
        assert_same(all_curves(tracks, pairs), all_curves(tracks, renamed))

    def test_twins_in_the_same_cluster_change_nothing(self, world):
        tracks, pairs = world
        twins = pairs.select(np.repeat(np.arange(pairs.first.size), 2))
        assert_same(all_curves(tracks, pairs), all_curves(tracks, twins))

    def test_twins_in_new_clusters_reduce_the_error_by_the_root_of_two(self, world):
        tracks, pairs = world
        pairs = within_clusters(pairs)
        n_track, n = len(tracks.labels), pairs.n_cluster
        doubled = tracks_of([*np.split(tracks.position, tracks.offset[1:-1])] * 2)
        twins = replace(
            pairs.select(np.tile(np.arange(pairs.first.size), 2)),
            first=np.concatenate([pairs.first, pairs.first + n_track]),
            second=np.concatenate([pairs.second, pairs.second + n_track]),
            cluster=np.concatenate([pairs.cluster, pairs.cluster + n]),
            n_cluster=2 * n,
        )
        one, two = all_curves(tracks, pairs), all_curves(doubled, twins)
        for a, b in zip(one, two, strict=True):
            c = a.n_cluster
            factor = np.sqrt(0.5 * (2 * c / (2 * c - 1)) / (c / (c - 1)))
            assert b.value == pytest.approx(a.value, rel=1e-12)
            assert b.standard_error == pytest.approx(a.standard_error * factor, rel=1e-12)

    def test_parts_merged_equal_the_whole(self, world):
        tracks, pairs = world
        pairs = within_clusters(pairs)
        low, high = halves(pairs)
        thresholds, times = LADDER, [0.0, 100.0]
        whole = exit_statistics(tracks, pairs, thresholds)
        merged = exit_statistics(tracks, low, thresholds).merge(exit_statistics(tracks, high, thresholds))
        for name in (
            "exits",
            "time_at_risk",
            "finished_time",
            "weight",
            "passages",
            "zero_length",
            "loose_row",
            "loose_log",
        ):
            assert np.array_equal(getattr(whole, name), getattr(merged, name)), name
        whole = dispersion_statistics(tracks, pairs, times)
        parts = [dispersion_statistics(tracks, part, times) for part in (low, high)]
        assert np.array_equal(parts[0].merge(parts[1]).square, whole.square)
        joined = parts[0].relative_dispersion().merge(parts[1].relative_dispersion())
        assert np.array_equal(joined.covariance, whole.relative_dispersion().covariance)

    def test_changing_inputs_afterwards_changes_nothing(self, world):
        tracks, pairs = world
        position, thresholds = tracks.position.copy(), LADDER.copy()
        found = exit_statistics(replace(tracks, position=position), pairs, thresholds)
        before = found.curve().value
        position[:] = 0.0
        thresholds[:] = 1.0
        assert np.array_equal(found.curve().value, before)
        assert np.array_equal(found.curve().axis, 2.0 * 1.4 ** np.arange(7))
        with pytest.raises(ValueError, match="read-only"):
            found.exits[0, 0] = 7.0

    def test_select_equals_computing_fewer_thresholds(self, world):
        tracks, pairs = world
        thresholds = LADDER
        # the first threshold stays: pairs that start above it count from the next one on in either case
        part = exit_statistics(tracks, pairs, thresholds).select(slice(2, 5))
        alone = exit_statistics(tracks, pairs, thresholds[2:6])
        for name in ("thresholds", "exits", "time_at_risk", "passages", "zero_length", "loose_interval", "loose_log"):
            assert getattr(part, name) == pytest.approx(getattr(alone, name), rel=1e-13), name


def test_fractions():
    found = exit_statistics(*pairs_with([0.5, 100], [0.5, 1, 2], [0.5, 1, 1]), THRESHOLDS)
    assert found.zero_fraction.tolist() == [0.5, 1.0, 1.0]
    assert found.censored_fraction == pytest.approx([1 / 3, 1 / 2, 0.0], rel=1e-15)
    assert found.n_pair.tolist() == [3, 2, 1]
    assert found.n_cluster.tolist() == [3, 1, 1]
    assert found.separation.tolist() == [1.0, 2.0, 4.0]


def test_fractions_without_passages_are_not_numbers():
    found = exit_statistics(*pairs_with([0.5, 0.6]), THRESHOLDS)
    assert np.isnan(found.zero_fraction).all()
    assert np.isnan(found.censored_fraction).all()


def test_groups():
    _, pairs = random_world(30, n_cluster=3, per_cluster=2)
    groups = make_groups(pairs)
    assert groups.weight.tolist() == [1, 1, 1, -1, -1, -1]
    assert groups.n_row == 6
    inside = groups.row_b < 0
    assert inside.sum() == 3
    assert np.array_equal(inside, groups.row_dyad < 0)
    assert np.all(groups.row_dyad[~inside] >= 3)
    net = sum(groups.weight[groups.table[:, k]] * (groups.table[:, k] >= 0) for k in range(3))
    assert np.all(net == 1), "every pair counts once"


def test_table_for_notebooks():
    curve = exit_statistics(*pairs_with([0.5, 1, 1.5, 2.5]), THRESHOLDS).curve()
    page = curve._repr_html_()
    assert page.count("<tr>") == 4
    assert "Lyapunov exponent [1/s]" in page


class TestErrorMessages:
    @pytest.fixture
    def world(self):
        return random_world(40, n_cluster=3, per_cluster=2, n_step=30)

    @pytest.mark.parametrize("bad", [[1.0], [1.0, 1.0], [2.0, 1.0], [0.0, 1.0], [1.0, np.nan], [[1.0, 2.0]]])
    def test_thresholds(self, world, bad):
        with pytest.raises(DataError, match=r"separation thresholds: got .*must be two or more positive"):
            exit_statistics(*world, bad)

    @pytest.mark.parametrize("bad", [[], [-10.0], [np.nan], [[1.0]]])
    def test_times(self, world, bad):
        with pytest.raises(DataError, match=r"times: got .*must be finite numbers >= 0"):
            dispersion_statistics(*world, bad)

    def test_times_within_one_step(self, world):
        with pytest.raises(DataError, match=r"must increase from step to step, and a step is 10 s"):
            dispersion_statistics(*world, [10.0, 12.0])

    def test_default_times_of_single_steps(self, world):
        with pytest.raises(DataError, match="need at least two; use longer records"):
            default_times(replace(world[1], length=np.ones_like(world[1].length)), 10.0)

    @pytest.mark.parametrize("bad", [[1.0], [2.0, 1.0], [-1.0, 1.0], [0.0, np.nan]])
    def test_edges(self, world, bad):
        with pytest.raises(DataError, match=r"start edges: got .*two or more numbers >= 0"):
            separation_counts(*world, [10.0], bad, [0.0, 1.0])
        with pytest.raises(DataError, match=r"separation edges: got .*two or more numbers >= 0"):
            separation_counts(*world, [10.0], [0.0, 1.0], bad)

    def test_no_pair_starts_within_the_edges(self, world):
        with pytest.raises(DataError, match=r"got 1e\+06 to 2e\+06 m, and pairs that start at .*choose edges"):
            separation_counts(*world, [10.0], [1e6, 2e6], [0.0, 1.0])

    def test_members_without_a_cluster(self, world):
        pairs = replace(world[1], cluster=np.full_like(world[1].cluster, -1))
        with pytest.raises(DataError, match="cluster outside 0 to 2"):
            make_groups(pairs)

    def test_resampling_with_shared_pairs(self, world):
        curve = dispersion_statistics(*world, [10.0]).relative_dispersion()
        with pytest.raises(DataError, match="bootstrap over clusters of relative dispersion: got pairs that connect 3"):
            curve.bootstrap(10, np.random.default_rng(0))
        with pytest.raises(DataError, match=r"leaving out a cluster .*use leave_one_out\(\)"):
            curve.without(0)

    def test_unknown_cluster(self, world):
        curve = dispersion_statistics(world[0], within_clusters(world[1]), [10.0]).relative_dispersion()
        with pytest.raises(DataError, match="got 9; clusters are 0 to 2"):
            curve.without(9)

    def test_merge_and_covariance_of_different_things(self, world):
        one = dispersion_statistics(*world, [10.0])
        two = dispersion_statistics(*world, [20.0])
        with pytest.raises(DataError, match="merge of dispersion statistics: got 1 and 1 times"):
            one.merge(two)
        with pytest.raises(DataError, match="merge of curves: got relative dispersion"):
            one.relative_dispersion().merge(one.east())
        inside = dispersion_statistics(world[0], within_clusters(world[1]), [10.0]).east()
        with pytest.raises(DataError, match="both curves must come from the same pairs"):
            one.east().covariance_with(inside)
        exits = exit_statistics(*world, THRESHOLDS)
        with pytest.raises(DataError, match="merge of exit statistics: got 4 thresholds at 10 s and 3"):
            exits.merge(exit_statistics(*world, THRESHOLDS[:3]))
        counts = separation_counts(*world, [10.0], [0.0, 9.0], [0.0, 9.0])
        with pytest.raises(DataError, match="merge of separation counts: got different separation_edges"):
            counts.merge(separation_counts(*world, [10.0], [0.0, 9.0], [0.0, 8.0]))

    @pytest.mark.parametrize("bad", [slice(0, 3, 2), slice(3, 3), slice(9, 12)])
    def test_select(self, world, bad):
        with pytest.raises(DataError, match="must select at least one of 3 intervals"):
            exit_statistics(*world, THRESHOLDS).select(bad)

    def test_curves_check_themselves(self):
        axis, good = np.arange(2.0), np.ones((3, 2))
        with pytest.raises(DataError, match=r"both must be \(3, 2\), clusters by bins"):
            Curve("c", "time", axis, np.ones((2, 3)), good, np.ones(3), "m")
        with pytest.raises(DataError, match="got sums that are not finite"):
            Curve("c", "time", axis, good * np.nan, good, np.ones(3), "m")
        with pytest.raises(DataError, match=r"denominators must be >= 0 and weights \+1 or -1"):
            Curve("c", "time", axis, good, -good, np.ones(3), "m")
        with pytest.raises(DataError, match=r"denominators must be >= 0 and weights \+1 or -1"):
            Curve("c", "time", axis, good, good, np.full(3, 2.0), "m")
