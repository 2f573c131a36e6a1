"""Does the flow gather particles? Areas that a cluster of particles spans, judged from the pairs alone."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from regimes.audit.vectors import Vectors

SHARES = (0.0625, 0.125, 0.25, 0.5)  # of the time in which separations grow by e, at which pairs are looked at
SMOOTH = 1.7  # kernel exponent below which the allowance for a rough flow hides the rate itself


@dataclass(frozen=True, slots=True)
class Areas:
    """Change of area since the start of the pairs.

    Parameters
    ----------
    rate : float [1/s]
        Apparent divergence; negative where areas shrink. NaN where it cannot be had: no pair, or too rough a flow.
    p_value : float
        Of no shrinking, one-sided, clusters being independent; NaN with too few.
    until : float [s]
        Age at which pairs were looked at last.
    """

    rate: float
    p_value: float
    until: float


def early_areas(vectors: Vectors, step: float, growth: float, exponent: float, error: float) -> Areas:
    r"""Rate at which areas change while pairs are still close to their start.

    .. math:: \left\langle \frac{r_0}{r} \tanh \ln\frac{r}{r_0} \right\rangle = 0

    in an incompressible flow that is linear over the pairs, whatever its memory, if they start in all directions alike.

    Parameters
    ----------
    vectors : Vectors
        From the start of each pair.
    step : float [s]
    growth : float [1/s]
        Rate at which separations grow by e; pairs are looked at `SHARES` of 1 / growth after their start.
    exponent : float
        Kernel exponent a at the smallest separations.
    error : float [m]
        Position error s.

    Returns
    -------
    Areas

    Notes
    -----
    With det M = 1 the map M and its inverse stretch alike, and directions change as d theta' = d theta / |M e|^2; hence
    p(-x) = exp(-2 x) p(x) for x = ln(r / r0), and exp(-x) times any odd function has mean zero. Shrinking areas (det M
    = J) move x by ln(J) / 2. Two corrections, to second order in x: where the flow is rougher (a < 2) the mean is
    -(2 - a) <x^2> with lasting velocities and half of that without memory, of which the larger is allowed for; and
    position errors add -4 s^2 / r0^2. Each age is weighed by one over the root mean square of its values.
    """
    start = vectors.place[vectors.offset[:-1]]
    r0 = np.hypot(*start.T)
    score, slope = np.zeros(r0.size), np.zeros(r0.size)
    lags = np.unique(np.maximum(np.rint(np.array(SHARES) / (growth * step)), 1.0).astype(np.int64))
    for lag in lags:
        rows = vectors.offset[:-1] + lag
        there = rows < vectors.offset[1:]
        r = np.full(r0.size, np.nan)
        r[there] = np.hypot(*vectors.place[rows[there]].T)
        good = np.isfinite(r) & (r > 0) & (r0 > 0)
        x = np.log(r[good] / r0[good])
        shift = np.exp(-x) * np.tanh(x) + max(2.0 - exponent, 0.0) * x**2 + 4.0 * (error / r0[good]) ** 2
        size = float(np.sqrt(np.mean(shift**2))) if shift.size else 0.0
        if not size > 0:
            continue
        score[good] += shift / size
        slope[good] += np.exp(-x) * (1.0 - np.tanh(x) ** 2 - np.tanh(x)) * 0.5 * lag * step / size
    until = float(lags[-1] * step)
    known = exponent >= SMOOTH and slope.sum() > 0
    rate = float(score.sum() / slope.sum()) if known else float("nan")
    return Areas(rate, _below_zero(vectors.row_sums(score), vectors.weight), until)


def _below_zero(rows: np.ndarray, weight: np.ndarray) -> float:
    """p-value of a mean of at least zero, by Student's test on the sums of clusters."""
    used = rows != 0
    rows, weight = rows[used], weight[used]
    clusters = int(np.sum(weight > 0))
    q = max(float(weight @ rows**2), 0.5 * float(np.sum(rows[weight > 0] ** 2)))
    if clusters < 3 or not q > 0:
        return float("nan")
    z = float(weight @ rows) / np.sqrt(q)
    if z**2 >= clusters:
        return 0.0 if z < 0 else 1.0
    return float(student.cdf(z * np.sqrt((clusters - 1) / (clusters - z**2)), clusters - 1))
