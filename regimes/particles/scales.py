"""Integral time of a velocity three ways, and whether its running integral levels off."""

from dataclasses import dataclass

import numpy as np

from regimes.arrays import frozen_array
from regimes.particles.correlation import running_integral
from regimes.particles.cosine import decaying_cosine
from regimes.particles.estimate import Estimate, estimate

METHODS = ("long_window", "first_zero", "decaying_cosine")
# A running integral levels off if it changes by less than this share over the second half of the window ...
LEVEL = 0.1
# ... and if that change is known to this share or better.
PRECISION = 0.5


@dataclass(frozen=True, slots=True)
class Scale:
    """Integral time and length by one method.

    Parameters
    ----------
    method : str
        One of `METHODS`.
    time : Estimate [s]
        Of both components together: integral of R_uu + R_vv over its value at lag zero.
    east_time, north_time : Estimate [s]
        Of each component.
    length : Estimate [m]
        u' times `time`, u' being the root mean square of one component.
    """

    method: str
    time: Estimate
    east_time: Estimate
    north_time: Estimate
    length: Estimate


@dataclass(frozen=True, slots=True)
class Levelling:
    r"""Whether the running integral of the correlation is flat over the second half of the window.

    Parameters
    ----------
    change : Estimate
        :math:`[I(W) - I(W/2)] / I(W/2)`.
    converges : bool
        The interval of `change` reaches within `LEVEL` of zero, and half its width is at most `PRECISION`.
    reason : str
        Why not; empty when it converges.
    """

    change: Estimate
    converges: bool
    reason: str


@dataclass(frozen=True, slots=True)
class Correlation:
    """Velocity autocorrelation, for the picture.

    Parameters
    ----------
    lag : (n_lag,) float array [s]
    east, north, both : (n_lag,) float arrays
        R_uu, R_vv and R_uu + R_vv, each over its value at lag zero.
    low, high : (n_lag,) float arrays
        95 % band of `both`; NaN where the units are fewer than two.
    integral, integral_low, integral_high : (n_lag,) float arrays [s]
        Running integral of `both` with its band.
    """

    lag: np.ndarray
    east: np.ndarray
    north: np.ndarray
    both: np.ndarray
    low: np.ndarray
    high: np.ndarray
    integral: np.ndarray
    integral_low: np.ndarray
    integral_high: np.ndarray

    def __post_init__(self) -> None:
        for name in self.__slots__:
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.float64))


def integral_times(correlation: np.ndarray, step: float, method: str) -> np.ndarray:
    r"""Integral time of each correlation function.

    - long_window: the running integral, averaged over the second half of the window to calm its noise;
    - first_zero: the integral up to the first crossing of zero (to the end of the window where there is none);
      too long where the correlation goes on below zero;
    - decaying_cosine: :math:`\gamma / (\gamma^2 + \omega^2)` of the least-squares
      :math:`e^{-\gamma s} \cos \omega s`, the integral of that function to infinity.

    Parameters
    ----------
    correlation : (n, n_lag) float array
        One at lag zero.
    step : float [s]
    method : str
        One of `METHODS`.

    Returns
    -------
    (n,) float array [s]
        NaN where a correlation has NaN.

    References
    ----------
    Taylor 1921, Proc. London Math. Soc. 20, 196; Garraffo, Mariano, Griffa, Veneziani & Chassignet 2001,
    J. Mar. Syst. 29, 195, for the cosine (from memory).
    """
    out = np.full(len(correlation), np.nan)
    fine = np.isfinite(correlation).all(axis=1)
    if fine.any():
        out[fine] = _METHODS[method](correlation[fine], step)
    return out


def levelling(correlation: np.ndarray, step: float, n_unit: int) -> Levelling:
    """Judge whether running integrals, the data's first and then those of resamples, level off."""
    integral = running_integral(correlation, step)
    end, middle = integral[:, -1], integral[:, integral.shape[1] // 2]
    change = estimate((end - middle) / np.where(middle != 0.0, middle, np.nan), n_unit)
    low, high = change.low, change.high
    if not np.isfinite(low):
        low = high = change.value
    reason = ""
    if not np.isfinite(change.value) or middle[0] <= 0.0:
        reason = "the running integral is not positive at the middle of the window"
    elif low > LEVEL or high < -LEVEL:
        reason = f"over the second half of the window the running integral changes by {change.value:+.0%}"
    elif 0.5 * (high - low) > PRECISION:
        reason = f"whether it levels off is known to +-{0.5 * (high - low):.0%} only"
    return Levelling(change, not reason, reason)


def correlation_curves(lag: np.ndarray, covariance: np.ndarray) -> Correlation:
    """Autocorrelation and running integral with their bands, from covariances as of `LagCurves`."""
    both = covariance[..., 0] + covariance[..., 1]
    rho = both / both[:, :1]
    integral = running_integral(rho, float(lag[1]))
    bands = [np.full(lag.size, np.nan)] * 4
    if len(rho) > 1:
        bands = [q for curve in (rho, integral) for q in np.quantile(curve[1:], (0.025, 0.975), axis=0)]
    east, north = (covariance[0, :, i] / covariance[0, 0, i] for i in (0, 1))
    return Correlation(lag, east, north, rho[0], *bands[:2], integral[0], *bands[2:])


def _long_window(correlation: np.ndarray, step: float) -> np.ndarray:
    integral = running_integral(correlation, step)
    return integral[:, integral.shape[1] // 2 :].mean(axis=1)


def _first_zero(correlation: np.ndarray, step: float) -> np.ndarray:
    integral = running_integral(correlation, step)
    negative = correlation <= 0.0
    after = np.where(negative.any(axis=1), np.argmax(negative, axis=1), correlation.shape[1] - 1)
    before = np.maximum(after - 1, 0)
    rows = np.arange(len(correlation))
    a, b = correlation[rows, before], correlation[rows, after]
    crossed = b <= 0.0
    triangle = 0.5 * step * a * a / np.where(crossed, a - b, 1.0)
    return np.where(crossed, integral[rows, before] + triangle, integral[rows, after])


def _cosine_time(correlation: np.ndarray, step: float) -> np.ndarray:
    gamma, omega = decaying_cosine(correlation, step)
    return gamma / (gamma**2 + omega**2)


_METHODS = dict(zip(METHODS, (_long_window, _first_zero, _cosine_time), strict=True))
