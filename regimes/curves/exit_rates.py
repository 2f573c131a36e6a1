"""Exponents as rates: exits over time at risk, so that records that end early bias nothing."""

from dataclasses import dataclass, fields, replace

import numpy as np

from regimes.arrays import frozen_array
from regimes.curves.passes import exit_pass, guarded_levels, spans_and_rows
from regimes.curves.record import Curve
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_PER_ROW = (
    "exits",
    "time_at_risk",
    "finished_time",
    "at_once",
    "start_over",
    "start_over_square",
    "exit_over",
    "exit_over_square",
)
_TOTALS = ("passages", "zero_length", "censored")
_LOOSE = ("loose_row", "loose_interval", "loose_log")
_BLOCK = 1 << 16  # pairs at a time, so that the table of unfinished passages stays small


@dataclass(frozen=True, slots=True)
class ExitStatistics:
    r"""First passages between successive separation thresholds, summed over the pairs of each row.

    A passage at threshold n starts at the first recorded sample at or beyond delta_n and ends at the first
    at or beyond delta_(n+1) (an exit), or at the last sample before a gap or the end of the record
    (censored). A pair counts at n only if its record starts at or below delta_n and the crossing of delta_n
    was seen.

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
        delta, increasing.
    exits : (n_row, n) float array
        E, passages that ended in an exit, zero-length ones included.
    time_at_risk : (n_row, n) float array [s]
        S, duration of all passages, finished or not.
    finished_time : (n_row, n) float array [s]
        Duration of the passages that ended in an exit.
    at_once : (n_row, n) float array
        Zero-length exits.
    start_over, start_over_square, exit_over, exit_over_square : (n_row, n) float arrays
        Of all other passages: sums of u and u^2, u = ln(r / threshold) at the samples where they start (threshold
        n) and exit (threshold n + 1), since samples never fall on a threshold.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters; see `Curve`.
    passages, zero_length, censored : (n,) int arrays
        Passages begun, exits whose both ends fall on one sample, and passages without an exit.
    loose_row, loose_interval : (m,) int arrays
        Row and interval of every unfinished passage; a pair of two clusters stands in all its rows.
    loose_log : (m,) float array
        ln(r / 1 m) where the unfinished passage was last seen.
    step : float [s]
        Interval between samples.
    """

    thresholds: np.ndarray
    exits: np.ndarray
    time_at_risk: np.ndarray
    finished_time: np.ndarray
    at_once: np.ndarray
    start_over: np.ndarray
    start_over_square: np.ndarray
    exit_over: np.ndarray
    exit_over_square: np.ndarray
    weight: np.ndarray
    passages: np.ndarray
    zero_length: np.ndarray
    censored: np.ndarray
    loose_row: np.ndarray
    loose_interval: np.ndarray
    loose_log: np.ndarray
    step: float

    def __post_init__(self) -> None:
        for field in fields(self):
            if field.name != "step":
                whole = field.name in (*_TOTALS, "loose_row", "loose_interval")
                kind = np.int64 if whole else np.float64
                object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), kind))

    @property
    def separation(self) -> np.ndarray:
        """(n,) lower threshold of each interval [m]."""
        return self.thresholds[:-1]

    @property
    def log_ratio(self) -> np.ndarray:
        """(n,) ln of the ratio of successive thresholds."""
        return np.diff(np.log(self.thresholds))

    @property
    def n_pair(self) -> np.ndarray:
        """(n,) pairs that contribute; a pair passes each threshold for the first time only once."""
        return self.passages

    @property
    def n_cluster(self) -> np.ndarray:
        """(n,) clusters with an exit or time at risk."""
        rows = self.weight > 0
        return np.sum((self.exits[rows] > 0) | (self.time_at_risk[rows] > 0), axis=0)

    @property
    def zero_fraction(self) -> np.ndarray:
        """(n,) share of exits within one sample, which tells where the sampling interval stops resolving."""
        exits = self.passages - self.censored
        return np.divide(self.zero_length, np.where(exits > 0, exits, np.nan))

    @property
    def textbook_rate(self) -> np.ndarray:
        """(n,) ln(ratio) over the mean time of the passages that ended in an exit [1/s].

        The usual estimate; too high wherever records end before slow pairs exit.
        """
        time = self.weight @ self.finished_time
        return self.log_ratio * (self.weight @ self.exits) / np.where(time > 0, time, np.nan)

    @property
    def censored_fraction(self) -> np.ndarray:
        """(n,) share of passages without an exit."""
        return np.divide(self.censored, np.where(self.passages > 0, self.passages, np.nan))

    def curve(self) -> Curve:
        r"""Finite-scale Lyapunov exponent against separation.

        .. math:: \lambda_n = \ln\frac{\delta_{n+1}}{\delta_n}\,\frac{\sum_g w_g E_{gn}}{\sum_g w_g S_{gn}}

        Returns
        -------
        Curve
            In 1/s, at the lower threshold of each interval.
        """
        return Curve(
            name="finite-scale Lyapunov exponent",
            axis_name="separation",
            axis=self.separation,
            numerator=self.exits * self.log_ratio,
            denominator=self.time_at_risk,
            weight=self.weight,
            unit="1/s",
        )

    def select(self, intervals: slice) -> "ExitStatistics":
        """Statistics of some neighbouring intervals.

        Raises
        ------
        DataError
            If the slice has a step other than one or selects nothing.
        """
        start, stop, step = intervals.indices(self.separation.size)
        if step != 1 or stop <= start:
            raise DataError(
                f"select: got {intervals}; must select at least one of {self.separation.size} intervals, "
                "neighbours in order; use slice(start, stop)"
            )
        cut = slice(start, stop)
        kept = (self.loose_interval >= start) & (self.loose_interval < stop)
        return replace(
            self,
            thresholds=self.thresholds[start : stop + 1],
            **{name: getattr(self, name)[:, cut] for name in _PER_ROW},
            **{name: getattr(self, name)[cut] for name in _TOTALS},
            loose_row=self.loose_row[kept],
            loose_interval=self.loose_interval[kept] - start,
            loose_log=self.loose_log[kept],
        )

    def merge(self, other: "ExitStatistics") -> "ExitStatistics":
        """Statistics of the clusters of both; the other's clusters must be different ones.

        Raises
        ------
        DataError
            If thresholds or the sampling interval differ.
        """
        if not np.array_equal(self.thresholds, other.thresholds) or self.step != other.step:
            raise DataError(
                f"merge of exit statistics: got {self.thresholds.size} thresholds at {self.step:g} s and "
                f"{other.thresholds.size} at {other.step:g} s; thresholds and interval must be the same; "
                "compute both with the same ones"
            )
        joined = {n: np.concatenate([getattr(self, n), getattr(other, n)]) for n in (*_PER_ROW, "weight")}
        added = {n: getattr(self, n) + getattr(other, n) for n in _TOTALS}
        loose = {n: np.concatenate([getattr(self, n), getattr(other, n)]) for n in _LOOSE[1:]}
        rows = np.concatenate([self.loose_row, other.loose_row + self.weight.size])
        return replace(self, **joined, **added, **loose, loose_row=rows)


