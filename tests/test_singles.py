"""The single-particle side of a run: what is held against what, and reasons in place of failures."""

import numpy as np
import pytest

from regimes.errors import CaseError
from regimes.particles import MeanFlow, single_particle
from regimes.pipeline import Options, SingleOptions, analyse_singles
from regimes.pipeline.origin import provenance
from regimes.pipeline.singles import cross_checks, single_side
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.units import DAY, KM
from regimes.verdict.record import Interval, TransitionScale

MOTION = Motion(0.04, 1.0 / (2 * DAY))
STEP = 6 * 3600.0


@pytest.fixture(scope="module")
def world():
    return drifting_particles(MOTION, (400, 2), STEP, 361, 4, start_separation=5 * KM)


@pytest.fixture(scope="module")
def single(world):
    return single_particle(world[0])


def transition(probability):
    return TransitionScale("richardson", "diffusive", Interval(60e3, 50e3, 72e3, 40e3, 90e3), probability)


def test_pairs_that_part_independently_agree_with_single_particles(world, single):
    (ratio,) = cross_checks(single, *world, (), None)
    assert ratio.expected == 1.0
    assert ratio.agrees
    assert ratio.high / ratio.low < 2.0


def test_few_pairs_are_not_held_against_single_particles():
    tracks, pairs = drifting_particles(MOTION, (10, 2), STEP, 361, 4)
    assert cross_checks(single_particle(tracks), tracks, pairs, (), None) == ()


def test_lengths_over_a_deformation_radius(world, single):
    tracks, _ = world
    found = cross_checks(single, tracks, None, (transition(0.9), transition(0.4)), 30 * KM)
    assert [r.name for r in found] == [
        "Lagrangian length over the deformation radius",
        "transition from richardson to diffusive over the deformation radius",
    ]
    assert found[0].value == pytest.approx(single.scale().length.value / 30e3)
    # 40 to 90 km is symmetric about 60 km in the logarithm: the interval of the ratio is that over 30 km
    assert (found[1].value, found[1].low, found[1].high) == pytest.approx((2.0, 4 / 3, 3.0))
    assert [r.value for r in cross_checks(None, tracks, None, (transition(0.9),), 30 * KM)] == [found[1].value]


def test_one_particle_has_no_interval_and_no_ratio():
    tracks, _ = drifting_particles(MOTION, (1, 1), STEP, 241, 4)
    found = analyse_singles(tracks, Options(single=SingleOptions(deformation_radius=30 * KM)))
    assert np.isnan(found.single.scale().length.low)
    assert found.ratios == ()


def test_velocities_that_are_too_few_are_a_reason():
    tracks, _ = drifting_particles(MOTION, (4, 1), STEP, 8, 4)
    found = analyse_singles(tracks, no_pair="nobody met")
    assert found.single is None
    assert found.single_missing.startswith("typical tracks have 6 velocities in a row")
    assert found.reasons == ("nobody met", found.single_missing)
    assert found.sentence.startswith("Undecided: no pair statistics exist, for want of a pair to compare. Nobody met.")
    assert found.single_missing in found.sentence
    assert (found.provenance.n_particles, found.provenance.n_pairs, found.provenance.kind) == (4, 0, "none")


def test_choices_and_seed_reach_the_record():
    few = drifting_particles(MOTION, (6, 1), STEP, 241, 4)[0]
    slow, _ = single_side(few, SingleOptions("lowpass", 5 * DAY), 7)
    assert slow.mean == "lowpass"
    assert slow.scale().time.low == single_particle(few, "lowpass", 5 * DAY, seed=7).scale().time.low
    assert slow.scale().time.low != single_particle(few, "lowpass", 5 * DAY, seed=8).scale().time.low
    flow = MeanFlow([-1e7, 1e7], [-1e7, 1e7], np.zeros((2, 2)), np.zeros((2, 2)), planar=few.planar)
    found, missing = single_side(few, SingleOptions("grid", flow=flow), 7)
    assert missing == ""
    assert found.velocity.value == pytest.approx(single_particle(few, "none").velocity.value)


def test_mean_flow_on_other_coordinates_is_a_mistake_of_the_caller():
    few = drifting_particles(MOTION, (6, 1), STEP, 241, 4)[0]
    flow = MeanFlow([0.0, 1.0], [0.0, 1.0], np.zeros((2, 2)), np.zeros((2, 2)), planar=not few.planar)
    with pytest.raises(CaseError, match="mean flow: got planar"):
        single_side(few, SingleOptions("grid", flow=flow), 7)


def test_provenance_counts_the_particles_of_pairs_only():
    tracks, pairs = drifting_particles(MOTION, (5, 2), STEP, 41, 4)
    one = pairs.select([0])
    assert provenance(tracks, one, 1).n_particles == 2
    assert provenance(tracks, None, 1).n_particles == 10
