"""Mean shear: growth as t^3 that is not Richardson's, and separations drawn out along one axis."""

from dataclasses import dataclass

import numpy as np

from regimes.audit.anisotropy import Alignment, alignment, fitted_shear, without_shear
from regimes.audit.record import Finding
from regimes.audit.subject import Subject, supported, verdict_changes
from regimes.audit.vectors import Vectors, as_pairs, fewer, separation_vectors
from regimes.audit.words import length, upheld
from regimes.fitting.quick import QuickFit
from regimes.inference.fit import exit_rate_space
from regimes.inference.shear import shear_evidence
from regimes.units import DAY
from regimes.verdict.rule import CHALLENGE

LEVEL = 0.01  # p-value of no common axis at which separations are called aligned


@dataclass(frozen=True, slots=True)
class _Shape:
    """Mean squares along and across the axis [m2], and kurtosis, when half of the pairs are left; `time` [s]."""

    along: float
    across: float
    kurtosis: float
    time: float


def shear(subject: Subject) -> Finding:
    r"""Ask whether separations share an axis, and whether diffusion in a linear shear explains the exit rates.

    .. math:: R = \left| \frac{1}{C} \sum_c \langle e^{2 i \theta} \rangle_c \right|, \qquad
              \langle X^2 \rangle \to \tfrac{4}{3} \kappa S^2 t^3, \quad \langle Y^2 \rangle = 4 \kappa t

    Parameters
    ----------
    subject : Subject

    Returns
    -------
    Finding
        Flagged where separations in the resolved range have a common axis (Hotelling's test on the mean vectors of
        clusters, p < 0.01), or where shear and diffusion beat every named sequence by a Bayes factor of 20 or more. The
        verdict changes if it is another one with the fitted shear integrated out of the separations.

    Notes
    -----
    Richardson's law and shear give the same exit rates at separations well over sqrt(K / S) (Okubo 1966, J. Oceanogr.
    Soc. Japan 22, from memory): direction is what tells them apart. A mean strain aligns separations as well.
    """
    rates = subject.fit.rates
    low, high = subject.resolved
    some = fewer(subject.pairs)
    vectors = separation_vectors(subject.tracks, some)
    independent = separation_vectors(subject.tracks, fewer(rates.pairs)) if rates.within_release else vectors
    found = alignment(independent, low, high)
    rival = shear_evidence(rates.likelihood, exit_rate_space(rates.likelihood))
    factor = rival.log_evidence - max(post.log_evidence for post in subject.fit.named)
    aligned = bool(found.p_value < LEVEL)
    flag = aligned or bool(factor > CHALLENGE)
    fitted = fitted_shear(vectors, subject.tracks.step)
    before, after = subject.fit, subject.fit
    if aligned and np.isfinite(fitted[0]):
        before = before if some.n_pair == subject.pairs.n_pair else subject.refit(pairs=some) or before
        after = subject.refit(*as_pairs(subject.tracks, some, without_shear(vectors, subject.tracks.step, *fitted)))
    changes = verdict_changes(before, after)
    text = " ".join(
        (
            _size(found, _shape(vectors, subject.tracks.step, found.axis_deg)),
            _rival(factor),
            _verdict((before, after), (aligned, flag, changes), fitted),
        )
    )
    return Finding("shear", flag, found.share, "alignment of separations, 0 to 1", _where(found), changes, text)


def _where(found: Alignment) -> tuple[float, float] | None:
    """From the first to the last bin of separation that is aligned."""
    hit = np.flatnonzero(found.bin_p < LEVEL)
    return (float(found.edges[hit[0]]), float(found.edges[hit[-1] + 1])) if hit.size else None


def _shape(vectors: Vectors, step: float, axis_deg: float) -> _Shape:
    lag = int(np.median(np.diff(vectors.offset))) - 1
    rows = vectors.offset[:-1] + lag
    place = vectors.place[rows[rows < vectors.offset[1:]]]
    place = place[np.isfinite(place[:, 0])]
    if len(place) < 2:
        return _Shape(np.nan, np.nan, np.nan, lag * step)
    angle = np.radians(axis_deg)
    along, across = place @ [np.cos(angle), np.sin(angle)], place @ [-np.sin(angle), np.cos(angle)]
    square = along**2 + across**2
    mean = float(np.mean(square))
    kurtosis = float(np.mean(square**2)) / mean**2 if mean > 0 else np.nan
    return _Shape(float(np.mean(along**2)), float(np.mean(across**2)), kurtosis, lag * step)


def _size(found: Alignment, shape: _Shape) -> str:
    if not np.isfinite(found.share):
        return "A mean shear draws separations out along one axis; no separation of the resolved range has a direction."
    text = (
        "A mean shear draws separations out along one axis and imitates Richardson's t^3; here their alignment is "
        f"{found.share:.2f} (0 none, 1 a single line)"
    )
    if np.isnan(found.p_value):
        text += ", with too few clusters to judge it"
    else:
        chance = "p < 0.001" if found.p_value < 0.001 else f"p = {found.p_value:.2g}"
        where = _where(found)
        place = f", between {length(where[0])} and {length(where[1])}" if where and found.p_value < LEVEL else ""
        text += f" about {found.axis_deg:.0f} degrees from east ({chance} by chance{place})"
    if np.isfinite(shape.along) and shape.across > 0:
        text += (
            f"; after {shape.time / DAY:.2g} days separations are {length(np.sqrt(shape.along))} along this axis and "
            f"{length(np.sqrt(shape.across))} across it (root mean square), with kurtosis {shape.kurtosis:.2g} (2 to 3 "
            "for shear and diffusion, 5.6 for Richardson)"
        )
    return text + "."


def _rival(factor: float) -> str:
    if factor > CHALLENGE:
        how = "beat every named sequence"
    elif factor > -CHALLENGE:
        how = "explain the exit rates as well as the best named sequence, so that these alone do not decide"
    else:
        how = "explain the exit rates worse than the best named sequence"
    return f"Constant diffusivity and a linear shear {how} (ln Bayes factor {factor:+.1f})."


def _verdict(fits: tuple[QuickFit, QuickFit | None], raised: tuple[bool, bool, bool], shear: tuple) -> str:
    before, after = fits
    aligned, flag, changes = raised
    if not flag:
        return "The verdict stands as far as shear goes."
    if not aligned:
        return "Rates that shear explains better support no regime: look at the directions of more releases."
    rate, direction = shear
    text = f"With a shear of {abs(rate) * DAY:.2g} per day along {direction:.0f} degrees taken out, "
    if changes:
        text += f"{upheld(after)} is upheld instead of {upheld(before)}: the verdict does not survive."
    else:
        text += f"{upheld(after)} is upheld: the verdict stands."
    if any(s.regime == "richardson" for s in supported(before)):
        text += " Richardson's law supposes that no direction is preferred; do not quote it from such data."
    return text + " Take out a known mean flow first, or analyse regions of one mean gradient apart."
