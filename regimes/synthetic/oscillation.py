"""Rotary oscillations, as of inertial motion, added to the paths of particles."""

import numpy as np

from regimes.synthetic.releases import about_centroid

# Plane waves of a coherent field; their directions divide the circle, so that few give an isotropic field.
WAVES = 32


def oscillation(
    local: np.ndarray,
    times: np.ndarray,
    speed: float,
    angular_velocity: float,
    wavelength: float | None,
    rng: np.random.Generator,
) -> np.ndarray:
    r"""Displacements of a rotary oscillation, zero at the first fix of each particle.

    .. math:: z(t) = \frac{u}{|\omega|} \left[ c(x(t))\, e^{i \omega t} - c(x(0)) \right]

    with c = e^{i phase}, one phase for each particle, or the sum of plane waves of one wavelength and random
    phases, :math:`c(x) = M^{-1/2} \sum_m e^{i (k_m \cdot x + \phi_m)}`, at the position x of the particle averaged
    over the last period.

    Parameters
    ----------
    local : (n_release, n_member, n_fix, 2) float array [m]
        Positions about a centre of each release.
    times : (n_fix,) float array [s]
        Since the release, evenly spaced.
    speed : float [m/s]
        u, root of the mean squared speed; that of one component is a factor sqrt 2 smaller.
    angular_velocity : float [rad/s]
        omega, not zero; negative turns clockwise.
    wavelength : float or None [m]
        None for particles without coherence.
    rng : Generator

    Returns
    -------
    (n_release, n_member, n_fix, 2) float array [m]

    Notes
    -----
    Each release has a field of its own, at rest relative to its centroid, as it has a flow of its own: the
    flow that carries the release carries the waves too, and particles meet them at their intrinsic frequency.
    Two particles at distance r have mean squared difference :math:`2 (u / \omega)^2 [1 - J_0(k r)]`: plane
    waves from all sides (Bessel's integral). Positions are averaged (exponential weights, one period) since the
    velocities of a world without memory grow without limit as fixes come closer: the waves met at the
    momentary position would be faster than u by a like amount.
    """
    if wavelength is None:
        phase = 2.0 * np.pi * rng.random((*local.shape[:2], 1))
        field = np.exp(1j * np.broadcast_to(phase, local.shape[:3]))
    else:
        memory = np.exp(-abs(angular_velocity) * (times[1] - times[0]) / (2.0 * np.pi))
        field = _coherent(_trailing(about_centroid(local), memory), 2.0 * np.pi / wavelength, rng)
    turned = speed / abs(angular_velocity) * field * np.exp(1j * angular_velocity * times)
    moved = turned - turned[..., :1]
    return np.stack([moved.real, moved.imag], axis=-1)


def _trailing(place: np.ndarray, memory: float) -> np.ndarray:
    """Positions averaged over the past with exponential weights, the first held before the start."""
    mean = place.copy()
    for k in range(1, place.shape[2]):
        mean[:, :, k] = memory * mean[:, :, k - 1] + (1.0 - memory) * place[:, :, k]
    return mean


def _coherent(place: np.ndarray, wavenumber: float, rng: np.random.Generator) -> np.ndarray:
    """Complex amplitudes at the places, mean square one."""
    angle, phase = 2.0 * np.pi * rng.random((2, place.shape[0], WAVES))
    angle = (angle + 2.0 * np.pi * np.arange(WAVES)) / WAVES
    total = np.zeros(place.shape[:3], dtype=complex)
    for m in range(WAVES):
        k = wavenumber * np.stack([np.cos(angle[:, m]), np.sin(angle[:, m])], axis=1)
        along = np.einsum("rmfi,ri->rmf", place, k)
        total += np.exp(1j * (along + phase[:, m, None, None]))
    return total / np.sqrt(WAVES)
