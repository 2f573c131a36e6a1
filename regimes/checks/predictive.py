"""Posterior predictive distribution of every curve: the same releases again under kernels drawn from the fit."""

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np

from regimes.checks.curves import UNITS, Grid, Measured, axis_of, in_units, measure, sample_places
from regimes.checks.record import Check
from regimes.errors import DataError
from regimes.inference.predict import QUANTILES
from regimes.pairs import Pairs
from regimes.synthetic.likeness import Design, design_of, likeness
from regimes.theory.kernel import Kernel
from regimes.tracks import Tracks

_TIMES = 10
_FORGOTTEN = 2.5
_LEAST_PAIRS = 10
_LEAST_SHARE = 0.25  # of the pairs must still be there at the last time
_LEAST_SEEN = 0.8  # of the repetitions must have a value for a bin to be compared

Progress = Callable[[str, int, int], None]


def predictive_checks(
    tracks: Tracks,
    pairs: Pairs,
    kernels: list[Kernel],
    grid: Grid,
    shared: float,
    how: tuple[int, int, Progress | None],
) -> tuple[Check, ...]:
    r"""Hold every curve against its posterior predictive distribution.

    .. math:: T = \max_b |v_b - m_b| / s_b, \quad p = (1 + \#\{T_j \ge T\}) / (1 + n)

    with mean m and standard deviation s of a curve over n repetitions, each under a kernel of its own.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    kernels : list of Kernel
        Drawn from the posterior of the fit, one for each repetition.
    grid : Grid
    shared : float
        Variance of what clusters show over that of independent pairs, 1 or more. It widens the repetitions of designs
        that can only be repeated pair by pair; releases that are repeated as a whole have it already.
    how : (int, int, callable or None)
        Seed; threads, on which the result does not depend; progress, called with (stage, done, total).

    Returns
    -------
    tuple of Check
        Curves that the data do not have are left out.

    Raises
    ------
    DataError
        If no pair is seen to pass the first separation.

    Notes
    -----
    Number of clusters, starts, lengths, gaps, sampling and position errors are those of the data, so are the
    biases of small and unfinished samples. Skewed curves are compared in their logarithm. The distribution of
    separations is compared by its Kolmogorov-Smirnov distance from all repetitions together, at three times.
    The kernel was fitted to the same data, which makes p-values a little too large. Chance pairs and releases of more
    than ten particles are repeated pair by pair, their triplets not at all: repetitions are then moved away from their
    mean by the root of `shared`.

    References
    ----------
    Gelman, Meng & Stern (1996) Statistica Sinica 6, 733.
    """
    seen = measure(tracks, pairs, grid)
    design = design_of(tracks, pairs)
    if not design.whole:
        seen = replace(seen, curves={k: v for k, v in seen.curves.items() if k != "triplet_area"})
    drawn = _repetitions(design, kernels, replace(grid, areas=grid.areas and design.whole), how)
    wider = 1.0 if design.whole else math.sqrt(max(shared, 1.0))
    found = [_compare(name, seen, drawn, grid, wider) for name in seen.curves]
    return tuple(check for check in (*found, _distribution(seen, drawn, grid, wider)) if check is not None)


def grid_for(tracks: Tracks, moved: Pairs, passage: float, first: float, thresholds: np.ndarray) -> Grid:
    """Where curves are compared: from a few exit times to the time when a quarter of the pairs is left.

    Parameters
    ----------
    tracks : Tracks
    moved : Pairs
        Since the first passage.
    passage : float [m]
    first : float [s]
        Mean exit time at the lowest resolved separation; times start at `_FORGOTTEN` of it, for pairs that have just
        passed a separation still have the velocity that made them pass.
    thresholds : (n,) float array [m]
        Resolved separations.

    Raises
    ------
    DataError
        If too few times are left.
    """
    lasting = np.sort(moved.length)[::-1]
    at = min(max(_LEAST_PAIRS - 1, int(_LEAST_SHARE * lasting.size)), lasting.size - 1)
    last = int(lasting[at]) - 2
    begin = max(1, int(np.ceil(_FORGOTTEN * first / tracks.step)))
    times = np.unique(np.rint(np.geomspace(begin, max(last, 1), _TIMES)).astype(int))
    if last <= begin or times.size < 3:
        raise DataError(
            f"predictive checks: got {lasting.size} pairs that last {last} steps beyond first passage; must go beyond "
            f"{_FORGOTTEN:g} exit times, {begin} steps; use longer records"
        )
    members = np.bincount(tracks.release[tracks.release >= 0]) if np.any(tracks.release >= 0) else np.zeros(1)
    return Grid(passage, times * tracks.step, thresholds[1::2], bool(np.sum(members >= 3) >= 3))


