"""Pairs: which particles are compared, from when to when, and which are independent of one another."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.arrays import frozen_array
from regimes.errors import CaseError, DataError
from regimes.units import KM

LAUNCHED, CHANCE = 0, 1
KINDS = ("launched", "chance")


@dataclass(frozen=True, slots=True)
class Pairs:
    """Pairs of tracks and the clusters that make them dependent.

    Parameters
    ----------
    first, second : (n_pair,) int arrays
        Track indices of the two members, first < second.
    begin : (n_pair,) int array
        Step on the common time axis at which the pair starts.
    length : (n_pair,) int array
        Number of steps from `begin` to the last common one, both and gaps included; 2 or more.
    kind : (n_pair,) int8 array
        `LAUNCHED` or `CHANCE`.
    start_separation : (n_pair,) float array [m]
        Separation at `begin`.
    cluster : (n_track,) int array
        Cluster (release) of each *track*; a pair belongs to the clusters of both its members, which
        are one and the same for launched pairs. -1 for a track in no pair.
    n_cluster : int
        Number of clusters.
    """

    first: np.ndarray
    second: np.ndarray
    begin: np.ndarray
    length: np.ndarray
    kind: np.ndarray
    start_separation: np.ndarray
    cluster: np.ndarray
    n_cluster: int

    def __post_init__(self):
        for name in ("first", "second", "begin", "length", "cluster"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.int64))
        object.__setattr__(self, "kind", frozen_array(self.kind, np.int8))
        object.__setattr__(self, "start_separation", frozen_array(self.start_separation, np.float64))
        columns = (self.first, self.second, self.begin, self.length, self.kind, self.start_separation)
        if len({column.shape for column in columns}) != 1 or self.first.ndim != 1:
            raise DataError(f"pairs: columns have shapes {[c.shape for c in columns]}; must be equal")
        members = np.concatenate([self.first, self.second])
        if np.any((members < 0) | (members >= self.cluster.size)):
            raise DataError(f"pairs: members must be track numbers from 0 to {self.cluster.size - 1}")
        if self.cluster.size and not -1 <= self.cluster.min() <= self.cluster.max() < self.n_cluster:
            raise DataError(f"pairs: cluster numbers must lie in -1 to {self.n_cluster - 1}")

    @property
    def n_pair(self) -> int:
        """Number of pairs."""
        return len(self.first)

    def of_kind(self, kind: str) -> "Pairs":
        """The pairs of one kind, "launched" or "chance"; the clusters keep their numbers."""
        if kind not in KINDS:
            raise CaseError(f"pairs.kind: got {kind!r}; known: {', '.join(KINDS)}")
        return self.select(self.kind == KINDS.index(kind))

    def select(self, chosen) -> "Pairs":
        """The pairs that a mask or an index array chooses; the clusters keep their numbers."""
        names = ("first", "second", "begin", "length", "kind", "start_separation")
        return replace(self, **{name: getattr(self, name)[chosen] for name in names})

    def summary(self) -> str:
        """One line: how many pairs of which kind, of how many tracks and clusters, how close at the start."""
        if self.n_pair == 0:
            return "0 pairs"
        kinds = [f"{np.sum(self.kind == k)} {name}" for k, name in enumerate(KINDS) if np.any(self.kind == k)]
        tracks = len(np.union1d(self.first, self.second))
        clusters = len(np.unique(np.concatenate([self.cluster[self.first], self.cluster[self.second]])))
        start = self.start_separation / KM
        return (
            f"{self.n_pair} pairs ({', '.join(kinds)}) of {tracks} tracks in {clusters} clusters, "
            f"{start.min():.3g} to {start.max():.3g} km apart at the start "
            f"(median {np.median(start):.3g} km), "
            f"{self.length.min()} to {self.length.max()} steps long (median {np.median(self.length):.0f})"
        )
