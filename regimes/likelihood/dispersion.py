"""From exit statistics to their likelihood: the pooled dispersion of clusters."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import gamma

from regimes.curves import ExitStatistics
from regimes.errors import DataError
from regimes.likelihood.exit_rate import ExitRateLikelihood

_LAGS = 4  # thresholds over which correlation is looked for
_SHUFFLES = 499
UNLIKELY = 0.01  # p-value below which releases are taken to differ as a whole


@dataclass(frozen=True, slots=True)
class Dispersion:
    """Spread of the cluster scores.

    Parameters
    ----------
    pooled : float
        phi of single thresholds, pooled.
    correlation : (k,) float array
        Pooled correlation between thresholds 1 .. k steps apart that is larger than chance gives.
    clusters : float
        Effective number of clusters.
    together : float
        Variance of the summed scores of a cluster over that of independent scores: 1 where thresholds are
        independent, larger where a release is fast or slow as a whole.
    together_p : float
        Probability of so large a value if clusters did not differ; NaN where pairs connect clusters.
    """

    pooled: float
    correlation: np.ndarray
    clusters: float
    together: float = 1.0
    together_p: float = float("nan")

    @property
    def releases_differ(self) -> bool:
        """Whether clusters are fast or slow as a whole, beyond chance."""
        return bool(self.together_p < UNLIKELY)

    @property
    def total(self) -> float:
        """phi with the cross-threshold terms: what the likelihood is divided by."""
        near = 1.0 + 2.0 * float(self.correlation.sum())
        return float(self.pooled * (max(near, self.together) if self.releases_differ else near))


def exit_scatter(growth, log_ratio):
    r"""Squared coefficient of variation of the exit times of a pair under K ~ r^(2 - q), two dimensions.

    .. math:: CV^2 = \frac{q}{(2 + q) \tanh(q \ln\rho / 2)}, \quad q \to 0: \; 1 / \ln\rho

    Parameters
    ----------
    growth : (n,) float array
        q = d ln mu / d ln r, 0 (exponential) to 2 (diffusive).
    log_ratio : (n,) float array
        ln rho.

    Returns
    -------
    (n,) float array

    Notes
    -----
    r^(q/2) is a Bessel process of dimension 4 / q; its exit times have variance 2 (R^4 - x^4) / (D^2 (D + 2)) about a
    mean (R^2 - x^2) / D, e.g. Borodin & Salminen (2002) Handbook of Brownian Motion. For rho = sqrt 2: 2.9
    exponential, 1.5 diffusive.
    """
    q = np.maximum(np.asarray(growth, float), 1e-6)
    return q / ((2.0 + q) * np.tanh(0.5 * q * log_ratio))


def scores(exits, risk, weight):
    r"""Cluster scores at the saturated fit, U = S_c / mu - E_c, with the leverage correction.

    .. math:: U_{cn} = (S_{cn} / \mu_n - E_{cn}) / \sqrt{1 - S_{cn} / S_n}, \quad \mu_n = S_n / E_n

    Parameters
    ----------
    exits, risk : (n_row, n) float arrays
    weight : (n_row,) float array

    Returns
    -------
    (n_row, n) float array

    References
    ----------
    Bell & McCaffrey (2002) Survey Methodology 28, 169 (the correction known as CV2).
    """
    total_exits, total_risk = weight @ exits, weight @ risk
    leverage = np.clip(risk / total_risk, 0.0, 0.95)
    return (risk * (total_exits / total_risk) - exits) / np.sqrt(1.0 - leverage)


def measure_dispersion(exits, risk, weight) -> Dispersion:
    r"""One pooled dispersion for all thresholds.

    .. math:: \phi = \frac{\sum_n \sum_c U_{cn}^2}{\sum_n E_n} (1 + 2 \sum_k \rho_k)

    Parameters
    ----------
    exits : (n_row, n) float array
        Exits with credit.
    risk : (n_row, n) float array [s]
    weight : (n_row,) float array

    Notes
    -----
    A value per threshold would go up and down with its mean and ruin the coverage (simulated: 42 to 76 % where
    95 % were stated). Pairs that share a cluster with others through one member only enter with weight
    -1 (see `Curve`); phi never falls below half the sum over clusters alone. rho_k enters, lag by lag, while
    it exceeds two standard errors.
    """
    u = scores(exits, risk, weight)
    main = weight > 0
    total = float((weight @ exits).sum())
    square = max(float(np.sum(weight @ u**2)), 0.5 * float(np.sum(u[main] ** 2)) if np.any(~main) else 0.0)
    if not square > 0 or not total > 0:
        raise DataError(
            f"exit rates: got {int(np.sum(main))} clusters with {total:g} exits; their spread cannot be measured; "
            "at least two clusters with exits are needed"
        )
    share = risk[main].sum(axis=1)
    clusters = float(share.sum() ** 2 / np.sum(share**2))
    rho = []
    for k in range(1, min(_LAGS, u.shape[1] - 1) + 1):
        products = weight @ (u[:, :-k] * u[:, k:])
        value = float(products.sum()) / square * u.shape[1] / (u.shape[1] - k)
        if value < 2.0 / np.sqrt(clusters * (u.shape[1] - k)):
            break
        rho.append(value)
    return Dispersion(square / total, np.array(rho), clusters, *_together(u, risk, weight))


def _together(u, risk, weight) -> tuple[float, float]:
    """Excess variance of the summed scores of clusters; its p-value by shuffling clusters at each threshold."""
    square = float(np.sum(u**2))
    if np.any(weight < 0) or u.shape[0] < 4 or u.shape[1] < 3:
        return 1.0, float("nan")
    seen = float(np.sum(u.sum(axis=1) ** 2)) / square
    rng = np.random.default_rng(0)
    active = [np.flatnonzero(risk[:, n] > 0) for n in range(u.shape[1])]
    larger = 0
    for _ in range(_SHUFFLES):
        total = np.zeros(u.shape[0])
        for n, rows in enumerate(active):
            total[rows] += u[rng.permutation(rows), n]
        larger += float(np.sum(total**2)) / square >= seen
    return seen, (1.0 + larger) / (1.0 + _SHUFFLES)


def exit_rate_likelihood(statistics: ExitStatistics, credited, scatter=None) -> tuple[ExitRateLikelihood, Dispersion]:
    """Likelihood of the resolved exit statistics.

    Parameters
    ----------
    statistics : ExitStatistics
        Resolved intervals only.
    credited : (n_row, n) float array
        Exits with credit for unfinished passages, same intervals.
    scatter : (n,) float array, optional
        Relative dispersion of each interval, about 1 on average, from `exit_scatter`; default: the same for all.

    Notes
    -----
    Exits and time at risk enter divided by the scatter, so that interval n has dispersion phi scatter_n.
    """
    weight = statistics.weight
    share = 1.0 if scatter is None else 1.0 / np.asarray(scatter, float)
    exits, risk = credited * share, statistics.time_at_risk * share
    spread = measure_dispersion(exits, risk, weight)
    return (
        ExitRateLikelihood(
            thresholds=np.ascontiguousarray(statistics.thresholds),
            exits=weight @ exits,
            risk=weight @ risk,
            dispersion=spread.total,
        ),
        spread,
    )


def rate_intervals(exits, risk, log_ratio, dispersion, level: float):
    """Central interval of each exit rate [1/s] from the gamma-shaped likelihood.

    Parameters
    ----------
    exits, risk : (n,) float arrays
        E with credit, and S [s].
    log_ratio : (n,) float array
    dispersion : float
    level : float
        For instance 0.95.

    Returns
    -------
    low, high : (n,) float arrays
        NaN where there is no exit.
    """
    shape = np.where(exits > 0, exits / dispersion, np.nan)
    scale = np.where(risk > 0, dispersion / np.where(risk > 0, risk, 1.0), np.nan)
    tail = (1.0 - level) / 2.0
    return log_ratio * gamma.ppf(tail, shape, scale=scale), log_ratio * gamma.ppf(1 - tail, shape, scale=scale)
