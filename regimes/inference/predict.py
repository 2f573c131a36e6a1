"""What the fitted kernels predict, and whether the fitted curve is among the predictions."""

import numpy as np
from scipy.stats import chi2

from regimes.inference.average import mixing_weights
from regimes.inference.models import Space
from regimes.likelihood.exit_rate import ExitRateLikelihood
from regimes.theory.exit_times import mean_exit_times

QUANTILES = (0.025, 0.16, 0.5, 0.84, 0.975)


def mixed_kernels(posteriors, space: Space, size: int, rng):
    """Kernels drawn from all models by their probability: list of `Kernel`."""
    count = rng.multinomial(size, mixing_weights(posteriors))
    out = []
    for n, post in zip(count, posteriors, strict=True):
        for i in rng.integers(len(post.draws), size=n) if n else ():
            out.append(post.model.kernel(post.draws[i], space))
    return out


def rate_band(kernels, separation, ratio: float):
    """Quantiles (5, m) of the exponent ln(rho) / mean exit time [1/s] from each separation [m] on."""
    rates = np.empty((len(kernels), len(separation)))
    for i, kernel in enumerate(kernels):
        for j, delta in enumerate(separation):
            pair = np.array([delta, delta * ratio])
            time = mean_exit_times(pair, kernel.exponents, kernel.breaks, kernel.reference)[0]
            rates[i, j] = np.log(ratio) * kernel.rate / time
    return np.quantile(rates, QUANTILES, axis=0)


def fit_p_value(likelihood: ExitRateLikelihood, posteriors, space: Space, seed: int) -> float:
    """Posterior predictive p-value of the exit rates.

    Parameters
    ----------
    likelihood : ExitRateLikelihood
    posteriors : sequence of Posterior
        Models to average over.
    space : Space
    seed : int

    Returns
    -------
    float
        Probability of a scaled deviance at least as large as the observed one, averaged over draws.

    References
    ----------
    Gelman, Meng & Stern (1996) Statistica Sinica 6, 733. The scaled deviance of a replicate at the true
    kernel is chi-squared with one degree of freedom a threshold, to the order of the quasi-likelihood.
    """
    rng = np.random.default_rng(seed)
    kernels = mixed_kernels(posteriors, space, 400, rng)
    times = np.array([kernel.exit_times(likelihood.thresholds) for kernel in kernels])
    return float(np.mean(chi2.sf(likelihood.deviance(times), likelihood.exits.size)))
