"""How often two data sets of one flow are called different, how often different ones are, and what sampling fakes."""

import numpy as np
import pytest
from scipy.stats import binom, kstest

from regimes.compare import Near, Side
from regimes.compare.deployments import plan_of
from regimes.compare.fitted import common_thresholds
from regimes.compare.grid import grid_of
from regimes.compare.ranks import LEVEL, Ranks, rank_curves
from regimes.compare.sides import sampled
from regimes.compare.unmatched import unmatched_p
from regimes.fitting import Options, exit_rates
from tests.compare_worlds import FASTER_BELOW_10, kernel_side, sea_side, some

GROUPS = 20


def ranked(small: Side, large: Side, seed: int, n: int = 99) -> tuple[Ranks, np.ndarray]:
    """Ranks of a small side among deployments of a large one, and the thresholds of both; no fit."""
    plan = plan_of(small, large, Near(), seed)
    rng = np.random.default_rng(seed)
    tracks, pairs = plan.observed(rng)
    likelihoods = [exit_rates(*data, Options()).likelihood for data in ((tracks, pairs), plan.whole(large, rng))]
    thresholds = common_thresholds(*likelihoods)
    grid = grid_of(tracks, pairs, thresholds)
    table, _ = sampled(plan, grid, (tracks, pairs), rng)
    return rank_curves(table, plan.pools, np.arange(len(plan.launches)), n, seed), thresholds


def few(bank: Side, k: int) -> Side:
    """The k-th twenty of a bank of releases."""
    return some(bank, np.arange(GROUPS * k, GROUPS * (k + 1)), "the observed case")


def apart(bank: Side, n: int, rng) -> tuple[Side, Side]:
    """Twenty releases of a bank, and n others: the bank itself is the flow, so that both come from one law."""
    order = rng.permutation(bank.pairs.n_cluster)
    return some(bank, order[:GROUPS], "the observed case"), some(bank, order[GROUPS : GROUPS + n], "the model")


@pytest.mark.slow
def test_one_flow_is_rarely_called_different():
    """60 pairs of data sets from the demo's sea, 20 releases against 240, drawn apart from 1500."""
    many = 60
    bank, rng = sea_side(1500, 5), np.random.default_rng(3)
    p = np.array([ranked(*apart(bank, 240, rng), k)[0].p_value for k in range(many)])
    print(f"one flow: p < 0.05 in {np.mean(p < LEVEL):.1%}, uniform with p = {kstest(p, 'uniform').pvalue:.2f}")
    assert np.sum(p < LEVEL) <= binom.ppf(0.999, many, LEVEL)
    assert kstest(p, "uniform").pvalue > 0.01


@pytest.mark.slow
def test_exponents_half_as_large_again_below_10_km_are_found():
    """20 releases against 200 of a kernel world; 80 % of 30 replicates, less 3 binomial standard errors."""
    many = 30
    small = kernel_side(GROUPS * many, 7, FASTER_BELOW_10, fix_interval_h=2.0)
    large = kernel_side(1000, 8, fix_interval_h=2.0)
    rng = np.random.default_rng(3)
    found, alone = 0, 0
    for k in range(many):
        ranks, _ = ranked(few(small, k), apart(large, 200, rng)[1], k)
        exponent = next(c for c in ranks.curves if c.curve == "exponent")
        found += ranks.p_value < LEVEL
        alone += exponent.differs_at.size > 0 and np.median(exponent.differs_at) < 10e3
    print(f"exponents x 1.5 below 10 km: found in {found / many:.0%}, by the exponent, there, in {alone / many:.0%}")
    assert found / many > 0.8 - 3 * np.sqrt(0.8 * 0.2 / many)


@pytest.mark.slow
def test_sampling_alone_fakes_a_difference_and_sampling_alike_does_not():
    """Records of the smaller set end early; 30 replicates of one kernel world."""
    many = 30
    small = kernel_side(GROUPS * many, 9, duration_d=20.0, loss_per_d=0.03)
    large = kernel_side(1000, 10, duration_d=45.0)
    rng = np.random.default_rng(3)
    usual, alike = np.empty(many), np.empty(many)
    for k in range(many):
        one, two = few(small, k), apart(large, 200, rng)[1]
        ranks, thresholds = ranked(one, two, k)
        usual[k], alike[k] = unmatched_p(one, two, thresholds), ranks.p_value
    print(f"same flow called different: as they are {np.mean(usual < LEVEL):.0%}, alike {np.mean(alike < LEVEL):.0%}")
    assert np.mean(usual < LEVEL) > 0.5
    assert np.sum(alike < LEVEL) <= binom.ppf(0.999, many, LEVEL)
