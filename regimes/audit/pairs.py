"""Pairs that are not what they should be: not drifting, launched with a velocity, or met by chance."""

from dataclasses import replace

import numpy as np

from regimes.audit.record import Finding
from regimes.audit.subject import Subject, verdict_changes
from regimes.audit.suspects import Suspects, suspects, without
from regimes.audit.vectors import Vectors, mean_is_zero, separation_vectors
from regimes.audit.words import length, upheld
from regimes.checks.structure import RESOLVED, resolves_velocities
from regimes.curves.distributions import Distance, distance_between, separation_samples
from regimes.curves.passage import from_passage
from regimes.errors import DataError
from regimes.fitting.quick import QuickFit
from regimes.pairs import CHANCE, LAUNCHED

LEVEL = 0.01  # p-value of each of the two comparisons


def pairs(subject: Subject) -> Finding:
    r"""Look for pairs that do not drift, that start with a velocity of their own, or that differ by their kind.

    .. math:: \overline{r u_L}(0) = \frac{4 \overline{r^2}(h) - \overline{r^2}(2 h) - 3 \overline{r^2}(0)}{4 h}

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding
        Flagged where a particle is aground or on board or two are tied together (see `suspects`), where pairs
        do not start with zero mean velocity along their separation (cluster-robust, p < 0.01; only where fixes resolve
        velocities), or where separations of launched and chance pairs differ after their first passage (p < 0.01). The
        verdict changes if it is another one without the suspects, or with launched pairs alone.

    Notes
    -----
    Chance pairs have come together, so they start with a velocity that depends on their separation (Babiano et al.
    1990, J. Fluid Mech. 214, 535, from memory); exit rates count them from first passages only.
    """
    fit = subject.fit
    vectors = separation_vectors(subject.tracks, subject.pairs)
    rate = float(fit.rates.likelihood.exits[0] / fit.rates.likelihood.risk[0])
    found = suspects(
        subject.tracks, subject.pairs, vectors, rate * float(np.diff(np.log(fit.rates.likelihood.thresholds))[0])
    )
    start, start_p = _start(subject, _beginnings(subject))
    kinds = _kinds(subject)
    cleaned = _without(subject, found)
    launched = _launched(subject) if kinds is not None and kinds.p_value < LEVEL else fit
    changes = verdict_changes(fit, cleaned) or verdict_changes(fit, launched)
    differ = kinds is not None and kinds.p_value < LEVEL
    flag = found.number > 0 or start_p < LEVEL or differ
    text = " ".join(
        (
            _what(found, subject),
            _starts(start, start_p),
            _compared(kinds),
            _verdict(subject, (found.number > 0, cleaned), (differ, launched)),
        )
    )
    return Finding(
        "pairs", bool(flag), float(found.number), "particles aground or on board and pairs tied", None, changes, text
    )


def _beginnings(subject: Subject) -> Vectors:
    pairs = subject.fit.rates.pairs
    return separation_vectors(subject.tracks, replace(pairs, length=np.minimum(pairs.length, 3)))


def _growth(fit: QuickFit) -> float:
    """Rate at which separations grow by e where they are smallest [1/s]."""
    first = fit.rates.likelihood
    return float(np.log(first.thresholds[1] / first.thresholds[0]) * first.exits[0] / first.risk[0])


def _without(subject: Subject, found: Suspects) -> QuickFit | None:
    if not found.number:
        return subject.fit
    left = without(subject.pairs, subject.tracks, found)
    return subject.refit(pairs=left) if left.n_pair else None


def _launched(subject: Subject) -> QuickFit | None:
    return subject.refit(pairs=subject.pairs.select(subject.pairs.kind == LAUNCHED))


