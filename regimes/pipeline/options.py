"""The choices of an analysis."""

from dataclasses import dataclass

from regimes.theory.regimes import REGIMES


@dataclass(frozen=True, slots=True)
class Options:
    """Choices of an analysis, as in the case file.

    Parameters
    ----------
    ratio : float
        Of successive separation thresholds.
    limits : (float, float) or None [m]
        Range of separations; None for all that is resolved.
    regimes : tuple of str
        Named regimes that compete.
    most_transitions : int
    slope_range : (float, float) or None [m]
        Range over which a slope is also quoted.
    seed : int
    jobs : int
        Threads.
    """

    ratio: float = 2.0**0.5
    limits: tuple[float, float] | None = None
    regimes: tuple[str, ...] = tuple(REGIMES)
    most_transitions: int = 2
    slope_range: tuple[float, float] | None = None
    seed: int = 1
    jobs: int = 1
