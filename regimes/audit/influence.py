"""What each cluster adds to the exponent, and the standard error under several units of independence."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.cluster.hierarchy import fcluster, linkage

from regimes.audit.subject import Subject
from regimes.curves import exit_statistics
from regimes.curves.credit import credited_exits
from regimes.pairs import Pairs
from regimes.tracks import Tracks

_SAME_PLACE = 10.0  # start separations within which places do not tell clusters apart; common practice
_PER_BLOCK = 3.0  # clusters in a block of neighbours, on average; common practice


@dataclass(frozen=True, slots=True)
class Influence:
    r"""Linear influence of every couple of particles on two summaries of the exponent.

    .. math:: \psi_{in} = E'_{in} / E'_n - S_{in} / S_n

    Parameters
    ----------
    first, second : (n_couple,) int arrays
        Tracks; a couple that meets several times stands once.
    level : (n_couple,) float array
        psi averaged over the resolved thresholds: on the mean of ln lambda.
    slope : (n_couple,) float array
        On the least-squares slope of ln lambda in ln r.
    exits : (n_couple,) float array
    """

    first: np.ndarray
    second: np.ndarray
    level: np.ndarray
    slope: np.ndarray
    exits: np.ndarray

    def errors(self, unit) -> tuple[float, float]:
        """Standard errors of level and slope with units (n_track,) as independent sample, couples of units included."""
        return self._error(self.level, unit), self._error(self.slope, unit)

    def pair_errors(self) -> tuple[float, float]:
        """The same as if couples were independent."""
        return float(np.sqrt(np.sum(self.level**2))), float(np.sqrt(np.sum(self.slope**2)))

    def sums(self, value, unit) -> np.ndarray:
        """Sum of a value (n_couple,) over the couples with a member in each unit (n_track,), (n_unit,)."""
        one, two = np.asarray(unit)[self.first], np.asarray(unit)[self.second]
        number = int(np.max(unit)) + 1
        return np.bincount(one, value, number) + np.bincount(two, np.where(one == two, 0.0, value), number)

    def shares(self, unit) -> np.ndarray:
        """Share of each unit in the variance of the level, (n_unit,)."""
        square = self.sums(self.level, unit) ** 2
        return square / square.sum() if square.sum() > 0 else square

    def effective(self, unit) -> float:
        """Effective number of units (Kish) by their exits."""
        share = self.sums(self.exits, unit)
        square = float(np.sum(share**2))
        return float(share.sum() ** 2 / square) if square > 0 else 0.0

    def _error(self, value: np.ndarray, unit) -> float:
        """Robust standard error; never below half the variance of the units alone."""
        unit = np.asarray(unit)
        own = self.sums(value, unit)
        one, two = unit[self.first], unit[self.second]
        apart = one != two
        code = np.minimum(one, two) * (int(unit.max()) + 1) + np.maximum(one, two)
        twice = np.bincount(np.unique(code[apart], return_inverse=True)[1], value[apart]) if np.any(apart) else 0.0
        square = float(np.sum(own**2))
        square = max(square - float(np.sum(np.square(twice))), 0.5 * square)
        number = int(np.sum(own != 0.0))
        return float(np.sqrt(square * number / max(number - 1, 1)))


def influence(subject: Subject) -> Influence:
    """Influence of each couple of particles on ln lambda of the resolved thresholds, one step of leaving it out.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Influence

    References
    ----------
    Infinitesimal jackknife: Efron & Tibshirani (1993) An Introduction to the Bootstrap; couples of units enter with
    weight -1 (Aronow, Samii & Assenova 2015, Political Analysis 23, 564).
    """
    everything, cut = subject.fit.rates.everything, subject.fit.rates.resolved.intervals
    pairs, n = subject.pairs, subject.tracks.n_track
    alone = replace(pairs, cluster=np.arange(n), n_cluster=n)
    statistics = exit_statistics(subject.tracks, alone, everything.thresholds)
    couples = statistics.weight < 0
    exits, risk = credited_exits(statistics)[couples][:, cut], statistics.time_at_risk[couples][:, cut]
    total_exits, total_risk = exits.sum(axis=0), risk.sum(axis=0)
    good = (total_exits > 0) & (total_risk > 0)
    psi = exits[:, good] / total_exits[good] - risk[:, good] / total_risk[good]
    x = np.log(everything.separation[cut][good])
    x = x - x.mean()
    code = np.unique(np.minimum(pairs.first, pairs.second) * n + np.maximum(pairs.first, pairs.second))
    counts = statistics.exits[couples][:, cut].sum(axis=1)
    return Influence(code // n, code % n, psi.mean(axis=1), psi @ (x / np.sum(x**2)), counts)


def by_block(tracks: Tracks, pairs: Pairs) -> Pairs:
    """The pairs with clusters that start near one another, in place and time, joined to blocks of about three."""
    place, when = cluster_starts(tracks, pairs)
    if pairs.n_cluster < 2.0 * _PER_BLOCK:
        return pairs
    size = max(np.sqrt(np.sum(np.var(place, axis=0))), _SAME_PLACE * float(np.median(pairs.start_separation)))
    columns = [place / size if size > 0 else place, (when / when.std() if when.std() > 0 else when)[:, None]]
    number = int(np.ceil(pairs.n_cluster / _PER_BLOCK))
    block = fcluster(linkage(np.concatenate(columns, axis=1), "ward"), number, "maxclust") - 1
    return joined(pairs, block)


def joined(pairs: Pairs, group: np.ndarray) -> Pairs:
    """The pairs with clusters joined as `group` (n_cluster,) says."""
    numbers = np.unique(group, return_inverse=True)[1]
    cluster = np.where(pairs.cluster >= 0, numbers[np.maximum(pairs.cluster, 0)], -1)
    return replace(pairs, cluster=cluster, n_cluster=int(numbers.max()) + 1)


def cluster_starts(tracks: Tracks, pairs: Pairs) -> tuple[np.ndarray, np.ndarray]:
    """Mean first position (n_cluster, 3) [m] and mean first step (n_cluster,) of the members of each cluster."""
    member = np.flatnonzero(pairs.cluster >= 0)
    code = pairs.cluster[member]
    count = np.maximum(np.bincount(code, minlength=pairs.n_cluster), 1)
    rows = tracks.position[tracks.offset[member]]
    place = np.stack([np.bincount(code, column, pairs.n_cluster) for column in rows.T], axis=1) / count[:, None]
    return place, np.bincount(code, tracks.start_step[member], pairs.n_cluster) / count
