"""Covariance from influences, for clusters that are independent and pairs that connect them."""

import numpy as np


def influence_covariance(influence: np.ndarray, weight: np.ndarray, n_cluster: np.ndarray) -> np.ndarray:
    r"""Covariance of a statistic from the influence of each row, for clusters that are independent.

    .. math:: V_{bc} = \sqrt{f_b f_c} \sum_g w_g U_{gb} U_{gc}, \qquad f_b = \frac{C_b}{C_b - 1}

    Where pairs connect clusters the weighted sum is no longer certain to be a covariance. The variance is
    therefore kept at or above half the sum over the clusters alone, which is its value when pairs that
    share a cluster are uncorrelated (each such pair stands in two rows); correlations whose matrix has
    negative eigenvalues are replaced by those of the matrix with these set to zero (Rousseeuw &
    Molenberghs 1993, Commun. Stat. Theory Methods 22, 965).

    Parameters
    ----------
    influence : (n_row, n_bin) float array
        NaN in bins without data.
    weight : (n_row,) float array
        +1 for a cluster, -1 for the pairs shared by two clusters.
    n_cluster : (n_bin,) int array
        Number of clusters that contribute to each bin.

    Returns
    -------
    (n_bin, n_bin) float array
        NaN where a bin has fewer than two clusters: one cluster says nothing about its own scatter.
    """
    scale = np.sqrt(small_sample(n_cluster))
    scaled = influence * scale
    total = scaled.T @ (weight[:, None] * scaled)
    if np.all(weight > 0):
        return total
    floor = 0.5 * np.sum(scaled[weight > 0] ** 2, axis=0)
    variance = np.maximum(np.diag(total), floor)
    return _with_variance(total, variance)


def _with_variance(total: np.ndarray, variance: np.ndarray) -> np.ndarray:
    """Covariance matrix with the given diagonal and the correlations of `total`, made non-negative."""
    result = np.full(total.shape, np.nan)
    used = np.isfinite(variance)
    moving = used & (variance > 0)
    result[np.ix_(used, used)] = 0.0
    deviation = np.sqrt(variance[moving])
    correlation = total[np.ix_(moving, moving)] / np.outer(deviation, deviation)
    np.fill_diagonal(correlation, 1.0)
    values, vectors = np.linalg.eigh(correlation)
    if values.size and values[0] < 0:
        correlation = (vectors * np.maximum(values, 0.0)) @ vectors.T
        unit = np.sqrt(np.diag(correlation))
        correlation /= np.outer(unit, unit)
    result[np.ix_(moving, moving)] = correlation * np.outer(deviation, deviation)
    return result


def small_sample(n_cluster: np.ndarray) -> np.ndarray:
    """C / (C - 1), NaN for fewer than two clusters."""
    return np.where(n_cluster > 1, n_cluster / np.maximum(n_cluster - 1, 1), np.nan)
