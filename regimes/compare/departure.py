"""How far one deployment lies from others, over bins and runs of bins."""

from dataclasses import dataclass

import numpy as np

from regimes.compare.runs import run_means


@dataclass(frozen=True, slots=True)
class Departure:
    """One curve held against those of other deployments.

    Parameters
    ----------
    middle : (n,) float array
        Mean of the others.
    apart : (n,) float array
        Value less that mean; NaN where there is no value.
    away : (n,) float array
        The same in standard deviations of the others.
    run_away : (n_run,) float array
        Mean over every run of bins in its standard deviations, see `windows`.
    test : float
        Largest departure of all.
    """

    middle: np.ndarray
    apart: np.ndarray
    away: np.ndarray
    run_away: np.ndarray
    test: float


def departure(value: np.ndarray, rows: np.ndarray) -> Departure:
    """Hold a curve (n,) against others (m, n); bins without a value do not count."""
    middle, spread = means(rows), spreads(rows)
    spread = np.where(spread > 0, spread, np.nan)
    away = (value - middle) / spread
    runs = run_means((rows - middle) / spread)
    width = spreads(runs)
    run_away = run_means(away[None])[0] / np.where(width > 0, width, np.nan)
    return Departure(middle, value - middle, away, run_away, _largest(run_away))


def distances(counts: np.ndarray, rows: np.ndarray) -> Departure:
    """Hold counts of separations (t, n_bin) against others (m, t, n_bin) by their Kolmogorov-Smirnov distances.

    `middle` is zero, `apart` the distance from all others together, `away` that over their median distance.
    """
    pool = _cumulative(rows.sum(axis=0))
    own = np.max(np.abs(_cumulative(counts) - pool), axis=1)
    theirs = np.max(np.abs(_cumulative(rows) - pool), axis=2)
    typical = np.array([np.median(column[np.isfinite(column)]) for column in theirs.T])
    away = own / typical
    return Departure(np.zeros(own.size), own, away, away, _largest(away))


def means(rows: np.ndarray) -> np.ndarray:
    """Mean over the first axis of what is finite; NaN where nothing is."""
    seen = np.isfinite(rows)
    count = seen.sum(axis=0)
    return np.where(seen, rows, 0.0).sum(axis=0) / np.where(count > 0, count, np.nan)


def spreads(rows: np.ndarray) -> np.ndarray:
    """Standard deviation over the first axis of what is finite; NaN with fewer than two."""
    seen = np.isfinite(rows)
    count = seen.sum(axis=0)
    square = np.where(seen, rows - means(rows), 0.0) ** 2
    return np.sqrt(square.sum(axis=0) / np.where(count > 1, count - 1, np.nan))


def _cumulative(counts: np.ndarray) -> np.ndarray:
    """Share at or below each bin; NaN where there is nothing."""
    total = counts.sum(axis=-1, keepdims=True)
    return np.cumsum(counts, axis=-1) / np.where(total > 0, total, np.nan)


def _largest(values: np.ndarray) -> float:
    known = np.abs(values[np.isfinite(values)])
    return float(known.max()) if known.size else 0.0
