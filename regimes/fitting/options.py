"""The choices of an analysis."""

import math
from dataclasses import dataclass, field

from regimes.errors import CaseError
from regimes.particles import MeanFlow
from regimes.particles.velocities import MEANS
from regimes.theory.regimes import REGIMES

_RISING = "be two positive separations in metres that rise"


@dataclass(frozen=True, slots=True)
class SingleOptions:
    """Choices for particles taken one by one.

    Parameters
    ----------
    mean : str
        What is removed from the velocities: record, none, lowpass or grid, see `eddy_velocities`.
    period : float or None [s]
        Cut-off of the slow part, for lowpass only.
    flow : MeanFlow, str or None
        For grid only: the mean flow, or the path of its NetCDF file.
    deformation_radius : float or None [m]
        Length to hold the Lagrangian length and the transitions against.

    Raises
    ------
    CaseError
        If any is out of range; all problems at once.
    """

    mean: str = "record"
    period: float | None = None
    flow: MeanFlow | str | None = None
    deformation_radius: float | None = None

    def __post_init__(self) -> None:
        filtered, gridded = self.mean == "lowpass", self.mean == "grid"
        _refuse(
            "options for single particles",
            (
                ("mean", self.mean, self.mean in MEANS, f"be one of {', '.join(MEANS)}"),
                ("period", self.period, _positive(self.period) and filtered == (self.period is not None),
                 "be a number of seconds > 0 with lowpass, None with any other mean"),
                ("flow", self.flow, gridded == (self.flow is not None),
                 "be a mean flow or the path of one with grid, None with any other mean"),
                ("deformation_radius", self.deformation_radius, _positive(self.deformation_radius),
                 "be a length in metres > 0, or None"),
            ),
        )  # fmt: skip


@dataclass(frozen=True, slots=True)
class Options:
    """Choices of an analysis, as in the case file.

    Parameters
    ----------
    ratio : float
        Of successive separation thresholds, over 1.05 up to 3.
    limits : (float, float) or None [m]
        Range of separations; None for all that is resolved.
    regimes : tuple of str
        Named regimes that compete, each once.
    most_transitions : int
        0 to 3.
    slope_range : (float, float) or None [m]
        Range over which a slope is also quoted.
    seed : int
        0 or more.
    jobs : int
        Threads, 1 or more.
    single : SingleOptions
        For particles taken one by one.
    repetitions : int
        Simulated repetitions behind each predictive check, 199 or more.
    triplets : bool
        Whether triangles of particles released together are followed, where there are any.

    Raises
    ------
    CaseError
        If any is out of range; all problems at once.
    """

    ratio: float = 2.0**0.5
    limits: tuple[float, float] | None = None
    regimes: tuple[str, ...] = tuple(REGIMES)
    most_transitions: int = 2
    slope_range: tuple[float, float] | None = None
    seed: int = 1
    jobs: int = 1
    single: SingleOptions = field(default_factory=SingleOptions)
    repetitions: int = 199
    triplets: bool = True

    def __post_init__(self) -> None:
        _refuse(
            "options",
            (
                ("ratio", self.ratio, 1.05 < self.ratio <= 3.0, "be over 1.05 and at most 3"),
                ("limits", self.limits, _rises(self.limits), f"{_RISING}, or None"),
                ("regimes", self.regimes, _each_once(self.regimes), f"name some of {', '.join(REGIMES)}, each once"),
                ("most_transitions", self.most_transitions, self.most_transitions in (0, 1, 2, 3), "be 0, 1, 2 or 3"),
                ("slope_range", self.slope_range, _rises(self.slope_range), f"{_RISING}, or None"),
                ("seed", self.seed, self.seed >= 0, "be 0 or more"),
                ("jobs", self.jobs, self.jobs >= 1, "be 1 or more"),
                ("repetitions", self.repetitions, self.repetitions >= 199, "be 199 or more"),
            ),
        )


def _refuse(what: str, checks: tuple[tuple[str, object, bool, str], ...]) -> None:
    """One error for everything that does not hold; a check is a name, what was got, whether it holds, what must be."""
    wrong = [f"{name}: got {got!r}; must {must}" for name, got, fine, must in checks if not fine]
    if wrong:
        raise CaseError("\n  ".join([f"{what}: {len(wrong)} to correct", *wrong]))


def _positive(value: float | None) -> bool:
    return value is None or 0.0 < value < math.inf


def _rises(limits: tuple[float, float] | None) -> bool:
    return limits is None or (len(limits) == 2 and 0 < limits[0] < limits[1] < math.inf)


def _each_once(regimes: tuple[str, ...]) -> bool:
    return 0 < len(regimes) == len(set(regimes)) and set(regimes) <= set(REGIMES)
