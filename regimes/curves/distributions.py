"""Separation distributions at chosen times, and Kolmogorov-Smirnov distances whose p-values respect clusters."""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from regimes.arrays import frozen_array
from regimes.curves.dispersion import nearest_lags
from regimes.curves.passes import separation_pass, spans_and_rows
from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_GRID = 400  # separations at which distributions are compared
_LEAST_CLUSTERS = 6


@dataclass(frozen=True, slots=True)
class SeparationSample:
    """Separations of pairs at one time.

    Parameters
    ----------
    time : float [s]
        Since the start of each pair.
    separation : (n,) float array [m]
    cluster : (n,) int array
        Independent unit of each; clusters connected by a pair are one unit.
    """

    time: float
    separation: np.ndarray
    cluster: np.ndarray

    def __post_init__(self) -> None:
        object.__setattr__(self, "separation", frozen_array(self.separation, np.float64))
        object.__setattr__(self, "cluster", frozen_array(self.cluster, np.int64))
        if self.separation.shape != self.cluster.shape or self.separation.ndim != 1:
            raise DataError(
                f"separation sample: got {self.separation.shape} separations and {self.cluster.shape} clusters; "
                "must be as many; give each separation its cluster"
            )
        if not np.all(np.isfinite(self.separation)):
            raise DataError("separation sample: got separations that are not finite; must be numbers; leave them out")

    def cumulative(self, separation) -> np.ndarray:
        """Share of the pairs at or below each separation [m]; NaN in an empty sample."""
        if not self.separation.size:
            return np.full(np.shape(separation), np.nan)
        return np.searchsorted(np.sort(self.separation), separation, side="right") / self.separation.size


@dataclass(frozen=True, slots=True)
class Distance:
    """Kolmogorov-Smirnov distance.

    Parameters
    ----------
    distance : float
        Largest difference of the two cumulative distributions.
    at : float [m]
        Separation where it occurs.
    p_value : float
        Probability of a distance as large if the distributions are the same; clusters are the independent unit.
    clusters : int
    """

    distance: float
    at: float
    p_value: float
    clusters: int


def separation_samples(tracks: Tracks, pairs: Pairs, times) -> tuple[SeparationSample, ...]:
    """Separations of all pairs at times since their start.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    times : (n_time,) float array [s]
        Increasing; each is moved to the nearest step.

    Returns
    -------
    tuple of SeparationSample

    Raises
    ------
    DataError
        If times are negative, not finite or fall on the same step.
    """
    lags = nearest_lags(times, tracks.step)
    spans, _, _ = spans_and_rows(tracks, pairs)
    out = np.empty((pairs.n_pair, lags.size))
    separation_pass(np.ascontiguousarray(tracks.position, dtype=float), bool(tracks.planar), spans, lags, out)
    unit = _units(pairs)
    found = []
    for k, lag in enumerate(lags):
        seen = np.isfinite(out[:, k])
        found.append(SeparationSample(float(lag * tracks.step), out[seen, k], unit[seen]))
    return tuple(found)


def _units(pairs: Pairs) -> np.ndarray:
    """Independent unit of each pair: clusters that a pair connects count as one."""
    one, two = pairs.cluster[pairs.first], pairs.cluster[pairs.second]
    links = coo_array((np.ones(one.size), (one, two)), shape=(pairs.n_cluster, pairs.n_cluster))
    return connected_components(links, directed=False)[1][one].astype(np.int64)


def distance_to(sample: SeparationSample, cumulative, seed: int, n: int = 1999) -> Distance:
    r"""Distance of a sample to a given distribution.

    .. math:: D = \sup_r |F_n(r) - F(r)|, \quad
              D^* = \sup_r \frac{1}{n} \Big| \sum_c \xi_c \sum_{p \in c} [1(r_p \le r) - F(r)] \Big|

    Parameters
    ----------
    sample : SeparationSample
    cumulative : callable
        F, from separations [m] to 0..1, with no parameter fitted to the sample.
    seed : int
    n : int
        Number of bootstrap draws of the signs xi_c.

    Raises
    ------
    DataError
        If there are fewer than six clusters, or F leaves 0 to 1 or falls.

    Notes
    -----
    Signs turn whole clusters about the hypothesis, which holds the size with few clusters.

    References
    ----------
    Cameron, Gelbach & Miller (2008) Rev. Econ. Stat. 90, 414 (wild cluster bootstrap, null imposed).
    """
    names, unit = np.unique(sample.cluster, return_inverse=True)
    _enough(names.size, "distance to a distribution")
    grid = np.sort(sample.separation)
    expected = np.asarray(cumulative(grid), float)
    if not np.all((expected >= 0) & (expected <= 1)) or np.any(np.diff(expected) < -1e-9):
        raise DataError(
            "distance to a distribution: got cumulative values that leave 0 to 1 or fall; must rise from 0 to 1; give "
            "the cumulative distribution"
        )
    upper = np.arange(1, grid.size + 1) / grid.size - expected
    lower = expected - np.arange(grid.size) / grid.size
    gap = np.maximum(upper, lower)
    chosen = _thinned(grid)
    deviation = _counts(sample.separation, unit, names.size, chosen)
    size = np.bincount(unit, minlength=names.size)
    deviation -= size[:, None] * np.asarray(cumulative(chosen), float)
    signs = np.random.default_rng(seed).choice([-1.0, 1.0], size=(n, names.size))
    drawn = np.max(np.abs(signs @ deviation), axis=1) / sample.separation.size
    observed = float(np.max(np.abs(deviation.sum(axis=0)))) / sample.separation.size
    return Distance(float(gap.max()), float(grid[np.argmax(gap)]), _share(drawn, observed), int(names.size))


