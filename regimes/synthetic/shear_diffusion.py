"""Particles that diffuse in a linear shear: the world whose t^3 along the flow is not Richardson's."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.synthetic.linear_flow import axes
from regimes.synthetic.releases import as_tracks_and_pairs, check_sizes, polygon
from regimes.tracks import Tracks


@dataclass(frozen=True, slots=True)
class ShearDiffusion:
    r"""Constant diffusivity in a linear shear.

    .. math:: dx = S y\, dt + \sqrt{2 \kappa}\, dW_x, \qquad dy = \sqrt{2 \kappa}\, dW_y

    Parameters
    ----------
    diffusivity : float [m2/s]
        kappa of one particle, > 0; that of a pair is 2 kappa.
    rate : float [1/s]
        S, of either sign: growth of the flow to the left of its direction.
    direction_deg : float [degree]
        Of the flow (x), counterclockwise from east.

    Raises
    ------
    DataError
        If the diffusivity is not positive, or a number is not finite.

    Notes
    -----
    For the separation (X, Y) of two particles, exactly:

    .. math::

        \langle Y^2 \rangle &= Y_0^2 + 4 \kappa t \\
        \langle X^2 \rangle &= (X_0 + S Y_0 t)^2 + 4 \kappa t + \tfrac{4}{3} \kappa S^2 t^3 \\
        \langle X Y \rangle &= (X_0 + S Y_0 t) Y_0 + 2 \kappa S t^2

    The cubic term overtakes the linear one at t = sqrt(3) / S.

    References
    ----------
    Okubo (1966), J. Oceanogr. Soc. Japan 22; Young, Rhines & Garrett (1982), J. Phys. Oceanogr. 12, 515: all from
    memory.
    """

    diffusivity: float
    rate: float
    direction_deg: float = 0.0

    def __post_init__(self) -> None:
        if not (self.diffusivity > 0 and np.all(np.isfinite([self.diffusivity, self.rate, self.direction_deg]))):
            raise DataError(
                f"shear diffusion: got diffusivity {self.diffusivity:g} m2/s, rate {self.rate:g} 1/s, direction "
                f"{self.direction_deg:g} degrees; diffusivity must be > 0 and all finite; correct the numbers"
            )


def shear_diffusion_tracks(
    flow: ShearDiffusion, size: tuple[int, int], start_separation: float, step: float, n_step: int, seed: int
) -> tuple[Tracks, Pairs]:
    r"""Releases in a sheared flow of constant diffusivity, exact at any step.

    Over a step h the displacements are jointly Gaussian: across the flow dy of variance 2 kappa h, along it a part
    of its own of the same variance, and the shear's :math:`S y h + S \int (y - y(0))\, dt`, an integral with mean
    h dy / 2 given dy and variance kappa h^3 / 6 left over (that of a Brownian bridge).

    Parameters
    ----------
    flow : ShearDiffusion
    size : (int, int)
        Number of releases and of particles in each.
    start_separation : float [m]
        Side of the regular polygon, turned at random, on which the particles start.
    step : float [s]
        Interval between samples.
    n_step : int
        Samples of each track, the start included.
    seed : int
        Same seed, same bytes.

    Returns
    -------
    tracks : Tracks
        On a plane about the start of the centroid; the flow is at rest there. Members follow one another.
    pairs : Pairs
        All pairs within each release, one cluster per release.

    Raises
    ------
    DataError
        If a number is out of range.
    """
    check_sizes(size[0], start_separation, step, n_step)
    if size[1] < 2:
        raise DataError(
            f"shear diffusion: got {size[1]} particles in a release; must be 2 or more; make larger releases"
        )
    rng = np.random.default_rng(seed)
    angle = 2.0 * np.pi * rng.random(size[0])
    turn = np.stack([np.cos(angle), np.sin(angle), -np.sin(angle), np.cos(angle)], axis=1).reshape(-1, 1, 2, 2)
    along, left = axes(flow.direction_deg)
    start = (polygon(size[1], start_separation)[:, None] @ turn)[:, :, 0]
    own, dy, bridge = rng.standard_normal((3, *size, n_step - 1))
    dx, dy = (np.sqrt(2.0 * flow.diffusivity * step) * z for z in (own, dy))
    y = _from(start @ left, dy)
    area = step * (y[..., :-1] + 0.5 * dy) + np.sqrt(flow.diffusivity * step**3 / 6.0) * bridge
    x = _from(start @ along, dx + flow.rate * area)
    position = np.zeros((*size, n_step, 3))
    position[..., :2] = x[..., None] * along + y[..., None] * left
    return as_tracks_and_pairs(position, step, rng, 0.0)


def _from(start: np.ndarray, change: np.ndarray) -> np.ndarray:
    return np.concatenate([start[..., None], start[..., None] + np.cumsum(change, axis=-1)], axis=-1)
