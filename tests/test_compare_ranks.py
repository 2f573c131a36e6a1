"""Ranks among deployments, runs of bins, the usual comparison, and the words of the decision."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.compare.measured import Grid, Measured
from regimes.compare.ranks import LEVEL, Ranks, rank_curves
from regimes.compare.runs import run_means, telling_bins, windows
from regimes.compare.unmatched import unmatched_p
from regimes.compare.words import TELLS, decide, place
from tests.compare_worlds import FASTER_BELOW_10, kernel_side, some

DAYS = 86400.0 * np.arange(1.0, 11.0)
GRID = Grid(1000.0 * 2.0 ** np.arange(11), DAYS, DAYS, np.empty(0))
NAMES = ("exponent", "relative_dispersion", "mean_log_growth", "kurtosis")


def made(rng, n=1, shift=0.0):
    """Measured curves of ten bins of which all share half of their variance, and normal samples."""
    out = []
    for _ in range(n):
        common = rng.standard_normal(10)
        curves = {name: (common + rng.standard_normal(10)) / np.sqrt(2.0) for name in NAMES}
        curves["exponent"] = curves["exponent"] + shift
        out.append(Measured(curves, tuple(np.sort(rng.lognormal(size=20)) for _ in range(3))))
    return out


@pytest.fixture(scope="module")
def drawn():
    return made(np.random.default_rng(1), 99)


def test_deployments_ranked_among_themselves_have_a_uniform_p(drawn):
    """200 sets from the same law: p under 0.05 in at most 21 (binomial: 1 in 1000 above), and not always large."""
    rng = np.random.default_rng(2)
    p = np.array([rank_curves(made(rng)[0], drawn, GRID, 1.0).p_value for _ in range(200)])
    assert np.sum(p < 0.05) <= 21
    assert 0.4 < p.mean() < 0.6  # standard error 0.02, and 99 deployments for the law


def test_one_curve_far_off_is_found_however_many_agree(drawn):
    seen = made(np.random.default_rng(3), shift=6.0)[0]
    found = rank_curves(seen, drawn, GRID, 1.0)
    assert found.p_value == pytest.approx(1 / 100)  # the smallest that 99 deployments can give
    by = {c.curve: c for c in found.curves}
    assert by["exponent"].p_value == pytest.approx(1 / 100)
    assert np.array_equal(by["exponent"].differs_at, GRID.thresholds[:-1])
    assert np.all(by["exponent"].rank == 1.0)
    assert by["kurtosis"].differs_at.size == 0


def test_a_shift_too_small_for_any_bin_is_found_over_all_of_them():
    """Half a standard deviation in each of ten independent bins."""
    rng = np.random.default_rng(5)
    rows = [
        Measured({"exponent": rng.standard_normal(10)}, tuple(np.sort(rng.random(9)) for _ in range(3)))
        for _ in range(199)
    ]
    seen = Measured({"exponent": np.full(10, 1.5)}, tuple(np.sort(rng.random(9)) for _ in range(3)))
    curve = rank_curves(seen, rows, GRID, 1.0).curves[0]
    assert np.max(np.abs(curve.away)) < 2.0  # no single bin would stand out among ten
    assert curve.p_value < 0.02


def test_order_and_unit_do_not_matter(drawn):
    seen = made(np.random.default_rng(7))[0]
    first = rank_curves(seen, drawn, GRID, 1.3)
    shuffled = rank_curves(seen, [drawn[i] for i in np.random.default_rng(1).permutation(99)], GRID, 1.3)
    assert shuffled.p_value == first.p_value

    def longer(m):
        curves = {
            name: v + (np.log(7.0) if name in ("exponent", "relative_dispersion") else 0.0)
            for name, v in m.curves.items()
        }
        return Measured(curves, tuple(7.0 * s for s in m.samples))

    scaled = rank_curves(longer(seen), [longer(m) for m in drawn], GRID, 1.3)
    assert [c.p_value for c in scaled.curves] == [c.p_value for c in first.curves]
    assert scaled.factor == pytest.approx(first.factor)


def test_a_smaller_large_set_asks_for_more(drawn):
    seen = made(np.random.default_rng(3), shift=1.2)[0]
    p = [rank_curves(seen, drawn, GRID, scale).p_value for scale in (1.0, 1.5, 2.5)]
    assert p[0] <= p[1] <= p[2]
    assert p[0] < p[2]


def test_bins_that_few_deployments_have_are_left_out(drawn):
    gappy = [replace(m, curves=m.curves | {"kurtosis": np.append(m.curves["kurtosis"][:9], np.nan)}) for m in drawn]
    found = {c.curve: c for c in rank_curves(made(np.random.default_rng(7))[0], gappy, GRID, 1.0).curves}
    assert found["kurtosis"].axis.size == 9
    assert found["exponent"].axis.size == 10


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


def test_place_in_words(drawn):
    curves = rank_curves(made(np.random.default_rng(3), shift=6.0)[0], drawn, GRID, 1.0).curves
    assert place(curves[0]) == "1.0 to 512 km"
    assert place(next(c for c in curves if c.curve == "kurtosis")) == ""


def test_the_usual_comparison():
    """The same set twice agrees wholly; rates three times as large are seen."""
    side = kernel_side(40, 3, duration_d=15.0)
    thresholds = 1000.0 * np.sqrt(2.0) ** np.arange(6)
    one, two = some(side, np.arange(20)), some(side, np.arange(20, 40))
    assert unmatched_p(one, one, thresholds) == 1.0
    assert unmatched_p(one, two, thresholds) == pytest.approx(unmatched_p(two, one, thresholds))
    fast = kernel_side(20, 4, kernel=FASTER_BELOW_10 | {"rate_per_d": 1.8}, duration_d=15.0)
    assert unmatched_p(one, fast, thresholds) < 1e-3
