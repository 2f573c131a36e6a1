"""Fixes that would need an impossible speed."""

import numpy as np

EARTH_RADIUS = 6371008.8  # m, mean radius of WGS84: half a per cent is enough to tell a speed that cannot be
LOWEST_LIMIT = 5.0  # m/s
MEDIAN_FACTOR = 10.0
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
    """Fixes that cannot be reached in time, neither from the fix before nor towards the one after.

    A fix is impossible if the speeds from the previous and to the next fix of its particle are both above
    the limit; at either end of a record one of them. Of neighbouring suspects the one with the longest detour
    goes, then the rest are judged again. Two fixes may always differ by `NOISE` position errors.

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
    n = len(particle)
    bad, jumps = np.zeros(n, dtype=bool), 0
    slack = NOISE * error
    alive = np.arange(n)
    offenders = np.ones(n, dtype=bool)
    while True:
        alive = alive[offenders[alive] & ~bad[alive]]
        p, t, x = particle[alive], time[alive], position[alive]
        same = p[1:] == p[:-1]
        hop = distances(x[:-1], x[1:], planar)
        fast = same & (hop > limit * np.diff(t) + slack)
        if not fast.any():
            return bad, jumps
        drop = _worst(fast, same, hop, x, planar)
        if not drop.any():
            return bad, jumps + int(fast.sum())
        # Particles whose jumps no drop can cure are done; the others are judged again.
        active = np.isin(p, np.unique(p[drop]))
        jumps += int(fast[~active[1:]].sum())
        bad[alive[drop]] = True
        offenders[alive[~active]] = False


def _worst(fast, same, hop, position, planar: bool) -> np.ndarray:
    """Of each run of suspects the ones whose removal shortens the path most; ends where no inner one is."""
    before, after = np.append(False, fast), np.append(fast, False)
    inner = before & after
    detour = np.full(len(position), -1.0)
    k = np.flatnonzero(inner)
    detour[k] = hop[k - 1] + hop[k] - distances(position[k - 1], position[k + 1], planar)
    peak = inner & (detour >= np.append(-1.0, detour[:-1])) & (detour > np.append(detour[1:], -2.0))
    first, last = np.append(True, ~same), np.append(~same, True)
    record = np.cumsum(first) - 1
    spared = np.bincount(record, weights=inner) > 0
    return peak | (((first & after) | (last & before)) & ~spared[record])
