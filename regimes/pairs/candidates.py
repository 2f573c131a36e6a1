"""Candidate pairs: common steps of two tracks, tracks launched together, and the groups they form."""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from regimes.geodesy import separation
from regimes.tracks import Tracks

NEVER = np.iinfo(np.int64).max
# A chord is never longer than its geodesic, so a search by chord needs room for round-off only.
ROOM = 1.0 + 1e-9


@dataclass(frozen=True, slots=True)
class Candidates:
    """Pairs found by one rule, (n,) arrays: members (first < second), begin [step], separation there [m]."""

    first: np.ndarray
    second: np.ndarray
    begin: np.ndarray
    start_separation: np.ndarray

    @property
    def columns(self) -> tuple[np.ndarray, ...]:
        """The four arrays in order."""
        return self.first, self.second, self.begin, self.start_separation


@dataclass(frozen=True, slots=True)
class CommonTimes:
    """First and last steps at which two tracks are both valid.

    Parameters
    ----------
    tracks : Tracks
    next_valid, previous_valid : (n_sample,) int arrays
        Row of the nearest valid sample at or after, and at or before, each sample, be it of another track;
        `NEVER` and -1 where there is none.
    """

    tracks: Tracks
    next_valid: np.ndarray
    previous_valid: np.ndarray

    @classmethod
    def of(cls, tracks: Tracks) -> "CommonTimes":
        """The valid neighbours of every sample."""
        valid = ~np.isnan(tracks.position[:, 0])
        row = np.arange(len(valid))
        following = np.minimum.accumulate(np.where(valid, row, NEVER)[::-1])[::-1]
        preceding = np.maximum.accumulate(np.where(valid, row, -1))
        return cls(tracks, following, preceding)

    def first_common(self, first: np.ndarray, second: np.ndarray) -> np.ndarray:
        """(n,) int array: first step at which both tracks are valid, `NEVER` if there is none."""
        start = self.tracks.start_step
        return self._meet(first, second, np.maximum(start[first], start[second]), self.next_valid)

    def last_common(self, first: np.ndarray, second: np.ndarray) -> np.ndarray:
        """(n,) int array: last step at which both tracks are valid, -1 if there is none."""
        end = self.tracks.start_step + self.tracks.n_step - 1
        return self._meet(first, second, np.minimum(end[first], end[second]), self.previous_valid)

    def _meet(self, first, second, step, neighbour):
        """Move each pair's step on until both members are valid there."""
        forward = neighbour is self.next_valid
        none, furthest = (NEVER, np.maximum) if forward else (-1, np.minimum)
        step = step.copy()
        todo = np.arange(len(step))
        while todo.size:
            a, b = (self._neighbour(m[todo], step[todo], neighbour, none) for m in (first, second))
            reached = furthest(a, b)
            moved = (reached != step[todo]) & (reached != none)
            step[todo] = reached
            todo = todo[moved]
        return step

    def _neighbour(self, track, step, neighbour, none):
        """The step of the valid sample next to a step of a track."""
        base = self.tracks.offset[track] - self.tracks.start_step[track]
        row = base + step
        inside = (row >= self.tracks.offset[track]) & (row < self.tracks.offset[track + 1])
        found = neighbour[np.where(inside, row, 0)]
        return np.where(inside & (found != none), found - base, none)


def positions_at(tracks: Tracks, track: np.ndarray, step: np.ndarray) -> np.ndarray:
    """(n, 3) float array [m]: where tracks are at given steps of theirs."""
    return tracks.position[tracks.offset[track] + step - tracks.start_step[track]]


def separation_at(tracks: Tracks, first, second, step) -> np.ndarray:
    """(n,) float array [m]: separations of pairs at given steps."""
    here, there = (positions_at(tracks, member, step) for member in (first, second))
    return separation(here, there, tracks.planar)[0]


def launched_pairs(tracks: Tracks, times: CommonTimes, max_separation: float, window: int) -> Candidates:
    """Tracks of one release, or both without, that begin together: near in start step and in place.

    The first common valid step must lie within `window` steps of the earlier start: a pair that is first
    seen together after a long gap would be chosen for having stayed close.
    """
    chunks = [np.empty((2, 0), dtype=np.int64)]
    order = np.argsort(tracks.start_step, kind="stable")
    starts = tracks.start_step[order]
    for step in np.unique(starts):
        old = order[np.searchsorted(starts, step - window) : np.searchsorted(starts, step)]
        new = order[np.searchsorted(starts, step) : np.searchsorted(starts, step, side="right")]
        chunks += _near_at(tracks, new, old, step, max_separation)
    first, second = np.sort(np.concatenate(chunks, axis=1), axis=0)
    begin = times.first_common(first, second)
    earlier = np.minimum(tracks.start_step[first], tracks.start_step[second])
    keep = (begin != NEVER) & (begin - earlier <= window) & (tracks.release[first] == tracks.release[second])
    first, second, begin = first[keep], second[keep], begin[keep]
    distance = separation_at(tracks, first, second, begin)
    close = distance <= max_separation
    return Candidates(first[close], second[close], begin[close], distance[close])


def _near_at(tracks: Tracks, new, old, step: int, radius: float) -> list[np.ndarray]:
    """Pairs (new, new) and (new, old) near one another at a step, and all with a member in a gap there."""
    old = old[tracks.start_step[old] + tracks.n_step[old] > step]
    place_new = positions_at(tracks, new, np.full(len(new), step))
    place_old = positions_at(tracks, old, np.full(len(old), step))
    seen_new, seen_old = ~np.isnan(place_new[:, 0]), ~np.isnan(place_old[:, 0])
    tree = cKDTree(place_new[seen_new])
    within = tree.query_pairs(radius * ROOM, output_type="ndarray").T.astype(np.int64)
    pairs = [new[seen_new][within]]
    if seen_old.any() and seen_new.any():
        near = tree.query_ball_point(place_old[seen_old], radius * ROOM)
        count = np.array([len(found) for found in near])
        members = np.concatenate([np.asarray(found, dtype=np.int64) for found in near])
        pairs.append(np.stack([new[seen_new][members], np.repeat(old[seen_old], count)]))
    hidden = np.array(np.meshgrid(new, old[~seen_old])).reshape(2, -1)
    unseen = new[~seen_new]
    late = np.array(np.meshgrid(unseen, np.concatenate([new[seen_new], old[seen_old]]))).reshape(2, -1)
    both = np.stack(np.triu_indices(len(unseen), 1))
    return [*pairs, hidden.astype(np.int64), late.astype(np.int64), unseen[both]]


def track_groups(tracks: Tracks, together: Candidates) -> np.ndarray:
    """(n_track,) int array: the release of each track, else the tracks tied to it by launched pairs."""
    n = tracks.n_track
    ties = coo_array((np.ones(len(together.first)), (together.first, together.second)), shape=(n, n))
    _, component = connected_components(ties, directed=False)
    return np.where(tracks.release >= 0, tracks.release, tracks.release.max() + 1 + component)
