"""Two data sets brought to one step and one position error, nothing else changed."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.pairs.candidates import NEVER, CommonTimes, separation_at
from regimes.tracks import Tracks
from regimes.units import HOUR

_WHOLE = 1e-6  # relative departure from a whole number that counts as round-off


@dataclass(frozen=True, slots=True)
class Side:
    """One of the two data sets.

    Parameters
    ----------
    name : str
    tracks : Tracks
    pairs : Pairs
        Launched together: each pair lies within one cluster.
    """

    name: str
    tracks: Tracks
    pairs: Pairs


def side_of(name: str, tracks: Tracks, pairs: Pairs) -> tuple[Side, int]:
    """A side from all pairs of a data set, and how many chance pairs were left out.

    Raises
    ------
    DataError
        If no pair is launched together.
    """
    kept = pairs.of_kind("launched")
    if kept.n_pair == 0:
        raise DataError(
            f"compare: got {pairs.n_pair} pairs of {name}, none of them launched together; groups that start together "
            'are needed, since they are what is sampled alike; use pairs.kind = "launched" and larger separations at '
            "the start"
        )
    return Side(name, tracks, kept), pairs.n_pair - kept.n_pair


def common_step(one: Side, two: Side) -> tuple[Side, Side]:
    """Both on the coarser of their two steps.

    Raises
    ------
    DataError
        If the coarser step is no whole multiple of the finer one.
    """
    step = max(one.tracks.step, two.tracks.step)
    return _every(one, two, step), _every(two, one, step)


def _every(side: Side, other: Side, step: float) -> Side:
    ratio = step / side.tracks.step
    factor = round(ratio)
    if abs(ratio / factor - 1.0) > _WHOLE:
        raise DataError(
            f"compare: got fixes every {side.tracks.step / HOUR:.6g} h ({side.name}) and "
            f"{other.tracks.step / HOUR:.6g} h; the coarser interval must be a whole multiple of the finer one; set "
            "observations.step_h in one of the case files"
        )
    if factor == 1:
        return side
    tracks, pairs = coarsened(side.tracks, side.pairs, factor)
    return replace(side, tracks=tracks, pairs=pairs)


def coarsened(tracks: Tracks, pairs: Pairs, factor: int) -> tuple[Tracks, Pairs]:
    """Every so many steps of each track, on whole multiples of the new step since 1970; nothing is interpolated.

    Pairs begin at the first of the kept steps at which both members are there.

    Raises
    ------
    DataError
        If no pair has two steps left.
    """
    origin = round(tracks.first_time / tracks.step)
    number = np.repeat(np.arange(tracks.n_track), tracks.n_step)
    at = origin + tracks.start_step[number] + np.arange(len(number)) - tracks.offset[number]
    keep = at % factor == 0
    count = np.bincount(number[keep], minlength=tracks.n_track)
    there = count > 0
    first = at[keep][np.concatenate([[0], np.cumsum(count[there])[:-1]])] // factor
    begin = int(first.min())
    step = tracks.step * factor
    coarse = Tracks(
        position=tracks.position[keep],
        offset=np.concatenate([[0], np.cumsum(count[there])]),
        start_step=first - begin,
        step=step,
        first_time=begin * step,
        planar=tracks.planar,
        labels=tuple(label for label, kept in zip(tracks.labels, there, strict=True) if kept),
        release=tracks.release[there],
        position_error=tracks.position_error,
    )
    new = np.cumsum(there) - 1
    both = there[pairs.first] & there[pairs.second]
    return coarse, _paired_again(coarse, pairs.select(both), new, pairs.cluster[there])


def _paired_again(tracks: Tracks, pairs: Pairs, new: np.ndarray, cluster: np.ndarray) -> Pairs:
    times = CommonTimes.of(tracks)
    first, second = new[pairs.first], new[pairs.second]
    begin = times.first_common(first, second)
    length = np.where(begin == NEVER, 0, times.last_common(first, second) - np.where(begin == NEVER, 0, begin) + 1)
    keep = length >= 2
    if not np.any(keep):
        raise DataError(
            f"compare: got {pairs.n_pair} pairs, none with two fixes every {tracks.step / HOUR:g} h, the coarser of "
            "the two intervals; use longer records"
        )
    first, second, begin = first[keep], second[keep], begin[keep]
    return replace(
        pairs,
        first=first,
        second=second,
        begin=begin,
        length=length[keep],
        kind=pairs.kind[keep],
        start_separation=separation_at(tracks, first, second, begin),
        cluster=cluster,
    )


def with_error(position: np.ndarray, error: float, planar: bool, rng: np.random.Generator) -> np.ndarray:
    """Positions (n, 3) with an error of standard deviation `error` [m] in each horizontal coordinate."""
    if error == 0.0:
        return position
    noise = error * rng.standard_normal(position.shape)
    if planar:
        noise[:, 2] = 0.0
    else:
        up = position / np.linalg.norm(position, axis=1, keepdims=True)
        noise -= np.sum(noise * up, axis=1, keepdims=True) * up
    return position + noise
