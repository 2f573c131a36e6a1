"""Which launches of the larger set can stand for each launch of the smaller one."""

from dataclasses import dataclass
from itertools import permutations
from math import perm

import numpy as np

from regimes.compare.launches import Launch, places, times
from regimes.errors import DataError
from regimes.tracks import Tracks
from regimes.units import DAY, KM

SHORTER = 0.02  # share of a record that may be missing at its end
FACTOR = 1.25  # start separations of a pair that count as the same
LEAST = 10  # launches to choose among
MOST = 300  # the same; of more, so many at random
_WAYS = 60  # in which members of a launch are put in the places of another
_YEAR = 365.2425 * DAY


@dataclass(frozen=True, slots=True)
class Choices:
    """What can stand for one launch.

    Parameters
    ----------
    launch : (n,) int array
        Of the larger set, each once.
    members : (n, k) int array
        Its members in the order of those they stand for.
    factor : float
        Largest ratio of start separations.
    """

    launch: np.ndarray
    members: np.ndarray
    factor: float


@dataclass(frozen=True, slots=True)
class Near:
    """Which launches may stand for one another, beside their separations.

    Parameters
    ----------
    place : float or None [m]
        Farthest apart; None for anywhere.
    season : float or None [s]
        Farthest apart in the year; None for any time.
    """

    place: float | None = None
    season: float | None = None


def choices_of(
    small: tuple[Tracks, tuple[Launch, ...]],
    large: tuple[Tracks, tuple[Launch, ...]],
    near: Near,
    horizon: int,
    seed: int,
) -> tuple[Choices, ...]:
    """For every launch of the smaller set, those of the larger one whose pairs start as far apart and last as long.

    Within a factor `FACTOR` in each pair; where fewer than `LEAST` launches are that near, the nearest `LEAST`. Of
    these all whose members are followed as long as those they stand for (but for `SHORTER` of it, and up to `horizon`
    steps); where fewer than `LEAST` are, those `LEAST` that come nearest. With shorter records deployments would have
    fewer pairs than the set that is held against them, and kurtosis and the like depend on their number.

    Raises
    ------
    DataError
        If places of a plane and a globe are to be compared, or nothing may stand for a launch.
    """
    allowed = _allowed(small, large, near)
    rng = np.random.default_rng(seed)
    by_size: dict[int, list[int]] = {}
    for i, launch in enumerate(large[1]):
        by_size.setdefault(launch.size, []).append(i)
    tables = {
        m: (
            np.array(rows),
            np.array([large[1][i].apart for i in rows]),
            np.minimum([large[1][i].n_step for i in rows], horizon),
        )
        for m, rows in by_size.items()
    }
    return tuple(_choices(launch, tables, allowed[i], horizon, rng) for i, launch in enumerate(small[1]))


def _choices(launch: Launch, tables, allowed: np.ndarray, horizon: int, rng: np.random.Generator) -> Choices:
    k = launch.size
    one, two = launch.pairs.T
    wanted = np.log(np.maximum(launch.apart[one, two], 1.0))
    need = np.minimum(launch.n_step, horizon)
    found, ways, misses, shorts = [], [], [], []
    for m, (rows, apart, n_step) in tables.items():
        mine = allowed[rows]
        if m < k or not np.any(mine):
            continue
        way = _ways(m, k, rng)
        there = np.log(np.maximum(apart[mine][:, way[:, one], way[:, two]], 1.0))
        miss = np.max(np.abs(there - wanted), axis=2)
        short = np.max(1.0 - n_step[mine][:, way] / need, axis=2)
        which, how = np.nonzero(np.isfinite(miss))
        found.append(rows[mine][which])
        ways.append(way[how])
        misses.append(miss[which, how])
        shorts.append(short[which, how])
    if not found:
        return Choices(np.empty(0, int), np.empty((0, k), int), np.inf)
    launches, members, miss, short = (np.concatenate(part) for part in (found, ways, misses, shorts))
    near = miss <= _limit(launches, miss, np.log(FACTOR), allowed.size) + 1e-9
    launches, members, miss, short = launches[near], members[near], miss[near], short[near]
    keep = np.flatnonzero(short <= _limit(launches, short, SHORTER, allowed.size) + 1e-9)
    one_way = rng.permutation(keep)
    distinct, first = np.unique(launches[one_way], return_index=True)
    if distinct.size > MOST:
        chosen = np.sort(rng.choice(distinct.size, MOST, replace=False))
        distinct, first = distinct[chosen], first[chosen]
    taken = one_way[first]
    return Choices(distinct, members[taken], float(np.exp(miss[taken].max())))


def _limit(launches: np.ndarray, miss: np.ndarray, enough: float, n: int) -> float:
    """The largest miss that is taken: `enough`, or what leaves `LEAST` different launches."""
    best = np.full(n, np.inf)
    np.minimum.at(best, launches, miss)
    there = np.sort(best[np.isfinite(best)])
    return max(enough, float(there[min(LEAST, there.size) - 1]))


def _ways(m: int, k: int, rng: np.random.Generator) -> np.ndarray:
    """Ordered choices (n, k) of k among m: all of them, or so many at random."""
    if perm(m, k) <= _WAYS:
        return np.array(list(permutations(range(m), k)))
    return np.argsort(rng.random((_WAYS, m)), axis=1)[:, :k]


def _allowed(small, large, near: Near) -> np.ndarray:
    """(n_small, n_large) bool: near enough in place and season."""
    allowed = np.ones((len(small[1]), len(large[1])), bool)
    if near.place is not None:
        if small[0].planar != large[0].planar:
            raise DataError(
                "compare: got --same-place with positions on a plane in one case and on the globe in the other; both "
                "must be of one kind; leave --same-place out"
            )
        here, there = (places(*side) for side in (small, large))
        allowed &= np.linalg.norm(here[:, None] - there[None], axis=2) <= near.place
    if near.season is not None:
        apart = np.abs(times(*small)[:, None] - times(*large)[None]) % _YEAR
        allowed &= np.minimum(apart, _YEAR - apart) <= near.season
    lonely = int(np.sum(~np.any(allowed, axis=1)))
    if lonely:
        limits = [] if near.place is None else [f"{near.place / KM:g} km"]
        limits += [] if near.season is None else [f"{near.season / DAY:g} days of the year"]
        raise DataError(
            f"compare: got {lonely} of {len(small[1])} groups with no group of the other case within "
            f"{' and '.join(limits)}; each needs some; widen --same-place or --same-season"
        )
    return allowed
