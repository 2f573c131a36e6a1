"""One simulated campaign, fitted and held against its truth."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import DataError
from regimes.fitting.options import Options
from regimes.fitting.quick import QuickFit, quick_fit
from regimes.inference.average import transitions
from regimes.inference.fit import exit_rate_space
from regimes.inference.predict import fit_p_value
from regimes.pairs import Pairs
from regimes.plan.aim import Target, mean_probability, right, told, true_pieces, wrong
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import REGIMES
from regimes.tracks import Tracks
from regimes.verdict.decide import LEAST_P
from regimes.verdict.numbers import slope_record
from regimes.verdict.rule import CHALLENGE, SPAN, Stretch

LIKELY = 0.5  # probability of a transition that counts as found
_FLATTEST, _STEEPEST = 1.0, 3.0  # slopes that separations can tell apart


@dataclass(frozen=True, slots=True)
class Judged:
    """What one campaign showed.

    Parameters
    ----------
    fitted : bool
        Whether enough separations were resolved; all else is False, 0 or NaN if not.
    right : bool
        Whether the true regime was supported over half of its range, and nothing wrong anywhere.
    told : bool
        Whether the aim was reached: `right` or, against one other regime, told from it.
    wrong : bool
        Whether anything wrong was supported.
    probability : float
        Of the true regime, averaged over its range.
    alpha_width : float
        What is left of slopes 1 to 3 by the 95 % interval or bound over the range; NaN for a diffusive regime.
    transition_factor : float
        Ratio of the 95 % ends of the transition at the end of the range; NaN where not found or there is none.
    low, high : float [m]
        Resolved separations.
    """

    fitted: bool
    right: bool
    told: bool
    wrong: bool
    probability: float
    alpha_width: float
    transition_factor: float
    low: float
    high: float


NOT_FITTED = Judged(False, False, False, False, 0.0, _STEEPEST - _FLATTEST, np.nan, np.nan, np.nan)


def judged(tracks: Tracks, pairs: Pairs, kernel: Kernel, target: Target, options: Options) -> Judged:
    """Fit a campaign by quadrature and hold it against the kernel that made it.

    The rule is that of a run, with all that stops it but the second curve and convergence: too few clusters, a free
    exponent preferred, improbable exit rates.
    """
    try:
        fit = quick_fit(tracks, pairs, options)
    except DataError:
        return NOT_FITTED
    silent = stopped(fit, options.seed)
    found = () if silent else supported(fit)
    success = right(found, kernel, target)
    return Judged(
        fitted=True,
        right=success,
        told=success if target.against is None else not silent and told(fit, kernel, target),
        wrong=wrong(found, kernel),
        probability=mean_probability(fit, kernel, target),
        alpha_width=alpha_width(fit, kernel, target, options.seed),
        transition_factor=transition_factor(fit, kernel, target),
        low=float(fit.rates.resolved.low),
        high=float(fit.rates.resolved.high),
    )


def stopped(fit: QuickFit, seed: int) -> bool:
    """Whether something keeps the rule from supporting anything."""
    if fit.rates.within_release or fit.challenge > CHALLENGE:
        return True
    space = exit_rate_space(fit.rates.likelihood)
    return fit_p_value(fit.rates.likelihood, fit.named, space, seed) < LEAST_P


def supported(fit: QuickFit) -> tuple[Stretch, ...]:
    """Stretches that meet the rule over the factor it asks for."""
    return tuple(s for s in fit.stretches() if s.span >= SPAN * (1.0 - 1e-9))


def alpha_width(fit: QuickFit, kernel: Kernel, target: Target, seed: int) -> float:
    """Width of the 95 % interval of alpha over the range; a bound reaches to slope 1 or 3, nothing said is all."""
    if REGIMES[target.regime].exponent < 1.0:
        return float("nan")
    pieces = true_pieces(kernel, target)
    slope = slope_record(fit.slope(pieces[0][0], pieces[-1][1], seed), "exit_rate")
    low, high = {
        "estimate": (slope.value.lo95, slope.value.hi95),
        "lower_bound": (slope.value.lo95, _STEEPEST),
        "upper_bound": (_FLATTEST, slope.value.hi95),
        "none": (_FLATTEST, _STEEPEST),
    }[slope.kind]
    return float(high - low)


def transition_factor(fit: QuickFit, kernel: Kernel, target: Target) -> float:
    """Ratio of the 95 % ends of the transition above the regime, or below where there is none above."""
    step = _step(kernel, target)
    for move in transitions(fit.named):
        if (move.lower, move.upper) == step and move.probability >= LIKELY:
            low, high = np.quantile(move.draws, (0.025, 0.975))
            return float(high / low)
    return float("nan")


def _step(kernel: Kernel, target: Target) -> tuple[str, str] | None:
    """The transition that ends the regime, by names; None where there is none between named regimes."""
    names = [next((r.name for r in REGIMES.values() if abs(r.exponent - a) < 1e-6), "") for a in kernel.exponents]
    inside = true_pieces(kernel, target)[-1]
    i = int(np.searchsorted(kernel.breaks, np.sqrt(inside[0] * inside[1])))
    steps = [names[j : j + 2] for j in (i, i - 1) if j >= 0 and len(names[j : j + 2]) == 2]
    return tuple(steps[0]) if steps else None
