"""Both data sets fitted in one way: ratio of exponents, difference of slopes, ratio of transitions, same regime."""

from dataclasses import dataclass, fields

import numpy as np

from regimes.arrays import frozen_array
from regimes.compare.plateau import NO_PLATEAU, plateau_end
from regimes.errors import DataError
from regimes.fitting import QuickFit
from regimes.inference.average import transitions
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.units import KM

LEAST_COMMON = 3  # intervals that both must resolve
_DRAWS = 4000
_LIKELY = 0.5  # probability of a transition in both cases from which on its scales are compared
_TAILS = (0.5, 0.025, 0.975)


@dataclass(frozen=True, slots=True)
class TransitionRatio:
    """Scale of a transition in the observed case over that in the model: median and 95 % ends (3,)."""

    lower: str
    upper: str
    ratio: tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class Fitted:
    """What the fits of both cases say beside one another.

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
        Resolved by both.
    log_ratio : (n_draw, n) float array
        Posterior draws of ln of the observed exponent over that of the model.
    same_regime : (n,) float array
        Probability that the same named regime holds in both.
    alpha : (2, 3) float array
        Spectral slope of the observed case and of the model over `alpha_range`: median and 95 % ends; NaN where there
        is no estimate.
    alpha_difference : (3,) float array
        Observed less model, the same.
    alpha_range : (float, float) [m]
    alpha_reason : str
        Why there is no difference; empty where there is one.
    transitions : tuple of TransitionRatio
    plateau : (3,) float array [m]
        Where the constant exponent of the model ends, though the observed one changes below; NaN where it does not.
    plateau_reason : str
    """

    thresholds: np.ndarray
    log_ratio: np.ndarray
    same_regime: np.ndarray
    alpha: np.ndarray
    alpha_difference: np.ndarray
    alpha_range: tuple[float, float]
    alpha_reason: str
    transitions: tuple[TransitionRatio, ...]
    plateau: np.ndarray
    plateau_reason: str

    def __post_init__(self) -> None:
        for field in fields(self):
            if isinstance(getattr(self, field.name), np.ndarray):
                object.__setattr__(self, field.name, frozen_array(getattr(self, field.name), np.float64))

    @property
    def separation(self) -> np.ndarray:
        """(n,) middles of the intervals [m]."""
        return np.sqrt(self.thresholds[1:] * self.thresholds[:-1])

    @property
    def ratio(self) -> np.ndarray:
        """(3, n) observed exponent over that of the model: median and 95 % ends."""
        return np.exp(np.quantile(self.log_ratio, _TAILS, axis=0))

    def ratio_over(self, chosen: np.ndarray) -> np.ndarray:
        """(3,) the same for the geometric mean over some intervals."""
        return np.exp(np.quantile(self.log_ratio[:, chosen].mean(axis=1), _TAILS))


def common_thresholds(observed: ExitRateLikelihood, model: ExitRateLikelihood) -> np.ndarray:
    """Thresholds that both resolve, of one ladder.

    Raises
    ------
    DataError
        If fewer than three intervals are resolved by both.
    """
    one, two = observed.thresholds, model.thresholds
    both = one[np.any(np.abs(np.log(one[:, None] / two[None])) < 1e-6, axis=1)]
    if both.size <= LEAST_COMMON:
        ranges = [f"{t[0] / KM:.3g} to {t[-1] / KM:.3g} km" for t in (one, two)]
        raise DataError(
            f"compare: got resolved separations of {ranges[0]} (observed) and {ranges[1]} (model); they must share "
            f"{LEAST_COMMON} intervals at least; use pairs that start closer or records that last longer in one of them"
        )
    return both


