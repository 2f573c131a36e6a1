"""The exit-rate posterior on a grid: exact up to the grid, fast enough to fit hundreds of replicates."""

from dataclasses import dataclass
from itertools import combinations_with_replacement

import numpy as np
from scipy.special import gammaln, logsumexp

from regimes.inference.models import SLOPE_PRIOR, Model, Space
from regimes.likelihood.exit_rate import ExitRateLikelihood, gamma_shape, grid_log_evidence

_SLOPE_CELLS = {1: 200, 2: 40}  # cells of alpha between 1 and 3, by the number of free pieces
_MOVE_CELLS = {(0, 1): 120, (0, 2): 40, (0, 3): 24, (1, 1): 60, (2, 1): 40, (2, 2): 22}


@dataclass(frozen=True, slots=True)
class Quadrature:
    """Posterior of one model on a grid.

    Parameters
    ----------
    model : Model
    log_evidence : float
        ln of the marginal likelihood.
    nodes : (m, size) float array
        Grid parameters; column 0 (ln rate) is unused.
    log_weight : (m,) float array
        ln posterior mass of each node, summing to one.
    gamma_rate : (m,) float array [s]
        Conditional posterior of the rate: Gamma(`gamma_shape`) / gamma_rate.
    gamma_shape : float
    space : Space
    """

    model: Model
    log_evidence: float
    nodes: np.ndarray
    log_weight: np.ndarray
    gamma_rate: np.ndarray
    gamma_shape: float
    space: Space

    def sample(self, size: int, rng: np.random.Generator):
        """Draws (size, model.size) from the posterior; transitions lie anywhere in the cell of their node."""
        mass = np.exp(self.log_weight - logsumexp(self.log_weight))
        chosen = rng.choice(mass.size, size=size, p=mass)
        theta = self.nodes[chosen].copy()
        theta[:, 0] = np.log(rng.gamma(self.gamma_shape, size=size) / self.gamma_rate[chosen])
        moves = theta[:, 1 + self.model.n_free :]
        if moves.size:
            low, width, _ = _move_cells(self.model, self.space)
            apart = self.space.step * np.arange(self.model.n_transition)
            cell = np.floor((moves - apart - low) / width)
            theta[:, 1 + self.model.n_free :] = low + width * np.sort(cell + rng.random(cell.shape), axis=1) + apart
        return theta


def integrate(likelihood: ExitRateLikelihood, model: Model, space: Space) -> Quadrature | None:
    """Evidence and posterior of a model by quadrature; None where the range has no room for its transitions.

    Notes
    -----
    ln rate is integrated exactly (a gamma function), alpha on midpoints between 1 and 3 with one
    atom each for the saturated ends, transitions on the centroids of the cells of their ordered simplex (cells that
    the simplex cuts included, with their share of the volume).
    """
    if not np.isfinite(model.log_prior_volume(space)):
        return None
    slopes, slope_mass = _slope_nodes(model.n_free)
    moves, move_mass = _move_nodes(model, space)
    nodes = np.empty((slopes.shape[0] * moves.shape[0], model.size))
    nodes[:, 0] = 0.0
    nodes[:, 1 : 1 + model.n_free] = np.repeat(slopes, moves.shape[0], axis=0)
    nodes[:, 1 + model.n_free :] = np.tile(moves, (slopes.shape[0], 1))
    log_prior = (slope_mass[:, None] + move_mass).ravel()
    value, scale = grid_log_evidence(
        likelihood.thresholds,
        likelihood.exits,
        likelihood.risk,
        likelihood.dispersion,
        np.ascontiguousarray(model.exponents(nodes)),
        np.ascontiguousarray(model.breaks(nodes)),
        space.reference,
    )
    shape, log_gamma = gamma_shape(likelihood)
    joint = value + log_prior
    total = float(logsumexp(joint))
    width = np.log(space.log_rate[1] - space.log_rate[0])
    return Quadrature(model, total + log_gamma - width, nodes, joint - total, scale, shape, space)


def _slope_nodes(n_free: int):
    """Nodes of alpha (m, n_free) and their ln prior mass."""
    if n_free == 0:
        return np.empty((1, 0)), np.zeros(1)
    cells = _SLOPE_CELLS[n_free]
    width = 2.0 / cells
    low, high = SLOPE_PRIOR
    axis = np.concatenate(([(low + 1.0) / 2], 1.0 + width * (np.arange(cells) + 0.5), [(high + 3.0) / 2]))
    mass = np.concatenate(([1.0 - low], np.full(cells, width), [high - 3.0])) / (high - low)
    grids = np.meshgrid(*[axis] * n_free, indexing="ij")
    masses = np.meshgrid(*[np.log(mass)] * n_free, indexing="ij")
    return np.stack([g.ravel() for g in grids], axis=1), np.sum([m.ravel() for m in masses], axis=0)


def _move_nodes(model: Model, space: Space):
    """Nodes of the ordered ln transitions (m, n_transition) and their ln prior mass."""
    count = model.n_transition
    if count == 0:
        return np.empty((1, 0)), np.zeros(1)
    low, width, cells = _move_cells(model, space)
    cell = np.array(list(combinations_with_replacement(range(cells), count)))
    same = cell[:, :, None] == cell[:, None, :]
    sharing, rank = same.sum(axis=2), np.tril(same).sum(axis=2)  # k transitions in one cell: a k-th of k! orders each
    mass = -np.sum(gammaln(sharing + 1.0) / sharing, axis=1)
    nodes = low + width * (cell + rank / (sharing + 1.0)) + space.step * np.arange(count)
    return nodes, mass - logsumexp(mass)


def _move_cells(model: Model, space: Space) -> tuple[float, float, int]:
    """Where the cells of the transitions begin, their width in ln r, and their number."""
    low, high = space.transition_bounds
    cells = _MOVE_CELLS.get((model.n_free, model.n_transition), 20)
    return low, (high - low - (model.n_transition - 1) * space.step) / cells, cells
