"""Rows of the page that compare the two curves and show how well each model was sampled."""

import numpy as np

from regimes.analysis import Analysis
from regimes.inference.record import Fit, Inference
from regimes.report.digits import fixed, probability
from regimes.report.words import CURVES, DISPLAY, sequence
from regimes.verdict.digits import km

MODELS_SHOWN = 6  # of each curve in the table of convergence
COMPARED = 7  # separations at which the curves are compared


def opinion_rows(analysis: Analysis) -> list[dict[str, object]]:
    """What each curve says on its own: leading sequences, transitions, free exponents."""
    return [_opinion(inference) for inference in analysis.fits.values()]


def _opinion(inference: Inference) -> dict[str, object]:
    p = inference.sequence_probability()
    order = np.argsort(-p)[:3]
    leading = [(sequence(inference.named[i].model.pieces), probability(float(p[i]))) for i in order]
    moves = []
    for transition in inference.transitions()[:3]:
        low, middle, high = np.percentile(transition.draws, (16, 50, 84))
        scale = f"{km(middle)} km [{km(low)} to {km(high)}]"
        words = f"{sequence((transition.lower, transition.upper))}: {scale}"
        moves.append((words, probability(transition.probability)))
    return {
        "curve": CURVES[inference.curve],
        "leading": leading,
        "transitions": moves,
        "challenge": fixed(inference.challenge, 1),
        "dispersion": fixed(inference.dispersion, 2),
    }


def compared_rows(analysis: Analysis) -> list[tuple[str, ...]]:
    """The most probable regime at a few separations, by each curve: separation, then a cell per curve."""
    separation = np.geomspace(*analysis.verdict.resolved, COMPARED + 2)[1:-1]
    columns = [[km(r) for r in separation]]
    for inference in analysis.fits.values():
        chances = inference.regime_probability(separation)
        names = [max(chances, key=lambda name, i=i: chances[name][i]) for i in range(separation.size)]
        columns.append([f"{DISPLAY[name]} ({probability(float(chances[name][i]))})" for i, name in enumerate(names)])
    return list(zip(*columns, strict=True))


def convergence_rows(analysis: Analysis) -> list[tuple[str, ...]]:
    """Rows of the leading models of each curve and of every model that did not converge.

    Curve, pieces, ln evidence, split R-hat, effective draws, length in autocorrelation times, state.
    """
    rows = []
    for inference in analysis.fits.values():
        for place, fit in enumerate(_sampled(inference)):
            if place < MODELS_SHOWN or not fit.health.ok:
                rows.append((CURVES[inference.curve], *_row(fit)))
    return rows


def not_shown(analysis: Analysis) -> int:
    """Number of sampled models without a row; all of them converged."""
    return sum(len(_sampled(inference)) for inference in analysis.fits.values()) - len(convergence_rows(analysis))


def _sampled(inference: Inference) -> list[Fit]:
    """Sampled models, the one with the largest evidence first."""
    fits = [fit for fit in (*inference.named, *inference.free) if fit.health is not None]
    return sorted(fits, key=lambda fit: -fit.log_evidence)


def _row(fit: Fit) -> tuple[str, ...]:
    health = fit.health
    return (
        sequence(fit.model.pieces),
        f"{fixed(fit.log_evidence, 2)} \u00b1 {fixed(fit.log_evidence_error, 2)}",
        fixed(health.rhat_max, 3),
        fixed(health.ess_min, 0),
        fixed(health.lengths_min, 0),
        "good" if health.ok else health.reason,
    )
