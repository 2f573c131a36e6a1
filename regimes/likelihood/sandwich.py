"""How much a likelihood of dependent parts must be tempered, from the scores of its clusters."""

import numpy as np

from regimes.errors import FitError

_STEP = 0.02  # of the central differences, in ln rate, alpha and ln transition


def magnitude(row_values, weight, theta, label: str) -> float:
    r"""Power to which a likelihood is raised to have, on average, the curvature of its estimator's covariance.

    .. math:: c = p / \mathrm{tr}(H^{-1} J), \quad J = \frac{C}{C - 1} \sum_i w_i u_i u_i^T

    Parameters
    ----------
    row_values : callable
        From parameters (p,) to the (n_row,) log-likelihood of each cluster, or couple of clusters.
    weight : (n_row,) float array
        w, +1 for clusters and -1 for couples; C counts the clusters.
    theta : (p,) float array
        Parameters of the maximum.
    label : str
        The model, for the error.

    Returns
    -------
    float
        Over the parameters that the data determine.

    Raises
    ------
    FitError
        If none is determined there.

    Notes
    -----
    u are the scores of the rows, H minus the Hessian of their weighted sum, both by central differences.

    References
    ----------
    Ribatet, Cooley & Davison (2012) Statistica Sinica 22, 813, magnitude adjustment; Aronow, Samii & Assenova (2015)
    Political Analysis 23, 564, for the couples.
    """
    score, curvature = _score_and_curvature(row_values, weight, np.asarray(theta, float))
    clusters = np.sum(weight > 0)
    spread = clusters / max(clusters - 1, 1) * score.T @ (weight[:, None] * score)
    known = np.flatnonzero(np.diag(curvature) > 1e-3 * np.max(np.abs(np.diag(curvature))))
    part = np.ix_(known, known)
    trace = np.trace(np.linalg.solve(curvature[part], spread[part])) if known.size else np.nan
    if not trace > 0 or np.any(np.linalg.eigvalsh(curvature[part]) <= 0):
        raise FitError(f"{label} has no definite maximum; cannot be tempered")
    return float(known.size / trace)


def _score_and_curvature(row_values, weight, theta):
    """Row scores (n_row, p) and minus the Hessian (p, p) by central differences."""
    size, h = theta.size, _STEP
    eye = h * np.eye(size)
    rows = {}

    def value(shift):
        key = tuple(np.round(shift / h).astype(int))
        if key not in rows:
            rows[key] = row_values(theta + shift)
        return rows[key]

    score = np.stack([(value(eye[j]) - value(-eye[j])) / (2 * h) for j in range(size)], axis=1)
    curvature = np.empty((size, size))
    for j in range(size):
        for k in range(j + 1):
            mixed = value(eye[j] + eye[k]) - value(eye[j] - eye[k]) - value(eye[k] - eye[j]) + value(-eye[j] - eye[k])
            curvature[j, k] = curvature[k, j] = -float(weight @ mixed) / (4 * h * h)
    return score, curvature
