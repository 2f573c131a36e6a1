"""Exit rates and separations at fixed times as one likelihood, tempered for what both know."""

from dataclasses import dataclass, replace

import numpy as np

from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.likelihood.sandwich import magnitude
from regimes.likelihood.separation import SeparationLikelihood


@dataclass(frozen=True, slots=True)
class ExitRows:
    """Exits of each row, as they enter the likelihood.

    Parameters
    ----------
    exits : (n_row, n) float array
        Credited exits over their scatter.
    risk : (n_row, n) float array [s]
        Time at risk over the scatter.
    weight : (n_row,) float array
        +1 for clusters, -1 for couples of clusters.
    """

    exits: np.ndarray
    risk: np.ndarray
    weight: np.ndarray


@dataclass(frozen=True, slots=True)
class JointLikelihood:
    r"""Both curves of the same pairs.

    .. math:: \log L = c \left( \log L_{exit} + \log L_{separation} \right)

    Parameters
    ----------
    exit_rate : ExitRateLikelihood
        Tempered by its dispersion.
    separation : SeparationLikelihood
        Tempered by kappa.
    rows : ExitRows
        Sums to `exit_rate`.
    place : (n,) int array
        Row of `rows` for each row of the separation counts: the same cluster or couple.
    tempering : float
        c: 1 if the two were independent, 1/2 if they said the same twice.
    """

    exit_rate: ExitRateLikelihood
    separation: SeparationLikelihood
    rows: ExitRows
    place: np.ndarray
    tempering: float = 1.0

    def evaluator(self, model, space):
        """Function from parameters (m, size) to tempered log L (m,), prior not included."""
        separation = self.separation.evaluator(model, space)

        def evaluate(theta):
            return self.tempering * (self.exit_rate.batch(model, theta, space) + separation(theta))

        return evaluate

    def row_values(self, model, theta, space) -> np.ndarray:
        """(n_row,) sum of the two log-likelihoods of each row, before the common tempering."""
        times = model.kernel(theta, space).exit_times(self.exit_rate.thresholds)
        exits = -(self.rows.exits @ np.log(times) + self.rows.risk @ (1.0 / times)) / self.exit_rate.dispersion
        separation = self.separation.tempering * self.separation.row_values(model, theta, space)
        return exits + np.bincount(self.place, separation, self.rows.weight.size)

    def tempered(self, model, theta, space) -> "JointLikelihood":
        """The likelihood with c measured at one model's best parameters, 1 at most.

        Raises
        ------
        FitError
            If no parameter is identified there.
        """
        c = magnitude(lambda t: self.row_values(model, t, space), self.rows.weight, theta, f"joint: {model.label}")
        return replace(self, tempering=min(c, 1.0))
