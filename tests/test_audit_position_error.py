"""Position errors: what tracks show of them, and what is said."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.audit import Finding
from regimes.audit.error_estimate import estimate_error
from regimes.audit.position_error import position_error
from regimes.tracks import Tracks
from regimes.units import HOUR
from tests.audit_small import clean, odd, small, stated
from tests.audit_worlds import audited

TRUE = 150.0  # m, in the surveys below


@pytest.fixture(scope="module")
def noisy():
    return audited(small(5, records={"position_error_m": TRUE}), stated_error=10.0)


def with_errors(tracks: Tracks, error: float, memory: float, seed: int = 3) -> Tracks:
    """Tracks on a plane with errors of known size, recursive in each track: an independent route to the estimate."""
    rng = np.random.default_rng(seed)
    position, kept = np.array(tracks.position), memory
    for a, b in zip(tracks.offset[:-1], tracks.offset[1:], strict=True):
        e = rng.standard_normal(2) * error
        for i in range(a, b):
            position[i, :2] += e
            e = kept * e + np.sqrt(1 - kept**2) * error * rng.standard_normal(2)
    return replace(tracks, position=position)


@pytest.fixture(scope="module")
def plane():
    return odd()["planar"]


@pytest.mark.parametrize("kept", [0.0, np.exp(-0.5)])
def test_errors_with_and_without_memory_are_found(plane, kept):
    """A tenth is what the two-part model of motion and error may miss; the survey has 10 m of its own."""
    error = 300.0
    found = estimate_error(with_errors(plane.tracks, error, kept), plane.pairs)
    assert found.value == pytest.approx(np.hypot(error, 10.0), rel=0.1)
    assert found.memory == pytest.approx(0.0 if kept == 0 else 2 * HOUR, rel=0.5)
    assert found.low < found.value < found.high


def test_estimate_scales_with_lengths_and_not_with_time(plane):
    tracks = plane.tracks
    one = estimate_error(tracks, plane.pairs)
    far = estimate_error(replace(tracks, position=tracks.position * 7.0), plane.pairs)
    slow = estimate_error(replace(tracks, step=3 * tracks.step), plane.pairs)
    assert far.value == pytest.approx(7.0 * one.value, rel=1e-9)  # round-off
    assert slow.value == one.value


def test_estimate_does_not_depend_on_turning_or_moving(plane):
    angle, tracks = 0.7, plane.tracks
    turn = np.array([[np.cos(angle), -np.sin(angle), 0], [np.sin(angle), np.cos(angle), 0], [0, 0, 1]])
    turned = replace(tracks, position=tracks.position @ turn.T + np.array([5e4, -2e4, 0]))
    one, two = estimate_error(tracks, plane.pairs), estimate_error(turned, plane.pairs)
    assert two.value == pytest.approx(one.value, rel=1e-6)  # round-off of positions of 1e6 m


def test_motion_without_memory_is_not_taken_for_error(plane):
    """Brownian paths of the same shape: mean squared differences grow in proportion to the interval."""
    rng, tracks = np.random.default_rng(4), plane.tracks
    walk = np.cumsum(rng.standard_normal(tracks.position.shape) * 500.0, axis=0) * np.array([1.0, 1.0, 0.0])
    found = estimate_error(replace(tracks, position=walk), plane.pairs)
    assert found.memory == 0.0
    assert found.low < 0.2 * 500.0


def test_a_true_statement_is_not_flagged():
    found = position_error(clean())
    assert not found.flag
    assert not found.verdict_changes
    assert found.separations is None
    assert found.size == pytest.approx(10.0, rel=0.2)  # the recipe's error; a fifth is the flag's own margin
    assert "10 m is stated" in found.text
    assert "the verdict stands" in found.text


def test_an_understated_error_is_flagged_sized_and_placed(noisy):
    found = position_error(noisy)
    assert found.flag
    assert found.size == pytest.approx(TRUE, rel=0.05)
    assert found.separations[1] == pytest.approx(15 * found.size)
    assert "State a position error of" in found.text


def test_the_same_error_stated_is_not_flagged(noisy):
    found = position_error(stated(noisy, TRUE))
    assert not found.flag
    assert found.separations is None  # separations below 15 errors were left out before


@pytest.mark.parametrize("name", ["few pairs", "planar", "gaps", "short"])
def test_odd_surveys_get_a_finding(name):
    found = position_error(odd()[name])
    assert isinstance(found, Finding)
    assert found.threat == "position_error"
    assert not found.flag
    assert found.text.endswith(".")
    assert "nan" not in found.text


def test_broken_tracks_say_so():
    subject = clean()
    position = np.array(subject.tracks.position)
    position[np.random.default_rng(1).random(len(position)) < 0.85] = np.nan
    found = position_error(replace(subject, tracks=replace(subject.tracks, position=position)))
    assert np.isnan(found.size)
    assert not found.flag
    assert "too short or broken" in found.text
