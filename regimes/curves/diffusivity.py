"""Relative diffusivity by two routes, and the time that pairs spend below a separation."""

from dataclasses import dataclass

import numpy as np
from numba import njit
from scipy.optimize import brentq

from regimes.arrays import frozen_array
from regimes.curves.dispersion import nearest_lags
from regimes.curves.passes import spans_and_rows
from regimes.curves.record import Curve
from regimes.curves.structure_passes import diffusivity_pass
from regimes.errors import DataError
from regimes.geodesy import separation_components
from regimes.pairs import Pairs
from regimes.tracks import Tracks


@dataclass(frozen=True, slots=True)
class RelativeDiffusivity:
    r"""Relative diffusivity :math:`K = \frac{1}{2} d\langle r^2 \rangle / dt` at times since the start of a pair.

    Parameters
    ----------
    from_velocity : Curve [m2/s]
        :math:`\langle r\, u_L \rangle` at each time, velocities by differences over two steps centred on the sample;
        position errors leave it unbiased.
    from_growth : Curve [m2/s]
        Half the growth of r^2 between one time and the next over the time between, pairs seen at both; stands at
        the middle of the two times.
    square : Curve [m2]
        Mean of r^2 of the pairs of `from_velocity`: K against D is K against its root.
    """

    from_velocity: Curve
    from_growth: Curve
    square: Curve

    @property
    def separation(self) -> np.ndarray:
        """(n_time,) root of the mean squared separation D [m] at the times of `from_velocity`."""
        return np.sqrt(self.square.value)


def relative_diffusivity(tracks: Tracks, pairs: Pairs, times) -> RelativeDiffusivity:
    """Relative diffusivity of all pairs at times since their start.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    times : (n_time,) float array [s]
        Increasing, from one step on, at least two; each is moved to the nearest step.

    Returns
    -------
    RelativeDiffusivity

    Raises
    ------
    DataError
        If there are fewer than two times, or times are below one step, not finite or fall on the same step.
    """
    lags = nearest_lags(times, tracks.step)
    if lags.size < 2 or lags[0] < 1:
        raise DataError(
            f"relative diffusivity: got {lags.size} times from {lags[0] * tracks.step:g} s; need two or more from one "
            f"step, {tracks.step:g} s, on; velocities need a fix on both sides"
        )
    spans, rows, weight = spans_and_rows(tracks, pairs)
    sums = np.zeros((weight.size, lags.size, 5))
    position = np.ascontiguousarray(tracks.position, dtype=float)
    diffusivity_pass(position, bool(tracks.planar), spans, rows, lags, float(tracks.step), sums)
    at = lags * float(tracks.step)
    count, square, product, both, growth = np.moveaxis(sums, -1, 0)
    middle, span = 0.5 * (at[1:] + at[:-1]), np.diff(at)
    name = "relative diffusivity"
    return RelativeDiffusivity(
        Curve(f"{name} from velocities", "time", at, product, count, weight, "m2/s"),
        Curve(f"{name} from growth", "time", middle, 0.5 * growth[:, :-1] / span, both[:, :-1], weight, "m2/s"),
        Curve("relative dispersion", "time", at, square, count, weight, "m2"),
    )


@dataclass(frozen=True, slots=True)
class ResidenceStatistics:
    r"""Time that pairs spend below separations R, before they first reach R and in all.

    Parameters
    ----------
    thresholds : (n,) float array [m]
        R.
    total, first : Curve [s]
        Mean time below R in all, and before R is first reached, per pair that starts below R.
    start : (n,) float array [m]
        Geometric mean start separation of these pairs.
    unfinished : (n,) float array
        Share of them that is below R when its record ends. Both times are too short then.

    Notes
    -----
    A sampled record reaches R late, by 0.58 sqrt(2 K dt) / R in ln r, and misses short returns: the ratio of
    the two times is good to a few per cent while K dt / R^2 is below 0.003, too small (a too large) beyond.
    """

    thresholds: np.ndarray
    total: Curve
    first: Curve
    start: np.ndarray
    unfinished: np.ndarray

    def __post_init__(self) -> None:
        for name in ("thresholds", "start", "unfinished"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.float64))

    @property
    def kernel_exponent(self) -> np.ndarray:
        """(n,) exponent a of the kernel that the ratio of the two times implies, see `residence_ratio`.

        NaN where the ratio lies outside what 0.02 <= a <= 2 can give.
        """
        out = np.full(self.thresholds.size, np.nan)
        for i, ratio in enumerate(self.total.value / self.first.value):
            depth = self.start[i] / self.thresholds[i]
            low, high = residence_ratio(2.0, depth), residence_ratio(0.02, depth)
            if low <= ratio <= high:
                out[i] = brentq(lambda a, goal=ratio, x=depth: residence_ratio(a, x) - goal, 0.02, 2.0)
        return out


