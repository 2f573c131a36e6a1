"""Fixes that would need an impossible speed."""

from dataclasses import dataclass

import numpy as np

EARTH_RADIUS = 6371008.8  # m, mean radius of WGS84: half a per cent is enough to tell a speed that cannot be
LOWEST_LIMIT = 5.0  # m/s
MEDIAN_FACTOR = 10.0
OFF_THE_WAY = 0.5  # detour over impossible step, above which a fix is off the way
NOISE = 6.0  # position errors that two fixes may differ by on top of their motion


def distances(position: np.ndarray, other: np.ndarray, planar: bool) -> np.ndarray:
    """(n,) float array [m]: distances on a plane, or great circles on a sphere (haversine)."""
    if planar:
        return np.hypot(*(other - position).T)
    half = np.radians(other - position) / 2.0
    cosines = np.cos(np.radians(position[:, 1])) * np.cos(np.radians(other[:, 1]))
    h = np.sin(half[:, 1]) ** 2 + cosines * np.sin(half[:, 0]) ** 2
    return 2.0 * EARTH_RADIUS * np.arcsin(np.sqrt(np.minimum(h, 1.0)))


def default_limit(particle: np.ndarray, time: np.ndarray, position: np.ndarray, planar: bool) -> float:
    """Highest possible speed [m/s]: 5, or ten times the median speed if that is more."""
    same = particle[1:] == particle[:-1]
    if not same.any():
        return LOWEST_LIMIT
    speed = distances(position[:-1], position[1:], planar)[same] / np.diff(time)[same]
    return max(LOWEST_LIMIT, MEDIAN_FACTOR * float(np.median(speed)))


def impossible_fixes(particle, time, position, planar: bool, limit: float, error: float):
    """Fixes that cannot be reached in time.

    A fix is a suspect if the speeds from the fix before and to the fix after are both above the limit, or if
    one is, the fix lies well off the way between its neighbours, and that way is possible without it (a wrong
    fix soon after a right one may allow a slow return). At either end of a record one speed is enough, where
    no inner fix is to blame. Of neighbouring suspects the one with the longest detour goes, then the rest are
    judged again. Two fixes may always differ by `NOISE` position errors.

    Parameters
    ----------
    particle : (n,) int array
        Never falling.
    time : (n,) float array [s]
        Rising within a particle.
    position : (n, 2) float array
        Degrees, or metres when `planar`.
    planar : bool
    limit : float [m/s]
    error : float [m]

    Returns
    -------
    bad : (n,) bool array
    jumps : int
        Steps above the limit that remain, where a particle stays at the far side of a jump.
    """
    bad, jumps = np.zeros(len(particle), dtype=bool), 0
    alive = np.arange(len(particle))
    while True:
        p, path = particle[alive], _Path(time[alive], position[alive], planar, limit, NOISE * error)
        same = p[1:] == p[:-1]
        fast = same & ~path.possible(np.arange(len(p) - 1), np.arange(1, len(p)))
        drop = _to_drop(path, same, fast)
        # Particles that no drop can cure any more are done; the others are judged again.
        again = np.isin(p, np.unique(p[drop]))
        jumps += int(fast[~again[1:]].sum())
        if not drop.any():
            return bad, jumps
        bad[alive[drop]] = True
        alive = alive[again & ~drop]


@dataclass(frozen=True, slots=True)
class _Path:
    """Fixes in order, and what is possible between them."""

    time: np.ndarray
    position: np.ndarray
    planar: bool
    limit: float
    slack: float

    def length(self, a: np.ndarray, b: np.ndarray) -> np.ndarray:
        """Distances [m] between fixes a and b."""
        return distances(self.position[a], self.position[b], self.planar)

    def possible(self, a: np.ndarray, b: np.ndarray) -> np.ndarray:
        """Whether the limit allows the way from fixes a to b."""
        return self.length(a, b) <= self.limit * (self.time[b] - self.time[a]) + self.slack


def _to_drop(path: _Path, same: np.ndarray, fast: np.ndarray) -> np.ndarray:
    """The worst fix of each run of suspects, and ends of records where no inner fix is suspect."""
    before, after = np.append(False, fast), np.append(fast, False)
    first, last = np.append(True, ~same), np.append(~same, True)
    k = np.flatnonzero((before | after) & ~first & ~last)
    come, go, direct = path.length(k - 1, k), path.length(k, k + 1), path.length(k - 1, k + 1)
    detour = come + go - direct
    off_the_way = detour > OFF_THE_WAY * np.maximum(come * before[k], go * after[k])
    suspect = (before[k] & after[k]) | (off_the_way & path.possible(k - 1, k + 1))
    score = np.full(len(before), -1.0)
    score[k[suspect]] = detour[suspect]
    inner = score >= 0
    peak = inner & (score >= np.append(-1.0, score[:-1])) & (score > np.append(score[1:], -1.0))
    record = np.cumsum(first) - 1
    spared = np.bincount(record, weights=inner) > 0
    return peak | (((first & after) | (last & before)) & ~spared[record])
