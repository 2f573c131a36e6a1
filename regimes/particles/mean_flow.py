"""The slow part of a velocity, from the record itself or from a mean flow that the user brings."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.interpolate import RegularGridInterpolator
from scipy.signal import fftconvolve

from regimes.arrays import frozen_array
from regimes.errors import DataError

# Least share of the filter's weight that must lie on known velocities.
LEAST_COVERAGE = 0.75
_REACH = 4.0  # standard deviations at which the filter is cut off


@dataclass(frozen=True, slots=True)
class MeanFlow:
    """A mean flow on a grid, read by bilinear interpolation.

    Parameters
    ----------
    x : (n_x,) float array [degrees east, or m when `planar`]
        Rising. Any winding of longitude; a grid around the globe closes on itself.
    y : (n_y,) float array [degrees north, or m]
        Rising or falling.
    u, v : (n_y, n_x) float arrays [m/s]
        Eastward and northward velocity, NaN where unknown.
    planar : bool

    Raises
    ------
    DataError
        If shapes disagree or the axes do not rise.
    """

    x: np.ndarray
    y: np.ndarray
    u: np.ndarray
    v: np.ndarray
    planar: bool = False

    def __post_init__(self) -> None:
        x, y, u, v = (np.asarray(a, dtype=float) for a in (self.x, self.y, self.u, self.v))
        if min(x.size, y.size) < 2 or not u.shape == v.shape == (y.size, x.size):
            raise DataError(
                f"mean flow: got axes of {x.size} and {y.size} points, u {u.shape} and v {v.shape}; u and v must "
                "have a row for each y (or latitude) and a column for each x (or longitude), 2 or more each; "
                "transpose or cut the grid"
            )
        if np.all(np.diff(y) < 0):
            y, u, v = y[::-1], u[::-1], v[::-1]
        if not (np.all(np.diff(x) > 0) and np.all(np.diff(y) > 0)):
            raise DataError(
                "mean flow: got axes that neither rise nor fall throughout; x (longitude) must rise from point to "
                "point, y (latitude) rise or fall; sort the grid"
            )
        for name, array in (("x", x), ("y", y), ("u", u), ("v", v)):
            object.__setattr__(self, name, frozen_array(array, np.float64))

    @classmethod
    def from_dataset(cls, dataset: Any, planar: bool = False) -> "MeanFlow":
        """Mean flow of an xarray Dataset with coordinates lon and lat (x and y when planar), variables u and v.

        Raises
        ------
        DataError
            If one of them is missing or u or v has other dimensions.
        """
        x, y = ("x", "y") if planar else ("lon", "lat")
        missing = [name for name in (x, y, "u", "v") if name not in dataset.variables]
        if missing:
            raise DataError(
                f"mean flow: {', '.join(missing)} not in the dataset, which has "
                f"{', '.join(sorted(map(str, dataset.variables)))}; needed are {x}, {y}, u and v; rename them"
            )
        for name in ("u", "v"):
            if set(dataset[name].dims) != {x, y}:
                raise DataError(
                    f"mean flow: {name} has dimensions {', '.join(map(str, dataset[name].dims))}; must be {y} and "
                    f"{x}; choose one time and level, or average over them"
                )
        fields = (dataset[name].transpose(y, x).values for name in ("u", "v"))
        return cls(dataset[x].values, dataset[y].values, *fields, planar=planar)

    def at(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Mean velocity at points.

        Parameters
        ----------
        x, y : (n,) float arrays
            In the units of the grid.

        Returns
        -------
        (n, 2) float array [m/s]
            NaN outside the grid, and beside a node without a velocity.
        """
        grid_x, field = self.x, np.stack([self.u, self.v], axis=-1)
        if not self.planar:
            x = grid_x[0] + np.mod(np.asarray(x, dtype=float) - grid_x[0], 360.0)
            room = 360.0 - (grid_x[-1] - grid_x[0])
            if 0.0 < room <= 1.5 * float(np.max(np.diff(grid_x))):
                grid_x = np.append(grid_x, grid_x[0] + 360.0)
                field = np.concatenate([field, field[:, :1]], axis=1)
        read = RegularGridInterpolator((self.y, grid_x), field, bounds_error=False, fill_value=np.nan)
        return read(np.column_stack([y, x]))


def low_pass(velocity: np.ndarray, step: float, period: float) -> np.ndarray:
    r"""Slow part of a velocity: a straight line fitted about each sample with Gaussian weights.

    .. math:: w(s) = e^{-s^2 / 2\sigma^2}, \qquad \sigma = \frac{P}{\pi}\sqrt{\tfrac12 \ln 2},
              \qquad \mathrm{gain}(f) = 2^{-(f P)^2}

    Half the amplitude passes at the cut-off period P, 96 % at 4 P and nothing (2^-16) at P / 4. The line rather
    than the weighted mean keeps a trend unharmed beside gaps and ends, where the weights are one-sided.

    Parameters
    ----------
    velocity : (n, 2) float array [m/s]
        NaN where unknown.
    step, period : float [s]

    Returns
    -------
    (n, 2) float array [m/s]
        NaN where less than three quarters of the weight lies on known velocities: within P / 8 of an end, and
        in and beside long gaps.
    """
    sigma = period / np.pi * np.sqrt(0.5 * np.log(2.0))
    reach = int(np.ceil(_REACH * sigma / step))
    s = np.arange(-reach, reach + 1) * step
    kernel = np.exp(-0.5 * (s / sigma) ** 2)
    known = np.isfinite(velocity[:, 0])
    filled = np.where(known[:, None], velocity, 0.0)
    # Convolution turns the kernel round; s is odd, so its sign turns too.
    weights = [fftconvolve(known.astype(float), kernel * (-s) ** k, mode="full")[reach:-reach] for k in range(3)]
    sums = [fftconvolve(filled, (kernel * (-s) ** k)[:, None], mode="full", axes=0)[reach:-reach] for k in range(2)]
    spread = weights[0] * weights[2] - weights[1] ** 2
    enough = weights[0] >= LEAST_COVERAGE * kernel.sum()
    scale = np.where(enough, spread, np.nan)
    line = (weights[2][:, None] * sums[0] - weights[1][:, None] * sums[1]) / scale[:, None]
    return np.where(enough[:, None], line, np.nan)
