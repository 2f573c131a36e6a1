"""Linear flows about the centroid of a release, added to paths that do not know of them."""

import numpy as np

from regimes.synthetic.releases import about_centroid


def axes(direction_deg: float) -> tuple[np.ndarray, np.ndarray]:
    """Unit vectors (2,) along a direction, counterclockwise from east, and to its left."""
    angle = np.radians(direction_deg)
    return np.array([np.cos(angle), np.sin(angle)]), np.array([-np.sin(angle), np.cos(angle)])


def shear_displacement(local: np.ndarray, step: float, rate: float, direction_deg: float) -> np.ndarray:
    r"""Displacements by a linear shear, :math:`\int_0^t S\, \eta\, dt'` along its direction.

    Parameters
    ----------
    local : (n_release, n_member, n_fix, 2) float array [m]
    step : float [s]
        Between fixes; eta is taken to change evenly from fix to fix.
    rate : float [1/s]
        S, growth of the flow with the distance eta from the centroid, to the left of the direction.
    direction_deg : float [degree]
        Of the flow, counterclockwise from east.

    Returns
    -------
    (n_release, n_member, n_fix, 2) float array [m]
    """
    along, left = axes(direction_deg)
    across = about_centroid(local) @ left
    moved = np.zeros_like(across)
    moved[..., 1:] = np.cumsum(0.5 * rate * step * (across[..., 1:] + across[..., :-1]), axis=-1)
    return moved[..., None] * along


def convergence_displacement(
    local: np.ndarray, step: float, rate: float, direction_deg: float, lasts: float
) -> np.ndarray:
    r"""Displacements by a convergence towards a line through the centroid, while it lasts.

    .. math:: d\xi' = d\xi - \gamma \xi'\, dt, \quad t < T

    xi along the direction, prime with convergence: what separates particles at the start shrinks as
    exp(-gamma t), what the world adds at time s as exp(-gamma (t - s)). Nothing moves across the direction, so the
    divergence is -gamma, areas shrink as exp(-gamma t), and mean squared separations of pairs of all directions
    at rest in their world as (1 + exp(-2 gamma t)) / 2.

    Parameters
    ----------
    local : (n_release, n_member, n_fix, 2) float array [m]
    step : float [s]
        Between fixes; the motion of the world is taken as even from fix to fix.
    rate : float [1/s]
        gamma, >= 0.
    direction_deg : float [degree]
        Of the compression, counterclockwise from east.
    lasts : float [s]
        T; from then on increments are those of the world.

    Returns
    -------
    (n_release, n_member, n_fix, 2) float array [m]
    """
    along, _ = axes(direction_deg)
    xi = about_centroid(local) @ along
    moved = np.zeros_like(xi)
    for k in range(xi.shape[-1] - 1):
        part = min(1.0, max(0.0, lasts / step - k))  # of this interval, its beginning
        a = rate * step * part
        lost = -np.expm1(-a)
        mean = lost / a if a > 0 else 1.0  # of exp(-gamma s) over the part
        change = xi[..., k + 1] - xi[..., k]
        moved[..., k + 1] = moved[..., k] - lost * (xi[..., k] + moved[..., k]) - part * (1.0 - mean) * change
    return moved[..., None] * along
