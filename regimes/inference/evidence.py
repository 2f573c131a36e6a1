"""Evidence of a sampled model by bridge sampling."""

import numpy as np
from scipy.special import logsumexp

from regimes.errors import FitError

_CENTRES = 150
_BROAD = 0.1  # share of the proposal that is a wide Gaussian


def bridge(log_posterior, draws, log_values, seed: int, size: int = 3000) -> tuple[float, float]:
    r"""ln of the integral of an unnormalised posterior, and its Monte Carlo error.

    .. math:: Z = \frac{E_q[p\,h]}{E_p[q\,h]}, \quad h = \frac{1}{s_1 p / Z + s_2 q}

    Parameters
    ----------
    log_posterior : callable
        From (m, d) parameters to (m,) ln values, prior density included; -inf outside.
    draws : (n, d) float array
        Draws from it, nearly independent (thinned).
    log_values : (n,) float array
        ln values at the draws.
    seed : int
    size : int
        Draws of the proposal.

    Returns
    -------
    log_evidence, error : float
        `error` is the standard error of ln Z.

    Raises
    ------
    FitError
        If the proposal misses the posterior or the iteration does not settle.

    Notes
    -----
    The proposal q is a kernel mixture around a random subset of one half of the draws plus a wide
    Gaussian, so that plateaus and several modes are covered; the other half enters the bridge.

    References
    ----------
    Meng & Wong (1996) Statistica Sinica 6, 831; error: Fruehwirth-Schnatter (2004) Econometrics J. 7, 143.
    """
    rng = np.random.default_rng(seed)
    order = rng.permutation(len(draws))
    fit, use = order[: len(order) // 2], order[len(order) // 2 :]
    proposal = Mixture(draws[fit], rng)
    tried = proposal.sample(size, rng)
    log_p2, log_q2 = log_posterior(tried), proposal.log_density(tried)
    log_p1, log_q1 = log_values[use], proposal.log_density(draws[use])
    n1, n2 = len(use), size
    s1, s2 = np.log(n1 / (n1 + n2)), np.log(n2 / (n1 + n2))
    log_z = float(logsumexp(log_p2 - log_q2) - np.log(n2))
    if not np.isfinite(log_z):
        raise FitError(
            f"bridge sampling: got a first ln Z of {log_z} from {size} draws of the proposal; some must have a finite "
            "posterior; sample longer"
        )
    for _ in range(200):
        top = log_p2 - np.logaddexp(s1 + log_p2 - log_z, s2 + log_q2)
        bottom = log_q1 - np.logaddexp(s1 + log_p1 - log_z, s2 + log_q1)
        new = float(logsumexp(top) - np.log(n2) - logsumexp(bottom) + np.log(n1))
        moved, log_z = abs(new - log_z), new
        if moved < 1e-8:
            f2 = np.exp(top - logsumexp(top) + np.log(n2))
            f1 = np.exp(bottom - logsumexp(bottom) + np.log(n1))
            return log_z, float(np.sqrt(f2.var() / n2 + f1.var() / n1))
    raise FitError(
        f"bridge sampling: got a last change of {moved:.1e} in ln Z after 200 rounds; must be below 1e-8; the draws do "
        "not cover the posterior; look at the convergence of the fit, and whether some pairs are copies of others"
    )


class Mixture:
    r"""Gaussian kernels around draws, with one wide Gaussian for the tails.

    .. math:: q = \frac{0.9}{m} \sum_i N(c_i, h^2 \Sigma) + 0.1 \, N(\bar c, w^2 \Sigma), \quad
              h = 1.1 \left( \frac{4}{(d + 2) m} \right)^{1 / (d + 4)}, \; w = 1.8

    Parameters
    ----------
    draws : (n, d) float array
        Their covariance is Sigma; up to 150 of them are the centres c.
    rng : numpy Generator
        Chooses the centres.

    References
    ----------
    Bandwidth: Silverman (1986) Density Estimation, equation 4.14.
    """

    def __init__(self, draws, rng: np.random.Generator):
        n, d = draws.shape
        self.mean = draws.mean(axis=0)
        covariance = np.atleast_2d(np.cov(draws.T)) + 1e-12 * np.eye(d)
        self.root = np.linalg.cholesky(covariance)
        count = min(_CENTRES, n)
        self.centres = draws[rng.choice(n, count, replace=False)]
        self.narrow = 1.1 * (4.0 / (d + 2.0) / count) ** (1.0 / (d + 4.0))
        self.wide = 1.8

    def sample(self, size: int, rng: np.random.Generator):
        d = self.mean.size
        noise = rng.standard_normal((size, d)) @ self.root.T
        broad = rng.random(size) < _BROAD
        centre = self.centres[rng.integers(len(self.centres), size=size)]
        return np.where(broad[:, None], self.mean + self.wide * noise, centre + self.narrow * noise)

    def log_density(self, x):
        d = self.mean.size
        base = -0.5 * d * np.log(2 * np.pi) - np.sum(np.log(np.diag(self.root)))
        white = np.linalg.solve(self.root, (x - self.mean).T).T
        centres = np.linalg.solve(self.root, (self.centres - self.mean).T).T
        square = np.sum(white**2, 1)[:, None] + np.sum(centres**2, 1) - 2.0 * white @ centres.T
        near = logsumexp(-0.5 * np.maximum(square, 0.0) / self.narrow**2, axis=1)
        near += base - d * np.log(self.narrow) - np.log(len(self.centres)) + np.log1p(-_BROAD)
        far = base - d * np.log(self.wide) - 0.5 * np.sum(white**2, 1) / self.wide**2 + np.log(_BROAD)
        return np.logaddexp(near, far)
