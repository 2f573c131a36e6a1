"""Waves of one period, inertial or tidal, that move pairs to and fro without separating them."""

from dataclasses import replace

import numpy as np

from regimes.audit.band_stop import moved, oscillating_part, without_oscillation
from regimes.audit.lines import FINEST, Line, lines
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, verdict_changes
from regimes.audit.vectors import Vectors, as_pairs, separation_vectors
from regimes.audit.words import length, upheld
from regimes.fitting.quick import QuickFit
from regimes.pairs import Pairs
from regimes.units import DAY, HOUR

_NEAR = 2.0 / 3.0  # share of the exponent that an oscillation can feign, from which one is suspect
_MOST_SAMPLES = 4_000_000  # of separation vectors


def oscillation(subject: Subject) -> Finding:
    r"""Look for lines in relative velocities, take the strongest away, and fit again.

    .. math:: r'(t) = r(t) - [o(t) - o(0)], \qquad \lambda_{osc} \le \frac{\ln\rho\; \omega}{\pi}

    with o the part of the period in the separation vector (`oscillating_part`), and the exponent that an
    oscillation of the frequency omega can feign: one exit in half a period.

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding
        Flagged where a line is clear at some separation (see `lines`: 1 % for a survey without any, over clusters).
        The verdict changes if it is another one without the strongest line.

    Notes
    -----
    o(0) is added back so that pairs start where they did: what is removed are velocities. Size of the feigned
    exponent: a particle moved by U cos(omega t) is back after each period, so that first passages beyond the
    excursion 2 U / omega are not helped by it. With no clear line the inertial frequency, or M2 on a plane, is removed.
    """
    units = subject.fit.rates.pairs  # clusters, or particles where clusters are too few
    found = lines(subject.tracks, replace(subject.pairs, cluster=units.cluster, n_cluster=units.n_cluster))
    clear = [line for line in found if line.clear]
    strongest = max(clear or found, key=lambda line: line.excess, default=None)
    measure = "ln of the power at the strongest line over its background"
    if strongest is None:
        why = (
            "Records are too short or too seldom sampled to tell waves from other motion: windows of 8 days are needed."
        )
        text = f"{why} The verdict is not tested against them."
        return Finding("oscillation", False, float("nan"), measure, None, False, text)
    target = strongest if clear else found[0]  # the inertial line stands first
    some = _some(subject.pairs)
    vectors = separation_vectors(subject.tracks, some)
    part = oscillating_part(vectors.place, vectors.offset[:-1], subject.tracks.step, target.period)
    if some.n_pair == subject.pairs.n_pair:
        left = replace(vectors, place=vectors.place - moved(part, vectors.offset))
        after = subject.refit(*as_pairs(subject.tracks, subject.pairs, left))
    else:
        after = subject.refit(without_oscillation(subject.tracks, target.period))
    changes = verdict_changes(subject.fit, after)
    reach = _reach(clear, strongest, subject)
    text = " ".join(
        (
            _seen(subject, strongest, clear, reach),
            _speed(vectors, part, target, reach or subject.resolved),
            _trial(subject.fit, target, after, changes),
            _advice(bool(clear), changes),
        )
    )
    return Finding("oscillation", bool(clear), strongest.excess, measure, reach, changes, text)


def _some(pairs: Pairs) -> Pairs:
    """All pairs, or every so many where their samples are too many."""
    every = -(-int(np.sum(pairs.length)) // _MOST_SAMPLES)
    return pairs if every <= 1 else pairs.select(np.arange(0, pairs.n_pair, every))


def _reach(clear: list[Line], strongest: Line, subject: Subject) -> tuple[float, float] | None:
    """Separations at which the strongest line is clear."""
    same = [line for line in clear if line.name == strongest.name]
    return (min(line.low for line in same), max(line.high for line in same)) if same else None


def _seen(subject: Subject, strongest: Line, clear: list[Line], reach) -> str:
    planar = " Positions on a plane have no latitude, so that inertial motion is not looked for."
    seldom = " Fixes are too seldom to show the semidiurnal tides." if FINEST * subject.tracks.step > DAY / 2 else ""
    note = (planar if subject.tracks.planar else "") + seldom
    if not clear:
        return f"Spectra of relative velocities show no inertial or tidal line beyond chance.{note}"
    kind = "inertial" if strongest.name == "inertial" else f"tidal (near {strongest.name})"
    against = "cyclonic power" if strongest.name == "inertial" else "its neighbours"
    factor = f"{np.exp(strongest.excess):.2g}" if strongest.excess < np.log(99.5) else "over 100"
    return (
        f"Relative velocities carry {kind} oscillations of {strongest.period / HOUR:.3g} h at separations from "
        f"{length(reach[0])} to {length(reach[1])}: their power exceeds {against} by a factor {factor}, where they are "
        f"strongest.{note}"
    )


def _speed(vectors: Vectors, part: np.ndarray, line: Line, where: tuple[float, float]) -> str:
    """How far and how fast the removed part moves pairs."""
    place = f"from {length(where[0])} to {length(where[1])} apart"
    r = np.hypot(*vectors.place.T)
    here = (r >= where[0]) & (r < where[1]) & np.isfinite(part[:, 0])
    if not here.any():
        return f"No pair is seen {place} for long."
    excursion = float(np.sqrt(np.mean(np.sum(part[here] ** 2, axis=1))))
    speed = 100.0 * excursion * 2.0 * np.pi / line.period
    return (
        f"Motion near {line.period / HOUR:.3g} h moves pairs {place} by {length(excursion)} (rms), at {speed:.2g} cm/s."
    )


def _trial(fit: QuickFit, line: Line, after: QuickFit | None, changes: bool) -> str:
    before = f"Before {upheld(fit)} is upheld, after a band-stop filter at {line.period / HOUR:.3g} h {upheld(after)}"
    return f"{before}: the verdict {'changes' if changes else 'stands'}; {_near_cap(fit, line)}."


def _near_cap(fit: QuickFit, line: Line) -> str:
    s, cut = fit.rates.everything, fit.rates.resolved.intervals
    exits, risk = s.weight @ fit.rates.credited, s.weight @ s.time_at_risk
    cap = s.log_ratio * 2.0 / line.period
    rate = np.where(risk > 0, s.log_ratio * exits / np.where(risk > 0, risk, 1.0), 0.0)
    near = np.flatnonzero((rate[cut] > _NEAR * cap[cut]) & (rate[cut] < cap[cut] / _NEAR))
    value = f"{cap[0] * DAY:.2g} per day, what such oscillations can feign"
    if near.size == 0:
        return f"no resolved exponent lies within a third of {value}"
    r = s.separation[cut][near]
    where = f"at {length(r[0])}" if r.size == 1 else f"between {length(r[0])} and {length(r[-1])}"
    return f"exponents {where} lie near {value}"


def _advice(flag: bool, changes: bool) -> str:
    if not flag:
        return "Nothing need be done." if not changes else "The verdict is fragile: quote both."
    if changes:
        return "Quote the verdict without the oscillations, or larger separations only."
    return "Structure functions at those separations are those of the waves: do not read slopes from them."
