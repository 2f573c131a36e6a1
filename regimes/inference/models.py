"""The models that compete: sequences of named regimes, and kernels with a free exponent."""

from dataclasses import dataclass
from itertools import pairwise, product
from math import factorial

import numpy as np

from regimes.errors import FitError
from regimes.theory.kernel import Kernel
from regimes.theory.regimes import FREE, REGIMES, kernel_exponent

SLOPE_PRIOR = (0.0, 4.0)  # alpha is uniform here; the kernel exponent saturates below 1 and above 3

CHALLENGERS = (
    ("free",),
    ("free", "diffusive"),
    ("exponential", "free"),
    ("free", "free"),
    ("free", "free", "diffusive"),
)


@dataclass(frozen=True, slots=True)
class Space:
    """The range over which models are defined, common to all that compete.

    Parameters
    ----------
    lowest, highest : float [m]
        Ends of the resolved range.
    step : float
        ln of the ratio of successive thresholds: transitions lie at least so far from each other and from the ends.
    log_rate : (2,) tuple of float
        Bounds of the uniform prior of ln(K / r^2) [1/s] at the reference separation.
    """

    lowest: float
    highest: float
    step: float
    log_rate: tuple[float, float]

    @property
    def reference(self) -> float:
        """Reference separation [m], the geometric middle of the range."""
        return float(np.sqrt(self.lowest * self.highest))

    @property
    def transition_bounds(self) -> tuple[float, float]:
        """Bounds of ln transition separation [ln m]."""
        return float(np.log(self.lowest) + self.step), float(np.log(self.highest) - self.step)


@dataclass(frozen=True, slots=True)
class Model:
    """A sequence of kernel pieces, from small to large separations.

    Parameters
    ----------
    pieces : tuple of str
        Names in the regime registry, or "free".

    Notes
    -----
    Parameters, in order: ln rate at the reference separation; the spectral slope alpha of each free
    piece; ln separation of each transition.
    """

    pieces: tuple[str, ...]

    @property
    def label(self) -> str:
        """Compact name, one letter a piece."""
        return "".join(_regime(p).letter for p in self.pieces)

    @property
    def n_free(self) -> int:
        """Number of free exponents."""
        return sum(p == "free" for p in self.pieces)

    @property
    def n_transition(self) -> int:
        """Number of transitions."""
        return len(self.pieces) - 1

    @property
    def size(self) -> int:
        """Number of parameters."""
        return 1 + self.n_free + self.n_transition

    @property
    def parameters(self) -> tuple[str, ...]:
        """Parameter names."""
        free = tuple(f"spectral_slope_{i + 1}" for i in range(self.n_free))
        moves = tuple(f"log_transition_{i + 1}" for i in range(self.n_transition))
        return ("log_rate", *free, *moves)

    def exponents(self, theta):
        """Kernel exponents of each piece, (..., n_piece), from parameters (..., size)."""
        theta = np.asarray(theta, float)
        out = np.empty((*theta.shape[:-1], len(self.pieces)))
        column = 1
        for i, piece in enumerate(self.pieces):
            if piece == "free":
                out[..., i] = kernel_exponent(theta[..., column])
                column += 1
            else:
                out[..., i] = REGIMES[piece].exponent
        return out

    def breaks(self, theta):
        """Transition separations [m], (..., n_transition)."""
        return np.exp(np.asarray(theta, float)[..., 1 + self.n_free :])

    def kernel(self, theta, space: Space) -> Kernel:
        """The kernel of one parameter vector."""
        return Kernel(self.exponents(theta), self.breaks(theta), float(np.exp(theta[0])), space.reference)

    def log_prior_volume(self, space: Space) -> float:
        """ln of the volume that the uniform prior fills; -inf where the range has no room for the transitions."""
        low, high = space.transition_bounds
        m = self.n_transition
        room = high - low - max(m - 1, 0) * space.step
        if m and room <= 0:
            return -np.inf
        moves = m * np.log(room) - np.log(factorial(m)) if m else 0.0
        slopes = self.n_free * np.log(SLOPE_PRIOR[1] - SLOPE_PRIOR[0])
        return float(np.log(space.log_rate[1] - space.log_rate[0]) + slopes + moves)

    def inside(self, theta, space: Space):
        """Whether parameters (..., size) lie where the prior is positive."""
        theta = np.asarray(theta, float)
        ok = (theta[..., 0] > space.log_rate[0]) & (theta[..., 0] < space.log_rate[1])
        slopes = theta[..., 1 : 1 + self.n_free]
        ok &= np.all((slopes > SLOPE_PRIOR[0]) & (slopes < SLOPE_PRIOR[1]), axis=-1)
        moves = theta[..., 1 + self.n_free :]
        if self.n_transition:
            low, high = space.transition_bounds
            ok &= (moves[..., 0] >= low) & (moves[..., -1] <= high)
            ok &= np.all(np.diff(moves, axis=-1) >= space.step, axis=-1)
        return ok

    def log_rate_shift(self, theta, space: Space, separation):
        """ln of K / r^2 at `separation` over that at the reference: for starting values."""
        kernel = self.kernel(np.concatenate(([0.0], np.asarray(theta, float)[1:])), space)
        return float(np.log(kernel(separation) / separation**2))


def _regime(name: str):
    return FREE if name == "free" else REGIMES[name]


def named_models(regimes, most_transitions: int) -> tuple[Model, ...]:
    """Every sequence of the named regimes, neighbours different, with up to `most_transitions` transitions.

    Raises
    ------
    FitError
        If a name is not in the registry.
    """
    unknown = [name for name in regimes if name not in REGIMES]
    if unknown:
        raise FitError(f"models: got regime {unknown[0]!r}; known: {', '.join(REGIMES)}")
    found = []
    for size in range(1, most_transitions + 2):
        for pieces in product(regimes, repeat=size):
            if all(a != b for a, b in pairwise(pieces)):
                found.append(Model(pieces))
    return tuple(found)


def free_models() -> tuple[Model, ...]:
    """The kernels with free exponents that keep the named sequences honest."""
    return tuple(Model(pieces) for pieces in CHALLENGERS)
