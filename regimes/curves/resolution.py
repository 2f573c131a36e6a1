"""Which separations the data resolve, and what limits them."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.exit_rates import ExitStatistics
from regimes.errors import DataError
from regimes.units import KM

ERROR_MULTIPLE = 15.0  # position errors below which the exponent is off by over 10 % (simulated; Haza et al. 2014)
MOST_ZERO = 0.25  # share of exits inside one sampling interval
MEMORY = 2.0  # growth that frees a pair from the correlation of its start
FREED = 0.9  # share of pairs that must have grown so much
LEAST_EXITS = 5
LEAST_CLUSTERS = 3


@dataclass(frozen=True, slots=True)
class Resolved:
    """The resolved thresholds.

    Parameters
    ----------
    intervals : slice
        Of `ExitStatistics`.
    low, high : float [m]
        Lowest and highest resolved separation.
    limited_by : (str, str)
        What limits each end, in words.
    """

    intervals: slice
    low: float
    high: float
    limited_by: tuple[str, str]


def ladder(limits, ratio: float, smallest: float, largest: float) -> np.ndarray:
    """Separation thresholds.

    Parameters
    ----------
    limits : (float, float) or None [m]
        Ends wished for; by default all between `smallest` and `largest`, on a ladder through 1 km.
    ratio : float
        Ratio of successive thresholds.
    smallest, largest : float [m]
        Ends of the data.

    Returns
    -------
    (n + 1,) float array [m]

    Raises
    ------
    DataError
        If fewer than four thresholds fit.
    """
    step = np.log(ratio)
    if limits is not None:
        count = int(np.floor(np.log(limits[1] / limits[0]) / step + 1e-6))
        thresholds = limits[0] * ratio ** np.arange(count + 1)
    else:
        first, last = np.ceil(np.log(smallest / KM) / step - 1e-9), np.ceil(np.log(largest / KM) / step)
        thresholds = KM * ratio ** np.arange(first, last + 1)
    if thresholds.size < 4:
        raise DataError(
            f"separation thresholds: got {thresholds.size} between {smallest / KM:.3g} and {largest / KM:.3g} km at "
            f"ratio {ratio:g}; need at least 4; widen separations_km, lower separation_ratio or use longer records"
        )
    return thresholds


def resolved_range(statistics: ExitStatistics, credited, starts, position_error: float) -> Resolved:
    """The longest run of thresholds that meets every condition.

    Parameters
    ----------
    statistics : ExitStatistics
    credited : (n_row, n) float array
        Exits with credit for unfinished passages.
    starts : (n_pair,) float array [m]
        Start separations.
    position_error : float [m]
        Standard error of one coordinate of one fix.

    Returns
    -------
    Resolved

    Raises
    ------
    DataError
        If fewer than three intervals are resolved.

    Notes
    -----
    Below: thresholds of at least 15 position errors, at most a quarter of exits inside one sampling interval,
    nine of ten pairs started below half the threshold (a pair remembers the velocity of its start until it
    has about doubled). Above: five exits from three clusters, and half as many with the credit for unfinished passages.
    """
    rows = statistics.weight > 0
    exits = statistics.weight @ statistics.exits
    clusters = np.sum(statistics.exits[rows] > 0, axis=0)
    zero = np.nan_to_num(statistics.zero_fraction, nan=0.0)
    delta = statistics.thresholds[:-1]
    starts = np.sort(np.asarray(starts, float))
    below = np.searchsorted(starts, delta * (1 + 1e-9), side="right")
    half = np.searchsorted(starts, delta / MEMORY * (1 + 1e-9), side="right")
    conditions = {
        "position error": delta >= ERROR_MULTIPLE * position_error,
        "sampling interval": zero <= MOST_ZERO,
        "start separation": half >= FREED * np.maximum(below, 1),
    }
    least = min(LEAST_CLUSTERS, max(int(np.sum(np.any(statistics.time_at_risk[rows] > 0, axis=1))), 1))
    seen = (exits >= LEAST_EXITS) & (clusters >= least) & (2.0 * (statistics.weight @ credited) >= LEAST_EXITS)
    good = seen & np.all(list(conditions.values()), axis=0)
    edges = np.flatnonzero(np.diff(np.concatenate(([0], good.astype(int), [0]))))
    runs = edges.reshape(-1, 2)
    best = max(runs, key=lambda r: exits[r[0] : r[1]].sum() if r[1] > r[0] else 0, default=None)
    if best is None or best[1] - best[0] < 3:
        raise DataError(_unresolved(statistics, conditions, seen))
    first, last = int(best[0]), int(best[1])
    return Resolved(
        slice(first, last),
        float(statistics.thresholds[first]),
        float(statistics.thresholds[last]),
        (_below(conditions, seen, first), _above(statistics, conditions, seen, last)),
    )


def _below(conditions, seen, first: int) -> str:
    if first == 0:
        return "range of separations asked for or started from"
    failed = [name for name, ok in conditions.items() if not ok[first - 1]]
    return " and ".join(failed) if failed else "number of exits"


def _above(statistics: ExitStatistics, conditions, seen, last: int) -> str:
    if last == seen.size:
        return "range of separations asked for or reached"
    if seen[last]:
        return " and ".join(name for name, ok in conditions.items() if not ok[last])
    return "number of pairs whose record lasts until they exit"


def _unresolved(statistics: ExitStatistics, conditions, seen) -> str:
    km = statistics.thresholds / KM
    lost = {name: int(np.sum(seen & ~ok)) for name, ok in conditions.items()}
    why = ", ".join(f"{name} {count}" for name, count in lost.items() if count)
    few = int(np.sum(~seen))
    return (
        f"exit rates: fewer than 3 neighbouring separations are resolved between {km[0]:.3g} and {km[-1]:.3g} km; "
        f"{few} of {seen.size} have under {LEAST_EXITS} exits or {LEAST_CLUSTERS} clusters"
        + (f", and the others fail for: {why}" if why else "")
        + "; use more or longer records, closer pairs, or a smaller separation_ratio"
    )
