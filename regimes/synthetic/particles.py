"""Particles whose velocity forgets exponentially: the one world where every single-particle scale is exact."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.synthetic.releases import as_tracks_and_pairs, polygon
from regimes.tracks import Tracks


@dataclass(frozen=True, slots=True)
class Motion:
    r"""Law of motion of one particle: a velocity with memory, carried by a sheared mean flow.

    .. math:: R_{uu}(t) = R_{vv}(t) = u'^2 e^{-\gamma t} \cos \omega t, \qquad
              T_L = \frac{\gamma}{\gamma^2 + \omega^2}, \qquad \dot x = u + U + G y, \quad \dot y = v + V

    Parameters
    ----------
    variance : float [m2/s2]
        u'^2, the velocity variance of one component.
    decay : float [1/s]
        gamma; 1 / gamma is the integral time where `rotation` is zero.
    rotation : float [rad/s]
        omega, at which velocities turn anticyclonically on the northern hemisphere (clockwise) if positive.
    shear : float [1/s]
        G, growth of the eastward mean flow towards north.
    mean : (float, float) [m/s]
        Eastward and northward mean flow at y = 0.
    shared : float
        Share of the velocity variance that all members of one release have in common, 0 to 1.

    Raises
    ------
    DataError
        If a variance or decay is not positive or the share lies outside 0 to 1.
    """

    variance: float
    decay: float
    rotation: float = 0.0
    shear: float = 0.0
    mean: tuple[float, float] = (0.0, 0.0)
    shared: float = 0.0

    def __post_init__(self) -> None:
        if not (self.variance > 0 and self.decay > 0 and 0.0 <= self.shared <= 1.0):
            raise DataError(
                f"motion: got variance {self.variance:g} m2/s2, decay {self.decay:g} 1/s and shared "
                f"{self.shared:g}; variance and decay must be > 0, shared from 0 to 1; correct the numbers"
            )

    @property
    def integral_time(self) -> float:
        """T_L of one component [s]."""
        return self.decay / (self.decay**2 + self.rotation**2)

    @property
    def diffusivity(self) -> float:
        """u'^2 T_L [m2/s]."""
        return self.variance * self.integral_time


def drifting_particles(
    motion: Motion,
    shape: tuple[int, int],
    step: float,
    n_step: int,
    seed: int,
    start_separation: float = 1000.0,
    position_error: float = 0.0,
) -> tuple[Tracks, Pairs]:
    """Releases of particles that move by `motion`; positions without shear are exact at any step.

    Parameters
    ----------
    motion : Motion
    shape : (int, int)
        Number of releases and of particles in each.
    step : float [s]
        Interval between samples; with shear, a tenth of 1 / decay or less.
    n_step : int
        Samples of each track, the start included.
    seed : int
        Same seed, same bytes.
    start_separation : float [m]
        Side of the regular polygon on which the members of a release start.
    position_error : float [m]
        Standard deviation of the error added to each coordinate.

    Returns
    -------
    tracks : Tracks
        On a plane, centred on the origin at the start.
    pairs : Pairs
        All pairs within a release, none where releases are single particles.

    Raises
    ------
    DataError
        If a number is out of range.
    """
    if min(shape) < 1 or n_step < 2 or not (step > 0 and start_separation > 0 and position_error >= 0):
        raise DataError(
            f"drifting particles: got shape {shape}, {n_step} steps of {step:g} s, start separation "
            f"{start_separation:g} m, position error {position_error:g} m; need at least 1 by 1 particles, 2 steps, "
            "positive step and separation, and an error >= 0; correct the numbers"
        )
    rng = np.random.default_rng(seed)
    own = remembering_walks(motion, shape, step, n_step, rng)
    common = remembering_walks(motion, (shape[0], 1), step, n_step, rng) if motion.shared > 0 else 0.0
    z = np.sqrt(motion.shared) * common + np.sqrt(1.0 - motion.shared) * own
    corners = polygon(shape[1], start_separation) if shape[1] > 1 else np.zeros((1, 2))
    z = z + (corners[:, 0] + 1j * corners[:, 1])[:, None]
    position = np.zeros((*shape, n_step, 3))
    time = step * np.arange(n_step)
    position[..., 1] = z.imag + motion.mean[1] * time
    position[..., 0] = z.real + motion.mean[0] * time + motion.shear * _running_integral(position[..., 1], step)
    return as_tracks_and_pairs(position, step, rng, position_error)


def remembering_walks(
    motion: Motion, shape: tuple[int, int], step: float, n_step: int, rng: np.random.Generator
) -> np.ndarray:
    r"""(shape, n_step) complex positions, from the exact joint law of velocity and displacement over a step.

    With w = u + i v and l = gamma + i omega, dw = -l w dt + dW: the new velocity is a w + xi, a = exp(-l h),
    and the displacement (1 - a) / l w + eta; xi and eta are integrals of dW with weights exp(-l s) and
    (1 - exp(-l s)) / l.
    """
    rate = complex(motion.decay, motion.rotation)
    forcing = 4.0 * motion.decay * motion.variance  # of |dW|^2; |w|^2 has mean 2 u'^2
    a = np.exp(-rate * step)

    def area(mu: complex) -> complex:  # integral of exp(-mu s) over a step
        return -np.expm1(-mu * step) / mu

    velocity = forcing * area(rate + rate.conjugate()).real
    both = forcing * (area(rate.conjugate()) - area(rate + rate.conjugate())) / rate
    place = forcing * (step - 2.0 * area(rate).real + area(rate + rate.conjugate()).real) / abs(rate) ** 2
    rest = np.sqrt(max(place - abs(both) ** 2 / velocity, 0.0))
    z = np.zeros((*shape, n_step), dtype=complex)
    w = np.sqrt(2.0 * motion.variance) * _unit(rng, shape)
    for t in range(1, n_step):
        xi = np.sqrt(velocity) * _unit(rng, shape)
        eta = both / velocity * xi + rest * _unit(rng, shape)
        z[..., t] = z[..., t - 1] + (1.0 - a) / rate * w + eta
        w = a * w + xi
    return z


def _unit(rng: np.random.Generator, shape: tuple[int, int]) -> np.ndarray:
    """Complex normal numbers of mean square one."""
    return (rng.standard_normal(shape) + 1j * rng.standard_normal(shape)) / np.sqrt(2.0)


def _running_integral(values: np.ndarray, step: float) -> np.ndarray:
    total = np.zeros_like(values)
    total[..., 1:] = np.cumsum(0.5 * step * (values[..., 1:] + values[..., :-1]), axis=-1)
    return total