def distance_between(one: SeparationSample, two: SeparationSample, seed: int, n: int = 1999) -> Distance:
    r"""Distance between two samples, for instance launched and chance pairs, or two launch sites.

    .. math:: D = \sup_r |F_1(r) - F_2(r)|

    Parameters
    ----------
    one, two : SeparationSample
        Clusters with the same number are the same cluster.
    seed : int
    n : int
        Number of permutations.

    Raises
    ------
    DataError
        If a sample is empty or there are fewer than six clusters.

    Notes
    -----
    A cluster seen in one sample only moves between them as a whole; what a cluster has in both is exchanged as a
    whole. The p-value is exact when clusters are exchangeable, sizes included.
    """
    names, unit = np.unique(np.concatenate([one.cluster, two.cluster]), return_inverse=True)
    _enough(names.size, "distance between samples")
    if not (one.separation.size and two.separation.size):
        raise DataError("distance between samples: got an empty sample; both need separations; choose an earlier time")
    grid = _thinned(np.sort(np.concatenate([one.separation, two.separation])))
    counts, sizes = [], []
    for sample, who in zip((one, two), np.split(unit, [one.separation.size]), strict=True):
        counts.append(_counts(sample.separation, who, names.size, grid))
        sizes.append(np.bincount(who, minlength=names.size).astype(float))
    both = (sizes[0] > 0) & (sizes[1] > 0)
    first_only = (sizes[0] > 0) & ~both
    rng = np.random.default_rng(seed)
    gap = _gap(counts, sizes, np.zeros(names.size, bool))
    drawn = np.empty(n)
    single = np.flatnonzero(~both)
    for i in range(n):
        swap = both & (rng.random(names.size) < 0.5)
        given = rng.permutation(first_only[single])
        swap[single] = given != first_only[single]
        drawn[i] = np.max(_gap(counts, sizes, swap))
    return Distance(float(gap.max()), float(grid[np.argmax(gap)]), _share(drawn, float(gap.max())), int(names.size))


def _gap(counts, sizes, swap) -> np.ndarray:
    """Difference of the two distributions after the clusters in `swap` changed sides; 1 if a side is empty."""
    stay = (~swap).astype(float)
    move = swap.astype(float)
    n1, n2 = stay @ sizes[0] + move @ sizes[1], stay @ sizes[1] + move @ sizes[0]
    if n1 == 0 or n2 == 0:
        return np.ones(counts[0].shape[1])
    return np.abs((stay @ counts[0] + move @ counts[1]) / n1 - (stay @ counts[1] + move @ counts[0]) / n2)


def _counts(separation, unit, n_unit: int, grid) -> np.ndarray:
    """(n_unit, n_grid) pairs of each cluster at or below each separation."""
    out = np.zeros((n_unit, grid.size + 1))
    np.add.at(out, (unit, np.searchsorted(grid, separation, side="left")), 1.0)
    return np.cumsum(out, axis=1)[:, :-1]


def _thinned(grid) -> np.ndarray:
    if grid.size <= _GRID:
        return grid
    return grid[np.unique(np.rint(np.linspace(0, grid.size - 1, _GRID)).astype(int))]


def _share(drawn, observed: float) -> float:
    return float((1 + np.sum(drawn >= observed * (1 - 1e-12))) / (1 + drawn.size))


def _enough(n: int, what: str) -> None:
    if n < _LEAST_CLUSTERS:
        raise DataError(
            f"{what}: got {n} clusters; at least {_LEAST_CLUSTERS} are needed for a p-value; use more releases"
        )
