"""Whether the relative diffusivity levels off, on worlds of known law."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.curves.plateau import late_plateau
from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.synthetic.particles import Motion, drifting_particles
from regimes.theory.kernel import Kernel
from regimes.units import DAY, KM


def test_independent_particles_level_off_at_twice_their_diffusivity():
    # K = 2 kappa for pairs of independent particles (theory of diffusion)
    motion = Motion(0.04, 1.0 / (2 * DAY))
    found = late_plateau(*drifting_particles(motion, (400, 2), 6 * 3600.0, 481, 4, start_separation=5 * KM))
    assert found.reason == ""
    assert abs(found.value - 2 * motion.diffusivity) < 4 * found.error
    assert abs(found.change) < 2 * found.half_width


@pytest.mark.parametrize(("exponent", "change"), [(1.0, 1 / 2), (4 / 3, 12 / 13)])
def test_kernels_that_grow_do_not_level_off(exponent, change):
    # <r^2> ~ t^2 for a linear kernel and t^3 for Richardson's: growth over the second and the last third of the
    # record is (4 - 1) : (9 - 4) and (8 - 1) : (27 - 8)
    tracks, pairs = kernel_pairs(Kernel([exponent], [], 0.12 / DAY, 20 * KM), 400, 600.0, 7200.0, 600, seed=3)
    found = late_plateau(tracks, pairs)
    assert abs(found.change - change) < 4 / 1.96 * found.half_width
    assert found.reason.startswith("the relative diffusivity still changes by +")


def test_pairs_that_hardly_part_have_no_plateau():
    tracks, pairs = kernel_pairs(Kernel([2.0], [], 0.12 / DAY, 20 * KM), 100, 600.0, 7200.0, 20, seed=3)
    found = late_plateau(tracks, pairs)
    assert found.growth < 10.0
    assert found.reason == f"the mean square separation grows by a factor of {found.growth:.2g} only"


def test_few_pairs_cannot_tell_and_short_records_say_nothing():
    motion = Motion(0.04, 1.0 / (2 * DAY))
    few = late_plateau(*drifting_particles(motion, (12, 2), 6 * 3600.0, 241, 4))
    assert "whether the relative diffusivity levels off is known to +-" in few.reason
    short = late_plateau(*drifting_particles(motion, (12, 2), 6 * 3600.0, 3, 4))
    assert short.reason == "records of pairs are shorter than three steps"
    one = late_plateau(*drifting_particles(motion, (1, 2), 6 * 3600.0, 241, 4))
    assert "is not known" in one.reason


def test_lengths_and_times_scale():
    tracks, pairs = kernel_pairs(Kernel([0.0], [], 0.12 / DAY, 20 * KM), 30, 600.0, 7200.0, 120, seed=3)
    twice = replace(tracks, position=2.0 * tracks.position, step=3.0 * tracks.step)
    again = replace(pairs, start_separation=2.0 * pairs.start_separation)
    one, two = late_plateau(tracks, pairs), late_plateau(twice, again)
    assert two.value == pytest.approx(4 / 3 * one.value, rel=1e-9)  # round-off
    assert two.change == pytest.approx(one.change, rel=1e-9)  # round-off
    assert np.isclose(two.half_width, one.half_width, rtol=1e-9)  # round-off
