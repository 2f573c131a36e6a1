"""How probable the exit counts are under a kernel, clusters being the independent sample."""

from dataclasses import dataclass

import numpy as np
from numba import njit
from scipy.special import gammaln

from regimes.theory.exit_times import mean_exit_times


@njit(cache=True, nogil=True)
def log_likelihood_batch(thresholds, sums, exponents, breaks, log_rate, reference):
    """Log-likelihood of many kernels (rows of `exponents` and `breaks`, one `log_rate` each) for (2, n) E and S."""
    out = np.empty(log_rate.size)
    for i in range(log_rate.size):
        mean = mean_exit_times(thresholds, exponents[i], breaks[i], reference)
        total = 0.0
        for n in range(mean.size):
            log_mu = np.log(mean[n]) - log_rate[i]
            total -= sums[0, n] * log_mu + sums[1, n] * np.exp(-log_mu)
        out[i] = total
    return out


@dataclass(frozen=True, slots=True)
class ExitRateLikelihood:
    r"""Quasi-likelihood of exits and time at risk.

    .. math:: \log L = -\frac{1}{\phi} \sum_n \left[ E_n \ln \mu_n + S_n / \mu_n \right]

    Parameters
    ----------
    thresholds : (n + 1,) float array [m]
        Separations delta.
    exits : (n,) float array
        E, exits over all clusters.
    risk : (n,) float array [s]
        S, time at risk.
    dispersion : float
        phi, pooled over thresholds from the cluster scores.

    Notes
    -----
    mu_n is the mean exit time of the kernel. One phi for all kernels, so that evidences compare.
    """

    thresholds: np.ndarray
    exits: np.ndarray
    risk: np.ndarray
    dispersion: float

    def batch(self, model, theta, space):
        """log L of parameters (m, size); the prior is not included."""
        theta = np.atleast_2d(np.asarray(theta, float))
        return log_likelihood_batch(
            self.thresholds,
            np.stack([self.exits, self.risk]) / self.dispersion,
            np.ascontiguousarray(model.exponents(theta)),
            np.ascontiguousarray(model.breaks(theta)),
            np.ascontiguousarray(theta[:, 0]),
            space.reference,
        )

    def deviance(self, mean_times):
        """Scaled deviance against the saturated fit at given mean exit times (..., n) [s]."""
        mu = np.asarray(mean_times, float)
        ratio = self.risk / mu
        exits = np.broadcast_to(self.exits, mu.shape)
        entropy = np.where(exits > 0, exits * np.log(np.where(exits > 0, exits, 1.0) / ratio), 0.0)
        return 2.0 * np.sum(entropy - (exits - ratio), axis=-1) / self.dispersion


@njit(cache=True, nogil=True)
def grid_log_evidence(thresholds, exits, risk, dispersion, exponents, breaks, reference):
    """ln of the likelihood integrated over ln rate, and the gamma rate that goes with it, per grid point.

    The integral over ln rate of rate^A exp(-rate B) is Gamma(A) / B^A with A = sum E / phi and
    B = sum S / (phi m), m the mean exit time at unit rate; ln Gamma(A) is left to the caller.
    """
    m = exponents.shape[0]
    out, scale = np.empty(m), np.empty(m)
    shape = exits.sum() / dispersion
    for i in range(m):
        mean = mean_exit_times(thresholds, exponents[i], breaks[i], reference)
        b = 0.0
        log_sum = 0.0
        for n in range(mean.size):
            b += risk[n] / mean[n]
            log_sum += exits[n] * np.log(mean[n])
        scale[i] = b / dispersion
        out[i] = -log_sum / dispersion - shape * np.log(scale[i])
    return out, scale


def gamma_shape(likelihood: ExitRateLikelihood) -> tuple[float, float]:
    """Shape A of the conditional posterior of the rate, and ln Gamma(A)."""
    shape = float(likelihood.exits.sum() / likelihood.dispersion)
    return shape, float(gammaln(shape))