def residence_ratio(exponent: float, depth: float) -> float:
    r"""Mean time below R in all over mean time to first reach R, kernel r^a in two dimensions.

    .. math:: 1 + \frac{2-a}{a\,[1 - (r_0/R)^{2-a}]}; \quad 2/a \text{ for } r_0 \to 0

    Parameters
    ----------
    exponent : float
        a, above 0, at most 2.
    depth : float
        r_0 / R, above 0, below 1.
    """
    q = 2.0 - exponent
    grown = -np.expm1(q * np.log(depth)) / q if q > 1e-9 else -np.log(depth)
    return float(1.0 + 1.0 / (exponent * grown))


def residence_statistics(tracks: Tracks, pairs: Pairs, thresholds) -> ResidenceStatistics:
    """Time that the pairs spend below separations.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    thresholds : (n,) float array [m]
        Rising, positive.

    Returns
    -------
    ResidenceStatistics
        Steps in gaps do not count.

    Raises
    ------
    DataError
        If thresholds are not positive and rising.
    """
    levels = np.ascontiguousarray(thresholds, dtype=float)
    sound = levels.ndim == 1 and levels.size > 0 and np.all(np.isfinite(levels))
    if not sound or np.any(np.diff(levels, prepend=0) <= 0):
        raise DataError(
            f"residence times: got thresholds {np.array2string(levels, threshold=6)} m; must be positive and rising; "
            "correct them"
        )
    spans, rows, weight = spans_and_rows(tracks, pairs)
    sums = np.zeros((weight.size, levels.size, 5))
    position = np.ascontiguousarray(tracks.position, dtype=float)
    _residence_pass(position, bool(tracks.planar), spans, rows, levels, sums)
    count, first, total, log_start, loose = np.moveaxis(sums, -1, 0)
    n = weight @ count
    safe = np.where(n > 0, n, np.nan)
    step = float(tracks.step)
    return ResidenceStatistics(
        levels,
        Curve("time below separation", "separation", levels, step * total, count, weight, "s"),
        Curve("time to first reach separation", "separation", levels, step * first, count, weight, "s"),
        np.exp(weight @ log_start / safe),
        weight @ loose / safe,
    )


@njit(cache=True, error_model="numpy")
def _residence_pass(position, planar, spans, rows, levels, sums):
    """Add per threshold: pairs that start below it; steps below before it is first reached, and in all; ln of the
    start separation; pairs below it at their last valid sample. A sample stands for half a step on both sides.
    """
    n = levels.size
    first, total, reached = np.empty(n), np.empty(n), np.empty(n)
    for p in range(spans.shape[0]):
        first[:], total[:], reached[:] = 0.0, 0.0, 0.0
        start, last = np.nan, np.nan
        for t in range(spans[p, 2]):
            i, j = spans[p, 0] + t, spans[p, 1] + t
            r = separation_components(
                position[i, 0], position[i, 1], position[i, 2], position[j, 0], position[j, 1], position[j, 2], planar
            )[0]
            if r != r:
                continue
            share = 1.0
            if start != start:
                start, share = r, 0.5
            last = r
            for k in range(n):
                if r < levels[k]:
                    total[k] += share
                    if reached[k] == 0.0:
                        first[k] += share
                else:
                    reached[k] = 1.0
        for k in range(n):
            if start < levels[k] and start > 0.0:
                for m in range(3):
                    if rows[p, m] >= 0:
                        cell = sums[rows[p, m], k]
                        cell[0] += 1.0
                        cell[1] += first[k]
                        cell[2] += total[k]
                        cell[3] += np.log(start)
                        cell[4] += last < levels[k]
