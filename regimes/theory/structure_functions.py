"""Second-order structure functions of an isotropic two-dimensional spectrum, exact for broken power laws."""

from dataclasses import dataclass

import numpy as np
from scipy.special import gamma, j0, j1

from regimes.arrays import frozen_array
from regimes.errors import DataError

_PER_DECADE = 120  # nodes of the grid: breaks between them cost less than 1e-4
_FAR = 150.0  # k r beyond which whole cells hold many oscillations and only their ends are felt
_GAUSS = np.polynomial.legendre.leggauss(24)


@dataclass(frozen=True, slots=True)
class Transform:
    r"""Linear map from a spectrum on a grid of ln k to structure functions at given separations.

    .. math:: S_{LL} = \int E\,[(1-\gamma) W_L + \gamma W_T]\,dk, \quad
              W_L = 2 - \frac{4 J_1(kr)}{kr}, \quad W_T = 4 - 4 J_0(kr) - W_L

    and S_TT with W_L and W_T exchanged; gamma is the divergent share of the energy and
    :math:`\int E\,dk = \langle u^2 + v^2 \rangle / 2`.

    Parameters
    ----------
    separation : (n_r,) float array [m]
    log_wavenumber : (n_k,) float array
        ln k, k in rad/m, evenly spaced.
    along, across : (n_r, n_k) float arrays [1/m]
        Integrals of W_L and of W_T with the cubic that interpolates k E between nodes.

    Notes
    -----
    Exact for E k that is cubic in ln k between nodes, oscillations included; relative error below 1e-4 for
    power laws whose slope changes by up to 4 anywhere on the default grid. E is zero outside the grid.

    References
    ----------
    Lindborg (1999) J. Fluid Mech. 388, 259; Lindborg (2015) J. Fluid Mech. 762, R4; LaCasce (2016) Fluids 1, 33.
    """

    separation: np.ndarray
    log_wavenumber: np.ndarray
    along: np.ndarray
    across: np.ndarray

    def __post_init__(self) -> None:
        for name in ("separation", "log_wavenumber", "along", "across"):
            object.__setattr__(self, name, frozen_array(getattr(self, name), np.float64))

    def longitudinal(self, energy, divergent=0.0) -> np.ndarray:
        """S_LL [m2/s2], (..., n_r), of spectra E (..., n_k) [m3/s2] with divergent shares (...)."""
        return self._mix(energy, divergent, self.along, self.across)

    def transverse(self, energy, divergent=0.0) -> np.ndarray:
        """S_TT [m2/s2], (..., n_r), of spectra E (..., n_k) [m3/s2] with divergent shares (...)."""
        return self._mix(energy, divergent, self.across, self.along)

    def total(self, energy) -> np.ndarray:
        """S_LL + S_TT [m2/s2], (..., n_r), of spectra E (..., n_k) [m3/s2]; the same for every divergent share."""
        return np.asarray(energy, float) @ (self.along + self.across).T

    @staticmethod
    def _mix(energy, divergent, rotational_part, divergent_part) -> np.ndarray:
        energy = np.asarray(energy, float)
        share = np.asarray(divergent, float)[..., None]
        return (1.0 - share) * (energy @ rotational_part.T) + share * (energy @ divergent_part.T)


def make_transform(separation, low: float, high: float, per_decade: int = _PER_DECADE) -> Transform:
    """Transform for spectra between two wavenumbers.

    Parameters
    ----------
    separation : (n_r,) float array [m]
    low, high : float [rad/m]
        Ends of the grid of wavenumbers.
    per_decade : int
        Nodes in each decade; the error at a break between nodes goes as their distance squared.

    Returns
    -------
    Transform

    Raises
    ------
    DataError
        If separations or wavenumbers are not positive and finite, or `high` is less than twice `low`.
    """
    r = np.atleast_1d(np.asarray(separation, float))
    if r.ndim != 1 or not np.all(np.isfinite(r)) or np.any(r <= 0):
        raise DataError(f"structure functions: got separations {r}; must be finite and > 0 m; leave others out")
    if not (low > 0 and 2 * low <= high < np.inf):
        raise DataError(
            f"structure functions: got wavenumbers {low:g} to {high:g} rad/m; must be positive and at least a factor "
            "2 apart; widen the range"
        )
    if per_decade < 10:
        raise DataError(f"structure functions: got {per_decade} nodes a decade; must be >= 10; take more")
    n = max(4, int(np.ceil(np.log10(high / low) * per_decade)) + 1)
    grid = np.linspace(np.log(low), np.log(high), n)
    along, across = (np.empty((r.size, n)) for _ in range(2))
    for i, at in enumerate(r):
        along[i], across[i] = _weights(grid, at)
    k = np.exp(grid)
    return Transform(r, grid, along * k, across * k)


