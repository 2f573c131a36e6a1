"""The same survey with fewer fixes."""

from dataclasses import replace

import numpy as np

from regimes.geodesy import separation
from regimes.pairs import Pairs
from regimes.tracks import Tracks


def thinned(tracks: Tracks, pairs: Pairs, every: int) -> tuple[Tracks, Pairs]:
    """Every n-th step of the common time axis alone.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    every : int
        n, 1 or more.

    Returns
    -------
    tracks : Tracks
        Those with a step left.
    pairs : Pairs
        Those with two common steps left, with the start separation of their first one (as before where it falls into
        a gap); clusters keep their numbers.
    """
    owner = np.repeat(np.arange(tracks.n_track), tracks.n_step)
    step = tracks.start_step[owner] + np.arange(owner.size) - tracks.offset[owner]
    kept = step % every == 0
    count = np.bincount(owner[kept], minlength=tracks.n_track)
    alive = count > 0
    number = np.cumsum(alive) - 1
    fewer = replace(
        tracks,
        position=tracks.position[kept],
        offset=np.concatenate(([0], np.cumsum(count[alive]))),
        start_step=-(-tracks.start_step[alive] // every),
        step=tracks.step * every,
        labels=tuple(label for label, use in zip(tracks.labels, alive, strict=True) if use),
        release=tracks.release[alive],
    )
    begin = -(-pairs.begin // every)
    length = (pairs.begin + pairs.length - 1) // every - begin + 1
    some = (length >= 2) & alive[pairs.first] & alive[pairs.second]
    first, second = number[pairs.first[some]], number[pairs.second[some]]
    one, two = (fewer.offset[m] + begin[some] - fewer.start_step[m] for m in (first, second))
    start = separation(fewer.position[one], fewer.position[two], tracks.planar)[0] if some.any() else np.zeros(0)
    changed = replace(
        pairs,
        first=first,
        second=second,
        begin=begin[some],
        length=length[some],
        kind=pairs.kind[some],
        start_separation=np.where(np.isfinite(start), start, pairs.start_separation[some]),
        cluster=pairs.cluster[alive],
    )
    return fewer, changed
