"""Separation distributions with their distances, relative diffusivity, residence times."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import binom, ks_2samp, kstest, norm

from regimes.curves.diffusivity import relative_diffusivity, residence_ratio, residence_statistics
from regimes.curves.distributions import SeparationSample, distance_between, distance_to, separation_samples
from regimes.errors import DataError
from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.theory.self_similar import cumulative
from regimes.units import HOUR
from tests.worlds import kernel

# ---------------------------------------------------------------------------------------- relative diffusivity


@pytest.mark.parametrize(
    ("exponent", "factor"), [(0.0, 2.0), (2.0, 4.0)]
)  # K_obs = (2 + a) A <r^a>: twice a constant kernel, four times r^2 / T (Lundgren 1981)
def test_diffusivity_of_a_known_kernel(exponent, factor):
    """Half d<r^2>/dt in kernel worlds, both routes, within 4 of the stated standard errors."""
    law = kernel([exponent], [], 0.2)  # K = 0.2 / d at 1 km
    tracks, pairs = kernel_pairs(law, 600, 1000.0, HOUR, 60, 5)
    times = HOUR * np.arange(2, 50, 8)
    found = relative_diffusivity(tracks, pairs, times)
    if exponent == 0.0:
        expected = [np.full(times.size, factor * law(1000.0))] * 2
    else:
        rate = law(1000.0) / 1000.0**2
        grown = 1000.0**2 * np.exp(8 * rate * times)
        expected = [factor * rate * grown, 0.5 * np.diff(grown) / np.diff(times)]
    for curve, known in zip((found.from_velocity, found.from_growth), expected, strict=True):
        known = known[: curve.axis.size]
        assert np.all(np.abs(curve.value - known) < 4 * curve.standard_error)
    assert np.all(np.diff(found.separation) > 0)


def test_both_routes_agree_where_motion_is_smooth():
    """r = r0 exp(s t): K = s r^2 (closed form); finite differences err by (s dt)^2 / 6."""
    tracks, pairs = kernel_pairs(kernel([0.0], [], 0.2), 3, 1000.0, 10.0, 40, 0)
    position = np.array(tracks.position)
    time = 10.0 * np.arange(40)
    for i in range(3):
        position[(2 * i) * 40 : (2 * i + 1) * 40] = 0.0
        position[(2 * i + 1) * 40 : (2 * i + 2) * 40] = 0.0
        position[(2 * i + 1) * 40 : (2 * i + 2) * 40, 0] = 1000.0 * np.exp(1e-3 * time)
    found = relative_diffusivity(replace(tracks, position=position), pairs, [100.0, 110.0, 300.0])
    at = np.array([100.0, 110.0, 300.0])
    assert found.from_velocity.value == pytest.approx(1e-3 * 1e6 * np.exp(2e-3 * at), rel=2e-5)
    grown = 1e6 * np.exp(2e-3 * at)
    assert found.from_growth.value == pytest.approx(0.5 * np.diff(grown) / np.diff(at), rel=1e-9)


def test_diffusivity_refuses():
    tracks, pairs = kernel_pairs(kernel([0.0], [], 0.2), 3, 1000.0, HOUR, 10, 0)
    with pytest.raises(DataError, match="two or more from one step, 3600 s, on"):
        relative_diffusivity(tracks, pairs, [0.0, HOUR])


# --------------------------------------------------------------------------------------------- residence times


@pytest.mark.parametrize(
    ("exponent", "ratio"), [(4 / 3, 1.5), (1.5, 1.3333), (1.0, 2.0)]
)  # 2 / a, from a point: derived and checked by an integral elsewhere
def test_residence_from_a_point(exponent, ratio):
    assert residence_ratio(exponent, 1e-12) == pytest.approx(ratio, abs=5e-5)


@pytest.mark.parametrize("exponent", [0.5, 1.0, 4 / 3, 2.0])
def test_residence_ratio_by_quadrature(exponent):
    """Green's function of the backward equation: time below R = int_0^R rho g(rho) drho, g from the flux."""
    start, top = 0.3, 1.0

    def scale(r):  # integral of 1 / (r K) from r to infinity is what remains of the flux
        return quad(lambda x: x ** (-1.0 - exponent), r, np.inf)[0]

    total = quad(lambda rho: rho * scale(max(rho, start)), 0, top, points=[start])[0]
    first = quad(lambda r: r ** (1 - exponent) / 2.0, start, top)[0]
    assert residence_ratio(exponent, start / top) == pytest.approx(total / first, rel=1e-6)


