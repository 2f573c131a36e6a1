"""Width of ranges: dispersion under known kernels, published values, and what the finding says."""

from dataclasses import replace

import numpy as np
import pytest

from regimes.audit.law import growth, law_holds, longest_factor, middle_slope
from regimes.audit.range import range_width
from regimes.audit.room import Room, rooms_of
from regimes.audit.subject import subject_of
from regimes.fitting import Options
from regimes.theory.kernel import Kernel
from tests.audit_triplets import ODD, odd, survey

ENDLESS = Kernel([4.0 / 3.0], [], 1e-6, 1e3)


def test_richardson_needs_a_nineteen_fold_growth_for_a_slope_of_two_and_a_half():
    """Exact cubic for a kernel b r^(4/3): slope 2.5 at rms 19.4 r0, 2.8 at 82 r0 (derived from the cubic)."""
    found = growth(ENDLESS, 1e3, 3e5)
    reached = [float(np.interp(value, found.power, found.rms)) / 1e3 for value in (2.5, 2.8)]
    tau = np.geomspace(0.1, 100.0, 4000)
    square = 1.0 + 20.0 / 3.0 * tau + 320.0 / 27.0 * tau**2 + 3840.0 / 729.0 * tau**3
    slope = np.gradient(np.log(square), np.log(tau))
    exact = [float(np.sqrt(np.interp(value, slope, square))) for value in (2.5, 2.8)]
    assert exact[0] == pytest.approx(19.4, abs=0.05)  # printed digits
    assert exact[1] == pytest.approx(82.0, abs=0.5)
    assert reached == pytest.approx(exact, rel=0.08)  # grid of 12 cells a factor e: first order in the start's width


def test_exponential_growth_is_at_eight_kappa():
    kernel = Kernel([2.0], [], 1e-6, 1e3)
    found = growth(kernel, 1e3, 1e5)
    held = law_holds(found, kernel, "exponential", (1e3, 1e5))
    assert longest_factor(found.rms, held) > 30.0
    assert np.median(found.rate) == pytest.approx(8e-6, rel=0.02)  # D2 ~ exp(8 kappa t); the grid's own error


def test_diffusion_is_linear_in_time():
    kernel = Kernel([0.0], [], 1e-6, 1e3)
    found = growth(kernel, 1e3, 1e5)
    late = found.rms > 1e4
    assert found.power[late] == pytest.approx(np.ones(late.sum()), abs=0.03)  # 1 - (r0 / rms)^2 and the grid


def test_units_do_not_matter():
    one = growth(ENDLESS, 1e3, 1e5)
    kernel = Kernel([4.0 / 3.0], [], 7e-6, 5e3)
    other = growth(kernel, 5e3, 5e5)
    assert other.rms / 5.0 == pytest.approx(one.rms, rel=1e-9)  # round-off
    assert other.power == pytest.approx(one.power, rel=1e-9)


def test_a_short_range_does_not_show_its_law():
    short = Kernel([4.0 / 3.0, 0.0], [1e4], 1e-6, 1e3)
    found = growth(short, 1e3, 1e5)
    assert not np.any(law_holds(found, short, "richardson", (1e3, 1e4)))
    wide = growth(ENDLESS, 1e3, 1e6)
    assert longest_factor(wide.rms, law_holds(wide, ENDLESS, "richardson", (1e3, 1e6))) > 30.0


def test_longest_factor_counts_unbroken_runs():
    rms = np.array([1.0, 2.0, 4.0, 8.0, 16.0])
    assert longest_factor(rms, np.array([True, True, False, True, True])) == 2.0
    assert longest_factor(rms, np.zeros(5, bool)) == 1.0
    assert longest_factor(rms, np.ones(5, bool)) == 16.0


@pytest.mark.parametrize(
    ("slope", "expected"),
    [(5.0 / 3.0, (1.68, 0.945, 0.774)), (2.0, (1.72, 1.156, 1.044)), (2.5, (1.78, 1.481, 1.466))],
)
def test_structure_functions_of_one_to_three_decades(slope, expected):
    """Local slope of S_LL in the middle of a band, by quadrature of its integral (derived; see LaCasce 2016)."""
    found = [middle_slope(slope, 1e3, 1e3 * 10.0**w) for w in (1, 2, 3)]
    assert found == pytest.approx(expected, abs=6e-3)  # half a unit of the printed digits, of two of them 0.005


def test_a_room_shows_its_law_over_a_factor_three():
    room = Room("richardson", 1e3, 1e5, 2.0, 3.0, 2.9)
    assert room.shows
    assert not replace(room, factor=2.9).shows


def test_rooms_end_at_transitions_and_at_the_resolved_range():
    kernel = Kernel([2.0, 4.0 / 3.0, 0.0], [1e4, 1e6], 1e-6, 1e3)
    found = rooms_of(kernel, ("exponential", "richardson", "diffusive"), (2e3, 5e5), 1e3)
    assert [(r.regime, r.low, r.high) for r in found] == [("exponential", 2e3, 1e4), ("richardson", 1e4, 5e5)]
    assert found[1].decades == pytest.approx(np.log10(50.0))


def test_an_endless_exponential_range_is_not_flagged():
    found = range_width(subject_of(*survey(1), Options()))
    assert not found.flag
    assert 0.5 <= found.size <= 1.0
    assert "pairs grow 19-fold" in found.text
    assert "Under the fitted kernel" in found.text


@pytest.mark.parametrize("name", list(ODD))
def test_odd_surveys_give_a_finding(name):
    found = range_width(odd(name))
    assert found.threat == "range"
    assert found.text.endswith(".")
    assert "nan" not in found.text
