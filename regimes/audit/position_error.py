"""Errors of position: larger than stated, and what they do to small separations."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
from scipy.signal import lfilter

from regimes.audit.error_estimate import ErrorEstimate, estimate_error
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, verdict_changes
from regimes.audit.words import length, upheld
from regimes.curves.resolution import ERROR_MULTIPLE
from regimes.tracks import Tracks
from regimes.units import HOUR

_BEYOND = 1.2  # estimate over stated error from which they differ: twice the 10 % that motion can add
_NOTABLE = 0.1  # share of the structure function from which errors are told


def position_error(subject: Subject) -> Finding:
    r"""Hold the stated position error against the one that the tracks show.

    .. math:: \Delta D^2 = 4 s^2, \qquad
              \Delta S_2 = \frac{32 (1 - \varphi) - 2 (1 - \varphi^2)}{3} \frac{s^2}{\Delta t^2}, \qquad
              \varphi = e^{-\Delta t / \tau}

    with s the larger of the stated and the estimated error (see `estimate_error`): 10 s^2 / dt^2 without memory.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding
        Flagged where the lower end of the 95 % interval of the estimate exceeds the stated error by a fifth, and 15
        of such errors exceed the lowest resolved separation. The verdict changes if it is another one with the
        larger error stated, so that separations below 15 of it are left out.

    Notes
    -----
    Below 15 errors exponents are off by over 10 % (simulated; Haza et al. 2014, J. Atmos. Oceanic Technol. 31, 2716,
    find effects up to 20 to 60 errors). As a further trial, noise is added until the error is twice as large.
    """
    tracks, stated = subject.tracks, subject.tracks.position_error
    found = estimate_error(tracks, subject.pairs)
    larger = stated if np.isnan(found.value) else max(stated, found.value)
    low, high = subject.resolved
    reach = ERROR_MULTIPLE * larger
    flag = bool(found.low > _BEYOND * stated and ERROR_MULTIPLE * found.low > low)
    allowed = subject.refit(tracks=replace(tracks, position_error=larger)) if reach > low else subject.fit
    memory = 0.0 if np.isnan(found.memory) else found.memory
    doubled = subject.refit(tracks=_noisier(tracks, np.sqrt(3.0) * larger, memory, subject.options.seed))
    changes = verdict_changes(subject.fit, allowed)
    text = " ".join(
        (
            _size(found, stated),
            _reach(subject, larger, memory),
            _trial(subject, (allowed, changes, doubled), reach),
            _advice(flag, found, low),
        )
    )
    acts = (low, min(reach, high)) if reach > low else None
    return Finding("position_error", flag, found.value, "estimated position error, m", acts, changes, text)


def _noisier(tracks: Tracks, error: float, memory: float, seed: int) -> Tracks:
    """The tracks with further errors of a standard deviation and a correlation time, along the surface."""
    rng = np.random.default_rng(seed)
    noise = rng.standard_normal(tracks.position.shape)
    if memory > 0:
        kept = np.exp(-tracks.step / memory)
        for a, b in pairwise(tracks.offset):
            noise[a + 1 : b] *= np.sqrt(1.0 - kept**2)
            noise[a:b] = lfilter([1.0], [1.0, -kept], noise[a:b], axis=0)
    if tracks.planar:
        noise[:, 2] = 0.0
    else:
        up = tracks.position / np.linalg.norm(tracks.position, axis=1)[:, None]
        noise -= np.sum(noise * up, axis=1)[:, None] * up
    return replace(tracks, position=tracks.position + error * noise)


def _size(found: ErrorEstimate, stated: float) -> str:
    if np.isnan(found.value):
        return f"Tracks are too short or broken to estimate their position error; the {length(stated)} stated is taken."
    if found.share < 0.05:
        return f"No position error can be told from motion at this sampling interval; {length(stated)} is stated."
    lasts = f", correlated over some {found.memory / HOUR:.2g} h" if found.memory > 0 else ""
    interval = f" ({length(found.low)} to {length(found.high)}, 95 %)" if np.isfinite(found.low) else ""
    return (
        f"Fourth differences of the tracks show a position error of {length(found.value)}{interval}{lasts}; "
        f"{length(stated)} is stated."
    )


def _reach(subject: Subject, error: float, memory: float) -> str:
    """Bias of dispersion and structure function, in words."""
    low = subject.resolved[0]
    statistics = subject.structure
    kept = np.exp(-statistics.step / memory) if memory > 0 else 0.0
    floor = (32.0 * (1.0 - kept) - 2.0 * (1.0 - kept**2)) / 3.0 * (error / statistics.step) ** 2
    total = statistics.total().value
    hit = np.flatnonzero(np.isfinite(total) & (floor > _NOTABLE * total))
    upto = "under a tenth of the structure function everywhere"
    if hit.size:
        upto = f"over a tenth of the structure function up to {length(statistics.edges[hit[-1] + 1])}"
    return (
        f"An error of {length(error)} reaches separations up to {length(ERROR_MULTIPLE * error)}; it makes "
        f"{_percent(4.0 * error**2 / low**2)} of the squared separation at the lowest resolved one, {length(low)}, and "
        f"{upto}."
    )


def _percent(share: float) -> str:
    if share < 0.001:
        return "under 0.1 %"
    return f"{100.0 * share:.2g} %" if share < 1.0 else "all"


def _trial(subject: Subject, fits, reach: float) -> str:
    allowed, changes, doubled = fits
    twice = verdict_changes(subject.fit, doubled)
    trial = f"with the error doubled by added noise, {upheld(doubled)} is upheld instead of {upheld(subject.fit)}"
    if not twice:
        trial = "it stays with the error doubled by added noise"
    if allowed is subject.fit:
        return f"No resolved separation is that small, so the verdict stands; {trial}."
    if changes:
        return f"From {length(reach)} on, {upheld(allowed)} is upheld instead of {upheld(subject.fit)}; {trial}."
    return f"From {length(reach)} on, the verdict stands; {trial}."


def _advice(flag: bool, found: ErrorEstimate, low: float) -> str:
    if flag:
        return (
            f"State a position error of {length(found.value)}, so that smaller separations are left out, or look for "
            "bad fixes; motion quicker than two fixes looks the same."
        )
    if np.isnan(found.value) or found.share < 0.05:
        return "Fixes of an instrument at rest would tell the error."
    return "Nothing need be done." if ERROR_MULTIPLE * found.value <= low else "The stated error covers it."
