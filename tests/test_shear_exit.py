"""Exit times of diffusion in a linear shear: limits, two independent routes, and the evidence built on them."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.inference.fit import exit_rate_space
from regimes.inference.models import named_models
from regimes.inference.quadrature import integrate
from regimes.inference.shear import shear_evidence
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.theory.shear_exit import shear_exit_times
from tests.backward_equation import mean_exit_time

THRESHOLDS = 1000.0 * 2.0 ** (np.arange(15) / 2.0)


def test_exit_times_are_diffusive_below_the_scale():
    edges = np.array([1.0, 2.0, 3.0])
    expected = (edges[1:] ** 2 - edges[:-1] ** 2) / 4.0 / 1000.0**2  # K = S L^2
    assert shear_exit_times(edges, np.array([1000.0]))[0] == pytest.approx(expected, rel=1e-5)  # x^4 / 600 beyond


def test_exit_times_grow_as_richardsons_above_the_scale():
    times = shear_exit_times(1e5 * 2.0 ** np.arange(4), np.array([100.0]))[0]
    assert times[1:] / times[:-1] == pytest.approx(2.0 ** (2.0 / 3.0), rel=1e-9)  # round-off of large times


@pytest.mark.parametrize("radius", [0.3, 1.7, 6.0, 20.0])
def test_the_table_agrees_with_the_backward_equation(radius):
    edges = radius * np.array([1.0, 2.0**0.5])
    expected = mean_exit_time(edges[1]) - mean_exit_time(edges[0])
    assert shear_exit_times(edges, np.ones(1))[0, 0] == pytest.approx(expected, rel=3e-3)  # as stated


def test_the_table_agrees_with_simulated_pairs():
    rng, n, radius, step = np.random.default_rng(5), 3000, 3.0, 0.002
    place, left, times = np.zeros((2, n)), np.arange(n), np.zeros(n)
    for k in range(1, 40000):
        noise = np.sqrt(2.0 * step) * rng.standard_normal((2, left.size))
        place[0] += step * (place[1] + 0.5 * noise[1]) + noise[0]
        place[1] += noise[1]
        # a path seen at steps passes unseen by 0.5826 of its step: Siegmund (1985)
        out = np.hypot(*place) + 0.5826 * np.sqrt(2.0 * step) >= radius
        times[left[out]] = k * step
        place, left = place[:, ~out], left[~out]
        if not left.size:
            break
    expected = shear_exit_times(np.array([1e-6, radius]), np.ones(1))[0, 0]
    assert abs(times.mean() - expected) < 4.0 * times.std() / np.sqrt(n) + 0.002 * expected


def fitted(mean_times, exits=40.0):
    exits = np.full(THRESHOLDS.size - 1, exits)
    likelihood = ExitRateLikelihood(THRESHOLDS, exits, exits * mean_times, 1.5)
    space = exit_rate_space(likelihood)
    best = max(integrate(likelihood, m, space).log_evidence for m in named_models(("diffusive", "richardson"), 1))
    return shear_evidence(likelihood, space), best, likelihood, space


def test_rates_of_shear_prefer_shear_and_give_back_its_numbers():
    rate, scale = 0.5 / 86400.0, 3000.0
    found, best, _, _ = fitted(shear_exit_times(THRESHOLDS, np.array([scale]))[0] / rate)
    assert found.log_evidence > best
    assert found.scale == pytest.approx(scale, rel=0.2)
    assert found.rate == pytest.approx(rate, rel=0.2)


def test_rates_of_richardson_do_not_buy_shear():
    found, best, _, _ = fitted(1e4 * THRESHOLDS[:-1] ** (2.0 / 3.0) / 100.0)
    assert -4.0 < found.log_evidence - best < 0.0  # the same rates where the scale is small, at the price of a prior


def test_evidence_does_not_know_units():
    found, _, likelihood, space = fitted(1e4 * THRESHOLDS[:-1] ** 0.9 / 500.0)
    other = replace(likelihood, thresholds=likelihood.thresholds * 7.0)
    moved = replace(space, lowest=space.lowest * 7.0, highest=space.highest * 7.0)
    again = shear_evidence(other, moved)
    assert again.log_evidence == pytest.approx(found.log_evidence, abs=1e-8)  # round-off
    assert again.scale == pytest.approx(7.0 * found.scale, rel=1e-9)
