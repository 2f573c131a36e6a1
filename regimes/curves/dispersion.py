"""Moments of the separation against time since the start of each pair."""

from dataclasses import dataclass, fields, replace

import numpy as np

from regimes.arrays import frozen_array
from regimes.curves.covariance import influence_covariance
from regimes.curves.passes import dispersion_pass, spans_and_rows
from regimes.curves.record import Curve
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_SUMS = ("count", "square", "east_square", "north_square", "east_north", "fourth", "log", "log_count")


@dataclass(frozen=True, slots=True)
class Kurtosis:
    r"""Kurtosis of the separation, :math:`\overline{r^4} / \overline{r^2}^2`; errors by the delta method.

    Parameters
    ----------
    axis : (n_time,) float array [s]
        Time since the start of the pair.
    value : (n_time,) float array
        NaN where there are no pairs.
    influence : (n_row, n_time) float array
        Share of each row in the error.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters.
    n_cluster : (n_time,) int array
        Clusters that contribute.
    n_sample : (n_time,) float array
        Pairs that contribute; the kurtosis of a sample cannot exceed their number.
    """

    axis: np.ndarray
    value: np.ndarray
    influence: np.ndarray
    weight: np.ndarray
    n_cluster: np.ndarray
    n_sample: np.ndarray

    @property
    def covariance(self) -> np.ndarray:
        """(n_time, n_time) covariance of the values."""
        return influence_covariance(self.influence, self.weight, self.n_cluster)

    @property
    def standard_error(self) -> np.ndarray:
        """(n_time,) standard error; NaN with fewer than two clusters."""
        return np.sqrt(np.diag(self.covariance))


@dataclass(frozen=True, slots=True)
class DispersionStatistics:
    """Sums of powers of the separation per row and time since the start of the pair.

    Parameters
    ----------
    times : (n_time,) float array [s]
        Whole numbers of steps.
    count : (n_row, n_time) float array
        Pairs with a separation at that time.
    square, east_square, north_square, east_north : (n_row, n_time) float arrays [m2]
        Sums of r^2, of its east and north parts, and of the product east times north.
    fourth : (n_row, n_time) float array [m4]
        Sum of r^4.
    log : (n_row, n_time) float array
        Sum of ln(r / 1 m) over separations above zero.
    log_count : (n_row, n_time) float array
        Separations above zero.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters; see `Curve`.
    step : float [s]
        Interval between samples.
    """

    times: np.ndarray
    count: np.ndarray
    square: np.ndarray
    east_square: np.ndarray
    north_square: np.ndarray
    east_north: np.ndarray
    fourth: np.ndarray
    log: np.ndarray
    log_count: np.ndarray
    weight: np.ndarray
    step: float

    def __post_init__(self) -> None:
        for field in fields(self):
            if field.name != "step":
                object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), np.float64))

    def relative_dispersion(self) -> Curve:
        """Mean squared separation, both components together [m2]."""
        return self._mean("relative dispersion", self.square, self.count, "m2")

    def east(self) -> Curve:
        """Mean squared east component of the separation (x on a plane) [m2]."""
        return self._mean("east dispersion", self.east_square, self.count, "m2")

    def north(self) -> Curve:
        """Mean squared north component of the separation (y on a plane) [m2]."""
        return self._mean("north dispersion", self.north_square, self.count, "m2")

    def cross(self) -> Curve:
        """Mean product of the east and north components of the separation [m2]."""
        return self._mean("east-north dispersion", self.east_north, self.count, "m2")

    def mean_log_separation(self) -> Curve:
        """Mean of ln(r / 1 m) over separations above zero."""
        return self._mean("mean log separation", self.log, self.log_count, "ln m")

    @property
    def n_zero(self) -> np.ndarray:
        """(n_time,) separations of exactly zero, which have no logarithm."""
        return self.weight @ (self.count - self.log_count)

    def kurtosis(self) -> Kurtosis:
        """Kurtosis of the separation."""
        square = self.relative_dispersion()
        fourth = self._mean("fourth moment", self.fourth, self.count, "m4")
        m2, m4 = square.value, fourth.value
        m2 = np.where(m2 > 0, m2, np.nan)
        influence = fourth.influence / m2**2 - 2.0 * m4 / m2**3 * square.influence
        return Kurtosis(self.times, m4 / m2**2, influence, self.weight, square.n_cluster, self.weight @ self.count)

    def merge(self, other: "DispersionStatistics") -> "DispersionStatistics":
        """Statistics of the clusters of both; the other's clusters must be different ones.

        Raises
        ------
        DataError
            If the times differ.
        """
        if not np.array_equal(self.times, other.times):
            raise DataError(
                f"merge of dispersion statistics: got {self.times.size} and {other.times.size} times; "
                "they must be the same; compute both at the same times"
            )
        names = (*_SUMS, "weight")
        return replace(self, **{n: np.concatenate([getattr(self, n), getattr(other, n)]) for n in names})

    def _mean(self, name: str, total: np.ndarray, count: np.ndarray, unit: str) -> Curve:
        return Curve(name, "time", self.times, total, count, self.weight, unit)


def default_times(pairs: Pairs, step: float, n: int = 40) -> np.ndarray:
    """About `n` times from one step to the end of the longest pair, evenly spaced in their logarithm [s]."""
    last = int(pairs.length.max()) - 1
    if last < 1:
        raise DataError("times: got pairs of a single step each; need at least two; use longer records")
    return np.unique(np.rint(np.geomspace(1, last, n))) * step


def nearest_lags(times: np.ndarray, step: float) -> np.ndarray:
    """Whole steps nearest to times since the start of the pair.

    Raises
    ------
    DataError
        If a time is negative or not finite, or two times fall on the same step.
    """
    times = np.asarray(times, dtype=float)
    if times.ndim != 1 or times.size == 0 or not np.all(np.isfinite(times)) or np.any(times < 0):
        raise DataError(
            f"times: got {np.array2string(times, threshold=6)} s; must be finite numbers >= 0, at least one; "
            "count them from the start of the pair"
        )
    lags = np.rint(times / step).astype(np.int64)
    if np.any(np.diff(lags) <= 0):
        raise DataError(
            f"times: got {np.array2string(times, threshold=6)} s; must increase from step to step, and a "
            f"step is {step:g} s; drop times that are too close"
        )
    return lags


def dispersion_statistics(tracks: Tracks, pairs: Pairs, times: np.ndarray) -> DispersionStatistics:
    """Moments of the separation of every pair at times since its start.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    times : (n_time,) float array [s]
        Increasing; each is moved to the nearest step.

    Returns
    -------
    DispersionStatistics

    Raises
    ------
    DataError
        If times are negative, not finite or fall on the same step.
    """
    lags = nearest_lags(times, tracks.step)
    spans, rows, weight = spans_and_rows(tracks, pairs)
    sums = np.zeros((weight.size, lags.size, len(_SUMS)))
    position = np.ascontiguousarray(tracks.position, dtype=float)
    dispersion_pass(position, bool(tracks.planar), spans, rows, lags, sums)
    named = dict(zip(_SUMS, np.moveaxis(sums, -1, 0), strict=True))
    return DispersionStatistics(lags * float(tracks.step), **named, weight=weight, step=float(tracks.step))