def _start(subject: Subject, vectors: Vectors) -> tuple[float, float]:
    """Mean velocity along the separation at the start over its root mean square, and the p-value of zero.

    NaN where fixes do not resolve velocities or pairs are not seen at their first three samples.
    """
    if not resolves_velocities(subject.structure) >= RESOLVED:
        return float("nan"), float("nan")
    long = vectors.offset[:-1] + 2 < vectors.offset[1:]
    rows = vectors.offset[:-1][long]
    zero, one, two = (np.sum(vectors.place[rows + k] ** 2, axis=1) for k in range(3))
    flux = (4.0 * one - two - 3.0 * zero) / (4.0 * subject.tracks.step)
    seen = np.isfinite(flux) & (zero > 0)
    speed = np.zeros(long.size)
    speed[np.flatnonzero(long)[seen]] = flux[seen] / np.sqrt(zero[seen])
    if not np.any(seen):
        return float("nan"), float("nan")
    used = speed[np.flatnonzero(long)[seen]]
    size = float(np.sqrt(np.mean(used**2)))
    share = float(np.mean(used)) / size if size > 0 else float("nan")
    return share, mean_is_zero(vectors.row_sums(speed[:, None]), vectors.weight)


def _kinds(subject: Subject) -> Distance | None:
    """Distance of launched from chance pairs, half way through what both still have; None where it cannot be had."""
    kinds = [subject.pairs.select(subject.pairs.kind == kind) for kind in (LAUNCHED, CHANCE)]
    if any(some.n_pair == 0 for some in kinds):
        return None
    try:
        moved = [from_passage(subject.tracks, some, subject.resolved[0]) for some in kinds]
        lag = max(1, int(min(np.median(some.length) for some in moved)) // 2)
        samples = [separation_samples(subject.tracks, some, [lag * subject.tracks.step])[0] for some in moved]
        return distance_between(samples[0], samples[1], subject.options.seed, 999)
    except DataError:
        return None


def _what(found: Suspects, subject: Subject) -> str:
    if not found.number:
        return (
            f"None of {subject.tracks.n_track} particles comes to rest or leaves fast and straight before its record "
            "ends, and no pair keeps its separation as if tied."
        )
    tracks, pairs = subject.tracks, subject.pairs
    tied = [f"{tracks.labels[pairs.first[p]]} and {tracks.labels[pairs.second[p]]}" for p in found.tied]
    parts = [
        _named("comes to rest before its record ends", "come to rest before their record ends",
               [tracks.labels[i] for i in found.aground]),
        _named("leaves fast and straight at its end", "leave fast and straight at their end",
               [tracks.labels[i] for i in found.aboard]),
        _named("pair keeps its separation as if tied", "pairs keep their separation as if tied", tied),
    ]  # fmt: skip
    return f"Instruments that do not drift count as pairs all the same: {'; '.join(part for part in parts if part)}."


def _named(one: str, many: str, names: list[str]) -> str:
    if not names:
        return ""
    shown = ", ".join(names[:3]) + (", ..." if len(names) > 3 else "")
    return f"{len(names)} {one if len(names) == 1 else many} ({shown})"


def _starts(share: float, p_value: float) -> str:
    if np.isnan(p_value):
        return "Whether pairs start with a velocity of their own cannot be told."
    if p_value < LEVEL:
        way = "apart" if share > 0 else "together"
        return (
            f"Pairs start moving {way}: their mean velocity along the separation is {abs(share):.2f} of its root mean "
            f"square (p {_chance(p_value)})."
        )
    return f"Pairs start without a common velocity along their separation (p {_chance(p_value)})."


def _compared(kinds: Distance | None) -> str:
    if kinds is None:
        return "Launched and chance pairs cannot be compared here."
    how = "differ" if kinds.p_value < LEVEL else "do not differ"
    return (
        f"Separations of launched and chance pairs {how} (largest distance {kinds.distance:.2f} at {length(kinds.at)}, "
        f"p {_chance(kinds.p_value)})."
    )


def _chance(p_value: float) -> str:
    return "< 0.001" if p_value < 0.001 else f"= {p_value:.2g}"


def _verdict(subject: Subject, suspected: tuple, kinds: tuple) -> str:
    parts = []
    for (raised, fit), what in ((suspected, "without what does not drift"), (kinds, "with launched pairs alone")):
        if raised and verdict_changes(subject.fit, fit):
            parts.append(f"{what}, {upheld(fit)} is upheld instead of {upheld(subject.fit)}")
        elif raised:
            parts.append(f"{what}, the verdict stands")
    if not parts:
        return "The verdict stands as far as this goes."
    said = "; ".join(parts)
    return f"{said[0].upper()}{said[1:]}: look at these particles, and end their records where they stop drifting."
