"""The choices of an analysis."""

import math
from dataclasses import dataclass

from regimes.errors import CaseError
from regimes.theory.regimes import REGIMES


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

    def __post_init__(self) -> None:
        wrong = [
            f"{name}: got {getattr(self, name)!r}; must {must}"
            for name, ok, must in (
                ("ratio", 1.05 < self.ratio <= 3.0, "be over 1.05 and at most 3"),
                ("limits", _rises(self.limits), "be two positive separations in metres that rise, or None"),
                ("regimes", _each_once(self.regimes), f"name some of {', '.join(REGIMES)}, each once"),
                ("most_transitions", self.most_transitions in (0, 1, 2, 3), "be 0, 1, 2 or 3"),
                ("slope_range", _rises(self.slope_range), "be two positive separations in metres that rise, or None"),
                ("seed", self.seed >= 0, "be 0 or more"),
                ("jobs", self.jobs >= 1, "be 1 or more"),
            )
            if not ok
        ]
        if wrong:
            raise CaseError("\n  ".join([f"options: {len(wrong)} to correct", *wrong]))


def _rises(limits: tuple[float, float] | None) -> bool:
    return limits is None or (len(limits) == 2 and 0 < limits[0] < limits[1] < math.inf)


def _each_once(regimes: tuple[str, ...]) -> bool:
    return 0 < len(regimes) == len(set(regimes)) and set(regimes) <= set(REGIMES)
