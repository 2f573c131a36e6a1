"""Instruments that do not drift: aground, taken on board, or tied to one another."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.audit.vectors import Vectors
from regimes.geodesy import separation
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.units import DAY

_ERRORS = 6.0  # position errors within which a place is the same
_STILL = 0.005  # of the usual distance in a day
_LASTS = DAY  # time at rest from which a particle is aground
_FASTER = 3.0  # times the speed that one in a hundred steps exceeds
_STRAIGHT = 0.9  # displacement over path
_TIED = 0.05  # change of a separation that does not count
_EFOLDS = 10.0  # times the mean time of a separation to grow by e, for which a tied pair stays
_INSIDE = 0.95  # of the samples of a run


@dataclass(frozen=True, slots=True)
class Suspects:
    """What drifts badly.

    Parameters
    ----------
    ends : (n_track,) int array
        Steps of each track until it stops drifting; all of them for a good one.
    aground, aboard : (n,) int arrays
        Tracks that come to rest, and that leave fast and straight, before their record ends.
    tied : (m,) int array
        Pairs that keep their separation.
    """

    ends: np.ndarray
    aground: np.ndarray
    aboard: np.ndarray
    tied: np.ndarray

    @property
    def number(self) -> int:
        """Particles and pairs under suspicion."""
        return self.aground.size + self.aboard.size + self.tied.size


def suspects(tracks: Tracks, pairs: Pairs, vectors: Vectors, rate: float) -> Suspects:
    """Look for particles and pairs that do not drift.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    vectors : Vectors
        Separations of the pairs.
    rate : float [1/s]
        Exit rate at the smallest resolved separation.

    Returns
    -------
    Suspects

    Notes
    -----
    Common practice, no source. Aground: within six position errors, or 0.5 % of the usual distance in a day, of one
    place for the last day of the record or longer. Aboard: at the end of the record in a straight line at three times
    the speed that one in a hundred steps exceeds, of all particles and of its own. Tied: a separation that stays within
    six errors, or 5 %, of what it was at first for ten of the times in which separations grow by e (in simulated seas
    with memory some stay for five).
    """
    speeds = [_speeds(tracks, i) for i in range(tracks.n_track)]
    known = np.concatenate(speeds)
    known = known[np.isfinite(known)]
    usual = float(np.quantile(known, 0.99)) if known.size else np.inf
    reach = max(_ERRORS * tracks.position_error, _STILL * _day(tracks))
    ends = tracks.n_step.copy()
    aground, aboard = [], []
    for i, speed in enumerate(speeds):
        rest, run = _rest(tracks, i, reach), _fast(tracks, i, speed, usual)
        if rest < ends[i]:
            aground.append(i)
            ends[i] = rest
        elif run < ends[i]:
            aboard.append(i)
            ends[i] = run
    return Suspects(ends, np.array(aground, int), np.array(aboard, int), _tied(tracks, pairs, vectors, rate))


def without(pairs: Pairs, tracks: Tracks, found: Suspects) -> Pairs:
    """Pairs cut where a member stops drifting, and without the second of two particles that are tied."""
    spare = np.isin(np.arange(tracks.n_track), pairs.second[found.tied])
    last = tracks.start_step + found.ends
    length = np.minimum(pairs.length, np.minimum(last[pairs.first], last[pairs.second]) - pairs.begin)
    keep = (length >= 2) & ~spare[pairs.first] & ~spare[pairs.second]
    return replace(pairs, length=length).select(keep)


def _rows(tracks: Tracks, i: int) -> np.ndarray:
    return tracks.position[tracks.offset[i] : tracks.offset[i + 1]]


def _speeds(tracks: Tracks, i: int) -> np.ndarray:
    """Speed over each step of a track [m/s], NaN in gaps."""
    place = _rows(tracks, i)
    return np.linalg.norm(np.diff(place, axis=0), axis=1) / tracks.step


def _day(tracks: Tracks) -> float:
    """Median displacement in a day, or in the longest record if that is shorter [m]."""
    lag = int(min(max(round(DAY / tracks.step), 1), tracks.n_step.max() - 1))
    moved = [np.linalg.norm(p[lag:] - p[:-lag], axis=1) for p in (_rows(tracks, i) for i in range(tracks.n_track))]
    found = np.concatenate(moved)
    found = found[np.isfinite(found)]
    return float(np.median(found)) if found.size else 0.0


def _rest(tracks: Tracks, i: int, reach: float) -> int:
    """Step from which a track stays at one place until its end; its number of steps if it does not."""
    place = _rows(tracks, i)
    least = max(int(np.ceil(_LASTS / tracks.step)), 2)
    n = len(place)
    if n <= least:
        return n
    late = place[-least:][np.isfinite(place[-least:, 0])]
    if not len(late):
        return n
    final = np.median(late, axis=0)
    away = separation(place, np.broadcast_to(final, place.shape), tracks.planar)[0]
    begin = n - _run(away[::-1] <= reach, np.isfinite(away[::-1]))
    return begin if n - begin > least else n


def _fast(tracks: Tracks, i: int, speed: np.ndarray, usual: float) -> int:
    """Step at which a track begins to move fast and straight until its end; its number of steps if it does not."""
    n = speed.size + 1
    slow = np.flatnonzero(~(speed > _FASTER * usual) & np.isfinite(speed))
    if not slow.size or slow[-1] == speed.size - 1:
        return n
    begin = int(slow[-1]) + 1
    place = _rows(tracks, i)
    fast = speed[begin:][np.isfinite(speed[begin:])]
    if not fast.size:
        return n
    path = float(fast.sum()) * tracks.step
    straight = separation(place[begin : begin + 1], place[-1:], tracks.planar)[0][0] >= _STRAIGHT * path
    own = float(np.nanquantile(speed[:begin], 0.99))
    return begin if straight and np.median(fast) > _FASTER * own else n


def _tied(tracks: Tracks, pairs: Pairs, vectors: Vectors, rate: float) -> np.ndarray:
    """Pairs that keep their first separation for too long."""
    found = []
    if not rate > 0:
        return np.array(found, int)
    least = max(int(np.ceil(_EFOLDS / (rate * tracks.step))), 3)
    for p in range(pairs.n_pair):
        r = np.hypot(*vectors.place[vectors.offset[p] : vectors.offset[p + 1]].T)
        if r.size > least and _keeps(r, tracks.position_error, least):
            found.append(p)
    return np.array(found, int)


def _keeps(r: np.ndarray, error: float, least: int) -> bool:
    early = r[:least][np.isfinite(r[:least])]
    first = float(np.median(early)) if early.size else 0.0
    width = max(_ERRORS * np.sqrt(2.0) * error, _TIED * first)
    return _run(np.abs(r - first) <= width, np.isfinite(r)) >= least


def _run(inside: np.ndarray, seen: np.ndarray) -> int:
    """Longest beginning of a series in which `_INSIDE` of the samples seen, the last one included, are inside."""
    share = np.cumsum(inside & seen) / np.maximum(np.cumsum(seen), 1)
    good = np.flatnonzero((share >= _INSIDE) & inside & seen)
    return int(good[-1]) + 1 if good.size else 0
