"""What a fit hands on: every model with its evidence, draws and health."""

from dataclasses import dataclass

import numpy as np

from regimes.inference.average import Posterior, Transition, probabilities, regime_probability, transitions
from regimes.inference.health import Health, worst
from regimes.inference.models import Model, Space

_MATTERS = 0.01


@dataclass(frozen=True, slots=True)
class Fit:
    """One model fitted to one curve.

    Parameters
    ----------
    model : Model
    log_evidence : float
        ln of the marginal likelihood; by bridge sampling where `sampled`, else the screening value.
    log_evidence_error : float
        Monte Carlo standard error; NaN where not sampled.
    screened_log_evidence : float
        The cheap approximation that decided whether to sample.
    draws : (n_walker, n_step, size) float array
        Posterior draws, thinned; empty (0, 0, size) where not sampled.
    log_likelihood : (n_walker, n_step) float array
    health : Health or None
        None where not sampled.
    """

    model: Model
    log_evidence: float
    log_evidence_error: float
    screened_log_evidence: float
    draws: np.ndarray
    log_likelihood: np.ndarray
    health: Health | None

    @property
    def sampled(self) -> bool:
        """Whether the model was sampled."""
        return self.health is not None

    @property
    def posterior(self) -> Posterior:
        """Evidence and flat draws, for averaging."""
        return Posterior(self.model, self.log_evidence, self.draws.reshape(-1, self.model.size))


@dataclass(frozen=True, slots=True)
class Inference:
    """All models fitted to one curve.

    Parameters
    ----------
    curve : str
        "exit_rate", "separation" or "joint".
    space : Space
        Range and prior bounds, common to all models.
    named : tuple of Fit
        Sequences of named regimes.
    free : tuple of Fit
        Kernels with free exponents.
    dispersion : float
        Factor by which the likelihood was tempered for dependence inside clusters.
    """

    curve: str
    space: Space
    named: tuple[Fit, ...]
    free: tuple[Fit, ...]
    dispersion: float

    @property
    def health(self) -> Health:
        """Worst convergence among the models that matter: one in a hundred of their group, or more."""
        found = []
        for group in (self.named, self.free):
            share = probabilities([f.posterior for f in group])
            found += [f.health for f, p in zip(group, share, strict=True) if f.health is not None and p >= _MATTERS]
        return worst(found)

    def named_posteriors(self) -> tuple[Posterior, ...]:
        """Named sequences for averaging."""
        return tuple(f.posterior for f in self.named)

    def free_posteriors(self) -> tuple[Posterior, ...]:
        """Free-exponent kernels for averaging."""
        return tuple(f.posterior for f in self.free)

    def sequence_probability(self) -> np.ndarray:
        """(n_named,) probability of each named sequence."""
        return probabilities(self.named_posteriors())

    def regime_probability(self, separation) -> dict[str, np.ndarray]:
        """Probability of each named regime at each separation [m]."""
        return regime_probability(self.named_posteriors(), separation)

    def transitions(self) -> tuple[Transition, ...]:
        """Transitions between named regimes, the most probable first."""
        return transitions(self.named_posteriors())

    @property
    def challenge(self) -> float:
        """ln Bayes factor of the best free-exponent kernel over the best named sequence."""
        return max(f.log_evidence for f in self.free) - max(f.log_evidence for f in self.named)
