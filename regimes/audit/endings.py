"""Which records end before their time, and whether their end depends on how far apart a pair is."""

import math
from dataclasses import dataclass

import numpy as np

from regimes.curves.groups import make_groups
from regimes.curves.passes import separation_pass, spans_and_rows
from regimes.pairs import Pairs
from regimes.tracks import Tracks

AT_END = 0.02  # of the longest record: an end so near to it, or to the end of the data, is one of the plan
_AGES = 256  # most ages at which pairs are compared
_MOST_PAIRS = 4000  # so that no table of all pairs by all ages is ever large
_ROUNDS = 50


@dataclass(frozen=True, slots=True)
class Endings:
    """How the hazard of a pair's record to end goes with ln r.

    Parameters
    ----------
    lost, planned : int
        Pairs whose record ends early, and with the survey.
    exponent : float
        beta, hazard proportional to r^beta; NaN where it cannot be had.
    z : float
        Score of beta = 0 over its cluster-robust standard error; NaN where it cannot be had.
    clusters : int
        Clusters with a pair that was lost.
    """

    lost: int
    planned: int
    exponent: float
    z: float
    clusters: int

    @property
    def growth(self) -> float:
        """Factor of the hazard for each doubling of the separation."""
        return 2.0**self.exponent


def early_ends(tracks: Tracks, pairs: Pairs) -> np.ndarray:
    """Whether the record of each pair is cut by a member that was lost, (n_pair,) bool.

    A track that lasts as long as the longest, or until the data end, within `AT_END` of the longest record, has
    ended as planned.
    """
    length, end = tracks.n_step, tracks.start_step + tracks.n_step
    slack = max(1, int(AT_END * length.max()))
    planned = (length >= length.max() - slack) | (end >= end.max() - slack)
    first_ends = end[pairs.first] < end[pairs.second]
    both = end[pairs.first] == end[pairs.second]
    ender = np.where(first_ends, pairs.first, pairs.second)
    return ~planned[ender] & ~(both & planned[pairs.first])


def endings(tracks: Tracks, pairs: Pairs) -> Endings:
    r"""Hazard of early ends against separation, all ages alike.

    .. math:: h_i(t) = h_0(t)\, r_i(t)^\beta, \quad U = \sum_{lost\ i} [\ln r_i(t_i) - \overline{\ln r}(t_i)]

    The mean runs over the pairs still there at the same age, so that h_0, any common dependence on age, drops out.
    U over its cluster-robust standard error is z.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        Of more than 4000, every so many-th is taken.

    Returns
    -------
    Endings

    References
    ----------
    Cox (1972) J. R. Stat. Soc. B 34, 187, partial likelihood; Lin & Wei (1989) J. Am. Stat. Assoc. 84, 1074,
    robust variance, here summed over clusters.
    """
    pairs = pairs.select(slice(None, None, -(-pairs.n_pair // _MOST_PAIRS)))
    lost = early_ends(tracks, pairs)
    count = (int(lost.sum()), int(np.sum(~lost)))
    ages = np.unique(np.linspace(0, int(pairs.length.max()) - 1, _AGES).astype(np.int64))
    x = _log_separations(tracks, pairs, ages)
    last = np.searchsorted(ages, pairs.length - 1, side="right") - 1
    there = (np.arange(ages.size)[None, :] <= last[:, None]) & np.isfinite(x)
    x = np.where(there, x, 0.0)
    ends = lost & there[np.arange(pairs.n_pair), last]
    groups = make_groups(pairs)
    z, clusters = _robust_z(_residuals(x, there, last, ends, 0.0), ends, groups)
    return Endings(*count, _exponent(x, there, last, ends), z, clusters)


def _log_separations(tracks: Tracks, pairs: Pairs, ages: np.ndarray) -> np.ndarray:
    """ln r of every pair at every age, (n_pair, n_age); across a gap the last one seen, NaN before the first."""
    spans, _, _ = spans_and_rows(tracks, pairs)
    out = np.empty((pairs.n_pair, ages.size))
    separation_pass(np.ascontiguousarray(tracks.position, float), bool(tracks.planar), spans, ages, out)
    seen = np.isfinite(out) & (out > 0)
    where = np.maximum.accumulate(np.where(seen, np.arange(ages.size), -1), axis=1)
    carried = np.take_along_axis(np.where(seen, out, 1.0), np.maximum(where, 0), axis=1)
    return np.where(where >= 0, np.log(carried), np.nan)


def _moments(x, there, last, ends, beta: float):
    """Ends at each age, total weight, mean and variance of ln r of the pairs at risk."""
    events = np.bincount(last[ends], minlength=x.shape[1]).astype(float)
    top = np.max(np.where(there, x, -np.inf), axis=0, initial=0.0)
    weight = np.where(there, np.exp(beta * (x - top)), 0.0)
    total = weight.sum(axis=0)
    safe = np.where(total > 0, total, 1.0)
    mean = np.sum(weight * x, axis=0) / safe
    variance = np.sum(weight * (x - mean) ** 2, axis=0) / safe
    return events, weight, safe, mean, variance


def _residuals(x, there, last, ends, beta: float) -> np.ndarray:
    """Lin-Wei score residual of each pair, (n_pair,); they add up to the score."""
    events, weight, total, mean, _ = _moments(x, there, last, ends, beta)
    own = np.where(ends, x[np.arange(last.size), last] - mean[last], 0.0)
    return own - np.sum(weight * (x - mean) * (events / total), axis=1)


def _robust_z(residual: np.ndarray, ends: np.ndarray, groups) -> tuple[float, int]:
    sums = np.zeros(groups.n_row)
    touched = np.zeros(groups.n_row)
    for column in groups.table.T:
        used = column >= 0
        np.add.at(sums, column[used], residual[used])
        np.add.at(touched, column[used & ends], 1.0)
    main = groups.weight > 0
    clusters = int(np.sum(touched[main] > 0))
    active = int(np.sum(np.abs(sums[main]) > 0))
    variance = max(float(groups.weight @ sums**2), 0.5 * float(np.sum(sums[main] ** 2)))
    if clusters < 2 or not variance > 0:
        return math.nan, clusters
    return float(residual.sum() / math.sqrt(variance * active / max(active - 1, 1))), clusters


def _exponent(x, there, last, ends) -> float:
    """beta at the maximum of the partial likelihood, by Newton steps; NaN where there is none within -5 to 5."""
    if not np.any(ends):
        return math.nan
    beta = 0.0
    for _ in range(_ROUNDS):
        events, _, _, mean, variance = _moments(x, there, last, ends, beta)
        information = float(events @ variance)
        if not information > 0:
            return math.nan
        step = (float(x[ends, last[ends]].sum()) - float(events @ mean)) / information
        beta += float(np.clip(step, -0.5, 0.5))
        if abs(beta) > 5.0:
            return math.nan
        if abs(step) < 1e-6:
            break
    return beta
