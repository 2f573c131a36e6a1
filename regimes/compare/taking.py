"""Parts of a data set taken as tracks and pairs of their own: some members, from a step on, with given gaps."""

from dataclasses import dataclass

import numpy as np

from regimes.compare.common import with_error
from regimes.compare.launches import Launch
from regimes.geodesy import separation
from regimes.pairs import LAUNCHED, Pairs
from regimes.tracks import Tracks


@dataclass(frozen=True, slots=True)
class Part:
    """What one launch takes of a data set: tracks, from when on, and how each is seen."""

    members: np.ndarray
    begin: int
    n_step: np.ndarray
    missing: tuple[np.ndarray, ...]
    pairs: np.ndarray


def taken(tracks: Tracks, parts: list[Part], error: float, rng: np.random.Generator) -> tuple[Tracks, Pairs]:
    """Tracks and pairs of some parts of a data set, each part a cluster, with position errors raised to `error` [m]."""
    rows, missing, sizes, first, second = [], [], [], [], []
    done = 0
    for part in parts:
        number = np.arange(len(sizes), len(sizes) + len(part.members))
        for track, n, gone in zip(part.members, part.n_step, part.missing, strict=True):
            start = tracks.offset[track] + part.begin - tracks.start_step[track]
            stop = min(start + n, tracks.offset[track + 1])
            rows.append(np.arange(start, stop))
            missing.append(done + gone[gone < stop - start])
            sizes.append(stop - start)
            done += stop - start
        first.append(number[part.pairs[:, 0]])
        second.append(number[part.pairs[:, 1]])
    added = float(np.sqrt(max(error**2 - tracks.position_error**2, 0.0)))
    position = with_error(tracks.position[np.concatenate(rows)], added, tracks.planar, rng)
    position[np.concatenate(missing)] = np.nan
    cluster = np.repeat(np.arange(len(parts)), [len(part.members) for part in parts])
    one, two, sizes = np.concatenate(first), np.concatenate(second), np.array(sizes)
    offset = np.concatenate([[0], np.cumsum(sizes)])
    again = Tracks(
        position=position,
        offset=offset,
        start_step=np.zeros(len(sizes), int),
        step=tracks.step,
        first_time=tracks.first_time,
        planar=tracks.planar,
        labels=tuple(str(i) for i in range(len(sizes))),
        release=cluster,
        position_error=error,
    )
    length = np.minimum(sizes[one], sizes[two])
    keep = length >= 2
    one, two = one[keep], two[keep]
    start = separation(position[offset[one]], position[offset[two]], tracks.planar)[0]
    pairs = Pairs(one, two, np.zeros(one.size, int), length[keep], np.full(one.size, LAUNCHED), start, cluster,
                  len(parts))  # fmt: skip
    return again, pairs


def missing_steps(tracks: Tracks, track: int, begin: int, n: int) -> np.ndarray:
    """Steps from `begin` on at which a track has no position."""
    row = tracks.offset[track] + begin - tracks.start_step[track]
    return np.flatnonzero(np.isnan(tracks.position[row : row + n, 0]))


def some_gaps(missing: np.ndarray, share: float, rng: np.random.Generator) -> np.ndarray:
    """The steps of whole gaps, each gap kept with a probability."""
    if share >= 1.0 or missing.size == 0:
        return missing
    gap = np.cumsum(np.diff(missing, prepend=missing[0]) > 1)
    return missing[rng.random(gap[-1] + 1)[gap] < share]


def missing_share(tracks: Tracks, launches: tuple[Launch, ...], horizon: int) -> float:
    """Share of the steps of launches, up to the horizon, that have no position."""
    gone = steps = 0
    for launch in launches:
        for track, n in zip(launch.members, np.minimum(launch.n_step, horizon), strict=True):
            gone += missing_steps(tracks, track, launch.begin, n).size
            steps += int(n)
    return gone / steps