def fitted_alike(observed: QuickFit, model: QuickFit, slope_range: tuple[float, float] | None, seed: int) -> Fitted:
    r"""Put the fits of two cases beside one another.

    Exponents are drawn from their gamma-shaped likelihoods, :math:`\lambda_n \sim \ln\rho_n \,
    \mathrm{Gamma}(E_n / \phi, \phi / S_n)`, with the dispersion of each case.

    Parameters
    ----------
    observed, model : QuickFit
        On thresholds of one ladder.
    slope_range : (float, float) or None [m]
        For the spectral slope; None for all that both resolve.
    seed : int

    Returns
    -------
    Fitted

    Raises
    ------
    DataError
        If fewer than three intervals are resolved by both.
    """
    rng = np.random.default_rng(seed)
    thresholds = common_thresholds(observed.rates.likelihood, model.rates.likelihood)
    draws = [_log_exponents(fit.rates.likelihood, thresholds, rng) for fit in (observed, model)]
    places = [_places(fit.rates.likelihood, thresholds) for fit in (observed, model)]
    same = sum(observed.probability[name][places[0]] * model.probability[name][places[1]] for name in model.probability)
    low, high = float(thresholds[0]), float(thresholds[-1])
    if slope_range is not None:
        low, high = max(low, slope_range[0]), min(high, slope_range[1])
    alpha, difference, reason = _alpha(observed, model, (low, high), seed)
    plateau, no_plateau = plateau_end(observed, model, thresholds, rng)
    return Fitted(
        thresholds=thresholds,
        log_ratio=draws[0] - draws[1],
        same_regime=same,
        alpha=alpha,
        alpha_difference=difference,
        alpha_range=(low, high),
        alpha_reason=reason,
        transitions=_transition_ratios(observed, model, rng),
        plateau=plateau,
        plateau_reason=NO_PLATEAU if no_plateau else "",
    )


def _places(likelihood: ExitRateLikelihood, thresholds: np.ndarray) -> slice:
    first = int(np.argmin(np.abs(np.log(likelihood.thresholds / thresholds[0]))))
    return slice(first, first + thresholds.size - 1)


def _log_exponents(likelihood: ExitRateLikelihood, thresholds: np.ndarray, rng) -> np.ndarray:
    """Draws (n_draw, n) of ln exponent [1/s] at the intervals."""
    cut = _places(likelihood, thresholds)
    shape = likelihood.exits[cut] / likelihood.dispersion
    gamma = rng.gamma(shape, likelihood.dispersion / likelihood.risk[cut], (_DRAWS, shape.size))
    return np.log(np.diff(np.log(thresholds)) * gamma)


def _alpha(observed: QuickFit, model: QuickFit, span: tuple[float, float], seed: int):
    """Slopes of both, their difference, and why there is none."""
    slopes = [fit.slope(*span, seed + k) for k, fit in enumerate((observed, model))]
    alpha = np.full((2, 3), np.nan)
    why = []
    for k, (slope, name) in enumerate(zip(slopes, ("the observed case", "the model"), strict=True)):
        if slope.kind == "estimate":
            alpha[k] = np.quantile(slope.draws, _TAILS)
        else:
            why.append(f"{name}: {slope.reason}")
    if why:
        return alpha, np.full(3, np.nan), "; ".join(why)
    n = min(slope.draws.size for slope in slopes)
    return alpha, np.quantile(slopes[0].draws[:n] - slopes[1].draws[:n], _TAILS), ""


def _transition_ratios(observed: QuickFit, model: QuickFit, rng) -> tuple[TransitionRatio, ...]:
    theirs = {(t.lower, t.upper): t for t in transitions(model.named)}
    out = []
    for mine in transitions(observed.named):
        other = theirs.get((mine.lower, mine.upper))
        if other is None or min(mine.probability, other.probability) < _LIKELY:
            continue
        ratio = rng.choice(mine.draws, _DRAWS) / rng.choice(other.draws, _DRAWS)
        out.append(TransitionRatio(mine.lower, mine.upper, tuple(float(q) for q in np.quantile(ratio, _TAILS))))
    return tuple(out)
