"""Where relative dispersion under a kernel follows the law of a regime, from a given start."""

from dataclasses import dataclass

import numpy as np

from regimes.theory.fokker_planck import kernel_at, log_grid, moments, separation_masses
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.theory.structure_functions import make_transform

CLOSE = 1.0 / 6.0  # of the asymptote: Richardson's t^3 from t^2.5 to t^3.5
_CELLS = 12  # to a factor e
_TIMES = 120
_STEPS = 3
_BELOW, _ABOVE = 30.0, 300.0  # how far, as a factor, the grid reaches beyond start and end
_NEAR = 1.02  # factor either side of the middle, for a local slope
_LEAST = 0.1  # growth of the mean squared separation at the first time


@dataclass(frozen=True, slots=True)
class Growth:
    """Relative dispersion of a kernel from one start separation.

    Parameters
    ----------
    rms : (n,) float array [m]
        Root-mean-square separation.
    power : (n,) float array
        d ln D2 / d ln t.
    rate : (n,) float array [1/s]
        d ln D2 / dt.
    """

    rms: np.ndarray
    power: np.ndarray
    rate: np.ndarray


def growth(kernel: Kernel, start: float, end: float) -> Growth:
    r"""Local power and rate of relative dispersion by the Fokker-Planck equation.

    Parameters
    ----------
    kernel : Kernel
    start, end : float [m]
        Start separation, and the root-mean-square separation at which to stop.

    Returns
    -------
    Growth
        At times evenly spaced in ln t, up to the last with a root-mean-square separation below `end`.
    """
    low, high = start / _BELOW, max(end, 3.0 * start) * _ABOVE
    edges = log_grid(low, high, int(_CELLS * np.log(high / low)))
    log_k = kernel_at(edges, kernel.exponents, kernel.breaks, kernel.reference, kernel.rate)
    first = _LEAST * start**2 / (8.0 * float(kernel(start)))
    thresholds = np.geomspace(start, 10.0 * max(end, 3.0 * start), 40)
    last = first + 3.0 * float(np.sum(kernel.exit_times(thresholds)))
    times = np.geomspace(first, last, _TIMES)
    _, second, _ = moments(edges, separation_masses(edges, log_k, np.array([np.log(start)]), times, _STEPS))
    log_d2 = np.log(second[:, 0])
    keep = np.flatnonzero(0.5 * log_d2 <= np.log(end))
    power = np.gradient(log_d2, np.log(times))
    return Growth(np.exp(0.5 * log_d2[keep]), power[keep], (power / times)[keep])


def law_holds(found: Growth, kernel: Kernel, regime: str, piece: tuple[float, float]) -> np.ndarray:
    r"""Where dispersion is within `CLOSE` of the law of a regime.

    .. math:: D^2 \sim t^{2 / (2 - a)}, \quad a < 2; \qquad D^2 \sim e^{8 \kappa t}, \quad K = \kappa r^2

    Parameters
    ----------
    found : Growth
    kernel : Kernel
    regime : str
    piece : (float, float) [m]
        Separations over which the regime is claimed.

    Returns
    -------
    (n,) bool array
        False outside the piece.
    """
    low, high = piece
    inside = (found.rms >= low) & (found.rms <= high)
    exponent = REGIMES[regime].exponent
    middle = np.sqrt(low * high)
    if exponent == 2.0:
        return inside & (np.abs(found.rate / (8.0 * float(kernel(middle)) / middle**2) - 1.0) <= CLOSE)
    return inside & (np.abs(found.power * (2.0 - exponent) / 2.0 - 1.0) <= CLOSE)


def longest_factor(rms: np.ndarray, mask: np.ndarray) -> float:
    """Largest ratio of the ends of an unbroken run of separations; 1 without any."""
    edges = np.flatnonzero(np.diff(np.concatenate(([0], mask.astype(int), [0])))).reshape(-1, 2)
    return max((float(rms[b - 1] / rms[a]) for a, b in edges), default=1.0)


def middle_slope(spectral_slope: float, low: float, high: float) -> float:
    r"""Local power of S_LL at the geometric middle of a range, E ~ k^-alpha between 2 pi / high and 2 pi / low alone.

    .. math:: S_{LL}(r) = \int E(k) \left[ 2 - \frac{4 J_1(kr)}{kr} \right] dk

    Parameters
    ----------
    spectral_slope : float
        alpha.
    low, high : float [m]
        Shortest and longest wavelength.

    Returns
    -------
    float
        alpha - 1 in an endless range, 1 < alpha < 3.
    """
    middle = np.sqrt(low * high) / (2.0 * np.pi)
    r = middle * np.array([1.0 / _NEAR, _NEAR])
    transform = make_transform(r, 2.0 * np.pi / high, 2.0 * np.pi / low)
    along = np.log(transform.longitudinal(np.exp(-spectral_slope * transform.log_wavenumber)))
    return float(np.diff(along)[0] / (2.0 * np.log(_NEAR)))
