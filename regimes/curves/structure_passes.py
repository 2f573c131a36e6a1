"""The loop over every pair sample that measures relative velocities; plain sums per row."""

import math

import numpy as np
from numba import njit

from regimes.geodesy import separation_components

# Columns of the sums of a bin.
COUNT, LOG, LEAN, L_SHORT, L_LONG, T_SHORT, T_LONG, CHANGE, SUMS = range(9)


@njit(cache=True, error_model="numpy")
def _components(position, i, j, planar):
    return separation_components(
        position[i, 0], position[i, 1], position[i, 2], position[j, 0], position[j, 1], position[j, 2], planar
    )


@njit(cache=True, error_model="numpy")
def _frame(position, i, j, planar, out):
    """Distance of rows i and j, its ratio to the chord, and the horizontal unit vector from i to j and up."""
    r = _components(position, i, j, planar)[0]
    up = out[1]
    if planar:
        up[0], up[1], up[2] = 0.0, 0.0, 1.0
    else:
        for c in range(3):
            up[c] = position[i, c] + position[j, c]
        size = math.sqrt(up[0] * up[0] + up[1] * up[1] + up[2] * up[2])
        for c in range(3):
            up[c] /= size
    lift, chord = 0.0, 0.0
    for c in range(3):
        out[0, c] = position[j, c] - position[i, c]
        lift += out[0, c] * up[c]
        chord += out[0, c] * out[0, c]
    level = 0.0
    for c in range(3):
        out[0, c] -= lift * up[c]
        level += out[0, c] * out[0, c]
    level = math.sqrt(level)
    if level > 0.0:
        for c in range(3):
            out[0, c] /= level
    chord = math.sqrt(chord)
    return r, (r / chord if chord > 0.0 else 1.0)


@njit(cache=True, error_model="numpy")
def relative_velocity(position, planar, at, step, frame, out):
    """Separation, and components along and across it of the relative velocity before and after a sample.

    `at` holds the two rows of the sample; the rows before and after must exist. `out` becomes (along before,
    along after, across before, across after) [m/s]; returns r [m], NaN if any of the six positions is missing.
    """
    i, j = at
    r, scale = _frame(position, i, j, planar, frame)
    side, up = frame[0], frame[1]
    ax = up[1] * side[2] - up[2] * side[1]
    ay = up[2] * side[0] - up[0] * side[2]
    az = up[0] * side[1] - up[1] * side[0]
    for k in range(2):
        s = 1 if k == 1 else -1
        dx = position[j + s, 0] - position[i + s, 0] - position[j, 0] + position[i, 0]
        dy = position[j + s, 1] - position[i + s, 1] - position[j, 1] + position[i, 1]
        dz = position[j + s, 2] - position[i + s, 2] - position[j, 2] + position[i, 2]
        factor = s * scale / step
        out[k] = (dx * side[0] + dy * side[1] + dz * side[2]) * factor
        out[2 + k] = (dx * ax + dy * ay + dz * az) * factor
    if not (out[0] == out[0] and out[1] == out[1]):
        return np.nan
    return r


@njit(cache=True, error_model="numpy")
def structure_pass(position, planar, spans, rows, edges, step, sums):
    """Add the relative velocities of every pair and sample to the bins of separation.

    `edges` (n_bin + 1,) ln r, evenly spaced. `sums` (n_row, n_bin, SUMS): count; ln r; along-separation velocity;
    its square with differences over one step (mean of before and after) and over two steps; the same two of the
    across component; squared change of both components between before and after.
    """
    frame, v = np.empty((2, 3)), np.empty(4)
    n_bin = edges.size - 1
    width = (edges[n_bin] - edges[0]) / n_bin
    for p in range(spans.shape[0]):
        for t in range(1, spans[p, 2] - 1):
            r = relative_velocity(position, planar, (spans[p, 0] + t, spans[p, 1] + t), step, frame, v)
            if not r > 0.0:
                continue
            log_r = math.log(r)
            b = math.floor((log_r - edges[0]) / width)
            if b < 0 or b >= n_bin:
                continue
            lean, cross = 0.5 * (v[0] + v[1]), 0.5 * (v[2] + v[3])
            for k in range(3):
                if rows[p, k] >= 0:
                    cell = sums[rows[p, k], b]
                    cell[COUNT] += 1.0
                    cell[LOG] += log_r
                    cell[LEAN] += lean
                    cell[L_SHORT] += 0.5 * (v[0] * v[0] + v[1] * v[1])
                    cell[L_LONG] += lean * lean
                    cell[T_SHORT] += 0.5 * (v[2] * v[2] + v[3] * v[3])
                    cell[T_LONG] += cross * cross
                    cell[CHANGE] += (v[1] - v[0]) ** 2 + (v[3] - v[2]) ** 2


@njit(cache=True, error_model="numpy")
def diffusivity_pass(position, planar, spans, rows, lags, step, sums):
    """Add at each lag count, r^2 and r times the along-separation velocity; and the growth of r^2 between lags.

    `sums` (n_row, n_lag, 5): count, r^2, r u_L; count and change of r^2 of pairs seen at this lag and the next.
    """
    frame, v = np.empty((2, 3)), np.empty(4)
    for p in range(spans.shape[0]):
        before = np.nan
        for k in range(lags.size):
            square = np.nan
            if lags[k] < spans[p, 2]:
                i, j = spans[p, 0] + lags[k], spans[p, 1] + lags[k]
                r = _components(position, i, j, planar)[0]
                square = r * r
                if 0 < lags[k] < spans[p, 2] - 1:
                    r = relative_velocity(position, planar, (i, j), step, frame, v)
                    if r == r:
                        for m in range(3):
                            if rows[p, m] >= 0:
                                cell = sums[rows[p, m], k]
                                cell[0] += 1.0
                                cell[1] += r * r
                                cell[2] += 0.5 * r * (v[0] + v[1])
            if k > 0 and square == square and before == before:
                for m in range(3):
                    if rows[p, m] >= 0:
                        sums[rows[p, m], k - 1, 3] += 1.0
                        sums[rows[p, m], k - 1, 4] += square - before
            before = square
