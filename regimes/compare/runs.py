"""Departures of a curve in single bins and in runs of neighbouring ones: what is small everywhere still adds up."""

import numpy as np

WIDTHS = (1, 2, 4, 8)
_OWN = 1.0  # standard deviations by which a bin of a telling run must depart itself to be named


def windows(n: int) -> np.ndarray:
    """(n_run, n) bool array: bins of every run of 1, 2, 4 and 8 neighbours among n."""
    place = np.arange(n)
    rows = [(place >= a) & (place < a + w) for w in WIDTHS if w <= n for a in range(n - w + 1)]
    return np.array(rows)


def run_means(rows: np.ndarray) -> np.ndarray:
    """Mean over each run of `windows` (m, n_run) of rows (m, n); NaN bins do not count, a run without a bin is NaN."""
    inside = windows(rows.shape[1]).astype(float)
    seen = np.isfinite(rows)
    count = seen.astype(float) @ inside.T
    return (np.where(seen, rows, 0.0) @ inside.T) / np.where(count > 0, count, np.nan)


def telling_bins(away: np.ndarray, run_away: np.ndarray, critical: float) -> np.ndarray:
    """Bins (n,) bool that lie in a run beyond the critical departure and depart themselves in the same direction.

    Parameters
    ----------
    away : (n,) float array
        Departure of each bin in standard deviations.
    run_away : (n_run,) float array
        Of each run of `windows`.
    critical : float
    """
    beyond = np.abs(run_away) > critical
    inside = windows(away.size)[beyond]
    same = np.sign(run_away[beyond])[:, None] * away[None, :] > _OWN
    return np.any(inside & same, axis=0)
