"""Why there is no pair: what was seen, and which limit to raise."""

from dataclasses import dataclass

import numpy as np
from scipy.spatial import cKDTree

from regimes.pairs.candidates import NEVER, CommonTimes, separation_at
from regimes.pairs.meetings import active_tracks, last_step
from regimes.tracks import Tracks
from regimes.units import HOUR, KM


@dataclass(frozen=True, slots=True)
class Rule:
    """The rule that found no pair: kind, largest start separation [m], launch window [steps]."""

    kind: str
    max_separation: float
    window: int


def explain_no_pair(tracks: Tracks, times: CommonTimes, rule: Rule, single: int) -> str:
    """The error text when no pair was found; `single` counts pairs dropped for sharing one step only."""
    head = f"no {'' if rule.kind == 'both' else rule.kind + ' '}pair among {tracks.n_track} particles: "
    limit = rule.max_separation / KM
    if single:
        return (
            f"{head}{single} came within {limit:g} km but share one step only; choose a shorter "
            "observations.step_h or raise pairs.max_separation_km"
        )
    if rule.kind == "launched":
        return head + _no_launch(tracks, times, rule)
    nearest = _nearest_approach(tracks)
    if np.isnan(nearest):
        return head + "no two of them have a valid position at the same time; check the times of the fixes"
    return (
        f"{head}the smallest separation at any time is {nearest / KM:.3g} km; must be at most {limit:g} km; "
        "raise pairs.max_separation_km"
    )


def _no_launch(tracks: Tracks, times: CommonTimes, rule: Rule) -> str:
    limit, window = rule.max_separation / KM, rule.window * tracks.step / HOUR
    wait, distance = _closest_launch(tracks, times, rule.window)
    if wait == NEVER:
        return (
            "no two of one release have a valid position at the same time; check the release column, or set "
            'pairs.kind = "chance"'
        )
    if np.isinf(distance):
        return (
            f"no two of one release begin within {window:g} h; the closest two need "
            f"{wait * tracks.step / HOUR:g} "
            'h; raise pairs.launched_within_h, or set pairs.kind = "chance"'
        )
    return (
        f"the smallest start separation within {window:g} h is {distance / KM:.3g} km; must be at most "
        f"{limit:g} km; raise pairs.max_separation_km or pairs.launched_within_h"
    )


def _closest_launch(tracks: Tracks, times: CommonTimes, window: int) -> tuple[int, float]:
    """Shortest wait [steps] until two of one release are seen together; least distance [m] in the window."""
    wait, distance = NEVER, np.inf
    for member in range(tracks.n_track - 1):
        others = np.arange(member + 1, tracks.n_track)
        others = others[tracks.release[others] == tracks.release[member]]
        one = np.full(len(others), member)
        begin = times.first_common(one, others)
        met = begin != NEVER
        if not met.any():
            continue
        one, others, begin = one[met], others[met], begin[met]
        waits = begin - np.minimum(tracks.start_step[one], tracks.start_step[others])
        wait = min(wait, int(waits.min()))
        soon = waits <= window
        if soon.any():
            distance = min(distance, float(separation_at(tracks, one[soon], others[soon], begin[soon]).min()))
    return wait, distance


def _nearest_approach(tracks: Tracks) -> float:
    """Smallest chord of any two tracks at any step [m]; NaN if no two are ever seen together."""
    nearest = np.inf
    for step in range(last_step(tracks) + 1):
        _, place = active_tracks(tracks, step)
        if len(place) > 1:
            nearest = min(nearest, float(cKDTree(place).query(place, k=2)[0][:, 1].min()))
    return nearest if np.isfinite(nearest) else float("nan")
