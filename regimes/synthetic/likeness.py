"""The same releases again in a world of known kernel: starts, lengths, gaps and errors of a given data set."""

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from regimes.pairs import LAUNCHED, Pairs
from regimes.synthetic.kernel_flow import kernel_pieces, walk_pair
from regimes.synthetic.kernel_groups import walk_group
from regimes.theory.kernel import Kernel
from regimes.tracks import Tracks

MOST_MEMBERS = 10  # of a release that is simulated as a whole; larger ones pair by pair
_APART = 0.2  # of the median length: starts within a release that count as one, the earlier ones cut
_SUBSTEP = 0.006  # growth of mean squared separation 2.4 % too low in the exponential regime


@dataclass(frozen=True, slots=True)
class Design:
    """How a data set was taken: what stays the same when it is simulated again.

    Parameters
    ----------
    tracks : Tracks
        On a plane, positions zero, NaN where the data have none.
    pairs : Pairs
    start : (n_track, 2) float array [m]
        Positions at the common start of each group about its centroid.
    groups : tuple of (n_member,) int arrays
        Tracks that start together: releases, or the two members of one pair.
    whole : bool
        Whether releases are simulated as a whole; otherwise pairs are independent.
    """

    tracks: Tracks
    pairs: Pairs
    start: np.ndarray
    groups: tuple[np.ndarray, ...]
    whole: bool


def design_of(tracks: Tracks, pairs: Pairs) -> Design:
    """What is to be repeated of a data set.

    Releases of up to ten particles that start together are kept whole, so that their pairs share particles as
    the data do. Otherwise (chance pairs, larger releases) every pair becomes two particles of its own, in the
    cluster it had: pairs are then independent, which those of the data are not.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
        One at least.

    Returns
    -------
    Design
    """
    found = _releases(tracks, pairs)
    return _pair_by_pair(tracks, pairs) if found is None else _whole(tracks, pairs, *found)


def likeness(design: Design, kernel: Kernel, seed: int | np.random.Generator) -> tuple[Tracks, Pairs]:
    """Releases of the same design whose pairs separate by a kernel, in a flow without memory.

    Parameters
    ----------
    design : Design
    kernel : Kernel
    seed : int or Generator
        Same seed, same bytes.

    Returns
    -------
    tracks : Tracks
        With position errors and gaps of the design.
    pairs : Pairs

    Notes
    -----
    Within a whole release the increments of separations are correlated as in an incompressible isotropic flow
    (Kraichnan 1968, Phys. Fluids 11, 945), see `release_tracks`.
    """
    rng = np.random.default_rng(seed)
    tracks = design.tracks
    position = np.array(tracks.position)
    pieces = kernel_pieces(kernel)
    for members in design.groups:
        rows = [slice(tracks.offset[m], tracks.offset[m + 1]) for m in members]
        longest = max(row.stop - row.start for row in rows)
        path = np.empty((len(members), longest, 2))
        if len(members) == 2:
            apart = float(np.hypot(*(design.start[members[1]] - design.start[members[0]])))
            walk_pair(pieces, apart, tracks.step, rng, path)
        else:
            walk_group(pieces, design.start[members], tracks.step, _SUBSTEP, rng, path)
        for own, row in zip(path, rows, strict=True):
            position[row, :2] += own[: row.stop - row.start]
    if tracks.position_error > 0:
        position[:, :2] += tracks.position_error * rng.standard_normal((len(position), 2))
    return replace(tracks, position=position), design.pairs


def _releases(tracks: Tracks, pairs: Pairs) -> tuple[list[np.ndarray], list[int]] | None:
    """Members and common first step of every release, or None where releases cannot be simulated as a whole."""
    if np.any(pairs.kind != LAUNCHED) or np.any(pairs.cluster[pairs.first] != pairs.cluster[pairs.second]):
        return None
    near = _APART * float(np.median(pairs.length))
    members, begins = [], []
    for code in np.unique(pairs.cluster[pairs.first]):
        mine = pairs.cluster[pairs.first] == code
        some = np.unique(np.concatenate([pairs.first[mine], pairs.second[mine]]))
        begin = int(pairs.begin[mine].max())
        last = int(np.min(tracks.start_step[some] + tracks.n_step[some])) - 2
        there = [step for step in range(begin, min(begin + int(near), last) + 1) if _present(tracks, some, step)]
        if some.size > MOST_MEMBERS or begin - pairs.begin[mine].min() > near or not there:
            return None
        members.append(some)
        begins.append(there[0])
    return members, begins


