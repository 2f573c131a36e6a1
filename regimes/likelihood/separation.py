"""How probable the separations themselves are under a kernel, as a distribution in time."""

from dataclasses import dataclass, replace

import numpy as np
from numba import njit

from regimes.curves import SeparationCounts
from regimes.errors import DataError
from regimes.likelihood.sandwich import magnitude
from regimes.theory.fokker_planck import kernel_at, separation_masses

CELL = 0.25  # width of a grid cell in ln r; with STEPS it moves alpha by 0.01 from the converged value (measured)
STEPS = 2  # time steps between output times
_INSIDE, _BEYOND = 3.6, 1.6  # how far, in ln r, the grid reaches below the clock's start and above the data


def grid_edges(lowest: float, highest: float) -> np.ndarray:
    """Edges [m] of the cells of width `CELL` in ln r that hold the separations from `lowest` to `highest`.

    Parameters
    ----------
    lowest : float [m]
        Separation at which the clock starts; the reflecting inner end lies a factor exp(3.6) below.
    highest : float [m]
        Largest separation seen; the reflecting outer end lies a factor exp(1.6) above.

    Returns
    -------
    (n_cell + 1,) float array [m]
    """
    first = np.log(lowest) - _INSIDE
    cells = int(np.ceil((np.log(highest) + _BEYOND - first) / CELL))
    return np.exp(first + CELL * np.arange(cells + 1))


@njit(cache=True)
def log_probability(grid, exponents, breaks, reference, log_rate):
    """ln probability of each cell, (n_time, n_cell, n_start), under one kernel; `grid` as in `composite_batch`."""
    log_edges, starts, times = grid
    kernel_log = kernel_at(log_edges, exponents, breaks, reference, np.exp(log_rate))
    return np.log(separation_masses(log_edges, kernel_log, starts, times, STEPS))


@njit(cache=True, nogil=True)
def composite_batch(grid, counts, exponents, breaks, reference, log_rate):
    """Composite log-likelihood of many kernels.

    `grid` holds the cell edges in ln r, the ln of the starts and the times; `counts` is (n_time, n_cell, n_start).
    """
    log_edges, starts, times = grid
    out = np.empty(log_rate.size)
    for i in range(log_rate.size):
        kernel_log = kernel_at(log_edges, exponents[i], breaks[i], reference, np.exp(log_rate[i]))
        mass = separation_masses(log_edges, kernel_log, starts, times, STEPS)
        total = 0.0
        for t in range(times.size):
            for c in range(log_edges.size - 1):
                for s in range(starts.size):
                    if counts[t, c, s] > 0.0:
                        if mass[t, c, s] > 0.0:
                            total += counts[t, c, s] * np.log(mass[t, c, s])
                        else:
                            total = -np.inf
        out[i] = total
    return out


@dataclass(frozen=True, slots=True)
class SeparationLikelihood:
    r"""Composite likelihood of separations, tempered for the dependence of times and of pairs in clusters.

    .. math:: \log L = \kappa \sum_{t} \sum_{pairs} \ln p(r_t \mid t, r_0; K)

    Parameters
    ----------
    counts : SeparationCounts
        Separation bins are the cells of `grid_edges`, the two end cells open; starts are first passages of the
        lowest separation.
    tempering : float
        kappa, magnitude adjustment from the cluster sandwich; one value for all kernels.

    References
    ----------
    Varin, Reid & Firth (2011) Statistica Sinica 21, 5; Ribatet, Cooley & Davison (2012) Statistica
    Sinica 22, 813, magnitude adjustment: kappa = p / tr(H^-1 J).
    """

    counts: SeparationCounts
    tempering: float = 1.0

    def _arguments(self):
        used = np.flatnonzero(self.counts.start_count > 0)
        total = np.ascontiguousarray(np.moveaxis(self.counts.total()[:, used, :], 1, 2))
        starts = np.array(self.counts.start_log_mean[used])
        inner = np.log(self.counts.separation_edges[1:-1])
        log_edges = np.concatenate(([inner[0] - CELL], inner, [inner[-1] + CELL]))
        return (log_edges, starts, np.array(self.counts.times)), total

    def evaluator(self, model, space):
        """Function from parameters (m, size) to tempered log L (m,), prior not included."""
        grid, total = self._arguments()

        def evaluate(theta):
            theta = np.atleast_2d(np.asarray(theta, float))
            return self.tempering * composite_batch(
                grid,
                total,
                np.ascontiguousarray(model.exponents(theta)),
                np.ascontiguousarray(model.breaks(theta)),
                space.reference,
                np.ascontiguousarray(theta[:, 0]),
            )

        return evaluate

    def row_values(self, model, theta, space) -> np.ndarray:
        """(n_row,) untempered composite log-likelihood of each row (cluster, or couple of clusters)."""
        grid, _ = self._arguments()
        log_p = log_probability(
            grid,
            np.ascontiguousarray(model.exponents(theta)),
            np.ascontiguousarray(model.breaks(theta)),
            space.reference,
            float(theta[0]),
        )
        used = np.cumsum(self.counts.start_count > 0) - 1
        c = self.counts
        return np.bincount(c.row, c.count * log_p[c.time, c.separation, used[c.start]], minlength=c.weight.size)

    def tempered(self, model, theta, space) -> "SeparationLikelihood":
        """The likelihood with kappa measured at one model's best parameters.

        Raises
        ------
        FitError
            If no parameter is identified there.
        """
        label = f"separation likelihood: {model.label}"
        kappa = magnitude(lambda t: self.row_values(model, t, space), self.counts.weight, theta, label)
        return replace(self, tempering=min(kappa, 1.0))


def output_times(begin: float, end: float, step: float, number: int = 10) -> np.ndarray:
    """Log-spaced times [s] in whole steps at which separations enter the likelihood.

    Raises
    ------
    DataError
        If fewer than four different steps lie between the ends.
    """
    steps = np.unique(np.rint(np.geomspace(max(begin / step, 1.0), max(end / step, 1.0), number)))
    if steps.size < 4:
        raise DataError(
            f"separation distribution: records last {end:g} s after the first passage at intervals of {step:g} s; "
            "need four different times; use longer records or a shorter interval"
        )
    return steps * step
