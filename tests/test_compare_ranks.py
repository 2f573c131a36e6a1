"""Ranks among deployments, runs of bins, the usual comparison, and the words of the decision."""

from dataclasses import dataclass

import numpy as np
import pytest
from scipy.stats import ks_2samp

from regimes.compare.departure import departure, distances
from regimes.compare.drawing import Pools
from regimes.compare.grid import Grid
from regimes.compare.ranks import LEVEL, Ranks, rank_curves
from regimes.compare.runs import run_means, telling_bins, windows
from regimes.compare.sums import N_BIN
from regimes.compare.unmatched import unmatched_p
from regimes.compare.words import TELLS, decide, place
from tests.compare_worlds import FASTER_BELOW_10, kernel_side, some

DAYS = 86400.0 * np.arange(1.0, 11.0)
GRID = Grid(1000.0 * 2.0 ** np.arange(11), DAYS, DAYS, np.empty(0))
NAMES = ("exponent", "relative_dispersion", "mean_log_growth", "kurtosis")
SMALL, LARGE = 8, 80


@dataclass(frozen=True)
class Made:
    """A table of launches whose curves are means of normal numbers, half of their variance shared by all bins."""

    rows: np.ndarray
    bins: np.ndarray
    grid: Grid = GRID

    def curves(self, chosen):
        means = self.rows[chosen].mean(axis=1)
        counts = np.zeros((len(chosen), 3, N_BIN))
        for k in range(len(chosen)):
            np.add.at(counts[k], (slice(None), self.bins[chosen[k]]), 1.0)
        return {name: means[:, i] for i, name in enumerate(NAMES)} | {"separation_distribution": counts}


def made(seed: int, shift: float = 0.0) -> Made:
    """Eight launches, whose exponents are shifted, and eighty others."""
    rng = np.random.default_rng(seed)
    rows = rng.standard_normal((SMALL + LARGE, 4, 1)) + rng.standard_normal((SMALL + LARGE, 4, 10))
    rows[:SMALL, 0] += shift
    return Made(rows, rng.integers(0, N_BIN, SMALL + LARGE))


POOLS = Pools((np.arange(LARGE),) * SMALL, (SMALL + np.arange(LARGE),) * SMALL, LARGE)


def ranked(table: Made, n: int = 99, seed: int = 1) -> Ranks:
    return rank_curves(table, POOLS, np.arange(SMALL), n, seed)


def test_p_is_uniform_where_both_come_from_one_law():
    """25 pairs of sets: p under 0.05 in at most 5 (binomial: 1 in 500 above), and a mean near one half."""
    p = np.array([ranked(made(seed), 39).p_value for seed in range(25)])
    assert np.sum(p <= 0.05) <= 5
    assert abs(p.mean() - 0.5) < 4 * np.sqrt(1 / 12 / 25)


@pytest.fixture(scope="module")
def far():
    return ranked(made(3, shift=4.0))


def test_one_curve_far_off_is_found_however_many_agree(far):
    assert far.p_value == pytest.approx(1 / 100)  # the smallest that 99 deployments can give
    by = {c.curve: c for c in far.curves}
    assert by["exponent"].p_value == pytest.approx(1 / 100)
    assert np.array_equal(by["exponent"].differs_at, GRID.thresholds[:-1])
    assert np.all(by["exponent"].rank == 1.0)
    assert by["kurtosis"].differs_at.size == 0


def test_what_is_expected_is_as_wide_as_a_new_sample_about_the_mean_of_the_larger_set(far):
    """Variance 2 / 8 of a mean of eight, and 2 / 80 of the mean of eighty; 99 draws of ten bins that go together."""
    curve = next(c for c in far.curves if c.curve == "mean_log_growth")
    half = 0.25 * np.mean(curve.band[3] - curve.band[1]) + 0.25 * np.mean(curve.band[4] - curve.band[0]) / 1.96
    assert half == pytest.approx(np.sqrt(2 / 8 + 2 / 80), rel=0.25)


