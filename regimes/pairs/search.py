"""The search for pairs: one call from tracks to the record."""

from collections.abc import Callable

import numpy as np

from regimes.errors import CaseError, DataError
from regimes.pairs.candidates import Candidates, CommonTimes, launched_pairs, track_groups
from regimes.pairs.explain import Rule, explain_no_pair
from regimes.pairs.meetings import meeting_pairs
from regimes.pairs.record import CHANCE, KINDS, LAUNCHED, Pairs
from regimes.tracks import Tracks
from regimes.units import HOUR, KM

LAUNCH_WINDOW = 6.0 * HOUR  # s


def find_pairs(
    tracks: Tracks,
    kind: str = "launched",
    max_separation: float = KM,
    launched_within: float = LAUNCH_WINDOW,
    progress: Callable[[int, int], None] | None = None,
) -> Pairs:
    """Choose the pairs of tracks to compare, and the clusters that are independent of one another.

    Parameters
    ----------
    tracks : Tracks
    kind : {"launched", "chance", "both"}
        *launched*: both tracks of one release (where one of them has no known release, neither may have one),
        with the first common valid step no later than `launched_within` after the earlier start, and no more
        than `max_separation` apart at that step, where the pair begins.
        *chance*: all others that ever come within `max_separation`; the pair begins at the first such step.
    max_separation : float [m]
        Largest separation at the start of a pair.
    launched_within : float [s]
        Launch window.
    progress : callable, optional
        Called as ``progress(done, total)`` while the steps are searched for chance pairs.

    Returns
    -------
    Pairs
        Sorted by first and second member; each runs to the last step at which both members are valid. Pairs
        with a single common step are left out. A cluster is a release; without one, the tracks that
        launched pairs tie together; else a track by itself.

    Raises
    ------
    CaseError
        If an argument is out of range.
    DataError
        If there are fewer than two tracks, or no pair.
    """
    if kind not in (*KINDS, "both"):
        raise CaseError(f"pairs.kind: got {kind!r}; known: {', '.join(KINDS)}, both")
    if not (np.isfinite(max_separation) and max_separation > 0):
        raise CaseError(f"pairs.max_separation_km: got {max_separation / KM!r}; must be > 0")
    if not (np.isfinite(launched_within) and launched_within >= 0):
        raise CaseError(f"pairs.launched_within_h: got {launched_within / HOUR!r}; must be >= 0")
    if tracks.n_track < 2:
        raise DataError(f"{tracks.n_track} particle with a usable track; a pair needs at least two")
    times = CommonTimes.of(tracks)
    window = int(np.floor(launched_within / tracks.step + 1e-9))
    together = launched_pairs(tracks, times, max_separation, window)
    found = {}
    if kind != "chance":
        found[LAUNCHED] = together
    if kind != "launched":
        found[CHANCE] = meeting_pairs(tracks, together, max_separation, progress)
    pairs = _assemble(tracks, times, found, track_groups(tracks, together))
    if pairs.n_pair == 0:
        single = sum(len(candidates.first) for candidates in found.values())
        raise DataError(explain_no_pair(tracks, times, Rule(kind, max_separation, window), single))
    return pairs


def _assemble(tracks: Tracks, times: CommonTimes, found: dict[int, Candidates], group: np.ndarray) -> Pairs:
    """One sorted record of all candidates with two common steps, with dense numbers for their clusters."""
    kind = np.repeat(list(found), [len(candidates.first) for candidates in found.values()])
    columns = [np.concatenate(column) for column in zip(*(c.columns for c in found.values()), strict=True)]
    first, second, begin, start_separation = columns
    length = times.last_common(first, second) - begin + 1
    order = np.lexsort((second, first))
    order = order[length[order] >= 2]
    first, second = first[order], second[order]
    cluster = np.full(tracks.n_track, -1)
    members = np.union1d(first, second)
    numbers, cluster[members] = np.unique(group[members], return_inverse=True)
    return Pairs(
        first=first,
        second=second,
        begin=begin[order],
        length=length[order],
        kind=kind[order],
        start_separation=start_separation[order],
        cluster=cluster,
        n_cluster=len(numbers),
    )
