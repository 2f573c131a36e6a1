"""Rows into which the sums of each pair go, so that clusters are the independent sample."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import DataError
from regimes.pairs import Pairs


@dataclass(frozen=True, slots=True)
class Groups:
    """Rows of every pair.

    Parameters
    ----------
    row_a : (n_pair,) int array
        Row of the first member's cluster.
    row_b : (n_pair,) int array
        Row of the second member's cluster, -1 if it is the same cluster.
    row_dyad : (n_pair,) int array
        Row shared by all pairs of these two clusters, -1 if it is the same cluster.
    n_row : int
        Number of rows: one per cluster, then one per couple of clusters connected by a pair.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters.
    """

    row_a: np.ndarray
    row_b: np.ndarray
    row_dyad: np.ndarray
    n_row: int
    weight: np.ndarray

    @property
    def table(self) -> np.ndarray:
        """(n_pair, 3) int64 array of the rows of each pair, -1 where there is none."""
        return np.ascontiguousarray(np.stack([self.row_a, self.row_b, self.row_dyad], axis=1), dtype=np.int64)


def make_groups(pairs: Pairs) -> Groups:
    """Assign the sums of each pair to the rows of its clusters.

    Parameters
    ----------
    pairs : Pairs
        The two members of a pair may belong to one cluster or to two.

    Returns
    -------
    Groups

    Raises
    ------
    DataError
        If a member of a pair belongs to no cluster.

    References
    ----------
    Aronow, Samii & Assenova 2015, Political Analysis 23, 564.
    """
    one, two = pairs.cluster[pairs.first], pairs.cluster[pairs.second]
    if one.size and (min(one.min(), two.min()) < 0 or max(one.max(), two.max()) >= pairs.n_cluster):
        raise DataError(
            f"pairs: got members with a cluster outside 0 to {pairs.n_cluster - 1}; every member of a pair "
            "must belong to a cluster; find the pairs again from the tracks"
        )
    apart = one != two
    low, high = np.minimum(one, two).astype(np.int64), np.maximum(one, two).astype(np.int64)
    couples, index = np.unique(low[apart] * pairs.n_cluster + high[apart], return_inverse=True)
    row_dyad = np.full(one.size, -1, dtype=np.int64)
    row_dyad[apart] = pairs.n_cluster + index
    weight = np.concatenate([np.ones(pairs.n_cluster), -np.ones(couples.size)])
    return Groups(
        row_a=one.astype(np.int64),
        row_b=np.where(apart, two, -1).astype(np.int64),
        row_dyad=row_dyad,
        n_row=weight.size,
        weight=weight,
    )
