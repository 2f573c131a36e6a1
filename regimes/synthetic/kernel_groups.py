"""Groups of up to ten particles whose pairs all separate by one kernel, in a flow without memory."""

import math

import numpy as np
from numba import njit

from regimes.errors import DataError
from regimes.pairs import Pairs
from regimes.synthetic.kernel_flow import kernel_pairs, kernel_pieces
from regimes.synthetic.releases import as_tracks_and_pairs, check_sizes, polygon
from regimes.theory.kernel import Kernel
from regimes.tracks import Tracks

# Longest substep in units of the smallest r2 / K in the group. An Euler substep h makes the growth rate of
# mean squared separation 4 h too low in the exponential regime.
GROUP_SUBSTEP = 0.002
MOST_SUBSTEPS = 20000.0
MOST_PARTICLES = 10
# Share of the covariance that may be cut on average, see `release_tracks`.
MOST_CUT = 0.02


@njit(cache=True, error_model="numpy")
def _tensor(pieces, x, y, out):
    r"""Covariance rate of the relative displacement at (x, y), as xx, xy, yy; returns K / r^2.

    .. math:: D_{ij} = 2 K [ (1 + a) \delta_{ij} - a r_i r_j / r^2 ]
    """
    r2 = x * x + y * y
    log_r = 0.5 * math.log(r2)
    i = 0
    while log_r >= pieces[0, i]:
        i += 1
    a = pieces[1, i]
    kernel = math.exp(pieces[2, i] + a * log_r)
    out[0] = 2.0 * kernel * (1.0 + a - a * x * x / r2)
    out[1] = -2.0 * kernel * a * x * y / r2
    out[2] = 2.0 * kernel * (1.0 + a - a * y * y / r2)
    return kernel / r2


@njit(cache=True, error_model="numpy")
def _tensors(pieces, points, tensor):
    """Covariance rates of all pairs of points; returns the largest K / r^2."""
    fastest = 0.0
    for i in range(points.shape[0]):
        for j in range(i):
            x, y = points[i, 0] - points[j, 0], points[i, 1] - points[j, 1]
            fastest = max(fastest, _tensor(pieces, x, y, tensor[i, j]))
            tensor[j, i] = tensor[i, j]
    return fastest


@njit(cache=True, error_model="numpy")
def _span(points, tree, reach):
    """Shortest tree that connects the points (Prim): rows of `tree` are new member, old member."""
    n = points.shape[0]
    for i in range(n):
        reach[i, 0] = math.inf
    newest = 0
    for e in range(n - 1):
        reach[newest, 0] = -1.0
        nearest = -1
        for i in range(n):
            if reach[i, 0] < 0.0:
                continue
            x, y = points[i, 0] - points[newest, 0], points[i, 1] - points[newest, 1]
            if x * x + y * y < reach[i, 0]:
                reach[i, 0], reach[i, 1] = x * x + y * y, newest
            if nearest < 0 or reach[i, 0] < reach[nearest, 0]:
                nearest = i
        tree[e, 0], tree[e, 1] = nearest, int(reach[nearest, 1])
        newest = nearest


@njit(cache=True, error_model="numpy")
def _covariance(tensor, tree, out):
    """Covariance rates of the displacements along the edges of the tree."""
    for i in range(tree.shape[0]):
        a, b = tree[i]
        for j in range(i + 1):
            c, d = tree[j]
            for k in range(2):
                for m in range(2):
                    x = k + m
                    both = tensor[a, d, x] + tensor[b, c, x] - tensor[a, c, x] - tensor[b, d, x]
                    out[2 * i + k, 2 * j + m] = 0.5 * both


@njit(cache=True, error_model="numpy")
def _factor(matrix):
    """Lower Cholesky factor in place, with covariances cut to what the variances left over allow.

    A covariance matrix needs no cut. Where one is needed variances stay exact and only correlations change.
    Returns the sum of the cuts.
    """
    cut = 0.0
    n = matrix.shape[0]
    for j in range(n):
        pivot = matrix[j, j]
        root = math.sqrt(pivot) if pivot > 0.0 else 0.0
        matrix[j, j] = root
        for i in range(j + 1, n):
            bound = math.sqrt(matrix[i, i]) if matrix[i, i] > 0.0 else 0.0
            value = matrix[i, j] / root if root > 0.0 else 0.0
            if abs(value) > bound:
                cut += (abs(value) - bound) * root
                value = math.copysign(bound, value)
            matrix[i, j] = value
            for k in range(j + 1, i):
                matrix[i, k] -= value * matrix[k, j]
            matrix[i, i] -= value * value
    return cut


