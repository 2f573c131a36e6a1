"""Pairs with their clock restarted at the first passage of a separation."""

from dataclasses import replace

import numpy as np
from numba import njit

from regimes.curves.passes import spans_and_rows
from regimes.errors import DataError
from regimes.geodesy import separation_components
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.units import KM


@njit(cache=True)
def _first_passage(position, planar, spans, separation, begin, distance):
    for p in range(spans.shape[0]):
        begin[p] = -1
        below = False
        for t in range(spans[p, 2]):
            i, j = spans[p, 0] + t, spans[p, 1] + t
            r = separation_components(
                position[i, 0],
                position[i, 1],
                position[i, 2],
                position[j, 0],
                position[j, 1],
                position[j, 2],
                planar,
            )[0]
            if r != r:
                below = False  # the passage may happen unseen
            elif r >= separation:
                if below or (t == 0 and r == separation):
                    begin[p], distance[p] = t, r
                break
            else:
                below = True


def from_passage(tracks: Tracks, pairs: Pairs, separation: float) -> Pairs:
    """Pairs that start at the first recorded sample at or beyond a separation, having come from below.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    separation : float [m]

    Returns
    -------
    Pairs
        Those whose passage was seen and is followed by at least one more step.

    Raises
    ------
    DataError
        If no pair was seen to pass.
    """
    spans, _, _ = spans_and_rows(tracks, pairs)
    begin = np.empty(len(spans), np.int64)
    distance = np.zeros(len(spans))
    position = np.ascontiguousarray(tracks.position, float)
    _first_passage(position, bool(tracks.planar), spans, float(separation), begin, distance)
    keep = (begin >= 0) & (pairs.length - begin >= 2)
    if not np.any(keep):
        raise DataError(
            f"first passage: no pair of {len(spans)} was seen to pass {separation / KM:.3g} km from below; "
            "use pairs that start closer"
        )
    return replace(
        pairs,
        first=pairs.first[keep],
        second=pairs.second[keep],
        begin=pairs.begin[keep] + begin[keep],
        length=pairs.length[keep] - begin[keep],
        kind=pairs.kind[keep],
        start_separation=distance[keep],
    )
