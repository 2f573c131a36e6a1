"""Velocity covariance and diffusivity against lag, for the data and for every resample of the units."""

from dataclasses import dataclass

import numpy as np

from regimes.particles.sums import LaggedSums


@dataclass(frozen=True, slots=True)
class LagCurves:
    """Curves of the data (first row) and of resamples of the units (the others).

    Parameters
    ----------
    lag : (n_lag,) float array [s]
    covariance : (n_draw + 1, n_lag, 3) float array [m2/s2]
        R_uu, R_vv and the symmetric part of R_uv.
    diffusivity : (n_draw + 1, n_lag, 3) float array [m2/s]
        Symmetric part of kappa: east-east, north-north, east-north.
    """

    lag: np.ndarray
    covariance: np.ndarray
    diffusivity: np.ndarray


def lag_curves(sums: LaggedSums, weights: np.ndarray, noise: float, centred: bool) -> LagCurves:
    r"""Ratios of the sums, less what the position error adds, plus what removing record means took away.

    .. math:: R_{ij}(s) = \langle u_i(t) u_j(t - s) \rangle, \qquad
              \kappa_{ij}(s) = \langle u_i(t) [x_j(t) - x_j(t - s)] \rangle

    Position errors of variance e^2 in each fix add e^2 / 2 dt^2 to R(0), take half of that from R(2 dt), and add
    e^2 / 2 dt to kappa(dt); nothing elsewhere. A record's own mean has the variance

    .. math:: V_{ij} = \frac{2}{L} \int_0^W \left(1 - \frac{s}{L}\right) R_{ij}(s)\, ds

    by which R, and s times which kappa, come out too small; it is put back, with R as corrected (two linear
    equations for the integrals of R and s R up to the longest lag W).

    Parameters
    ----------
    sums : LaggedSums
    weights : (n_draw + 1, n_unit) float array
        How often each unit counts.
    noise : float [m2/s2]
        Velocity variance of one component due to the position error.
    centred : bool
        Whether each track's own mean was removed.

    Returns
    -------
    LagCurves

    References
    ----------
    Davis 1991, J. Geophys. Res. 96(S04), for kappa (as minus velocity times the displacement back in time).
    """
    count, moved = weights @ sums.count, weights @ sums.transport_count
    covariance = _mean(weights, sums.covariance, count)
    diffusivity = _mean(weights, sums.transport, moved)
    step = sums.lag[1]
    covariance[:, 0, :2] -= noise
    if sums.lag.size > 2:
        covariance[:, 2, :2] += 0.5 * noise
    diffusivity[:, 1, :2] -= noise * step
    if centred:
        short, short_moved = _mean(weights, sums.shortness, count), _mean(weights, sums.transport_shortness, moved)
        integrals = _true_integrals(sums.lag, covariance, short)
        covariance = covariance + _variance_of_mean(short, integrals)
        diffusivity = diffusivity + sums.lag[:, None] * _variance_of_mean(short_moved, integrals)
    return LagCurves(sums.lag, covariance, diffusivity)


def running_integral(values: np.ndarray, step: float, axis: int = 1) -> np.ndarray:
    """Integral from zero to every lag, by trapezia."""
    values = np.moveaxis(values, axis, 0)
    total = np.zeros_like(values)
    total[1:] = np.cumsum(0.5 * step * (values[1:] + values[:-1]), axis=0)
    return np.moveaxis(total, 0, axis)


def _mean(weights: np.ndarray, sums: np.ndarray, count: np.ndarray) -> np.ndarray:
    """(n_draw + 1, n_lag, n) weighted sums over their counts; NaN where there are none."""
    total = np.tensordot(weights, sums, axes=1)
    return total / np.where(count > 0, count, np.nan)[..., None]


def _variance_of_mean(short: np.ndarray, integrals: tuple[np.ndarray, np.ndarray]) -> np.ndarray:
    """(n_draw + 1, n_lag, 3) variance of record means from the integrals of R and of s R."""
    area, moment = (np.asarray(i)[:, None, :] for i in integrals)
    return 2.0 * (area * short[..., 0, None] - moment * short[..., 1, None])


def _true_integrals(lag: np.ndarray, covariance: np.ndarray, short: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Integrals of R and of s R, (n_draw + 1, 3) each, of the covariance with the variance of means put back."""

    def area(values: np.ndarray) -> np.ndarray:
        return np.trapezoid(values, dx=lag[1], axis=1)

    time = lag[:, None]
    known = np.stack([area(covariance), area(time * covariance)], axis=1)
    gain, late = area(short), area(time * short)  # (n_draw + 1, 2): of 1/L and of 1/L^2
    system = np.empty((len(covariance), 2, 2))
    for row, part in enumerate((gain, late)):
        system[:, row, 0] = -2.0 * part[:, 0]
        system[:, row, 1] = 2.0 * part[:, 1]
        system[:, row, row] += 1.0
    solved = np.linalg.solve(system, known)
    return solved[:, 0], solved[:, 1]