def test_exponent_from_residence():
    """Richardson world, long records: the ratio of times gives 4/3 within 4 jackknife errors."""
    tracks, pairs = kernel_pairs(kernel([4 / 3], [], 0.2), 400, 300.0, HOUR / 4, 24 * 4 * 80, 3)
    found = residence_statistics(tracks, pairs, [1500.0, 3000.0])
    assert np.all(found.unfinished < 0.01)
    assert found.start == pytest.approx(300.0)
    ratio = found.total.value / found.first.value
    left = found.total.leave_one_out() / found.first.leave_one_out()
    error = np.sqrt(np.sum((left - ratio) ** 2, axis=0))
    for i, top in enumerate(found.thresholds):
        expected = residence_ratio(4 / 3, 300.0 / top)
        assert abs(ratio[i] - expected) < 4 * error[i] + 0.03 * expected  # late by a step, see its notes
    assert np.all(np.abs(found.kernel_exponent - 4 / 3) < 0.25)


def test_residence_counted_by_hand():
    tracks, pairs = kernel_pairs(kernel([0.0], [], 0.2), 1, 1.0, 10.0, 8, 0)
    position = np.zeros((16, 3))
    position[8:, 0] = [1, 1, 3, 1, np.nan, 1, 3, 3]
    position[12] = np.nan
    found = residence_statistics(replace(tracks, position=position), replace(pairs, start_separation=[1.0]), [2.0, 4.0])
    # Below 2: half the first step, the second, then two samples after first reaching it; 4 is never reached.
    assert found.first.value.tolist() == [15.0, 65.0]
    assert found.total.value.tolist() == [35.0, 65.0]
    assert found.unfinished.tolist() == [0.0, 1.0]
    assert np.isnan(found.kernel_exponent[1])


def test_residence_refuses():
    tracks, pairs = kernel_pairs(kernel([0.0], [], 0.2), 3, 1000.0, HOUR, 10, 0)
    with pytest.raises(DataError, match="must be positive and rising"):
        residence_statistics(tracks, pairs, [2.0, 1.0])


# ------------------------------------------------------------------------------------------------ distributions


def test_samples_of_a_constant_kernel_follow_rayleigh():
    """Exact law from r0 -> 0: r^2 / (4 kappa t) is exponential (two-dimensional diffusion)."""
    law = kernel([0.0], [], 0.2)
    tracks, pairs = kernel_pairs(law, 500, 20.0, HOUR, 30, 9)
    late = separation_samples(tracks, pairs, [HOUR, 25 * HOUR])[1]
    assert late.time == 25 * HOUR
    found = distance_to(late, lambda r: cumulative(r, late.time, law(1.0), 0.0), 1)
    assert found.p_value > 0.01
    far = distance_to(late, lambda r: cumulative(r, late.time, 2 * law(1.0), 0.0), 1)
    assert far.p_value < 0.01
    assert far.clusters == 500


def test_distances_are_those_of_scipy():
    rng = np.random.default_rng(0)
    a, b = rng.lognormal(0, 1, 60), rng.lognormal(0.4, 1, 50)
    one, two = SeparationSample(0.0, a, np.arange(60)), SeparationSample(0.0, b, 60 + np.arange(50))
    between = distance_between(one, two, 0)
    known = ks_2samp(a, b)
    assert between.distance == pytest.approx(known.statistic)
    # Independent clusters of one: the permutation distribution is that of the classical test.
    assert abs(between.p_value - known.pvalue) < 4 * np.sqrt(known.pvalue * (1 - known.pvalue) / 1999) + 0.01
    against = distance_to(one, lambda r: norm.cdf(np.log(r) - 0.2), 0)
    known = kstest(a, lambda r: norm.cdf(np.log(r) - 0.2))
    assert against.distance == pytest.approx(known.statistic)
    assert abs(against.p_value - known.pvalue) < 0.1  # signs are an approximation at 60 clusters
    assert one.cumulative(against.at) - norm.cdf(np.log(against.at) - 0.2) == pytest.approx(
        against.distance, abs=1 / 60 + 1e-9
    )