def _repetitions(design: Design, kernels: list[Kernel], grid: Grid, how) -> list[Measured]:
    seed, jobs, progress = how
    streams = np.random.SeedSequence(seed).spawn(len(kernels))

    def one(i: int) -> Measured | None:
        tracks, pairs = likeness(design, kernels[i], np.random.default_rng(streams[i]))
        try:
            return measure(tracks, pairs, grid)
        except DataError:
            return None  # no pair of this repetition got as far

    found = []
    with ThreadPoolExecutor(jobs) as pool:
        for i, result in enumerate(pool.map(one, range(len(kernels)))):
            found.append(result)
            if progress is not None:
                progress("predictive checks", i + 1, len(kernels))
    return [m for m in found if m is not None]


def _compare(name: str, seen: Measured, drawn: list[Measured], grid: Grid, wider: float) -> Check | None:
    value = seen.curves[name]
    if not all(name in m.curves for m in drawn):
        return None
    rows = np.array([m.curves[name] for m in drawn])
    good = np.isfinite(value) & (np.mean(np.isfinite(rows), axis=0) >= _LEAST_SEEN)
    if not np.any(good):
        return None
    value, rows = value[good], rows[:, good]
    rows = rows[np.all(np.isfinite(rows), axis=1)]
    rows = rows.mean(axis=0) + wider * (rows - rows.mean(axis=0))
    middle, spread = rows.mean(axis=0), rows.std(axis=0, ddof=1)
    varies = spread > 0
    if not np.any(varies):
        return None
    away = np.max(np.abs(rows - middle)[:, varies] / spread[varies], axis=1)
    own = np.max(np.abs(value - middle)[varies] / spread[varies])
    axis_name, axis = axis_of(name, grid)
    band = np.quantile(rows, QUANTILES, axis=0)
    return Check(
        name, axis_name, axis[good], in_units(name, value), in_units(name, band), _share(away, own), UNITS[name]
    )


def _distribution(seen: Measured, drawn: list[Measured], grid: Grid, wider: float) -> Check | None:
    places = sample_places(grid.times.size)
    own, others = [], []
    for k in range(places.size):
        pool = np.sort(np.concatenate([m.samples[k] for m in drawn]))
        own.append(_distance(seen.samples[k], pool))
        others.append([_distance(m.samples[k], pool) for m in drawn])
    value, rows = np.array(own), wider * np.array(others).T
    rows = rows[np.all(np.isfinite(rows), axis=1)]
    if not np.all(np.isfinite(value)) or len(rows) < _LEAST_SEEN * len(drawn):
        return None
    scale = np.median(rows, axis=0)
    away = np.max(rows / scale, axis=1)
    p = _share(away, float(np.max(value / scale)))
    band = np.quantile(rows, QUANTILES, axis=0)
    band[0] = 0.0  # no distance is too small
    return Check("separation_distribution", "time", grid.times[places], value, band, p, "1")


def _distance(sample: np.ndarray, pool: np.ndarray) -> float:
    """Kolmogorov-Smirnov distance of a sorted sample from a large sorted one; NaN for an empty sample."""
    if sample.size == 0 or pool.size == 0:
        return np.nan
    low = np.searchsorted(pool, sample, side="left") / pool.size
    high = np.searchsorted(pool, sample, side="right") / pool.size
    steps = np.arange(sample.size + 1) / sample.size
    return float(max(np.max(steps[1:] - low), np.max(high - steps[:-1])))


def _share(drawn: np.ndarray, own: float) -> float:
    return float((1 + np.sum(drawn >= own * (1.0 - 1e-12))) / (1 + drawn.size))
