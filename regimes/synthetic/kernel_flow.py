"""Pairs and small groups that separate exactly by a given kernel: a flow that is white noise in time.

Relative velocities have the covariance of an isotropic incompressible flow without memory (Kraichnan 1968,
Phys. Fluids 11, 945): 2 K(r) dt along the separation and 2 d(rK)/dr dt across it. Pairs therefore obey the
Fokker-Planck equation of the kernel without approximation other than the substep.
"""

import math

import numpy as np
from numba import njit

from regimes.pairs import Pairs
from regimes.synthetic.releases import as_tracks_and_pairs, check_sizes
from regimes.theory.kernel import Kernel
from regimes.tracks import Tracks

# Longest substep in units of r2 / K, and the shortest that a near transition may ask for.
PAIR_SUBSTEP = 0.04
_AT_TRANSITION = 0.003
# Pairs that come very close in a kernel that is flat there would need ever shorter substeps.
_MOST_SUBSTEPS = 1000.0


def kernel_pieces(kernel: Kernel) -> np.ndarray:
    """Kernel as straight lines in logarithms.

    Returns
    -------
    (3, n_piece) float array
        ln of the upper end of each piece (infinite for the last), exponent, and ln K extrapolated to r = 1 m.
    """
    upper = np.append(np.log(kernel.breaks), np.inf)
    # K is continuous, so the upper end of a piece tells its constant; the last is asked beyond its start.
    inside = np.append(kernel.breaks, 2.0 * kernel.breaks[-1] if kernel.breaks.size else kernel.reference)
    constant = np.log(kernel(inside)) - kernel.exponents * np.log(inside)
    return np.ascontiguousarray(np.stack([upper, kernel.exponents, constant]))


@njit(cache=True, error_model="numpy")
def _piece(pieces, x):
    i = 0
    while x >= pieces[0, i]:
        i += 1
    return i


@njit(cache=True, error_model="numpy")
def _log_growth(a, rate_dt, w):
    r"""Change of ln r over a substep inside one power law, for a standard normal w.

    With q = 2 - a, X = r^q is a squared Bessel process: dX = 2 q A dt + q sqrt(2 A X) dW with A = K / r^a.
    Half the drift left over, the exact noise, and the other half make a scheme of second weak order that
    stays positive (Ninomiya & Victoir 2008; Alfonsi 2010, Math. Comput. 79, 209); exact for a = 2.
    """
    q = 2.0 - a
    if q < 1e-6:
        return 2.0 * rate_dt + math.sqrt(2.0 * rate_dt) * w
    half = 0.5 * q * (2.0 - 0.5 * q) * rate_dt
    root = math.sqrt(1.0 + half) + q * math.sqrt(0.5 * rate_dt) * w
    return math.log(root * root + half) / q


@njit(cache=True, error_model="numpy")
def _substep(pieces, i, x, longest):
    """Substep in units of r2 / K: four standard deviations of ln r reach the nearest transition at most."""
    room = pieces[0, i] - x
    if i > 0:
        room = min(room, x - pieces[0, i - 1])
    return min(longest, max(room * room / 32.0, _AT_TRANSITION))


@njit(cache=True, error_model="numpy")
def _separation_walk(pieces, start, step, substep, rng, out):
    """Separation vector of one pair at every step, into `out` (n_time, 2).

    The direction turns with variance 2 (1 + a) K / r^2 dt, the transverse part of an incompressible flow.
    """
    shortest = step / _MOST_SUBSTEPS
    x = math.log(start)
    angle = rng.random() * 2.0 * math.pi
    i = _piece(pieces, x)
    rate = math.exp(pieces[2, i] + (pieces[1, i] - 2.0) * x)
    for t in range(out.shape[0]):
        if t > 0:
            left, turn = step, 0.0
            while left > 0.0:
                dt = min(left, max(_substep(pieces, i, x, substep) / rate, shortest))
                turn += (1.0 + pieces[1, i]) * rate * dt
                x += _log_growth(pieces[1, i], rate * dt, rng.standard_normal())
                i = _piece(pieces, x)
                rate = math.exp(pieces[2, i] + (pieces[1, i] - 2.0) * x)
                turn += (1.0 + pieces[1, i]) * rate * dt
                left -= dt
            angle += math.sqrt(turn) * rng.standard_normal()
        r = math.exp(x)
        out[t, 0], out[t, 1] = r * math.cos(angle), r * math.sin(angle)


@njit(cache=True, error_model="numpy", nogil=True)
def walk_pair(pieces, start, step, rng, path):
    """Positions of the two members of a pair about their midpoint, into `path` (2, n_time, 2 or more)."""
    vector = np.empty((path.shape[1], 2))
    _separation_walk(pieces, start, step, PAIR_SUBSTEP, rng, vector)
    for t in range(path.shape[1]):
        for axis in range(2):
            path[0, t, axis] = -0.5 * vector[t, axis]
            path[1, t, axis] = 0.5 * vector[t, axis]


@njit(cache=True, error_model="numpy")
def _pairs_walk(pieces, start, step, rng, position):
    """Positions (n_pair, 2, n_time, 3) of the two members about their midpoint."""
    for p in range(position.shape[0]):
        walk_pair(pieces, start, step, rng, position[p])


def kernel_pairs(
    kernel: Kernel,
    n_pair: int,
    start_separation: float,
    step: float,
    n_step: int,
    seed: int,
    position_error: float = 0.0,
) -> tuple[Tracks, Pairs]:
    """Independent pairs that separate by a kernel, each its own cluster.

    Parameters
    ----------
    kernel : Kernel
    n_pair : int
        Number of pairs.
    start_separation : float [m]
        Separation of every pair at the start, before the position error.
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
        On a plane; tracks 2 i and 2 i + 1 are pair i.
    pairs : Pairs

    Raises
    ------
    DataError
        If a number is out of range.
    """
    check_sizes(n_pair, start_separation, step, n_step)
    rng = np.random.default_rng(seed)
    position = np.zeros((n_pair, 2, n_step, 3))
    _pairs_walk(kernel_pieces(kernel), float(start_separation), float(step), rng, position)
    return as_tracks_and_pairs(position, step, rng, position_error)
