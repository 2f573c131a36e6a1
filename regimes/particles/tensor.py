"""Diffusivity tensor of single particles: size and direction of its axes."""

from dataclasses import dataclass

import numpy as np

from regimes.arrays import frozen_array
from regimes.particles.correlation import LagCurves
from regimes.particles.estimate import Estimate, estimate

# An axis of random direction has an interval of 171 degrees; one this wide is called unknown.
NO_DIRECTION = 120.0


@dataclass(frozen=True, slots=True)
class DiffusivityTensor:
    r"""Symmetric part of the single-particle diffusivity tensor, per component (D2 of one component = 2 kappa t).

    .. math:: \kappa_{ij}(s) = \langle u_i'(t)\, [x_j'(t) - x_j'(t - s)] \rangle

    Parameters
    ----------
    major, minor, mean : Estimate [m2/s]
        Eigenvalues and half the trace of the tensor averaged over the second half of the window. With isotropic
        truth the major one comes out too large and the minor one too small, by about their errors.
    angle : Estimate [degrees]
        Direction of the major axis, counterclockwise from east (from x), -90 to 90; the ends of its interval may
        lie beyond. An interval of +-90 degrees says nothing of the direction.
    tensor : (2, 2) float array [m2/s]
        East-north components of the data's tensor.
    lag : (n_lag,) float array [s]
    east, north, cross : (n_lag,) float arrays [m2/s]
        kappa_xx, kappa_yy and the symmetric part of kappa_xy against lag.
    low, high : (n_lag,) float arrays [m2/s]
        95 % band of half the trace; NaN where the units are fewer than two.

    References
    ----------
    Davis 1991, J. Geophys. Res. 96(S04).
    """

    major: Estimate
    minor: Estimate
    mean: Estimate
    angle: Estimate
    tensor: np.ndarray
    lag: np.ndarray
    east: np.ndarray
    north: np.ndarray
    cross: np.ndarray
    low: np.ndarray
    high: np.ndarray

    def __post_init__(self) -> None:
        for name in ("tensor", "lag", "east", "north", "cross", "low", "high"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.float64))


def diffusivity_tensor(curves: LagCurves, n_unit: int) -> DiffusivityTensor:
    """Axes of the tensor, averaged over the second half of the window, with intervals from the resamples.

    Parameters
    ----------
    curves : LagCurves
    n_unit : int
        Number of independent units.
    """
    level = curves.diffusivity[:, curves.lag.size // 2 :].mean(axis=1)
    major, minor, angle = principal_axes(level)
    half_trace = 0.5 * (curves.diffusivity[..., 0] + curves.diffusivity[..., 1])
    low = high = np.full(curves.lag.size, np.nan)
    if len(half_trace) > 1:
        low, high = np.quantile(half_trace[1:], (0.025, 0.975), axis=0)
    east, north, cross = curves.diffusivity[0].T
    return DiffusivityTensor(
        major=estimate(major, n_unit, positive=True),
        minor=estimate(minor, n_unit, positive=True),
        mean=estimate(0.5 * (major + minor), n_unit, positive=True),
        angle=_direction(angle, n_unit),
        tensor=level[0][[[0, 2], [2, 1]]],
        lag=curves.lag,
        east=east,
        north=north,
        cross=cross,
        low=low,
        high=high,
    )


def principal_axes(tensor: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Eigenvalues of symmetric 2 by 2 tensors and the direction of the larger.

    Parameters
    ----------
    tensor : (n, 3) float array
        xx, yy and xy components.

    Returns
    -------
    major, minor, angle : (n,) float arrays
        Angle in degrees from x towards y, in (-90, 90]; 0 where the tensor is isotropic.
    """
    xx, yy, xy = tensor.T
    centre, radius = 0.5 * (xx + yy), np.hypot(0.5 * (xx - yy), xy)
    return centre + radius, centre - radius, np.degrees(0.5 * np.arctan2(xy, 0.5 * (xx - yy)))


def _direction(angle: np.ndarray, n_unit: int) -> Estimate:
    """Estimate of an axis: resampled directions are taken within 90 degrees of the data's."""
    turned = angle[0] + np.mod(angle - angle[0] + 90.0, 180.0) - 90.0
    found = estimate(turned, n_unit)
    if found.high - found.low > NO_DIRECTION:
        return Estimate(found.value, found.median, found.value - 90.0, found.value + 90.0)
    return found
