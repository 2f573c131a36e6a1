"""The kernel of a spectrum that ends: limits, closure by quadrature, and slopes without the bend."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import j1

from regimes.errors import FitError
from regimes.inference.finite_range import finite_range_slope
from regimes.inference.slope import slope_over
from regimes.pipeline import Options
from regimes.pipeline.rates import exit_rates
from regimes.synthetic import Spectrum, fourier_tracks
from regimes.theory.finite_range import MEMORY, finite_range_kernel
from regimes.units import DAY, HOUR
from tests.worlds import in_parallel, kernel, lossy_pairs

KM = 1e3


def closure(alpha: float, outer: float, separation: float) -> float:
    """The closure of the docstring by adaptive quadrature, nothing shared with the table."""
    k0 = 2 * np.pi / outer

    def weight(x):  # in ln k
        k = np.exp(x)
        strain = np.log(k / k0) if alpha == 3 else (k ** (3 - alpha) - k0 ** (3 - alpha)) / (3 - alpha)
        return k ** (1 - alpha) / np.sqrt(strain + MEMORY * k0 ** (3 - alpha))

    def integrand(x):
        z = np.exp(x) * separation
        return weight(x) * (1 - 2 * j1(z) / z if z > 1e-3 else z * z / 8)

    far = np.log(60.0 / separation)  # beyond, 2 J1(z) / z is below 4e-3 and averages out
    ends = np.unique(np.clip(np.log(k0) + np.array([0.0, 0.2, 1.0, 3.0, 99.0]), None, max(far, np.log(k0))))
    inner = sum(quad(integrand, a, b, limit=800)[0] for a, b in pairwise(ends))
    return inner + quad(weight, max(far, np.log(k0)), max(far, np.log(k0)) + 30.0, limit=400)[0]


@pytest.mark.parametrize("alpha", [5 / 3, 2.0, 2.5, 3.0])
def test_kernel_is_the_closure(alpha):
    """Ratios of K between separations, against quadrature; 1 % is the error of five nodes per factor e."""
    outer, r = 200 * KM, np.array([2.0, 20.0, 100.0]) * KM
    found = finite_range_kernel(alpha, outer, 1e-5, (1 * KM, 100 * KM))(r)
    expected = np.array([closure(alpha, outer, x) for x in r])
    assert found[1:] / found[0] == pytest.approx(expected[1:] / expected[0], rel=0.01)


@pytest.mark.parametrize(("alpha", "exponent"), [(5 / 3, 4 / 3), (2.0, 1.5), (2.5, 1.75)])
def test_limits_of_the_exponent(alpha, exponent):
    """(alpha + 1) / 2 far inside (Bennett 1984), 0 far outside (Taylor 1921); 0.01: the outer scale still bends it."""
    found = finite_range_kernel(alpha, 1e4 * KM, 1e-5, (0.1 * KM, 10 * KM))
    assert found.exponent(0.1 * KM) == pytest.approx(exponent, abs=0.01)
    assert finite_range_kernel(alpha, 1 * KM, 1e-5, (0.1 * KM, 50 * KM)).exponent(50 * KM) == pytest.approx(0, abs=0.02)


def test_steep_spectra_are_exponential_inside():
    found = finite_range_kernel(4.0, 1e3 * KM, 1e-5, (0.1 * KM, 10 * KM))
    assert found.exponent(1 * KM) == pytest.approx(2.0, abs=0.02)


def test_what_cannot_be():
    with pytest.raises(FitError, match=r"got slope 0\.5; must be 1 to 4"):
        finite_range_kernel(0.5, 1e5, 1e-5, (1e3, 1e4))
    with pytest.raises(FitError, match="must be positive"):
        finite_range_kernel(2.0, -1e5, 1e-5, (1e3, 1e4))


def test_slope_of_a_power_law_without_end():
    """With 2000 pairs in a kernel world alpha comes back within 0.1, the outer scale is pushed far out."""
    tracks, pairs = lossy_pairs(kernel([4 / 3], [], 1.0), 2000, 30, 3)
    rates = exit_rates(tracks, pairs, Options())
    found = finite_range_slope(rates.likelihood, 2 * KM, 200 * KM, np.random.default_rng(1))
    assert found.slope.kind == "estimate"
    assert np.median(found.slope.draws) == pytest.approx(5 / 3, abs=0.1)
    assert np.median(found.outer_scale) > 1000 * KM


def one(arguments):
    """Whether the 95 % intervals of the two kernels hold alpha in one random-Fourier campaign."""
    alpha, speed, seed = arguments
    longest = 400 * KM
    world = Spectrum(np.array([alpha]), np.array([]), 300.0, longest, speed, 0.0, 1.0, 6)
    tracks, pairs = fourier_tracks(world, (20, 3), 400.0, HOUR, int(45 * DAY / HOUR), seed)
    rates = exit_rates(tracks, pairs, Options(limits=(longest / 400, longest / 8 * 1.001)))
    rng = np.random.default_rng(seed)
    ends = (rates.resolved.low, rates.resolved.high)
    both = (slope_over(rates.likelihood, *ends, rng), finite_range_slope(rates.likelihood, *ends, rng).slope)
    return [np.quantile(s.draws, (0.025, 0.5, 0.975)) if s.draws.size else np.full(3, np.nan) for s in both]


@pytest.mark.slow
@pytest.mark.parametrize(("alpha", "speed"), [(5 / 3, 0.25), (2.0, 0.27), (2.5, 0.30)])
def test_finite_range_slopes_hold_in_flows_with_memory(alpha, speed):
    """Bar: 95 % intervals of the finite-range kernel hold alpha in at least 88 % of 100 replicates."""
    found = np.array(in_parallel(one, [(alpha, speed, 500 + seed) for seed in range(100)]))
    text = []
    for i, name in enumerate(("one power law", "finite range")):
        quoted = found[~np.isnan(found[:, i, 1]), i]
        held = np.mean((quoted[:, 0] <= alpha) & (alpha <= quoted[:, 2]))
        text.append(f"{name}: held {held:.2f} of {len(quoted)}, mean error {np.mean(quoted[:, 1] - alpha):+.2f}")
    print(f"alpha {alpha:.2f}: " + "; ".join(text))
    assert held >= 0.88, text