def test_a_shift_too_small_for_any_bin_is_found_over_all_of_them():
    """A curve 1.5 standard deviations off in each of ten independent bins."""
    rows = np.random.default_rng(5).standard_normal((199, 10))
    seen = departure(np.full(10, 1.5), rows)
    assert np.max(np.abs(seen.away)) < 2.0  # no single bin would stand out among ten
    others = [departure(row, np.delete(rows, k, axis=0)).test for k, row in enumerate(rows)]
    assert np.mean(np.array(others) >= seen.test) < 0.02


def test_departures_keep_under_a_change_of_units_and_of_order():
    rng = np.random.default_rng(2)
    rows, value = rng.standard_normal((50, 10)), rng.standard_normal(10)
    first = departure(value, rows)
    scaled = departure(3.0 * value + 5.0, 3.0 * rows[rng.permutation(50)] + 5.0)
    assert scaled.run_away == pytest.approx(first.run_away)
    assert scaled.apart == pytest.approx(3.0 * first.apart)


def test_distances_by_brute_force():
    rng = np.random.default_rng(2)
    rows = rng.integers(0, 5, (20, 3, N_BIN)).astype(float)
    counts = rng.integers(0, 5, (3, N_BIN)).astype(float)
    found = distances(counts, rows)
    for k in range(3):
        pool = np.repeat(np.arange(N_BIN), rows[:, k].sum(axis=0).astype(int))
        sample = np.repeat(np.arange(N_BIN), counts[k].astype(int))
        assert found.apart[k] == pytest.approx(ks_2samp(sample, pool).statistic)


def test_bins_that_few_deployments_have_are_left_out():
    table = made(4)
    table.rows[:, 3, 9] = np.where(np.arange(SMALL + LARGE) < SMALL + 20, np.nan, table.rows[:, 3, 9])
    by = {c.curve: c for c in ranked(table).curves}
    assert by["kurtosis"].axis.size == 9
    assert by["exponent"].axis.size == 10


def test_runs_by_brute_force():
    rows = np.random.default_rng(1).standard_normal((3, 10))
    rows[1, 4] = np.nan
    expected = [[np.nanmean(row[a : a + w]) for w in (1, 2, 4, 8) for a in range(10 - w + 1)] for row in rows[[0, 2]]]
    assert run_means(rows)[[0, 2]] == pytest.approx(np.array(expected))
    assert np.isnan(run_means(rows)[1, 4])
    assert run_means(rows)[1, 10 + 3] == pytest.approx(rows[1, 3])  # the pair of bins 3 and 4
    assert windows(3).shape == (5, 3)


def test_telling_bins_are_those_of_a_telling_run_that_depart_themselves():
    away = np.array([0.2, 2.0, 2.2, 0.1, -3.0])
    run = run_means(away[None])[0] * 1.5
    assert np.array_equal(telling_bins(away, run, 3.0), [False, True, True, False, True])


def judged(p, factor):
    return decide(Ranks((), p, factor, 199))


def test_decision():
    assert judged(LEVEL / 2, 9.0) == "different"
    assert judged(LEVEL, TELLS) == "consistent"
    assert judged(0.9, TELLS * 1.01) == "undecided"
    assert judged(0.9, np.nan) == "undecided"


def test_place_in_words(far):
    assert place(far.curves[0]) == "1.0 to 512 km"
    assert place(next(c for c in far.curves if c.curve == "kurtosis")) == ""


def test_the_usual_comparison():
    """The same set twice agrees wholly; rates three times as large are seen."""
    side = kernel_side(40, 3, duration_d=15.0)
    thresholds = 1000.0 * np.sqrt(2.0) ** np.arange(6)
    one, two = some(side, np.arange(20)), some(side, np.arange(20, 40))
    assert unmatched_p(one, one, thresholds) == 1.0
    assert unmatched_p(one, two, thresholds) == pytest.approx(unmatched_p(two, one, thresholds))
    fast = kernel_side(20, 4, kernel=FASTER_BELOW_10 | {"rate_per_d": 1.8}, duration_d=15.0)
    assert unmatched_p(one, fast, thresholds) < 1e-3
