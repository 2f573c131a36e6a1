"""The loops over every pair sample: plain sums per row, on Cartesian coordinates, no trigonometry."""

import math

import numpy as np
from numba import njit

from regimes.curves.groups import make_groups
from regimes.geodesy import separation_components
from regimes.pairs import Pairs
from regimes.tracks import Tracks

# Smallest radius of curvature of the ellipsoid, rounded down [m]: chords over it bound all others from below.
_SMALLEST_RADIUS = 6.33e6
_GUARD = 1.0 - 1e-5
# A threshold longer than this [m] is beyond what the chord can bound safely, so every sample is measured.
_LONGEST_GUARDED = 4.0e6

# Squared chords that are computed ahead of a walk.
_CHORDS = 256

EXITED, CENSORED = 1.0, 2.0
# Columns of the table of one pair, a row per threshold interval.
STATE, STEPS, LAST, FIRST = range(4)


def spans_and_rows(tracks: Tracks, pairs: Pairs) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Where each pair's samples lie and where its sums go.

    Returns
    -------
    spans : (n_pair, 3) int64 array
        Position row of the first and of the second member at the pair's start, and the number of steps.
    rows : (n_pair, 3) int64 array
        Rows of the sums, -1 for none; see `Groups`.
    weight : (n_row,) float array
        Weight of each row.
    """
    groups = make_groups(pairs)
    ends = [tracks.offset[m] + pairs.begin - tracks.start_step[m] for m in (pairs.first, pairs.second)]
    spans = np.ascontiguousarray(np.stack([*ends, pairs.length], axis=1), dtype=np.int64)
    return spans, groups.table, groups.weight


def guarded_levels(thresholds: np.ndarray, planar: bool) -> np.ndarray:
    """Thresholds, and squared chords that no pair at or beyond a threshold can be below.

    Returns
    -------
    (2, n) float array [m and m2]
    """
    chord = thresholds
    if not planar:
        safe = np.minimum(thresholds, _LONGEST_GUARDED)
        chord = 2.0 * _SMALLEST_RADIUS * np.sin(safe / (2.0 * _SMALLEST_RADIUS))
    return np.stack([thresholds, (chord * _GUARD) ** 2])


@njit(cache=True, error_model="numpy")
def _squared_chords(flat, i, j, out):
    """Squared chords of as many samples as `out` holds, from rows i and j of the flattened positions.

    A loop of its own over flat slices, without branches, so that the compiler can take several at a time.
    """
    n = out.size
    a, b = flat[3 * i : 3 * (i + n)], flat[3 * j : 3 * (j + n)]
    for t in range(n):
        dx = b[3 * t] - a[3 * t]
        dy = b[3 * t + 1] - a[3 * t + 1]
        dz = b[3 * t + 2] - a[3 * t + 2]
        out[t] = dx * dx + dy * dy + dz * dz


@njit(cache=True, error_model="numpy")
def _components(position, i, j, planar):
    return separation_components(
        position[i, 0], position[i, 1], position[i, 2], position[j, 0], position[j, 1], position[j, 2], planar
    )


@njit(cache=True, error_model="numpy")
def _reached(thresholds, r, top):
    """Index of the highest threshold at or below r, not below `top`."""
    while top + 1 < thresholds.size and r >= thresholds[top + 1]:
        top += 1
    return top


@njit(cache=True, error_model="numpy")
def _censor(position, planar, span, passage, table):
    """Close an unfinished passage (threshold index, start, last valid sample, ln r at the start)."""
    n, start, last, log_start = passage
    r = 0.0
    t = last
    while r <= 0.0:  # two fixes may coincide after rounding; the start lies at or beyond a threshold
        r = _components(position, span[0] + t, span[1] + t, planar)[0]
        t -= 1
    table[n, STATE] = CENSORED
    table[n, STEPS] = last - start
    table[n, LAST] = math.log(r)
    table[n, FIRST] = log_start


@njit(cache=True, error_model="numpy")
def _walk(position, planar, span, levels, work):
    """First passages of one pair through the thresholds, into a table cleared beforehand."""
    table, chords = work
    flat, thresholds = position.reshape(-1), levels[0]
    highest = thresholds.size - 1
    top, start, last, log_start = -1, -1, -1, 0.0  # start < 0: no passage in progress
    blind = True  # the next valid sample opens the record, or follows a gap
    for t in range(span[2]):
        k = t % _CHORDS
        if k == 0:
            ahead = min(_CHORDS, span[2] - t)
            _squared_chords(flat, span[0] + t, span[1] + t, chords[:ahead])
        if not blind and chords[k] < levels[1, top + 1]:
            last = t
            continue
        if chords[k] != chords[k]:
            if start >= 0:
                _censor(position, planar, span, (top, start, last, log_start), table)
                start = -1
            blind = True
            continue
        r = _components(position, span[0] + t, span[1] + t, planar)[0]
        reached = _reached(thresholds, r, top)
        if blind:
            # Thresholds passed out of sight are lost; a record may start exactly on one.
            if last < 0 and 0 <= reached < highest and r == thresholds[reached]:
                start, log_start = t, math.log(r)
        elif reached > top:
            if start >= 0:
                table[top, STATE], table[top, STEPS] = EXITED, t - start
                table[top, FIRST], table[top, LAST] = log_start, math.log(r)
            for n in range(top + 1, reached):
                table[n, STATE] = EXITED
            start, log_start = t, math.log(r)
        top, last, blind = reached, t, False
        if top == highest:
            return
    if start >= 0:
        _censor(position, planar, span, (top, start, last, log_start), table)


@njit(cache=True, error_model="numpy")
def exit_pass(position, planar, spans, rows, levels, sums, notes):
    """Add the passages of every pair; returns the number of unfinished ones that it noted.

    `sums` (8, n_row, n): exits, steps at risk, steps of finished passages, zero-length exits, and for the others
    u and u^2 of their start and of their exit, u being ln of the separation over the threshold just passed.
    `notes` is a pair of arrays: (3, n) passages, zero-length exits and censored passages, and (n_pair n, 3)
    pair, interval and ln r at the end of unfinished ones.
    """
    totals, loose = notes
    n_interval = levels.shape[1] - 1
    table, chords, logs = np.empty((n_interval, 4)), np.empty(_CHORDS), np.log(levels[0])
    n_loose = 0
    for p in range(spans.shape[0]):
        table[:] = 0.0
        _walk(position, planar, spans[p], levels, (table, chords))
        for n in range(n_interval):
            if table[n, STATE] == 0.0:
                continue
            exited = table[n, STATE] == EXITED
            at_once = exited and table[n, STEPS] == 0.0
            totals[0, n] += 1
            totals[1, n] += at_once
            totals[2, n] += not exited
            if not exited:
                loose[n_loose, 0], loose[n_loose, 1] = p, n
                loose[n_loose, 2] = table[n, LAST]
                n_loose += 1
            for k in range(3):
                row = rows[p, k]
                if row >= 0:
                    sums[0, row, n] += exited
                    sums[1, row, n] += table[n, STEPS]
                    sums[2, row, n] += table[n, STEPS] if exited else 0.0
                    sums[3, row, n] += at_once
                    if not at_once:
                        over = table[n, FIRST] - logs[n]
                        sums[4, row, n] += over
                        sums[5, row, n] += over * over
                        if exited:
                            over = table[n, LAST] - logs[n + 1]
                            sums[6, row, n] += over
                            sums[7, row, n] += over * over
    return n_loose


@njit(cache=True, error_model="numpy")
def dispersion_pass(position, planar, spans, rows, lags, sums):
    """Add moments of the separation at each lag.

    `sums` (n_row, n_lag, 8): count, r2, east2, north2, east north, r4, ln r, count of r > 0.
    """
    for p in range(spans.shape[0]):
        for k in range(lags.size):
            if lags[k] >= spans[p, 2]:
                continue
            r, east, north = _components(position, spans[p, 0] + lags[k], spans[p, 1] + lags[k], planar)
            if r != r:
                continue
            log_r = math.log(r) if r > 0.0 else 0.0
            for m in range(3):
                if rows[p, m] >= 0:
                    cell = sums[rows[p, m], k]
                    cell[0] += 1.0
                    cell[1] += r * r
                    cell[2] += east * east
                    cell[3] += north * north
                    cell[4] += east * north
                    cell[5] += r * r * r * r
                    cell[6] += log_r
                    cell[7] += r > 0.0


@njit(cache=True, error_model="numpy")
def separation_pass(position, planar, spans, lags, out):
    """Separations of a block of pairs at each lag into `out` (n_pair, n_lag), NaN where there is none."""
    for p in range(spans.shape[0]):
        for k in range(lags.size):
            out[p, k] = np.nan
            if lags[k] < spans[p, 2]:
                out[p, k] = _components(position, spans[p, 0] + lags[k], spans[p, 1] + lags[k], planar)[0]
