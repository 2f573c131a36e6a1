"""alpha over a range where the spectrum may or may not end: both kernels, weighed by evidence."""

from dataclasses import dataclass

import numpy as np

from regimes.inference.finite_range import FARTHEST, NEAREST, finite_range
from regimes.inference.slope import TOO_FEW, RangeSlope, another_shape, inside_range, judged, no_slope, power_law
from regimes.likelihood.exit_rate import ExitRateLikelihood

_TAIL = 0.025
_END = np.log(2.0)  # width in ln scale of what counts as the ends of the prior of the outer scale


@dataclass(frozen=True, slots=True)
class EitherSlope:
    """alpha over one range, and where the spectrum ends if it does.

    Parameters
    ----------
    slope : RangeSlope
    outer_scale : (3,) float array [m]
        Median and 95 % ends of the longest wavelength, given that the spectrum ends. NaN where undetermined; with one
        end NaN the other is a one-sided 95 % bound, and there is no median.
    log_power_law, log_finite_range : float
        ln evidence of the two kernels; NaN where too few intervals lie inside.
    """

    slope: RangeSlope
    outer_scale: np.ndarray
    log_power_law: float
    log_finite_range: float

    @property
    def log_bayes_factor_end(self) -> float:
        """ln Bayes factor of a spectrum that ends over one that does not."""
        return self.log_finite_range - self.log_power_law


def slope_of_either(likelihood: ExitRateLikelihood, low: float, high: float, rng, size: int = 8000) -> EitherSlope:
    """alpha from the exit rates inside a range, averaged over a power law and the kernel of a spectrum that ends.

    Parameters
    ----------
    likelihood : ExitRateLikelihood
        All resolved intervals; those inside the range are used.
    low, high : float [m]
    rng : numpy Generator
    size : int
        Number of draws.

    Returns
    -------
    EitherSlope
        Kind "none" when fewer than three intervals lie inside, when the range is diffusive or the exponent changes
        in a way that neither kernel has (Bayes factor over 3), or when every slope from 1 to 3 is possible.

    Notes
    -----
    Equal probability beforehand, the same priors of alpha (uniform, 0 to 4) and rate. In random-Fourier flows (20
    releases of three, separations 1/400 to 1/8 of the longest wave, 100 replicates each) the 95 % interval held alpha =
    5/3, 2 and 5/2 in 95, 96 and 98 %; that of the power law alone in 92, 94 and 89 %; that of the other kernel alone in
    95, 95 and 99 %, but in 83 to 89 % in kernel worlds of exponent 1.8, where nothing ends.
    """
    part, low, high = inside_range(likelihood, low, high)
    unknown = np.full(3, np.nan)
    if part is None:
        return EitherSlope(no_slope(low, high, TOO_FEW), unknown, np.nan, np.nan)
    endless = power_law(part)
    alpha, scale, log_finite = finite_range(part, size, rng)
    log_power = endless.log_evidence
    both = float(np.logaddexp(log_power, log_finite) - np.log(2.0))
    reason = another_shape(part, both)
    if reason:
        return EitherSlope(no_slope(low, high, reason), unknown, log_power, log_finite)
    ends = rng.random(size) < 0.5 * np.exp(log_finite - both)
    draws = np.where(ends, alpha, endless.sample(size, rng)[:, 1])
    return EitherSlope(judged(low, high, draws), outer_scale_interval(scale, ends, high), log_power, log_finite)


def outer_scale_interval(scale, ends, high: float) -> np.ndarray:
    """Median and 95 % ends (3,) of the outer scale [m], as far as data determine them.

    Parameters
    ----------
    scale : (n,) float array [m]
        Draws, given that the spectrum ends.
    ends : (n,) bool array
        Whether it does; where not, the outer scale is infinite.
    high : float [m]
        Upper end of the range.
    """
    distance = np.log(scale / high)
    open_above = np.mean(~ends | (distance > np.log(FARTHEST) - _END)) > _TAIL
    open_below = np.mean(ends & (distance < np.log(NEAREST) + _END)) > _TAIL
    if open_above and open_below:
        return np.full(3, np.nan)
    if open_above:
        return np.array([np.nan, np.quantile(scale, 0.05), np.nan])
    if open_below:
        return np.array([np.nan, np.nan, np.quantile(scale, 0.95)])
    return np.quantile(scale, (0.5, 0.025, 0.975))