def _weights(grid, r):
    """Integrals over ln k of W_L and W_T with each node's cubic, for one separation."""
    h, n = grid[1] - grid[0], grid.size
    x, weight = 0.5 * (_GAUSS[0] + 1.0), 0.5 * h * _GAUSS[1]
    near = np.flatnonzero(np.exp(grid[1:]) * r <= _FAR)
    last = int(near[-1]) + 1 if near.size else 0
    along, across = np.zeros(n), np.zeros(n)
    for j in range(n - 1):
        first = min(max(j - 1, 0), n - 4)
        basis = _cubics(x + (j - first)) * weight
        here = slice(first, first + 4)
        if j < last:
            kernel = kernels(np.exp(grid[j] + h * x) * r)
            along[here] += basis @ kernel[0]
            across[here] += basis @ kernel[1]
        else:  # mean of the kernels; what the oscillations leave at the ends follows
            along[here] += 2.0 * basis.sum(axis=1)
            across[here] += 2.0 * basis.sum(axis=1)
    if last < n - 1:
        for j, sign in ((last, -1.0), (n - 1, 1.0)):
            z = np.exp(grid[j]) * r
            across[j] -= sign * 4.0 * j1(z) / z  # leading term by parts of the integral of J0 dlnk
    return along, across


def _cubics(x):
    """Four Lagrange cubics through the nodes 0, 1, 2, 3 at x: (4, n)."""
    nodes = np.arange(4.0)
    rows = []
    for i in range(4):
        others = np.delete(nodes, i)
        rows.append(np.prod([(x - o) / (i - o) for o in others], axis=0))
    return np.array(rows)


def kernels(x) -> tuple[np.ndarray, np.ndarray]:
    r"""W_L and W_T at x = k r for nondivergent flow; exchanged for irrotational flow.

    .. math:: W_L = 2 - 4 J_1(x) / x, \qquad W_T = 4 - 4 J_0(x) - W_L

    Series below x = 0.02, where the differences would lose digits.
    """
    x = np.asarray(x, float)
    small = x < 0.02
    safe = np.where(small, 1.0, x)
    along = np.where(small, x**2 / 4.0 * (1.0 - x**2 / 24.0), 2.0 - 4.0 * j1(safe) / safe)
    total = np.where(small, x**2 * (1.0 - x**2 / 16.0), 4.0 - 4.0 * j0(x))
    return along, total - along


def power_law_constant(slope):
    r"""c in :math:`S = 4 E_0 c\, r^{\alpha - 1}` for E = E_0 k^-alpha without ends, 1 < alpha < 3.

    .. math:: c = -2^{-\alpha} \Gamma((1-\alpha)/2) / \Gamma((1+\alpha)/2), \qquad S_{LL} = S / (1 + \alpha)
    """
    b = np.asarray(slope, float)
    return -(2.0**-b) * gamma((1.0 - b) / 2.0) / gamma((1.0 + b) / 2.0)


def log_broken_power_law(log_wavenumber, breaks, slopes) -> np.ndarray:
    """ln E of continuous broken power laws, 0 at the first break.

    Parameters
    ----------
    log_wavenumber : (n_k,) float array
    breaks : (m, n_break) float array
        ln k of the breaks, rising.
    slopes : (m, n_break + 1) float array
        alpha in E ~ k^-alpha from low to high wavenumbers.

    Returns
    -------
    (m, n_k) float array
    """
    breaks, slopes = np.atleast_2d(breaks), np.atleast_2d(slopes)
    x = np.asarray(log_wavenumber, float)[None] - breaks[:, :1]
    out = -slopes[:, :1] * np.minimum(x, 0.0) - slopes[:, 1:2] * np.maximum(x, 0.0)
    for i in range(1, breaks.shape[1]):
        beyond = np.maximum(np.asarray(log_wavenumber, float)[None] - breaks[:, i : i + 1], 0.0)
        out -= (slopes[:, i + 1 : i + 2] - slopes[:, i : i + 1]) * beyond
    return out


def helmholtz_split(separation, longitudinal, transverse) -> tuple[np.ndarray, np.ndarray]:
    r"""Structure functions of the rotational and of the divergent part of isotropic motion.

    .. math:: D_{rot} = S_{TT} + \int_0^r \frac{S_{TT} - S_{LL}}{s} ds, \quad
              D_{div} = S_{LL} - \int_0^r \frac{S_{TT} - S_{LL}}{s} ds

    Parameters
    ----------
    separation : (n,) float array [m]
        Rising.
    longitudinal, transverse : (n,) float arrays [m2/s2]

    Returns
    -------
    rotational, divergent : (n,) float arrays [m2/s2]
        They add up to the total structure function.

    Notes
    -----
    Below the first separation the difference is continued as the power law of the first two; between
    separations the trapezoidal rule in ln r is used, so their spacing sets the error.

    References
    ----------
    Lindborg (2015) J. Fluid Mech. 762, R4; Buehler, Callies & Ferrari (2014) J. Fluid Mech. 756, 1007.
    """
    r = np.asarray(separation, float)
    gap = np.asarray(transverse, float) - np.asarray(longitudinal, float)
    head = 0.0
    if r.size > 1 and gap[0] * gap[1] > 0:
        head = gap[0] / max(np.log(gap[1] / gap[0]) / np.log(r[1] / r[0]), 0.2)
    inner = np.concatenate([[0.0], np.cumsum(0.5 * (gap[1:] + gap[:-1]) * np.diff(np.log(r)))]) + head
    return np.asarray(transverse, float) + inner, np.asarray(longitudinal, float) - inner
