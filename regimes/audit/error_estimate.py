"""The position error as the tracks themselves show it, told from motion by how differences grow with their interval."""

from dataclasses import dataclass
from itertools import product
from math import comb

import numpy as np

from regimes.curves.covariance import small_sample
from regimes.pairs import Pairs
from regimes.tracks import Tracks

ORDER = 4  # of the differences: smooth motion, waves of a day among it, all but vanishes from them
SCALES = (1, 2, 3, 4, 6, 8, 12)  # steps between the positions of a difference
_MEMORIES = (0.0, 0.5, 1.0, 1.5, 2.0, 3.0, 4.0)  # steps; errors that last longer cannot be told from motion
_GROWTHS = np.arange(1.0, 2.0 * ORDER + 0.5, 0.5)  # of the motion: 1 without memory, 2 ORDER where it is smooth
_CLIP = 30.0  # medians of a squared difference beyond which it is a blunder rather than an error
_MODEL = 0.05  # relative error of the two-part model itself
_CLEAR = 9.0  # chi-square by which errors with memory must fit better than those without
_LEAST = 30  # differences at a scale


@dataclass(frozen=True, slots=True)
class ErrorEstimate:
    """Standard error of one coordinate of one fix, estimated from tracks.

    Parameters
    ----------
    value, low, high : float [m]
        Estimate with its 95 % interval over clusters; NaN where tracks are too short or broken.
    memory : float [s]
        Correlation time of the error; 0 where none is seen.
    share : float
        Part of the mean squared difference over one step that is error rather than motion.
    """

    value: float
    low: float
    high: float
    memory: float
    share: float


def estimate_error(tracks: Tracks, pairs: Pairs) -> ErrorEstimate:
    r"""Error and motion from fourth differences of single tracks over 1, 2, 4 and 8 steps.

    .. math:: V(k) = \frac{\overline{|\nabla_k^4 x|^2}}{2 \binom{8}{4}}
              = s^2 g_k(\tau) + A k^p, \qquad
              g_k(\tau) = 1 + 2 \sum_{j=1}^{4} (-1)^j \frac{\binom{8}{4 + j}}{\binom{8}{4}} e^{-j k \Delta t / \tau}

    s and A not negative, by least relative squares for each p from 1 (motion without memory) to 8 (smooth motion)
    and each tau (0, 1, 2 or 4 steps); the best fit is kept, one with memory only where it is clearly better.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        Their clusters; tracks in no pair are left out.

    Returns
    -------
    ErrorEstimate
        The interval comes from leaving out one cluster after the other.

    Notes
    -----
    Independent errors give the same V at every scale, motion one that grows. Squared differences beyond 30
    medians are cut there: heavy tails of the error count, blunders do not.
    """
    sums, counts = _differences(tracks, pairs)
    used = counts.sum(axis=0) >= _LEAST
    if used.sum() < 3 or np.any(sums.sum(axis=0)[used] <= 0):
        return ErrorEstimate(np.nan, np.nan, np.nan, np.nan, np.nan)
    sums, counts, scales = sums[:, used], counts[:, used], np.array(SCALES, float)[used]
    apparent = sums.sum(axis=0) / counts.sum(axis=0)
    clusters = np.sum(counts > 0, axis=0)
    influence = (sums - apparent * counts) / counts.sum(axis=0)
    noise = small_sample(clusters) * np.sum(influence**2, axis=0) / apparent**2
    tolerance = np.sqrt(np.nan_to_num(noise, nan=1.0) + _MODEL**2)
    square, memory = _two_parts(apparent, scales, tolerance, _MEMORIES)
    rows = np.flatnonzero(counts.sum(axis=1) > 0)
    without = []
    for row in rows if rows.size > 1 else ():
        left = counts.sum(axis=0) - counts[row]
        if np.all(left > 0):
            part = (sums.sum(axis=0) - sums[row]) / left
            without.append(_two_parts(part, scales, tolerance, (memory,))[0])
    n = len(without)
    spread = np.sqrt((n - 1) * np.var(without)) if n > 1 else np.nan
    error = spread / (2.0 * np.sqrt(square)) if square > 0 else np.sqrt(spread)
    value = float(np.sqrt(square))
    share = float(square * _gain(scales[:1], memory)[0] / apparent[0])
    low, high = max(value - 1.96 * float(error), 0.0), value + 1.96 * float(error)
    return ErrorEstimate(value, low, high, memory * tracks.step, min(share, 1.0))


def _differences(tracks: Tracks, pairs: Pairs) -> tuple[np.ndarray, np.ndarray]:
    """(n_cluster, n_scale) sums of V and numbers of differences."""
    weights = np.array([(-1.0) ** j * comb(ORDER, j) for j in range(ORDER + 1)])
    owner = np.repeat(np.arange(tracks.n_track), tracks.n_step)
    sums, counts = np.zeros((2, pairs.n_cluster, len(SCALES)))
    for i, k in enumerate(SCALES):
        n = len(owner) - ORDER * k
        if n <= 0:
            continue
        change = sum(w * tracks.position[j * k : j * k + n] for j, w in enumerate(weights))
        square = np.sum(change**2, axis=1) / (2.0 * comb(2 * ORDER, ORDER))
        row = pairs.cluster[owner[:n]]
        good = (owner[ORDER * k :] == owner[:n]) & np.isfinite(square) & (row >= 0)
        if not good.any():
            continue
        kept = np.minimum(square[good], _CLIP * np.median(square[good]))
        sums[:, i] = np.bincount(row[good], kept, pairs.n_cluster)
        counts[:, i] = np.bincount(row[good], minlength=pairs.n_cluster)
    return sums, counts


def _gain(scales: np.ndarray, memory: float) -> np.ndarray:
    """g: mean squared difference of an error of unit variance over that of one without memory."""
    if memory == 0.0:
        return np.ones(scales.size)
    j = np.arange(1, ORDER + 1)
    sign = (-1.0) ** j * np.array([comb(2 * ORDER, ORDER + i) for i in j]) / comb(2 * ORDER, ORDER)
    return 1.0 + 2.0 * np.exp(-np.outer(scales, j) / memory) @ sign


def _two_parts(apparent, scales, tolerance, memories) -> tuple[float, float]:
    """Error variance [m2] and memory [steps] of the best fit."""
    best = {}
    for memory, growth in product(memories, _GROWTHS):
        design = np.stack([_gain(scales, memory), scales**growth], axis=1)
        a = design / (apparent * tolerance)[:, None]
        chi, coefficient = _not_negative(a, 1.0 / tolerance)
        if memory not in best or chi < best[memory][0]:
            best[memory] = (chi, coefficient[0])
    plain = best.get(0.0, (np.inf, 0.0))[0]
    clear = [m for m in best if m == 0.0 or best[m][0] < plain - _CLEAR]
    chosen = min(clear, key=lambda m: best[m][0])
    return float(best[chosen][1]), float(chosen)


def _not_negative(a: np.ndarray, b: np.ndarray) -> tuple[float, np.ndarray]:
    """Least squares of two coefficients, neither negative: squared residual and coefficients."""
    found = []
    both = np.linalg.lstsq(a, b, rcond=None)[0]
    if np.all(both >= 0):
        found.append(both)
    else:
        for i in range(2):
            one = np.zeros(2)
            one[i] = max(float(a[:, i] @ b) / float(a[:, i] @ a[:, i]), 0.0)
            found.append(one)
    chi = [float(np.sum((a @ c - b) ** 2)) for c in found]
    at = int(np.argmin(chi))
    return chi[at], found[at]
