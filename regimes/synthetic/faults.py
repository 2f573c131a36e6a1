"""Particles that do not do what they should: lashed together, aground, or on board of a boat."""

import numpy as np

from regimes.synthetic.contaminations import Faults
from regimes.units import HOUR


def lashed(local: np.ndarray, number: int, rng: np.random.Generator) -> np.ndarray:
    """Paths in which, in some releases, the second particle keeps its first distance and direction from the first.

    Parameters
    ----------
    local : (n_release, n_member, n_fix, 2) float array [m]
    number : int
        Releases, chosen at random; a larger number adds to the choice of a smaller.
    rng : Generator

    Returns
    -------
    (n_release, n_member, n_fix, 2) float array [m]
    """
    chosen = rng.permutation(local.shape[0])[:number]
    local = local.copy()
    local[chosen, 1] = local[chosen, 0] + (local[chosen, 1, :1] - local[chosen, 0, :1])
    return local


def halted(
    faults: Faults, seen: np.ndarray, fix_interval_h: float, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """When particles leave their paths for good, and what boats do with them.

    Grounded particles stay where they were at a fix chosen at random from their record. Those picked up leave
    in a straight line of random heading for the last ``boat_h`` of their record, rounded to fixes but one at least
    (and at most the record). No particle meets both.

    Parameters
    ----------
    faults : Faults
    seen : (n_release, n_member, n_fix) bool array
        The fixes that arrive; a record ends at its last.
    fix_interval_h : float [h]
    rng : Generator

    Returns
    -------
    hold : (n_release, n_member, n_fix) int array
        Index of the fix at which the place on the particle's path is to be taken.
    boat : (n_release, n_member, n_fix, 2) float array [m]
        Displacement from there.
    """
    n_fix = seen.shape[2]
    count = seen.shape[0] * seen.shape[1]
    last = n_fix - 1 - np.argmax(seen.reshape(count, n_fix)[:, ::-1], axis=1)
    order = rng.permutation(count)
    moment, heading = rng.random(count), 2.0 * np.pi * rng.random(count)
    stop = np.full(count, n_fix)
    aground, taken = order[: faults.grounded], order[count - faults.picked_up :]
    stop[aground] = np.floor(moment * (last + 1)).astype(np.int64)[aground]
    stop[taken] = np.maximum(last[taken] - max(1, round(faults.boat_h / fix_interval_h)), 0)
    index = np.arange(n_fix)
    hold = np.minimum(index, stop[:, None])
    way = np.zeros((count, n_fix))
    way[taken] = faults.boat_speed_m_s * fix_interval_h * HOUR * (index - hold[taken])
    boat = way[..., None] * np.stack([np.cos(heading), np.sin(heading)], axis=1)[:, None]
    return hold.reshape(seen.shape), boat.reshape(*seen.shape, 2)
