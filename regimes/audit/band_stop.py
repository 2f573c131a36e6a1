"""Oscillations of one period fitted sample by sample, so that they can be taken away."""

from dataclasses import replace

import numpy as np
from scipy.signal import oaconvolve

from regimes.tracks import Tracks

HALF_WIDTH = 1.5  # periods on each side of a sample
_LEAST = 0.4  # share of the weights that must lie on known samples; an end has one half
_BLOCK = 1 << 16  # samples solved at a time


def oscillating_part(values: np.ndarray, first: np.ndarray, step: float, period: float) -> np.ndarray:
    r"""The part of a period in each series, fitted about every sample beside a parabola.

    .. math:: \min_{a, b, c, A, B} \sum_s w(s)\, [x(t + s) - a - b s - c s^2 - A \cos\omega s - B \sin\omega s]^2,
              \qquad w(s) = \cos^2 \frac{\pi s}{3 P}, \; |s| < \tfrac{3}{2} P

    of which A is the part at s = 0.

    Parameters
    ----------
    values : (n_sample, n) float array
        One series after the other; NaN where unknown.
    first : (n_series,) int array
        First row of each series, rising from 0.
    step, period : float [s]
        The period is at least three steps.

    Returns
    -------
    (n_sample, n) float array
        NaN where values are; 0 where too little is known around a sample to tell.

    Notes
    -----
    Away from ends and gaps the weights are symmetric, so that phases stay (linear phase), half the amplitude passes
    at about P (1 -+ 1/3), and parabolas pass untouched. At ends and gaps the fit is one-sided instead of bridged.
    """
    reach = int(np.ceil(HALF_WIDTH * period / step)) - 1
    lag = np.arange(-reach, reach + 1)
    weight = np.cos(np.pi * lag * step / (2.0 * HALF_WIDTH * period)) ** 2
    u, turn = lag / reach, 2.0 * np.pi * lag * step / period
    basis = np.stack([np.ones(lag.size), u, u**2, np.cos(turn), np.sin(turn)])
    place = np.arange(len(values)) + 2 * reach * np.searchsorted(first, np.arange(len(values)), side="right")
    known = np.isfinite(values).all(axis=1)
    mask = np.zeros(place[-1] + 2 * reach + 1)  # room between series, so that none sees the next
    mask[place[known]] = 1.0
    filled = np.zeros((mask.size, values.shape[1]))
    filled[place[known]] = values[known]
    # Convolution turns the lags round, which leaves the span of the basis, and so A, as they are.
    share = _sums(mask, weight)[place] / weight.sum()
    products = {(i, j): _sums(mask, weight * basis[i] * basis[j])[place] for i in range(5) for j in range(i + 1)}
    right = np.stack([_sums(filled, weight * row)[place] for row in basis], axis=1)
    out = np.where(known[:, None], 0.0, np.full(values.shape, np.nan))
    told = np.flatnonzero(known & (share >= _LEAST))
    for rows in np.array_split(told, max(1, -(-told.size // _BLOCK))):
        normal = np.empty((rows.size, 5, 5))
        for (i, j), total in products.items():
            normal[:, i, j] = normal[:, j, i] = total[rows]
        good = np.linalg.cond(normal) < 1e8 if rows.size else np.zeros(0, bool)
        out[rows[good]] = np.linalg.solve(normal[good], right[rows[good]])[:, 3]
    return out


def without_oscillation(tracks: Tracks, period: float) -> Tracks:
    """Tracks without their oscillating part, each starting where it did; for more pairs than vectors fit in memory.

    Less exact than the same with separation vectors beside gaps, where two tracks are fitted from different samples.
    """
    part = oscillating_part(tracks.position, tracks.offset[:-1], tracks.step, period)
    return replace(tracks, position=tracks.position - moved(part, tracks.offset))


def moved(part: np.ndarray, offset: np.ndarray) -> np.ndarray:
    """How far the part has moved each series since its first row."""
    return part - np.repeat(np.nan_to_num(part[offset[:-1]]), np.diff(offset), axis=0)


def _sums(values: np.ndarray, kernel: np.ndarray) -> np.ndarray:
    if values.ndim == 2:
        return oaconvolve(values, kernel[:, None], mode="same", axes=0)
    return oaconvolve(values, kernel, mode="same")
