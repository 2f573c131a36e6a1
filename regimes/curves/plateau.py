"""Whether the relative diffusivity levels off before the records end, and where."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.diffusivity import relative_diffusivity
from regimes.curves.dispersion import dispersion_statistics
from regimes.pairs import Pairs
from regimes.tracks import Tracks

# With one law throughout, K changes between the two windows by 0 on a plateau, by 12/13 for Richardson's kernel and by
# this for one linear in separation, the flattest of the named kernels that grow.
FLAT = 0.5
# An exponential law needs this growth of the mean square for its change to be 0.7 or more; less is no growth at all.
GROWTH = 10.0
_NORMAL_95 = 1.959963984540054


@dataclass(frozen=True, slots=True)
class Plateau:
    r"""Relative diffusivity of one component over two late windows of equal length.

    .. math:: K_i = \frac{1}{4} \frac{\Delta \langle r^2 \rangle}{\Delta t}, \qquad
              \text{change} = \frac{K_2 - K_1}{(K_1 + K_2) / 2}

    Parameters
    ----------
    value, error : float [m2/s]
        Mean of K_1 and K_2 and its standard error: the kernel K(r) where it is flat.
    change, half_width : float
        Relative change and half its 95 % interval.
    growth : float
        Mean square separation at the end over that at the start.
    reason : str
        Why it is no plateau; empty where it is one.
    """

    value: float
    error: float
    change: float
    half_width: float
    growth: float
    reason: str


def late_plateau(tracks: Tracks, pairs: Pairs) -> Plateau:
    """Relative diffusivity in the second and the last third of the median record of a pair.

    A plateau: the mean square separation has grown by `GROWTH` or more, and the 95 % interval of the relative change
    lies within `FLAT` of zero, so that a linear kernel is taken for one in 2.5 % of surveys.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        At least one.

    Returns
    -------
    Plateau
        Numbers NaN where the records are shorter than three steps.
    """
    last = int(np.median(pairs.length)) - 1
    nothing = float("nan")
    if last < 3:
        return Plateau(nothing, nothing, nothing, nothing, nothing, "records of pairs are shorter than three steps")
    times = np.rint(last * np.array([1.0, 2.0, 3.0]) / 3.0) * tracks.step
    found = relative_diffusivity(tracks, pairs, times).from_growth
    early, late = (0.5 * found.value).tolist()
    covariance = 0.25 * found.covariance
    mean = 0.5 * (early + late)
    variance = 0.25 * covariance.sum()
    spread = covariance[0, 0] + covariance[1, 1] - 2.0 * covariance[0, 1]
    square = dispersion_statistics(tracks, pairs, np.array([0.0, times[-1]])).relative_dispersion().value
    growth = float(square[1] / square[0])
    if not (mean > 0.0 and np.isfinite(spread)):
        return Plateau(mean, nothing, nothing, nothing, growth, "the relative diffusivity or its error is not known")
    change, half = (late - early) / mean, _NORMAL_95 * float(np.sqrt(spread)) / mean
    return Plateau(mean, float(np.sqrt(variance)), change, half, growth, _reason(change, half, growth))


def _reason(change: float, half_width: float, growth: float) -> str:
    if growth < GROWTH:
        return f"the mean square separation grows by a factor of {growth:.2g} only"
    if abs(change) + half_width <= FLAT:
        return ""
    if abs(change) > half_width:
        return f"the relative diffusivity still changes by {change:+.0%} late in the records"
    return f"whether the relative diffusivity levels off is known to +-{half_width:.0%} only"
