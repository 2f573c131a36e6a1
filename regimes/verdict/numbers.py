"""From posteriors to the numbers of a verdict."""

from dataclasses import replace

import numpy as np

from regimes.inference.average import local_exponents, mixed_slopes
from regimes.inference.record import Inference
from regimes.inference.slope import RangeSlope
from regimes.inference.slope_mixture import EitherSlope
from regimes.verdict.record import BySeparation, Interval, OuterScale, Sequence, Slope, TransitionScale

_LEVELS = (0.5, 0.16, 0.84, 0.025, 0.975)
_ONE_SIDED = {"lower_bound": (0.32, 0.05), "upper_bound": (0.68, 0.95)}
NOTHING = Interval(np.nan, np.nan, np.nan, np.nan, np.nan)


def interval(draws) -> Interval:
    """Median, central 68 % and 95 % interval of draws."""
    return Interval(*(float(v) for v in np.quantile(draws, _LEVELS)))


def by_separation(fit: Inference, edges, seed: int, size: int = 4000) -> BySeparation:
    """Regime probabilities and local slope at the middles of the edges [m]."""
    rng = np.random.default_rng(seed)
    edges = np.asarray(edges, float)
    middle = np.sqrt(edges[1:] * edges[:-1])
    a = local_exponents(mixed_slopes(fit.free_posteriors(), middle, size, rng))
    median, low, high = np.quantile(a, (0.5, 0.025, 0.975), axis=0)
    slopes = [2.0 * v - 1.0 for v in (median, low, high)]
    return BySeparation(edges, middle, fit.regime_probability(middle), *slopes, median, low, high)


def sequences(fit: Inference, least: float = 1e-3) -> tuple[Sequence, ...]:
    """Named sequences above a probability, the most probable first."""
    p = fit.sequence_probability()
    order = [i for i in np.argsort(-p, kind="stable") if p[i] >= least]
    return tuple(Sequence(fit.named[i].model.pieces, float(p[i])) for i in order)


def transition_scales(fit: Inference, least: float = 0.01) -> tuple[TransitionScale, ...]:
    """Transitions above a probability, the most probable first."""
    return tuple(
        TransitionScale(t.lower, t.upper, interval(t.draws), t.probability)
        for t in fit.transitions()
        if t.probability >= least
    )


def slope_record(found: RangeSlope, curve: str) -> Slope:
    """Numbers of a slope; a bound keeps only its one-sided 68 % and 95 % ends."""
    if found.kind == "none":
        value = NOTHING
    elif found.kind == "estimate":
        value = interval(found.draws)
    else:
        inner, outer = (float(v) for v in np.quantile(found.draws, _ONE_SIDED[found.kind]))
        nan = float("nan")
        lower = found.kind == "lower_bound"
        value = Interval(nan, inner, nan, outer, nan) if lower else Interval(nan, nan, inner, nan, outer)
    return Slope(found.low, found.high, curve, value, found.kind, found.reason)


def either_record(found: EitherSlope) -> Slope:
    """Numbers of an exit-rate slope, with where the spectrum may end."""
    return replace(
        slope_record(found.slope, "exit_rate"),
        outer_scale=OuterScale(*(float(v) for v in found.outer_scale)),
        log_bayes_factor_end=float(found.log_bayes_factor_end),
    )
