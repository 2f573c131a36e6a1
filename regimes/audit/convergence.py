"""Convergence: particles gather where the flow converges, which slows and selects the separations that are seen."""

from dataclasses import replace

import numpy as np

from regimes.audit.areas import Areas, early_areas
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, verdict_changes
from regimes.audit.vectors import Vectors, as_pairs, fewer, separation_vectors
from regimes.audit.words import length, upheld
from regimes.fitting.quick import QuickFit
from regimes.inference.fit import exit_rate_space
from regimes.inference.predict import mixed_kernels
from regimes.pairs import Pairs
from regimes.synthetic.likeness import design_of, likeness
from regimes.tracks import Tracks
from regimes.units import DAY

LEVEL = 0.01  # one-sided p-value of areas that do not shrink
_CLOSE = 0.5  # of the start separation
_GROWN = 3.0  # times of growth by e over which pairs are watched for closing in
_REPETITIONS = 20
_MOST_SAMPLES = 50_000  # that are repeated


def convergence(subject: Subject) -> Finding:
    r"""Ask whether areas shrink, and how many pairs come together before they part.

    .. math:: \left\langle \frac{r_0}{r} \tanh \ln\frac{r}{r_0} \right\rangle = 0 \quad \text{without divergence}

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding
        Flagged where areas shrink while pairs are still close to their start (see `early_areas`; one-sided, p < 0.01,
        clusters being independent). The verdict changes if, where both resolve separations, it is another one with
        every pair begun one time of growth by e later.

    Notes
    -----
    Neither the ratio of structure functions nor the mean longitudinal velocity is used to flag: along moving pairs both
    are biased in an incompressible flow (Pearson et al. 2019, J. Phys. Oceanogr. 49, 675). Pairs that close in are held
    against repetitions under kernels of the fit, which have no memory; that comparison is told, not judged. Convergence
    that sets in later than the start of the pairs is not seen.
    """
    rates = subject.fit.rates
    first = rates.likelihood
    growth = float(np.log(first.thresholds[1] / first.thresholds[0]) * first.exits[0] / first.risk[0])
    exponent = 0.5 * float(subject.fit.exponent_low[0] + subject.fit.exponent_high[0])
    vectors = separation_vectors(subject.tracks, _beginnings(rates.pairs, growth * subject.tracks.step))
    found = early_areas(vectors, subject.tracks.step, growth, exponent, subject.tracks.position_error)
    flag = bool(found.p_value < LEVEL)
    before, after = _refits(subject, growth) if flag else (subject.fit, subject.fit)
    changes = verdict_changes(before, after)
    text = " ".join((_size(found), _closing(subject, growth), _verdict((flag, changes), before, after, growth)))
    start = float(np.median(subject.pairs.start_separation))
    acts = (start, subject.resolved[0]) if flag and start < subject.resolved[0] else None
    return Finding(
        "convergence", flag, found.rate * DAY, "apparent divergence at the start, 1/day", acts, changes, text
    )


def _beginnings(pairs: Pairs, growth: float) -> Pairs:
    """The pairs for one time of growth by e at most; `growth` per step."""
    return replace(pairs, length=np.minimum(pairs.length, max(3, round(1.0 / growth))))


def _refits(subject: Subject, growth: float) -> tuple[QuickFit, QuickFit | None]:
    """The fit over the range that is left with pairs begun later, with pairs as they are and as begun later."""
    lag = max(1, round(1.0 / (growth * subject.tracks.step)))
    pairs = _later(subject.tracks, subject.pairs, lag)
    after = subject.refit(pairs=pairs) if pairs.n_pair else None
    if after is None:
        return subject.fit, None
    limits = (after.rates.resolved.low, after.rates.resolved.high)
    return subject.refit(options=replace(subject.options, limits=limits)) or subject.fit, after


def _later(tracks: Tracks, pairs: Pairs, lag: int) -> Pairs:
    """Pairs begun so many steps later, where both members are seen then."""
    vectors = separation_vectors(tracks, pairs)
    lasting = pairs.length - lag >= 2
    rows = np.where(lasting, vectors.offset[:-1] + lag, vectors.offset[:-1])
    distance = np.hypot(*vectors.place[rows].T)
    keep = lasting & (distance > 0)
    moved = replace(
        pairs,
        begin=pairs.begin + lag,
        length=np.maximum(pairs.length - lag, 2),
        start_separation=np.where(keep, distance, 1.0),
    )
    return moved.select(keep)


def _closed_in(vectors: Vectors) -> float:
    """Share of pairs that come within half of their start separation."""
    r = np.hypot(*vectors.place.T)
    least = np.fmin.reduceat(r, vectors.offset[:-1])
    return float(np.mean(least < _CLOSE * r[vectors.offset[:-1]]))


def _closing(subject: Subject, growth: float) -> str:
    """The pairs that close in, beside what kernels of the fit predict."""
    tracks, fit = subject.tracks, subject.fit
    steps = max(2, round(_GROWN / (growth * tracks.step)))
    short = fewer(replace(subject.pairs, length=np.minimum(subject.pairs.length, steps)), _MOST_SAMPLES)
    vectors = separation_vectors(tracks, short)
    rng = np.random.default_rng(subject.options.seed)
    space = exit_rate_space(fit.rates.likelihood)
    half = _REPETITIONS // 2
    kernels = mixed_kernels(fit.named, space, half, rng) + mixed_kernels(fit.free, space, half, rng)
    design = design_of(*as_pairs(tracks, short, vectors))
    again = [_closed_in(separation_vectors(*likeness(design, kernel, rng))) for kernel in kernels]
    seen, predicted = (f"{100.0 * share:.0f} %" for share in (_closed_in(vectors), float(np.mean(again))))
    days = steps * tracks.step / DAY
    return (
        f"In the first {days:.2g} days {seen} of the pairs come within half of their start separation; the kernel of "
        f"the fit predicts {predicted} for a flow without memory."
    )


def _size(found: Areas) -> str:
    lead = "Where a flow converges particles gather, and separations tell of places that are not typical."
    if np.isnan(found.p_value):
        return f"{lead} Too few clusters, or pairs too short, to tell whether areas shrink."
    chance = "p < 0.001" if found.p_value < 0.001 else f"p = {found.p_value:.2g}"
    if np.isnan(found.rate):
        more = "more" if found.p_value < LEVEL else "no more"
        return (
            f"{lead} The flow is rough where pairs start, which hides by how much areas change; in the first "
            f"{found.until / DAY:.2g} days they shrink {more} than this allows (one-sided {chance})."
        )
    how = "shrink" if found.rate < 0 else "grow"
    return (
        f"{lead} In the first {found.until / DAY:.2g} days areas that pairs span {how} by "
        f"{abs(found.rate) * DAY:.2g} per day (one-sided {chance} without divergence)."
    )


def _verdict(raised: tuple[bool, bool], before: QuickFit, after: QuickFit | None, growth: float) -> str:
    flag, changes = raised
    if not flag:
        return "The verdict stands as far as convergence at the start goes."
    low = f" (from {length(after.rates.resolved.low)} on)" if after is not None else ""
    text = f"With every pair begun {1.0 / (growth * DAY):.2g} days later{low}, "
    if changes:
        text += f"{upheld(after)} is upheld instead of {upheld(before)}: the verdict does not survive."
    else:
        text += "the verdict stands."
    return text + " Launch away from fronts, or quote separations well beyond those at the start."