def clustered(rng, n_cluster, size, first=0):
    """Samples whose clusters share half of the variance of ln r."""
    shared = np.repeat(rng.standard_normal(n_cluster), size)
    values = np.exp(np.sqrt(0.5) * (shared + rng.standard_normal(shared.size)))
    return SeparationSample(0.0, values, first + np.repeat(np.arange(n_cluster), size))


def test_twins_change_nothing():
    """Every separation twice in its own cluster: same distance, same p-value."""
    sample = clustered(np.random.default_rng(1), 12, 3)
    twins = SeparationSample(0.0, np.repeat(sample.separation, 2), np.repeat(sample.cluster, 2))
    one, two = (distance_to(s, lambda r: norm.cdf(np.log(r)), 4) for s in (sample, twins))
    assert two.p_value == pytest.approx(one.p_value, abs=0.01)


def test_shared_clusters_are_exchanged_whole():
    rng = np.random.default_rng(2)
    one = clustered(rng, 15, 4)
    same = SeparationSample(0.0, one.separation * 1.0, one.cluster)
    assert distance_between(one, same, 0).p_value == 1.0
    moved = SeparationSample(0.0, one.separation * 3.0, one.cluster)
    assert distance_between(one, moved, 0).p_value < 0.01


def test_clusters_that_a_pair_connects_are_one():
    tracks, pairs = kernel_pairs(kernel([0.0], [], 0.2), 8, 1000.0, HOUR, 10, 0)
    across = replace(pairs, first=pairs.first, second=np.roll(pairs.second, 1))
    assert len(np.unique(separation_samples(tracks, pairs, [HOUR])[0].cluster)) == 8
    assert len(np.unique(separation_samples(tracks, across, [HOUR])[0].cluster)) == 1


def test_distributions_refuse():
    few = clustered(np.random.default_rng(0), 4, 3)
    with pytest.raises(DataError, match="distance to a distribution: got 4 clusters; at least 6"):
        distance_to(few, lambda r: norm.cdf(np.log(r)), 0)
    with pytest.raises(DataError, match="distance between samples: got 4 clusters"):
        distance_between(few, few, 0)
    many = clustered(np.random.default_rng(0), 10, 3)
    with pytest.raises(DataError, match="got cumulative values that leave 0 to 1 or fall"):
        distance_to(many, lambda r: -np.log(r), 0)
    with pytest.raises(DataError, match="got an empty sample"):
        distance_between(many, SeparationSample(0.0, [], []), 0)
    with pytest.raises(DataError, match="separations and"):
        SeparationSample(0.0, [1.0], [1, 2])
    with pytest.raises(DataError, match="not finite"):
        SeparationSample(0.0, [np.nan], [1])
    assert np.isnan(SeparationSample(0.0, [], []).cumulative(1.0))


@pytest.mark.slow
@pytest.mark.calibration
@pytest.mark.parametrize("n_cluster", [12, 25])
def test_size_of_the_tests(n_cluster, record_property):
    """Nominal 5 %: rejected in at most what 400 binomial trials give with probability 0.999; scipy's is not."""
    trials = 400
    rejected = np.zeros(4)
    for i in range(trials):
        rng = np.random.default_rng(i)
        one, two = clustered(rng, n_cluster, 6), clustered(rng, n_cluster, 6, first=n_cluster)
        rejected[0] += distance_to(one, lambda r: norm.cdf(np.log(r)), i, 499).p_value <= 0.05
        rejected[1] += distance_between(one, two, i, 499).p_value <= 0.05
        rejected[2] += kstest(one.separation, lambda r: norm.cdf(np.log(r))).pvalue <= 0.05
        rejected[3] += ks_2samp(one.separation, two.separation).pvalue <= 0.05
    record_property("rejected at 5 %", (rejected / trials).tolist())
    print(n_cluster, "clusters, rejected at 5 %:", rejected / trials)
    assert np.all(rejected[:2] <= binom.ppf(0.999, trials, 0.05))
    assert np.all(rejected[:2] >= binom.ppf(0.001, trials, 0.05))
    assert np.all(rejected[2:] > 0.1 * trials)
