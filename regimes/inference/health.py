"""Whether a chain has converged, and how many independent draws it is worth."""

from dataclasses import dataclass

import numpy as np

LARGEST_RHAT = 1.01  # Vehtari et al. (2021) Bayesian Analysis 16, 667
LEAST_ESS = 400.0  # the same
LEAST_LENGTHS = 50.0  # autocorrelation times that a chain must be long (emcee documentation)


@dataclass(frozen=True, slots=True)
class Health:
    """Convergence of one fit, or the worst of several.

    Parameters
    ----------
    rhat_max : float
        Largest split R-hat over the parameters, groups of walkers being the chains.
    ess_min : float
        Smallest effective sample size over the parameters.
    lengths_min : float
        Length of the chain in integrated autocorrelation times, smallest over the parameters.
    """

    rhat_max: float
    ess_min: float
    lengths_min: float

    @property
    def ok(self) -> bool:
        """Whether all three criteria hold."""
        return bool(self.rhat_max < LARGEST_RHAT and self.ess_min > LEAST_ESS and self.lengths_min > LEAST_LENGTHS)

    @property
    def reason(self) -> str:
        """What is wrong, or an empty string."""
        said = []
        if not self.rhat_max < LARGEST_RHAT:
            said.append(f"split R-hat {self.rhat_max:.3f} is not below {LARGEST_RHAT}")
        if not self.ess_min > LEAST_ESS:
            said.append(f"effective sample size {self.ess_min:.0f} is not above {LEAST_ESS:.0f}")
        if not self.lengths_min > LEAST_LENGTHS:
            said.append(f"the chain is {self.lengths_min:.0f} autocorrelation times long, not {LEAST_LENGTHS:.0f}")
        return "; ".join(said)


def worst(healths) -> Health:
    """The worst value of each criterion over several fits."""
    healths = list(healths)
    return Health(
        max(h.rhat_max for h in healths),
        min(h.ess_min for h in healths),
        min(h.lengths_min for h in healths),
    )


def rhat_of_chains(chains) -> float:
    r"""R-hat of one parameter, for chains already split in time.

    .. math:: \hat R = \sqrt{\frac{(n-1) W / n + B / n}{W}}

    Parameters
    ----------
    chains : (n_chain, n_draw) float array

    Returns
    -------
    float
        1 for chains that agree; infinite if no chain moves but they differ.

    References
    ----------
    Gelman et al. (2013) Bayesian Data Analysis, 3rd ed., equation 11.4.
    """
    chains = np.asarray(chains, float)
    n = chains.shape[1]
    within = chains.var(axis=1, ddof=1).mean()
    between = n * chains.mean(axis=1).var(ddof=1)
    if within == 0:
        return 1.0 if between == 0 else np.inf
    return float(np.sqrt(((n - 1) * within / n + between / n) / within))


def judge(draws, autocorrelation_time, groups: int = 4) -> Health:
    """Health of an ensemble.

    Parameters
    ----------
    draws : (n_walker, n_step, size) float array
    autocorrelation_time : (size,) float array
        In steps, averaged over walkers.
    groups : int
        Walkers are pooled into so many chains, each split in time, since one walker of an ensemble is short.

    Returns
    -------
    Health
    """
    walkers, steps, size = draws.shape
    tau = np.asarray(autocorrelation_time, float)
    if not np.all(np.isfinite(tau)):
        return Health(np.inf, 0.0, 0.0)
    even = draws[: walkers - walkers % groups].reshape(groups, -1, steps, size)
    halves = np.concatenate([even[:, :, : steps // 2], even[:, :, -(steps // 2) :]]).reshape(2 * groups, -1, size)
    rhat = max(rhat_of_chains(halves[:, :, j]) for j in range(size))
    return Health(rhat, float(walkers * steps / tau.max()), float(steps / tau.max()))
