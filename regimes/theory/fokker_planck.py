"""Separation distribution of any kernel in time: the Fokker-Planck equation on a geometric grid."""

import numpy as np
from numba import njit


def log_grid(smallest, largest, cells):
    """Edges (cells + 1,) of an even grid in ln r, with ``cells`` cells between two separations [m]."""
    return np.linspace(np.log(smallest), np.log(largest), int(cells) + 1)


@njit(cache=True)
def kernel_at(log_r, exponents, breaks, reference, rate):
    """ln K [ln m2/s] of a piecewise power law at increasing ln r, any number; K(reference) = rate reference^2."""
    n_piece = exponents.size
    const = np.zeros(n_piece)
    home = 0
    for i in range(n_piece - 1):
        const[i + 1] = const[i] + (exponents[i] - exponents[i + 1]) * np.log(breaks[i] / reference)
        if breaks[i] <= reference:
            home = i + 1
    out = np.empty(log_r.size)
    log_ref = np.log(reference)
    base = np.log(rate) + 2.0 * log_ref - const[home]
    piece = 0
    for j in range(log_r.size):
        while piece < n_piece - 1 and log_r[j] >= np.log(breaks[piece]):
            piece += 1
        out[j] = base + const[piece] + exponents[piece] * (log_r[j] - log_ref)
    return out


@njit(cache=True)
def _solve(lower, pivot, upper, state):
    """Solve in place, for all starts at once, the tridiagonal system whose elimination is given."""
    n, m = state.shape
    for i in range(1, n):
        for s in range(m):
            state[i, s] -= lower[i] * state[i - 1, s]
    for s in range(m):
        state[n - 1, s] *= pivot[n - 1]
    for i in range(n - 2, -1, -1):
        for s in range(m):
            state[i, s] = (state[i, s] - upper[i] * state[i + 1, s]) * pivot[i]


@njit(cache=True)
def _advance(state, down, up, dt, steps):
    """Advance the masses by `steps` SDIRK steps of length dt."""
    n = state.shape[0]
    gamma = 1.0 - 1.0 / np.sqrt(2.0)
    g = gamma * dt
    lower, pivot, upper = np.zeros(n), np.zeros(n), np.zeros(n)
    for i in range(n):  # matrix I - g L; L moves mass up at rate up[i] and down at rate down[i]
        diagonal = 1.0 + g * (up[i] + down[i])
        if i > 0:
            lower[i] = -g * up[i - 1] * pivot[i - 1]
            diagonal -= lower[i] * upper[i - 1]
        pivot[i] = 1.0 / diagonal
        if i < n - 1:
            upper[i] = -g * down[i + 1]
    weight = (1.0 - gamma) / gamma
    for _ in range(steps):
        stage = state.copy()
        _solve(lower, pivot, upper, stage)
        for i in range(n):
            for s in range(state.shape[1]):
                state[i, s] += weight * (stage[i, s] - state[i, s])
        _solve(lower, pivot, upper, state)


@njit(cache=True)
def separation_masses(log_edges, kernel_log, starts, times, steps):
    r"""Probability of each grid cell at each time, for several start separations.

    .. math:: \partial_t f = \partial_r \left( r K \, \partial_r (f / r) \right)

    Parameters
    ----------
    log_edges : (n_cell + 1,) float array
        Edges of the cells in ln r, evenly spaced; both ends reflect.
    kernel_log : (n_cell + 1,) float array
        ln K at the edges [m2/s], from `kernel_at`.
    starts : (n_start,) float array
        ln of the start separations, inside the grid.
    times : (n_time,) float array [s]
        Increasing output times, > 0.
    steps : int
        Time steps between outputs; those to the first one grow from a start that the grid hardly resolves, twelve
        or `steps` of them, whichever is more.

    Returns
    -------
    (n_time, n_cell, n_start) float array
        Masses; each start sums to one.

    Notes
    -----
    f is the density of separation in two dimensions. Finite volumes conserve the total exactly and
    keep the equilibrium (uniform per area). A start is shared between two cells so that its mean ln r is right.
    """
    n = log_edges.size - 1
    h = log_edges[1] - log_edges[0]
    area = np.empty(n)
    for i in range(n):
        area[i] = 0.5 * (np.exp(2.0 * log_edges[i + 1]) - np.exp(2.0 * log_edges[i]))
    up, down = np.zeros(n), np.zeros(n)
    for i in range(n - 1):
        flux = np.exp(kernel_log[i + 1]) / h
        up[i] = flux / area[i]
        down[i + 1] = flux / area[i + 1]
    state = np.zeros((n, starts.size))
    for s in range(starts.size):
        place = (starts[s] - log_edges[0]) / h - 0.5
        i = min(max(int(np.floor(place)), 0), n - 2)
        share = min(max(place - i, 0.0), 1.0)
        state[i, s] = 1.0 - share
        state[i + 1, s] = share
    out = np.empty((times.size, n, starts.size))
    per_stage = max(2, -(-steps // 6))  # six stages, each as long as all before it together
    dt = times[0] / (32.0 * per_stage)
    _advance(state, down, up, dt, per_stage)
    for k in range(5):
        _advance(state, down, up, dt * 2.0**k, per_stage)
    out[0] = state
    for j in range(1, times.size):
        _advance(state, down, up, (times[j] - times[j - 1]) / steps, steps)
        out[j] = state
    return out


def moments(log_edges, masses):
    """Moments of ln r and r from grid masses.

    Parameters
    ----------
    log_edges : (n_cell + 1,) float array
    masses : (n_time, n_cell, n_start) float array

    Returns
    -------
    mean_log, second, fourth : (n_time, n_start) float arrays [ln m], [m2], [m4]
        Uniform density per area inside a cell for the moments of r, its middle for ln r.
    """
    low, high = np.exp(log_edges[:-1]), np.exp(log_edges[1:])
    second = (high**2 + low**2) / 2.0
    fourth = (high**4 + high**2 * low**2 + low**4) / 3.0
    middle = 0.5 * (log_edges[1:] + log_edges[:-1])
    take = "tcs,c->ts"
    return (
        np.einsum(take, masses, middle),
        np.einsum(take, masses, second),
        np.einsum(take, masses, fourth),
    )