@njit(cache=True, error_model="numpy")
def move_group(pieces, points, work, rng, left, limits):
    """One Euler substep of the points; returns its length and the share of covariance cut.

    `limits` are the longest substep in units of the smallest r2 / K, and the shortest in seconds.
    """
    tensor, tree, reach, factor, noise = work
    n = noise.size
    fastest = _tensors(pieces, points, tensor)
    _span(points, tree, reach)
    _covariance(tensor, tree, factor)
    total = 0.0
    for k in range(n):
        total += factor[k, k]
    share = _factor(factor) / total
    dt = min(left, max(limits[0] / fastest, limits[1]))
    for k in range(n):
        noise[k] = math.sqrt(dt) * rng.standard_normal()
    reach[tree[0, 1]] = 0.0  # from here on: displacements, the root of the tree at rest
    for e in range(tree.shape[0]):
        for axis in range(2):
            k = 2 * e + axis
            change = 0.0
            for m in range(k + 1):
                change += factor[k, m] * noise[m]
            reach[tree[e, 0], axis] = reach[tree[e, 1], axis] + change
    for i in range(points.shape[0]):
        points[i, 0] += reach[i, 0]
        points[i, 1] += reach[i, 1]
    return dt, share


@njit(cache=True, error_model="numpy")
def workspace(n):
    """Arrays that `move_group` needs for n points."""
    edges = 2 * (n - 1)
    tree = np.empty((n - 1, 2), dtype=np.int64)
    return (np.zeros((n, n, 3)), tree, np.empty((n, 2)), np.empty((edges, edges)), np.empty(edges))


@njit(cache=True, error_model="numpy", nogil=True)
def walk_group(pieces, start, step, substep, rng, path):
    """Positions of one group about its centroid at every step, into `path` (n_member, n_time, 2 or more).

    The group starts at `start` (n_member, 2), turned at random. Returns the sum over substeps of the share of
    covariance cut, and the number of substeps.
    """
    n = start.shape[0]
    work = workspace(n)
    limits = (substep, step / MOST_SUBSTEPS)
    angle = rng.random() * 2.0 * math.pi
    cosine, sine = math.cos(angle), math.sin(angle)
    points = np.empty((n, 2))
    for i in range(n):
        points[i, 0] = cosine * start[i, 0] - sine * start[i, 1]
        points[i, 1] = sine * start[i, 0] + cosine * start[i, 1]
    shares, substeps = 0.0, 0
    for t in range(path.shape[1]):
        left = step if t > 0 else 0.0
        while left > 0.0:
            dt, share = move_group(pieces, points, work, rng, left, limits)
            shares += share
            substeps += 1
            left -= dt
        for axis in range(2):
            centre = 0.0
            for i in range(n):
                centre += points[i, axis] / n
            for i in range(n):
                path[i, t, axis] = points[i, axis] - centre
    return shares, substeps


@njit(cache=True, error_model="numpy")
def _groups_walk(pieces, corners, step, rng, position):
    """Positions (n_group, n_member, n_time, 3) about the centroid; returns the mean share of cuts."""
    shares, substeps = 0.0, 0
    for g in range(position.shape[0]):
        share, count = walk_group(pieces, corners, step, GROUP_SUBSTEP, rng, position[g])
        shares += share
        substeps += count
    return shares / substeps


def release_tracks(
    kernel: Kernel,
    size: tuple[int, int],
    start_separation: float,
    step: float,
    n_step: int,
    seed: int,
    position_error: float = 0.0,
) -> tuple[Tracks, Pairs]:
    """Releases of several particles each, all of whose pairs separate by one kernel.

    Increments of the separations within a release are correlated as in an incompressible isotropic flow.

    Parameters
    ----------
    kernel : Kernel
        Exponents should fall with separation, see Notes.
    size : (int, int)
        Number of releases and of particles in each, 2 to 10.
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
        On a plane, each release about its own centroid; members of a release follow one another.
    pairs : Pairs
        All pairs within each release, one cluster per release.

    Raises
    ------
    DataError
        If a number is out of range, or the kernel is not that of an incompressible flow.

    Notes
    -----
    Where the exponent changes at once, no incompressible flow gives every pair of a group this kernel:
    covariances of displacements along the shortest tree that connects the group are then cut to what the
    exact variances allow. Mean exit times of all pairs in groups of three and four stay within about 2 % of
    the closed form; larger groups are refused unless one exponent holds throughout or nearly so.
    """
    n_release, n_member = size
    check_sizes(n_release, start_separation, step, n_step)
    if not 2 <= n_member <= MOST_PARTICLES:
        raise DataError(
            f"kernel flow: got {n_member} particles in a release; must be 2 to {MOST_PARTICLES}; "
            "make more releases of fewer particles"
        )
    if n_member == 2:
        return kernel_pairs(kernel, n_release, start_separation, step, n_step, seed, position_error)
    rng = np.random.default_rng(seed)
    position = np.zeros((n_release, n_member, n_step, 3))
    corners = polygon(n_member, float(start_separation))
    pieces = kernel_pieces(kernel)
    cut = _groups_walk(pieces, corners, float(step), rng, position)
    if cut > MOST_CUT:
        raise DataError(
            f"kernel flow: got {100 * cut:.2g} % of the covariance that no flow with this kernel has, in "
            f"groups of {n_member}; at most {100 * MOST_CUT:g} % is allowed; use groups of four or less, "
            "exponents that fall with separation, or a single exponent"
        )
    return as_tracks_and_pairs(position, step, rng, position_error)
