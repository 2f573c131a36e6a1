"""The exit-rate fit by quadrature alone: the same likelihood, fast enough for hundreds of replicates."""

from dataclasses import dataclass

import numpy as np

from regimes.fitting.options import Options
from regimes.fitting.rates import Rates, exit_rates
from regimes.inference.average import Posterior, local_exponents, mixed_slopes, probabilities, regime_probability
from regimes.inference.fit import exit_rate_space
from regimes.inference.models import free_models, named_models
from regimes.inference.quadrature import integrate
from regimes.inference.slope import RangeSlope, posterior_list
from regimes.inference.slope_mixture import slope_of_either
from regimes.pairs import Pairs
from regimes.tracks import Tracks
from regimes.verdict.rule import Stretch, called, stretches


@dataclass(frozen=True, slots=True)
class QuickFit:
    """Named sequences and free kernels weighed by quadrature.

    Parameters
    ----------
    rates : Rates
    named, free : tuple of Posterior
    separation : (n,) float array [m]
        Middles of the resolved intervals.
    probability : dict of str to (n,) float array
        Of each named regime.
    exponent_low, exponent_high : (n,) float arrays
        95 % interval of the kernel exponent from the free kernels.
    """

    rates: Rates
    named: tuple[Posterior, ...]
    free: tuple[Posterior, ...]
    separation: np.ndarray
    probability: dict[str, np.ndarray]
    exponent_low: np.ndarray
    exponent_high: np.ndarray

    @property
    def best(self) -> tuple[str, ...]:
        """Most probable named sequence."""
        return self.named[int(np.argmax(probabilities(self.named)))].model.pieces

    @property
    def challenge(self) -> float:
        """ln Bayes factor of the best free kernel over the best named sequence."""
        return max(p.log_evidence for p in self.free) - max(p.log_evidence for p in self.named)

    @property
    def called(self) -> dict[str, np.ndarray]:
        """Where each regime meets both halves of the rule."""
        return called(self.probability, self.exponent_low, self.exponent_high)

    def stretches(self) -> tuple[Stretch, ...]:
        """Runs of separations over which one regime meets the rule."""
        return stretches(self.called, self.rates.likelihood.thresholds)

    def slope(self, low: float, high: float, seed: int) -> RangeSlope:
        """alpha over a range [m], see `slope_of_either`."""
        return slope_of_either(self.rates.likelihood, low, high, np.random.default_rng(seed)).slope


def quick_fit(tracks: Tracks, pairs: Pairs, options: Options | None = None) -> QuickFit:
    """Exit rates, every model by quadrature, and the rule; no sampling, no second opinion.

    Parameters
    ----------
    tracks : Tracks
    pairs : Pairs
    options : Options, optional

    Returns
    -------
    QuickFit

    Raises
    ------
    DataError
        If too few separations are resolved.
    """
    options = options or Options()
    return fit_rates(exit_rates(tracks, pairs, options), options)


def fit_rates(rates: Rates, options: Options) -> QuickFit:
    """The fit of exit rates that are there already, see `quick_fit`."""
    space = exit_rate_space(rates.likelihood)
    rng = np.random.default_rng(options.seed)
    models = named_models(options.regimes, options.most_transitions)
    named = posterior_list([integrate(rates.likelihood, m, space) for m in models], 400, rng)
    free = posterior_list([integrate(rates.likelihood, m, space) for m in free_models()], 1000, rng)
    edges = rates.likelihood.thresholds
    middle = np.sqrt(edges[1:] * edges[:-1])
    low, high = np.quantile(local_exponents(mixed_slopes(free, middle, 4000, rng)), (0.025, 0.975), axis=0)
    return QuickFit(rates, named, free, middle, regime_probability(named, middle), low, high)
