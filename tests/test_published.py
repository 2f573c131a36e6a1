"""Laws and numbers from outside: each with its source, to the digits that were printed.

"Derived" means: from the equation named, by quadrature, simulation or algebra done independently of this code.
The source of the laws of a power-law kernel is the Fokker-Planck equation of Richardson (1926) Proc. R. Soc. A 110,
709, with the solutions of Bennett (1984) J. Atmos. Sci. 41, 1881, and LaCasce (2010) J. Mar. Res. 68, 433.
"""

import numpy as np
import pytest
from scipy.optimize import brentq

from regimes.theory.exit_times import mean_exit_times
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES, kernel_exponent, spectral_slope
from regimes.theory.self_similar import cumulative, exponential_moment, kurtosis, moment

RICHARDSON = 4.0 / 3.0


def last_digit(printed: str):
    """The printed number, give or take half a unit in its last digit."""
    mantissa, _, power = printed.partition("e")
    places = len(mantissa.partition(".")[2])
    half = 0.5 * 10.0 ** (int(power or 0) - places)
    return pytest.approx(float(printed), rel=1e-12, abs=half * (1 + 1e-9))


def exponent_at(exponent, ratio, delta=1.0):
    """lambda of K = r^a (unit coefficient) from delta to ratio delta."""
    kernel = Kernel([exponent], [], 1.0, 1.0)
    return float(np.log(ratio) / kernel.exit_times([delta, ratio * delta])[0])


# moments of the self-similar solution


@pytest.mark.parametrize(
    ("dimension", "a", "second", "fourth_over_second"),
    [
        (1, RICHARDSON, "1.152263", "12.25714"),  # derived
        (2, RICHARDSON, "5.267490", "5.6"),  # 5.2675 and 5.6: LaCasce (2010), from memory
        (3, RICHARDSON, "14.123457", "3.764569"),  # 1144/81, the textbook value, from memory
        (2, 0.0, "4", "2"),  # Rayleigh distribution: textbook
        (1, 0.0, "2", "3"),  # normal distribution: textbook
        (3, 0.0, "6", "1.6667"),  # Maxwell distribution: textbook
    ],
)
def test_moments_from_a_point(dimension, a, second, fourth_over_second):
    assert moment(2, 1.0, 1.0, a, 0.0, dimension) == last_digit(second)
    assert kurtosis(a, dimension) == last_digit(fourth_over_second)
    ratio = moment(4, 1.0, 1.0, a, 0.0, dimension) / moment(2, 1.0, 1.0, a, 0.0, dimension) ** 2
    assert ratio == last_digit(fourth_over_second)


def test_textbook_fraction_in_three_dimensions():
    assert moment(2, 1.0, 1.0, RICHARDSON, 0.0, 3) == pytest.approx(1144 / 81, rel=1e-12)


# Derived; exponents from Bennett (1984) and Babiano et al. (1990) J. Fluid Mech. 214, 535.
@pytest.mark.parametrize(
    ("alpha", "a", "n", "coefficient", "kurt", "mean_square", "slope"),
    [
        (1, 1, 2, "6", "3.33333", "0.66667", -1),
        (4 / 3, 7 / 6, 2.4, "5.98538", "4.10030", "0.62354", -5 / 6),
        (5 / 3, 4 / 3, 3, "5.26749", "5.6", "0.56374", -2 / 3),
        (2, 3 / 2, 4, "3.28125", "9.42857", "0.47619", -1 / 2),
        (7 / 3, 5 / 3, 6, "0.625921", "26.7879", "0.33939", -1 / 3),
        (5 / 2, 7 / 4, 8, "0.0604101", "76.1949", "0.24176", -1 / 4),
        (2.8, 1.9, 20, "1.67684e-11", "40546", "0.03151", -0.1),
    ],
)
def test_family_by_spectral_slope(alpha, a, n, coefficient, kurt, mean_square, slope):
    assert kernel_exponent(alpha) == pytest.approx(a, rel=1e-12)
    assert spectral_slope(a) == pytest.approx(alpha, rel=1e-12)
    second = moment(2, 1.0, 1.0, a)
    assert second == last_digit(coefficient)
    assert kurtosis(a) == last_digit(kurt)
    assert moment(1, 1.0, 1.0, a) ** 2 / second == last_digit(mean_square)
    grown = np.log(moment(2, 10.0, 1.0, a) / second) / np.log(10.0)
    assert grown == pytest.approx(n, rel=1e-10)
    assert np.log2(exponent_at(a, 1.2, 2.0) / exponent_at(a, 1.2, 1.0)) == pytest.approx(slope, rel=1e-9)


