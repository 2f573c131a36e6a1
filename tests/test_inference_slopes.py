"""Slopes over a range, and what the fitted kernels predict."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.inference.average import Posterior
from regimes.inference.models import Model
from regimes.inference.predict import fit_p_value, mixed_kernels, rate_band
from regimes.inference.slope import classify, mixed_slope_over, slope_over
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.theory.kernel import Kernel
from tests.test_inference import KM, SPACE, at

THRESHOLDS = 1e3 * 2.0 ** (np.arange(13) / 2)


# slope over a range


def rates(exponents, breaks=(), exits=300.0):
    """Exit statistics exactly as a kernel predicts."""
    kernel = Kernel(exponents, np.multiply(breaks, KM), 4e-6, 2e3)
    count = np.full(THRESHOLDS.size - 1, exits)
    return ExitRateLikelihood(THRESHOLDS, count, count * kernel.exit_times(THRESHOLDS), 2.9)


@pytest.mark.parametrize(
    ("likelihood", "low", "high", "kind", "reason"),
    [
        (rates([4 / 3]), 1, 64, "estimate", ""),
        (rates([2.0]), 1, 64, "lower_bound", "a slope of 3 or steeper is possible"),
        (rates([1.0]), 1, 64, "upper_bound", "a slope of 1 or flatter is possible"),
        (rates([1.5], exits=2.0), 1, 3, "none", "every slope from 1 to 3 possible"),
        (rates([0.0]), 1, 64, "none", "the range is diffusive"),
        (rates([2.0, 1.3], (8,)), 1, 64, "none", "the exponent changes inside the range"),
        (rates([2.0, 1.3], (8,)), 8, 64, "estimate", ""),
        (rates([4 / 3]), 1.1, 2.7, "none", "fewer than 3 resolved intervals lie inside"),
    ],
)
def test_kinds_of_slope(likelihood, low, high, kind, reason):
    found = slope_over(likelihood, low * KM, high * KM, np.random.default_rng(1))
    assert found.kind == kind
    assert reason in found.reason
    assert (found.draws.size == 0) == (kind == "none")
    if kind != "none":
        assert np.all((found.draws >= 1.0) & (found.draws <= 3.0))
    if kind == "estimate":
        truth = 5 / 3 if low == 1 else 1.6
        assert abs(np.median(found.draws) - truth) < found.draws.std()


def test_range_is_moved_inwards_to_thresholds():
    found = slope_over(rates([4 / 3]), 1.5 * KM, 30 * KM, np.random.default_rng(1))
    assert (found.low, found.high) == (pytest.approx(2 * KM), pytest.approx(32 * KM / np.sqrt(2)))


def test_classify():
    middle = np.linspace(1.2, 2.8, 1000)
    assert classify(middle)[0] == "estimate"
    assert classify(np.append(middle, np.full(20, 3.0)))[0] == "estimate"  # 2 %
    assert classify(np.append(middle, np.full(40, 3.0)))[0] == "lower_bound"  # 4 %
    assert classify(np.append(middle, np.full(40, 1.0)))[0] == "upper_bound"
    assert classify(np.concatenate([middle, np.full(40, 1.0), np.full(40, 3.0)]))[0] == "none"


def test_slope_of_mixed_kernels_over_a_range():
    rng = np.random.default_rng(1)
    found = mixed_slope_over([at(("free", "free"), (2.0, 1.4), (8,))], 4 * KM, 16 * KM, rng)
    assert (found.kind, found.reason) == ("estimate", "")
    assert found.draws == pytest.approx(np.full(4000, 1.7))  # half of ln r each
    found = mixed_slope_over([at(("free", "diffusive"), (2.0,), (5,))], 4 * KM, 16 * KM, rng)
    assert found.kind == "none"


# predictions


def test_bands_of_one_kernel_are_its_curves():
    posts = [at(("richardson",))]
    kernels = mixed_kernels(posts, SPACE, 30, np.random.default_rng(1))
    assert len(kernels) == 30
    band = rate_band(kernels, np.array([2.0, 4.0]) * KM, 2.0)
    wanted = np.log(2.0) / kernels[0].exit_times(np.array([2.0, 4.0, 8.0]) * KM)
    assert band == pytest.approx(np.tile(wanted, (5, 1)), rel=1e-12)


def test_predictive_p_value():
    """One half or so where the data follow the kernel with the scatter that they should have; small where not."""
    model, rng = Model(("richardson",)), np.random.default_rng(4)
    likelihood = rates([4 / 3])
    n, phi = likelihood.exits.size, likelihood.dispersion
    theta = np.tile([np.log(4e-6 * (SPACE.reference / 2e3) ** (-2 / 3))], (20, 1))
    values = []
    for _ in range(200):
        times = Kernel([4 / 3], [], 4e-6, 2e3).exit_times(likelihood.thresholds)
        noisy = replace(likelihood, risk=times * phi * rng.gamma(likelihood.exits / phi, size=n))
        values.append(fit_p_value(noisy, [Posterior(model, 0.0, theta)], SPACE, 1))
    assert np.mean(values) == pytest.approx(0.5, abs=4.5 * np.sqrt(1 / 12 / 200))  # uniform at the truth
    assert np.mean(np.array(values) < 0.05) < 0.05 + 4.5 * np.sqrt(0.05 * 0.95 / 200)
    wrong = Posterior(Model(("diffusive",)), 0.0, theta)
    assert fit_p_value(likelihood, [wrong], SPACE, 1) < 1e-6
