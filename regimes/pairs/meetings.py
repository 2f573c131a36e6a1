"""Chance pairs: tracks that come close at some step without having been launched together."""

from collections.abc import Callable

import numpy as np
from scipy.spatial import cKDTree

from regimes.pairs.candidates import ROOM, Candidates, positions_at, separation_at
from regimes.tracks import Tracks

_MOST_ENTRIES = 5_000_000  # entries into the search radius kept before repeats are thrown out


def active_tracks(tracks: Tracks, step: int) -> tuple[np.ndarray, np.ndarray]:
    """Tracks with a valid position at a step, and these positions (n, 3) [m]."""
    running = np.flatnonzero((tracks.start_step <= step) & (step < tracks.start_step + tracks.n_step))
    place = positions_at(tracks, running, np.full(len(running), step))
    seen = ~np.isnan(place[:, 0])
    return running[seen], place[seen]


def last_step(tracks: Tracks) -> int:
    """The last step of the common axis."""
    return int((tracks.start_step + tracks.n_step).max()) - 1


def meeting_pairs(
    tracks: Tracks,
    together: Candidates,
    max_separation: float,
    progress: Callable[[int, int], None] | None = None,
) -> Candidates:
    """All pairs that ever come within a distance, from the first such step on, but those launched together.

    Parameters
    ----------
    tracks : Tracks
    together : Candidates
        Launched pairs, to be left out.
    max_separation : float [m]
    progress : callable, optional

    Returns
    -------
    Candidates

    Notes
    -----
    A k-d tree per step finds the pairs in range. Those that were in range a step before are passed over, so
    that memory grows with the entries into the range, not with the time spent there.
    """
    n, total = tracks.n_track, last_step(tracks) + 1
    before = np.empty(0, dtype=np.int64)
    codes, steps = [before], [before]
    pending = 0
    for step in range(total):
        track, place = active_tracks(tracks, step)
        near = cKDTree(place).query_pairs(max_separation * ROOM, output_type="ndarray").astype(np.int64)
        near = np.sort(track[near], axis=1)
        now = np.sort(near[:, 0] * n + near[:, 1])
        entered = np.setdiff1d(now, before, assume_unique=True)
        distance = separation_at(tracks, entered // n, entered % n, np.full(len(entered), step))
        outside = entered[distance > max_separation]  # the chord is in range, the geodesic is not
        before = now if outside.size == 0 else np.setdiff1d(now, outside, assume_unique=True)
        inside = entered[distance <= max_separation]
        codes.append(inside)
        steps.append(np.full(len(inside), step))
        pending += len(inside)
        if pending > _MOST_ENTRIES:
            code, begin = _earliest(codes, steps)
            codes, steps, pending = [code], [begin], 0
        if progress is not None:
            progress(step + 1, total)
    code, begin = _earliest(codes, steps)
    new = ~np.isin(code, together.first * n + together.second)
    first, second, begin = code[new] // n, code[new] % n, begin[new]
    return Candidates(first, second, begin, separation_at(tracks, first, second, begin))


def _earliest(codes: list[np.ndarray], steps: list[np.ndarray]) -> tuple[np.ndarray, np.ndarray]:
    """Each pair once, with its first step; the lists are in order of time."""
    code, index = np.unique(np.concatenate(codes), return_index=True)
    return code, np.concatenate(steps)[index]
