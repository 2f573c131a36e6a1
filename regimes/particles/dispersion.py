"""Absolute dispersion: how far particles go from their release, and Taylor's two limits of it."""

from dataclasses import dataclass

import numpy as np

from regimes.curves.record import Curve
from regimes.errors import DataError
from regimes.particles.velocities import Velocities


@dataclass(frozen=True, slots=True)
class AbsoluteDispersion:
    """Displacements since the release, each a curve whose rows are the independent units.

    Parameters
    ----------
    mean_east, mean_north : Curve [m]
        Mean displacement.
    east, north : Curve [m2]
        Mean square displacement of each component, about the release.
    total : Curve [m2]
        Both components together.
    """

    mean_east: Curve
    mean_north: Curve
    east: Curve
    north: Curve
    total: Curve


def absolute_dispersion(velocities: Velocities, times: np.ndarray | None = None) -> AbsoluteDispersion:
    r"""Moments of the displacement since the first position of each track.

    .. math:: \overline{x_i^2}(t) = \left\langle [x_i(t_0 + t) - x_i(t_0)]^2 \right\rangle

    Parameters
    ----------
    velocities : Velocities
        Displacements are those left after removing the mean.
    times : (n_time,) float array, optional [s]
        Rising; each is moved to the nearest step. Default: about 40, evenly spaced in their logarithm.

    Returns
    -------
    AbsoluteDispersion

    Raises
    ------
    DataError
        If times are negative, beyond every track or fall on the same step.

    Notes
    -----
    Position errors of variance e^2 add 2 e^2 to the mean square of each component.
    """
    step = velocities.step
    longest = int(np.max(np.diff(velocities.offset))) - 1
    if times is None:
        times = np.unique(np.rint(np.geomspace(1, longest, 40))) * step
    lags = np.rint(np.asarray(times, dtype=float) / step).astype(np.int64)
    if lags.size == 0 or lags[0] < 0 or lags[-1] > longest or np.any(np.diff(lags) <= 0):
        raise DataError(
            f"absolute dispersion: got times {np.array2string(np.asarray(times), threshold=6)} s; must rise from "
            f"step to step ({step:g} s) within 0 to {longest * step:g} s; drop those that do not"
        )
    sums = np.zeros((velocities.n_unit, lags.size, 5))
    count = np.zeros((velocities.n_unit, lags.size))
    for track, (start, end) in enumerate(zip(velocities.offset[:-1], velocities.offset[1:], strict=True)):
        k = np.flatnonzero(lags < end - start)
        rows = start + lags[k]
        linked = (velocities.piece[rows] == velocities.piece[start]) & (velocities.piece[start] >= 0)
        x, y = (velocities.path[rows] - velocities.path[start])[linked].T
        unit = velocities.unit[track]
        sums[unit, k[linked]] += np.stack([x, y, x * x, y * y, x * x + y * y], axis=1)
        count[unit, k[linked]] += 1.0
    names = ("mean east", "mean north", "mean square east", "mean square north", "absolute dispersion")
    weight = np.ones(velocities.n_unit)
    curves = [
        Curve(name, "time", lags * step, sums[..., i], count, weight, "m" if i < 2 else "m2")
        for i, name in enumerate(names)
    ]
    return AbsoluteDispersion(*curves)


def ballistic_limit(time: np.ndarray, variance: float) -> np.ndarray:
    r"""Mean square displacement of one component long before its velocity is forgotten, :math:`u'^2 t^2` [m2].

    References
    ----------
    Taylor 1921, Proc. London Math. Soc. 20, 196.
    """
    return variance * np.asarray(time, dtype=float) ** 2


def diffusive_limit(time: np.ndarray, variance: float, integral_time: float) -> np.ndarray:
    r"""Mean square displacement of one component long after, :math:`2 u'^2 T_L t` [m2] (Taylor 1921)."""
    return 2.0 * variance * integral_time * np.asarray(time, dtype=float)


def exponential_dispersion(time: np.ndarray, variance: float, integral_time: float) -> np.ndarray:
    r"""Mean square displacement of one component whose velocity is forgotten exponentially [m2].

    .. math:: \overline{x^2} = 2 u'^2 T_L \left[ t - T_L \left( 1 - e^{-t/T_L} \right) \right]

    It joins the two limits (Taylor 1921).
    """
    time = np.asarray(time, dtype=float)
    return 2.0 * variance * integral_time * (time + integral_time * np.expm1(-time / integral_time))
