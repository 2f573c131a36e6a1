"""Classical diffusion diagrams and facts of the trade: each with its source, to the digits that were printed."""

from datetime import UTC, datetime

import numpy as np
import pytest

from regimes.curves import dispersion_statistics, exit_statistics
from regimes.curves.credit import credited_exits
from regimes.curves.resolution import ladder, resolved_range
from regimes.fixes import Fixes
from regimes.pairs import find_pairs
from regimes.synthetic import recipe_from, simulate
from regimes.synthetic.releases import as_tracks_and_pairs
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import spectral_slope
from regimes.theory.self_similar import moment
from regimes.tracks import make_tracks
from regimes.units import DAY, HOUR
from tests.test_published import last_digit

CM = 0.01
FIRST = datetime(2031, 4, 1, tzinfo=UTC)

# Okubo (1971) Deep-Sea Res. 18, 789, both fits from memory: sigma_rc^2 = 0.0108 t^2.34 and Ka = 0.0103 l^1.15 in
# cm and s, with Ka = sigma_rc^2 / (4 t) and l = 3 sigma_rc.
GROWTH, SPREAD = 2.34, 0.0108
OKUBO = [  # time [s], sigma_rc [m], Ka = sigma^2 / 4t [m2/s], Ka from l^1.15 [m2/s]: derived from the fits
    (HOUR, "15.05", "0.01573", "0.01643"),
    (6 * HOUR, "122.5", "0.1736", "0.1831"),
    (DAY, "620", "1.1125", "1.1826"),
    (3 * DAY, "2242", "4.849", "5.186"),
    (7 * DAY, "6042", "15.09", "16.21"),
    (30 * DAY, "33.2e3", "106.1", "114.9"),
]


def okubo_kernel():
    """Coefficient [m^(2-a)/s] and exponent of the kernel whose patches grow as in Okubo's first fit.

    A patch of particles has sigma_rc^2 = 2 sx sy = half the mean square separation of its pairs.
    """
    exponent = 2.0 - 2.0 / GROWTH
    wanted = 2.0 * SPREAD * CM**2 * DAY**GROWTH
    unit = moment(2, DAY, 1.0, exponent)
    return (wanted / unit) ** (1.0 / GROWTH), exponent


@pytest.mark.parametrize(("time", "sigma", "apparent", "from_size"), OKUBO)
def test_dye_patches_of_okubo(time, sigma, apparent, from_size):
    coefficient, exponent = okubo_kernel()
    patch = 0.5 * moment(2, time, coefficient, exponent)
    assert np.sqrt(patch) == last_digit(sigma)
    assert patch / (4 * time) == last_digit(apparent)
    law = 0.0103 * (3.0 * np.sqrt(patch) / CM) ** 1.15 * CM**2
    assert law == last_digit(from_size)
    assert patch / (4 * time) == pytest.approx(law, rel=0.08)  # printed table: 4 to 8 % apart


# Ka at sizes l of 10 m to 100 km: derived from the second fit.
@pytest.mark.parametrize(
    ("size", "printed"), [(10, "0.00290"), (100, "0.0410"), (1e3, "0.579"), (1e4, "8.18"), (1e5, "115.6")]
)
def test_okubo_by_size(size, printed):
    """The power law of the second fit as a kernel: its values at all sizes follow from the one at 10 km."""
    kernel = Kernel([1.15], [], 2.055e-4 * 1e4**1.15 / 1e8, 1e4)
    assert kernel(size) == last_digit(printed)


def test_slopes_that_go_with_okubo():
    """a = 1.15: alpha 1.3, exponent slope -0.85, D2 ~ t^2.35; Bennett (1984)."""
    assert spectral_slope(1.15) == pytest.approx(1.3, rel=1e-12)
    times = Kernel([1.15], [], 1e-5, 1e3).exit_times([1e3, 2e3, 4e3])
    assert np.log2(times[0] / times[1]) == pytest.approx(-0.85, rel=1e-10)
    grown = np.log(moment(2, 10.0, 1.0, 1.15) / moment(2, 1.0, 1.0, 1.15)) / np.log(10.0)
    assert grown == last_digit("2.35")


