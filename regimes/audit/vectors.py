"""Separation vectors of pairs, in time; and pairs made of such vectors."""

from dataclasses import dataclass, fields, replace

import numpy as np
from scipy.stats import f as fisher

from regimes.arrays import frozen_array
from regimes.curves.passes import spans_and_rows
from regimes.geodesy import separation
from regimes.pairs import Pairs
from regimes.tracks import Tracks

MOST_SAMPLES = 3_000_000  # of pairs that are looked at; 60 pairs of 90 days each hour have 130 000


@dataclass(frozen=True, slots=True)
class Vectors:
    """East and north parts of the separation of every pair at every step, one pair after the other.

    Parameters
    ----------
    place : (n_sample, 2) float array [m]
        NaN in gaps.
    offset : (n_pair + 1,) int array
        Pair i owns rows ``offset[i]:offset[i + 1]``.
    table : (n_pair, 3) int array
        Rows of the sums to which each pair adds, -1 for none; see `Groups`.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters.
    """

    place: np.ndarray
    offset: np.ndarray
    table: np.ndarray
    weight: np.ndarray

    def __post_init__(self) -> None:
        for field, kind in zip(fields(self), (np.float64, np.int64, np.int64, np.float64), strict=True):
            object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), kind))

    @property
    def pair(self) -> np.ndarray:
        """(n_sample,) int array: the pair of each sample."""
        return np.repeat(np.arange(self.offset.size - 1), np.diff(self.offset))

    @property
    def last(self) -> np.ndarray:
        """(n_sample,) bool array: the last sample of each pair."""
        out = np.zeros(len(self.place), bool)
        out[self.offset[1:] - 1] = True
        return out

    def row_sums(self, of_pair: np.ndarray) -> np.ndarray:
        """Sums (n_row, ...) over the pairs of each row, from values (n_pair, ...)."""
        out = np.zeros((self.weight.size, *of_pair.shape[1:]))
        for column in self.table.T:
            used = column >= 0
            np.add.at(out, column[used], of_pair[used])
        return out

    def pair_sums(self, of_sample: np.ndarray) -> np.ndarray:
        """Sums (n_pair, ...) over the samples of each pair; NaN counts as zero."""
        return np.add.reduceat(np.nan_to_num(of_sample), self.offset[:-1], axis=0)


def separation_vectors(tracks: Tracks, pairs: Pairs) -> Vectors:
    """The separation vectors of all pairs, from the first member to the second."""
    spans, table, weight = spans_and_rows(tracks, pairs)
    offset = np.concatenate(([0], np.cumsum(spans[:, 2])))
    into = np.arange(offset[-1]) - np.repeat(offset[:-1], spans[:, 2])
    one, two = (np.repeat(spans[:, k], spans[:, 2]) + into for k in (0, 1))
    _, east, north = separation(tracks.position[one], tracks.position[two], tracks.planar)
    return Vectors(np.stack([east, north], axis=1), offset, table, weight)


def fewer(pairs: Pairs, most: int = MOST_SAMPLES) -> Pairs:
    """The pairs themselves, or every so many-th of them where they have more samples than `most`."""
    return pairs.select(slice(None, None, max(1, -(-int(pairs.length.sum()) // most))))


def as_pairs(tracks: Tracks, pairs: Pairs, vectors: Vectors) -> tuple[Tracks, Pairs]:
    """Pairs with the given separation vectors: the first member of each at rest on a plane, clusters as they were.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        From which the vectors come.
    vectors : Vectors
        Changed ones, of the same lengths.

    Returns
    -------
    tracks : Tracks
        Two to a pair.
    pairs : Pairs
        With start separations as they are now.
    """
    n = pairs.n_pair
    length = np.diff(vectors.offset)
    offset = np.concatenate(([0], np.cumsum(np.repeat(length, 2))))
    position = np.zeros((offset[-1], 3))
    moved = np.repeat(offset[1:-1:2], length) + np.arange(len(vectors.place)) - np.repeat(vectors.offset[:-1], length)
    position[moved, :2] = vectors.place
    cluster = np.stack([pairs.cluster[pairs.first], pairs.cluster[pairs.second]], axis=1).ravel()
    start = np.hypot(*vectors.place[vectors.offset[:-1]].T)
    again = Tracks(
        position=position,
        offset=offset,
        start_step=np.repeat(pairs.begin, 2),
        step=tracks.step,
        first_time=tracks.first_time,
        planar=True,
        labels=tuple(str(i) for i in range(2 * n)),
        release=cluster,
        position_error=tracks.position_error,
    )
    one = 2 * np.arange(n)
    return again, replace(pairs, first=one, second=one + 1, cluster=cluster, start_separation=start)


def mean_is_zero(rows: np.ndarray, weight: np.ndarray) -> float:
    r"""p-value of the hypothesis that scores summed over clusters have mean zero, by Hotelling's test.

    .. math:: q = s^T J^{-1} s, \quad s = \sum_i w_i u_i, \quad J = \sum_i w_i u_i u_i^T, \quad
              F = \frac{C - p}{p} \frac{q}{C - q}

    Parameters
    ----------
    rows : (n_row, p) float array
        Scores u of clusters, and of couples of clusters.
    weight : (n_row,) float array
        w, +1 and -1.

    Returns
    -------
    float
        NaN with fewer than p + 2 clusters, or where J is no covariance.

    Notes
    -----
    J is taken under the hypothesis; F has p and C - p degrees of freedom if the scores are normal, and the test errs to
    the safe side if their sizes are very unequal.

    References
    ----------
    Hotelling (1931) Ann. Math. Stat. 2, 360; Aronow, Samii & Assenova (2015) Political Analysis 23, 564, for couples.
    """
    used = np.any(rows != 0, axis=1)
    rows, weight = rows[used], weight[used]
    size, clusters = rows.shape[1], int(np.sum(weight > 0))
    if clusters < size + 2:
        return float("nan")
    total = weight @ rows
    scatter = rows.T @ (weight[:, None] * rows)
    scale = np.sqrt(np.diag(scatter).clip(min=0.0))
    if not np.all(scale > 0) or np.min(np.linalg.eigvalsh(scatter / np.outer(scale, scale))) < 1e-9:
        return float("nan")
    q = float(total @ np.linalg.solve(scatter, total))
    if q >= clusters:
        return 0.0
    return float(fisher.sf((clusters - size) / size * q / (clusters - q), size, clusters - size))
