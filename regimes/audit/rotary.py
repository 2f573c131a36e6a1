"""Rotary spectra of the relative velocities of pairs at single frequencies, window by window."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.passes import spans_and_rows
from regimes.geodesy import ECCENTRICITY_SQUARED, separation
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_MISSING = 0.1  # share of a window that may fall into gaps
_MOST = 4000  # windows; beyond that every so many pairs are used
_EARTH = 7.292115e-5  # rad/s, rotation


@dataclass(frozen=True, slots=True)
class Windows:
    """Relative velocities of pairs in windows that overlap by half.

    Parameters
    ----------
    velocity : (n_window, n_step) complex array [m/s]
        East plus i north, less the mean of the window, tapered (Hann); 0 in gaps.
    cluster : (n_window,) int array
        Cluster of the first member of the pair.
    separation : (n_window,) float array [m]
        Geometric mean of the window.
    inertial : (n_window,) float array [rad/s]
        Frequency at which inertial motion turns, negative (clockwise) in the north; NaN on a plane.
    step : float [s]
    """

    velocity: np.ndarray
    cluster: np.ndarray
    separation: np.ndarray
    inertial: np.ndarray
    step: float

    def power(self, frequency) -> np.ndarray:
        """(n_window,) power at a frequency [rad/s], positive counterclockwise, one for all or for each window."""
        turn = np.multiply.outer(np.broadcast_to(frequency, self.cluster.shape), np.arange(self.velocity.shape[1]))
        return np.abs(np.sum(self.velocity * np.exp(-1j * self.step * turn), axis=1)) ** 2


def inertial_frequency(tracks: Tracks) -> np.ndarray:
    r"""Minus the Coriolis parameter at every position, :math:`-2 \Omega \sin\varphi` [rad/s]; NaN on a plane."""
    if tracks.planar:
        return np.full(len(tracks.position), np.nan)
    x, y, z = tracks.position.T
    return -2.0 * _EARTH * np.sin(np.arctan2(z, (1.0 - ECCENTRICITY_SQUARED) * np.hypot(x, y)))


def windows(tracks: Tracks, pairs: Pairs, duration: float) -> Windows | None:
    """Windows of a duration [s] from all pairs; None where no pair is seen so long."""
    n = round(duration / tracks.step)
    spans = spans_and_rows(tracks, pairs)[0]
    hop = max(n // 2, 1)
    starts = [np.arange(0, max(length - n, 0), hop) for length in spans[:, 2]]
    every = -(-sum(s.size for s in starts) // _MOST)
    chosen = [i for i, s in enumerate(starts) if s.size and i % max(every, 1) == 0]
    if n < 8 or not chosen:
        return None
    pair = np.concatenate([np.full(starts[i].size, i) for i in chosen])
    begin = np.concatenate([starts[i] for i in chosen])
    into = begin[:, None] + np.arange(n + 1)
    one, two = spans[pair, :1] + into, spans[pair, 1:2] + into
    r, east, north = separation(tracks.position[one.ravel()], tracks.position[two.ravel()], tracks.planar)
    r = r.reshape(one.shape)
    velocity = np.diff((east + 1j * north).reshape(one.shape), axis=1) / tracks.step
    seen = np.isfinite(velocity) & (r[:, 1:] > 0) & (r[:, :-1] > 0)
    good = seen.mean(axis=1) >= 1.0 - _MISSING
    if not good.any():
        return None
    velocity, seen, r, one = velocity[good], seen[good], r[good, :-1], one[good]
    share = seen / seen.sum(axis=1)[:, None]
    velocity = np.where(seen, velocity, 0.0)
    velocity = (velocity - np.sum(share * velocity, axis=1)[:, None]) * seen
    taper = np.sin(np.pi * (np.arange(n) + 0.5) / n) ** 2
    log_r = np.where(seen, np.log(np.where(seen, r, 1.0)), 0.0)
    turning = np.where(seen, inertial_frequency(tracks)[one[:, :-1]], 0.0)
    return Windows(
        velocity * taper,
        pairs.cluster[pairs.first[pair[good]]],
        np.exp(np.sum(share * log_r, axis=1)),
        np.sum(share * turning, axis=1),
        tracks.step,
    )