@pytest.mark.parametrize(("alpha", "a"), [(3, 2), (3.7, 2), (5, 2), (1, 1), (0.2, 1)])
def test_the_kernel_saturates(alpha, a):
    """Beyond slopes 1 and 3 separations cannot tell: Bennett (1984)."""
    assert kernel_exponent(alpha) == a


def test_medians():
    """Median over rms separation 0.56452 for Richardson, 0.83255 for Rayleigh; derived from the distribution."""
    for a, coefficient, ratio in ((RICHARDSON, "1.29564", "0.56452"), (0.0, None, "0.83255")):
        median = brentq(lambda r, a=a: cumulative(r, 1.0, 1.0, a) - 0.5, 1e-6, 100.0, xtol=1e-14)
        if coefficient:
            assert median == last_digit(coefficient)
        assert median / np.sqrt(moment(2, 1.0, 1.0, a)) == last_digit(ratio)


# finite start


def test_exact_cubic_from_a_finite_start():
    """D2 under the 4/3 law is a cubic in time with these four coefficients: derived."""
    beta, start = 0.37, 2.3
    for t in (0.1, 1.0, 7.0):
        x = beta * t
        terms = (start**2, 20 / 3 * x * start ** (4 / 3), 320 / 27 * x**2 * start ** (2 / 3), 3840 / 729 * x**3)
        assert moment(2, t, beta, RICHARDSON, start) == pytest.approx(sum(terms), rel=1e-12)


@pytest.mark.parametrize(
    ("a", "second", "fourth"),
    [(4 / 3, "14.5692402936", "729.091502616"), (3 / 2, "20.6119512042", "1869.15884225"), (0.0, "4.21", "32.5921")],
)
def test_moments_from_a_finite_start(a, second, fourth):
    """A = 0.7, t = 0.9, r0 = 1.3: quadrature of the Bessel density to 12 digits."""
    assert moment(2, 0.9, 0.7, a, 1.3) == last_digit(second)
    assert moment(4, 0.9, 0.7, a, 1.3) == last_digit(fourth)


# tau, D2 / r0^2, d ln D2 / d ln t, kurtosis: derived from the exact moments.
SLOW = [
    (0.1, "1.7905", "0.514", "1.712"),
    (0.3, "4.2089", "1.083", "2.712"),
    (1, "24.786", "1.863", "4.258"),
    (3, "269.89", "2.445", "5.221"),
    (10, "6520.3", "2.797", "5.545"),
    (30, "1.531e5", "2.928", "5.593"),
    (100, "5.387e6", "2.978", "5.599"),
]


def local_slope(tau):
    h = 1e-4
    up, down = (moment(2, tau * np.exp(s), 1.0, RICHARDSON, 1.0) for s in (h, -h))
    return np.log(up / down) / (2 * h)


@pytest.mark.parametrize(("tau", "square", "slope", "kurt"), SLOW)
def test_the_asymptote_is_reached_slowly(tau, square, slope, kurt):
    second = moment(2, tau, 1.0, RICHARDSON, 1.0)
    assert second == last_digit(square)
    assert local_slope(tau) == last_digit(slope)
    assert moment(4, tau, 1.0, RICHARDSON, 1.0) / second**2 == last_digit(kurt)


@pytest.mark.parametrize(("slope", "rms"), [(2.0, "6.2"), (2.5, "19.4"), (2.8, "82"), (2.9, "239"), (2.95, "684")])
def test_separation_at_which_a_cubic_growth_shows(slope, rms):
    """Two decades of separation before t^3 is seen, even in a perfect 4/3 law: derived."""
    tau = brentq(lambda x: local_slope(x) - slope, 0.1, 1e4)
    assert np.sqrt(moment(2, tau, 1.0, RICHARDSON, 1.0)) == last_digit(rms)


