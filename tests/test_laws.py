"""Laws that hold whatever the numbers: units, rotation, names, order; the same seed gives the same numbers."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.fitting.quick import quick_fit
from regimes.fitting.rates import rate_table
from regimes.pairs import Pairs
from regimes.pipeline import Options, analyse_pairs
from regimes.tracks import Tracks
from tests.worlds import kernel, lossy_pairs

LIMITS = (1000.0, 90e3)


@pytest.fixture(scope="module")
def world():
    return lossy_pairs(kernel([2.0, 4 / 3], [6.0], 0.35), 40, 30, 8)


@pytest.fixture(scope="module")
def plain(world):
    return quick_fit(*world, Options(limits=LIMITS))


def scaled(tracks: Tracks, pairs: Pairs, length: float, time: float):
    moved = replace(
        tracks,
        position=tracks.position * length,
        position_error=tracks.position_error * length,
        step=tracks.step * time,
    )
    return moved, replace(pairs, start_separation=pairs.start_separation * length)


def same(found, plain, rel=1e-9, length=1.0, time=1.0):
    """All numbers of a quick fit, each with the power of its unit."""
    likelihood, wanted = found.rates.likelihood, plain.rates.likelihood
    assert likelihood.thresholds == pytest.approx(wanted.thresholds * length, rel=rel)
    assert likelihood.exits == pytest.approx(wanted.exits, rel=rel)
    assert likelihood.risk == pytest.approx(wanted.risk * time, rel=rel)
    assert likelihood.dispersion == pytest.approx(wanted.dispersion, rel=rel)
    one, two = rate_table(found.rates), rate_table(plain.rates)
    for name in ("rate", "low68", "high68", "low95", "high95", "textbook"):
        assert getattr(one, name) == pytest.approx(getattr(two, name) / time, rel=max(rel, 1e-7), nan_ok=True)
    for name in ("exits", "passages", "n_pair", "n_cluster", "resolved", "zero_fraction"):
        assert np.array_equal(getattr(one, name), getattr(two, name), equal_nan=True)
    assert found.best == plain.best
    assert found.challenge == pytest.approx(plain.challenge, abs=max(1e3 * rel, 1e-7))
    assert found.separation == pytest.approx(plain.separation * length, rel=rel)
    for name, probability in plain.probability.items():
        assert found.probability[name] == pytest.approx(probability, abs=1e-6)
    assert found.exponent_low == pytest.approx(plain.exponent_low, abs=1e-9)
    assert found.exponent_high == pytest.approx(plain.exponent_high, abs=1e-9)
    own = found.slope(LIMITS[0] * length, LIMITS[1] * length, 2), plain.slope(*LIMITS, 2)
    assert own[0].kind == own[1].kind
    assert own[0].low == pytest.approx(own[1].low * length, rel=rel)


def test_the_world_is_worth_testing(plain):
    assert plain.rates.likelihood.exits.size >= 8
    assert plain.rates.likelihood.exits.min() > 3
    assert max(np.max(p) for p in plain.probability.values()) > 0.6


@pytest.mark.parametrize(("length", "time"), [(3.7, 1.0), (1.0, 12.3), (0.04, 0.007)])
def test_units(world, plain, length, time):
    """Lengths times one factor and times times another: every output by the power of its unit."""
    limits = (LIMITS[0] * length, LIMITS[1] * length)
    same(quick_fit(*scaled(*world, length, time), Options(limits=limits)), plain, 1e-8, length, time)


def test_rotation_and_translation(world, plain):
    """A plane turned by 0.7 rad and moved by 40 km (round-off of the coordinates: 1e-11 m)."""
    tracks, pairs = world
    c, s = np.cos(0.7), np.sin(0.7)
    turned = tracks.position @ np.array([[c, s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]]) + [40e3, -7e3, 0.0]
    same(quick_fit(replace(tracks, position=turned), pairs, Options(limits=LIMITS)), plain, 1e-8)


def test_mirror(world, plain):
    tracks, pairs = world
    same(quick_fit(replace(tracks, position=tracks.position * [-1.0, 1.0, 1.0]), pairs, Options(limits=LIMITS)), plain)


def test_order_of_pairs(world, plain):
    tracks, pairs = world
    order = np.random.default_rng(1).permutation(pairs.n_pair)
    same(quick_fit(tracks, pairs.select(order), Options(limits=LIMITS)), plain)


def test_members_of_a_pair(world, plain):
    tracks, pairs = world
    same(quick_fit(tracks, replace(pairs, first=pairs.second, second=pairs.first), Options(limits=LIMITS)), plain)


def test_names_and_order_of_tracks_and_clusters(world, plain):
    """Tracks in another order under other names, clusters numbered anew."""
    tracks, pairs = world
    rng = np.random.default_rng(3)
    n = len(tracks.labels)
    order = rng.permutation(n)  # new track k is old track order[k]
    new = np.argsort(order)
    rows = np.concatenate([np.arange(tracks.offset[k], tracks.offset[k + 1]) for k in order])
    length = np.diff(tracks.offset)[order]
    moved = replace(
        tracks,
        position=tracks.position[rows],
        offset=np.concatenate(([0], np.cumsum(length))),
        start_step=tracks.start_step[order],
        labels=tuple(f"drifter {k}" for k in range(n)),
        release=tracks.release[order],
    )
    renumbered = rng.permutation(pairs.n_cluster)
    members = replace(pairs, first=new[pairs.first], second=new[pairs.second], cluster=renumbered[pairs.cluster][order])
    same(quick_fit(moved, members, Options(limits=LIMITS)), plain)


def test_inputs_changed_afterwards_change_nothing(world):
    """Records hold copies: what is done to an array afterwards does not reach them."""
    tracks, pairs = world
    position = tracks.position.copy()
    copied = replace(tracks, position=position)
    before = quick_fit(copied, pairs, Options(limits=LIMITS))
    position *= 2.0
    same(quick_fit(copied, pairs, Options(limits=LIMITS)), before)
    with pytest.raises(ValueError, match="read-only"):
        before.rates.everything.exits[0, 0] = 1.0


@pytest.mark.slow
def test_same_seed_same_numbers(world):
    """Two runs with all the sampling, on one thread and on two, agree to the last bit; another seed does not."""
    options = Options(limits=LIMITS, regimes=("exponential", "richardson"), most_transitions=1, seed=7)
    one, two = (analyse_pairs(*world, replace(options, jobs=jobs)) for jobs in (1, 2))
    other = analyse_pairs(*world, replace(options, seed=8))
    for curve, fitted in one.fits.items():
        for a, b in zip(fitted.named + fitted.free, two.fits[curve].named + two.fits[curve].free, strict=True):
            assert np.array_equal(a.draws, b.draws)
            assert a.log_evidence == b.log_evidence
    assert one.verdict.sentence == two.verdict.sentence
    assert np.array_equal(one.bands.rate_named, two.bands.rate_named)
    assert not np.array_equal(one.bands.rate_named, other.bands.rate_named)
    for a, b in zip(one.others.checks, two.others.checks, strict=True):
        assert np.array_equal(a.band, b.band)
