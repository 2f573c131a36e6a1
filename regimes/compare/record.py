"""Everything that a comparison says."""

from dataclasses import dataclass

from regimes.compare.fitted import Fitted
from regimes.compare.ranks import Ranks


@dataclass(frozen=True, slots=True)
class Input:
    """One of the two cases.

    Parameters
    ----------
    case : str
    source : str
        File of the fixes, or "memory".
    sha256 : str
        Of its bytes; empty where there is no file.
    n_particles, n_pairs, n_groups : int
        Tracks, pairs launched together, groups that start together.
    """

    case: str
    source: str
    sha256: str
    n_particles: int
    n_pairs: int
    n_groups: int


@dataclass(frozen=True, slots=True)
class Design:
    """How the larger case was sampled.

    Parameters
    ----------
    larger : str
        "model" or "observed".
    groups_small, groups_large : int
    groups_effective : float
        Groups of the larger case that were drawn from, by how often each was.
    deployments : int
    step : float [s]
    horizon : float [s]
        After which records of both were cut.
    position_error : float [m]
        Of both.
    """

    larger: str
    groups_small: int
    groups_large: int
    groups_effective: float
    deployments: int
    step: float
    horizon: float
    position_error: float


@dataclass(frozen=True, slots=True)
class Comparison:
    """Two cases held against one another.

    Parameters
    ----------
    observed, model : Input
    design : Design
    ranks : Ranks
        Curves of the smaller case among virtual deployments of the larger one.
    fitted : Fitted
    unmatched_p : float
        p-value without sampling them alike, see `unmatched_p`.
    same_flow : str
        "consistent", "different" or "undecided".
    sentence : str
    cautions : tuple of str
    seed : int
    versions : dict of str to str
    """

    observed: Input
    model: Input
    design: Design
    ranks: Ranks
    fitted: Fitted
    unmatched_p: float
    same_flow: str
    sentence: str
    cautions: tuple[str, ...]
    seed: int
    versions: dict[str, str]