def exit_statistics(tracks: Tracks, pairs: Pairs, thresholds: np.ndarray) -> ExitStatistics:
    """Exits and time at risk of every pair between successive separations.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    thresholds : (n + 1,) float array [m]
        Positive and increasing, at least two.

    Returns
    -------
    ExitStatistics

    Raises
    ------
    DataError
        If the thresholds are not as required.

    References
    ----------
    First passages along a chain of separations: Artale et al. 1997, Phys. Fluids 9, 3162. Exits over time
    at risk is the maximum-likelihood rate under censoring.
    """
    thresholds = np.ascontiguousarray(thresholds, dtype=float)
    good = thresholds.ndim == 1 and thresholds.size >= 2 and np.all(np.isfinite(thresholds))
    if not good or thresholds[0] <= 0 or np.any(np.diff(thresholds) <= 0):
        raise DataError(
            f"separation thresholds: got {np.array2string(thresholds, threshold=6)} m; must be two or more "
            "positive numbers, each larger than the one before; sort them and drop repeats"
        )
    spans, rows, weight = spans_and_rows(tracks, pairs)
    sums = np.zeros((len(_PER_ROW), weight.size, thresholds.size - 1))
    totals = np.zeros((3, thresholds.size - 1), dtype=np.int64)
    levels = guarded_levels(thresholds, tracks.planar)
    position = np.ascontiguousarray(tracks.position, dtype=float)
    found = []
    for chosen in np.array_split(np.arange(len(spans)), max(1, -(-len(spans) // _BLOCK))):
        loose = np.empty((chosen.size * (thresholds.size - 1), 3))
        part = (spans[chosen], rows[chosen])
        count = exit_pass(position, bool(tracks.planar), *part, levels, sums, (totals, loose))
        found.append(_spread(loose[:count], part[1]))
    sums[1:3] *= tracks.step
    return ExitStatistics(
        thresholds,
        **dict(zip(_PER_ROW, sums, strict=True)),
        weight=weight,
        **dict(zip(_TOTALS, totals, strict=True)),
        **dict(zip(_LOOSE, np.concatenate(found, axis=1), strict=True)),
        step=float(tracks.step),
    )


def _spread(loose: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Unfinished passages (3, m) as row, interval and last ln r, once for each row of their pair."""
    pair_rows = rows[loose[:, 0].astype(np.int64)]
    entry, column = np.nonzero(pair_rows >= 0)
    return np.stack([pair_rows[entry, column].astype(float), loose[entry, 1], loose[entry, 2]])
