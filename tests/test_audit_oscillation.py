"""Oscillations: fitted and taken away, found in rotary spectra, told in words."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.audit import Finding
from regimes.audit.band_stop import oscillating_part, without_oscillation
from regimes.audit.lines import TIDES, lines
from regimes.audit.oscillation import oscillation
from regimes.audit.rotary import inertial_frequency, windows
from regimes.audit.vectors import separation_vectors
from regimes.geodesy import to_cartesian
from regimes.units import DAY, HOUR
from tests.audit_small import clean, odd, on_plane, small
from tests.audit_worlds import audited

STEP, PERIOD = HOUR, 20.0 * HOUR
TIME = STEP * np.arange(600)
DAY_OF_STARS = 86164.1  # s, astronomy


@pytest.fixture(scope="module")
def waves():
    return audited(small(5, oscillation={"speed_m_s": 0.2, "wavelength_km": 10.0}))


def part(values) -> np.ndarray:
    return oscillating_part(np.atleast_2d(np.asarray(values).T).T, np.array([0]), STEP, PERIOD)


def test_an_oscillation_is_recovered_to_its_ends_and_beside_gaps():
    wave = np.cos(2 * np.pi * TIME / PERIOD + 0.4)
    values = wave + 3.0 - 2e-6 * TIME + 1e-11 * TIME**2
    values[200:230] = np.nan
    found = part(values)[:, 0]
    seen = np.isfinite(values)
    np.testing.assert_allclose(found[seen], wave[seen], atol=1e-8)  # round-off: the model is exact
    assert np.isnan(found[~seen]).all()


def test_parabolas_pass_and_far_periods_are_left():
    assert np.max(np.abs(part(5.0 + 1e-5 * TIME + 1e-10 * TIME**2))) < 1e-8
    for ratio in (0.25, 4.0):
        assert np.max(np.abs(part(np.cos(2 * np.pi * TIME / (PERIOD * ratio)))[100:-100])) < 0.05


def test_phases_stay_about_the_period():
    """Linear phase: what passes of a neighbouring period is in step with it."""
    for ratio in (0.85, 1.2):
        turn = 2 * np.pi * TIME / (PERIOD * ratio)
        found = part(np.cos(turn))[100:-100, 0]
        assert abs(found @ np.sin(turn[100:-100])) < 0.02 * abs(found @ np.cos(turn[100:-100]))


def test_series_do_not_see_one_another():
    rng = np.random.default_rng(1)
    one, two = rng.standard_normal((2, 300, 2))
    both = oscillating_part(np.concatenate([one, 1e3 * two]), np.array([0, 300]), STEP, PERIOD)
    np.testing.assert_allclose(both[:300], oscillating_part(one, np.array([0]), STEP, PERIOD), atol=1e-9)


def test_series_too_short_to_tell_are_left():
    assert np.all(part(np.arange(3.0)) == 0.0)


def test_inertial_frequency_is_twice_the_turn_of_the_earth_at_a_pole():
    tracks = replace(clean().tracks)
    position = np.broadcast_to(to_cartesian([10.0], [90.0]), tracks.position.shape)
    north = inertial_frequency(replace(tracks, position=position))
    assert north[0] == pytest.approx(-4 * np.pi / DAY_OF_STARS, rel=1e-6)
    half = inertial_frequency(replace(tracks, position=np.broadcast_to(to_cartesian([10.0], [-30.0]), position.shape)))
    assert half[0] == pytest.approx(2 * np.pi / DAY_OF_STARS, rel=1e-6)  # geodetic latitude, not geocentric


def test_power_is_where_motion_turns():
    subject = clean()
    found = windows(subject.tracks, subject.pairs, 8 * DAY)
    w = 2 * np.pi / PERIOD
    turning = replace(found, velocity=np.exp(1j * w * STEP * np.arange(found.velocity.shape[1]))[None].repeat(3, 0),
                      cluster=np.zeros(3, int), separation=np.ones(3), inertial=np.full(3, -w))  # fmt: skip
    assert np.all(turning.power(w) > 1e3 * turning.power(-w))


def test_swapped_members_and_turned_planes_change_nothing():
    subject = odd()["planar"]
    angle = 0.6
    turn = np.array([[np.cos(angle), -np.sin(angle), 0], [np.sin(angle), np.cos(angle), 0], [0, 0, 1]])
    turned = replace(subject.tracks, position=subject.tracks.position @ turn.T)
    swapped = replace(subject.pairs, first=subject.pairs.second, second=subject.pairs.first)
    one, two = lines(subject.tracks, subject.pairs), lines(turned, swapped)
    assert len(one) == len(two) > 0
    for a, b in zip(one, two, strict=True):
        assert b.excess == pytest.approx(a.excess, abs=1e-6)  # round-off of positions


def test_a_clean_survey_is_not_flagged():
    found = oscillation(clean())
    assert not found.flag
    assert not found.verdict_changes
    assert found.separations is None
    assert "no inertial or tidal line" in found.text
    assert "the verdict stands" in found.text


def test_inertial_waves_are_flagged_named_and_placed(waves):
    found = oscillation(waves)
    assert found.flag
    assert found.size > np.log(10.0)
    assert "inertial oscillations of 22." in found.text  # 22.9 h at the 31.5 degrees of the recipe
    assert found.separations[0] < 2.0 * waves.resolved[0]  # the lowest range with six releases
    strongest = max(lines(waves.tracks, waves.pairs), key=lambda line: line.excess)
    assert strongest.name == "inertial"
    assert strongest.high < 64e3  # waves of 10 km differ most within some wavelengths


def test_tracks_and_separations_lose_the_same():
    """Two routes: with no gaps in the tracks of a pair, the fit is linear, so that both leave the same separation."""
    content = small(5, records={"gap_probability": 0.0})
    subject = audited(on_plane(content))
    vectors = separation_vectors(subject.tracks, subject.pairs)
    part = oscillating_part(vectors.place, vectors.offset[:-1], HOUR, 23 * HOUR)
    tracks = without_oscillation(subject.tracks, 23 * HOUR)
    left = separation_vectors(tracks, subject.pairs).place
    expected = vectors.place - part + part[vectors.offset[:-1]][vectors.pair]
    np.testing.assert_allclose(left, expected, atol=1e-3)  # round-off of positions of 1e6 m


def test_waves_of_a_tide_are_told_as_a_tide():
    subject = audited(on_plane(small(5, oscillation={"speed_m_s": 0.2, "period_h": TIDES["M2"] / HOUR})))
    found = oscillation(subject)
    assert found.flag
    assert "near M2" in found.text
    assert "no latitude" in found.text


def test_a_tide_that_turns_like_inertial_motion_keeps_its_name():
    """At 31.5 degrees the inertial period is 22.9 h; the simulated wave turns anticyclonically every 12.4 h."""
    subject = audited(small(5, oscillation={"speed_m_s": 0.1, "period_h": TIDES["M2"] / HOUR}))
    found = lines(subject.tracks, subject.pairs)
    assert not any(line.clear for line in found if line.name == "inertial")
    assert max(found, key=lambda line: line.excess).name == "M2"


@pytest.mark.parametrize("name", ["few pairs", "planar", "gaps", "short"])
def test_odd_surveys_get_a_finding(name):
    found = oscillation(odd()[name])
    assert isinstance(found, Finding)
    assert found.threat == "oscillation"
    assert found.text.endswith(".")
    assert "nan" not in found.text


def test_short_records_say_so():
    subject = clean()
    short = replace(subject, pairs=replace(subject.pairs, length=np.minimum(subject.pairs.length, 100)))
    found = oscillation(short)
    assert not found.flag
    assert np.isnan(found.size)
    assert "too short" in found.text


def test_pairs_that_stand_still_do_not_stop_it():
    subject = clean()
    position = np.array(subject.tracks.position)
    a, b = subject.pairs.first[0], subject.pairs.second[0]
    one, two = (slice(*subject.tracks.offset[t : t + 2]) for t in (a, b))
    n = min(position[one].shape[0], position[two].shape[0])
    position[two.start : two.start + n] = position[one.start : one.start + n] + np.array([300.0, 0.0, 0.0])
    found = oscillation(replace(subject, tracks=replace(subject.tracks, position=position)))
    assert found.threat == "oscillation"
