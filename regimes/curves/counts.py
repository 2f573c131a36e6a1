"""Histograms of the separation per row, time and start separation: what a fit of the distribution needs."""

from dataclasses import dataclass, fields, replace

import numpy as np

from regimes.arrays import frozen_array
from regimes.curves.dispersion import nearest_lags
from regimes.curves.passes import separation_pass, spans_and_rows
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_BLOCK = 1 << 16  # pairs at a time, so that no table of all pairs by all times is ever held
_INDICES = ("row", "time", "start", "separation")


@dataclass(frozen=True, slots=True)
class SeparationCounts:
    """Sparse counts of separations; entry i is ``count[i]`` at the four indices of entry i.

    Parameters
    ----------
    row, time, start, separation : (n_entry,) int arrays
        Row (see `Curve`), index into `times`, bin of the start separation and bin of the separation;
        bin i reaches from edge i, included, to edge i + 1. Entries are sorted and distinct.
    count : (n_entry,) float array
        Number of pairs.
    times : (n_time,) float array [s]
        Times since the start of the pair, whole numbers of steps.
    start_edges, separation_edges : float arrays [m]
        Edges of the bins.
    start_log_mean : (n_start,) float array
        Mean of ln(r0 / 1 m) over the pairs that start in each bin; NaN in a bin without pairs.
    start_count : (n_start,) int array
        Pairs that start in each bin.
    outside : (n_time,) int array
        Separations of pairs with a start bin that lie outside the separation edges.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters.
    """

    row: np.ndarray
    time: np.ndarray
    start: np.ndarray
    separation: np.ndarray
    count: np.ndarray
    times: np.ndarray
    start_edges: np.ndarray
    separation_edges: np.ndarray
    start_log_mean: np.ndarray
    start_count: np.ndarray
    outside: np.ndarray
    weight: np.ndarray

    def __post_init__(self) -> None:
        whole = (*_INDICES, "start_count", "outside")
        for field in fields(self):
            kind = np.int64 if field.name in whole else np.float64
            object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), kind))

    def total(self) -> np.ndarray:
        """(n_time, n_start, n_separation) counts over all rows, each pair once."""
        shape = (self.times.size, self.start_edges.size - 1, self.separation_edges.size - 1)
        flat = np.ravel_multi_index((self.time, self.start, self.separation), shape)
        return np.bincount(flat, self.weight[self.row] * self.count, np.prod(shape)).reshape(shape)

    def merge(self, other: "SeparationCounts") -> "SeparationCounts":
        """Counts of the clusters of both; the other's clusters must be different ones.

        Raises
        ------
        DataError
            If times or edges differ.
        """
        for name in ("times", "start_edges", "separation_edges"):
            if not np.array_equal(getattr(self, name), getattr(other, name)):
                raise DataError(
                    f"merge of separation counts: got different {name}; they must be the same; "
                    "compute both with the same ones"
                )
        joined = {n: np.concatenate([getattr(self, n), getattr(other, n)]) for n in (*_INDICES[1:], "count")}
        counts = self.start_count + other.start_count
        parts = [np.where(c.start_count > 0, c.start_log_mean, 0.0) * c.start_count for c in (self, other)]
        return replace(
            self,
            row=np.concatenate([self.row, other.row + self.weight.size]),
            **joined,
            start_log_mean=sum(parts) / np.where(counts > 0, counts, np.nan),
            start_count=counts,
            outside=self.outside + other.outside,
            weight=np.concatenate([self.weight, other.weight]),
        )


def separation_counts(
    tracks: Tracks, pairs: Pairs, times: np.ndarray, start_edges: np.ndarray, separation_edges: np.ndarray
) -> SeparationCounts:
    """Count separations per row, time since the start of the pair, start bin and separation bin.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    times : (n_time,) float array [s]
        Increasing; each is moved to the nearest step.
    start_edges, separation_edges : float arrays [m]
        Increasing. The last may be infinite and the first zero; with both, no separation is lost.

    Returns
    -------
    SeparationCounts

    Raises
    ------
    DataError
        If times or edges are not as required, or no pair starts within the start edges.
    """
    lags = nearest_lags(times, tracks.step)
    start_edges, separation_edges = _edges("start", start_edges), _edges("separation", separation_edges)
    spans, rows, weight = spans_and_rows(tracks, pairs)
    start, start_count, log_mean = _starts(pairs.start_separation, start_edges)
    shape = (weight.size, lags.size, start_edges.size - 1, separation_edges.size - 1)
    position = np.ascontiguousarray(tracks.position, dtype=float)
    codes, counts = np.empty(0, dtype=np.int64), np.empty(0)
    outside = np.zeros(lags.size, dtype=np.int64)
    inside = np.flatnonzero(start >= 0)
    for chosen in np.array_split(inside, max(1, -(-inside.size // _BLOCK))):
        found = np.empty((chosen.size, lags.size))
        separation_pass(position, bool(tracks.planar), spans[chosen], lags, found)
        where = _bins(found, separation_edges)
        outside += np.sum((where < 0) & np.isfinite(found), axis=0)
        new = _codes(where, start[chosen], rows[chosen], shape)
        codes, index = np.unique(np.concatenate([codes, new]), return_inverse=True)
        counts = np.bincount(index, np.concatenate([counts, np.ones(new.size)]), codes.size)
    indices = dict(zip(_INDICES, np.unravel_index(codes, shape), strict=True))
    return SeparationCounts(
        **indices,
        count=counts,
        times=lags * float(tracks.step),
        start_edges=start_edges,
        separation_edges=separation_edges,
        start_log_mean=log_mean,
        start_count=start_count,
        outside=outside,
        weight=weight,
    )


def _starts(separation: np.ndarray, edges: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Start bin of each pair (-1 outside), pairs in each bin and their mean ln r0."""
    start = np.where(separation > 0, _bins(separation, edges), -1)
    if not np.any(start >= 0):
        raise DataError(
            f"start edges: got {edges[0]:g} to {edges[-1]:g} m, and pairs that start at "
            f"{np.min(separation):g} to {np.max(separation):g} m; some pairs must start within the edges; "
            "choose edges around these separations"
        )
    used = start >= 0
    counts = np.bincount(start[used], minlength=edges.size - 1)
    logs = np.bincount(start[used], np.log(separation[used]), edges.size - 1)
    return start, counts, logs / np.where(counts > 0, counts, np.nan)


def _bins(values: np.ndarray, edges: np.ndarray) -> np.ndarray:
    """Bin of each value, -1 outside the edges or for NaN."""
    index = np.searchsorted(edges, values, side="right") - 1
    return np.where((values >= edges[0]) & (values < edges[-1]), index, -1)


def _codes(where: np.ndarray, start: np.ndarray, rows: np.ndarray, shape: tuple[int, ...]) -> np.ndarray:
    """One number per pair, time and row that a separation counts for."""
    pair, time = np.nonzero(where >= 0)
    found = []
    for k in range(rows.shape[1]):
        row = rows[pair, k]
        used = row >= 0
        index = (row[used], time[used], start[pair[used]], where[pair[used], time[used]])
        found.append(np.ravel_multi_index(index, shape))
    return np.concatenate(found)


def _edges(name: str, edges: np.ndarray) -> np.ndarray:
    edges = np.asarray(edges, dtype=float)
    if edges.ndim != 1 or edges.size < 2 or edges[0] < 0 or not np.all(np.diff(edges) > 0):
        raise DataError(
            f"{name} edges: got {np.array2string(edges, threshold=6)} m; must be two or more numbers >= 0, "
            "each larger than the one before; sort them and drop repeats"
        )
    return edges
