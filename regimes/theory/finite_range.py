"""The kernel of a spectrum that ends: no bend of the outer scale mistaken for a slope."""

from functools import lru_cache

import numpy as np
from scipy.interpolate import RectBivariateSpline
from scipy.special import j1

from regimes.errors import FitError
from regimes.theory.kernel import Kernel

MEMORY = 0.03  # strain of the waves longer than the outer scale, in units of k0^3 E(k0); set by simulation
SLOPES = (1.0, 4.0)  # range of alpha that is tabulated
NODES = np.arange(0.0, np.log(2e7), 0.2)  # ln separation [ln m] between power-law pieces, 1 m to 20000 km
_NODES_AND_ENDS = np.concatenate(([NODES[0] - 1.0], NODES, [NODES[-1] + 1.0]))
_LOW, _HIGH = np.log(1e-5), np.log(100.0)  # ln of r / L that is tabulated


def finite_range_kernel(spectral_slope: float, outer_scale: float, rate: float, span) -> Kernel:
    r"""Separation kernel of E(k) = k^-alpha for wavelengths below an outer scale L, nothing above.

    .. math:: K(r) = C \int_{k_0}^\infty E(k)\, \tau(k) \left[1 - \frac{2 J_1(kr)}{kr}\right] dk, \quad
              \tau(k) = \left[ \int_{k_0}^k p^2 E(p)\, dp + c\, k_0^3 E(k_0) \right]^{-1/2}, \quad
              k_0 = 2 \pi / L

    Parameters
    ----------
    spectral_slope : float
        alpha, 1 to 4.
    outer_scale : float [m]
        L, the longest wavelength.
    rate : float [1/s]
        K / r^2 at the reference separation, the geometric middle of `span`.
    span : (float, float) [m]
        Separations between which the kernel is resolved; beyond, its end pieces go on.

    Returns
    -------
    Kernel
        Piecewise power law through the kernel at five nodes per factor e of separation.

    Raises
    ------
    FitError
        If alpha is out of range or a length is not positive.

    Notes
    -----
    K -> r^((alpha + 1) / 2) for r << L and 1 < alpha < 3, r^2 for alpha > 3, constant for r >> L. The usual
    closure takes tau = (k^3 E)^(-1/2), each wave its own turnover time; in random-Fourier flows of slope 5/3, 2
    and 5/2 it bends too early and leaves exponents a factor 1.6 to 1.9 too low at half the outer scale. With the
    strain of all longer waves, and c = 0.03, the same flows agree to 10 % from 1/400 to 1/2 of the outer scale.
    """
    if not SLOPES[0] <= spectral_slope <= SLOPES[1]:
        raise FitError(f"finite-range kernel: got slope {spectral_slope:g}; must be {SLOPES[0]:g} to {SLOPES[1]:g}")
    if not (outer_scale > 0 and rate > 0 and 0 < span[0] < span[1]):
        raise FitError(
            f"finite-range kernel: got outer scale {outer_scale:g} m, rate {rate:g} 1/s, span {span}; must be "
            "positive, the span increasing"
        )
    exponents = local_exponents(np.array([spectral_slope]), np.log(np.array([outer_scale])))[0]
    return Kernel(exponents, np.exp(NODES), rate, float(np.sqrt(span[0] * span[1])))


def local_exponents(spectral_slope, log_outer) -> np.ndarray:
    """Kernel exponents of the pieces below, between and above `NODES`, (m, n), for m slopes and ln outer scales [ln m].

    Slopes are held to 1 .. 4; below the tabulated separations the exponent no longer changes.
    """
    alpha = np.clip(np.asarray(spectral_slope, float), *SLOPES)
    x = _NODES_AND_ENDS[None, :] - np.asarray(log_outer, float)[:, None]
    inside = np.clip(x, _LOW, _HIGH)
    wide = np.broadcast_to(alpha[:, None], x.shape)
    below = _table().ev(alpha, np.full(alpha.size, _LOW), dy=1)
    log_k = _table().ev(wide, inside) + below[:, None] * np.minimum(x - _LOW, 0.0)
    return np.diff(log_k, axis=1) / np.diff(_NODES_AND_ENDS)


@lru_cache(maxsize=1)
def _table() -> RectBivariateSpline:
    """ln K over alpha and ln(r / L), K in units of k0 = 2 pi."""
    alphas = np.linspace(*SLOPES, 31)
    x = np.linspace(_LOW, _HIGH, 120)
    return RectBivariateSpline(alphas, x, np.array([_log_kernel(alpha, np.exp(x)) for alpha in alphas]), kx=3, ky=3)


def _log_kernel(alpha: float, r: np.ndarray) -> np.ndarray:
    """ln of the closure's integral for L = 1, by trapezoids in ln k up to k r = 30, analytic beyond."""
    k = 2.0 * np.pi * np.exp(np.linspace(0.0, np.log(1e9), 6000))
    energy = k**-alpha
    if abs(alpha - 3.0) < 1e-9:
        strain = np.log(k / k[0])
    else:
        strain = (k ** (3.0 - alpha) - k[0] ** (3.0 - alpha)) / (3.0 - alpha)
    weight = energy / np.sqrt(strain + MEMORY * k[0] ** (3.0 - alpha)) * k
    step = np.log(k[1] / k[0])
    tail = np.concatenate((np.cumsum(weight[::-1])[::-1][1:], [0.0])) * step
    out = np.empty(r.size)
    for i, separation in enumerate(r):
        z = k * separation
        near = z < 30.0
        last = int(np.sum(near)) - 1
        if last < 1:
            out[i] = np.log(np.sum(weight) * step)
            continue
        inner = weight[near] * _filter(z[near])
        out[i] = np.log(step * (np.sum(inner) - 0.5 * (inner[0] + inner[-1])) + tail[last])
    return out


def _filter(z: np.ndarray) -> np.ndarray:
    """1 - 2 J1(z) / z, by series where it is small."""
    small = z < 1e-2
    safe = np.where(small, 1.0, z)
    return np.where(small, z * z / 8.0 * (1.0 - z * z / 24.0), 1.0 - 2.0 * j1(safe) / safe)
