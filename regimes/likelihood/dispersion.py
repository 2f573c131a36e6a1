"""From exit statistics to their likelihood: the pooled dispersion of clusters."""

from dataclasses import dataclass

import numpy as np
from scipy.stats import gamma

from regimes.curves import ExitStatistics
from regimes.errors import DataError
from regimes.likelihood.exit_rate import ExitRateLikelihood

_LAGS = 4  # thresholds over which correlation is looked for


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
    """

    pooled: float
    correlation: np.ndarray
    clusters: float

    @property
    def total(self) -> float:
        """phi with the cross-threshold terms: what the likelihood is divided by."""
        return float(self.pooled * (1.0 + 2.0 * self.correlation.sum()))


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
    return Dispersion(square / total, np.array(rho), clusters)


def exit_rate_likelihood(statistics: ExitStatistics, credited) -> tuple[ExitRateLikelihood, Dispersion]:
    """Likelihood of the resolved exit statistics.

    Parameters
    ----------
    statistics : ExitStatistics
        Resolved intervals only.
    credited : (n_row, n) float array
        Exits with credit for unfinished passages, same intervals.
    """
    weight = statistics.weight
    spread = measure_dispersion(credited, statistics.time_at_risk, weight)
    return (
        ExitRateLikelihood(
            thresholds=np.ascontiguousarray(statistics.thresholds),
            exits=weight @ credited,
            risk=weight @ statistics.time_at_risk,
            dispersion=spread.total,
        ),
        spread,
    )


def rate_intervals(exits, risk, log_ratio, dispersion: float, level: float):
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