# exponential regime


def test_exponential_growth():
    """D2 = r0^2 exp(8 t/T), mean r exp(3 t/T), <r4> exp(24 t/T): Lundgren (1981) J. Fluid Mech. 111, 27."""
    for order, growth in ((2, 8.0), (1, 3.0), (4, 24.0)):
        assert exponential_moment(order, 0.7, 0.5, 1.3) == pytest.approx(1.3**order * np.exp(growth * 0.35), rel=1e-12)


@pytest.mark.parametrize(("e_fold", "low"), [(0.5, "0.5"), (2.5, "0.10"), (6.0, "0.042"), (1.35, "0.185")])
def test_exponent_of_published_e_folding_times(e_fold, low):
    """Te of D2 in days is T / 8, and lambda = 2 / T = 1 / (4 Te) per day: derived from Lundgren (1981)."""
    rate = 1.0 / (8.0 * e_fold)
    assert exponential_moment(2, e_fold, rate, 1.0) == pytest.approx(np.e, rel=1e-12)
    times = Kernel([2.0], [], rate, 1.0).exit_times([1.0, 1.4])
    assert np.log(1.4) / times[0] == last_digit(low)


# exit times: derived; method Artale et al. (1997) Phys. Fluids 9, 3162, and Boffetta & Sokolov (2002) Phys. Rev. Lett.
# 88, 094501. Digits by quadrature of r / (2 K).
RATIOS = (1.1, 1.2, np.sqrt(2.0), 1.5, 2.0, 1 + 1e-8)
EXITS = {
    RICHARDSON: ("1.93713", "1.88091", "1.77784", "1.74185", "1.57336", "2.00000"),
    1.5: ("1.95272", "1.91022", "1.83172", "1.80411", "1.67341", "2.00000"),
    1.0: ("1.90620", "1.82322", "1.67341", "1.62186", "1.38629", "2.00000"),
    0.0: ("1.81543", "1.65747", "1.38629", "1.29749", "0.92420", "2.00000"),
    2.0: ("2.00000",) * 6,
}


@pytest.mark.parametrize(("a", "column"), [(a, k) for a in EXITS for k in range(6)])
def test_exponent_from_exit_times(a, column):
    assert exponent_at(a, RATIOS[column]) == last_digit(EXITS[a][column])


@pytest.mark.parametrize(("a", "percent"), [(RICHARDSON, "16"), (0.0, "44"), (2.0, "0")])
def test_the_ratio_of_thresholds_changes_the_level(a, percent):
    """From ratio 1.2 to 2: derived, the same table."""
    assert 100 * (1 - exponent_at(a, 2.0) / exponent_at(a, 1.2)) == last_digit(percent)


# Common practice, no source.
@pytest.mark.parametrize(
    ("regime", "slope"), [("exponential", 0.0), ("richardson", -2 / 3), ("ballistic", -1.0), ("diffusive", -2.0)]
)
def test_slope_of_the_exponent_in_each_regime(regime, slope):
    thresholds = 1e3 * 2.0 ** (np.arange(12) / 2)
    times = mean_exit_times(thresholds, np.array([REGIMES[regime].exponent]), np.empty(0), 5e3)
    fitted = np.diff(np.log(1.0 / times)) / np.diff(np.log(thresholds[:-1]))
    assert fitted == pytest.approx(np.full(10, slope), abs=1e-12)


# Richardson's constant, D2 = g eps t^3 in two dimensions: derived; g of Boffetta & Sokolov (2002) Phys. Rev. Lett. 88,
# 094501 (0.5 to 0.55), and Phys. Fluids 14, 3224 (3.8, from memory).
@pytest.mark.parametrize(("g", "beta"), [(0.5, "0.456"), (0.55, "0.471"), (3.8, "0.897"), (5.27, "1.000")])
def test_richardson_constant(g, beta):
    epsilon, t = 2.1e-7, 3.0e5
    found = brentq(lambda b: moment(2, t, b * epsilon ** (1 / 3), RICHARDSON) - g * epsilon * t**3, 0.01, 10.0)
    assert found == last_digit(beta)
