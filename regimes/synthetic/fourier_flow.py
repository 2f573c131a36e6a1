"""Random-Fourier flow of a given spectrum, carried along by each release.

A sum of random modes, each with the frequency of its eddy turnover (Kraichnan 1970, Phys. Fluids 13, 22; Fung
et al. 1992, J. Fluid Mech. 236, 281). Evaluated in a fixed frame its large eddies would not carry the small
ones along and separation would be wrong (Thomson & Devenish 2005, J. Fluid Mech. 526, 277); so every release
has a flow of its own, at rest relative to the release's centroid.
"""

import math

import numpy as np
from numba import njit

from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.synthetic.releases import as_tracks_and_pairs, check_sizes, polygon
from regimes.synthetic.spectrum import AX, AY, BX, BY, FREQUENCY, KX, KY, Spectrum, fourier_modes
from regimes.tracks import Tracks

# Longest substep in units of the fastest eddy turnover.
SUBSTEP = 0.3


@njit(cache=True, error_model="numpy")
def _velocity(modes, x, y, t):
    u, v = 0.0, 0.0
    for m in range(modes.shape[0]):
        phase = modes[m, KX] * x + modes[m, KY] * y + modes[m, FREQUENCY] * t
        c, s = math.cos(phase), math.sin(phase)
        u += modes[m, AX] * c + modes[m, BX] * s
        v += modes[m, AY] * c + modes[m, BY] * s
    return u, v


@njit(cache=True, error_model="numpy")
def _rates(modes, points, t, out):
    """Velocities of the points in the flow at rest relative to their centroid."""
    n = points.shape[0]
    cx, cy = 0.0, 0.0
    for i in range(n):
        cx += points[i, 0] / n
        cy += points[i, 1] / n
    for i in range(n):
        out[i, 0], out[i, 1] = _velocity(modes, points[i, 0] - cx, points[i, 1] - cy, t)


@njit(cache=True, error_model="numpy")
def _advect(modes, points, times, longest, position):
    """Fourth-order Runge-Kutta advection of `points` (n, 2) into `position` (n, n_time, 2)."""
    n = points.shape[0]
    rate, probe = np.empty((4, n, 2)), np.empty((n, 2))
    for t in range(times.size):
        if t > 0:
            count = math.ceil((times[t] - times[t - 1]) / longest)
            dt = (times[t] - times[t - 1]) / count
            for step in range(count):
                now = times[t - 1] + step * dt
                _rates(modes, points, now, rate[0])
                for stage in range(1, 4):
                    part = dt if stage == 3 else 0.5 * dt
                    for i in range(n):
                        probe[i, 0] = points[i, 0] + part * rate[stage - 1, i, 0]
                        probe[i, 1] = points[i, 1] + part * rate[stage - 1, i, 1]
                    _rates(modes, probe, now + part, rate[stage])
                for i in range(n):
                    for axis in range(2):
                        middle = rate[1, i, axis] + rate[2, i, axis]
                        points[i, axis] += dt / 6.0 * (rate[0, i, axis] + 2.0 * middle + rate[3, i, axis])
        for i in range(n):
            position[i, t, 0], position[i, t, 1] = points[i, 0], points[i, 1]


def fourier_release(
    n: int, start_separation: float, spectrum: Spectrum, times: np.ndarray, seed: int | np.random.Generator
) -> np.ndarray:
    """One release in a random-Fourier flow of its own.

    Parameters
    ----------
    n : int
        Particles, 2 or more, at the corners of a regular polygon turned at random.
    start_separation : float [m]
        Side of the polygon.
    spectrum : Spectrum
    times : (n_time,) float array [s]
        Increasing; the particles start at the first.
    seed : int or Generator
        Same seed, same bytes.

    Returns
    -------
    (n, n_time, 2) float array [m]
        Positions; the centroid starts at the origin and drifts with the mean velocity of the particles.

    Raises
    ------
    DataError
        If there are fewer than two particles, the separation is not positive or times do not increase.
    """
    times = np.ascontiguousarray(times, dtype=float)
    if n < 2 or not start_separation > 0 or times.size < 2 or not np.all(np.diff(times) > 0):
        raise DataError(
            f"Fourier flow: got {n} particles, start separation {start_separation:g} m, {times.size} times; need "
            "2 particles, a positive separation and 2 times that increase; correct the numbers"
        )
    rng = np.random.default_rng(seed)
    modes = fourier_modes(spectrum, rng)
    angle = 2.0 * np.pi * rng.random()
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    position = np.empty((n, times.size, 2))
    _advect(modes, polygon(n, start_separation) @ turn, times, substep(spectrum), position)
    return position


def substep(spectrum: Spectrum) -> float:
    """Longest step of the advection [s]: a fraction of the fastest eddy turnover."""
    return SUBSTEP / float(np.max(spectrum.turnover_rate(2.0 * np.pi / spectrum.wavelengths)))


def fourier_tracks(
    spectrum: Spectrum,
    size: tuple[int, int],
    start_separation: float,
    step: float,
    n_step: int,
    seed: int,
    position_error: float = 0.0,
) -> tuple[Tracks, Pairs]:
    """Releases in random-Fourier flows, each with a flow of its own.

    Parameters
    ----------
    spectrum : Spectrum
    size : (int, int)
        Number of releases and of particles in each.
    start_separation : float [m]
        Side of the regular polygon on which the particles start.
    step : float [s]
        Interval between samples.
    n_step : int
        Samples of each track, the start included.
    seed : int
        Same seed, same bytes.
    position_error : float [m]
        Standard deviation of the error added to each coordinate.

    Returns
    -------
    tracks : Tracks
        On a plane; members of a release follow one another.
    pairs : Pairs
        All pairs within each release, one cluster per release.

    Raises
    ------
    DataError
        If a number is out of range.
    """
    check_sizes(size[0], start_separation, step, n_step)
    rng = np.random.default_rng(seed)
    position = np.zeros((*size, n_step, 3))
    times = step * np.arange(n_step)
    for release in position:
        release[..., :2] = fourier_release(size[1], start_separation, spectrum, times, rng)
    return as_tracks_and_pairs(position, step, rng, position_error)
