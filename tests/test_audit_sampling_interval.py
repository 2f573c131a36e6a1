"""The sampling interval: fewer fixes, other ratios, and what is said of them."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.audit import Finding
from regimes.audit.levels import level, shifts
from regimes.audit.sampling_interval import sampling_interval
from regimes.audit.thinning import thinned
from regimes.fixes import Fixes
from regimes.pairs import find_pairs
from regimes.tracks import make_tracks
from regimes.units import DAY, HOUR
from tests.audit_small import clean, odd, small
from tests.audit_worlds import audited
from tests.worlds import kernel, lossy_pairs


def walks(n: int = 6) -> Fixes:
    """A few random walks on a plane, hourly, that start at different hours, the first at a multiple of three."""
    rng = np.random.default_rng(2)
    hours = np.concatenate([np.arange(2 * i, 2 * i + 50) for i in range(n)])
    position = np.concatenate([np.cumsum(rng.standard_normal((50, 2)), axis=0) * 100.0 for _ in range(n)])
    return Fixes(
        particle=np.repeat(np.arange(n), 50),
        time=hours * HOUR,
        position=position,
        labels=tuple("abcdef"[:n]),
        release=np.repeat(0, n),
        release_labels=("r",),
        planar=True,
        position_error=0.0,
    )


def test_thinned_tracks_are_those_of_a_coarser_axis():
    """Independent route: the tracks made at once on the axis of every third hour."""
    fixes = walks()
    tracks = make_tracks(fixes, HOUR)
    direct = make_tracks(fixes, 3 * HOUR)
    pairs = find_pairs(tracks, "both", 1e6, 100 * HOUR)
    fewer, some = thinned(tracks, pairs, 3)
    assert fewer.step == direct.step
    np.testing.assert_array_equal(fewer.position, direct.position)
    np.testing.assert_array_equal(fewer.start_step, direct.start_step)
    np.testing.assert_array_equal(fewer.offset, direct.offset)
    found = find_pairs(direct, "both", 1e6, 100 * HOUR)
    for name in ("first", "second", "begin", "length", "start_separation"):
        np.testing.assert_array_equal(getattr(some, name), getattr(found, name))


def test_every_first_fix_changes_nothing():
    subject = clean()
    tracks, pairs = thinned(subject.tracks, subject.pairs, 1)
    np.testing.assert_array_equal(tracks.position, subject.tracks.position)
    for name in ("first", "second", "begin", "length", "cluster"):
        np.testing.assert_array_equal(getattr(pairs, name), getattr(subject.pairs, name))


def test_short_tracks_and_pairs_are_dropped():
    subject = clean()
    longest = int(subject.tracks.n_step.max())
    tracks, pairs = thinned(subject.tracks, subject.pairs, longest + 1)
    assert pairs.n_pair == 0
    assert tracks.n_track <= subject.tracks.n_track


def test_level_is_twice_the_kernel_over_the_square_whatever_the_ratio():
    """A Richardson world: 2 K / r^2 at the thresholds, within four standard errors of the mean."""
    world = kernel([4 / 3], [], 0.2)
    tracks, pairs = lossy_pairs(world, 120, 60, 3)
    for ratio in (1.2, 2.0):
        thresholds = 2000.0 * ratio ** np.arange(int(np.log(50) / np.log(ratio)))
        found = level(tracks, pairs, pairs, thresholds)
        r = np.exp(found.log_r)
        away = found.value - np.log(2.0 * world(r) / r**2)
        share = found.exits / found.exits.sum()
        error = np.sqrt(np.sum((found.influence @ share) ** 2))
        assert abs(away @ share) < 4.0 * error
        assert error < 0.2  # so that the closed-form correction, 0.35 at ratio 2, would be missed


def test_a_level_does_not_move_against_itself():
    subject = clean()
    rates = subject.fit.rates
    one = level(subject.tracks, rates.pairs, rates.pairs, rates.everything.thresholds)
    found = shifts(one, one, 1000.0, 1e5)
    assert all(s.change == 0.0 for s in found)


def test_a_rate_doubled_is_seen_moved_by_ln_2():
    """The same pairs watched by a clock that runs at half the speed, in the other level."""
    subject = clean()
    rates = subject.fit.rates
    slow = replace(subject.tracks, step=0.5 * subject.tracks.step)
    one, two = (
        level(tracks, rates.pairs, rates.pairs, rates.everything.thresholds) for tracks in (subject.tracks, slow)
    )
    for s in shifts(one, two, 1000.0, 1e5):
        assert s.change == pytest.approx(np.log(2.0), rel=1e-9)  # round-off
        assert s.error == pytest.approx(0.0, abs=1e-9)


def test_hourly_fixes_are_not_flagged():
    found = sampling_interval(clean())
    assert not found.flag
    assert not found.verdict_changes
    assert found.separations is None
    assert found.size < 0.02
    cap = np.log(2.0) / 2.0 / (HOUR / DAY)
    assert f"{cap:.2g} per day" in found.text


def test_daily_fixes_are_flagged_and_placed():
    content = small(5, records={"fix_interval_h": 24.0, "duration_d": 60.0}, releases={"number": 20})
    subject = audited(content, step=24 * HOUR)
    found = sampling_interval(subject)
    assert found.flag
    assert found.size > 0.1
    assert found.separations[0] < subject.resolved[0] < found.separations[1]
    assert "more frequent fixes" in found.text.lower()


@pytest.mark.parametrize("name", ["few pairs", "planar", "gaps", "short"])
def test_odd_surveys_get_a_finding(name):
    found = sampling_interval(odd()[name])
    assert isinstance(found, Finding)
    assert found.threat == "sampling_interval"
    assert found.text.endswith(".")
    assert "nan" not in found.text
