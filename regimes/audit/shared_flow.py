"""Do clusters that are near one another at the same time separate alike? Then they are not independent."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.passes import spans_and_rows
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_BINS = 12  # of ln r, over which the mean and the spread of growth are removed
_LEAST_IN_BIN = 3
_MOST_UNITS = 200
_LONGEST_MEMORY = 30


@dataclass(frozen=True, slots=True)
class SharedFlow:
    """Agreement of the growth of pairs between clusters.

    Parameters
    ----------
    z : float
        Summed products of growth over their standard error if clusters were independent; NaN where no two clusters are
        near one another at the same time.
    correlation : float
        Of the growth of near clusters; NaN likewise.
    couples : int
        Couples of clusters that are near one another at some time.
    near : (n_cluster, n_cluster) float array
        Share of their common time over which each couple i < j is near; zeros elsewhere.
    """

    z: float
    correlation: float
    couples: int
    near: np.ndarray

    def effective(self, exits) -> float:
        r"""Effective number of clusters of correlated growth, from their exits (n_cluster,).

        .. math:: C = \frac{(\sum_c E_c)^2}{\sum_c E_c^2 + 2 \rho \sum_{c<d} s_{cd} E_c E_d}

        rho is the correlation, s the share of their time that two clusters are near one another.
        """
        share = np.asarray(exits, float)
        rho = float(np.clip(self.correlation, 0.0, 1.0)) if np.isfinite(self.correlation) else 0.0
        square = float(np.sum(share**2) + 2.0 * rho * (share @ self.near @ share))
        return float(share.sum() ** 2 / square) if square > 0 else 0.0


def shared_flow(tracks: Tracks, pairs: Pairs, interval: float, near: float) -> SharedFlow:
    r"""Correlation of growth between clusters at the same time and near the same place.

    .. math:: z = \frac{\sum_{c<d} \sum_{t: near} g_c(t)\, g_d(t)}
              {\left[ \sum_{c<d} N_{cd} (C_0^2 + 2 \sum_k (1 - k / N_{cd}) C_k^2) \right]^{1/2}}

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        Only those inside one cluster are used.
    interval : float [s]
        Over which growth is taken; whole steps of the tracks are used.
    near : float [m]
        Clusters whose pairs are nearer count as near, pairs that are smaller count as inside the same eddies.

    Returns
    -------
    SharedFlow

    Notes
    -----
    g is the growth of ln r, less its mean and over its spread at that separation, averaged over the pairs of a cluster;
    C_k its pooled autocovariance at lag k, N the times at which two clusters are near. Independent clusters give z
    of mean 0 and variance 1 whatever the memory of the flow (variance of a sum of products of two independent
    stationary series, Bartlett 1946, J. R. Stat. Soc. Suppl. 8, 27, from memory).
    """
    inside = pairs.select(pairs.cluster[pairs.first] == pairs.cluster[pairs.second])
    names = np.unique(inside.cluster[inside.first])
    names = names[:: max(1, -(-names.size // _MOST_UNITS))]
    chunk = max(1, round(interval / tracks.step))
    growth, place = _series(tracks, inside.select(np.isin(inside.cluster[inside.first], names)), names, chunk, near)
    count, total = _products(growth, place, near)
    memory = _autocovariance(growth)
    variance = _variance(count, memory)
    couples = int(np.sum(count > 0))
    seen = np.isfinite(growth).astype(float)
    common = seen @ seen.T
    near_share = np.zeros((pairs.n_cluster, pairs.n_cluster))
    near_share[np.ix_(names, names)] = count / np.maximum(common, 1.0)
    if not variance > 0:
        return SharedFlow(np.nan, np.nan, couples, near_share)
    z = float(total.sum() / np.sqrt(variance))
    return SharedFlow(z, float(total.sum() / (count.sum() * memory[0])), couples, near_share)


def _series(tracks: Tracks, pairs: Pairs, names, chunk: int, near: float) -> tuple[np.ndarray, np.ndarray]:
    """Growth (n, n_time) and middle (n, n_time, 3) of each cluster on one clock of `chunk` steps; NaN where none."""
    spans, _, _ = spans_and_rows(tracks, pairs)
    code = np.searchsorted(names, pairs.cluster[pairs.first])
    ends = (pairs.begin + pairs.length - 1) // chunk
    number = int(ends.max(initial=0)) + 1
    growth = np.full((pairs.n_pair, number), np.nan)
    log_r = np.full((pairs.n_pair, number), np.nan)
    middle = np.zeros((names.size, number, 3))
    weight = np.zeros((names.size, number))
    for p in range(pairs.n_pair):
        times = np.arange(-(-pairs.begin[p] // chunk), ends[p] + 1)
        lag = times * chunk - pairs.begin[p]
        one, two = (tracks.position[spans[p, k] + lag] for k in (0, 1))
        r = np.linalg.norm(one - two, axis=1)
        log_r[p, times] = np.log(np.where(r > 0, r, np.nan))
        seen = np.isfinite(log_r[p, times])
        middle[code[p], times[seen]] += 0.5 * (one + two)[seen]
        weight[code[p], times[seen]] += 1.0
    growth[:, :-1] = np.diff(log_r, axis=1)
    growth[~(log_r < np.log(near))] = np.nan
    found = np.isfinite(growth)
    scaled = np.where(found, _standardised(growth, log_r, found), 0.0)
    sums, counts = np.zeros(weight.shape), np.zeros(weight.shape)
    np.add.at(sums, code, scaled)
    np.add.at(counts, code, found)
    place = middle / np.where(weight > 0, weight, np.nan)[..., None]
    return sums / np.where(counts > 0, counts, np.nan), place


def _standardised(growth: np.ndarray, log_r: np.ndarray, found: np.ndarray) -> np.ndarray:
    """Growth less its mean and over its spread among all at about the same separation."""
    out = np.full(growth.shape, np.nan)
    if not np.any(found):
        return out
    edges = np.quantile(log_r[found], np.linspace(0.0, 1.0, _BINS + 1)[1:-1])
    place = np.searchsorted(edges, log_r)
    for k in range(_BINS):
        here = found & (place == k)
        if np.sum(here) >= _LEAST_IN_BIN and np.std(growth[here]) > 0:
            out[here] = (growth[here] - growth[here].mean()) / growth[here].std()
        else:
            out[here] = 0.0
    return out


def _products(growth: np.ndarray, place: np.ndarray, near: float) -> tuple[np.ndarray, np.ndarray]:
    """Times at which each couple i < j is near, and their summed products, (n, n) with zeros elsewhere."""
    n = growth.shape[0]
    count, total = np.zeros((n, n)), np.zeros((n, n))
    for t in range(growth.shape[1]):
        i = np.flatnonzero(np.isfinite(growth[:, t]) & np.isfinite(place[:, t, 0]))
        apart = np.linalg.norm(place[i, t][:, None] - place[i, t][None, :], axis=2)
        close = np.triu(apart < near, 1)
        count[np.ix_(i, i)] += close
        total[np.ix_(i, i)] += close * np.outer(growth[i, t], growth[i, t])
    return count, total


def _autocovariance(growth: np.ndarray) -> np.ndarray:
    """Pooled autocovariance of the series at lags 0, 1, ... while it exceeds two standard errors."""
    seen = np.isfinite(growth)
    value = np.where(seen, growth, 0.0)
    found = []
    for lag in range(min(_LONGEST_MEMORY, growth.shape[1])):
        stop = growth.shape[1] - lag
        number = np.sum(seen[:, :stop] & seen[:, lag:])
        here = float(np.sum(value[:, :stop] * value[:, lag:])) / max(number, 1)
        if lag and here < 2.0 * found[0] / np.sqrt(max(number, 1)):
            break
        found.append(here)
    return np.array(found or [0.0])


def _variance(count: np.ndarray, memory: np.ndarray) -> float:
    """Variance of the summed products of independent clusters."""
    n = count[count > 0]
    lag = np.arange(1, memory.size)
    share = np.maximum(1.0 - lag[None, :] / np.maximum(n, 1.0)[:, None], 0.0)
    return float(np.sum(n * (memory[0] ** 2 + 2.0 * share @ memory[1:] ** 2)))
