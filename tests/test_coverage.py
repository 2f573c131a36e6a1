"""Whether intervals hold: known truth, hundreds of replicates."""

import numpy as np
import pytest
from scipy.stats import binom

from regimes.fitting.rates import exit_rates
from regimes.inference.slope_mixture import slope_of_either
from regimes.pipeline import Options
from tests.slope_candidates import CANDIDATES, held, held_words, slope_quantiles
from tests.worlds import in_parallel, kernel, lossy_pairs

pytestmark = [pytest.mark.slow, pytest.mark.calibration]

REPLICATES = 200
WORLDS = {"richardson": (4 / 3, 1.0, 30, 5 / 3), "exponent 1.8": (1.8, 0.5, 20, 2.6)}


def one(arguments):
    """Quantiles of alpha by the three candidates in one kernel world; NaN where none is quoted."""
    exponent, rate, days, n_pair, seed = arguments
    tracks, pairs = lossy_pairs(kernel([exponent], [], rate), n_pair, days, seed)
    rates = exit_rates(tracks, pairs, Options())
    return slope_quantiles(rates.likelihood, rates.resolved.low, rates.resolved.high, seed)


@pytest.mark.parametrize("n_pair", [20, 30, 60])
@pytest.mark.parametrize("world", WORLDS)
def test_slope_intervals_hold_the_truth(world, n_pair, record_property):
    """Bars: 95 % intervals hold the truth in 91-98 %, 68 % intervals in 61-75 % of replicates.

    Both bands are wider than two binomial standard errors of 200 replicates (1.5 % and 3.3 %). They are for the
    default, the last candidate.
    """
    exponent, rate, days, truth = WORLDS[world]
    found = np.array(in_parallel(one, [(exponent, rate, days, n_pair, seed) for seed in range(REPLICATES)]))
    text = f"{world}, {n_pair} pairs"
    for i, name in enumerate(CANDIDATES):
        quoted = found[~np.isnan(found[:, i, 2]), i]
        text += f"\n  {name}: {held_words(quoted, truth)}"
    record_property("coverage", text)
    print(text)
    in68, in95 = held(quoted, truth)
    assert len(quoted) >= 0.9 * REPLICATES
    slack = 0.5 / REPLICATES
    assert 0.91 - slack <= in95 <= 0.98 + slack, text
    assert 0.61 - slack <= in68 <= 0.75 + slack, text


def bound(arguments):
    """Whether the printed 95 % and 68 % bounds hold, for a short range below a bend; None where none is printed."""
    n_pair, seed = arguments
    tracks, pairs = lossy_pairs(kernel([1.8, 0.0], [20.0], 0.5), n_pair, 60, seed)
    likelihood = exit_rates(tracks, pairs, Options()).likelihood
    found = slope_of_either(likelihood, 1.4e3, 16.1e3, np.random.default_rng(seed)).slope
    if found.kind != "lower_bound":
        return None
    return np.quantile(found.draws, 0.05) <= 2.6, np.quantile(found.draws, 0.32) <= 2.6


def test_bounds_hold():
    """Bars: 90 % for bounds printed at 95 %, 58 % for those at 68 %; each two standard errors of 100 below."""
    found = [f for f in in_parallel(bound, [(30, seed) for seed in range(120)]) if f is not None]
    in95, in68 = np.mean(found, axis=0)
    text = f"alpha 2.6 over 1.4 to 16 km below a bend, 30 pairs: 95 % bound {in95:.2f}, 68 % {in68:.2f}, {len(found)}"
    print(text)
    assert len(found) >= 80, text
    assert in95 >= 0.90, text
    assert in68 >= 0.58, text


def test_bands_have_power():
    """A method whose 95 % intervals hold only 88 % would leave the band in nine of ten runs."""
    assert binom.cdf(0.91 * REPLICATES - 1, REPLICATES, 0.88) > 0.85