def test_richardson_in_si_units():
    """K = 0.6 l^(4/3) in cm and s (Richardson 1926, as quoted by Grossmann 1990 Ann. Phys.): 278 m2/s at 1 km."""
    coefficient = 0.6 * CM ** (2 / 3)
    assert coefficient == last_digit("0.02785")
    si = Kernel([4 / 3], [], coefficient * 1e3 ** (-2 / 3), 1e3)
    assert si(1e3) == last_digit("278")
    cgs = Kernel([4 / 3], [], 0.6, 1.0)
    assert cgs(1e5) * CM**2 == pytest.approx(si(1e3), rel=1e-12)
    assert cgs.exit_times([1e5, 2e5]) == pytest.approx(si.exit_times([1e3, 2e3]), rel=1e-12)


def test_uncorrelated_pairs_diffuse_twice_as_fast_as_one_particle():
    """D2 = r0^2 + 8 kappa t in two dimensions (common practice, no source), kappa of one particle and component."""
    rng = np.random.default_rng(5)
    kappa, step, n_pair, n_time = 35.0, HOUR, 4000, 25
    walk = np.sqrt(2.0 * kappa * step) * rng.standard_normal((n_pair, 2, n_time, 2))
    walk[:, :, 0] = 0.0
    position = np.zeros((n_pair, 2, n_time, 3))
    position[..., :2] = np.cumsum(walk, axis=2)
    position[:, 1, :, 0] += 200.0
    tracks, pairs = as_tracks_and_pairs(position, step, rng, 0.0)
    found = dispersion_statistics(tracks, pairs, step * np.array([0.0, 6.0, 24.0])).relative_dispersion()
    grown = 8.0 * kappa * found.axis
    # Each component is normal with variance v = grown / 2 about (200 m, 0): Var r^2 = 4 v^2 + 4 v 200^2.
    error = np.sqrt((grown**2 + 2.0 * grown * 200.0**2) / n_pair)
    assert np.all(np.abs(found.value - 200.0**2 - grown) <= 4.5 * error + 1e-6)
    assert np.all(error[1:] < 0.05 * grown[1:])  # a factor of two off would be seen


def irregular(fixes: Fixes, mean_interval: float, every: float, seed: int) -> Fixes:
    """Fixes thinned to intervals of a quarter to seven quarters of the mean, in units of `every`."""
    rng = np.random.default_rng(seed)
    mean = mean_interval / every
    start = np.flatnonzero(np.diff(fixes.particle, prepend=-1))
    keep = np.zeros(fixes.time.size, bool)
    for first, last in zip(start, np.append(start[1:], fixes.time.size), strict=True):
        hops = rng.integers(max(1, int(mean / 4)), int(7 * mean / 4) + 1, size=last - first)
        index = first + np.concatenate(([0], np.cumsum(hops)))
        keep[index[index < last]] = True
    return Fixes(
        particle=fixes.particle[keep],
        labels=fixes.labels,
        time=fixes.time[keep],
        position=fixes.position[keep],
        planar=fixes.planar,
        release=fixes.release,
        release_labels=fixes.release_labels,
        position_error=fixes.position_error,
    )


def test_close_releases_followed_hourly_resolve_from_about_a_kilometre_and_a_half():
    """Released within 700 m, fixes every 1.2 h on average: resolved from about 1.5 km (common practice, no source)."""
    recipe = recipe_from(
        {
            "name": "close releases",
            "seed": 4,
            "kernel": {"exponents": [2.0, 4 / 3], "transitions_km": [8.0], "rate_per_d": 0.6, "reference_km": 1.0},
            "releases": {"number": 25, "particles": 3, "start_separation_km": 0.65, "first": FIRST},
            "records": {"duration_d": 25.0, "fix_interval_h": 0.3, "position_error_m": 10.0},
            "place": {"longitude": -12.0, "latitude": 41.0},
        }
    )
    fixes = irregular(simulate(recipe), 1.2 * HOUR, 0.3 * HOUR, 6)
    gaps = np.diff(fixes.time)[np.diff(fixes.particle) == 0]
    assert np.mean(gaps) == pytest.approx(1.2 * HOUR, rel=0.02)
    tracks = make_tracks(fixes, step=HOUR)
    pairs = find_pairs(tracks, "launched", 700.0)
    assert pairs.n_pair > 60
    statistics = exit_statistics(tracks, pairs, ladder(None, np.sqrt(2.0), 200.0, 100e3))
    resolved = resolved_range(statistics, credited_exits(statistics), pairs.start_separation, tracks.position_error)
    assert 1e3 <= resolved.low <= 2e3
    assert resolved.limited_by[0] == "start separation"