def _present(tracks: Tracks, members: np.ndarray, step: int) -> bool:
    return bool(np.all(np.isfinite(_at(tracks, members, step))))


def _at(tracks: Tracks, members: np.ndarray, step: int | np.ndarray) -> np.ndarray:
    return tracks.position[tracks.offset[members] + step - tracks.start_step[members]]


def _flat(tracks: Tracks, place: np.ndarray) -> np.ndarray:
    """Positions (n, 3) as east and north about their centroid (n, 2) [m]."""
    centre = place.mean(axis=0)
    away = place - centre
    if tracks.planar:
        return away[:, :2]
    up = centre / np.linalg.norm(centre)
    east = np.array([-up[1], up[0], 0.0]) / np.hypot(up[0], up[1])
    return np.stack([away @ east, away @ np.cross(up, east)], axis=1)


def _whole(tracks: Tracks, pairs: Pairs, members: list[np.ndarray], begins: list[int]) -> Design:
    order = np.concatenate(members)
    begin = np.repeat(begins, [m.size for m in members])
    end = tracks.start_step[order] + tracks.n_step[order]
    number = np.full(tracks.n_track, -1)
    number[order] = np.arange(order.size)
    start = np.concatenate([_flat(tracks, _at(tracks, m, b)) for m, b in zip(members, begins, strict=True)])
    first, second = number[pairs.first], number[pairs.second]
    moved = begin[first]
    length = pairs.begin + pairs.length - moved
    keep = length >= 2
    again = Pairs(
        first=first[keep],
        second=second[keep],
        begin=moved[keep],
        length=length[keep],
        kind=pairs.kind[keep],
        start_separation=np.hypot(*(start[second] - start[first]).T)[keep],
        cluster=pairs.cluster[order],
        n_cluster=pairs.n_cluster,
    )
    blank = [_blank(tracks, m, b, e) for m, b, e in zip(order, begin, end, strict=True)]
    first_row = np.concatenate([[0], np.cumsum([m.size for m in members])])
    groups = tuple(np.arange(a, b) for a, b in pairwise(first_row))
    return Design(_emptied(tracks, blank, begin, again.cluster), again, start, groups, whole=True)


def _pair_by_pair(tracks: Tracks, pairs: Pairs) -> Design:
    end = pairs.begin + pairs.length
    blank = []
    for i in range(pairs.n_pair):
        both = [_blank(tracks, m, pairs.begin[i], end[i]) for m in (pairs.first[i], pairs.second[i])]
        blank += [both[0] + both[1]] * 2
    n = pairs.n_pair
    one = 2 * np.arange(n)
    cluster = np.stack([pairs.cluster[pairs.first], pairs.cluster[pairs.second]], axis=1).ravel()
    start = np.zeros((2 * n, 2))
    start[1::2, 0] = pairs.start_separation
    again = replace(pairs, first=one, second=one + 1, cluster=cluster)
    groups = tuple(np.array([k, k + 1]) for k in one)
    return Design(_emptied(tracks, blank, np.repeat(pairs.begin, 2), cluster), again, start, groups, whole=False)


def _blank(tracks: Tracks, member: int, begin: int, end: int) -> np.ndarray:
    """Zeros (n, 3) with NaN rows where the track has none, from step `begin` to before step `end`."""
    row = tracks.offset[member] - tracks.start_step[member]
    return 0.0 * tracks.position[row + begin : row + end]


def _emptied(tracks: Tracks, blank: list[np.ndarray], begin: np.ndarray, cluster: np.ndarray) -> Tracks:
    return Tracks(
        position=np.concatenate(blank),
        offset=np.concatenate([[0], np.cumsum([len(rows) for rows in blank])]),
        start_step=begin,
        step=tracks.step,
        first_time=tracks.first_time,
        planar=True,
        labels=tuple(str(i) for i in range(len(blank))),
        release=cluster,
        position_error=tracks.position_error,
    )
