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
    one, two = _members(pairs)
    if one.size and (min(one.min(), two.min()) < 0 or max(one.max(), two.max()) >= pairs.n_cluster):
        raise DataError(
            f"pairs: got members with a cluster outside 0 to {pairs.n_cluster - 1}; every member of a pair "
            "must belong to a cluster; find the pairs again from the tracks"
        )
    apart = one != two
    couples, index = np.unique(_couples(one, two, pairs.n_cluster)[apart], return_inverse=True)
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


def place_of_rows(some: Pairs, every: Pairs) -> np.ndarray:
    """Row among those of `every` pair for each row of `some` of them: the same cluster, or couple of clusters.

    Parameters
    ----------
    some, every : Pairs
        With the same clusters; `some` are taken from `every`.

    Returns
    -------
    (n_row of some,) int array
    """
    fewer, all_keys = (_keys(pairs) for pairs in (some, every))
    return np.concatenate([np.arange(every.n_cluster), every.n_cluster + np.searchsorted(all_keys, fewer)])


def _keys(pairs: Pairs) -> np.ndarray:
    """One number per couple of clusters connected by a pair, in the order of their rows."""
    one, two = _members(pairs)
    return np.unique(_couples(one, two, pairs.n_cluster)[one != two])


def _members(pairs: Pairs) -> tuple[np.ndarray, np.ndarray]:
    """Clusters of the two members of each pair."""
    return pairs.cluster[pairs.first], pairs.cluster[pairs.second]


def _couples(one, two, n_cluster: int) -> np.ndarray:
    return np.minimum(one, two).astype(np.int64) * n_cluster + np.maximum(one, two).astype(np.int64)
