"""Groups that start together: what a deployment consists of."""

from dataclasses import dataclass
from itertools import combinations, pairwise

import numpy as np

from regimes.geodesy import separation
from regimes.pairs import Pairs
from regimes.pairs.candidates import positions_at
from regimes.pairs.search import LAUNCH_WINDOW
from regimes.tracks import Tracks


@dataclass(frozen=True, slots=True)
class Launch:
    """One cluster from the step at which its members are together.

    Parameters
    ----------
    cluster : int
    members : (m,) int array
        Tracks.
    begin : int
        Step on the common axis.
    apart : (m, m) float array [m]
        Separations there.
    pairs : (p, 2) int array
        Which members make pairs, by their place in `members`.
    n_step : (m,) int array
        Steps of each member from there on.
    """

    cluster: int
    members: np.ndarray
    begin: int
    apart: np.ndarray
    pairs: np.ndarray
    n_step: np.ndarray

    @property
    def size(self) -> int:
        """Number of members."""
        return len(self.members)

    def first(self, size: int) -> "Launch":
        """The same with its first so many members."""
        inside = np.all(self.pairs < size, axis=1)
        return Launch(
            self.cluster, self.members[:size], self.begin, self.apart[:size, :size], self.pairs[inside],
            self.n_step[:size],
        )  # fmt: skip


def launches_of(tracks: Tracks, pairs: Pairs) -> tuple[tuple[Launch, ...], int]:
    """Every cluster as a launch, and how many pairs were left out.

    A launch begins at the first step, within six hours or two steps of its earliest pair, at which all members of
    the pairs that begin by then are there; pairs that begin later, or with a member missing there, are left out.
    """
    window = max(2, int(np.floor(LAUNCH_WINDOW / tracks.step + 1e-9)))
    own = pairs.cluster[pairs.first]
    order = np.argsort(own, kind="stable")
    ends = np.searchsorted(own[order], np.arange(pairs.n_cluster + 1))
    found, left_out = [], 0
    for cluster, (a, b) in enumerate(pairwise(ends)):
        if a == b:
            continue
        mine = pairs.select(order[a:b])
        launch, lost = _launch(tracks, mine, cluster, window)
        left_out += lost
        if launch is not None:
            found.append(launch)
    return tuple(found), left_out


def _launch(tracks: Tracks, mine: Pairs, cluster: int, window: int) -> tuple[Launch | None, int]:
    latest = int(mine.begin.min()) + window
    chosen = mine.select(mine.begin <= latest)
    members = np.union1d(chosen.first, chosen.second)
    begin = int(chosen.begin.max())
    for step in range(begin, latest + 1):
        if np.all(_there(tracks, members, step)):
            begin = step
            break
    there = _there(tracks, members, begin)
    last = chosen.begin + chosen.length
    place = np.full(tracks.n_track, -1)
    place[members[there]] = np.arange(int(there.sum()))
    one, two = place[chosen.first], place[chosen.second]
    keep = (one >= 0) & (two >= 0) & (last - begin >= 2)
    lost = mine.n_pair - int(keep.sum())
    if not np.any(keep):
        return None, lost
    members = members[there]
    spot = positions_at(tracks, members, np.full(len(members), begin))
    apart = np.zeros((len(members), len(members)))
    a, b = np.array(list(combinations(range(len(members)), 2))).T
    apart[a, b] = apart[b, a] = separation(spot[a], spot[b], tracks.planar)[0]
    n_step = tracks.start_step[members] + tracks.n_step[members] - begin
    return Launch(cluster, members, begin, apart, np.stack([one[keep], two[keep]], axis=1), n_step), lost


def _there(tracks: Tracks, members: np.ndarray, step: int) -> np.ndarray:
    """Which members have a position at a step."""
    row = step - tracks.start_step[members]
    inside = (row >= 0) & (row < tracks.n_step[members])
    spot = tracks.position[tracks.offset[members] + np.where(inside, row, 0)]
    return inside & np.isfinite(spot[:, 0])


def places(tracks: Tracks, launches: tuple[Launch, ...]) -> np.ndarray:
    """(n, 3) float array [m]: centroid of each launch at its begin."""
    return np.array([positions_at(tracks, u.members, np.full(u.size, u.begin)).mean(axis=0) for u in launches])


def times(tracks: Tracks, launches: tuple[Launch, ...]) -> np.ndarray:
    """(n,) float array [s]: when each launch begins, since 1970."""
    return tracks.first_time + tracks.step * np.array([u.begin for u in launches], float)
