"""A number with its interval from resampling the independent units."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import norm, t

NEAR_ZERO = 0.1  # share of the value below which the logarithm of a resample says too much


@dataclass(frozen=True, slots=True)
class Estimate:
    """A number, and the median and 95 % interval of its bootstrap; NaN where the units were fewer than two.

    Parameters
    ----------
    value : float
        From all the data.
    median, low, high : float
        50, 2.5 and 97.5 % points.
    """

    value: float
    median: float
    low: float
    high: float

    def scaled(self, factor: float) -> "Estimate":
        """The same in another unit; a positive factor."""
        return Estimate(*(factor * v for v in (self.value, self.median, self.low, self.high)))

    def as_numbers(self) -> dict[str, float]:
        """value, median, lo95 and hi95; the median is the value where there are no resamples."""
        return {"value": self.value, "median": self.median, "lo95": self.low, "hi95": self.high}

    def text(self, unit: str) -> str:
        """Value and interval to three digits."""
        if not np.isfinite(self.low):
            return f"{self.value:.3g} {unit} (no interval)"
        return f"{self.value:.3g} {unit} ({self.low:.3g} to {self.high:.3g})"


def resamples(n_unit: int, n_draw: int, seed: int) -> np.ndarray:
    """How often each unit is drawn.

    Returns
    -------
    (n_draw + 1, n_unit) float array
        The first row is the data as they are; there are no more rows where the units are fewer than two.
    """
    whole = np.ones((1, n_unit))
    if n_unit < 2:
        return whole
    rng = np.random.default_rng(seed)
    drawn = rng.multinomial(n_unit, np.full(n_unit, 1.0 / n_unit), size=n_draw)
    return np.concatenate([whole, drawn.astype(float)])


def estimate(values: np.ndarray, n_unit: int, positive: bool = False) -> Estimate:
    r"""Interval from a value and its resamples, widened where the units are few.

    Resampling n units understates the variance of a mean by (n - 1) / n, and the variance itself is uncertain:
    distances from the value are stretched by :math:`\sqrt{n/(n-1)}\, t_{n-1} / z` at the 97.5 % points.

    Integral scales and diffusivities are skewed, and small where their error is: resampled intervals end too low. For
    `positive` quantities the interval is symmetric in the logarithm, as wide there as the resamples say. Tried with 12
    and 30 particles of 60 days: a 95 % interval of the diffusivity held the truth in 92 and 90 % of 300 surveys when
    stretched as it was, in 95 and 93 % so; of 20 releases of four that shared most of their motion in 90 and 92 %.

    Parameters
    ----------
    values : (n_draw + 1,) float array
        The value first, then its resamples; resamples that are not finite are left out.
    n_unit : int
        Number of independent units.
    positive : bool
        Whether the quantity is positive by nature. Where the resamples come near zero, no logarithm is taken.
    """
    value = float(values[0])
    drawn = values[1:][np.isfinite(values[1:])]
    if drawn.size == 0 or not np.isfinite(value):
        return Estimate(value, value, np.nan, np.nan)
    stretch = np.sqrt(n_unit / (n_unit - 1.0)) * t.ppf(0.975, n_unit - 1) / norm.ppf(0.975)
    low, median, high = np.quantile(drawn, (0.025, 0.5, 0.975))
    if positive and value > 0.0 and low > NEAR_ZERO * value:
        factor = np.exp(0.5 * stretch * np.log(high / low))
        return Estimate(value, float(median), float(value / factor), float(value * factor))
    return Estimate(value, float(median), *(float(value + stretch * (v - value)) for v in (low, high)))
