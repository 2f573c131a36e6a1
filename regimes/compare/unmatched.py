"""The comparison that is usual: both data sets as they are, each with its own records, starts and gaps."""

import numpy as np
from scipy.stats import t as student

from regimes.compare.common import Side
from regimes.curves import Curve, dispersion_statistics, exit_statistics
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_TIMES = 10
_LEAST_SHARE = 0.25
_LEAST_PAIRS = 10
_LEAST_CLUSTERS = 3


def unmatched_p(one: Side, two: Side, thresholds: np.ndarray) -> float:
    r"""p-value of the hypothesis that two data sets agree, when nothing is done about how they were sampled.

    .. math:: z_b = \frac{\ln v_{1b} - \ln v_{2b}}{\sqrt{s_{1b}^2 + s_{2b}^2}}

    with standard errors s of ln v between clusters; Student's t with the clusters of the smaller side, Bonferroni over
    all bins of the exponent from completed exits and of relative dispersion since the start of the pairs.

    Parameters
    ----------
    one, two : Side
    thresholds : (n + 1,) float array [m]
        Of the exponent.

    Returns
    -------
    float
        1 at most; NaN where nothing can be compared.
    """
    times = _times(one, two)
    pairs_of_curves = [
        [_completed(side.tracks, side.pairs, thresholds) for side in (one, two)],
        [dispersion_statistics(side.tracks, side.pairs, times).relative_dispersion() for side in (one, two)],
    ]
    found = np.concatenate([_p_values(*curves) for curves in pairs_of_curves])
    found = found[np.isfinite(found)]
    return float(min(1.0, found.size * found.min())) if found.size else float("nan")


def _completed(tracks: Tracks, pairs: Pairs, thresholds: np.ndarray) -> Curve:
    """Exponent from completed exits alone: common practice, too high where records end early."""
    s = exit_statistics(tracks, pairs, thresholds)
    return Curve("exponent", "separation", s.separation, s.exits * s.log_ratio, s.finished_time, s.weight, "1/s")


def _times(one: Side, two: Side) -> np.ndarray:
    """Since the start of the pairs, as long as a quarter of the pairs of both sides is there [s]."""
    last = []
    for side in (one, two):
        length = np.sort(side.pairs.length)[::-1]
        at = min(max(_LEAST_PAIRS - 1, int(_LEAST_SHARE * length.size)), length.size - 1)
        last.append((int(length[at]) - 1) * side.tracks.step)
    step = max(one.tracks.step, two.tracks.step)
    most = max(1, int(min(last) / step + 1e-9))
    return np.unique(np.rint(np.geomspace(1, most, _TIMES))) * step


def _p_values(one: Curve, two: Curve) -> np.ndarray:
    """Two-sided p-value of each bin; NaN where a side has too few clusters."""
    with np.errstate(invalid="ignore", divide="ignore"):
        apart = np.log(one.value) - np.log(two.value)
        error = np.hypot(one.standard_error / one.value, two.standard_error / two.value)
        clusters = np.minimum(one.n_cluster, two.n_cluster)
        p = 2.0 * student.sf(np.abs(apart) / error, np.maximum(clusters - 1, 1))
    return np.where((clusters >= _LEAST_CLUSTERS) & np.isfinite(p), p, np.nan)
