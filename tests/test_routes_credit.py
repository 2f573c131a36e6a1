"""Exits with credit: exact rates whenever records end, and plain counts where nothing is cut short."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.curves import credit, exit_statistics
from regimes.curves.credit import credited_exits
from regimes.likelihood.dispersion import measure_dispersion
from regimes.synthetic.campaign import Layout, campaign
from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.synthetic.releases import as_tracks_and_pairs
from regimes.theory.kernel import Kernel
from regimes.units import DAY, HOUR

RATIO = np.sqrt(2.0)
THRESHOLDS = 1e3 * RATIO ** np.arange(9)
WORLDS = {
    "exponential": Kernel([2.0], [], 0.25 / DAY, 1e3),
    "richardson": Kernel([4 / 3], [], 0.5 / DAY, 1e3),
    "diffusive": Kernel([0.0], [], 2.0 / DAY, 1e3),
    "bend": Kernel([2.0, 4 / 3], [4.2e3], 0.4 / DAY, 1e3),
}


def separations(tracks, pairs):
    """(n_pair, n_time) distances of planar pairs of one length."""
    position = tracks.position.reshape(pairs.n_pair, 2, -1, 3)
    return np.linalg.norm(position[:, 1] - position[:, 0], axis=-1)


def at_random(r, rng):
    """Records that end whenever: exponential with a mean of ten days."""
    return 2 + rng.exponential(10 * 24, len(r)).astype(int)


def beyond_a_level(r, rng):
    """Records that end at the first sample beyond a level between the thresholds, one of its own for each pair."""
    level = np.exp(rng.uniform(np.log(1.2e3), np.log(30e3), len(r)))[:, None]
    return first(r >= level)


def drawn_back(r, rng):
    """Records that end when a pair has come back to three quarters of its largest separation, beyond 1.5 km."""
    widest = np.maximum.accumulate(r, axis=1)
    return first((r < 0.75 * widest) & (widest > rng.uniform(1.5e3, 12e3, len(r))[:, None]))


def first(stop):
    """Length of a record whose last sample is the first at which `stop` holds."""
    return np.where(stop.any(axis=1), stop.argmax(axis=1), stop.shape[1] - 1) + 1


@pytest.mark.parametrize("world", WORLDS)
@pytest.mark.parametrize("end", [at_random, beyond_a_level, drawn_back])
def test_rates_are_exact_whenever_records_end(world, end):
    """Exits with credit over time at risk against closed-form exit times: 4.5 standard errors (cluster scores) and 1 %.

    The 1 % is for the local power law between thresholds; plain counts are off by more in every case here.
    """
    kernel = WORLDS[world]
    tracks, pairs = kernel_pairs(kernel, 2500, 800.0, HOUR, 40 * 24, 17)
    length = np.maximum(end(separations(tracks, pairs), np.random.default_rng(5)), 2)
    pairs = replace(pairs, length=np.minimum(pairs.length, length))
    found = exit_statistics(tracks, pairs, THRESHOLDS)
    credited = credited_exits(found)
    enough = found.exits.sum(axis=0) >= 100
    assert enough.sum() >= 5
    mean = kernel.exit_times(THRESHOLDS)[enough]
    risk = found.time_at_risk.sum(axis=0)[enough]
    exits = credited.sum(axis=0)[enough]
    phi = measure_dispersion(credited[:, enough], found.time_at_risk[:, enough], found.weight).total
    error = np.sqrt(phi / exits)
    assert np.all(np.abs(exits * mean / risk - 1.0) < 4.5 * error + 0.01)
    weight = 1.0 / error**2
    pooled = np.sum(weight * (exits * mean / risk - 1.0)) / weight.sum()
    assert abs(pooled) < 4.5 / np.sqrt(weight.sum()) + 0.005
    plain = found.exits.sum(axis=0)[enough] * mean / risk - 1.0
    assert np.max(np.abs(plain)) > 1.5 * np.max(np.abs(exits * mean / risk - 1.0))


def ladder_climbers(n_pair, per_step, beyond):
    """Pairs whose separation grows by the threshold ratio in `per_step` samples, so that samples fall on thresholds."""
    n_time = per_step * (THRESHOLDS.size - 1) + 1 + beyond
    r = THRESHOLDS[0] * RATIO ** (np.arange(n_time) / per_step)
    r[::per_step][: THRESHOLDS.size] = THRESHOLDS
    position = np.zeros((n_pair, 2, n_time, 3))
    position[:, 1, :, 0] = r
    return as_tracks_and_pairs(position, HOUR, np.random.default_rng(1), 0.0)


def test_plain_counts_where_nothing_is_cut_short():
    tracks, pairs = ladder_climbers(7, 6, 4)
    found = exit_statistics(tracks, pairs, THRESHOLDS)
    assert found.censored.sum() == 0
    assert found.zero_length.sum() == 0
    assert found.exits.sum() == 7 * 8
    assert credited_exits(found) == pytest.approx(found.exits, abs=1e-9)


def test_half_a_passage_in_the_exponential_regime_is_half_an_exit():
    """Seven pairs finish, one is cut half way (in ln r, where the mean time is even) to each threshold in turn."""
    tracks, pairs = ladder_climbers(8, 6, 0)
    length = pairs.length.copy()
    length[7] = 6 * 3 + 3 + 1
    found = exit_statistics(tracks, replace(pairs, length=length), THRESHOLDS)
    credited = credited_exits(found)
    assert credited[:7] == pytest.approx(np.ones((7, 8)), abs=1e-6)
    assert credited[7] == pytest.approx([1, 1, 1, 0.5, 0, 0, 0, 0], abs=1e-4)
    assert credited.sum(axis=0) * 6 * HOUR == pytest.approx(found.time_at_risk.sum(axis=0), rel=1e-4)


def test_a_pair_that_drifts_back_loses():
    """The credit of an unfinished passage is below zero when it was last seen inside its threshold."""
    position = np.zeros((20, 2, 60, 3))
    grow = THRESHOLDS[0] * RATIO ** (np.arange(60) / 6)
    position[:, 1, :, 0] = grow
    position[19, 1, 20:, 0] = 0.8 * THRESHOLDS[3]
    tracks, pairs = as_tracks_and_pairs(position, HOUR, np.random.default_rng(1), 0.0)
    credited = credited_exits(exit_statistics(tracks, pairs, THRESHOLDS))
    assert -0.644 <= credited[19, 3] < -0.3  # ln 0.8 over the step, or less where the rate falls
    assert np.all(credited[19, 4:] == 0)


def test_credit_settles_where_full_steps_would_cycle(monkeypatch):
    """Sparse outer thresholds: the last two rounds used to differ by a fifth, and even in sign."""
    kernel = Kernel([2.0, 4 / 3], [10e3], 0.3 / 86400.0, 1e3)
    tracks, pairs = campaign(kernel, Layout(40, 3, 300.0, 10800.0, 241, 10.0, 0.01 / 86400.0), 0)
    statistics = exit_statistics(tracks, pairs, 500.0 * 2.0 ** (0.5 * np.arange(24)))
    found = []
    for rounds in (498, 499):
        monkeypatch.setattr(credit, "_ROUNDS", rounds)
        found.append(statistics.weight @ credit.credited_exits(statistics))
    assert np.allclose(*found, rtol=1e-4, atol=1e-4)
