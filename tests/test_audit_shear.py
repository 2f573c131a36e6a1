"""Shear: laws of alignment and fitted shear, what the finding says, and whether it stops a false Richardson."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import ttest_1samp

from regimes.audit.anisotropy import alignment, fitted_shear, without_shear
from regimes.audit.shear import shear
from regimes.audit.subject import supported
from regimes.audit.vectors import Vectors, as_pairs, mean_is_zero, separation_vectors
from regimes.synthetic.shear_diffusion import ShearDiffusion, shear_diffusion_tracks
from regimes.units import DAY, HOUR
from tests.audit_small import clean, odd, scaled, small
from tests.audit_worlds import audited, recipe

RATE, TURN = 0.5 / DAY, 30.0


@pytest.fixture(scope="module")
def sheared():
    """Vectors of 20 releases of three in a known shear along 30 degrees."""
    return separation_vectors(*shear_diffusion_tracks(ShearDiffusion(1.0, RATE, TURN), (20, 3), 400.0, HOUR, 1500, 1))


def turned(vectors: Vectors, degrees: float) -> Vectors:
    angle = np.radians(degrees)
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    return replace(vectors, place=vectors.place @ turn)


def test_the_shear_is_found_and_its_removal_leaves_no_alignment(sheared):
    before = alignment(sheared, 1000.0, 1e5)
    rate, direction = fitted_shear(sheared, HOUR)
    after = alignment(without_shear(sheared, HOUR, rate, direction), 1000.0, 1e5)
    assert before.p_value < 1e-6
    assert rate == pytest.approx(RATE, rel=0.1)
    assert (direction - TURN + 90.0) % 180.0 - 90.0 == pytest.approx(0.0, abs=1.0)
    assert after.p_value > 0.01
    assert after.share < 0.5 * before.share


def test_removing_the_true_shear_leaves_what_diffusion_does(sheared):
    left = without_shear(sheared, HOUR, RATE, TURN)
    last = left.place[left.offset[1:] - 1]
    expected = 4.0 * 1.0 * 1499 * HOUR + 0.5 * 400.0**2  # <X^2> = X0^2 + 4 kappa t
    along = last @ [np.cos(np.radians(TURN)), np.sin(np.radians(TURN))]
    # 60 pairs of 20 triangles with two free separations each: 4 standard errors of a mean square of 40 normal numbers
    assert np.mean(along**2) == pytest.approx(expected, rel=4.0 * np.sqrt(2.0 / 40.0))


def test_a_turned_survey_has_its_axis_and_shear_turned(sheared):
    one, two = alignment(sheared, 1000.0, 1e5), alignment(turned(sheared, 40.0), 1000.0, 1e5)
    assert two.axis_deg == pytest.approx((one.axis_deg + 40.0) % 180.0, abs=1e-9)
    assert (two.share, two.p_value) == pytest.approx((one.share, one.p_value), rel=1e-6)  # round-off
    assert fitted_shear(turned(sheared, 40.0), HOUR)[1] == pytest.approx(
        fitted_shear(sheared, HOUR)[1] + 40.0, abs=0.11
    )


def test_members_swapped_and_lengths_scaled_change_nothing(sheared):
    other = replace(sheared, place=-3.0 * sheared.place)
    one, two = alignment(sheared, 1000.0, 1e5), alignment(other, 3000.0, 3e5)
    assert (two.share, two.p_value, two.axis_deg) == pytest.approx((one.share, one.p_value, one.axis_deg), rel=1e-6)
    assert fitted_shear(other, HOUR)[0] == pytest.approx(fitted_shear(sheared, HOUR)[0], rel=1e-9)  # round-off


def test_hotelling_agrees_with_student_for_one_score():

    scores = np.random.default_rng(2).standard_normal(15) + 0.4
    assert mean_is_zero(scores[:, None], np.ones(15)) == pytest.approx(ttest_1samp(scores, 0.0).pvalue, rel=1e-9)


def test_hotelling_holds_its_size():
    rng, n = np.random.default_rng(3), 2000
    p = np.array([mean_is_zero(rng.standard_normal((12, 2)), np.ones(12)) for _ in range(n)])
    assert abs(np.mean(p < 0.05) - 0.05) < 4.0 * np.sqrt(0.05 * 0.95 / n)


def test_two_clusters_have_no_p_value():
    assert np.isnan(mean_is_zero(np.ones((3, 2)), np.ones(3)))
    assert np.isnan(mean_is_zero(np.zeros((9, 2)), np.ones(9)))


def test_pairs_made_of_their_own_vectors_give_the_same_fit():
    subject = clean()
    vectors = separation_vectors(subject.tracks, subject.pairs)
    again = subject.refit(*as_pairs(subject.tracks, subject.pairs, vectors))
    # A member that is missing hides its pair, so gaps are the same; separations agree to round-off.
    assert again.rates.likelihood.exits == pytest.approx(subject.fit.rates.likelihood.exits, rel=1e-6)
    assert again.rates.likelihood.risk == pytest.approx(subject.fit.rates.likelihood.risk, rel=1e-6)


def test_a_clean_survey_is_not_flagged_and_units_do_not_matter():
    found = shear(clean())
    assert not found.flag
    assert not found.verdict_changes
    assert "The verdict stands" in found.text
    one = shear(odd()["planar"])
    two = shear(scaled(odd()["planar"], 2.0**5))  # a whole number of thresholds
    assert two.size == pytest.approx(one.size, rel=1e-6)


def test_shear_in_the_sea_is_flagged_and_named():
    found = shear(audited(small(5, shear={"rate_per_d": 1.0})))
    assert found.flag
    assert found.separations is not None
    assert 0.2 < found.size <= 1.0
    assert "With a shear of" in found.text
    assert "taken out" in found.text


@pytest.mark.parametrize("kind", ["few pairs", "planar", "gaps", "short"])
def test_odd_surveys_get_a_finding(kind):
    found = shear(odd()[kind])
    assert found.threat == "shear"
    assert found.text.endswith(".")
    assert "nan" not in found.text
    if kind == "few pairs":
        assert not found.flag
        assert "too few clusters" in found.text or "degrees" in found.text


def _world(seed: int, world: dict) -> dict:
    content = recipe(seed) | world
    del content["fourier"]
    content["releases"] = content["releases"] | {"number": 40}
    return content


def _calls(world: dict, n: int) -> tuple[int, int]:
    """Surveys in which Richardson is supported, and in which the row flags it all the same."""
    supports, flags = 0, 0
    for seed in range(1000, 1000 + n):
        subject = audited(_world(seed, world))
        if any(s.regime == "richardson" for s in supported(subject.fit)):
            supports += 1
            flags += shear(subject).flag
    return supports, flags


@pytest.mark.slow
@pytest.mark.calibration
def test_shear_and_diffusion_are_not_called_richardson():
    """Bar: supported and not flagged in at most 2 % of 100 surveys of 120 pairs, 8 to 400 times sqrt(K / S) apart."""
    supports, flags = _calls({"shear_diffusion": {"diffusivity_m2_s": 0.1, "rate_per_d": 1.0}}, 100)
    print(f"shear and diffusion: Richardson supported by the rule in {supports} of 100, flagged in {flags} of them")
    assert supports - flags <= 2


@pytest.mark.slow
@pytest.mark.calibration
def test_true_richardson_is_not_lost_to_shear():
    """Bar: at most 10 % of the supported ones are flagged."""
    world = {"kernel": {"regimes": ["richardson"], "rate_per_d": 0.5, "reference_km": 10.0}}
    supports, flags = _calls(world, 60)
    print(f"Richardson's law: supported by the rule in {supports} of 60, lost to shear in {flags} of them")
    assert supports >= 10
    assert flags <= 0.1 * supports
